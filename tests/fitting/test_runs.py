"""All runs at once: what the whole of `fit_runs` does with gaps, wild readings, floors and empty surveys."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import linregress

from gradeline.fitting.runs import Model, fit_runs

X = np.linspace(0.0, 4.5, 10)
SLOPE = np.geomspace(0.02, 0.4, 12)
DESIGN = np.column_stack([np.ones(10), -X])


def model(**more):
    return replace(Model(DESIGN, SLOPE * 1.25, np.zeros(10, dtype=int), np.zeros(10)), **more)


def survey(seed, sigma=1e-3):
    rng = np.random.default_rng(seed)
    return 3.0 - SLOPE[:, None] * X + sigma * rng.standard_normal((12, 10))


def fit(heads, told=None, **more):
    return fit_runs(heads, np.isfinite(heads), model() if told is None else told, **more)


def test_sound_runs_are_plain_lines_with_the_pooled_scatter():
    heads = survey(1)
    fits = fit(heads, search=False)
    lines = [linregress(X, run) for run in heads]
    np.testing.assert_allclose(fits.lines.parameters[:, 1], [-line.slope for line in lines], rtol=1e-9)
    np.testing.assert_allclose(fits.lines.parameters[:, 0], [line.intercept for line in lines], rtol=1e-9)
    own = np.array([line.stderr**2 for line in lines])
    assert fits.scatter[0].surge == 0
    # No search, no surge, no floor: the pooled variance is the mean of the runs' own.
    np.testing.assert_allclose(fits.random_covariance()[:, 1, 1], own.mean(), rtol=1e-6)
    assert fits.pooled_dof == 12 * 8


def test_a_flagged_reading_leaves_the_fit_unless_all_are_kept():
    heads = survey(2)
    heads[5, 7] += 0.02
    out, kept = fit(heads), fit(heads, keep_all=True)
    assert np.argwhere(out.flagged).tolist() == np.argwhere(kept.flagged).tolist() == [[5, 7]]
    rest = np.delete(np.arange(10), 7)
    assert out.lines.parameters[5, 1] == pytest.approx(-linregress(X[rest], heads[5, rest]).slope, rel=1e-9)
    assert kept.lines.parameters[5, 1] == pytest.approx(-linregress(X, heads[5]).slope, rel=1e-9)
    line = linregress(X[rest], heads[5, rest])
    assert out.error[5, 7] == pytest.approx(heads[5, 7] - line.intercept - line.slope * X[7], rel=1e-9)
    assert out.score[5, 7] > 6


def test_two_bad_end_taps_side_by_side_are_both_found():
    heads = survey(3)
    heads[4, 8:] += 0.01
    assert np.flatnonzero(fit(heads).flagged[4]).tolist() == [8, 9]


def test_gaps_are_left_out():
    heads = survey(4)
    heads[3, [0, 6]] = np.nan
    fits = fit(heads)
    rest = np.isfinite(heads[3])
    assert fits.lines.dof[3] == 6
    assert fits.lines.parameters[3, 1] == pytest.approx(-linregress(X[rest], heads[3, rest]).slope, rel=1e-9)
    assert np.isnan(fits.lines.residuals[3, [0, 6]]).all()
    assert not fits.flagged[3, [0, 6]].any()


def test_a_stated_uncertainty_holds_the_scatter_up():
    fits = fit(survey(5), model(floor=np.full(10, 4e-3)))
    np.testing.assert_allclose(fits.variance, 16e-6)
    assert fits.scatter[0].pooled == pytest.approx(1e-3, rel=0.25)
    assert not fits.flagged.any()


def test_readings_that_scatter_far_more_than_stated_are_not_judged_one_by_one():
    heads = survey(6, sigma=5e-3)
    heads[2, 3] += 1.0
    fits = fit(heads, model(floor=np.full(10, 1e-3)))
    assert not fits.search.done
    assert "than was stated" in fits.search.reason or "as much as was stated" in fits.search.reason
    assert not fits.flagged.any()


def test_repeats_weigh_by_their_number():
    heads = survey(7)
    repeats = np.ones((12, 10))
    repeats[:, 5] = 4.0
    fits = fit(heads, model(repeats=repeats), search=False)
    weight = np.sqrt(repeats[0])
    theta, *_ = np.linalg.lstsq(weight[:, None] * DESIGN, weight * heads[0], rcond=None)
    np.testing.assert_allclose(fits.lines.parameters[0], theta, rtol=1e-9)


def test_two_gauge_kinds_have_a_scatter_each():
    rng = np.random.default_rng(8)
    kind = np.arange(10) % 2
    slope = np.geomspace(0.02, 0.4, 200)
    heads = 3.0 - slope[:, None] * X + np.where(kind, 4e-3, 1e-3) * rng.standard_normal((200, 10))
    told = Model(DESIGN, slope * 1.25, kind, np.zeros(10))
    fits = fit_runs(heads, np.isfinite(heads), told)
    assert fits.scatter[0].pooled == pytest.approx(1e-3, rel=0.06)
    assert fits.scatter[1].pooled == pytest.approx(4e-3, rel=0.06)


def test_taps_of_one_gauge_with_stated_uncertainties_of_their_own_keep_them():
    """Scatter as stated, 0.5 to 3 mm: the most certain tap is not judged by the scatter of the least certain."""
    rng = np.random.default_rng(9)
    stated = np.linspace(0.5e-3, 3e-3, 10)
    heads = 3.0 - SLOPE[:, None] * X + stated * rng.standard_normal((12, 10))
    fits = fit(heads, model(floor=stated))
    np.testing.assert_allclose(np.sqrt(fits.variance).mean(axis=0), stated, rtol=0.3)


@pytest.mark.parametrize("shape", [(0, 10), (1, 10), (3, 10)])
def test_few_runs(shape):
    heads = survey(10)[: shape[0]]
    told = model(velocity_head=SLOPE[: shape[0]] * 1.25)
    fits = fit_runs(heads, np.isfinite(heads), told)
    assert fits.lines.parameters.shape == (shape[0], 2)
    assert fits.flagged.shape == shape


def test_two_taps_leave_no_scatter_and_no_search():
    heads = survey(11)[:, [0, 9]]
    told = Model(DESIGN[[0, 9]], SLOPE, np.zeros(2, dtype=int), np.zeros(2))
    fits = fit_runs(heads, np.isfinite(heads), told)
    np.testing.assert_allclose(fits.lines.parameters[:, 1], (heads[:, 0] - heads[:, 1]) / 4.5, rtol=1e-9)
    assert fits.pooled_dof == 0
    assert not fits.search.done
    assert np.isnan(fits.scatter[0].base)


def test_readings_all_zero_and_none_at_all():
    zero = fit(np.zeros((12, 10)))
    np.testing.assert_allclose(zero.lines.parameters, 0.0)
    assert not zero.flagged.any()
    none = fit(np.full((12, 10), np.nan))
    assert np.isnan(none.lines.parameters).all()
