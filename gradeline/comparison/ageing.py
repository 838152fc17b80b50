"""How fast a wall grows rougher, and the line to a later date."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc, stdtrit

from gradeline.fitting.joint import JointLevels, JointLine, Part, freedom_of, joint_line

__all__ = ["YEAR", "Ageing", "ageing_of"]

Array = NDArray[np.float64]

#: Days of a year of the calendar in use.
YEAR = 365.2425
#: The line is drawn at so many dates beside those of the surveys.
_PLACES = 48
#: From so many surveys on they tell whether they follow a line.
_FEWEST = 4
_MISFIT = 0.01
_MANY = 1e9


@dataclass(frozen=True)
class Ageing:
    """The line of ageing of a wall.

    Parameters
    ----------
    about : dict
        Columns for the table of walls.
    rows : tuple of dict
        Rows for the table of the line; empty where there is none.
    years : (n,) array
        Time of each survey since the first, years.
    beyond_chance : bool
        Whether the rate is told from zero.
    """

    about: dict[str, Any]
    rows: tuple[dict[str, Any], ...]
    years: Array
    beyond_chance: bool


def ageing_of(
    parts: Sequence[Part],
    levels: JointLevels,
    days: Sequence[datetime.date],
    reynolds: float,
    diameter: float,
    level: float,
    until: datetime.date | None,
) -> Ageing:
    """Return the growth of ε a year, and the line from the first survey to the last or to a later date.

    Parameters
    ----------
    parts : sequence of Part
        The wall in each survey.
    levels : JointLevels
        Its friction in each.
    days : sequence of date
        Of each survey.
    reynolds, diameter : float
        At which f is told.
    level : float
        Coverage of the intervals.
    until : date or None
        Where the line ends, the last survey by default.

    Returns
    -------
    Ageing
        ε = ε₀ + α t (Colebrook and White 1937), its uncertainty with all errors, those that the surveys share once. From
        four surveys on, where they scatter about the line beyond their uncertainties (χ², 1 %), u is multiplied by
        √(χ²/(n − 2)), and Student's t has n − 2 degrees of freedom.
    """
    years = np.array([(day - days[0]).days / YEAR for day in days])
    if len(set(days)) < 2:
        return Ageing(
            {"reason": "all surveys that have this wall are of one day: no rate of growth"}, (), years, False
        )
    if not levels.resolved.any():
        why = "no survey tells the roughness from zero: no rate of growth"
        return Ageing({"reason": why}, (), years, False)
    line = joint_line(parts, years)
    if not line.settled:
        why = "the roughnesses follow no line that could be fitted: no rate of growth"
        return Ageing({"reason": why}, (), years, False)
    p, scale = _misfit(levels, line, parts, reynolds, diameter)

    def of(weights: Array) -> tuple[float, float, float]:
        u = scale * float(np.sqrt(weights @ line.covariance @ weights))
        dof = len(parts) - 2.0 if scale > 1.0 else freedom_of(line, weights)
        return u, float(stdtrit(min(dof, _MANY), 0.5 + level / 2.0)) * u, dof

    u, half, dof = of(np.array([0.0, 1.0]))
    about = {
        "roughness_rate": line.rate,
        "roughness_rate_u": u,
        "roughness_rate_dof": dof if np.isfinite(dof) else None,
        "roughness_rate_low": line.rate - half,
        "roughness_rate_high": line.rate + half,
        "line_p": p,
        "line_scale": scale,
    }
    rows = []
    law = parts[0].data.law
    for day in _places(days, until):
        when = (day - days[0]).days / YEAR - line.middle
        value = line.level + line.rate * when
        own, wide, _ = of(np.array([1.0, when]))
        shown = max(value, 0.0)
        rows.append(
            {
                "date": day.isoformat(),
                "roughness": shown,
                "roughness_u": own,
                "roughness_low": max(value - wide, 0.0),
                "roughness_high": max(value + wide, 0.0),
                "friction_factor": float(law.factor(reynolds, shown / diameter)),
                "friction_factor_low": float(law.factor(reynolds, max(value - wide, 0.0) / diameter)),
                "friction_factor_high": float(law.factor(reynolds, max(value + wide, 0.0) / diameter)),
                "beyond_surveys": day > max(days),
            }
        )
    return Ageing(about, tuple(rows), years, abs(line.rate) > half)


def _misfit(
    levels: JointLevels, line: JointLine, parts: Sequence[Part], reynolds: float, diameter: float
) -> tuple[float | None, float]:
    """Whether the surveys follow the line, and what to multiply its uncertainty by where they do not."""
    count = len(parts)
    if count < _FEWEST:
        return None, 1.0
    expected = []
    for part, size in zip(parts, line.roughness, strict=True):
        edge = max(float(size), 0.0)
        factor, _, by = part.data.law.sensitivities(reynolds, edge / diameter)
        expected.append(float(np.log(factor)) + float(by) / diameter * (float(size) - edge))
    away = levels.log_factor - np.array(expected)
    square = float(away @ np.linalg.solve(levels.covariance, away))
    p = float(chdtrc(count - 2, square))
    return p, float(np.sqrt(square / (count - 2))) if p < _MISFIT else 1.0


def _places(days: Sequence[datetime.date], until: datetime.date | None) -> list[datetime.date]:
    first, last = min(days), max(*days, until) if until is not None else max(days)
    span = (last - first).days
    between = {first + datetime.timedelta(days=round(span * n / _PLACES)) for n in range(_PLACES + 1)}
    return sorted(between | set(days) | {last})
