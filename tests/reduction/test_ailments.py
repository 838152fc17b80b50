"""What ails taps and line, from survey to texts and tables: planted errors are named with their size, sound surveys left alone.

The truth is the simulator's (tests/simulate), which shares no code with the reduction.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gradeline.quantities import Measured, rounded
from gradeline.reduction import Reduction, reduce
from gradeline.reduction.ailment_sentences import tap_advice
from gradeline.reduction.estimates import estimates_of
from gradeline.survey import Gauge, Observation, Survey
from tests.calibration.diagnosis import ailing_survey
from tests.reduction.benches import MAIN_FLOWS, TAPS, main, tube
from tests.simulate.surveys import NominalFitting, NominalReach, Truth
from tests.simulate.water import density

RUNS = np.geomspace(3e-4, 1.8e-3, 9)
SIGMA = 1e-3


def moved(survey: Survey, tap: str, by: object, rows: slice = slice(None)) -> Survey:
    """The survey with one tap's readings off, m."""
    readings = survey.readings.copy()
    readings.iloc[rows, readings.columns.get_loc(tap)] += by
    return replace(survey, readings=readings)


def look(survey: Survey, **options: object) -> Reduction:
    return reduce(survey, monte_carlo=False, **options)


def only(found: Reduction) -> pd.Series:
    assert len(found.ailments) == 1
    return found.ailments.iloc[0]


def suggestions(found: Reduction, kind: str) -> list[str]:
    return found.flags["suggestion"][found.flags["kind"] == kind].tolist()


def judged(found: Reduction) -> str:
    inputs = found.inputs
    return inputs["text"][inputs["what"] == "taps and line over all runs"].item()


def scores(found: Reduction, truth: Truth) -> np.ndarray:
    """How far the slopes lie from the truth, in their own uncertainties."""
    flowing = found.runs[found.runs["regime"] != "static"]
    slope, u = (flowing[name].to_numpy(float) for name in ("slope", "slope_u"))
    return (slope - truth.slope[truth.flow > 0, 0]) / u


# ------------------------------------------------------------------------------------------------ taps


@pytest.mark.parametrize("seed", [1, 2])
def test_an_offset_is_named_with_its_size_and_the_tap_left_out(seed: int) -> None:
    survey, truth = tube(RUNS, sigma=SIGMA, seed=seed)
    found = look(moved(survey, "T4", 0.006))
    row = only(found)
    assert (row["what"], row["name"], row["ailment"]) == ("tap", "T4", "datum offset")
    assert row["fate"] == "left out of the fits"
    assert abs(row["offset"] - 0.006) < 3 * row["offset_u"]
    # nine runs of 1 mm, and what the line through nine other taps leaves unknown
    assert SIGMA / 3 < row["offset_u"] * 1.2 < SIGMA / 2
    heads = found.heads[found.heads["tap"] == "T4"]
    assert not heads["used"].any()
    assert set(heads["flag"]) == {"excluded"}
    assert set(heads["reason"]) == {"left out: datum offset"}
    assert np.abs(scores(found, truth)).max() < 4
    diagnosis = dict(zip(found.taps["tap"], found.taps["diagnosis"], strict=True))
    assert diagnosis["T4"].startswith("datum offset: (+")
    assert [name for name, text in diagnosis.items() if text] == ["T4"]


def test_the_words_of_an_offset() -> None:
    survey, _ = tube(RUNS, sigma=SIGMA, seed=1)
    found = look(moved(survey, "T4", 0.006))
    (text,) = suggestions(found, "tap")
    assert text == (
        "datum offset: (+5.74 ± 0.33) mm in every run; left out of the fits; --correct offsets takes it off instead. "
        "Read it at rest (a static run), and look at the scale's zero"
    )
    assert f"Tap T4: {text.partition('. ')[0]}." in found.cautions


@pytest.mark.parametrize(
    ("name", "read_at_rest", "advice"),
    [
        ("datum offset", False, "read it at rest (a static run), and look at the scale's zero"),
        ("datum offset", True, ""),
        ("edge error", True, "look into the hole for a burr, and rub it flush"),
        ("chainage error", False, "measure its chainage again"),
        (
            "edge or chainage, not distinguishable",
            False,
            "look into the hole for a burr, and rub it flush; measure its chainage again",
        ),
        (
            "datum offset and edge error",
            False,
            "read it at rest (a static run), and look at the scale's zero; look into the hole for a burr, and rub it flush",
        ),
        (
            "sluggish or blocked line",
            False,
            "blow the line through (with the pressure off it), and look for kinks",
        ),
        ("air in line", False, "bleed the line"),
        (
            "unsteady: sluggish or blocked line, or air in it",
            False,
            "bleed the line; blow the line through (with the pressure off it), and look for kinks",
        ),
    ],
)
def test_what_to_do_about_a_tap(name: str, read_at_rest: bool, advice: str) -> None:
    survey, _ = tube(RUNS, sigma=SIGMA, seed=1)
    estimates = estimates_of(moved(survey, "T4", 0.006), monte_carlo=False)
    (one,) = estimates.flowing.ailments.taps
    assert tap_advice(replace(one, name=name), read_at_rest=read_at_rest) == advice


def test_a_given_k_that_is_too_small_is_told_with_the_fitting_and_k_in_all() -> None:
    """K = 0.2 is given of a fitting that loses 2.0."""
    given = NominalFitting(2.75, 2.0, Measured(0.2))
    survey, truth = tube(RUNS, sigma=SIGMA, seed=1, fittings=[given])
    name = survey.fittings[0].name
    found = look(survey)
    row = only(found)
    assert abs(row["loss_coefficient"] - 1.8) < 3 * row["loss_coefficient_u"]
    (text,) = suggestions(found, "law")
    more, u = row["loss_coefficient"], row["loss_coefficient_u"]
    assert text == (
        f"between {row['start']:.4g} m and {row['end']:.4g} m (95 %) {name!r} (K = 0.2 given) loses more than that: "
        f"K = {rounded(0.2 + more, u)} in all, {rounded(more, u)} more; look at its state and at the K given. The rest is "
        "fitted there in every run"
    )
    assert "nobody listed" not in " ".join(found.cautions)
    assert np.abs(scores(found, truth)).max() < 4


@pytest.mark.parametrize("seed", [1, 2])
def test_an_offset_is_taken_off_where_that_is_asked_for(seed: int) -> None:
    survey, truth = tube(RUNS, sigma=SIGMA, seed=seed)
    wrong = moved(survey, "T9", -0.008)
    left_out, found = look(wrong), look(wrong, correct="offsets")
    row = only(found)
    assert (row["name"], row["fate"]) == ("T9", "taken off")
    heads = found.heads[found.heads["tap"] == "T9"]
    assert heads["used"].all()
    # taken off: the mean residual of the tap is none
    assert abs(heads["residual"].mean()) < 1e-6
    assert np.abs(scores(found, truth)).max() < 4
    inputs = found.budget["input"].unique()
    assert "inferred offset" in inputs
    assert "inferred offset" not in left_out.budget["input"].unique()
    # its size comes from the same runs: the tap adds next to nothing to what the others say
    np.testing.assert_allclose(
        found.runs["slope_u"].to_numpy(float), left_out.runs["slope_u"].to_numpy(float), rtol=0.15
    )


def test_a_slip_in_the_static_run_is_named() -> None:
    survey, _ = tube((0.0, *RUNS), sigma=SIGMA, seed=1)
    right = float(survey.readings["T4"].iloc[0])
    found = look(moved(survey, "T4", 0.02, slice(0, 1)))
    row = only(found)
    # what is taken off all runs is 20 mm too much
    assert row["offset"] == pytest.approx(-0.02, abs=4 * row["offset_u"])
    (text,) = suggestions(found, "tap")
    assert f"look at the static reading, {right + 0.02:.6g} m, where " in text
    named = float(text.split("m, where ")[1].split(" m would")[0])
    assert named == pytest.approx(right, abs=4 * row["offset_u"])
    assert text.endswith("leave it out with --exclude 1:T4 if it is wrong")
    # and that mends it
    assert not len(look(moved(survey, "T4", 0.02, slice(0, 1)), exclude=["1:T4"]).ailments)


def test_two_ailments_at_once() -> None:
    survey, truth = tube(RUNS, sigma=SIGMA, seed=1)
    readings = moved(survey, "T3", 0.008).readings.copy()
    readings["T8"] = readings["T8"].iloc[0]
    found = look(replace(survey, readings=readings))
    names = dict(zip(found.ailments["name"], found.ailments["ailment"], strict=True))
    assert names == {"T3": "datum offset", "T8": "sluggish or blocked line"}
    assert np.abs(scores(found, truth)).max() < 4
    told = {row.tap: row.suggestion for row in found.flags.itertuples()}
    assert "; its reading makes 0 % of the head's change from run to run; left out" in told["T8"]


def test_a_burr_is_an_edge_error_where_the_flow_tells_it_from_a_wrong_place() -> None:
    """In smooth flow S goes as V^1.75 and the velocity head as V²: told apart over a decade of flow."""
    survey, truth = tube(
        np.geomspace(1.5e-4, 2.2e-3, 12),
        sigma=SIGMA,
        seed=3,
        reaches=[NominalReach(0.0, 5.5, 0.02664, 1e-7)],
    )
    head = (truth.flow / (np.pi * 0.02664**2 / 4)) ** 2 / (2 * 9.80665)
    row = only(look(moved(survey, "T6", 0.1 * head)))
    assert (row["name"], row["ailment"]) == ("T6", "edge error")
    assert abs(row["edge_coefficient"] - 0.1) < 3 * row["edge_coefficient_u"] + 1e-3
    assert np.isfinite(row["chainage_error"])


def test_rough_flow_leaves_edge_and_chainage_open_with_both_values() -> None:
    survey, truth, tap = ailing_survey(np.random.default_rng(1), "chainage", 2e-3)
    del truth
    found = look(survey)
    row = only(found)
    assert (row["name"], row["ailment"]) == (f"T{tap + 1}", "edge or chainage, not distinguishable")
    assert abs(abs(row["chainage_error"]) - 0.02) < 3 * row["chainage_error_u"]
    (text,) = suggestions(found, "tap")
    assert " velocity heads (edge coefficient), or a true place (" in text


def between_neighbours(survey: Survey, truth: Truth, seed: int) -> Survey:
    """The same heads read between neighbouring taps on differential transducers, 1 mm of water each."""
    weight = density(truth.temperature)[:, None] * survey.site.gravity.value
    names = [tap.name for tap in survey.taps]
    gauges = tuple(Gauge(f"D{n}", "differential transducer") for n in range(1, 10))
    columns = [gauge.name for gauge in gauges]
    scatter = SIGMA * np.random.default_rng(seed).standard_normal((len(truth.heads), 9))
    fall = weight * (truth.heads[:, :-1] - truth.heads[:, 1:] + scatter)
    return replace(
        survey,
        gauges=gauges,
        observations=tuple(
            Observation(one, up, down) for one, up, down in zip(columns, names[:-1], names[1:], strict=True)
        ),
        readings=pd.DataFrame(fall, index=survey.readings.index, columns=columns),
        taps=tuple(replace(tap, gauge=None) for tap in survey.taps),
        repeats=survey.repeats.iloc[:, :9].set_axis(columns, axis=1),
        spreads=survey.spreads.iloc[:, :9].set_axis(columns, axis=1),
    )


def test_the_zero_of_a_gauge_between_two_taps() -> None:
    survey, truth = tube(RUNS, sigma=SIGMA, seed=1)
    chained = between_neighbours(survey, truth, 1)
    assert not len(look(chained).ailments)
    found = look(moved(chained, "D4", 80.0))
    row = only(found)
    assert (row["what"], row["name"], row["ailment"]) == ("gauge", "D4", "datum offset")
    # 80 Pa are 8.16 mm of water
    assert abs(row["offset"] - 80.0 / (999.1 * 9.80665)) < 3 * row["offset_u"]
    assert any(text.startswith("Gauge D4: datum offset") for text in found.cautions)


def test_a_tap_of_a_main_of_two_bores_with_a_valve() -> None:
    survey, _ = main(np.linspace(0.02, 0.08, 8), sigma=0.02, seed=2)
    assert not len(look(survey).ailments)
    row = only(look(moved(survey, "T3", 0.15)))
    assert (row["name"], row["ailment"]) == ("T3", "datum offset")
    assert abs(row["offset"] - 0.15) < 3 * row["offset_u"]


# ------------------------------------------------------------------------------------------------ line


@pytest.mark.parametrize("case_seed", [1, 2])
def test_an_unlisted_loss_is_placed_and_sized(case_seed: int) -> None:
    survey, truth = tube(RUNS, sigma=SIGMA, seed=case_seed, fittings=[NominalFitting(2.75, 1.0, None)])
    found = look(survey)
    row = only(found)
    assert (row["what"], row["ailment"], row["fate"]) == ("line", "unlisted loss", "fitted in every run")
    assert row["start"] <= 2.75 <= row["end"]
    assert abs(row["loss_coefficient"] - 1.0) < 3 * row["loss_coefficient_u"]
    assert row["evidence"] > row["rival"] > 0
    assert np.abs(scores(found, truth)).max() < 4
    # the drawn line falls there by K velocity heads, and nowhere else
    lines = found.grade_lines[found.grade_lines["run"] == "9"]
    at, energy = lines["chainage"].to_numpy(), lines["energy_head"].to_numpy()
    (place,) = np.flatnonzero(np.diff(at) == 0)
    assert row["start"] <= at[place] <= row["end"]
    assert energy[place] - energy[place + 1] == pytest.approx(lines["velocity_head"].iloc[0], rel=0.1)


def test_an_off_take_is_read_with_its_share() -> None:
    """10 % of the flow leaves at mid-line: S falls to 0.9^n, and the step of the energy head agrees."""
    found = look(ailing_survey(np.random.default_rng(1), "off-take", 2e-3)[0])
    row = only(found)
    assert row["ailment"] == "change of slope"
    assert row["slope_change"] == pytest.approx(0.9**1.95 - 1, abs=0.01)
    assert row["start"] <= 2.75 <= row["end"]
    text = next(text for text in suggestions(found, "law") if "slope changes" in text)
    share = float(text.split("agrees with ")[1].split(" %")[0])
    assert share == pytest.approx(10.0, abs=1.0)
    assert "not with a wall with f" in text
    lines = found.grade_lines[found.grade_lines["run"] == "1"]
    x, energy = lines["chainage"].to_numpy(), lines["energy_head"].to_numpy()
    first = np.polyfit(x[x < row["start"]], energy[x < row["start"]], 1)[0]
    last = np.polyfit(x[x > row["end"]], energy[x > row["end"]], 1)[0]
    assert last / first == pytest.approx(1 + row["slope_change"], abs=0.01)


def test_a_slope_that_changes_gradually() -> None:
    """From 0.95 S to 1.05 S: the head lies lower at both ends by half of 0.05 S (x − L/2)²/(L/2)."""
    survey, truth = tube(RUNS, sigma=SIGMA, seed=1)
    bend = -0.05 * truth.slope[:, :1] * (TAPS - 2.75) ** 2 / 5.5
    found = look(replace(survey, readings=survey.readings + bend))
    row = only(found)
    assert (row["ailment"], row["start"], row["end"]) == ("gradual change of slope", 0.0, 5.5)
    assert abs(row["slope_change"] - 0.1) < 3 * row["slope_change_u"]
    assert np.abs(scores(found, truth)).max() < 4
    (text,) = suggestions(found, "law")
    assert text.startswith("from 0 m to 5.5 m the slope changes gradually, 10 % steeper at the end")


# ------------------------------------------------------------------------------------------------ reasons


def test_two_runs_tell_nothing() -> None:
    survey, _ = tube(RUNS[:2], sigma=SIGMA)
    found = look(moved(survey, "T4", 0.01))
    assert not len(found.ailments)
    reason = "fewer than 3 flowing runs: nothing tells what persists"
    assert judged(found) == f"not judged: {reason}"
    assert f"Taps and line were not judged over the runs together: {reason}." in found.assumptions
    assert found.taps["diagnosis"].isna().all()
    assert found.taps["reason"].str.contains(reason, regex=False).all()


def test_many_wrong_taps_are_no_diagnosis() -> None:
    survey, _ = tube(RUNS, sigma=SIGMA, seed=1)
    wrong = np.array([0, 0.02, -0.03, 0, 0.05, -0.02, 0, -0.03, 0.04, 0.02])
    found = look(replace(survey, readings=survey.readings + wrong))
    assert not len(found.ailments)
    assert judged(found).startswith("not judged: more taps than a third would have to be wrong")
    assert any(text.startswith("Taps and line: more taps than a third") for text in found.cautions)
    assert any("Most runs share a misfit" in text for text in found.cautions)


@settings(max_examples=8, deadline=None)
@given(
    st.integers(4, 10),
    st.floats(2e-4, 6e-4),
    st.floats(1.6, 4.0),
    st.sampled_from([1e-6, 3e-5, 2e-4]),
    st.booleans(),
)
def test_a_sound_survey_without_noise_has_none(
    runs: int, slowest: float, spread: float, roughness: float, static: bool
) -> None:
    flows = np.geomspace(slowest, spread * slowest, runs)
    survey, _ = tube(
        [*([0.0] if static else []), *flows], reaches=[NominalReach(0.0, 5.5, 0.02664, roughness)]
    )
    found = look(survey)
    assert not len(found.ailments)
    assert not (found.flags["kind"] == "tap").any()


def test_a_sound_main_without_noise_has_none() -> None:
    assert not len(look(main(MAIN_FLOWS)[0]).ailments)


def test_what_the_figures_need() -> None:
    survey, truth = tube(RUNS, sigma=SIGMA, seed=1)
    found = look(moved(survey, "T4", 0.006))
    rows = found.ailment_runs
    assert rows["run"].tolist() == survey.runs["run"].tolist()
    head = (truth.flow / (np.pi * 0.02664**2 / 4)) ** 2 / (2 * 9.80665)
    np.testing.assert_allclose(rows["velocity_head"], head, rtol=1e-9)
    # the other taps' line is known to a part of 1 mm: the errors scatter a little more than a reading
    assert np.abs(rows["error"] - 0.006).max() < 4 * rows["error_u"].max()
    assert (rows["error_u"] > 0.8 * SIGMA).all()
    np.testing.assert_allclose(rows["by_offset"], found.ailments["offset"][0])
    assert rows["by_edge"].isna().all()
    assert not len(found.break_heads)

    survey, _ = tube(RUNS, sigma=SIGMA, seed=1, fittings=[NominalFitting(2.75, 1.0, None)])
    heads = look(survey).break_heads
    assert len(heads) == 90
    beyond = heads["chainage"] > 2.75
    np.testing.assert_array_equal(heads["fitted"][~beyond], 0.0)
    fast = heads["run"] == "9"
    np.testing.assert_allclose(heads["departure"][beyond & fast], -1.0, atol=0.05)
    np.testing.assert_allclose(heads["departure"][~beyond & fast], 0.0, atol=0.05)


@pytest.mark.parametrize("seed", [2, 3])
def test_an_unlisted_loss_beside_a_wrong_tap_stays_a_loss(seed: int) -> None:
    """Before the tap is known, its error makes the loss look like a change of slope."""
    survey, truth = tube(RUNS, sigma=SIGMA, seed=seed, fittings=[NominalFitting(2.75, 1.0, None)])
    found = look(moved(survey, "T9", 0.01))
    names = dict(zip(found.ailments["what"], found.ailments["ailment"], strict=True))
    assert names == {"tap": "datum offset", "line": "unlisted loss"}
    row = found.ailments[found.ailments["what"] == "line"].iloc[0]
    assert abs(row["loss_coefficient"] - 1.0) < 3 * row["loss_coefficient_u"]
    assert np.abs(scores(found, truth)).max() < 4
