"""Which known surfaces have a roughness such as a wall's: published values, and what was stated of the wall itself."""

from __future__ import annotations

import csv
import math
import re
from dataclasses import dataclass
from functools import cache
from importlib import resources
from typing import Any

import numpy as np
import pandas as pd
from scipy.optimize import minimize_scalar
from scipy.special import stdtrit

from gradeline.fitting.wall import likelihood_rise
from gradeline.quantities import Measured
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["Surface", "known_surfaces", "one_spelling", "roughness_check_table", "surface_table"]

#: Titles of the sources that the list of surfaces names in short.
SOURCES = {
    "Moody 1944": "L. F. Moody, Friction factors for pipe flow, Trans. ASME 66, 1944",
    "Idelchik 2007": "I. E. Idelchik, Handbook of Hydraulic Resistance, 4th ed., 2007",
}
#: A single published value stands for surfaces this much smoother and rougher (common practice).
_SINGLE = 1.3
_SPELLINGS = (("galvanis", "galvaniz"), ("bituminis", "bituminiz"), ("aluminum", "aluminium"))
_MOST = 3
_TELLING = 4
BETTER, WORSE, SAME = "better", "worse", "not distinguishable"


@dataclass(frozen=True)
class Surface:
    """A known surface with the range of its equivalent sand roughness, m, and the source of that."""

    name: str
    low: float
    high: float
    source: str

    @property
    def middle(self) -> float:
        """Geometric mean of the range, m."""
        return math.sqrt(self.low * self.high)

    @property
    def reach(self) -> tuple[float, float]:
        """The range, a single value widened, m."""
        if self.low < self.high:
            return self.low, self.high
        return self.low / _SINGLE, self.high * _SINGLE


@cache
def known_surfaces() -> tuple[Surface, ...]:
    """Return the published surfaces, smoothest first.

    Examples
    --------
    >>> [round(1000 * one.low, 4) for one in known_surfaces() if one.name.startswith("commercial steel")]
    [0.046]
    """
    with (resources.files(__package__) / "known_roughness.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    found = [
        Surface(
            row["surface"],
            float(row["low [mm]"]) / 1000,
            float(row["high [mm]"]) / 1000,
            row["source"],
        )
        for row in rows
    ]
    return tuple(sorted(found, key=lambda one: one.middle))


def one_spelling(name: str) -> str:
    """Return a name in small letters, British and American spellings of the list's words made one.

    Examples
    --------
    >>> one_spelling("Galvanised iron"), one_spelling("aluminum")
    ('galvanized iron', 'aluminium')
    """
    plain = name.strip().casefold()
    for other, ours in _SPELLINGS:
        plain = plain.replace(other, ours)
    return plain


def surface_table(walls: tuple[Wall, ...]) -> pd.DataFrame:
    """Return the published surfaces nearest to each wall, up to three that its interval allows, else the nearest one.

    Where the roughness is not told from zero, those below its upper bound, the roughest first.
    """
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["surfaces"]}
    for wall in walls:
        fit = wall.fit
        if not np.isfinite(fit.upper95) or wall.implausible() is not None:
            continue
        resolved = fit.low > 0 and np.isfinite(fit.high)
        low, high = (fit.low, fit.high) if resolved else (0.0, fit.upper95)
        aim = fit.roughness if resolved else fit.upper95
        near = sorted(known_surfaces(), key=lambda one: (_distance(one, aim), one.high / one.low))
        # What the wall is called comes first, so that cast iron is not told to be like concrete.
        near.sort(key=lambda one: not _words(one.name) & _words(wall.name))
        agree = [one for one in near if one.reach[0] <= high and one.reach[1] >= low]
        if not resolved:
            agree = [one for one in agree if one.middle <= aim]
        nearest = min(near, key=lambda one: _distance(one, aim))
        for one in agree[:_MOST] or [nearest]:
            values = (wall.name, one.name, one.low, one.high, SOURCES[one.source], one in agree)
            for name, entry in zip(rows, values, strict=True):
                rows[name].append(entry)
    return frame("surfaces", rows)


def _words(name: str) -> set[str]:
    """The words of a name that tell something."""
    return {word for word in re.findall(r"[a-z]+", one_spelling(name)) if len(word) >= _TELLING}


def _distance(surface: Surface, roughness: float) -> float:
    """How far a roughness lies from a surface's middle, as a logarithm."""
    return abs(math.log(max(roughness, 1e-9) / surface.middle))


def roughness_check_table(survey: Survey, walls: tuple[Wall, ...], *, level: float) -> pd.DataFrame:
    """Return each wall's roughness against the published and the earlier one that the survey states.

    Parameters
    ----------
    survey : Survey
        Its wall histories.
    walls : tuple of Wall
        As fitted.
    level : float
        Coverage at which a difference is one.

    Returns
    -------
    DataFrame
        ``better`` (smoother), ``worse`` (rougher) or ``not distinguishable``: the least over ε of the rise of χ² of the runs
        and ((ε − stated)/u)² together, against t²(ν).
    """
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["roughness_checks"]}
    fitted = {wall.name: wall for wall in walls}
    for history in survey.wall_histories:
        wall = fitted[history.wall]
        for against, stated, source in (
            ("published", history.published, history.published_source),
            ("earlier", history.earlier, history.earlier_source),
        ):
            if stated is None:
                continue
            verdict, rise, needed, reason = _held_against(wall, stated, level)
            values = (
                wall.name,
                against,
                source,
                stated.value,
                np.nan if stated.u is None else stated.u,
                verdict,
                rise,
                needed,
                reason,
            )
            for name, entry in zip(rows, values, strict=True):
                rows[name].append(entry)
    return frame("roughness_checks", rows)


def _held_against(wall: Wall, stated: Measured, level: float) -> tuple[str | None, float, float, str | None]:
    """(verdict, rise of χ², rise needed, reason where there is no verdict)."""
    fit, nan = wall.fit, float("nan")
    if not np.isfinite(fit.upper95) or wall.implausible() is not None:
        return None, nan, nan, "the runs do not tell the wall's roughness"
    needed = float(stdtrit(fit.dof if np.isfinite(fit.dof) else 1e9, 0.5 + level / 2.0)) ** 2

    def rise(roughness: float) -> float:
        return float(likelihood_rise(wall.data, fit, np.array([max(roughness, 0.0)]))[0])

    value = rise(stated.value)
    if stated.u:
        ends = sorted((stated.value, fit.roughness))
        found = minimize_scalar(
            lambda at: rise(at) + ((at - stated.value) / stated.u) ** 2,
            bounds=(max(ends[0], 0.0), ends[1] + 1e-12),
            method="bounded",
            options={"xatol": 1e-6 * ends[1]},
        )
        value = min(value, float(found.fun))
    value = max(value, 0.0)
    if value <= needed:
        return SAME, value, needed, None
    return (WORSE if fit.roughness > stated.value else BETTER), value, needed, None
