"""Static runs: what they take off the others, what cancels by that and what it costs."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.reduction import reduce
from tests.reduction.benches import FAST, TAPS, tube, with_gauge
from tests.simulate.surveys import Uncertainties

OFFSETS = np.array([1.1, 1.7, -1.2, -1.2, 1.0, -1.9, -0.7, 1.9, -0.7, 0.8]) * 1e-3
RESTED = (0.0, *FAST)


def flowing(reduction, column):
    mine = reduction.runs[reduction.runs["regime"] != "static"]
    return mine[column].to_numpy(float)


def test_offsets_of_the_taps_vanish_exactly():
    plain, truth = tube(RESTED)
    off, _ = tube(RESTED, offsets=OFFSETS)
    before, after = reduce(plain), reduce(off)
    np.testing.assert_allclose(flowing(after, "slope"), truth.slope[1:, 0], rtol=1e-6)
    np.testing.assert_allclose(flowing(after, "slope"), flowing(before, "slope"), rtol=0, atol=1e-12)
    # what the table of taps shows is the offset against the mean of the taps, as head: 0.12 % less for the air
    found = after.taps["offset"].to_numpy(float)
    np.testing.assert_allclose(found, (OFFSETS - OFFSETS.mean()) * (1 - 1.1992 / 999), rtol=0, atol=3e-8)


def test_the_offsets_stay_where_nothing_is_to_be_corrected():
    """The bias of S is then that of a straight line through the offsets."""
    survey, truth = tube(RESTED, offsets=OFFSETS)
    found = reduce(survey, correct="none")
    bias = -np.polyfit(TAPS, OFFSETS, 1)[0] * (1 - 1.1992 / 999)
    assert abs(bias) > 1e-5
    np.testing.assert_allclose(flowing(found, "slope") - truth.slope[1:, 0], bias, rtol=1e-3)
    np.testing.assert_allclose(
        found.taps["offset"].to_numpy(float), reduce(survey).taps["offset"].to_numpy(float), rtol=1e-12
    )
    assert any("do not correct the others: switched off" in text for text in found.assumptions)
    assert all("not taken off" in text for text in found.taps["reason"])


def test_without_static_runs_the_offsets_are_those_of_the_flowing_runs_and_not_taken_off():
    survey, _ = tube(FAST)
    found = reduce(survey)
    np.testing.assert_allclose(found.taps["offset"].to_numpy(float), 0.0, rtol=0, atol=1e-7)
    assert all("not taken off" in text for text in found.taps["reason"])
    assert all("no static run read this tap" in text for text in found.taps["reason"])
    assert not any("static" in text for text in found.assumptions)


def test_the_zero_of_the_board_costs_nothing():
    survey, _ = tube(RESTED, stated=Uncertainties(reading=5e-4))
    with_zero = with_gauge(survey, zero_u=5e-3)
    for correct in ("static", "none"):
        # one board: a common shift of all columns is no slope, corrected or not
        np.testing.assert_allclose(
            flowing(reduce(with_zero, correct=correct), "slope_u"),
            flowing(reduce(survey, correct=correct), "slope_u"),
            rtol=1e-9,
        )


def test_the_zeros_of_two_boards_cancel_by_the_static_run():
    """Half of the taps on a second board: its zero is a step between them, which only the static run takes away."""
    survey, _ = tube(RESTED, stated=Uncertainties(reading=5e-4))
    first = replace(survey.gauges[0], zero_u=5e-3)
    second = replace(first, name="second")
    taps = tuple(replace(tap, gauge="board" if i < 5 else "second") for i, tap in enumerate(survey.taps))
    both = tuple(replace(one, gauge=tap.gauge) for one, tap in zip(survey.observations, taps, strict=True))
    apart = replace(survey, gauges=(first, second), taps=taps, observations=both)
    without = replace(apart, gauges=(survey.gauges[0], replace(survey.gauges[0], name="second")))
    np.testing.assert_allclose(
        flowing(reduce(apart), "slope_u"), flowing(reduce(without), "slope_u"), rtol=1e-6
    )
    # Uncorrected, the step between the boards is all but unknown (5 mm against 0.5 mm): S is what each board's own
    # taps say, as in an analysis of covariance with one level a board.
    within = sum(((part - part.mean()) ** 2).sum() for part in (TAPS[:5], TAPS[5:]))
    found = flowing(reduce(apart, correct="none"), "slope_u")
    np.testing.assert_allclose(found, 5e-4 / np.sqrt(within), rtol=0.02)
    assert found.min() > 1.4 * flowing(reduce(apart), "slope_u").max()


@pytest.mark.parametrize("rests", [1, 2, 5])
def test_the_scatter_of_the_static_readings_is_counted(rests):
    """The mean of m static readings scatters by σ/√m: u(S) grows by √(1 + 1/m) against the flowing readings alone."""
    survey, _ = tube((*[0.0] * rests, *FAST), stated=Uncertainties(reading=5e-4))
    plain = reduce(survey, correct="none")
    by_hand = 5e-4 * (1 - 1.1992 / 999) / np.sqrt(((TAPS - TAPS.mean()) ** 2).sum())
    np.testing.assert_allclose(flowing(plain, "slope_u_random"), by_hand, rtol=1e-6)
    np.testing.assert_allclose(flowing(plain, "slope_u"), by_hand, rtol=1e-6)
    corrected = reduce(survey)
    np.testing.assert_allclose(flowing(corrected, "slope_u"), by_hand * np.sqrt(1 + 1 / rests), rtol=1e-6)
    offset_u = corrected.taps["offset_u"].to_numpy(float)
    np.testing.assert_allclose(offset_u, 5e-4 * np.sqrt((1 - 1 / 10) / rests), rtol=2e-3)


def test_repeats_of_a_static_run_count_as_readings():
    survey, _ = tube(RESTED, stated=Uncertainties(reading=5e-4))
    repeats = survey.repeats.copy()
    repeats.iloc[0] = 4
    found = reduce(replace(survey, repeats=repeats))
    plain = reduce(survey, correct="none")
    ratio = flowing(found, "slope_u") / flowing(plain, "slope_u")
    np.testing.assert_allclose(ratio, np.sqrt(1 + 1 / 4), rtol=1e-6)


def test_several_static_runs_are_averaged():
    """Two static runs, the second with the taps twice as far off: the mean offset is what is taken off."""
    survey, _ = tube((0.0, 0.0, *FAST), offsets=OFFSETS)
    readings = survey.readings.copy()
    readings.iloc[1] += OFFSETS
    found = reduce(replace(survey, readings=readings)).taps["offset"].to_numpy(float)
    expected = 1.5 * (OFFSETS - OFFSETS.mean()) * (1 - 1.1992 / 999)
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-8)


def test_static_runs_at_different_levels_have_the_same_offsets():
    survey, _ = tube((0.0, 0.0, *FAST), offsets=OFFSETS)
    readings = survey.readings.copy()
    readings.iloc[1] += 0.4
    one, other = reduce(survey), reduce(replace(survey, readings=readings))
    np.testing.assert_allclose(one.taps["offset"], other.taps["offset"], rtol=0, atol=1e-12)


def test_a_tap_not_read_at_rest_is_not_corrected():
    survey, _ = tube(RESTED, offsets=OFFSETS)
    readings = survey.readings.copy()
    readings.iloc[0, 3] = np.nan
    found = reduce(replace(survey, readings=readings)).taps.set_index("tap")
    known = np.delete(OFFSETS, 3)
    # the flowing runs show what no static run measured: told, and the tap with an error of 1.4 mm left out
    assert found.loc["T4", "offset"] == pytest.approx(
        (OFFSETS[3] - known.mean()) * (1 - 1.1992 / 999), abs=2e-6
    )
    assert "no static run read this tap: offset over the flowing runs" in found.loc["T4", "reason"]
    assert found.loc["T4", "diagnosis"].startswith("datum offset: ")
    np.testing.assert_allclose(
        found["offset"].drop("T4"), (known - known.mean()) * (1 - 1.1992 / 999), rtol=0, atol=3e-8
    )


def test_a_static_reading_left_out_by_hand_does_not_correct():
    survey, _ = tube(RESTED, offsets=OFFSETS)
    wrong = survey.readings.copy()
    wrong.iloc[0, 3] += 0.2
    found = reduce(replace(survey, readings=wrong), exclude=["1:T4"])
    assert "no static run read this tap" in found.taps.set_index("tap").loc["T4", "reason"]
    heads = found.heads[(found.heads["run"] == "1") & (found.heads["tap"] == "T4")]
    assert heads["flag"].item() == "excluded"
    assert not heads["used"].item()


def test_static_runs_stand_in_the_tables():
    survey, _ = tube(RESTED)
    found = reduce(survey)
    row = found.runs.iloc[0]
    assert (row["regime"], row["reason"], row["flow"], row["velocity"]) == ("static", "static run", 0, 0)
    assert row[["slope", "slope_u", "friction_factor", "roughness"]].isna().all()
    heads = found.heads[found.heads["run"] == "1"]
    assert heads["used"].all()
    np.testing.assert_allclose(heads["residual"].to_numpy(float), 0, atol=1e-7)
