"""What a comparison is: its tables, their columns, and the kind and unit of each column."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
import pandas as pd

from gradeline.quantities.printing import SI_DISPLAY, thousands
from gradeline.quantities.shown import Shown, counted, rows_of, shown
from gradeline.reduction.tables import Column

__all__ = ["COMPARISON_TABLES", "Comparison", "table_of"]

_TEXT, _TRUTH, _NUMBER, _M = Column("text"), Column("truth"), Column("number"), Column("number", "m")
_RATE = Column("number", "m/year")

#: The tables of a comparison, in order, each with its columns in order.
COMPARISON_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        # a row a wall and survey; changes are against the wall's first survey, errors that both share taken out
        "surveys": {
            "wall": _TEXT,
            "survey": _TEXT,
            "title": _TEXT,
            "date": _TEXT,
            "diameter": _M,
            "fluid": _TEXT,
            "runs_used": _NUMBER,
            "reynolds_low": _NUMBER,
            "reynolds_high": _NUMBER,
            "roughness": _M,
            "roughness_low": _M,
            "roughness_high": _M,
            "roughness_upper95": _M,
            "roughness_resolved": _TRUTH,
            "friction_factor": _NUMBER,
            "friction_factor_u": _NUMBER,
            "friction_factor_low": _NUMBER,
            "friction_factor_high": _NUMBER,
            "roughness_apart_low": _M,
            "roughness_apart_high": _M,
            "roughness_together": _M,
            "log_factor_by_bore": _NUMBER,
            "log_factor_change": _NUMBER,
            "log_factor_change_u": _NUMBER,
            "log_factor_change_dof": _NUMBER,
            "log_factor_change_low": _NUMBER,
            "log_factor_change_high": _NUMBER,
            "roughness_change": _M,
            "roughness_change_low": _M,
            "roughness_change_high": _M,
            "change_p": _NUMBER,
            "changed": _TRUTH,
            "score": _NUMBER,
            "odd": _TRUTH,
            "reason": _TEXT,
        },
        # a row a wall
        "walls": {
            "wall": _TEXT,
            "surveys_compared": _NUMBER,
            "bores": _TEXT,
            "diameter": _M,
            "reynolds": _NUMBER,
            "unchanged_p": _NUMBER,
            "changed": _TRUTH,
            "least_log_factor_change": _NUMBER,
            "critical_score": _NUMBER,
            "roughness_rate": _RATE,
            "roughness_rate_u": _RATE,
            "roughness_rate_dof": _NUMBER,
            "roughness_rate_low": _RATE,
            "roughness_rate_high": _RATE,
            "line_p": _NUMBER,
            "line_scale": _NUMBER,
            "reason": _TEXT,
        },
        # the line of ageing of each wall, from its first survey to the last or to the date asked for
        "ageing": {
            "wall": _TEXT,
            "date": _TEXT,
            "roughness": _M,
            "roughness_u": _M,
            "roughness_low": _M,
            "roughness_high": _M,
            "friction_factor": _NUMBER,
            "friction_factor_low": _NUMBER,
            "friction_factor_high": _NUMBER,
            "beyond_surveys": _TRUTH,
        },
        # turbulent runs that entered, for drawing
        "runs": {
            "wall": _TEXT,
            "survey": _TEXT,
            "run": _TEXT,
            "reach": _TEXT,
            "reynolds": _NUMBER,
            "friction_factor": _NUMBER,
            "friction_factor_u": _NUMBER,
        },
        # which errors were taken as one in all surveys, and why
        "shared": {"wall": _TEXT, "input": _TEXT, "inputs": _NUMBER, "common": _TRUTH, "reason": _TEXT},
    }
)


def table_of(table: str, rows: Sequence[Mapping[str, Any]]) -> pd.DataFrame:
    """Return rows as a table of `COMPARISON_TABLES`; what a row does not name is missing."""
    columns = {}
    for name, column in COMPARISON_TABLES[table].items():
        values = [row.get(name) for row in rows]
        if column.kind == "number":
            columns[name] = pd.Series([np.nan if value is None else value for value in values], dtype=float)
        elif column.kind == "truth":
            columns[name] = pd.Series(pd.array(values, dtype="boolean"))
        else:
            columns[name] = pd.Series(values, dtype=object)
    return pd.DataFrame(columns)


@dataclass(frozen=True, repr=False)
class Comparison:
    """Surveys held against each other, SI units.

    A missing number is NaN, a missing text None, a missing boolean ``pd.NA``; `reason` columns say why.

    Parameters
    ----------
    surveys, walls, ageing, runs, shared : DataFrame
        The tables of `COMPARISON_TABLES`.
    assumptions, cautions : tuple of str
        Every choice made; what a reader must know.
    level : float
        Coverage of the intervals; a change is called real where it is beyond chance at one less it.
    dated : bool
        Whether the surveys stand in the order of their dates.
    """

    surveys: pd.DataFrame
    walls: pd.DataFrame
    ageing: pd.DataFrame
    runs: pd.DataFrame
    shared: pd.DataFrame
    assumptions: tuple[str, ...]
    cautions: tuple[str, ...]
    level: float
    dated: bool

    def __repr__(self) -> str:
        surveys, walls = self.surveys["survey"].nunique(), len(self.walls)
        changed = int(self.walls["changed"].fillna(False).sum())
        return f"Comparison({surveys} surveys, {walls} wall{'' if walls == 1 else 's'}, {changed} changed)"

    def _repr_html_(self) -> str:
        """Show the surveys side by side, and what became of each wall above them, for notebooks."""
        lines = [counted((self.surveys["survey"].nunique(), "survey"), (len(self.cautions), "caution"))]
        for wall in rows_of(self.walls):
            if wall["changed"] is None:
                lines.append(f"{wall['wall']}: {wall['reason'] or 'not compared'}")
                continue
            grown = ""
            if wall["roughness_rate"] is not None:
                rate = SI_DISPLAY.interval(
                    "roughness", wall["roughness_rate_low"], wall["roughness_rate_high"], unit=True
                )
                grown = f"; growth of roughness {rate} a year ({100 * self.level:.4g} %)"
            change = "changed beyond chance" if wall["changed"] else "no change beyond chance"
            of = " of S at equal flow" if wall["bores"] == "differ" else ""
            lines.append(f"{wall['wall']}: {change}{of} at Re {thousands(wall['reynolds'], 2)}{grown}")
        return shown(
            "Comparison",
            lines,
            self.surveys,
            (
                Shown("wall", "wall"),
                Shown("survey", "survey"),
                Shown("date", "date"),
                Shown("roughness", "roughness", "roughness"),
                Shown("f", "friction_factor", "number"),
                Shown("ln f less the first", "log_factor_change", "number"),
                Shown("changed", "changed"),
                Shown("odd", "odd"),
                Shown("reason", "reason"),
            ),
        )
