"""Offsets of the static runs that stand out from those of the other taps: taken off, and worth a word."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.fitting.standing_out import standing_out
from gradeline.reduction.corrections import Corrections
from gradeline.survey import Survey

__all__ = ["standing_offsets"]

Array = NDArray[np.float64]

#: Probability that one is named by the scatter of the readings alone.
_FALSE_ALARM = 0.01
#: That one is named where every tap has an offset of its own, all of one kind: they are taken off, so a word too many
#: does no harm.
_OF_ONE_KIND = 0.05
#: At most one in so many stands out.
_ONE_IN = 4


def standing_offsets(survey: Survey, corrections: Corrections, u: Array, dof: float) -> NDArray[np.bool_]:
    """Tell which taps have a static offset beyond its own uncertainty and beyond what the other taps have.

    Parameters
    ----------
    survey : Survey
        Its observations.
    corrections : Corrections
        The offsets, m.
    u : (n,) array
        Standard uncertainty of each offset by the scatter, m; 0 where it is not known.
    dof : float
        Degrees of freedom of that scatter; 0 or infinite where it is stated.

    Returns
    -------
    (n,) bool array
        None where the offsets were not taken off, or fewer than 4 taps were read at rest.
    """
    found = np.zeros(len(u), dtype=bool)
    alone = np.array([one.tap_2 is None for one in survey.observations], dtype=bool)
    mine = np.flatnonzero(alone & np.isfinite(corrections.offset) & (u > 0))
    if not corrections.applied or len(mine) < 4:
        return found
    offset = corrections.offset[mine]
    # In units of their own scatter: a coarse gauge beside fine ones is not out for that.
    away = (offset - np.median(offset)) / u[mine]
    beyond = float(stdtrit(dof if dof > 0 and np.isfinite(dof) else 1e9, 1 - _FALSE_ALARM / (2 * len(mine))))
    most = max(len(mine) // _ONE_IN, 1)
    found[mine] = standing_out(away, most=most, false_alarm=_OF_ONE_KIND) & (np.abs(away) > beyond)
    return found
