"""Single samples far off in a block, and the block without them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["WithoutSpikes", "without_spikes"]

Array = NDArray[np.float64]

#: Standard deviations of a sample beyond which it may be a spike, and times the usual extreme of the column's blocks.
FAR, BEYOND_USUAL = 8.0, 2.0
#: Blocks on which the surroundings are judged: the middle one and those beside it.
_AROUND = 11


@dataclass(frozen=True)
class WithoutSpikes:
    """Blocks with the single far samples taken out.

    Parameters
    ----------
    count : (B, C) array
        Samples left, dimensionless.
    mean : (B, C) array
        Their mean, in units of the column; NaN where none is left.
    squares : (B, C) array
        Their squared deviations from it, in squared units of the column.
    taken : (B, C) array
        Samples taken out, 0 to 2, dimensionless.
    size : (B, C) array
        How far off the farthest was, in units of the column; 0 where none was taken.
    """

    count: Array
    mean: Array
    squares: Array
    taken: Array
    size: Array


def without_spikes(
    count: ArrayLike,
    mean: ArrayLike,
    squares: ArrayLike,
    low: ArrayLike,
    high: ArrayLike,
    *,
    far: float = FAR,
) -> WithoutSpikes:
    """Take single samples that lie far off out of the blocks, exactly.

    Parameters
    ----------
    count : (B, C) array_like
        Samples of each block, in the order of time, dimensionless.
    mean : (B, C) array_like
        Block means, in units of the column.
    squares : (B, C) array_like
        Sums of squared deviations from the block's mean, in squared units of the column.
    low : (B, C) array_like
        Least sample of each block, in units of the column.
    high : (B, C) array_like
        Greatest sample of each block, in units of the column.
    far : float
        Standard deviations of a sample beyond which it may be a spike, dimensionless.

    Returns
    -------
    WithoutSpikes
        Blocks without a spike come back as they were.

    Notes
    -----
    A sample x taken out of n leaves the mean (n z − x)/(n − 1) and the squares Q − (x − z)² n/(n − 1), exactly. The
    greatest or least sample of a block is a spike where it lies `far` standard deviations from the running median of the
    block means, twice as far as the extremes of the column's blocks usually do, and where what is left of the block
    scatters as its neighbours do: a jump or a surge, of which many samples partake, is none. The standard deviation is
    the running median of those within blocks (none of blocks of one sample)
    and that of the departures of block means from their running median, together: F. R. Hampel (1974), The influence curve and its role in robust estimation, J. Amer. Statist.
    Assoc. 69, 383–393, doi:10.1080/01621459.1974.10482962, for the median and its deviation.

    Examples
    --------
    >>> rng = np.random.default_rng(7)
    >>> x = rng.standard_normal((40, 100))
    >>> x[9, 3] = 30.0
    >>> z, square = x.mean(axis=1), x.var(axis=1) * 100
    >>> blocks = [v[:, None] for v in (np.full(40, 100), z, square, x.min(axis=1), x.max(axis=1))]
    >>> clean = without_spikes(*blocks)
    >>> clean.taken.ravel().nonzero()[0].tolist()
    [9]
    >>> bool(abs(clean.mean[9, 0] - np.delete(x[9], 3).mean()) < 1e-12)
    True
    """
    from scipy.ndimage import median_filter  # noqa: PLC0415 (loaded when asked for: start-up time)

    n, z, inner, least, greatest = (
        np.array(values, dtype=np.float64) for values in (count, mean, squares, low, high)
    )
    held = n > 0
    size_of_window = (min(_AROUND, len(n)), 1)
    filled = _filled(z, held)
    centre = median_filter(filled, size=size_of_window, mode="reflect")
    own = np.sqrt(np.where(n > 1, inner / np.maximum(n - 1, 1), 0.0))
    between = np.abs(filled - centre)
    # of block means about their running median; 1.4826 makes a normal deviate's median absolute deviation its sigma
    wander = 1.4826 * median_filter(between, size=(min(8 * _AROUND, len(n)), 1), mode="reflect")
    # the median of a standard deviation of few samples lies below sigma: Wilson and Hilferty's median of chi-square
    freedom = np.maximum(n - 1.0, 1.0)
    own = own / (1.0 - 2.0 / (9.0 * freedom)) ** 1.5
    sigma = median_filter(_filled(own, held & (n > 1)), size=size_of_window, mode="reflect")
    sigma = np.hypot(sigma, wander)
    # no scatter at all (a zero held by the instrument): nothing to judge by
    known = sigma > 0
    scale = np.where(known, sigma, 1.0)
    extreme = np.where(held & known, np.maximum(greatest - centre, centre - least) / scale, 0.0)
    common = np.array(
        [
            np.median(column[ok]) if ok.any() else 0.0
            for column, ok in zip(extreme.T, (held & known).T, strict=True)
        ]
    )
    bar = np.maximum(far, BEYOND_USUAL * common)
    taken, size = np.zeros_like(n), np.zeros_like(z)
    kept = (n.copy(), z.copy(), inner.copy())
    for side in (greatest, least):
        distance = np.where(held & known, side - centre, 0.0)
        suspect = (np.abs(distance) > bar * scale) & (n - taken >= 1)
        left = n - 1.0
        safe = np.maximum(left, 1.0)
        mean_left = np.where(suspect & (left > 0), (n * z - side) / safe, z)
        square_left = np.where(suspect, np.maximum(inner - (side - z) ** 2 * n / safe, 0.0), inner)
        n, z, inner = (
            np.where(suspect, left, n),
            np.where(suspect, mean_left, z),
            np.where(suspect, square_left, inner),
        )
        taken += suspect
        size = np.where(suspect & (np.abs(distance) > np.abs(size)), distance, size)
    # what is left scatters like its surroundings, and lies among them
    spread_left = np.sqrt(np.where(n > 1, inner / np.maximum(n - 1, 1), 0.0))
    like = (spread_left <= 2.0 * scale) & ((n < 1) | (np.abs(z - centre) <= 4.0 * np.maximum(scale, wander)))
    # a level that begins with a block's last sample is no spike: the blocks on either side agree
    beside = np.abs(np.roll(filled, -1, axis=0) - np.roll(filled, 1, axis=0))
    beside[[0, -1]] = 0.0
    genuine = (taken > 0) & like & (beside <= 6.0 * scale) & (_neighbours(taken) < 4)
    count_out, mean_out, squares_out = (
        np.where(genuine, new, old) for new, old in zip((n, z, inner), kept, strict=True)
    )
    mean_out = np.where(genuine & (count_out < 1), np.nan, mean_out)
    return WithoutSpikes(
        count_out, mean_out, squares_out, np.where(genuine, taken, 0.0), np.where(genuine, size, 0.0)
    )


def _filled(values: Array, held: NDArray[np.bool_]) -> Array:
    """Values with the last known one where none is held, so that a running median may pass over them."""
    if held.all():
        return values
    index = np.where(held, np.arange(len(values))[:, None], -1)
    last = np.maximum.accumulate(index, axis=0)
    first = held.argmax(axis=0)
    last = np.where(last < 0, first, last)
    return np.nan_to_num(np.take_along_axis(values, last, axis=0))


def _neighbours(taken: Array) -> Array:
    """How many of the five blocks around hold one: a crowd of them is a disturbance, not spikes."""
    padded = np.pad((taken > 0).astype(np.float64), ((2, 2), (0, 0)))
    return np.asarray(sum(padded[k : k + len(taken)] for k in range(5)))
