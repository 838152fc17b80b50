"""Readings that do not enter: disturbed taps, exclusions by hand, flagged readings and their keeping."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.errors import ReductionError
from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.survey import Fitting
from tests.reduction.benches import FAST, TAPS, TUBE, hilly, tube
from tests.simulate.surveys import NominalFitting

NAMES = [f"T{number}" for number in range(1, 11)]


def flags(reduction, run):
    heads = reduction.heads[reduction.heads["run"] == run]
    return dict(zip(heads["tap"], heads["flag"], strict=True))


def test_taps_inside_the_entrance_length_are_left_out():
    """4.4 Re^(1/6) D in turbulent and 0.06 Re D in laminar flow (DESIGN, disturbed taps), by hand."""
    flows = (1.6e-5, *FAST)
    survey, truth = tube(flows, reaches=[replace(TUBE, inlet=True)])
    found = reduce(survey)
    for place, run in enumerate(survey.runs["run"]):
        reynolds = truth.reynolds[place, 0]
        length = (0.06 * reynolds if reynolds < 2000 else 4.4 * reynolds ** (1 / 6)) * TUBE.diameter
        expected = [name for name, x in zip(NAMES, TAPS, strict=True) if x < length]
        assert 1 <= len(expected) <= 5
        heads = found.heads[found.heads["run"] == run]
        out = heads[heads["flag"] == "disturbed"]
        assert out["tap"].tolist() == expected
        assert not out["used"].any()
        assert (out["reason"] == "inside the entrance length of reach 'reach 1'").all()
        assert heads["used"].sum() == 10 - len(expected)
        assert found.runs["observations_used"][place] == 10 - len(expected)
    np.testing.assert_allclose(found.runs["slope"], truth.slope[:, 0], rtol=1e-5)


def test_a_reading_of_a_disturbed_tap_does_not_matter():
    survey, truth = tube(FAST, reaches=[replace(TUBE, inlet=True)])
    wrong = survey.readings.copy()
    wrong["T1"] += 0.3
    found = reduce(replace(survey, readings=wrong))
    np.testing.assert_allclose(found.runs["slope"], truth.slope[:, 0], rtol=1e-6)
    assert set(flags(found, "1").values()) == {None, "disturbed"}
    assert not (found.flags["kind"] == "reading").any()
    heads = found.heads[found.heads["tap"] == "T1"]
    np.testing.assert_allclose(heads["residual"].to_numpy(float), 0.3 * (1 - 1.1992 / 999), rtol=1e-3)


@pytest.mark.parametrize(
    ("at", "disturbed"),
    [
        # T5 stands at 2.467 m, T6 at 3.033 m; 2 D = 53 mm upstream and 10 D = 266 mm downstream
        (TAPS[4] + 0.0532, ["T5"]),
        (TAPS[4] + 0.0534, []),
        (TAPS[4], ["T5"]),
        (TAPS[4] - 0.01, ["T5"]),
        (TAPS[4] - 0.2663, ["T5"]),
        (TAPS[4] - 0.2665, []),
    ],
)
def test_taps_near_a_fitting_are_left_out(at, disturbed):
    survey, truth = tube(FAST, fittings=[NominalFitting(float(at), 1.5)])
    found = reduce(survey)
    assert [name for name, flag in flags(found, "2").items() if flag == "disturbed"] == disturbed
    np.testing.assert_allclose(found.runs["slope"], truth.slope[:, 0], rtol=1e-6)
    assert found.fittings["loss_coefficient"].item() == pytest.approx(1.5, rel=1e-5)


def test_the_reason_tells_how_near():
    survey, _ = tube(FAST, fittings=[NominalFitting(float(TAPS[4]) - 0.1, 1.5)])
    found = reduce(survey).heads
    assert (
        found[found["tap"] == "T5"]["reason"] == f"{0.1 / 0.02664:.1f} bores downstream of 'fitting 1'"
    ).all()


def test_approach_and_recovery_of_a_fitting():
    survey, _ = tube(FAST, fittings=[NominalFitting(float(TAPS[4]) + 0.1, 1.5)])
    valve = Fitting("valve", float(TAPS[4]) + 0.1, None, approach=5.0, recovery=25.0)
    out = flags(reduce(replace(survey, fittings=(valve,))), "1")
    # upstream 133 mm, downstream 666 mm: T5 is 100 mm off, T6 467 mm, T7 1033 mm
    assert [name for name, flag in out.items() if flag] == ["T5", "T6"]
    none = replace(valve, approach=0.0, recovery=0.0)
    assert set(flags(reduce(replace(survey, fittings=(none,))), "1").values()) == {None}


def test_taps_within_thirty_bores_are_used_with_a_caution():
    """30 D = 799 mm; T5 lies 466 mm and T6 1033 mm downstream of the fitting."""
    survey, _ = tube(FAST, fittings=[NominalFitting(2.0, 1.5)])
    cautions = [text for text in reduce(survey).cautions if "recovered" in text]
    assert len(cautions) == 1
    assert cautions[0].startswith("Tap T5 lies 18 bores downstream of 'fitting 1': used")


def test_a_tap_left_out_of_all_runs():
    survey, truth = tube(FAST)
    wrong = survey.readings.copy()
    wrong["T4"] += 0.5
    found = reduce(replace(survey, readings=wrong), exclude=["T4"])
    np.testing.assert_allclose(found.runs["slope"], truth.slope[:, 0], rtol=1e-6)
    out = found.heads[found.heads["flag"] == "excluded"]
    assert out["tap"].tolist() == ["T4"] * 4
    assert (out["reason"] == "left out by hand").all()
    assert not out["used"].any()


def test_one_reading_left_out():
    survey, truth = tube(FAST)
    wrong = survey.readings.copy()
    wrong.loc["3", "T4"] += 0.5
    found = reduce(replace(survey, readings=wrong), exclude=[" 3:T4 "])
    np.testing.assert_allclose(found.runs["slope"], truth.slope[:, 0], rtol=1e-6)
    assert flags(found, "3")["T4"] == "excluded"
    assert flags(found, "2")["T4"] is None
    assert found.runs["observations_used"].tolist() == [10, 10, 9, 10]


def test_a_run_label_with_a_colon():
    survey, _ = tube(FAST)
    names = ["1", "2", "am:3", "4"]
    survey = replace(
        survey,
        runs=survey.runs.assign(run=names),
        **{name: getattr(survey, name).set_axis(names) for name in ("readings", "repeats", "spreads")},
    )
    assert flags(reduce(survey, exclude=["am:3:T4"]), "am:3")["T4"] == "excluded"


@pytest.mark.parametrize(
    ("exclude", "message"),
    [
        ("T44", "to exclude: there is no tap 'T44'; did you mean 'T4'?"),
        ("9:T4", "to exclude: there is no run '9'; known are 1, 2, 3, 4"),
        ("3:X", "to exclude: there is no tap 'X'; known are T1, T2"),
        ("", "to exclude: there is no tap ''"),
    ],
)
def test_what_cannot_be_excluded_is_told(exclude, message):
    survey, _ = tube(FAST)
    with pytest.raises(ReductionError) as told:
        reduce(survey, exclude=[exclude])
    assert message in str(told.value)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"level": 95}, "the level of the intervals is between 0 and 1, such as 0.95; found 95"),
        ({"level": float("nan")}, "found nan"),
        ({"correct": "all"}, "to correct: 'all' is not one of static, none"),
    ],
)
def test_choices_that_do_not_exist_are_told(options, message):
    survey, _ = tube(FAST)
    with pytest.raises(ReductionError) as told:
        reduce(survey, **options)
    assert message in str(told.value)


def slipped():
    """Return readings that scatter by 0.5 mm, one of them 20 mm too high."""
    return tube(FAST, sigma=5e-4, slips={(2, 5): 0.02}, seed=8)


def test_a_wrong_reading_is_flagged_with_what_was_expected():
    survey, truth = slipped()
    found = reduce(survey)
    row = found.flags[found.flags["kind"] == "reading"].squeeze()
    assert (row["run"], row["tap"]) == ("3", "T6")
    right = survey.readings.loc["3", "T6"] - 0.02
    assert row["reading"] == survey.readings.loc["3", "T6"]
    assert row["expected"] == pytest.approx(right, abs=4 * 5e-4)
    assert 15 < row["score"] < 80
    assert "left out of the fit" in row["suggestion"]
    assert flags(found, "3")["T6"] == "outlier"
    assert found.runs["observations_used"].tolist() == [10, 10, 9, 10]
    # u(S) by hand is 0.5 mm / 5.15 m
    assert found.runs["slope"][2] == pytest.approx(truth.slope[2, 0], abs=4 * 1e-4)


def test_flagged_readings_are_kept_as_asked():
    survey, _ = slipped()
    found = reduce(survey, keep_all=True)
    row = found.flags[found.flags["kind"] == "reading"].squeeze()
    assert (row["run"], row["tap"]) == ("3", "T6")
    assert "kept in the fit as asked" in row["suggestion"]
    heads = found.heads[(found.heads["run"] == "3") & (found.heads["tap"] == "T6")]
    assert heads["used"].item()
    assert heads["flag"].item() == "outlier"
    assert found.runs["observations_used"].tolist() == [10] * 4
    energy = found.heads[found.heads["run"] == "3"]["energy_head"].to_numpy(float)
    assert found.runs["slope"][2] == pytest.approx(-np.polyfit(TAPS, energy, 1)[0], rel=1e-9)
    assert any("kept in the fits of their runs, as asked" in text for text in found.assumptions)


def test_a_pressure_is_expected_in_pascals():
    """A gauge that shows 20 mm of water too much: 196 Pa too much."""
    survey, _ = hilly(FAST)
    noisy = survey.readings + 5.0 * np.random.default_rng(5).standard_normal(survey.readings.shape)
    noisy.loc["3", "T6"] += 196.0
    found = reduce(replace(survey, readings=noisy))
    row = found.flags[found.flags["kind"] == "reading"].squeeze()
    assert (row["run"], row["tap"]) == ("3", "T6")
    assert row["reading"] - row["expected"] == pytest.approx(196, abs=25)


def test_a_reading_not_taken():
    survey, truth = tube(FAST, fittings=[NominalFitting(2.9, 1.5, Measured(1.5))])
    gap = survey.readings.copy()
    gap.loc["2", "T3"] = np.nan
    found = reduce(replace(survey, readings=gap))
    heads = found.heads[(found.heads["run"] == "2") & (found.heads["tap"] == "T3")].squeeze()
    assert (heads["reason"], heads["flag"]) == ("not read", None)
    assert not heads["used"]
    assert np.isnan(heads["head"])
    assert np.isnan(heads["residual"])
    np.testing.assert_allclose(found.runs["slope"], truth.slope[:, 0], rtol=1e-6)
