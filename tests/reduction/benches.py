"""Surveys without noise for the tests of the reduction, and the changes that are made to them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from gradeline.quantities import Measured
from gradeline.survey import Gauge, Observation, Survey, Tap
from tests.simulate.surveys import BOARD_ZERO, NominalFitting, NominalReach, Truth, make_survey
from tests.simulate.water import air_density, density

TAPS = np.linspace(0.2, 5.3, 10)
#: m³/s: one laminar, one critical, four turbulent runs in a bore of 26.64 mm.
FLOWS = (2.5e-5, 6e-5, 3e-4, 6e-4, 1e-3, 1.4e-3)
FAST = FLOWS[2:]
TUBE = NominalReach(0.0, 5.5, 0.02664, 1e-4)

#: A main of two bores with a valve, the contraction by 0.5 (1 − β²) of the smaller bore's velocity head (common
#: practice for a sudden contraction, as in DESIGN and most handbooks).
MAIN = (NominalReach(0, 430, 0.254, 9e-4), NominalReach(430, 1210, 0.203, 9e-4))
MAIN_TAPS = np.array([15, 140, 275, 415, 445, 610, 790, 815, 1000, 1195.0])
MAIN_FLOWS = (0.025, 0.035, 0.045, 0.055, 0.065, 0.075)
CONTRACTION = 0.5 * (1 - (0.203 / 0.254) ** 2)
VALVE = 4.0

#: kg/m³: air at 20 °C, 101.325 kPa and 50 % humidity by the CIPM-2007 formula, from memory.
MOIST_AIR = 1.1992
#: K: a grid point of the simulator's table of water properties, which is exact there.
KELVIN = 288.0


def exact_air(survey: Survey) -> Survey:
    """Return the survey with columns in the moist air that a reduction takes; the simulator's air is dry."""
    rho = density(survey.runs["temperature"].to_numpy(float))[:, None]
    ratio = (1 - air_density(293.15) / rho) / (1 - MOIST_AIR / rho)
    return replace(survey, readings=(survey.readings + BOARD_ZERO) * ratio - BOARD_ZERO)


def tube(
    flows: Sequence[float] = FLOWS, *, sigma: float = 1e-9, seed: int = 1, **more
) -> tuple[Survey, Truth]:
    """Return a single tube with ten columns."""
    given = {"chainage": TAPS, "reaches": [TUBE], "temperature": KELVIN, "draw": False} | more
    survey, truth = make_survey(np.random.default_rng(seed), flows=flows, sigma=sigma, **given)
    return exact_air(survey), truth


def main(
    flows: Sequence[float] = MAIN_FLOWS, *, sigma: float = 1e-9, seed: int = 1, **more
) -> tuple[Survey, Truth]:
    """Return a main of two bores with a valve whose K is to be fitted."""
    given = {
        "chainage": MAIN_TAPS,
        "reaches": MAIN,
        "temperature": KELVIN,
        "draw": False,
        "fittings": [NominalFitting(430, CONTRACTION, None), NominalFitting(800, VALVE)],
    } | more
    survey, truth = make_survey(np.random.default_rng(seed), flows=flows, sigma=sigma, **given)
    return exact_air(survey), truth


def on_pressure_gauges(
    survey: Survey, truth: Truth, elevation: np.ndarray, above: np.ndarray, *, lift: float = 10.0
) -> Survey:
    """Read the same heads, `lift` m higher, on pressure gauges `above` m over taps at `elevation` m.

    The gauge shows what the water at its own height has over the air at that height:
    p = ρ g (h − z_tap) − ρ g (z_gauge − z_tap) + ρ_a g z_gauge, both counted from the atmosphere at the datum.
    """
    rho, g = density(truth.temperature)[:, None], survey.site.gravity.value
    at = elevation + above
    pressure = rho * g * (truth.heads + lift - at) + MOIST_AIR * g * at
    readings = survey.readings.copy()
    readings[:] = pressure
    taps = tuple(
        Tap(tap.name, tap.chainage, float(z), gauge="dial", gauge_elevation=float(z_g))
        for tap, z, z_g in zip(survey.taps, elevation, at, strict=True)
    )
    return replace(
        survey,
        taps=taps,
        gauges=(Gauge("dial", "pressure gauge"),),
        observations=tuple(Observation("dial", tap.name) for tap in taps),
        readings=readings,
    )


def hilly(flows: Sequence[float] = FLOWS, **more) -> tuple[Survey, Truth]:
    """Return the tube on pressure gauges, taps and gauges at different elevations."""
    survey, truth = tube(flows, **more)
    elevation = np.array([0.3, 1.2, 2.1, 2.6, 2.0, 1.1, 0.4, -0.3, -0.8, 0.1])
    above = np.array([0.0, 0.5, -0.2, 0.0, 1.5, 0.3, -0.4, 0.0, 0.2, 0.9])
    return on_pressure_gauges(survey, truth, elevation, above), truth


def with_stated(survey: Survey, **changes) -> Survey:
    """Return the survey with other stated uncertainties."""
    return replace(survey, stated=replace(survey.stated, **changes))


def with_gauge(survey: Survey, **changes) -> Survey:
    """Return the survey with other keys of its one gauge."""
    return replace(survey, gauges=(replace(survey.gauges[0], **changes),))


def with_tap(survey: Survey, place: int, **changes) -> Survey:
    """Return the survey with another statement of one tap."""
    taps = list(survey.taps)
    taps[place] = replace(taps[place], **changes)
    return replace(survey, taps=tuple(taps))


def with_bore(survey: Survey, place: int, value: float, u: float | None) -> Survey:
    """Return the survey with another bore of one reach."""
    reaches = list(survey.reaches)
    reaches[place] = replace(reaches[place], diameter=Measured(value, u))
    return replace(survey, reaches=tuple(reaches))


def with_runs(survey: Survey, **columns) -> Survey:
    """Return the survey with other columns of its table of runs."""
    return replace(survey, runs=survey.runs.assign(**columns))
