"""The comparison of laws against a dense likelihood, its verdicts, and departures that were put in."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.stats import chi2

from gradeline.fitting.departures import measure_departures
from gradeline.fitting.laws import NONE, NOT_TOLD, compare_laws
from gradeline.fitting.wall import WallData, fit_wall, law_log_slope
from gradeline.hydraulics.friction_laws import COLEBROOK_WHITE, SAND_GRAIN, SMOOTH

G, D, NU = 9.81, 0.05, 1.0e-6
V = np.geomspace(0.2, 4.0, 10)[:, None]


def wall_data(
    *, law=COLEBROOK_WHITE, roughness=1e-4, reading_u=2e-5, bore_u=0.002, seed=1, noise=1.0, velocity=V
):
    """Runs of one pipe by a law; scatter of S, each run's own flow and the shared bore and flow scale drawn."""
    rng = np.random.default_rng(seed)
    runs = len(velocity)
    data = WallData(
        slope=np.ones((runs, 1)),
        slope_covariance=np.full((runs, 1, 1), reading_u**2),
        velocity=velocity,
        diameter=np.array([D]),
        kinematic_viscosity=np.full(runs, NU),
        gravity=G,
        flow_u=np.full(runs, 0.004),
        own_slope_effect=np.zeros((runs, 1)),
        viscosity_u=np.zeros(runs),
        slope_effect=np.zeros((runs, 1, 2)),
        diameter_effect=np.array([[bore_u, 0.0]]),
        flow_effect=np.array([0.0, 0.003]),
        viscosity_effect=np.zeros((runs, 2)),
        gravity_effect=np.zeros(2),
    )
    bore, scale = noise * rng.standard_normal(2)
    own = noise * rng.standard_normal((runs, 1))
    true = replace(
        data,
        law=law,
        diameter=data.diameter * (1 - bore_u * bore),
        velocity=velocity * (1 - 0.003 * scale) * (1 - 0.004 * own) / (1 - bore_u * bore) ** 2,
    )
    slope = np.exp(law_log_slope(true, roughness)) + noise * reading_u * rng.standard_normal((runs, 1))
    return replace(data, slope=slope)


def fitted(data):
    return fit_wall(data, np.isfinite(data.slope))


def dense(data, fit):
    """C written out, all effects by finite differences of the law at the fitted roughness."""

    def log_slope(flow=0.0, bore=0.0):
        changed = replace(
            data, diameter=data.diameter * (1 + bore), velocity=data.velocity * (1 + flow) / (1 + bore) ** 2
        )
        return law_log_slope(changed, fit.roughness)[:, 0]

    base, step = log_slope(), 1e-5
    by_flow, by_bore = (log_slope(flow=step) - base) / step, (log_slope(bore=step) - base) / step
    own = np.diag((0.004 * by_flow) ** 2 + data.slope_covariance[:, 0, 0] / np.exp(2 * base))
    shared = [0.002 * by_bore, 0.003 * by_flow]
    return own + sum(np.outer(one, one) for one in shared)


@pytest.mark.parametrize("law", [COLEBROOK_WHITE, SAND_GRAIN])
def test_chi_squares_are_those_of_the_dense_likelihood(law):
    data = wall_data(law=law)
    fit = fitted(data)
    found = compare_laws(data, fit)
    if not found.used.all():
        pytest.fail("these runs are all sound")
    # Where sand explains more runs its own covariance is taken; here both keep all of them.
    inverse = np.linalg.inv(dense(data, fit))
    for one, kind in zip(found.fits, (COLEBROOK_WHITE, SAND_GRAIN, SMOOTH), strict=True):
        held = replace(data, law=kind)

        def squares(log_size, held=held):
            rest = (np.log(held.slope) - law_log_slope(held, np.exp(log_size)))[:, 0]
            return float(rest @ inverse @ rest)

        starts = np.linspace(np.log(1e-9), np.log(4e-3), 400)
        near = starts[int(np.argmin([squares(one) for one in starts]))]
        least = minimize_scalar(squares, bounds=(near - 0.1, near + 0.1), method="bounded").fun
        assert one.chi_square == pytest.approx(least, rel=2e-3, abs=1e-3)


@pytest.mark.parametrize(
    ("law", "roughness", "velocity", "verdict"),
    [
        (COLEBROOK_WHITE, 1e-4, V, "Colebrook–White"),
        (SAND_GRAIN, 1e-4, V, "sand-grain"),
        (SMOOTH, 0.0, V, "smooth"),
        # fully rough in every run: the laws are one
        (COLEBROOK_WHITE, 2.5e-3, np.geomspace(2.0, 6.0, 10)[:, None], NOT_TOLD),
    ],
)
def test_the_law_behind_the_runs_is_named(law, roughness, velocity, verdict):
    data = wall_data(law=law, roughness=roughness, velocity=velocity, noise=0.3)
    found = compare_laws(data, fitted(data))
    assert found.verdict == verdict
    named = next((one for one in found.fits if one.law == verdict), None)
    if named is not None and roughness > 0:
        assert named.roughness == pytest.approx(roughness, rel=0.05)


def test_runs_that_no_law_gives():
    data = wall_data()
    steep = replace(data, slope=data.slope * (V / 1.0) ** 0.15)  # f grows by 41 % a decade against any law
    found = compare_laws(steep, fitted(steep))
    assert found.verdict == NONE
    wild = replace(data, slope=data.slope * np.exp(0.05 * np.resize([1.0, -1.0], (10, 1))))
    found = compare_laws(wild, fitted(wild))
    assert found.verdict == NONE
    assert found.fit_p < 0.01
    least = min(one.chi_square for one in found.fits)
    assert found.fit_p == pytest.approx(chi2.sf(least, found.used.sum() - 1), rel=1e-9)


def test_scatter_that_the_runs_alone_tell_is_counted_in_itself():
    data = wall_data(noise=0.5)
    unknown = replace(data, slope_covariance=np.full((10, 1, 1), np.nan))
    found = compare_laws(unknown, fitted(unknown))
    assert np.isnan(found.fit_p)
    least = min(one.chi_square for one in found.fits)
    assert least == pytest.approx(found.used.sum() - 1)
    assert found.verdict == "Colebrook–White"
    assert found.needed > 4.0  # Student's t of nine degrees of freedom, squared


def test_too_few_runs_are_not_compared():
    data = wall_data(velocity=V[:2])
    fit = fitted(data)
    assert compare_laws(data, fit) is None
    departures = measure_departures(data, fit)
    assert np.isnan(departures.intercept.value)
    assert not departures.trend.beyond_chance


def test_an_intercept_is_measured_and_told_from_a_trend():
    data = wall_data(noise=0.2, seed=3)
    shifted = replace(data, slope=data.slope + 6e-4)
    found = measure_departures(shifted, fitted(shifted))
    assert found.intercept.beyond_chance
    assert found.intercept.rise > found.trend.rise
    assert abs(found.intercept.value - 6e-4) < 3 * found.intercept.u
    tilted = replace(data, slope=data.slope * V**0.05)
    found = measure_departures(tilted, fitted(tilted))
    assert found.trend.beyond_chance
    # f ∝ V^0.05 is 0.05 ln 10 a decade
    assert abs(found.trend.value - 0.05 * np.log(10)) < 3 * found.trend.u


def test_departures_of_sound_runs_are_spread_as_they_say():
    """Over 150 draws: their scores have unit spread, and hardly any is beyond chance at 1 %."""
    scores, beyond = [], 0
    for seed in range(150):
        data = wall_data(seed=seed)
        found = measure_departures(data, fitted(data))
        scores.append([found.trend.value / found.trend.u, found.intercept.value / found.intercept.u])
        beyond += found.trend.beyond_chance + found.intercept.beyond_chance
    assert np.std(scores, axis=0) == pytest.approx([1.0, 1.0], abs=0.2)
    assert beyond <= 9  # of 300; 3 expected, three standard errors above
