"""Which slopes stand: rings of sets are broken, and what is left out lies beyond chance."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import norm, t

from gradeline.fitting.standing import Standing, critical_score
from gradeline.fitting.wall import WallData, fit_wall, law_log_slope


def course(score_of, candidates, critical):
    """Follow the sets until one stands."""
    standing, used = Standing(candidates), candidates
    for _ in range(60):
        now = standing.after(used, score_of(used), critical)
        if (now == used).all():
            return used
        used = now
    pytest.fail("no set stands")


def test_two_that_make_each_other_look_off_do_not_both_leave():
    """Scores of six runs: with both, each is beyond 2.638; without both, neither is; without the worse, one is."""
    scores = {
        (1, 1, 1, 1, 1, 1): [-2.68, 2.95, 1.10, -1.84, -0.04, 0.61],
        (0, 0, 1, 1, 1, 1): [-1.97, 2.32, 1.16, -1.93, -0.01, 0.77],
        (1, 0, 1, 1, 1, 1): [-1.97, 2.96, 1.77, -1.40, 0.15, 0.24],
    }
    found = course(
        lambda used: np.array(scores[tuple(used[:, 0].astype(int))])[:, None], np.ones((6, 1), bool), 2.638
    )
    assert found[:, 0].tolist() == [True, False, True, True, True, True]


@pytest.mark.parametrize("seed", range(40))
def test_what_is_left_out_is_beyond_the_critical_score_whatever_the_scores(seed):
    """Scores without any order, a new draw for every set: the worst that a fit can do."""

    def score_of(used):
        return np.random.default_rng([seed, *used[:, 0].astype(int)]).normal(0, 2.5, used.shape)

    candidates = np.ones((9, 1), bool)
    found = course(score_of, candidates, 2.7)
    assert (np.abs(score_of(found))[candidates & ~found] > 2.7).all()
    assert found.sum() * 2 > 9


def test_the_critical_score_is_the_bonferroni_point():
    assert critical_score(8, np.inf, alone=False) == pytest.approx(norm.isf(0.05 / 16), rel=1e-6)
    assert critical_score(8, 6.0, alone=True) == pytest.approx(t.isf(0.02 / 16, 6.0), rel=1e-9)


@pytest.mark.parametrize("seed", range(12))
def test_a_run_called_off_the_law_has_a_score_beyond_the_critical_one(seed):
    """Slow runs of one shared error of the heads, which two of them at odds tear apart."""
    rng = np.random.default_rng(seed)
    velocity = np.linspace(0.35, 1.8, 6)[:, None]
    data = WallData(
        slope=np.ones((6, 1)),
        slope_covariance=np.full((6, 1, 1), 2.4e-4**2),
        velocity=velocity,
        diameter=np.array([0.06]),
        kinematic_viscosity=np.full(6, 1.1e-6),
        gravity=9.81,
        flow_u=np.full(6, 0.004),
        own_slope_effect=np.zeros((6, 1)),
        viscosity_u=np.zeros(6),
        slope_effect=np.full((6, 1, 1), 3e-4),
        diameter_effect=np.zeros((1, 1)),
        flow_effect=np.zeros(1),
        viscosity_effect=np.zeros((6, 1)),
        gravity_effect=np.zeros(1),
    )
    slips = np.array([-1.0, 1.0, 0, 0, 0, 0])[:, None] * rng.uniform(5e-4, 1.1e-3)
    slope = np.exp(law_log_slope(data, 5e-5)) + slips + 2.4e-4 * rng.standard_normal((6, 1))
    fit = fit_wall(replace(data, slope=slope), np.ones((6, 1), bool))
    beyond = norm.isf(0.05 / 12)
    assert (np.abs(fit.score[fit.off_law]) > beyond).all()
    assert (np.abs(fit.score[fit.used]) <= beyond).all() or fit.used.sum() == 4
