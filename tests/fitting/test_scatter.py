"""The scatter model: recovery of what was put in, robustness against a wild run, the stated floor."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.fitting.scatter import estimate_scatter, scatter_variance

HEADS = np.linspace(0.01, 0.5, 40)


def squares(rng, base, surge, dof=8, heads=HEADS):
    return (base**2 + (surge * heads) ** 2) * rng.chisquare(dof, len(heads))


def estimate(found, heads=HEADS, dof=8.0, **more):
    return estimate_scatter(found, np.full(len(heads), dof), np.full(len(heads), dof), heads, **more)


@pytest.mark.parametrize(("base", "surge"), [(1e-3, 0.02), (0.5e-3, 0.005), (3e-3, 0.03)])
def test_base_and_surge_are_recovered_on_average(base, surge):
    rng = np.random.default_rng(1)
    found = [estimate(squares(rng, base, surge)) for _ in range(200)]
    assert np.mean([one.base for one in found]) == pytest.approx(base, rel=0.05)
    assert np.sqrt(np.mean([one.surge**2 for one in found])) == pytest.approx(surge, rel=0.08)
    assert found[0].dof == 320


def test_without_surge_the_base_is_recovered_and_a_surge_seldom_seen():
    """Twice the log-likelihood must rise by 2.71, its 95 % point for one bounded parameter (common practice)."""
    rng = np.random.default_rng(2)
    found = [estimate(squares(rng, 1e-3, 0.0)) for _ in range(300)]
    assert np.mean([one.surge > 0 for one in found]) < 0.05 + 3 * np.sqrt(0.05 * 0.95 / 300)
    flat = [one.base for one in found if one.surge == 0]
    assert np.mean(flat) == pytest.approx(1e-3, rel=0.01)
    # Relative standard deviation of s from 320 degrees of freedom: 1/sqrt(2 ν).
    assert np.std(flat) / 1e-3 == pytest.approx(1 / np.sqrt(640), rel=0.2)


@pytest.mark.parametrize("run", [0, 20, 39])
def test_one_wild_run_makes_no_surge_and_hardly_moves_the_base(run):
    rng = np.random.default_rng(3)
    surges, bases = 0, []
    for _ in range(100):
        found = squares(rng, 1e-3, 0.0)
        found[run] *= 400.0
        one = estimate(found)
        surges += one.surge > 0
        bases.append(one.base)
    assert surges <= 10
    # It is left out: the median is that of the others alone, of which chi-square puts half below the mean.
    assert 0.99e-3 < np.median(bases) < 1.02e-3


def test_a_stated_uncertainty_is_a_floor_and_pooled_stays_as_the_readings_say():
    rng = np.random.default_rng(4)
    one = estimate(squares(rng, 1e-3, 0.0), stated=2e-3)
    assert one.base == 2e-3
    assert one.stands
    assert one.pooled == pytest.approx(1e-3, rel=0.15)
    low = estimate(squares(rng, 1e-3, 0.0), stated=0.2e-3)
    assert low.base == low.pooled
    assert not low.stands


def test_resolution_adds_to_what_was_stated():
    rng = np.random.default_rng(5)
    # d/√12 of a scale read to 1 mm, beside a stated 0.5 mm (common practice).
    one = estimate(squares(rng, 1e-4, 0.0), stated=5e-4, resolution=1e-3 / np.sqrt(12))
    assert one.base == pytest.approx(np.sqrt(0.5**2 + 1 / 12) * 1e-3)


def test_nothing_to_judge_by():
    nothing = estimate_scatter(np.zeros(3), np.zeros(3), np.zeros(3), np.ones(3))
    assert np.isnan(nothing.base)
    assert np.isnan(nothing.pooled)
    assert nothing.dof == 0
    stated = estimate_scatter(np.zeros(3), np.zeros(3), np.zeros(3), np.ones(3), stated=1e-3)
    assert stated.base == 1e-3
    assert stated.stands


def test_readings_all_alike_stay_finite():
    one = estimate(np.zeros(40))
    # Nothing is read better than a micrometre: what is left is rounding.
    assert one.base == 1e-6
    assert np.isfinite(scatter_variance(one, HEADS)).all()
