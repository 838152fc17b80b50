"""What may ail a line over all runs: errors of single taps, a loss that nobody listed, a change of slope."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Curve", "Gap", "Suspects", "bulge", "curves_of", "gaps_between"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: With fewer places in a reach a gradual change of slope is not told from an error of one tap.
_FEWEST_PLACES = 6


@dataclass(frozen=True)
class Gap:
    """The stretch between two neighbouring taps, where something unlisted may sit.

    Parameters
    ----------
    low, high : float
        Chainages of its ends, m.
    step : (n,) array
        Fall of each observation for a loss of one metre there, dimensionless.
    kink : (n,) array
        Fall of each observation for a slope larger by 1 from its middle on, m.
    few : int
        Usable places on the side that has the fewer.
    reach : int
        The reach that it lies in.
    """

    low: float
    high: float
    step: Array
    kink: Array
    few: int
    reach: int

    @property
    def middle(self) -> float:
        """Chainage of its middle, m."""
        return (self.low + self.high) / 2.0


@dataclass(frozen=True)
class Curve:
    """A reach along which the slope may change gradually.

    Parameters
    ----------
    reach : int
        Which.
    low, high : float
        Chainages of its ends, m.
    fall : (n,) array
        Fall of each observation for a slope that is smaller by 1 at its start and larger by 1 at its end, m.
    """

    reach: int
    low: float
    high: float
    fall: Array


@dataclass(frozen=True)
class Suspects:
    """Everything that is looked at, for F runs of n observations.

    Parameters
    ----------
    sight : (n, s) array
        What each observation sees of the error of each of s subjects (taps, or gauges between two taps), dimensionless.
    grows : (s,) bool array
        Whether the error of a subject may grow with the flow (a tap's may, a gauge's may not).
    slope, velocity_head : (F, s) array
        Friction slope at each subject, dimensionless, and V²/2g there, m.
    gaps : tuple of Gap
        Where a loss or a change of slope may sit.
    gap_slope, gap_velocity_head : (F, g) array
        The same in each gap: dimensionless, m.
    curves : tuple of Curve
        Reaches with enough taps to see a gradual change of slope.
    curve_slope : (F, c) array
        Friction slope in each of them, dimensionless.
    """

    sight: Array
    grows: Mask
    slope: Array
    velocity_head: Array
    gaps: tuple[Gap, ...]
    gap_slope: Array
    gap_velocity_head: Array
    curves: tuple[Curve, ...]
    curve_slope: Array


def gaps_between(chainage: Array, sight: Array, reach_of: NDArray[np.intp], used: Mask) -> tuple[Gap, ...]:
    """List the stretches between neighbouring places that are read.

    Parameters
    ----------
    chainage : (T,) array
        Of the taps, m.
    sight : (n, T) array
        Which taps each observation sees, dimensionless.
    reach_of : (T,) int array
        Reach of each tap.
    used : (n,) bool array
        Observations that enter in any run.

    Returns
    -------
    tuple of Gap
        In order of chainage.

    Examples
    --------
    >>> x = np.array([0.0, 1.0, 2.0, 3.0])
    >>> gaps = gaps_between(x, np.eye(4), np.zeros(4, dtype=int), np.ones(4, dtype=bool))
    >>> [(gap.low, gap.high, gap.few) for gap in gaps]
    [(0.0, 1.0, 1), (1.0, 2.0, 2), (2.0, 3.0, 1)]
    """
    read = (sight[used] != 0).any(axis=0)
    places = np.unique(chainage[read])
    found = []
    for number, (low, high) in enumerate(itertools.pairwise(places)):
        middle = (low + high) / 2.0
        beyond = (chainage > middle).astype(float)
        found.append(
            Gap(
                float(low),
                float(high),
                sight @ beyond,
                sight @ (np.maximum(chainage - middle, 0.0)),
                min(number + 1, len(places) - number - 1),
                int(reach_of[np.flatnonzero(chainage == high)[0]]),
            )
        )
    return tuple(found)


def bulge(chainage: Array, low: float, high: float) -> Array:
    """Fall of a line whose slope is smaller by 1 at the start of a reach and larger by 1 at its end.

    Parameters
    ----------
    chainage : array
        m.
    low, high : float
        Ends of the reach, m.

    Returns
    -------
    array
        m; with the mean slope taken out, so that it is the same at both ends.

    Examples
    --------
    >>> bulge(np.array([0.0, 1.0, 2.0, 5.0]), 0.0, 2.0).tolist()
    [0.5, 0.0, 0.5, 0.5]
    """
    return np.asarray((np.clip(chainage, low, high) - (low + high) / 2.0) ** 2 / (high - low))


def curves_of(
    chainage: Array, sight: Array, reach_of: NDArray[np.intp], bounds: Array, used: Mask
) -> tuple[Curve, ...]:
    """List the reaches along which a gradual change of slope can be seen.

    Parameters
    ----------
    chainage : (T,) array
        Of the taps, m.
    sight : (n, T) array
        Which taps each observation sees, dimensionless.
    reach_of : (T,) int array
        Reach of each tap.
    bounds : (K + 1,) array
        Ends of the reaches, m.
    used : (n,) bool array
        Observations that enter in any run.

    Returns
    -------
    tuple of Curve
        Those with six places or more.

    Examples
    --------
    >>> x, every = np.arange(7.0), np.ones(7, dtype=bool)
    >>> [c.reach for c in curves_of(x, np.eye(7), np.zeros(7, dtype=int), np.array([0.0, 6.0]), every)]
    [0]
    """
    read = (sight[used] != 0).any(axis=0)
    found = []
    for reach, (low, high) in enumerate(itertools.pairwise(bounds)):
        if len(np.unique(chainage[read & (reach_of == reach)])) >= _FEWEST_PLACES:
            fall = sight @ bulge(chainage, float(low), float(high))
            found.append(Curve(reach, float(low), float(high), fall))
    return tuple(found)
