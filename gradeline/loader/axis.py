"""Chainages measured on a plan to true lengths along the pipe's axis."""

from __future__ import annotations

import dataclasses

import numpy as np

from gradeline.survey import Fitting, Reach, Tap

__all__ = ["along_axis"]


def along_axis(
    reaches: tuple[Reach, ...], fittings: tuple[Fitting, ...], taps: tuple[Tap, ...]
) -> tuple[tuple[Reach, ...], tuple[Fitting, ...], tuple[Tap, ...]]:
    """Return the line with plan chainages replaced by lengths along the axis.

    Between taps the axis runs straight; before the first and after the last it is level. The line keeps the
    chainage of its start.

    Parameters
    ----------
    reaches, fittings, taps : tuples
        With chainages on the plan, m, and the elevations of the taps, m.

    Returns
    -------
    tuple
        The same with true lengths, m.

    Examples
    --------
    A rise of 3 m over 4 m on the plan is 5 m of pipe.

    >>> from gradeline.quantities import Measured
    >>> reach = Reach("main", 0.0, 4.0, Measured(0.1), "steel")
    >>> taps = (Tap("A", 0.0, elevation=0.0), Tap("B", 4.0, elevation=3.0))
    >>> along_axis((reach,), (), taps)[0][0].end
    5.0
    """
    start, end = reaches[0].start, reaches[-1].end
    plan = np.array([start, *(tap.chainage for tap in taps), end])
    level = np.array([taps[0].elevation, *(tap.elevation for tap in taps), taps[-1].elevation])
    axis = start + np.concatenate([[0.0], np.cumsum(np.hypot(np.diff(plan), np.diff(level)))])

    def true(chainage: float) -> float:
        return float(np.interp(chainage, plan, axis))

    return (
        tuple(dataclasses.replace(reach, start=true(reach.start), end=true(reach.end)) for reach in reaches),
        tuple(dataclasses.replace(fitting, at=true(fitting.at)) for fitting in fittings),
        tuple(dataclasses.replace(tap, chainage=true(tap.chainage)) for tap in taps),
    )
