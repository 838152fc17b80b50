"""The exponent of S with V against ordinary and weighted regression."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import linregress, norm
from scipy.stats import t as student

from gradeline.fitting.exponent import fit_exponent

RNG = np.random.default_rng(4)
V = np.geomspace(0.4, 3.0, 9)


def test_nothing_stated_is_ordinary_regression_of_the_logarithms():
    slope = 0.02 * V**1.8 * np.exp(0.02 * RNG.standard_normal(9))
    fit = fit_exponent(V, slope, np.full(9, np.nan))
    line = linregress(np.log(V), np.log(slope))
    assert fit.exponent == pytest.approx(line.slope, rel=1e-10)
    assert fit.u == pytest.approx(line.stderr, rel=1e-10)
    assert fit.high - fit.exponent == pytest.approx(student.ppf(0.975, 7) * line.stderr, rel=1e-8)
    assert fit.runs == 9


def test_stated_uncertainties_weigh_and_bound_from_below():
    u = np.geomspace(0.2, 0.01, 9)
    slope = 0.02 * V**1.75 * np.exp(0.1 * u * RNG.standard_normal(9))  # far quieter than stated
    fit = fit_exponent(V, slope, u, level=0.9)
    fitted = slope
    for _ in range(20):  # until the weights are those at the fitted slopes
        weight = 1 / (u * slope / fitted)
        coefficients, covariance = np.polyfit(np.log(V), np.log(slope), 1, w=weight, cov="unscaled")
        fitted = np.exp(np.polyval(coefficients, np.log(V)))
    assert fit.exponent == pytest.approx(coefficients[0], rel=1e-7)
    assert fit.u == pytest.approx(np.sqrt(covariance[0, 0]), rel=1e-6)
    assert fit.high - fit.exponent == pytest.approx(norm.ppf(0.95) * fit.u, rel=1e-5)


def test_weights_at_the_fitted_slopes_leave_no_bias_to_high_readings():
    """Readings of one absolute scatter: by measured slopes, runs that read high would count for more."""
    rng = np.random.default_rng(8)
    true, sigma = 0.02 * V**1.8, 0.0012
    found = []
    for _ in range(600):
        slope = true + sigma * rng.standard_normal(9)
        found.append(fit_exponent(V, slope, sigma / slope).exponent)
    assert np.mean(found) == pytest.approx(1.8, abs=3 * np.std(found) / np.sqrt(600) + 0.004)


def test_the_runs_own_flow_counts_n_times_and_shared_errors_by_their_shape():
    known = np.full(9, 1e-6)
    laminar = fit_exponent(V, 0.03 * V, known, flow_u=np.full(9, 0.01))
    rough = fit_exponent(V, 0.03 * V**2, known, flow_u=np.full(9, 0.01))
    assert rough.u == pytest.approx(2 * laminar.u, rel=1e-6)
    x = np.log(V)
    assert laminar.u == pytest.approx(0.01 / np.sqrt(((x - x.mean()) ** 2).sum()), rel=1e-6)
    plain = fit_exponent(V, 0.03 * V, np.full(9, 0.01))
    scale = fit_exponent(V, 0.03 * V, np.full(9, 0.01), shared=np.full((9, 1), 0.05))
    assert scale.u == pytest.approx(plain.u, rel=1e-9)  # the same share of S in all runs changes no exponent
    offset = 1e-3 / (0.03 * V)[:, None]  # the same error of S in all runs does
    tilted = fit_exponent(V, 0.03 * V, np.full(9, 0.01), shared=offset)
    moved = fit_exponent(V, 0.03 * V * np.exp(offset[:, 0]), np.full(9, 0.01))
    assert np.sqrt(tilted.u**2 - plain.u**2) == pytest.approx(abs(moved.exponent - 1), rel=0.02)


def test_runs_that_scatter_more_than_stated_say_so():
    slope = 0.02 * V**1.75 * np.exp(0.1 * RNG.standard_normal(9))
    fit = fit_exponent(V, slope, np.zeros(9), flow_u=np.full(9, 0.001))  # of the flow: the weights are equal
    assert fit.u == pytest.approx(linregress(np.log(V), np.log(slope)).stderr, rel=1e-9)
    assert (fit.high - fit.exponent) / fit.u == pytest.approx(student.ppf(0.975, 7), rel=1e-8)


def test_laminar_and_rough_limits():
    """Hagen–Poiseuille: S goes as V; fully rough: as V² (any text on hydraulics)."""
    assert fit_exponent(V, 0.03 * V, np.full(9, 0.01)).exponent == pytest.approx(1.0, abs=1e-12)
    assert fit_exponent(V, 0.03 * V**2, np.full(9, 0.01)).exponent == pytest.approx(2.0, abs=1e-12)


def test_two_runs_one_run_and_falling_lines():
    two = fit_exponent(V[:2], 0.02 * V[:2] ** 1.8, np.full(2, 0.01))
    assert two.exponent == pytest.approx(1.8)
    assert two.u == pytest.approx(0.01 * np.sqrt(2) / np.log(V[1] / V[0]), rel=1e-9)
    unstated = fit_exponent(V[:2], 0.02 * V[:2] ** 1.8, np.full(2, np.nan))
    assert unstated.exponent == pytest.approx(1.8)
    assert np.isnan(unstated.u)
    assert np.isnan(unstated.low)
    assert np.isnan(fit_exponent(V[:1], V[:1], np.ones(1)).exponent)
    assert np.isnan(fit_exponent(np.ones(5), np.ones(5), np.ones(5)).exponent)
    gone = fit_exponent(V, np.where(V < 1, -0.01, 0.02 * V**1.8), np.full(9, 0.01))
    assert gone.runs == int((V >= 1).sum())
    assert gone.exponent == pytest.approx(1.8)
