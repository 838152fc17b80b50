"""Where a record changes its level or its trend: the best piecewise straight lines."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.record.autocorrelation import variance_of_mean

__all__ = ["changes", "local_noise"]

Array = NDArray[np.float64]

#: Bins in a chunk on which the noise is judged, and from one chunk to the next.
_CHUNK, _STRIDE = 16, 4
#: Chunks around, over which the quarter with the least noise stands for all: the others may hold a change.
_AROUND = 31
#: The lower quartile of a chunk's variance of the mean, over its expectation, in simulated noise.
_QUARTILE = 0.6


def local_noise(values: Array, count: Array) -> Array:
    """Judge the noise of a record about its plateaus, from place to place.

    Parameters
    ----------
    values : (B,) array
        Means of bins of equal length in the order of time, in units of their own.
    count : (B,) array
        Samples of each, dimensionless; 0 for a bin without.

    Returns
    -------
    (B,) array
        The spectral density of the noise at frequency nought per bin (its variance where bins are uncorrelated), in
        the square of the units.

    Examples
    --------
    >>> rng = np.random.default_rng(8)
    >>> z = rng.standard_normal(400) + np.repeat([0.0, 9.0, 3.0, 7.0], 100)
    >>> bool(0.5 < np.median(local_noise(z, np.ones(400))) < 2.0)
    True
    """
    from scipy.ndimage import percentile_filter  # noqa: PLC0415 (loaded when asked for: start-up time)

    blocks = len(values)
    length = min(_CHUNK, blocks)
    if length < 4:
        return np.full(blocks, float(np.var(values)) if blocks > 1 else 0.0)
    starts = np.arange(0, blocks - length + 1, _STRIDE)
    index = starts[None, :] + np.arange(length)[:, None]
    weight = np.where(count[index] > 0, 1.0, 0.0)
    total = np.maximum(weight.sum(axis=0), 1.0)
    place = (
        np.arange(length, dtype=np.float64)[:, None]
        - (weight * np.arange(length)[:, None]).sum(axis=0) / total
    )
    z = np.where(weight > 0, values[index], 0.0)
    level = (weight * z).sum(axis=0) / total
    square = np.maximum((weight * place**2).sum(axis=0), 1e-300)
    slope = (weight * place * (z - level)).sum(axis=0) / square
    about = variance_of_mean(np.where(weight > 0, z - level - slope * place, 0.0), weight, place)
    density = np.nan_to_num(about.variance * total)
    calm = percentile_filter(density, 25, size=min(_AROUND, len(density)), mode="nearest") / _QUARTILE
    return np.asarray(np.interp(np.arange(blocks), starts + (length - 1) / 2, calm))


def changes(values: Array, weight: Array, penalty: float, least: int) -> list[int]:
    """Cut a record into the straight lines that describe it best for their number.

    Parameters
    ----------
    values : (B, C) array
        Means of bins in the order of time; the columns change together; in units of their own.
    weight : (B, C) array
        One over the variance of each, in inverse squared units of the values; 0 for a bin without samples.
    penalty : float
        What one line more must save of the weighted sum of squares, dimensionless.
    least : int
        Bins of the shortest line, at least 2.

    Returns
    -------
    list of int
        The first bin of each line, and B at the end.

    Notes
    -----
    The least of Σ (weighted squares about each line) + penalty × lines over all ways of cutting, exactly, by dynamic
    programming in which starts that can no longer win are dropped: R. Killick, P. Fearnhead and I. A. Eckley (2012),
    Optimal detection of changepoints with a linear computational cost, J. Amer. Statist. Assoc. 107, 1590–1598,
    doi:10.1080/01621459.2012.737745. Lines, not levels, so that a slow drift is one line that drifts and no staircase.

    Examples
    --------
    >>> z = np.repeat([0.0, 9.0, 3.0], 20)[:, None] + 0.1 * np.random.default_rng(9).standard_normal((60, 1))
    >>> changes(z, np.full((60, 1), 100.0), 30.0, 3)
    [0, 20, 40, 60]
    """
    blocks = len(values)
    if blocks < 2 * least:
        return [0, blocks]
    held = weight > 0
    z = np.where(held, values, 0.0)
    z = np.where(held, z - (weight * z).sum(axis=0) / np.maximum(weight.sum(axis=0), 1e-300), 0.0)
    time = np.arange(blocks, dtype=np.float64)[:, None] - blocks / 2
    sums = np.stack(
        [weight, weight * time, weight * time**2, weight * z, weight * time * z, weight * z**2], axis=0
    )
    running = np.concatenate([np.zeros((6, 1, weight.shape[1])), np.cumsum(sums, axis=1)], axis=1)
    best = np.full(blocks + 1, np.inf)
    best[0] = -penalty
    last = np.zeros(blocks + 1, dtype=np.intp)
    starts = np.zeros(1, dtype=np.intp)
    for end in range(least, blocks + 1):
        cost = best[starts] + _squares_about_lines(running[:, end, None, :] - running[:, starts, :])
        chosen = int(cost.argmin())
        best[end] = cost[chosen] + penalty
        last[end] = starts[chosen]
        # a start that is worse even without the penalty stays worse
        starts = np.append(starts[cost <= best[end]], end - least + 1)
        starts = starts[np.isfinite(best[starts])]
    edges = [blocks]
    while edges[-1] > 0:
        edges.append(int(last[edges[-1]]))
    return edges[::-1]


def _squares_about_lines(sums: Array) -> Array:
    """Weighted sums of squares about the best line of each stretch, summed over the columns."""
    w, wt, wtt, wz, wtz, wzz = sums
    some = w > 0
    total = np.where(some, w, 1.0)
    across = wtt - wt**2 / total
    along = wtz - wt * wz / total
    steep = across > 1e-9 * np.maximum(wtt, 1e-300)
    about = wzz - wz**2 / total - np.where(steep, along**2 / np.where(steep, across, 1.0), 0.0)
    return np.asarray(np.where(some, np.maximum(about, 0.0), 0.0).sum(axis=1))
