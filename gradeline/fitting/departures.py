"""How the slopes of a wall depart from the fitted law: a trend over Re, an intercept of S, or an offset of ln f."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.held_slopes import HeldSlopes, held_slopes, student_point, told_by_runs
from gradeline.fitting.wall import WallData, WallFit

__all__ = ["Departure", "Departures", "measure_departures"]

Array = NDArray[np.float64]

#: A departure from the law is no chance beyond this probability.
_FALSE_ALARM = 0.01
_FEWEST = 3
_ROUNDS = 8


@dataclass(frozen=True)
class Departure:
    """One way in which the slopes depart from the law, the roughness fitted anew beside it.

    Parameters
    ----------
    value, u : float
        Its size and standard uncertainty: a change of ln f per decade of Re, or of S, dimensionless; NaN where the runs
        tell none.
    rise : float
        By how much χ² falls for it, dimensionless.
    beyond_chance : bool
        Whether that is more than chance does in one of a hundred surveys.
    """

    value: float
    u: float
    rise: float
    beyond_chance: bool


@dataclass(frozen=True)
class Departures:
    """The departures that are looked for.

    Parameters
    ----------
    trend : Departure
        Of ln f over log₁₀ Re.
    intercept : Departure
        Of S, the same in all runs: what an error of the heads in proportion to the chainage leaves.
    offset : Departure
        Of ln f, the same in all runs: what an error of the bore or of the flow's scale leaves, beyond what was stated of
        them.
    """

    trend: Departure
    intercept: Departure
    offset: Departure

    @property
    def by_intercept(self) -> bool:
        """Whether an intercept of S is beyond chance, and accounts for the slopes better than the others do."""
        return self.intercept.beyond_chance and self.intercept.rise > max(self.trend.rise, self.offset.rise)


def measure_departures(data: WallData, fit: WallFit) -> Departures:
    """Measure a trend of f over Re against the fitted law, and an intercept of S.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    fit : WallFit
        Of that data.

    Returns
    -------
    Departures
        NaN with fewer than four slopes.

    Notes
    -----
    Each is a column added to ln S = ln S_law(ε): log₁₀ Re, or c/S_law for S = S_law + c, with ε >= 0 fitted anew. Heads
    whose errors grow in proportion to the chainage (a tilted scale, elevations levelled from a wrong benchmark) tilt
    every run's line by the same c; one error common to all taps tilts none and cannot be seen.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> shifted = replace(data, slope=data.slope + 1e-3)
    >>> found = measure_departures(shifted, fit_wall(shifted, np.isfinite(data.slope)))
    >>> round(found.intercept.value, 4), found.intercept.beyond_chance
    (0.001, True)
    """
    nothing = Departure(float("nan"), float("nan"), 0.0, False)
    if fit.used.sum() <= _FEWEST or np.ptp(np.log(data.reynolds[fit.used])) < 1e-6:
        return Departures(nothing, nothing, nothing)
    fixed = held_slopes(data, fit, fit.used)
    _, least = fixed.best()
    by_runs, freedom = told_by_runs(fit), fit.dof
    if by_runs:
        freedom = max(float(fit.used.sum()) - 2.0, 1.0)
    found = []
    for value, u, with_it in (_along(fixed, fixed.decades()), _intercept(fixed), _along(fixed, fixed.ones())):
        # What the column explains is no scatter: where the runs tell that, it is counted without.
        scale = freedom / max(with_it, 1e-9) if by_runs else 1.0
        rise = scale * max(least - with_it, 0.0)
        limit = student_point(freedom, 1.0 - _FALSE_ALARM / 2.0) ** 2
        size = u / np.sqrt(scale)
        beyond = np.isfinite(value) and rise > limit and abs(value) > np.sqrt(limit) * size
        found.append(Departure(value, float(size), float(rise), bool(beyond)))
    return Departures(*found)


def _along(fixed: HeldSlopes, column: Callable[[float | Array], Array]) -> tuple[float, float, float]:
    """(multiple of a column, standard uncertainty, χ² with it)."""
    roughness, with_it = fixed.best(column)
    return (*fixed.coefficient(column, roughness), with_it)


def _intercept(fixed: HeldSlopes) -> tuple[float, float, float]:
    """(value, standard uncertainty, χ² with it), by Gauss–Newton steps: it may be as large as the slopes of slow runs."""
    now, u, with_it = fixed, float("nan"), float("nan")
    for _ in range(_ROUNDS):
        roughness, with_it = now.best(now.inverse_slope())
        step, u = now.coefficient(now.inverse_slope(), roughness)
        if not np.isfinite(step):
            return float("nan"), float("nan"), with_it
        now = replace(now, shift=now.shift + step)
        if abs(step) < 0.01 * u:
            break
    return now.shift, u, with_it
