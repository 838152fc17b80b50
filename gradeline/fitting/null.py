"""What the outlier search does to sound runs: simulated once for each shape of run, then looked up.

The critical value of the k-th outlying reading is the 99 % point of the added fall of the sum of squares when k − 1
gross outliers stand at random observations. Simulated without them, the second and third innocent reading would be
taken along far too often once one is truly bad. With few runs the run's own scatter counts, which is smaller without
gross outliers: then the larger of the points with k − 1 and with fewer of them holds.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.outliers import MOST_OUTLIERS, most_removable, subset_falls, trimming
from gradeline.fitting.slope import fit_lines, project

__all__ = ["FALSE_ALARM", "MANY_RUNS", "NullRuns", "critical_falls", "null_runs"]

Array = NDArray[np.float64]

#: Probability that a sound run is flagged at one step of the search.
FALSE_ALARM = 0.01
#: From so many runs on, the pooled scatter counts as known.
MANY_RUNS = 50
_SEED = 20260506
_GROSS = (15.0, 60.0)


@dataclass(frozen=True)
class NullRuns:
    """Simulated runs of unit scatter without and with gross outliers.

    Parameters
    ----------
    trimmed : (3, M) array
        Weighted sum of squares left when the best set of `trimming` readings is gone, with 0, 1, 2 gross outliers in
        the run, dimensionless.
    added : (3, 3, M) array
        Added fall for the first, second and third reading (second axis) with 0, 1, 2 gross outliers (first axis),
        dimensionless; NaN where so many cannot be removed.
    """

    trimmed: Array
    added: Array

    @property
    def expected(self) -> float:
        """Mean of the trimmed sum of squares of a sound run: its effective degrees of freedom for a scale."""
        return float(self.trimmed[0].mean())

    @property
    def shape(self) -> float:
        """Degrees of freedom of the chi-square with the same relative spread."""
        return float(2.0 * self.trimmed[0].mean() ** 2 / self.trimmed[0].var())


def _typical_design(n: int, p: int) -> Array:
    """Return evenly spaced taps on p − 1 reaches of equal length: a line that bends, continuous."""
    x = np.linspace(0.0, 1.0, n)
    bounds = np.linspace(0.0, 1.0, max(p, 2))
    passed = [np.clip(x - low, 0.0, high - low) for low, high in itertools.pairwise(bounds)]
    return np.column_stack([np.ones(n), *passed])[:, :p]


@lru_cache(maxsize=128)
def null_runs(observations: int, parameters: int) -> NullRuns:
    """Simulate the search on runs of equal variance with evenly spaced taps.

    Parameters
    ----------
    observations : int
        Readings of a run, dimensionless count.
    parameters : int
        Free parameters of its line, dimensionless count.

    Returns
    -------
    NullRuns
        Seeded, so the same every time; cached.

    Examples
    --------
    >>> null = null_runs(10, 2)
    >>> 1.5 < null.expected < 3.5
    True
    """
    most = int(most_removable(observations, parameters))
    count = 40_000 if observations <= 14 else 8_000
    rng = np.random.default_rng([_SEED, observations, parameters])
    design = _typical_design(observations, parameters)
    used = np.ones((1, observations), dtype=bool)
    shared = project(design, np.ones((1, 1)), used)
    trimmed = np.full((MOST_OUTLIERS, count), np.nan)
    added = np.full((MOST_OUTLIERS, MOST_OUTLIERS, count), np.nan)
    for bad in range(max(most, 1)):
        noise = rng.standard_normal((count, observations))
        if bad:
            at = rng.permuted(np.tile(np.arange(observations), (count, 1)), axis=1)[:, :bad]
            sign = rng.choice([-1.0, 1.0], (count, bad))
            noise[np.arange(count)[:, None], at] += sign * rng.uniform(*_GROSS, (count, bad))
        spread = project(design, np.ones((count, 1)), np.ones((count, observations), dtype=bool))
        fits = fit_lines(noise, design, spread)
        if most == 0:
            trimmed[:] = fits.sum_of_squares
            break
        falls = subset_falls(fits.weighted_residuals, shared.weight[0], used[0], most).fall
        trimmed[bad] = np.maximum(fits.sum_of_squares - falls[:, int(trimming(most)) - 1], 0.0)
        added[bad] = np.diff(falls, axis=1, prepend=0.0).T
    return NullRuns(trimmed, added)


@lru_cache(maxsize=512)
def critical_falls(
    observations: int, parameters: int, runs: int, *, stated: bool, independent: bool
) -> tuple[float, float, float]:
    """Return the critical value of the added fall for the first, second and third reading.

    Parameters
    ----------
    observations : int
        Readings of a run, dimensionless count.
    parameters : int
        Free parameters of its line, dimensionless count.
    runs : int
        Runs over which the scatter is pooled, dimensionless count.
    stated : bool
        Whether a stated reading uncertainty is a floor under the scatter.
    independent : bool
        Whether a run is judged by the scatter of the other runs alone, their outliers removed.

    Returns
    -------
    tuple of float
        In units of σ², dimensionless; infinite where so many readings may not be removed.

    Notes
    -----
    The scale is the one that the run would be judged by: the mean trimmed sum of squares over the runs, the run with
    the outliers among them, or, independent of it, the chi-square of the other runs' degrees of freedom.

    Examples
    --------
    >>> [round(value) for value in critical_falls(10, 2, 1000, stated=False, independent=True)]
    [11, 11, 10]
    """
    null = null_runs(observations, parameters)
    most = int(most_removable(observations, parameters))
    critical = [np.inf] * MOST_OUTLIERS
    rng = np.random.default_rng([_SEED, observations, parameters, runs, stated, independent])
    others_dof = (runs - 1) * (observations - parameters)
    for bad in range(most):
        scale: Array | float = 1.0
        if runs <= MANY_RUNS:
            own = null.trimmed[bad]
            if independent:
                scale = rng.chisquare(others_dof, len(own)) / others_dof
            else:
                # The sum over the other runs, by the gamma distribution of its mean and variance.
                freedom = (runs - 1) * null.shape
                others = (
                    rng.gamma(freedom / 2.0, 2.0, len(own)) * null.expected / null.shape if runs > 1 else 0.0
                )
                scale = (own + others) / (runs * null.expected)
            scale = np.maximum(scale, 1.0 if stated else 1e-12)
        for k in range(bad, most):
            point = float(np.quantile(null.added[bad, k] / scale, 1.0 - FALSE_ALARM))
            critical[k] = max(critical[k], point) if bad else point
    return critical[0], critical[1], critical[2]
