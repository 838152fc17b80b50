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
from importlib import resources

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.outliers import most_removable, trimming
from gradeline.fitting.slope import fit_lines, project
from gradeline.fitting.subsets import MOST_OUTLIERS, subset_falls

__all__ = [
    "FALSE_ALARM",
    "MANY_RUNS",
    "TABLED_RUNS",
    "WIDE_PARAMETERS",
    "WIDE_RUNS",
    "WIDE_SHAPES",
    "NullRuns",
    "critical_falls",
    "null_runs",
    "scale_moments",
    "simulated_critical_falls",
]

Array = NDArray[np.float64]

#: Probability that a sound run is flagged at one step of the search.
FALSE_ALARM = 0.01
#: From so many runs on, the pooled scatter counts as known.
MANY_RUNS = 50
#: Numbers of runs for which critical values are tabled; between them they go as 1/runs.
TABLED_RUNS = (1, 2, 3, 4, 5, 6, 8, 10, 12, 15, 20, 30, 50)
#: Readings of longer runs for which everything is tabled, between which it goes as ln n, and numbers of runs there.
WIDE_SHAPES = (15, 16, 18, 20, 24, 30, 40, 60, 100, 200)
WIDE_RUNS = (1, 2, 3, 4, 6, 10, 20, 50)
#: Parameters up to which longer runs are tabled.
WIDE_PARAMETERS = 6
#: Readings beyond which a run of still more parameters is judged as one of these and of the same freedom.
_LONG = 40
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


@lru_cache(maxsize=24)
def null_runs(observations: int, parameters: int, count: int | None = None) -> NullRuns:
    """Simulate the search on runs of equal variance with evenly spaced taps.

    Parameters
    ----------
    observations : int
        Readings of a run, dimensionless count.
    parameters : int
        Free parameters of its line, dimensionless count.
    count : int, optional
        Runs to simulate, dimensionless; 40,000, or 8,000 of more than 14 observations, when left out.

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
    if count is None:
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


@lru_cache(maxsize=1)
def _tables() -> tuple[dict[tuple[int, int], tuple[float, float]], dict[tuple[int, ...], Array]]:
    """Simulated once and kept: (mean and freedom of the trimmed sums, critical values over `TABLED_RUNS`)."""
    folder = resources.files(__package__) / "tables"
    with (folder / "scale_moments.csv").open(encoding="utf-8") as file:
        rows = np.loadtxt(file, delimiter=",", skiprows=1)
    moments = {(int(n), int(p)): (float(mean), float(freedom)) for n, p, mean, freedom in rows}
    with (folder / "critical_falls.csv").open(encoding="utf-8") as file:
        rows = np.loadtxt(file, delimiter=",", skiprows=1)
    rows = rows[np.lexsort(rows[:, 4::-1].T)]
    starts = np.flatnonzero((np.diff(rows[:, :4], axis=0, prepend=-1.0) != 0).any(axis=1))
    critical = {tuple(int(part) for part in mine[0, :4]): mine[:, 4:] for mine in np.split(rows, starts[1:])}
    return moments, critical


def scale_moments(observations: int, parameters: int) -> tuple[float, float]:
    """Return mean and freedom of a sound run's trimmed sum of squares.

    Parameters
    ----------
    observations : int
        Readings of a run, dimensionless count.
    parameters : int
        Free parameters of its line, dimensionless count.

    Returns
    -------
    tuple of float
        The mean for unit variance, and the degrees of freedom of the chi-square with the same relative spread,
        dimensionless: from the table, between its shapes for longer runs, or simulated for a shape that is not in it.

    Examples
    --------
    >>> mean, freedom = scale_moments(10, 2)
    >>> 2.2 < mean < 2.5, 4.5 < freedom < 5.5
    (True, True)
    """
    moments = _tables()[0]
    tabled = moments.get((observations, parameters))
    if tabled is not None:
        return tabled
    observations, parameters = _alike(observations, parameters)
    if _between(observations, parameters):
        # What the trimming takes, and the freedom for what is left, change slowly.
        near = [(n, *moments[n, parameters]) for n in WIDE_SHAPES]
        taken = _along(observations, [n - parameters - mean for n, mean, _ in near])
        mean = observations - parameters - taken
        return mean, mean * _along(observations, [freedom / mean for _, mean, freedom in near])
    null = null_runs(observations, parameters)
    return null.expected, null.shape


def _alike(observations: int, parameters: int) -> tuple[int, int]:
    """Return the tabled shape that a long run of many parameters is like: of the same freedom."""
    like = observations - parameters + WIDE_PARAMETERS
    return (
        (like, WIDE_PARAMETERS)
        if parameters > WIDE_PARAMETERS and like > _LONG
        else (observations, parameters)
    )


def _between(observations: int, parameters: int) -> bool:
    """Whether a run lies among the longer ones that are tabled."""
    return observations > WIDE_SHAPES[0] and parameters <= WIDE_PARAMETERS


def _along(observations: int, values: list[float]) -> float:
    """Interpolate values at `WIDE_SHAPES` as they go with ln n, beyond the last one along the same line."""
    if not np.isfinite(values).all():
        return float("inf")
    logs = np.log(WIDE_SHAPES)
    at = min(int(np.searchsorted(logs, np.log(observations))), len(logs) - 1)
    rise = (values[at] - values[at - 1]) / (logs[at] - logs[at - 1])
    return float(values[at] + rise * (np.log(observations) - logs[at]))


@lru_cache(maxsize=2048)
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
    From a table that `simulated_critical_falls` made (``tests/calibration/make_tables.py``), between its numbers of
    runs by 1/runs, between its longer runs by the logarithm of their readings; simulated on the spot for a shape of run
    that is not in it.

    Examples
    --------
    >>> [round(value) for value in critical_falls(10, 2, 1000, stated=False, independent=True)]
    [11, 10, 10]
    """
    observations, parameters = _alike(observations, parameters)
    table = _tables()[1]
    rows = table.get((observations, parameters, int(stated), int(independent)))
    if rows is None and _between(observations, parameters):
        near = [
            critical_falls(n, parameters, runs, stated=stated, independent=independent) for n in WIDE_SHAPES
        ]
        first, second, third = (_along(observations, list(column)) for column in zip(*near, strict=True))
        return first, second, third
    if rows is None:
        return simulated_critical_falls(
            observations, parameters, runs, stated=stated, independent=independent
        )
    # 0 stands for runs so many that the scatter is known.
    inverse = np.where(rows[:, 0] > 0, 1.0 / np.maximum(rows[:, 0], 1.0), 0.0)
    order = np.argsort(inverse)
    at = 0.0 if runs > MANY_RUNS else 1.0 / runs
    first, second, third = (
        float(np.interp(at, inverse[order], column[order])) if np.isfinite(column).all() else float("inf")
        for column in rows[:, 1:].T
    )
    return first, second, third


def simulated_critical_falls(
    observations: int,
    parameters: int,
    runs: int,
    *,
    stated: bool,
    independent: bool,
    count: int | None = None,
) -> tuple[float, float, float]:
    """Simulate the critical value of the added fall for the first, second and third reading.

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
    count : int, optional
        Runs to simulate, dimensionless, as in `null_runs`.

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
    >>> first, _, _ = simulated_critical_falls(8, 2, 1000, stated=False, independent=True, count=2000)
    >>> 8.0 < first < 13.0
    True
    """
    null = null_runs(observations, parameters, count)
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
