"""Stated uncertainties: each is held against a second reduction with the stated value changed by a little."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.survey import Fluid, Site, Stated
from tests.reduction.benches import (
    FAST,
    KELVIN,
    MAIN_FLOWS,
    TUBE,
    hilly,
    main,
    tube,
    with_bore,
    with_gauge,
    with_runs,
    with_stated,
    with_tap,
)
from tests.simulate.surveys import NominalFitting, Uncertainties
from tests.simulate.water import density, kinematic_viscosity

READING = 2e-4
#: The change of the stated value, in standard uncertainties: small, so that the answer is a derivative.
SMALL = 0.02
STATED = Uncertainties(reading=READING)


def shared(reduction):
    """What the shared inputs add to u(S)/S and u(f)/f; the scatter of the readings is the same part of both."""
    runs = reduction.runs
    random = runs["slope_u_random"] / runs["slope"]
    parts = (runs["slope_u"] / runs["slope"], runs["friction_factor_u"] / runs["friction_factor"])
    return tuple(np.sqrt(np.maximum(part**2 - random**2, 0)).to_numpy(float) for part in parts)


def hold(survey, stated, shift, *, tolerance=0.01):
    """Hold u(S) and u(f) of `stated(survey)` against what a small `shift` of the stated value does to S and f.

    Returns the relative changes for one standard uncertainty.
    """
    uncertain = stated(survey)
    there = reduce(uncertain)
    moved = reduce(shift(uncertain, SMALL)).runs
    changes = []
    for column, found in zip(("slope", "friction_factor"), shared(there), strict=True):
        change = (np.abs(moved[column] / there.runs[column] - 1) / SMALL).to_numpy(float)
        np.testing.assert_allclose(found, change, rtol=tolerance, atol=2e-6)
        changes.append(change)
    return changes


def scaled_flow(survey, share):
    return with_runs(survey, flow=survey.runs["flow"] * (1 + share))


def test_the_bore_of_a_tube():
    survey, _ = tube(FAST, stated=STATED)
    _, change_f = hold(
        survey,
        lambda s: with_bore(s, 0, TUBE.diameter, 3e-5),
        lambda s, part: with_bore(s, 0, TUBE.diameter + part * 3e-5, 3e-5),
    )
    # f = 2 g D S / V² goes as D⁵ at a given flow
    np.testing.assert_allclose(change_f, 5 * 3e-5 / TUBE.diameter, rtol=0.005)


@pytest.mark.parametrize("place", [0, 1])
def test_each_bore_of_a_main(place):
    """A contraction of given K, so that its loss moves with the bores as well, and α = 1 + 2.7 f with them."""
    given = [NominalFitting(430, 0.18, Measured(0.18), change_of_bore=True), NominalFitting(800, 4.0)]
    survey, _ = main(stated=Uncertainties(reading=5e-3), fittings=given)
    bore = survey.reaches[place].diameter.value
    hold(
        survey,
        lambda s: with_bore(s, place, bore, 5e-4),
        lambda s, part: with_bore(s, place, bore + part * 5e-4, 5e-4),
    )


def test_the_calibration_of_the_flow():
    survey, _ = tube(FAST, stated=STATED)
    _, change_f = hold(
        survey, lambda s: with_stated(s, flow_scale=3e-3), lambda s, part: scaled_flow(s, part * 3e-3)
    )
    np.testing.assert_allclose(change_f, 6e-3, rtol=0.005)


def test_the_calibration_of_the_flow_over_two_bores():
    """The level of the velocity heads moves by two bores' worth, and α = 1 + 2.7 f with it."""
    survey, _ = main(stated=Uncertainties(reading=5e-3))
    hold(
        survey,
        lambda s: with_stated(s, flow_scale=1e-2),
        lambda s, part: scaled_flow(s, part * 1e-2),
    )


@pytest.mark.parametrize("place", [0, 4, 9])
def test_the_chainage_of_a_tap(place):
    survey, _ = tube(FAST, stated=STATED)
    at = survey.taps[place].chainage
    hold(
        survey,
        lambda s: with_tap(s, place, chainage_u=1e-3),
        lambda s, part: with_tap(s, place, chainage=at + part * 1e-3),
    )


def test_the_chainages_of_all_taps_add_up():
    """One uncertainty for every tap: S u(x) at each, independent, so that u(S) = S u(x) / √Σ(x − x̄)² by hand."""
    survey, _ = tube(FAST, stated=STATED)
    there = reduce(with_stated(survey, chainage=1e-3))
    slope, _ = shared(there)
    x = np.array([tap.chainage for tap in survey.taps])
    np.testing.assert_allclose(slope, 1e-3 / np.sqrt(((x - x.mean()) ** 2).sum()), rtol=0.005)


@pytest.mark.parametrize("place", [0, 6])
def test_the_elevation_of_a_tap_with_its_gauge(place):
    survey, _ = hilly(FAST)
    survey = with_stated(survey, reading_pressure=2.0)
    tap = survey.taps[place]
    hold(
        survey,
        lambda s: with_tap(s, place, elevation_u=1e-3),
        lambda s, part: with_tap(
            s,
            place,
            elevation=tap.elevation + part * 1e-3,
            gauge_elevation=tap.gauge_elevation + part * 1e-3,
        ),
    )


def test_the_scale_of_the_board():
    survey, _ = tube(FAST, stated=STATED)
    hold(
        survey,
        lambda s: with_gauge(s, scale_u=1e-3),
        lambda s, part: replace(s, readings=s.readings * (1 + part * 1e-3)),
    )


def test_gravity_in_the_friction_factor():
    """Columns show heads whatever g is; f = 2 g D S / V² grows with it. A pressure over ρg falls, and f stays."""
    columns, _ = tube(FAST, stated=STATED)
    g = columns.site.gravity.value

    def stated(s):
        return replace(s, site=Site(gravity=Measured(g, 1e-3 * g)))

    def shift(s, part):
        return replace(s, site=Site(gravity=Measured(g * (1 + part * 1e-3), 1e-3 * g)))

    change_s, change_f = hold(columns, stated, shift)
    assert change_s.max() < 1e-6
    np.testing.assert_allclose(change_f, 1e-3, rtol=0.005)
    gauges, _ = hilly(FAST)
    # of the slowest run: the pressures hold the height of the line, 1e-3 of which is much against its loss of head
    change_s, _ = hold(with_stated(gauges, reading_pressure=2.0), stated, shift)
    assert change_s[0] > 0.01


def test_the_temperature_at_pressure_gauges():
    survey, _ = hilly(FAST)
    warm = with_runs(survey, temperature=survey.runs["temperature"] + 10.0)
    hold(
        with_stated(warm, reading_pressure=2.0),
        lambda s: with_stated(s, temperature=0.5),
        lambda s, part: with_runs(s, temperature=s.runs["temperature"] + part * 0.5),
        tolerance=0.02,
    )


def test_the_density_of_another_fluid():
    survey, _ = hilly(FAST)
    nu, rho = float(kinematic_viscosity(KELVIN)), float(density(KELVIN))

    def with_density(s, value):
        return replace(
            s,
            fluid=Fluid("brine", density=Measured(value, 2e-3 * rho), viscosity=Measured(nu * rho)),
        )

    plain = replace(survey, fluid=Fluid("brine", density=Measured(rho), viscosity=Measured(nu * rho)))
    hold(
        with_stated(plain, reading_pressure=2.0),
        lambda s: with_density(s, rho),
        lambda s, part: with_density(s, rho * (1 + part * 2e-3)),
        tolerance=0.02,
    )


def test_a_given_loss_coefficient():
    survey, _ = tube(FAST, stated=STATED, fittings=[NominalFitting(2.9, 1.5, Measured(1.5))])

    def given(s, value):
        return replace(s, fittings=(replace(s.fittings[0], loss_coefficient=Measured(value, 0.1)),))

    hold(survey, lambda s: given(s, 1.5), lambda s, part: given(s, 1.5 + part * 0.1))


def test_the_flow_of_a_run_is_its_own():
    """Over one bore the flow error of a run is felt in f alone, twice: f = 2 g D S / V²."""
    survey, _ = tube(FAST, stated=STATED)
    there = reduce(with_stated(survey, flow=Stated(4e-3, relative=True)))
    slope, factor = shared(there)
    assert (slope < 1e-6).all()
    np.testing.assert_allclose(factor, 8e-3, rtol=1e-3)


def test_the_flow_of_a_run_over_two_bores():
    """There the step of the velocity head ties S to the flow; held against a change of every flow, run by run."""
    given = [NominalFitting(430, 0.18, Measured(0.18), change_of_bore=True), NominalFitting(800, 4.0)]
    survey, _ = main(stated=Uncertainties(reading=1e-3), fittings=given)
    uncertain = with_stated(survey, flow=Stated(2e-2, relative=True))
    there = reduce(uncertain)
    moved = reduce(scaled_flow(uncertain, SMALL * 2e-2))
    # all of what the run's own flow does is part of its own scatter
    change = np.abs(moved.runs["slope"] - there.runs["slope"]).to_numpy(float) / SMALL
    random = there.runs["slope_u_random"].to_numpy(float)
    assert (random >= 0.99 * change).all()
    assert (random > reduce(survey).runs["slope_u_random"].to_numpy(float)).all()


def test_the_friction_factor_of_a_bench_by_hand():
    """JCGM 100, 5.1: all of a bench's uncertainties put together by hand, for the fastest run."""
    survey, _ = tube(
        FAST,
        stated=Uncertainties(
            reading=4e-4, flow=4e-3, flow_scale=3e-3, chainage=1e-3, scale=5e-4, temperature=0.2
        ),
    )
    survey = with_bore(survey, 0, TUBE.diameter, 3e-5)
    row = reduce(survey).runs.iloc[-1]
    x = np.array([tap.chainage for tap in survey.taps])
    spread = np.sqrt(((x - x.mean()) ** 2).sum())
    slope = row["slope"]
    by_reading = 4e-4 * (1 - 1.1992 / 999) / spread
    by_chainage = slope * 1e-3 / spread
    relative_s = np.sqrt(by_reading**2 + by_chainage**2 + (slope * 5e-4) ** 2) / slope
    assert row["slope_u"] / slope == pytest.approx(relative_s, rel=0.005)
    relative_f = np.sqrt(relative_s**2 + (5 * 3e-5 / TUBE.diameter) ** 2 + (2 * 4e-3) ** 2 + (2 * 3e-3) ** 2)
    assert row["friction_factor_u"] / row["friction_factor"] == pytest.approx(relative_f, rel=0.005)


@pytest.mark.parametrize("what", ["bore", "flow scale", "temperature"])
def test_the_roughness_of_a_run_follows_its_inputs(what):
    """The limits of one run's roughness are what 1.96 standard uncertainties of the only uncertain input make of it."""
    survey, _ = tube(FAST, stated=Uncertainties(reading=1e-6))
    if what == "bore":
        u = 1e-5
        uncertain = with_bore(survey, 0, TUBE.diameter, u)
        sides = [with_bore(survey, 0, TUBE.diameter + side * 1.96 * u, None) for side in (-1, 1)]
    elif what == "flow scale":
        uncertain = with_stated(survey, flow_scale=1e-3)
        sides = [scaled_flow(survey, side * 1.96e-3) for side in (1, -1)]
    else:
        uncertain = with_stated(survey, temperature=0.3)
        sides = [
            with_runs(survey, temperature=survey.runs["temperature"] + side * 1.96 * 0.3) for side in (-1, 1)
        ]
    found = reduce(uncertain).runs
    limits = sorted(
        (reduce(side).runs["roughness_signed"].to_numpy(float) for side in sides), key=lambda one: one[0]
    )
    centre = found["roughness"].to_numpy(float)
    # first order in ln f: the width is held, not each side's curvature; t of 32 degrees of freedom, as f has, is 2.04
    width = (found["roughness_high"] - found["roughness_low"]).to_numpy(float)
    np.testing.assert_allclose(width / centre, (limits[1] - limits[0]) / centre, rtol=0.05)


@pytest.mark.parametrize("what", ["bore", "flow scale", "flow"])
def test_the_loss_coefficient_of_one_run_follows_its_inputs(what):
    """With one flowing run K is that run's, and its uncertainty what the only uncertain input makes of it."""
    survey, _ = tube(FAST[-1:], stated=Uncertainties(reading=1e-4), fittings=[NominalFitting(2.9, 1.5)])
    share = {"bore": 3e-5, "flow scale": 3e-3, "flow": 4e-3}[what]
    stated, shift = {
        "bore": (
            lambda s: with_bore(s, 0, TUBE.diameter, share),
            lambda s, d: with_bore(s, 0, TUBE.diameter + d, share),
        ),
        "flow scale": (lambda s: with_stated(s, flow_scale=share), scaled_flow),
        "flow": (lambda s: with_stated(s, flow=Stated(share, relative=True)), scaled_flow),
    }[what]
    plain, there = reduce(survey).fittings.iloc[0], reduce(stated(survey)).fittings.iloc[0]
    moved = reduce(shift(stated(survey), SMALL * share)).fittings.iloc[0]
    change = abs(moved["loss_coefficient"] - there["loss_coefficient"]) / SMALL
    found = np.sqrt(there["loss_coefficient_u"] ** 2 - plain["loss_coefficient_u"] ** 2)
    assert found == pytest.approx(change, rel=0.01)
    # K goes with V², so with D⁴ and 1/Q²
    power = {"bore": 4 / TUBE.diameter, "flow scale": 2, "flow": 2}[what]
    assert change / there["loss_coefficient"] == pytest.approx(power * share, rel=0.01)


def test_the_loss_coefficient_of_one_run_follows_the_chainages():
    """One uncertainty for all taps: the changes by each tap add up as squares."""
    survey, _ = tube(FAST[-1:], stated=Uncertainties(reading=1e-4), fittings=[NominalFitting(2.9, 1.5)])
    uncertain = with_stated(survey, chainage=1e-3)
    plain, there = reduce(survey).fittings.iloc[0], reduce(uncertain).fittings.iloc[0]
    changes = [
        reduce(with_tap(uncertain, i, chainage=tap.chainage + SMALL * 1e-3)).fittings.iloc[0][
            "loss_coefficient"
        ]
        - there["loss_coefficient"]
        for i, tap in enumerate(survey.taps)
    ]
    found = np.sqrt(there["loss_coefficient_u"] ** 2 - plain["loss_coefficient_u"] ** 2)
    assert found == pytest.approx(np.sqrt(np.sum(np.square(changes))) / SMALL, rel=0.01)


def test_what_nobody_stated_contributes_nothing():
    survey, _ = main(stated=Uncertainties(reading=5e-3))
    found = reduce(survey).runs
    np.testing.assert_allclose(found["slope_u"], found["slope_u_random"], rtol=1e-9)
    assert len(found) == 2 * len(MAIN_FLOWS)
