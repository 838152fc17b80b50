"""The curve of a run and of all runs against the same tests written out as regressions."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import f as fisher
from scipy.stats import norm
from scipy.stats import t as student

from gradeline.fitting.slope import fit_lines, project
from gradeline.fitting.straightness import FEWEST_TAPS, run_straightness, shared_curve

RNG = np.random.default_rng(9)
X = np.linspace(0.0, 4.0, 9)
DESIGN = np.column_stack([np.ones(9), -X])


def rss(columns, y):
    return float(((y - columns @ np.linalg.lstsq(columns, y, rcond=None)[0]) ** 2).sum())


@pytest.mark.parametrize("dof", [20.0, np.inf])
def test_p_of_a_quadratic_term_is_that_of_the_regression_with_it(dof):
    heads = (
        2.0 - 0.1 * X + 1e-3 * RNG.standard_normal((6, 9)) + np.linspace(0, 2e-3, 6)[:, None] * (X - 2) ** 2
    )
    fits = fit_lines(heads, DESIGN, project(DESIGN, np.full((6, 1), 1e-6), np.ones((6, 9), dtype=bool)))
    found = run_straightness(fits, X**2, dof)
    bent = np.column_stack([DESIGN, X**2])
    for run in range(6):
        statistic = np.sqrt((rss(DESIGN, heads[run]) - rss(bent, heads[run])) / 1e-6)
        tail = norm.sf(statistic) if np.isinf(dof) else student.sf(statistic, dof)
        assert found[run] == pytest.approx(2 * tail, rel=1e-5, abs=1e-300)


def test_too_few_taps_do_not_determine_a_curve():
    heads = np.full((2, 9), np.nan)
    heads[0, [0, 8]] = [2.0, 1.0]
    heads[1, [0, 4, 8]] = [2.0, 1.6, 1.0]
    used = np.isfinite(heads)
    fits = fit_lines(heads, DESIGN, project(DESIGN, np.full((2, 1), 1e-6), used))
    found = run_straightness(fits, X**2, 30.0)
    assert np.isnan(found[0])
    assert np.isfinite(found[1])


def test_p_is_uniform_over_straight_runs():
    heads = 1e-3 * RNG.standard_normal((4000, 9))
    fits = fit_lines(heads, DESIGN, project(DESIGN, np.full((4000, 1), 1e-6), np.ones((4000, 9), dtype=bool)))
    found = run_straightness(fits, X**2, np.inf)
    assert (found < 0.05).mean() == pytest.approx(0.05, abs=3.5 * np.sqrt(0.05 * 0.95 / 4000))


def test_the_shared_curve_is_the_f_test_of_the_part_that_grows_with_the_slope():
    slope = np.array([0.1, 0.2, 0.4])
    tap_errors = 0.003 * RNG.standard_normal(9) + 2e-3 * (X - 2) ** 2
    residuals = slope[:, None] * tap_errors
    with_curve, without = np.column_stack([DESIGN, X**2]), DESIGN
    statistic = (rss(without, tap_errors) - rss(with_curve, tap_errors)) / (rss(with_curve, tap_errors) / 6)
    assert shared_curve(residuals, slope, X) == pytest.approx(fisher.sf(statistic, 1, 6), rel=1e-8)


def test_tap_errors_alone_make_no_shared_curve():
    slope, hits = np.geomspace(0.05, 0.5, 8), 0
    for _ in range(1000):
        residuals = slope[:, None] * 0.002 * RNG.standard_normal(9) + 1e-5 * RNG.standard_normal((8, 9))
        hits += shared_curve(residuals, slope, X) < 0.05
    assert hits / 1000 == pytest.approx(0.05, abs=3.5 * np.sqrt(0.05 * 0.95 / 1000))


def test_what_cannot_be_told_is_nan():
    few = FEWEST_TAPS - 1
    assert np.isnan(shared_curve(np.ones((3, few)), np.ones(3), X[:few]))
    assert np.isnan(shared_curve(np.ones((3, 9)), np.zeros(3), X))
    assert np.isnan(shared_curve(np.full((3, 9), np.nan), np.ones(3), X))
    assert np.isnan(shared_curve(np.zeros((3, 9)), np.ones(3), X))
