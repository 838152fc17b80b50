"""What each input does to ε, against dense matrices and against fits to moved slopes; the likelihood against its parts."""

from __future__ import annotations

from dataclasses import replace

import fluids
import numpy as np
import pytest
from scipy.stats import norm

from gradeline.fitting.wall import WallData, best_roughness, fit_wall, likelihood_rise
from gradeline.fitting.wall_errors import expected_interval, halved, wall_errors

G, RUNS = 9.81, 7
BORES, NU = np.array([0.05, 0.04]), 1.1e-6
#: Inputs: the two bores, the flow's calibration, temperature, a tap's place.
BORE_U, SCALE_U, NU_U = (1.0e-3, 1.5e-3), 3e-3, 5e-3
FLOW_U, OWN_NU_U, SCATTER = 4e-3, 2e-3, 3e-5


def log_law(roughness, bores=BORES, flow=1.0, nu=1.0):
    """ln S by Colebrook–White as `fluids` solves it, (R, K)."""
    q = flow * np.linspace(1.5e-3, 6e-3, RUNS)[:, None]
    v = q / (np.pi / 4 * bores**2)
    f = np.vectorize(fluids.Colebrook)(v * bores / (NU * nu), roughness / bores)
    return np.log(f * v**2 / (2 * G * bores))


def wall(roughness):
    q = np.linspace(1.5e-3, 6e-3, RUNS)[:, None]
    effect = np.zeros((RUNS, 2, 5))
    effect[:, 0, 4] = 4e-4 * np.exp(log_law(roughness))[:, 0]
    return WallData(
        slope=np.exp(log_law(roughness)),
        slope_covariance=SCATTER**2 * np.array([[1.0, 0.3], [0.3, 1.5]]) * np.ones((RUNS, 1, 1)),
        velocity=q / (np.pi / 4 * BORES**2),
        diameter=BORES,
        kinematic_viscosity=np.full(RUNS, NU),
        gravity=G,
        flow_u=np.full(RUNS, FLOW_U),
        own_slope_effect=np.zeros((RUNS, 2)),
        viscosity_u=np.full(RUNS, OWN_NU_U),
        slope_effect=effect,
        diameter_effect=np.array([[BORE_U[0], 0, 0, 0, 0], [0, BORE_U[1], 0, 0, 0]]),
        flow_effect=np.array([0, 0, SCALE_U, 0, 0]),
        viscosity_effect=np.tile([0, 0, 0, NU_U, 0], (RUNS, 1)),
        gravity_effect=np.zeros(5),
    )


def moved(function, step=1e-3):
    """How ln S − ln S_law moves with a relative change of what the law is worked out with, (R K,)."""
    return -((function(step) - function(-step)) / (2 * step)).ravel()


def dense(roughness, at):
    """Gain, shared effects, and covariance of all else, with nothing of the program but the numbers above."""
    shared = np.stack(
        [
            BORE_U[0] * moved(lambda h: log_law(roughness, bores=BORES * [1 + h, 1])),
            BORE_U[1] * moved(lambda h: log_law(roughness, bores=BORES * [1, 1 + h])),
            SCALE_U * moved(lambda h: log_law(roughness, flow=1 + h)),
            NU_U * moved(lambda h: log_law(roughness, nu=1 + h)),
            np.tile([4e-4, 0.0], RUNS),
        ],
        axis=1,
    )
    law = np.exp(log_law(roughness))
    parts = {name: np.zeros((2 * RUNS, 2 * RUNS)) for name in ("own_flow", "own_viscosity", "scatter")}
    flow = FLOW_U * moved(lambda h: log_law(roughness, flow=1 + h))
    thin = OWN_NU_U * moved(lambda h: log_law(roughness, nu=1 + h))
    for run in range(RUNS):
        one = slice(2 * run, 2 * run + 2)
        parts["own_flow"][one, one] = np.outer(flow[one], flow[one])
        parts["own_viscosity"][one, one] = np.outer(thin[one], thin[one])
        parts["scatter"][one, one] = (
            SCATTER**2 * np.array([[1.0, 0.3], [0.3, 1.5]]) / np.outer(law[run], law[run])
        )
    whole = sum(parts.values()) + shared @ shared.T
    step = 1e-3 * at
    gradient = ((log_law(at + step) - log_law(at - step)) / (2 * step)).ravel()
    turned = np.linalg.solve(whole, gradient)
    return turned / (gradient @ turned), shared, parts


@pytest.mark.parametrize(("roughness", "at"), [(2e-4, None), (5e-6, None), (1e-6, 4e-6)])
def test_contributions_are_those_of_dense_matrices(roughness, at):
    data = wall(roughness)
    fit = fit_wall(data, np.isfinite(data.slope))
    assert fit.roughness == pytest.approx(roughness, rel=1e-6)
    found = wall_errors(data, fit, at)
    gain, shared, parts = dense(roughness, roughness if at is None else at)
    np.testing.assert_allclose(np.abs(found.shared), np.abs(gain @ shared), rtol=1e-3, atol=1e-5 * found.u)
    for name, covariance in parts.items():
        assert getattr(found, name) == pytest.approx(np.sqrt(gain @ covariance @ gain), rel=1e-3), name
    total = sum((gain @ covariance @ gain) for covariance in parts.values()) + ((gain @ shared) ** 2).sum()
    assert found.u == pytest.approx(np.sqrt(total), rel=1e-3)


def test_a_shared_error_moves_the_fit_by_its_contribution():
    """Slopes measured in a bore that is a little larger than stated, fitted as if it were not."""
    data = wall(2e-4)
    fit = fit_wall(data, np.isfinite(data.slope))
    found = wall_errors(data, fit)
    changed = [
        best_roughness(replace(data, slope=np.exp(log_law(2e-4, bores=BORES * [1 + h, 1]))), fit)
        for h in (0.05 * BORE_U[0], -0.05 * BORE_U[0])
    ]
    assert abs(changed[0] - changed[1]) / 0.1 == pytest.approx(abs(found.shared[0]), rel=0.01)


@pytest.mark.parametrize(
    ("what", "part"),
    [
        (np.array([True, True, False, False, False]), None),
        ("own_flow", "own_flow"),
        ("own_viscosity", "own_viscosity"),
        ("scatter", "scatter"),
    ],
)
def test_half_an_input_is_half_its_part_of_the_covariance(what, part):
    data = wall(2e-4)
    fit = fit_wall(data, np.isfinite(data.slope))
    _, shared, parts = dense(2e-4, 2e-4)
    whole = sum(parts.values()) + shared @ shared.T
    mine = shared[:, what] @ shared[:, what].T if part is None else parts[part]
    whole = whole - 0.75 * mine
    step = 1e-3 * 2e-4
    gradient = ((log_law(2e-4 + step) - log_law(2e-4 - step)) / (2 * step)).ravel()
    expected = (gradient @ np.linalg.solve(whole, gradient)) ** -0.5
    assert wall_errors(*halved(data, fit, what)).u == pytest.approx(expected, rel=1e-3)


def test_the_likelihood_rises_to_the_interval_and_the_bound():
    """Δχ² = 3.84 at both ends of a 95 % interval and 2.71 at the one-sided bound: squares of 1.960 and 1.645."""
    data = wall(2e-4)
    rng = np.random.default_rng(3)
    data = replace(data, slope=data.slope * np.exp(0.004 * rng.standard_normal(data.slope.shape)))
    fit = fit_wall(data, np.isfinite(data.slope))
    rise = likelihood_rise(data, fit, np.array([fit.low, fit.roughness, fit.high, fit.upper95]))
    expected = [norm.ppf(0.975) ** 2, 0.0, norm.ppf(0.975) ** 2, norm.ppf(0.95) ** 2]
    np.testing.assert_allclose(rise, expected, atol=1e-6)


def test_the_interval_to_be_expected_is_that_of_slopes_on_the_law():
    data = wall(2e-4)
    rng = np.random.default_rng(3)
    noisy = replace(data, slope=data.slope * np.exp(0.004 * rng.standard_normal(data.slope.shape)))
    fit = fit_wall(noisy, np.isfinite(data.slope))
    ideal = replace(data, slope=np.exp(log_law(fit.roughness)))
    again = fit_wall(ideal, np.isfinite(data.slope))
    expected = (again.low, again.high, again.upper95)
    np.testing.assert_allclose(expected_interval(noisy, fit), expected, rtol=1e-5)
