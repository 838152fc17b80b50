"""Trend and step of a correlated record within a window, each with its uncertainty."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtr

from gradeline.fitting.record.autocorrelation import variance_of_mean

__all__ = ["PLACES", "Step", "Trend", "chance_of", "step_of", "trend_of"]

Array = NDArray[np.float64]

#: About so many places of a step are independent of each other, as the largest of them behaves in simulations.
PLACES = 40.0


@dataclass(frozen=True)
class Trend:
    """A straight line through each column of a window.

    Parameters
    ----------
    change : (C,) array
        Change over the window, in units of the column.
    u : (C,) array
        Its standard uncertainty, in units of the column.
    dof : (C,) array
        Degrees of freedom of u, dimensionless.
    p : (C,) array
        Probability of as large a change by chance (two-sided), dimensionless.
    mean : (C,) array
        Of the samples, in units of the column.
    left : (C,) array
        Weighted mean square of what the line leaves, in squared units of the column.
    """

    change: Array
    u: Array
    dof: Array
    p: Array
    mean: Array
    left: Array


@dataclass(frozen=True)
class Step:
    """The best single step in each column of a window.

    Parameters
    ----------
    size : (C,) array
        From the level before to the level after, in units of the column.
    at : (C,) array of int
        Index of the first block after it.
    u : (C,) array
        Its standard uncertainty were its place known, in units of the column.
    dof : (C,) array
        Degrees of freedom of u, dimensionless.
    p : (C,) array
        Probability of as large a step somewhere in the window by chance, dimensionless.
    left : (C,) array
        Weighted mean square of what the step leaves, in squared units of the column.
    """

    size: Array
    at: NDArray[np.intp]
    u: Array
    dof: Array
    p: Array
    left: Array


def trend_of(middle: Array, length: float, count: Array, mean: Array) -> Trend:
    """Fit a straight line to each column, its uncertainty from the correlation of what the line leaves.

    Parameters
    ----------
    middle : (B,) array
        Middle of each block, s.
    length : float
        Length of the window, s.
    count : (B, C) array
        Samples of each block, dimensionless; 0 for a block without.
    mean : (B, C) array
        Block means, in units of the column.

    Returns
    -------
    Trend
        NaN where a column has fewer than four blocks with samples.

    Notes
    -----
    Least squares weighted by the counts; the variance of the slope is that of ordinary least squares with the variance
    of a residual replaced by the spectral density at frequency nought, V N / Σ n (t − mean t)², V being the variance of
    the mean of the residuals (U. Grenander and M. Rosenblatt, Statistical Analysis of Stationary Time Series, 1957,
    chap. 7: for a trend least squares is then as good as any weighting). Student's t of V's degrees of freedom.

    Examples
    --------
    >>> rng = np.random.default_rng(5)
    >>> t = np.arange(300.0)
    >>> z = np.column_stack([rng.standard_normal(300), rng.standard_normal(300) + t / 100])
    >>> (trend_of(t, 300.0, np.ones((300, 2)), z).p < 0.01).tolist()
    [False, True]
    """
    total = count.sum(axis=0)
    safe = np.where(total > 0, total, 1.0)
    z = np.where(count > 0, mean, 0.0)
    time = middle[:, None] - (count * middle[:, None]).sum(axis=0) / safe
    level = (count * z).sum(axis=0) / safe
    square = (count * time**2).sum(axis=0)
    square = np.where(square > 0, square, np.nan)
    slope = (count * time * (z - level)).sum(axis=0) / square
    residual = np.where(count > 0, z - level - slope * time, 0.0)
    about = variance_of_mean(residual, count, time)
    u = np.sqrt(about.variance * total / square) * length
    change = slope * length
    left = (count * residual**2).sum(axis=0) / safe
    return Trend(
        change, u, about.dof, chance_of(change, u, about.dof), np.where(total > 0, level, np.nan), left
    )


def step_of(count: Array, mean: Array, *, margin: float = 0.05) -> Step:
    """Find the best single step of each column, its probability from the correlation of what it leaves.

    Parameters
    ----------
    count : (B, C) array
        Samples of each block, dimensionless; 0 for a block without.
    mean : (B, C) array
        Block means, in units of the column.
    margin : float
        Share of the samples that must lie on either side, dimensionless, below 0.5.

    Returns
    -------
    Step
        p is NaN where a column has fewer than four blocks with samples.

    Notes
    -----
    The place of the least sum of squares, that is, the largest standardised cumulative sum (D. V. Hinkley (1970),
    Inference about the change-point in a sequence of random variables, Biometrika 57, 1–17,
    doi:10.1093/biomet/57.1.1). The probability is Student's, times the places tried that are independent.

    Examples
    --------
    >>> rng = np.random.default_rng(6)
    >>> z = rng.standard_normal((300, 1))
    >>> z[120:] += 2.0
    >>> found = step_of(np.ones((300, 1)), z)
    >>> int(found.at[0]), bool(found.p[0] < 1e-6)
    (120, True)
    """
    blocks, columns = count.shape
    total = count.sum(axis=0)
    safe = np.where(total > 0, total, 1.0)
    z = np.where(count > 0, mean, 0.0)
    level = (count * z).sum(axis=0) / safe
    before = np.cumsum(count, axis=0)[:-1]
    gathered = np.cumsum(np.where(count > 0, count * (z - level), 0.0), axis=0)[:-1]
    allowed = (before >= margin * total) & (total - before >= margin * total)
    gain = np.where(allowed, gathered**2 / np.where(allowed, before * (total - before), 1.0), -1.0)
    at = gain.argmax(axis=0) if blocks > 1 else np.zeros(columns, dtype=np.intp)
    column = np.arange(columns)
    n = before[at, column] if blocks > 1 else total
    rest = np.where(total - n > 0, total - n, np.nan)
    sum_before = gathered[at, column] if blocks > 1 else np.zeros(columns)
    size = -sum_before * (1.0 / rest + 1.0 / np.where(n > 0, n, np.nan))
    after = np.where(np.arange(blocks)[:, None] > at, 1.0, 0.0) - rest / safe
    residual = np.where(count > 0, z - level - size * after, 0.0)
    about = variance_of_mean(residual, count, after)
    square = (count * after**2).sum(axis=0)
    u = np.sqrt(about.variance * total / np.where(square > 0, square, np.nan))
    p = np.minimum(PLACES * chance_of(size, u, about.dof), 1.0)
    return Step(size, at + 1, u, about.dof, p, (count * residual**2).sum(axis=0) / safe)


def chance_of(value: Array, u: Array, dof: Array) -> Array:
    """Return the probability of as large a value by chance, two-sided.

    Parameters
    ----------
    value : (C,) array
        In units of its own.
    u : (C,) array
        Its standard uncertainty, in the same units.
    dof : (C,) array
        Degrees of freedom of u, dimensionless.

    Returns
    -------
    (C,) array
        Student's, dimensionless; 1 where value and u are both nought.

    Examples
    --------
    >>> chance_of(np.array([2.0]), np.array([1.0]), np.array([1e9])).round(4).tolist()
    [0.0455]
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where((u == 0) & (value == 0), 0.0, np.abs(value) / u)
    return np.asarray(2.0 * stdtr(dof, -ratio))
