"""A misfit that most runs share: false alarms, an unlisted step, a single gross reading."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.fitting.misfit import PATTERNS, shared_misfit
from gradeline.fitting.runs import Model, fit_runs

TAPS, RUNS, SIGMA = 10, 12, 1e-3
X = np.linspace(0.2, 5.3, TAPS)
# 12 flows with S from 0.01 to 1 in a 25 mm bore, f about 0.02: V²/2g = S D / f.
SLOPE = np.geomspace(0.01, 1.0, RUNS)
VELOCITY_HEAD = SLOPE * 0.025 / 0.02


def survey(rng, loss=0.0, slope=SLOPE):
    heads = 5.0 - slope[:, None] * X - loss * VELOCITY_HEAD[:, None] * (X > 2.75)
    heads = heads + SIGMA * rng.standard_normal(heads.shape)
    model = Model(np.column_stack([np.ones(TAPS), -X]), VELOCITY_HEAD, np.zeros(TAPS, int), np.zeros(TAPS))
    return heads, model


@pytest.mark.parametrize("seed", range(20))
def test_an_unlisted_step_is_shared_and_flags_no_reading(seed):
    """K = 1 at mid-line; taken reading by reading it would flag innocent neighbours in nearly every run."""
    heads, model = survey(np.random.default_rng(seed), loss=1.0)
    fits = fit_runs(heads, np.isfinite(heads), model)
    assert fits.misfit.shared
    assert not fits.flagged.any()
    assert not fits.search.done
    assert "share a misfit" in fits.search.reason
    assert PATTERNS[fits.misfit.pattern] != "constant over the runs"


def test_sound_surveys_are_seldom_called_shared():
    """Two in a thousand by construction; 400 surveys, and three standard errors of that."""
    rng = np.random.default_rng(7)
    shared = 0
    for _ in range(400):
        heads, model = survey(rng)
        shared += fit_runs(heads, np.isfinite(heads), model, details=False).misfit.shared
    assert shared / 400 < 0.002 + 3 * np.sqrt(0.002 * 0.998 / 400)


@pytest.mark.parametrize("tap", [0, 4, 9])
def test_one_gross_reading_is_no_shared_misfit(tap):
    rng = np.random.default_rng(tap)
    for _ in range(20):
        heads, model = survey(rng)
        run = rng.integers(RUNS)
        heads[run, tap] += 0.5
        fits = fit_runs(heads, np.isfinite(heads), model)
        assert not fits.misfit.shared
        assert fits.flagged[run, tap]


@pytest.mark.parametrize(
    ("pattern", "shape"),
    [(0, np.ones(RUNS)), (1, SLOPE), (2, VELOCITY_HEAD)],
)
def test_a_tap_that_is_off_in_all_runs_is_shared(pattern, shape):
    rng = np.random.default_rng(pattern)
    heads, model = survey(rng)
    heads[:, 4] += 6 * SIGMA * shape / shape.max() * np.sqrt(RUNS)
    fits = fit_runs(heads, np.isfinite(heads), model)
    assert fits.misfit.shared
    assert np.abs(fits.misfit.score).max(axis=1).argmax() == 4
    assert not fits.flagged.any()


def test_errors_of_stated_size_are_no_misfit():
    """Taps off by what was stated of them (persistent) raise no alarm; without the statement they would."""
    rng = np.random.default_rng(12)
    offsets = 2e-3 * rng.standard_normal((100, TAPS))
    design = np.column_stack([np.ones(TAPS), -X])
    clear = np.eye(TAPS) - design @ np.linalg.pinv(design)
    deviation = np.broadcast_to(SIGMA * np.sqrt(np.diag(clear)), (RUNS, TAPS))
    stated = np.broadcast_to(2e-3 * np.sqrt(np.diag(clear)), (RUNS, TAPS))
    called = np.zeros((100, 2), dtype=bool)
    for number, offset in enumerate(offsets):
        residuals = (SIGMA * rng.standard_normal((RUNS, TAPS)) + offset) @ clear
        for column, persistent in enumerate((stated, 0 * stated)):
            called[number, column] = shared_misfit(
                residuals, deviation, SLOPE, VELOCITY_HEAD, persistent
            ).shared
    assert called[:, 0].mean() < 0.03
    assert called[:, 1].mean() > 0.9


def test_gaps_and_no_runs():
    rng = np.random.default_rng(1)
    residuals = rng.standard_normal((RUNS, TAPS))
    residuals[:, 3] = np.nan
    found = shared_misfit(residuals, np.ones((RUNS, TAPS)), SLOPE, VELOCITY_HEAD, np.zeros((RUNS, TAPS)))
    assert (found.score[3] == 0).all()
    none = shared_misfit(np.empty((0, 4)), np.empty((0, 4)), np.empty(0), np.empty(0), np.empty((0, 4)))
    assert not none.shared
