"""The variance of a sum over a correlated record: autocovariances by lag, cut where they are no longer seen."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["SumVariance", "lagged_products", "variance_of_mean"]

Array = NDArray[np.float64]

#: How often the cut is sought again with the covariances mended for the mean that was taken out.
_PASSES = 3


@dataclass(frozen=True)
class SumVariance:
    """What the mean of a correlated record varies by.

    Parameters
    ----------
    variance : (C,) array
        Of each column's mean, in squared units of the column.
    lags : (C,) array
        Lags on either side that entered, in blocks, dimensionless.
    dof : (C,) array
        Degrees of freedom of the variance, dimensionless.
    """

    variance: Array
    lags: Array
    dof: Array


def lagged_products(values: Array) -> Array:
    """Sum the products of a series with itself at each lag.

    Parameters
    ----------
    values : (B, C) array
        Columns in the order of time, in units of their own.

    Returns
    -------
    (B, C) array
        Σ_i v_i v_(i+k) for k = 0 … B − 1, in squared units of the values.

    Examples
    --------
    >>> lagged_products(np.array([[1.0], [2.0], [3.0]])).round(9).ravel().tolist()
    [14.0, 8.0, 3.0]
    """
    blocks = len(values)
    length = 1 << (2 * blocks - 1).bit_length()
    spectrum = np.fft.rfft(values, length, axis=0)
    return np.asarray(np.fft.irfft(np.abs(spectrum) ** 2, length, axis=0)[:blocks])


def variance_of_mean(residual: Array, count: Array, shape: Array | None = None) -> SumVariance:
    """Estimate the variance of a mean over correlated blocks from what the blocks leave about it.

    Parameters
    ----------
    residual : (B, C) array
        Block means about what was fitted to them, in the order of time, in units of the column; anything where the
        count is 0.
    count : (B, C) array
        Samples of each block, dimensionless; 0 for a block without.
    shape : (B, C) array, optional
        What was fitted beside the mean (time about its weighted mean, a step about its mean), in units of its own.

    Returns
    -------
    SumVariance
        NaN where fewer than four blocks hold samples.

    Notes
    -----
    With y_i = n_i r_i the variance of Σ n_i z_i / N is (R_0 + 2 Σ_k R_k) / N², R_k = Σ_i y_i y_(i+k), whatever the lengths
    of the blocks. The sum runs over pairs of lags R_2m + R_(2m+1) as long as they are positive, and no pair counts for more
    than one before it: the initial monotone positive sequence of C. J. Geyer (1992), Practical Markov chain Monte Carlo,
    Statistical Science 7, 473–483, doi:10.1214/ss/1177011137. Taking the mean out lowers every product n_i n_j r_i r_j by
    n_i n_j V, V being the variance sought (T. W. Anderson, The Statistical Analysis of Time Series, 1971, sec. 8.3); it
    is given back, also before the cut is sought, and likewise for `shape`. The sum has about N² / Σ W_k degrees of freedom,
    W_k being the same products of the counts: B / (2 M + 1) for M lags of B equal blocks, the equivalent degrees of freedom
    of a truncated spectral window (M. B. Priestley, Spectral Analysis and Time Series, 1981, sec. 6.2), less three quarters for
    the cut, which the simulations of `tests/calibration/record.py` ask for.

    Examples
    --------
    >>> rng = np.random.default_rng(2)
    >>> noise = rng.standard_normal((400, 1))
    >>> found = variance_of_mean(noise - noise.mean(axis=0), np.ones((400, 1)))
    >>> bool(0.6 / 400 < found.variance[0] < 1.6 / 400)
    True
    """
    blocks, columns = residual.shape
    if blocks < 4:
        unknown = np.full(columns, np.nan)
        return SumVariance(unknown, unknown, unknown)
    total = count.sum(axis=0)
    lags = max(2, blocks // 2 // 2 * 2)
    products = lagged_products(np.where(count > 0, count * np.nan_to_num(residual), 0.0))[:lags]
    weights = lagged_products(np.asarray(count, dtype=np.float64))[:lags]
    lowered = weights
    if shape is not None:
        along = np.where(count > 0, count * shape, 0.0)
        square = np.where(count > 0, count * shape**2, 0.0).sum(axis=0)
        safe = np.where(square > 0, square, 1.0)
        lowered = weights + lagged_products(along)[:lags] * np.where(square > 0, total / safe, 0.0)
    pair, pair_lowered = products[0::2] + products[1::2], lowered[0::2] + lowered[1::2]
    squared = np.where(total > 0, total, np.nan) ** 2
    variance = np.zeros(columns)
    kept = np.zeros(pair.shape, dtype=bool)
    for _ in range(_PASSES):
        mended = pair + variance * pair_lowered
        kept = np.logical_and.accumulate(mended > 0, axis=0)
        kept[0] = True
        falling = np.where(kept, np.minimum.accumulate(np.where(kept, mended, np.inf), axis=0), 0.0)
        taken = 2.0 * (pair_lowered * kept).sum(axis=0) - lowered[0]
        raw = 2.0 * falling.sum(axis=0) - (products[0] + variance * lowered[0]) - variance * taken
        # anticorrelated noise: never below a twentieth of what uncorrelated blocks would give
        raw = np.maximum(raw, 0.05 * products[0])
        variance = raw / np.maximum(squared - taken, 0.1 * squared)
    half_width = 2.0 * kept.sum(axis=0) - 1.0
    spanned = 2.0 * ((weights[0::2] + weights[1::2]) * kept).sum(axis=0) - weights[0]
    with np.errstate(divide="ignore", invalid="ignore"):
        dof = np.maximum(squared / spanned - 0.75, 1.0)
    few = (count > 0).sum(axis=0) < 4
    return SumVariance(np.where(few, np.nan, variance), half_width, np.where(few, np.nan, dof))
