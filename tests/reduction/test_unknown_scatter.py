"""Surveys that leave the scatter unknown, taps that are never read, and effects that are nothing but rounding."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.reduction import reduce
from tests.simulate.surveys import NominalReach, Uncertainties, make_survey

BORE = 0.0266
ALL_BUT_READINGS = Uncertainties(flow_scale=0.003, chainage=1e-3, temperature=0.2)


def survey(taps, runs, stated, *, bore_u=3e-5):
    rng = np.random.default_rng(7)
    return make_survey(
        rng,
        chainage=np.linspace(1.0, 5.0, taps),
        reaches=[NominalReach(0, 5.5, BORE, 2e-4 * BORE, bore_u)],
        flows=np.geomspace(1.2e-3, 6e-4, runs),
        sigma=1e-3,
        stated=stated,
    )[0]


def unread(made, column):
    """The same survey, one tap of which nobody ever read."""
    readings, repeats = made.readings.copy(), made.repeats.copy()
    readings.iloc[:, column] = np.nan
    repeats.iloc[:, column] = 0
    return replace(made, readings=readings, repeats=repeats)


@pytest.mark.parametrize("stated", [Uncertainties(), ALL_BUT_READINGS])
def test_two_taps_and_one_run_give_a_roughness_without_an_interval(stated):
    """S = Δh/Δx by hand (air weighs 1.2/999 of water); its uncertainty is what was stated of chainages, or null."""
    made = survey(2, 1, stated)
    found = reduce(made)
    first, last = made.readings.to_numpy(float)[0]
    slope = (first - last) / 4.0
    assert found.runs["slope"][0] == pytest.approx(slope, rel=2e-3)
    wall = found.walls.iloc[0]
    assert wall["roughness"] >= 0
    assert np.isnan([wall["roughness_low"], wall["roughness_high"], wall["roughness_upper95"]]).all()
    assert "nothing tells how sure" in wall["reason"]
    if stated.chainage is None:
        assert np.isnan(found.runs["slope_u"][0])
        # Nothing of what was stated (the bore) moves S: no rounding passes for an uncertainty.
        assert (found.budget["quantity"] != "slope").all()
    else:
        # Two chainages of 1 mm each over 4 m.
        assert found.runs["slope_u"][0] == pytest.approx(slope * np.sqrt(2) * 1e-3 / 4.0, rel=2e-3)
        assert "the uncertainty holds the stated errors alone" in found.runs["reason"][0]
    assert found.walls["runs_used"][0] == 1


def test_a_single_readable_run_of_many_taps_does_not_stop_the_reduction():
    made = survey(6, 5, ALL_BUT_READINGS)
    readings, repeats = made.readings.copy(), made.repeats.copy()
    readings.iloc[1:, 1:] = np.nan
    readings.iloc[0, 2:] = np.nan
    repeats = repeats.where(readings.notna(), 0)
    found = reduce(replace(made, readings=readings, repeats=repeats))
    assert np.isfinite(found.runs["slope"]).sum() == 1
    assert np.isnan(found.walls["roughness_low"][0])


@pytest.mark.parametrize("taps", [3, 8])
def test_a_tap_that_is_never_read_leaves_the_stated_reading_uncertainty_standing(taps):
    """Stated 5 mm, a scatter of 1 mm: u(S) of the taps that are left is 5 mm / sqrt(Σ(x − x̄)²), by hand."""
    made = survey(taps, 4, Uncertainties(reading=5e-3), bore_u=0.0)
    found = reduce(unread(made, 1))
    x = np.delete(np.linspace(1.0, 5.0, taps), 1)
    expected = 5e-3 / np.sqrt(((x - x.mean()) ** 2).sum())
    assert found.runs["slope_u_random"].to_numpy(float) == pytest.approx(expected, rel=3e-3)
    assert found.scatter["stated"][0] == pytest.approx(5e-3, rel=2e-3)
