"""Cautions stand where they belong, and nowhere else."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.quantities import rounded
from gradeline.reduction import reduce
from gradeline.report import summarise
from tests.reduction.benches import FAST, TAPS, hilly, main, on_pressure_gauges, tube, with_gauge
from tests.simulate.surveys import NominalFitting, Uncertainties

SLOW_TO_FAST = np.geomspace(3e-4, 1.8e-3, 9)
HILL = np.array([0.3, 1.2, 2.1, 2.6, 2.0, 1.1, 0.4, -0.3, -0.8, 0.1])


def said(reduction, text):
    return [one for one in reduction.cautions if text in one]


def test_a_sound_survey_has_no_caution():
    for survey, _ in (tube(FAST, sigma=1e-3, seed=4), hilly(FAST)):
        assert reduce(survey).cautions == ()
    # the taps next downstream of the contraction and of the valve stand 15 m behind them, 74 bores
    assert reduce(main(sigma=5e-3, seed=2)[0]).cautions == ()


def test_a_grade_line_below_the_crown_is_told_with_its_runs():
    """The line's highest point lies 2.6 m over the datum; in the fastest run the head there is made 1 cm lower."""
    survey, truth = tube(FAST)
    gauged = on_pressure_gauges(survey, truth, HILL, np.zeros(10), lift=0.0)
    # the piezometric heads in the middle of the line, by the truth
    crown = HILL + 0.02664 / 2
    lowest = (truth.heads - crown).min(axis=1)
    raised = -lowest + 0.05
    raised[1] = -lowest[1] - 0.01
    pressure = gauged.readings + 999.0 * 9.80665 * raised[:, None]
    found = reduce(replace(gauged, readings=pressure))
    cautions = said(found, "falls below the pipe's crown")
    assert len(cautions) == 1
    assert "crown in run 2: the pressure there is below that of the atmosphere" in cautions[0]
    safe = gauged.readings + 999.0 * 9.80665 * (-lowest + 0.05)[:, None]
    assert not said(reduce(replace(gauged, readings=safe)), "crown")


def test_without_elevations_nothing_is_said_of_the_pressure():
    """Columns below a pipe whose axis nobody gave: all elevations are 0, and that says nothing."""
    survey, _ = tube(FAST)
    low = replace(survey, readings=survey.readings - 5.0)
    assert not said(reduce(low), "crown")


def test_heads_that_rise_are_told():
    """The columns of the taps the other way round, as where chainages were counted from the wrong end."""
    survey, _ = tube(FAST)
    turned = survey.readings.copy()
    turned[:] = survey.readings.to_numpy()[:, ::-1]
    found = reduce(replace(survey, readings=turned))
    (flag,) = found.flags.to_dict("records")
    assert flag["kind"] == "law"
    assert flag["suggestion"].startswith("in 4 of 4 runs the head rises downstream in reach 'reach 1'")
    assert found.runs["friction_factor"].isna().all()
    assert (found.runs["reason"] == "no loss of head could be measured: S is not above zero").all()
    assert reduce(survey).flags.empty


def test_a_head_that_rises_within_the_scatter_is_not_told():
    survey, _ = tube((0.5e-5,), sigma=2e-3, seed=2)
    found = reduce(survey)
    assert found.runs["slope"].item() < 0
    assert found.flags.empty


@pytest.mark.parametrize("seed", range(3))
def test_an_unlisted_loss_is_no_set_of_outliers(seed):
    """An unlisted K = 1 in the middle of the line: its step is shared by all runs, and no reading is flagged for it."""
    flows = np.linspace(3e-4, 1.4e-3, 9)
    survey, truth = tube(flows, sigma=1e-3, seed=seed, fittings=[NominalFitting(2.75, 1.0, None)])
    found = reduce(survey)
    cautions = said(found, "a loss that nobody listed")
    assert len(cautions) == 1
    assert cautions[0].startswith(
        "Between 2.467 m and 3.033 m (95 %) there is a loss that nobody listed, K = "
    )
    assert not (found.heads["flag"] == "outlier").any()
    row = found.ailments.squeeze()
    assert abs(row["loss_coefficient"] - 1.0) < 3 * row["loss_coefficient_u"]
    # unlisted it would bias S by a third; fitted, S is the truth within its uncertainty
    score = (found.runs["slope"].to_numpy(float) - truth.slope[:, 0]) / found.runs["slope_u"].to_numpy(float)
    assert np.abs(score).max() < 3.5


def test_a_listed_loss_is_no_misfit():
    flows = np.linspace(3e-4, 1.4e-3, 9)
    survey, _ = tube(flows, sigma=1e-3, seed=1, fittings=[NominalFitting(2.75, 1.0)])
    found = reduce(survey)
    assert not said(found, "share a misfit")
    row = found.fittings.squeeze()
    assert row["loss_coefficient_low"] < 1.0 < row["loss_coefficient_high"]


def test_scatter_far_above_the_stated_is_doubted():
    """Columns that scatter by 2 mm where 0.2 mm was stated."""
    survey, _ = tube(np.linspace(3e-4, 1.4e-3, 9), sigma=2e-3, seed=6, stated=Uncertainties(reading=2e-4))
    found = reduce(survey)
    cautions = said(found, "The stated reading uncertainty is doubtful: the readings scatter")
    assert len(cautions) == 1
    assert not (found.flags["kind"] == "reading").any()
    # σ of 2 mm within its own uncertainty of 1/√(2 · 72)
    assert found.scatter["base"].item() == pytest.approx(2e-3, rel=0.3)


def test_a_coarse_scale_adds_its_own_scatter():
    """Readings to 5 mm scatter by 5/√12 mm however steady the columns."""
    survey, _ = tube(FAST)
    found = reduce(with_gauge(survey, resolution=5e-3)).runs
    by_hand = 5e-3 / np.sqrt(12) * (1 - 1.1992 / 999) / np.sqrt(((TAPS - TAPS.mean()) ** 2).sum())
    np.testing.assert_allclose(found["slope_u_random"], by_hand, rtol=1e-6)


def test_one_run_can_find_only_gross_errors():
    survey, _ = tube(FAST[-1:], sigma=1e-3, seed=1)
    cautions = said(reduce(survey), "the search for outlying readings can find only errors above about")
    assert len(cautions) == 1
    assert cautions[0].startswith("With 1 flowing run and no stated reading uncertainty")


def test_a_run_off_the_law_is_flagged():
    """One flow written down with a digit wrong: 1.4 L/s as 1.2. f is then 36 % too high in that run alone."""
    flows = np.linspace(3e-4, 1.4e-3, 9)
    survey, _ = tube(flows, sigma=5e-4, seed=3, stated=Uncertainties(flow=4e-3))
    wrong = survey.runs.copy()
    wrong.loc[8, "flow"] = 1.2e-3
    found = reduce(replace(survey, runs=wrong))
    flagged = found.flags[found.flags["kind"] == "run"]
    assert flagged["run"].tolist() == ["9"]
    assert "look up its readings and its flow" in flagged["suggestion"].item()
    assert found.walls["runs_used"].item() == 8
    sound = reduce(survey)
    assert not (sound.flags["kind"] == "run").any()
    assert found.walls["roughness"].item() == pytest.approx(sound.walls["roughness"].item(), rel=0.05)


def test_a_slip_in_the_static_run_is_named_with_what_was_to_be_expected():
    """One static column 20 mm off: after the correction its tap is off in every run, and the static run is to blame."""
    survey, _ = tube((0.0, *FAST), stated=Uncertainties(reading=5e-4))
    readings = survey.readings.copy()
    right = readings.iloc[0, 4]
    readings.iloc[0, 4] = right + 20e-3
    found = reduce(replace(survey, readings=readings))
    assert not (found.flags["kind"] == "reading").any()
    flag = found.flags[found.flags["kind"] == "tap"].iloc[0]
    assert flag["tap"] == survey.observations[4].label
    run = survey.runs["run"].iloc[0]
    assert f"leave it out with --exclude {run}:{flag['tap']} if it is wrong" in flag["suggestion"]
    expected = float(flag["suggestion"].split("where ")[1].split(" m ")[0])
    assert abs(expected - right) < 2e-3
    clean = reduce(survey)
    np.testing.assert_allclose(found.runs["slope_u"], clean.runs["slope_u"], rtol=0.3)


@pytest.mark.parametrize(
    ("factor", "text"), [(1e-3, "more than any wall gives"), (60.0, "less than any wall gives")]
)
def test_impossible_friction_is_no_roughness(factor, text):
    """Chainages in mm taken for metres make S a thousand times too large; litres a minute taken for a second, f too small."""
    survey, _ = tube(FAST)
    if factor < 1:
        taps = tuple(replace(tap, chainage=tap.chainage * factor) for tap in survey.taps)
        wrong = replace(survey, taps=taps)
    else:
        wrong = replace(survey, runs=survey.runs.assign(flow=survey.runs["flow"] * factor))
    found = reduce(wrong)
    wall = found.walls.iloc[0]
    assert np.isnan(wall["roughness"])
    assert text in wall["reason"]
    assert text in " ".join(found.flags["suggestion"])


def test_an_offset_beyond_all_others_is_told():
    survey, _ = tube(
        (0.0, *FAST),
        stated=Uncertainties(reading=5e-4),
        offsets=np.where(np.arange(len(TAPS)) == 3, 2.0, 0.0),
    )
    found = reduce(survey)
    (text,) = said(found, f"Tap {survey.observations[3].label} differs from the others by ")
    shown, unit, _ = text.split("by ")[1].split(" ", 2)
    assert unit == "mm"
    assert abs(float(shown.replace("\u202f", "")) - 2000) < 5
    # Said once: the summary leaves it to the caution.
    assert not any("datum offset" in one for one in summarise(found).look)


def test_an_offset_at_rest_that_stands_out_is_told_without_a_flag():
    """5.8 mm at one tap, the others sound to 1 mm: taken off, and worth a word."""
    survey, _ = tube((0.0, *SLOW_TO_FAST), sigma=1e-3, seed=5)
    assert reduce(survey, monte_carlo=False).taps["diagnosis"].isna().all()
    readings = survey.readings.copy()
    readings["T5"] += 0.0058
    found = reduce(replace(survey, readings=readings), monte_carlo=False)
    (tap,) = found.taps[found.taps["diagnosis"].notna()].to_dict("records")
    assert tap["tap"] == "T5"
    assert abs(tap["offset"] - 0.0058) < 3 * tap["offset_u"]
    shown = f"({rounded(1000 * tap['offset'], 1000 * tap['offset_u'])}) mm".replace("(", "(+")
    assert tap["diagnosis"] == f"datum offset {shown}, measured by the static run and taken off"
    assert not len(found.flags)
    assert f"Tap T5: {tap['diagnosis']}." in summarise(found).look
    kept = reduce(replace(survey, readings=readings), correct="none", monte_carlo=False)
    assert not any("measured by the static run" in str(one) for one in kept.taps["diagnosis"])


def test_a_tap_with_an_ailment_has_no_second_word_on_its_offset():
    """A line that is blocked stands still at rest as well, far from the others."""
    survey, _ = tube((0.0, *SLOW_TO_FAST), sigma=1e-3, seed=5)
    readings = survey.readings.copy()
    readings["T4"] = readings["T4"].iloc[-1]
    found = reduce(replace(survey, readings=readings), monte_carlo=False)
    diagnosis = found.taps.set_index("tap")["diagnosis"].dropna()
    assert list(diagnosis.index) == ["T4"]
    assert diagnosis["T4"].startswith("sluggish or blocked line")
    assert not said(found, "differs from the others")


def test_what_was_left_out_by_hand_is_told():
    survey, _ = tube(FAST)
    assert "Left out by hand: 2:T3." in reduce(survey, exclude=["2:T3"]).assumptions
