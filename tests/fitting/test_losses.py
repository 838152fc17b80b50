"""Loss coefficients over the runs: weights, shared errors, effective degrees of freedom."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm
from scipy.stats import t as student

from gradeline.fitting.losses import fit_loss_coefficient


def test_the_weighted_mean_and_its_uncertainty_by_dense_algebra():
    rng = np.random.default_rng(1)
    values, variance, effect = rng.normal(4, 0.1, 7), rng.uniform(0.01, 0.1, 7), rng.normal(0, 0.05, (7, 3))
    fit = fit_loss_coefficient(values, variance, effect)
    weight = (1 / variance) / (1 / variance).sum()
    covariance = np.diag(variance) + effect @ effect.T
    assert fit.coefficient == pytest.approx(np.average(values, weights=1 / variance), rel=1e-12)
    assert fit.u == pytest.approx(np.sqrt(weight @ covariance @ weight), rel=1e-12)
    assert fit.high - fit.coefficient == pytest.approx(norm.ppf(0.975) * fit.u, rel=1e-5)
    assert fit.runs == 7


def test_effective_degrees_of_freedom_of_welch_and_satterthwaite():
    """JCGM 100:2008, G.4.1, eq. G.2b: ν = u_c⁴ / Σ u_i⁴/ν_i, here one component with ν = 9, the other known."""
    random_u, shared_u = 0.25, 0.57
    fit = fit_loss_coefficient(np.array([1.0]), np.array([random_u**2]), np.array([[shared_u]]), dof=9.0)
    effective = (random_u**2 + shared_u**2) ** 2 / (random_u**4 / 9.0)
    assert fit.u == pytest.approx(np.hypot(random_u, shared_u), rel=1e-12)
    assert (fit.high - fit.low) / 2 / fit.u == pytest.approx(student.ppf(0.975, effective), rel=1e-9)


def test_scatter_alone_keeps_its_own_degrees_of_freedom():
    fit = fit_loss_coefficient(
        np.array([2.0, 2.2]), np.array([0.01, 0.01]), np.zeros((2, 0)), dof=5.0, level=0.9
    )
    assert (fit.high - fit.coefficient) / fit.u == pytest.approx(student.ppf(0.95, 5), rel=1e-9)


def test_shared_errors_do_not_average_out():
    many = fit_loss_coefficient(np.full(10_000, 3.0), np.full(10_000, 0.04), np.full((10_000, 1), 0.05))
    assert many.u == pytest.approx(0.05, rel=1e-2)


def test_coverage_over_simulated_valves():
    """2,000 valves, 12 runs each, scatter and a shared error drawn: 95 % within three standard errors."""
    rng = np.random.default_rng(2)
    variance, effect = np.geomspace(0.4, 0.001, 12), np.linspace(0.05, 0.02, 12)[:, None]
    held = 0
    for _ in range(2000):
        values = 3 + np.sqrt(variance) * rng.standard_normal(12) + effect[:, 0] * rng.standard_normal()
        fit = fit_loss_coefficient(values, variance, effect)
        held += fit.low <= 3 <= fit.high
    assert held / 2000 == pytest.approx(0.95, abs=3 * np.sqrt(0.95 * 0.05 / 2000))


def test_runs_without_a_value_do_not_count():
    fit = fit_loss_coefficient(
        np.array([np.nan, 4.0, 5.0]), np.array([0.1, 0.1, np.nan]), np.array([[np.nan], [0.0], [0.0]])
    )
    assert (fit.coefficient, fit.runs) == (4.0, 1)
    assert fit.u == pytest.approx(np.sqrt(0.1))
    none = fit_loss_coefficient(np.array([np.nan]), np.array([np.nan]), np.zeros((1, 0)))
    assert np.isnan(none.coefficient)
    assert none.runs == 0
