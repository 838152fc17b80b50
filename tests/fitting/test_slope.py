"""A run's line: certified fits, unequal weights, gaps, and parameters that the taps cannot separate."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import block_diag

from gradeline.fitting.slope import fit_lines, project

RNG = np.random.default_rng(11)


def fit(y, design, variance=None, used=None, effect=None):
    y = np.atleast_2d(np.asarray(y, dtype=float))
    used = np.isfinite(y) if used is None else used
    variance = np.ones((len(y), 1)) if variance is None else variance
    return fit_lines(
        y, design, project(design, variance, used, None if effect is None else effect[:, :, None])
    )


def gls(y, design, covariance):
    """Generalised least squares with the covariance written out, by whitening and `lstsq`."""
    whiten = np.linalg.inv(np.linalg.cholesky(covariance))
    theta, *_ = np.linalg.lstsq(whiten @ design, whiten @ y, rcond=None)
    inverse = np.linalg.inv(covariance)
    return (
        theta,
        np.linalg.inv(design.T @ inverse @ design),
        (y - design @ theta) @ inverse @ (y - design @ theta),
    )


# NIST/ITL Statistical Reference Datasets, Linear Least Squares Regression, data set Norris (J. Norris, NIST,
# "Calibration of Ozone Monitors"): y, x; certified values from the same file.
NORRIS = np.fromstring(
    """
    0.1 0.2  338.8 337.4  118.1 118.2  888.0 884.6  9.2 10.1  228.1 226.5  668.5 666.3  998.5 996.3  449.1 448.6
    778.9 777.0  559.2 558.2  0.3 0.4  0.1 0.6  778.1 775.5  668.8 666.9  339.3 338.0  448.9 447.5  10.8 11.6
    557.7 556.0  228.3 228.1  998.0 995.8  888.8 887.6  119.6 120.2  0.3 0.3  0.6 0.3  557.6 556.8  339.3 339.1
    888.0 887.2  998.5 999.0  778.9 779.0  10.2 11.1  117.6 118.3  228.9 229.2  668.4 669.1  449.2 448.9  0.2 0.5
    """,
    sep=" ",
).reshape(36, 2)


def test_nist_norris_to_nine_digits():
    y, x = NORRIS.T
    fits = fit(y, np.column_stack([np.ones(36), x]))
    variance = fits.sum_of_squares[0] / fits.dof[0]
    assert fits.dof[0] == 34
    np.testing.assert_allclose(fits.parameters[0], [-0.262323073774029, 1.00211681802045], rtol=1e-9)
    np.testing.assert_allclose(
        np.sqrt(variance * np.diag(fits.parameter_covariance()[0])),
        [0.232818234301152, 0.429796848199937e-03],
        rtol=1e-9,
    )
    assert np.sqrt(variance) == pytest.approx(0.884796396144373, rel=1e-9)


def test_nist_nointercept_1_to_nine_digits():
    """NIST StRD, NoInt1: y = b x through the origin; certified values from the data set's page."""
    x, y = np.arange(60.0, 71.0), np.arange(130.0, 141.0)
    fits = fit(y, x[:, None])
    assert fits.dof[0] == 10
    variance = fits.sum_of_squares[0] / 10
    assert fits.sum_of_squares[0] == pytest.approx(127.272727272727, rel=1e-9)
    assert fits.parameters[0, 0] == pytest.approx(2.07438016528926, rel=1e-9)
    assert np.sqrt(variance * fits.parameter_covariance()[0, 0, 0]) == pytest.approx(
        0.0165289256198347, rel=1e-9
    )


def test_iso_28037_weighted_line():
    """ISO/TS 28037:2010, p. 13: known equal uncertainties of y, values as printed to their last digit."""
    x, y = np.arange(1.0, 7.0), [3.3, 5.6, 7.1, 9.3, 10.7, 12.1]
    fits = fit(y, np.column_stack([np.ones(6), x]), np.full((1, 6), 0.5**2))
    covariance = fits.parameter_covariance()[0]
    np.testing.assert_allclose(fits.parameters[0], [1.866667, 1.757143], atol=5e-7)
    np.testing.assert_allclose(np.sqrt(np.diag(covariance)), [0.4654747, 0.1195229], atol=5e-8)
    assert covariance[0, 1] == pytest.approx(-0.050, abs=5e-4)
    assert fits.sum_of_squares[0] == pytest.approx(1.665, abs=5e-4)


# JCGM 100:2008, annex H.3, table H.6: readings of a thermometer and their corrections, °C.
H3_T = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
H3_B = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]
H3_DESIGN = np.column_stack([np.ones(11), np.array(H3_T) - 20.0])


def test_jcgm_100_h3_calibration_line():
    fits = fit(H3_B, H3_DESIGN)
    assert fits.dof[0] == 9
    variance = fits.sum_of_squares[0] / 9
    covariance = variance * fits.parameter_covariance()[0]
    u = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(fits.parameters[0], [-0.1712, 0.00218], atol=5e-5)
    assert fits.parameters[0, 1] == pytest.approx(0.00218, abs=5e-6)
    assert u[0] == pytest.approx(0.0029, abs=5e-5)
    assert u[1] == pytest.approx(0.00067, abs=5e-6)
    assert covariance[0, 1] / u.prod() == pytest.approx(-0.930, abs=5e-4)
    assert np.sqrt(variance) == pytest.approx(0.0035, abs=5e-5)
    at_30 = np.array([1.0, 10.0])
    assert fits.parameters[0] @ at_30 == pytest.approx(-0.1494, abs=5e-5)
    assert np.sqrt(at_30 @ covariance @ at_30) == pytest.approx(0.0041, abs=5e-5)


def test_jcgm_100_h3_6_a_common_offset_stays_out_of_the_slope():
    """JCGM 100:2008, H.3.6: a systematic u = 0.005 of all b_k; numbers recomputed by GTC's documentation of H.3."""
    plain = fit(H3_B, H3_DESIGN)
    variance = plain.sum_of_squares[0] / 9
    with_offset = fit(H3_B, H3_DESIGN, np.full((1, 11), variance), effect=np.full((1, 11), 0.005))
    np.testing.assert_allclose(with_offset.parameters, plain.parameters, rtol=1e-9)
    u = np.sqrt(np.diag(with_offset.parameter_covariance()[0]))
    assert u[0] == pytest.approx(0.00576893, abs=1e-8)
    assert u[1] == pytest.approx(0.00066794, abs=1e-8)


@pytest.mark.parametrize("seed", range(6))
def test_unequal_weights_gaps_and_flow_error_against_explicit_covariance(seed):
    rng = np.random.default_rng(seed)
    runs, n, p = 9, 11, 4
    design = rng.standard_normal((n, p))
    y = rng.standard_normal((runs, n))
    variance = rng.uniform(0.2, 5.0, (runs, n))
    effect = rng.normal(0.0, 2.0, (runs, n))
    y[rng.random((runs, n)) < 0.2] = np.nan
    fits = fit(y, design, variance, effect=effect)
    for run in range(runs):
        here = np.isfinite(y[run])
        covariance = np.diag(variance[run, here]) + np.outer(effect[run, here], effect[run, here])
        theta, of_theta, chi_square = gls(y[run, here], design[here], covariance)
        np.testing.assert_allclose(fits.parameters[run], theta, rtol=1e-8, atol=1e-10)
        np.testing.assert_allclose(fits.parameter_covariance()[run], of_theta, rtol=1e-8, atol=1e-10)
        assert fits.sum_of_squares[run] == pytest.approx(chi_square, rel=1e-8)
        assert fits.dof[run] == here.sum() - p
        np.testing.assert_allclose(fits.residuals[run, here], y[run, here] - design[here] @ theta, atol=1e-9)
        assert np.isnan(fits.residuals[run, ~here]).all()


def test_runs_of_one_pattern_share_a_projector_and_equal_variances_may_come_as_one_column():
    x = np.linspace(0.0, 3.0, 7)
    design = np.column_stack([np.ones(7), -x])
    y = 1.0 - RNG.uniform(0.1, 0.5, (50, 1)) * x + 0.01 * RNG.standard_normal((50, 7))
    y[20, 3] = np.nan
    variance = RNG.uniform(0.5, 2.0, (50, 1))
    short, long = fit(y, design, variance), fit(y, design, np.broadcast_to(variance, y.shape).copy())
    assert len(short.projectors.gain) == len(long.projectors.gain) == 2
    np.testing.assert_allclose(short.parameters, long.parameters, rtol=1e-12)
    np.testing.assert_allclose(short.parameter_covariance(), long.parameter_covariance(), rtol=1e-10)
    np.testing.assert_allclose(short.sum_of_squares, long.sum_of_squares, rtol=1e-8)


def test_a_large_head_costs_no_digits():
    x = np.linspace(0.0, 5.0, 10)
    design = np.column_stack([np.ones(10), -x])
    noise = 1e-3 * RNG.standard_normal(10)
    low, high = fit(noise, design), fit(4096.0 + noise, design)
    assert high.parameters[0, 1] == pytest.approx(low.parameters[0, 1], abs=1e-11)
    assert high.sum_of_squares[0] == pytest.approx(low.sum_of_squares[0], rel=1e-7)


def test_two_losses_between_the_same_taps_are_not_told_apart_but_the_slope_is():
    x = np.arange(8.0)
    step = (x > 3.5).astype(float)
    fits = fit(4.0 - 0.1 * x - 0.7 * step, np.column_stack([np.ones(8), -x, -step, -step]))
    assert fits.projectors.estimable[0].tolist() == [True, True, False, False]
    assert np.isnan(fits.parameters[0, 2:]).all()
    np.testing.assert_allclose(fits.parameters[0, :2], [4.0, 0.1], atol=1e-12)
    assert fits.dof[0] == 8 - 3


def test_one_tap_gives_no_slope():
    x = np.array([0.0, 1.0, 2.0])
    design = np.column_stack([np.ones(3), -x])
    fits = fit([[np.nan, 5.0, np.nan], [5.0, 4.0, 3.0], [np.nan] * 3], design)
    assert np.isnan(fits.parameters[[0, 2]]).all()
    np.testing.assert_allclose(fits.parameters[1], [5.0, 1.0], atol=1e-12)
    assert fits.dof.tolist() == [0, 1, 0]


def test_differences_alone_give_the_slope_without_a_level():
    lengths = np.array([1.0, 2.0, 1.5])
    fits = fit(0.2 * lengths, np.column_stack([np.zeros(3), lengths]))
    assert np.isnan(fits.parameters[0, 0])
    assert fits.parameters[0, 1] == pytest.approx(0.2, rel=1e-12)
    assert fits.dof[0] == 2


def test_two_reaches_separated_by_a_missing_tap_lose_only_what_that_tap_gave():
    """Reach 2 has one tap only in run 2: its slope is not estimable there, that of reach 1 is."""
    x = np.array([0.0, 1.0, 2.0, 4.0, 5.0])
    first, second = np.minimum(x, 3.0), np.maximum(x - 3.0, 0.0)
    loss = (x > 3.0).astype(float)
    design = np.column_stack([np.ones(5), -first, -second, -loss])
    y = np.tile(design @ [10.0, 0.1, 0.4, 0.5], (2, 1))
    y[1, 4] = np.nan
    fits = fit(y, design)
    np.testing.assert_allclose(fits.parameters[0], [10.0, 0.1, 0.4, 0.5], atol=1e-10)
    assert np.isfinite(fits.parameters[1]).tolist() == [True, True, False, False]


def test_all_runs_at_once_are_the_runs_one_by_one():
    design = RNG.standard_normal((6, 2))
    y, variance = RNG.standard_normal((4, 6)), RNG.uniform(0.5, 2.0, (4, 6))
    fits = fit(y, design, variance)
    whole, covariance, _ = gls(y.ravel(), block_diag(*[design] * 4), np.diag(variance.ravel()))
    np.testing.assert_allclose(fits.parameters.ravel(), whole, rtol=1e-9)
    np.testing.assert_allclose(
        np.sqrt(np.einsum("rpp->rp", fits.parameter_covariance())).ravel(),
        np.sqrt(np.diag(covariance)),
        rtol=1e-9,
    )


def test_runs_with_different_gaps_never_share_a_projector():
    """17 taps: √2 + √8 = √18, so sums of square roots of whole numbers do not tell these gaps apart."""
    x = np.arange(17.0)
    design = np.column_stack([np.ones(17), -x])
    y = np.vstack([5.0 - 0.1 * x] * 2)
    y[0, [0, 1, 6]] = np.nan
    y[1, [1, 16]] = np.nan
    fits = fit(y, design)
    assert fits.dof.tolist() == [12, 13]
    np.testing.assert_allclose(fits.parameters, [[5.0, 0.1]] * 2, atol=1e-12)
