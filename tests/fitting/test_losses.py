"""Loss coefficients over the runs: weights, shared errors, effective degrees of freedom."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm
from scipy.stats import t as student

from gradeline.fitting.losses import fit_loss_coefficient, fit_loss_trend


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


def dense_trend(values, variance, effect, reynolds):
    """Slope and standard uncertainty by whitening with the Cholesky factor of the dense covariance."""
    covariance = np.diag(variance) + effect @ effect.T
    root = np.linalg.cholesky(covariance)
    design = np.column_stack([np.ones(len(values)), np.log10(reynolds)])
    white, seen = np.linalg.solve(root, design), np.linalg.solve(root, values)
    inverse = np.linalg.inv(white.T @ white)
    return (inverse @ white.T @ seen)[1], np.sqrt(inverse[1, 1])


def test_the_trend_by_dense_algebra():
    rng = np.random.default_rng(5)
    reynolds = np.geomspace(1e4, 1e5, 9)
    variance = np.geomspace(0.4, 0.01, 9)
    effect = np.column_stack([1e4 / reynolds, np.full(9, 0.02)])
    values = 3 - 0.4 * np.log10(reynolds) + 0.3 * np.sqrt(variance) * rng.standard_normal(9)
    trend = fit_loss_trend(values, variance, effect, reynolds)
    slope, u = dense_trend(values, variance, effect, reynolds)
    assert (trend.slope, trend.slope_u) == (pytest.approx(slope, rel=1e-9), pytest.approx(u, rel=1e-9))
    assert trend.p == pytest.approx(2 * norm.sf(abs(slope) / u), rel=1e-4)
    assert trend.spread == 1.0


def test_a_trend_is_said_by_chance_in_one_of_a_hundred():
    """4,000 constant coefficients with a zero error that looks like a trend; the count within 3.5 standard errors."""
    rng = np.random.default_rng(6)
    reynolds = np.geomspace(1e4, 1e5, 10)
    variance, effect = (2e3 / reynolds) ** 2, (3e3 / reynolds)[:, None]
    said = 0
    for _ in range(4000):
        values = 2 + np.sqrt(variance) * rng.standard_normal(10) + effect[:, 0] * rng.standard_normal()
        said += fit_loss_trend(values, variance, effect, reynolds).p < 0.01
    assert 0 < said <= 4000 * 0.01 + 3.5 * np.sqrt(4000 * 0.01 * 0.99)


def test_runs_that_differ_more_than_stated_raise_the_uncertainty():
    """Scatter five times the stated one: u of the mean and of the trend grow by about that."""
    rng = np.random.default_rng(7)
    reynolds, variance, none = np.geomspace(1e4, 1e5, 40), np.full(40, 0.01), np.zeros((40, 0))
    values = 2 + 0.5 * rng.standard_normal(40)
    trend = fit_loss_trend(values, variance, none, reynolds)
    assert trend.spread == pytest.approx(5, rel=0.35)  # three standard errors of a standard deviation of 40
    fit = fit_loss_coefficient(values, variance, none, excess=trend.excess, excess_dof=trend.spread_dof)
    # Of equal variances the mean has s/√n, s the sample standard deviation, and Student's interval of n − 1.
    deviation = values.std(ddof=1)
    assert fit.u == pytest.approx(deviation / np.sqrt(40), rel=1e-6)
    half = student.ppf(0.975, 39) * deviation / np.sqrt(40)
    assert fit.high - fit.coefficient == pytest.approx(half, rel=1e-6)


def test_three_runs_that_differ_have_the_freedom_of_three_runs():
    """2.0, 2.2, 2.4 of 0.01 each: mean 2.2, s/√3 = 0.11547, t(0.975; 2) = 4.302653 (tables), whatever the readings' own."""
    values, variance, none = np.array([2.0, 2.4, 2.2]), np.full(3, 1e-4), np.zeros((3, 0))
    trend = fit_loss_trend(values, variance, none, np.array([3e4, 4e4, 5e4]), dof=20)
    fit = fit_loss_coefficient(
        values, variance, none, dof=20, excess=trend.excess, excess_dof=trend.spread_dof
    )
    assert trend.spread_dof == 2
    assert fit.coefficient == pytest.approx(2.2)
    assert fit.high - 2.2 == pytest.approx(4.302653 * 0.2 / np.sqrt(3), rel=1e-5)


def test_the_interval_holds_where_flows_nobody_stated_scatter():
    """Three runs, readings that favour the fast one by 8 to 1, a scatter of 0.12 in all alike: 95 % within 4 standard errors."""
    rng = np.random.default_rng(21)
    flow, none, held = np.array([0.9, 1.16, 1.5]), np.zeros((3, 0)), 0
    variance = (0.01 / flow**2) ** 2
    for _ in range(800):
        values = 2 + np.sqrt(variance) * rng.standard_normal(3) + 0.12 * rng.standard_normal(3)
        trend = fit_loss_trend(values, variance, none, 5e4 * flow, dof=18)
        fit = fit_loss_coefficient(
            values, variance, none, dof=18, excess=trend.excess, excess_dof=trend.spread_dof
        )
        held += fit.low <= 2 <= fit.high
    assert held / 800 > 0.95 - 4 * np.sqrt(0.05 * 0.95 / 800)


def test_too_few_runs_or_one_reynolds_number_tell_no_trend():
    few = fit_loss_trend(np.array([2.0, 2.1]), np.full(2, 0.01), np.zeros((2, 0)), np.array([1e4, 1e5]))
    assert np.isnan(few.slope)
    same = fit_loss_trend(np.full(5, 2.0), np.full(5, 0.01), np.zeros((5, 0)), np.full(5, 2e4))
    assert np.isnan(same.p)
