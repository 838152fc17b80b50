"""The mean of a window of a logger's record and its uncertainty, from the record's own correlation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import stdtrit

from gradeline.fitting.record.autocorrelation import variance_of_mean

__all__ = ["FEWEST_BLOCKS", "FEW_EFFECTIVE", "WindowMean", "window_mean", "window_means"]

Array = NDArray[np.float64]

#: Blocks with samples below which the correlation of a window is not seen.
FEWEST_BLOCKS = 10
#: Effective samples below which the uncertainty itself is told to be uncertain, and below which it is not given.
FEW_EFFECTIVE, LEAST_EFFECTIVE = 10.0, 3.0
#: Batches for the check beside, as many as leave two blocks in each.
_BATCHES = (30, 25, 20)


@dataclass(frozen=True)
class WindowMean:
    """The mean of a column over a window.

    Parameters
    ----------
    mean : float
        Of all samples, in units of the column.
    u : float
        Its standard uncertainty, to be used with Student's t of `dof`, in units of the column; NaN with a reason.
    effective : float
        Effective samples s²/u², dimensionless.
    samples : float
        Samples in the window, dimensionless.
    batch_u : float
        From the spread of 20 to 30 batches, in units of the column; NaN of fewer than 40 blocks. Too low where the record
        is correlated over more than a batch.
    dof : float
        Degrees of freedom of u, dimensionless.
    reason : str
        Why u is missing, or wide; empty where nothing is to be said.
    """

    mean: float
    u: float
    effective: float
    samples: float
    batch_u: float
    dof: float
    reason: str

    @property
    def normal_u(self) -> float:
        """The uncertainty whose normal 95 % interval is as wide as that of Student's t: u t(0.975, dof) / 1.96."""
        if not np.isfinite(self.u) or not np.isfinite(self.dof):
            return self.u
        return float(self.u * stdtrit(self.dof, 0.975) / 1.959963985)


def window_means(count: ArrayLike, mean: ArrayLike, squares: ArrayLike) -> tuple[WindowMean, ...]:
    """Return the mean of each column over a window, with its uncertainty from the correlated record.

    Parameters
    ----------
    count : (B, C) array_like
        Samples of each block, in the order of time, dimensionless; 0 for a block without.
    mean : (B, C) array_like
        Block means, in units of the column; anything where the count is 0.
    squares : (B, C) array_like
        Sums of squared deviations from the block's mean, in squared units of the column.

    Returns
    -------
    tuple of WindowMean
        One of each column.

    Notes
    -----
    The variance of the mean is that of `variance_of_mean` over the block means: what is correlated within a block is
    in them. The variance s² of a single sample is (Σ squares + Σ n_i (z_i − mean)²) / N + u², the last term for the mean
    that was taken out; the effective samples are s²/u², which for uncorrelated samples is N and for an autoregression of
    first order N (1 − φ)/(1 + φ) (G. E. P. Box, G. M. Jenkins and G. C. Reinsel, Time Series Analysis, 1994, sec. 2.1).
    Beside it stand batch means (the spread of 20 to 30 consecutive batches over √batches).

    Examples
    --------
    >>> rng = np.random.default_rng(3)
    >>> blocks = rng.standard_normal((200, 50))
    >>> square = ((blocks - blocks.mean(axis=1)[:, None]) ** 2).sum(axis=1)
    >>> (found,) = window_means(np.full((200, 1), 50), blocks.mean(axis=1)[:, None], square[:, None])
    >>> bool(6_000 < found.effective < 14_000), found.reason
    (True, '')
    """
    n = np.asarray(count, dtype=np.float64)
    z = np.where(n > 0, np.asarray(mean, dtype=np.float64), 0.0)
    inner = np.where(n > 0, np.asarray(squares, dtype=np.float64), 0.0)
    total = n.sum(axis=0)
    safe = np.where(total > 0, total, 1.0)
    middle = np.where(total > 0, (n * z).sum(axis=0) / safe, np.nan)
    residual = np.where(n > 0, z - middle, 0.0)
    about = variance_of_mean(residual, n)
    single = (inner.sum(axis=0) + (n * residual**2).sum(axis=0)) / safe
    batch = _batch_uncertainty(n, z)
    return tuple(
        _told(*values)
        for values in zip(
            middle, about.variance, about.dof, single, total, (n > 0).sum(axis=0), batch, strict=True
        )
    )


def window_mean(count: ArrayLike, mean: ArrayLike, squares: ArrayLike) -> WindowMean:
    """Return the mean of one column over a window, with its uncertainty from the correlated record.

    Parameters
    ----------
    count : (B,) array_like
        Samples of each block, in the order of time, dimensionless.
    mean : (B,) array_like
        Block means, in units of the column.
    squares : (B,) array_like
        Sums of squared deviations from the block's mean, in squared units of the column.

    Returns
    -------
    WindowMean
        See `window_means`.

    Examples
    --------
    >>> window_mean([9, 9, 9], [1.0, 1.1, 1.2], [0.1, 0.1, 0.1]).reason
    'only 3 blocks of samples: at least 10 show how the record is correlated'
    """
    n, z, inner = (np.asarray(values, dtype=np.float64)[:, None] for values in (count, mean, squares))
    return window_means(n, z, inner)[0]


def _told(
    mean: float, variance: float, dof: float, single: float, total: float, blocks: int, batch: float
) -> WindowMean:
    """One column's mean with what is to be said of its uncertainty."""
    none = float("nan")
    if blocks < FEWEST_BLOCKS:
        reason = f"only {blocks} block{'' if blocks == 1 else 's'} of samples: at least {FEWEST_BLOCKS} show how the record is correlated"
        return WindowMean(float(mean), none, none, float(total), none, none, reason)
    # rounding of equal numbers leaves a few parts in 1e16 of the value
    if not single > (1e-13 * abs(mean)) ** 2:
        reason = "the readings do not change at all: their scatter is not known"
        return WindowMean(float(mean), none, none, float(total), none, none, reason)
    effective = float(min((single + variance) / variance, total)) if variance > 0 else float(total)
    if effective < LEAST_EFFECTIVE:
        reason = f"correlated over the whole window (about {effective:.1f} effective samples): its mean has no known uncertainty"
        return WindowMean(float(mean), none, effective, float(total), float(batch), float(dof), reason)
    reason = (
        ""
        if effective >= FEW_EFFECTIVE
        else f"only about {effective:.0f} effective samples: widened by Student's t of {dof:.1f} degrees of freedom"
    )
    return WindowMean(
        float(mean), float(np.sqrt(variance)), effective, float(total), float(batch), float(dof), reason
    )


def _batch_uncertainty(count: Array, mean: Array) -> Array:
    """The spread of the means of consecutive batches over √batches."""
    blocks, columns = count.shape
    batches = next((number for number in _BATCHES if blocks >= 2 * number), 0)
    if not batches:
        return np.full(columns, np.nan)
    starts = np.linspace(0, blocks, batches + 1).astype(np.intp)[:-1]
    weight = np.add.reduceat(count, starts, axis=0)
    total = np.add.reduceat(count * mean, starts, axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        means = np.where(weight > 0, total / weight, np.nan)
    held = np.isfinite(means).sum(axis=0)
    away = np.where(
        np.isfinite(means), means - (total.sum(axis=0) / np.maximum(weight.sum(axis=0), 1.0)), 0.0
    )
    spread = (weight * away**2).sum(axis=0) / np.maximum(weight.sum(axis=0), 1.0)
    return np.asarray(np.where(held > 10, np.sqrt(spread / np.maximum(held - 1, 1)), np.nan))
