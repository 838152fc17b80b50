"""Many runs as arrays: the same answers as the plain equations and as the whole reduction, gaps, and bad input."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.errors import ReductionError
from gradeline.reduction.batch import reduce_arrays

X = np.linspace(0.2, 5.4, 12)
BORE = {"diameter": 0.025, "kinematic_viscosity": 1.1e-6, "gravity": 9.81}
AREA = np.pi * 0.025**2 / 4


def smooth(reynolds, relative=0.0):
    """Colebrook–White by fixed-point iteration of its implicit form."""
    root = np.full(np.shape(reynolds), 7.0)
    for _ in range(60):
        root = -2.0 * np.log10(relative / 3.7 + 2.51 * root / reynolds)
    return root**-2


def exact(velocity, relative=2e-4):
    reynolds = velocity * 0.025 / 1.1e-6
    factor = np.where(reynolds < 2000, 64 / reynolds, smooth(reynolds, relative))
    slope = factor * velocity**2 / (2 * 9.81 * 0.025)
    return 2.0 - slope[:, None] * X, velocity * AREA, slope, factor


def test_exact_heads_give_slope_factor_and_roughness_back():
    heads, flow, slope, factor = exact(np.array([0.05, 0.5, 1.0, 2.0]))
    result = reduce_arrays(heads, X, flow, **BORE, reading_u=1e-3)
    np.testing.assert_allclose(result.slope, slope, rtol=1e-9)
    np.testing.assert_allclose(result.friction_factor, factor, rtol=1e-9)
    assert np.isnan(result.roughness[0])  # laminar
    np.testing.assert_allclose(result.roughness[1:], 2e-4 * 0.025, rtol=1e-6)
    # A straight line's slope: σ/sqrt(Σ(x − x̄)²); f is in proportion to S.
    np.testing.assert_allclose(result.slope_u, 1e-3 / np.sqrt(((X - X.mean()) ** 2).sum()), rtol=1e-9)
    np.testing.assert_allclose(result.friction_factor_u / factor, result.slope_u / slope, rtol=1e-9)
    np.testing.assert_allclose(result.scatter, 1e-3, rtol=1e-9)


def test_below_the_smooth_law_the_roughness_is_negative():
    _, flow, slope, _ = exact(np.array([1.5, 2.0]), relative=0.0)
    result = reduce_arrays(2.0 - 0.98 * slope[:, None] * X, X, flow, **BORE)
    assert (result.roughness < 0).all()


def test_slopes_scatter_by_the_uncertainty_that_is_given():
    rng = np.random.default_rng(1)
    heads, flow, slope, factor = exact(np.full(4000, 1.2))
    result = reduce_arrays(heads + 1e-3 * rng.standard_normal(heads.shape), X, flow, **BORE, search=False)
    score = (result.slope - slope) / result.slope_u
    # Standard deviation of a sample's standard deviation: 1/sqrt(2 · 4000).
    assert score.std() == pytest.approx(1.0, abs=4 / np.sqrt(8000))
    score = (result.friction_factor - factor) / result.friction_factor_u
    assert score.std() == pytest.approx(1.0, abs=4 / np.sqrt(8000))


def test_a_bad_reading_is_left_out_only_where_it_is_searched_for():
    rng = np.random.default_rng(2)
    heads, flow, slope, _ = exact(np.linspace(0.5, 2.0, 60))
    heads = heads + 1e-3 * rng.standard_normal(heads.shape)
    heads[30, 11] += 0.05
    searched, plain = (reduce_arrays(heads, X, flow, **BORE, search=search) for search in (True, False))
    assert np.flatnonzero(searched.flagged[30]).tolist() == [11]
    assert not plain.flagged.any()
    assert abs(searched.slope[30] - slope[30]) < 4 * searched.slope_u[30]
    assert abs(plain.slope[30] - slope[30]) > 10 * searched.slope_u[30]
    # A reading fewer: the uncertainty of that run grows by the lost lever arm.
    rest = X[:11]
    ratio = np.sqrt(((X - X.mean()) ** 2).sum() / ((rest - rest.mean()) ** 2).sum())
    assert searched.slope_u[30] / searched.slope_u[29] == pytest.approx(ratio, rel=1e-9)


def test_gaps_and_rising_heads():
    heads, flow, slope, _ = exact(np.array([0.8, 1.0, 1.2, 1.4]))
    heads[0, :11] = np.nan
    heads[1, 3] = np.nan
    heads[2] = heads[2, ::-1]
    result = reduce_arrays(heads, X, flow, **BORE, reading_u=1e-3)
    assert np.isnan(result.slope[0])
    assert np.isnan(result.slope_u[0])
    assert result.slope[1] == pytest.approx(slope[1], rel=1e-9)
    assert result.slope[2] == pytest.approx(-slope[2], rel=1e-9)
    assert np.isnan([result.friction_factor[2], result.friction_factor_u[2], result.roughness[2]]).all()


def test_two_taps_and_nothing_stated_leave_the_uncertainty_unknown():
    heads, flow, slope, _ = exact(np.array([0.8, 1.0, 1.2]))
    result = reduce_arrays(heads[:, [0, 11]], X[[0, 11]], flow, **BORE)
    np.testing.assert_allclose(result.slope, slope, rtol=1e-9)
    assert np.isnan(result.slope_u).all()
    assert np.isnan(result.scatter).all()


def test_no_runs():
    result = reduce_arrays(np.empty((0, 12)), X, np.empty(0), **BORE)
    assert result.slope.shape == (0,)
    assert result.flagged.shape == (0, 12)


@pytest.mark.parametrize(
    ("changed", "text"),
    [
        ({"heads": np.zeros(12)}, r"runs × taps.*found heads \(12,\)"),
        ({"flow": [1e-4, 2e-4]}, r"flow one a run.*flow \(2,\)"),
        ({"flow": [0.0]}, "every flow must be above 0; found 0"),
        ({"flow": [np.nan]}, "every flow must be above 0; found nan"),
        ({"diameter": -0.025}, "every diameter must be above 0; found -0.025"),
        ({"kinematic_viscosity": [1e-6, 1e-6]}, r"one for all runs or one a run; found \(2,\)"),
        ({"kinematic_viscosity": 0.0}, "every kinematic viscosity must be above 0; found 0"),
    ],
)
def test_bad_arrays_are_told_with_what_was_found(changed, text):
    arguments = {"heads": np.zeros((1, 12)), "chainage": X, "flow": [1e-4], **BORE, **changed}
    with pytest.raises(ReductionError, match=text):
        reduce_arrays(**arguments)
