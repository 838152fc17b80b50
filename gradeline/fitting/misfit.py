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
    For each observation and each pattern g (1, S, V²/2g) the residuals, bounded at three standard deviations so that
    no single reading speaks for the runs, are projected on g / σ; the score is that projection over its standard
    deviation, the stated persistent errors included. Beyond the Bonferroni point of the normal distribution over all
    observations and patterns the misfit is shared.

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
    bounded = np.where(known, np.clip(residuals / sigma, -_BOUND, _BOUND), 0.0)
    scores = []
    for pattern in (np.ones(len(residuals)), slope, velocity_head):
        weight = np.where(known, np.nan_to_num(pattern)[:, None] / sigma, 0.0)
        total = np.einsum("rn,rn->n", weight, weight)
        along = np.einsum("rn,rn->n", weight, bounded)
        common = np.einsum("rn,rn->n", weight, np.where(known, persistent / sigma, 0.0))
        variance = total + common**2
        score = np.where(variance > 0, along / np.sqrt(np.where(variance > 0, variance, 1.0)), 0.0)
        scores.append(score)
    score = np.column_stack(scores)
    critical = float(ndtri(1.0 - false_alarm / (2 * n * len(PATTERNS))))
    at = int(np.abs(score).argmax()) if score.size else 0
    return SharedMisfit(
        shared=bool(np.abs(score).max(initial=0.0) > critical),
        score=score,
        critical=critical,
        pattern=at % len(PATTERNS),
    )
