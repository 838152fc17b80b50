"""How a tap that follows no rule goes with the head it should show: stuck, slow, or now and then."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Following", "following"]

Array = NDArray[np.float64]

#: The head must move by this many standard deviations for a reading to be said not to follow it.
_MOVES = 5.0
#: Of an error beyond this many standard deviations a reading is off.
_OFF = 3.0


@dataclass(frozen=True)
class Following:
    """How the readings of a tap go with the head they should show.

    Parameters
    ----------
    share : float
        Part of the head's change over the runs that the reading makes, dimensionless: 1 follows, 0 is stuck; NaN where the
        head does not move.
    stuck : float
        Part of the errors' variance explained by a reading that follows by that share, dimensionless.
    memory : float
        Part of the change since the run before that the reading lags behind, dimensionless.
    slow : float
        Part of the errors' variance that such a lag explains, dimensionless.
    sound : float
        Share of the runs in which the reading is right, dimensionless.
    """

    share: float
    stuck: float
    memory: float
    slow: float
    sound: float


def following(head: Array, error: Array, deviation: Array, before: Array | None = None) -> Following:
    """Hold the readings of a tap against the heads that the other taps give.

    Parameters
    ----------
    head : (F,) array
        As read, m, in the order of the runs; NaN where not read.
    error : (F,) array
        Reading less the head that the others give, m.
    deviation : (F,) array
        Standard deviation of the error, m.
    before : (F,) array, optional
        Head as read in the run before each, m; by default the entry before.

    Returns
    -------
    Following
        Least squares of the errors on the head, and on what the run before left behind; NaN for fewer than four runs.

    Examples
    --------
    A tube that shows the first run's head ever after:

    >>> true = np.array([1.0, 1.4, 0.8, 1.1, 1.9, 1.2])
    >>> found = following(np.full(6, 1.0), 1.0 - true, np.full(6, 0.001))
    >>> round(found.share, 6), round(found.stuck, 6)
    (0.0, 1.0)

    And one that goes half of the way from run to run:

    >>> read = np.array([1.0, 1.2, 1.0, 1.05, 1.475, 1.3375])
    >>> found = following(read, read - true, np.full(6, 0.001))
    >>> round(found.memory, 6), round(found.slow, 6)
    (0.5, 1.0)
    """
    known = np.isfinite(head) & np.isfinite(error) & (deviation > 0)
    if known.sum() < 4:
        return Following(*(float("nan"),) * 5)
    should = (head - error)[known]
    off = error[known]
    sigma = float(np.median(deviation[known]))
    sound = float((np.abs(off) < _OFF * deviation[known]).mean())
    share, stuck = float("nan"), 0.0
    if np.std(should) > _MOVES * sigma:
        slope, stuck = _explained(should, off)
        share = 1.0 + slope
    last = np.concatenate([[np.nan], head[known][:-1]]) if before is None else before[known]
    before = last - should
    rest = np.isfinite(before)
    memory, slow = 0.0, 0.0
    if np.std(before[rest]) > _MOVES * sigma:
        memory, slow = _explained(before[rest], off[rest])
    return Following(share, stuck, memory, slow, sound)


def _explained(cause: Array, error: Array) -> tuple[float, float]:
    """Slope of the errors on a cause, and the part of their variance that it explains."""
    centred, rest = cause - cause.mean(), error - error.mean()
    spread, total = float(centred @ centred), float(rest @ rest)
    if not (spread > 0 and total > 0):
        return 0.0, 0.0
    slope = float(centred @ rest) / spread
    return slope, min(slope * float(centred @ rest) / total, 1.0)
