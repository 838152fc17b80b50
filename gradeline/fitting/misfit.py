"""A misfit that most runs share is no set of outliers: the same taps off in the same way, run after run."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

__all__ = ["PATTERNS", "SharedMisfit", "shared_misfit"]

Array = NDArray[np.float64]

#: How a tap's error may go with the flow.
PATTERNS = ("constant over the runs", "growing with the slope", "growing with the velocity head")
#: With fewer runs there is no telling what most of them do.
_FEWEST_RUNS = 3
#: A single run counts for no more than this many of its standard deviations.
_BOUND = 3.0


@dataclass(frozen=True)
class SharedMisfit:
    """The verdict over all runs.

    Parameters
    ----------
    shared : bool
        Whether most runs share a misfit.
    score : (n, 3) array
        Standardised mean of each observation's residuals along each of `PATTERNS`, dimensionless.
    critical : float
        The score beyond which it is no chance, dimensionless.
    pattern : int
        The pattern of the largest score.
    """

    shared: bool
    score: Array
    critical: float
    pattern: int


def shared_misfit(
    residuals: Array,
    deviation: Array,
    slope: Array,
    velocity_head: Array,
    persistent: Array,
    *,
    false_alarm: float = 0.002,
) -> SharedMisfit:
    """Test whether observations are off in the same way over the runs.

    Parameters
    ----------
    residuals : (R, n) array
        Residuals of the runs' lines, m; NaN where an observation did not enter.
    deviation : (R, n) array
        Standard deviation of each residual from scatter alone, m.
    slope : (R,) array
        Friction slope of each run, dimensionless.
    velocity_head : (R,) array
        V²/2g of each run, m.
    persistent : (R, n) array
        Standard uncertainty of each observation from errors that are the same in all runs and stated (position,
        elevation, zero), m.
    false_alarm : float
        Probability that a sound survey is called shared, family-wise, dimensionless.

    Returns
    -------
    SharedMisfit
        The scores and the verdict.

    Notes
    -----
    For each observation and each pattern g (1, S, V²/2g) the error b of e = b g is found in one step of Huber's
    M-estimate: from the weighted median of e where g = 1 and from 0 elsewhere, the rest of each run counts for three standard
    deviations at most, so that no single reading speaks for the runs (P. J. Huber and E. M. Ronchetti, *Robust
    Statistics*, 2nd ed. 2009, ch. 6 and 7). The stated persistent errors are added to its variance. Beyond the
    Bonferroni point of the normal distribution over all observations and patterns the misfit is shared.

    Examples
    --------
    >>> rng = np.random.default_rng(2)
    >>> noise = rng.standard_normal((12, 10))
    >>> flat = np.ones((12, 10))
    >>> flow = np.linspace(0.1, 1.0, 12)
    >>> shared_misfit(noise, flat, flow, flow, 0 * flat).shared
    False
    >>> shared_misfit(noise + 3.0 * (np.arange(10) == 4), flat, flow, flow, 0 * flat).shared
    True
    """
    n = residuals.shape[1]
    known = np.isfinite(residuals) & (deviation > 0)
    sigma = np.where(known, deviation, 1.0)
    scores: list[Array] = []
    for pattern in (np.ones(len(residuals)), slope, velocity_head):
        growth = np.nan_to_num(pattern)[:, None]
        usable = known & (growth > 0)
        weight = np.where(usable, growth / sigma, 0.0)
        scaled = np.where(usable, residuals / sigma, 0.0)
        start = _weighted_median(np.where(usable, residuals / np.where(usable, growth, 1.0), 0.0), weight)
        # Where errors grow with the flow a few fast runs have most of the weight: their median is no safe start.
        if scores:
            start = np.zeros(n)
        total = np.einsum("rn,rn->n", weight, weight)
        rest = np.einsum("rn,rn->n", weight, np.clip(scaled - start * weight, -_BOUND, _BOUND))
        common = np.einsum("rn,rn->n", weight, np.where(usable, persistent / sigma, 0.0))
        sound = (total > 0) & (usable.sum(axis=0) >= _FEWEST_RUNS)
        safe = np.where(sound, total, 1.0)
        variance = 1.0 / safe + (common / safe) ** 2
        scores.append(np.where(sound, (start + rest / safe) / np.sqrt(variance), 0.0))
    score = np.column_stack(scores)
    critical = float(ndtri(1.0 - false_alarm / (2 * n * len(PATTERNS))))
    at = int(np.abs(score).argmax()) if score.size else 0
    return SharedMisfit(
        shared=bool(np.abs(score).max(initial=0.0) > critical),
        score=score,
        critical=critical,
        pattern=at % len(PATTERNS),
    )


def _weighted_median(values: Array, weight: Array) -> Array:
    """Median of each column with its weights; 0 where there are none."""
    if not len(values):
        return np.zeros(values.shape[1])
    order = np.argsort(values, axis=0)
    rising = np.take_along_axis(values, order, axis=0)
    share = np.cumsum(np.take_along_axis(weight, order, axis=0), axis=0)
    half = share[-1] / 2
    # The mean of the two middle ones where the weight splits evenly between them.
    above = np.argmax(share > half * (1 + 1e-12), axis=0)
    below = np.argmax(share >= half * (1 - 1e-12), axis=0)
    columns = np.arange(values.shape[1])
    return np.asarray((rising[above, columns] + rising[below, columns]) / 2)
