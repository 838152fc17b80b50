"""What a look at all runs together can find: errors of taps, breaks of the line."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.diagnosis.steady_scatter import SteadyScatter

__all__ = ["Ailment", "Break", "Diagnosis"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class Ailment:
    """An error of one subject (a tap, or a gauge between two taps) over the runs.

    Parameters
    ----------
    subject : int
        Which.
    pattern : {"offset", "edge", "chainage", "offset and edge", "offset and chainage", "unsteady"}
        How its error goes over the runs, the best of them.
    offset, offset_u : float
        Constant part and its standard uncertainty, m; NaN where the pattern has none.
    edge, edge_u : float
        Part that grows as the velocity head, over it, if that is what grows, dimensionless.
    chainage, chainage_u : float
        True chainage less the stated one, if it is that which makes the error grow with the slope, m.
    preference : float
        χ² with chainage in it less χ² with edge: positive where an edge error fits better; dimensionless.
    gain : float
        What taking it up is worth in χ², all else that was found given; dimensionless.
    error : (F,) array
        Error of each run, m, however it goes; NaN where it was not read.
    error_u : (F,) array
        Its standard deviation, m.
    """

    subject: int
    pattern: str
    offset: float
    offset_u: float
    edge: float
    edge_u: float
    chainage: float
    chainage_u: float
    preference: float
    gain: float
    error: Array
    error_u: Array


@dataclass(frozen=True)
class Break:
    """A step or a kink of the grade line that nobody listed.

    Parameters
    ----------
    kind : {"step", "kink", "curve"}
        A loss at one place, another slope from there on (with a step, where there is one), or a slope that changes
        gradually along a reach.
    gap : int
        The best of the gaps, or the number of the curve.
    at : float
        Middle of that gap, where it is put, m.
    low, high : float
        Chainages between which it lies with 95 %, m.
    loss, loss_u : float
        Fall of the energy head there over the velocity head, dimensionless: K of a step; of a kink the part that is no
        slope.
    change, change_u : float
        Relative change of the slope downstream of a kink, or from start to end of a curve, dimensionless; NaN of a step.
    gain : float
        What taking it up is worth in χ², all else that was found given; dimensionless.
    rival : float
        What the best error of a single tap in its place would be worth in χ², dimensionless.
    """

    kind: str
    gap: int
    at: float
    low: float
    high: float
    loss: float
    loss_u: float
    change: float
    change_u: float
    gain: float
    rival: float


@dataclass(frozen=True)
class Diagnosis:
    """What was found.

    Parameters
    ----------
    done : bool
        Whether there was enough to look at.
    reason : str or None
        Why not; or why nothing was taken up though something is off.
    taps : tuple of Ailment
        Errors of taps and gauges.
    breaks : tuple of Break
        Steps and kinks of the line.
    together : (F, n) bool array
        Readings that are wrong two in a run, such as two that changed places, where no other two would do.
    offset, offset_u, edge, edge_u : (s,) array
        Of each subject, all others taken as what was found of them, the two fitted together: m, dimensionless; NaN where not to be had.
    scatter : SteadyScatter or None
        The scale by which all was judged.
    """

    done: bool
    reason: str | None
    taps: tuple[Ailment, ...]
    breaks: tuple[Break, ...]
    together: Mask
    offset: Array
    offset_u: Array
    edge: Array
    edge_u: Array
    scatter: SteadyScatter | None
