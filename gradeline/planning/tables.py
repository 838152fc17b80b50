"""The tables of a plan."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from types import MappingProxyType
from typing import Any

import numpy as np
import pandas as pd

from gradeline.quantities.printing import MISSING, SI_DISPLAY
from gradeline.quantities.shown import Shown, counted, rows_of, shown
from gradeline.reduction.tables import Column

__all__ = ["PLAN_TABLES", "Plan", "table_of"]

_TEXT, _TRUTH, _NUMBER = Column("text"), Column("truth"), Column("number")
_M, _FLOW = Column("number", "m"), Column("number", "m³/s")

#: Tables in the order in which they are told, each with its columns, SI units.
PLAN_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        # a row per flowing run and reach; uncertainties are standard uncertainties
        "runs": {
            "run": _TEXT,
            "reach": _TEXT,
            "flow": _FLOW,
            "velocity": Column("number", "m/s"),
            "temperature": Column("number", "K"),
            "reynolds": _NUMBER,
            "regime": _TEXT,
            "roughness_reynolds": _NUMBER,
            "entrance_length": _M,
            "slope": _NUMBER,
            "slope_u": _NUMBER,
            "friction_factor": _NUMBER,
            "friction_factor_u": _NUMBER,
            "observations_used": _NUMBER,
            "reason": _TEXT,
        },
        # the piezometric head at the last tap, and between which heads all columns can be read
        "levels": {
            "run": _TEXT,
            "flow": _FLOW,
            "level": _M,
            "level_low": _M,
            "level_high": _M,
            "fits": _TRUTH,
        },
        # a row per run and observation, in the gauge's own reading: m or Pa
        "columns": {
            "run": _TEXT,
            "flow": _FLOW,
            "gauge": _TEXT,
            "tap": _TEXT,
            "tap_2": _TEXT,
            "chainage": _M,
            "head": _M,
            "reading": _NUMBER,
            "reading_unit": _TEXT,
            "low": _NUMBER,
            "high": _NUMBER,
            "on_scale": _TRUTH,
            "above_crown": _TRUTH,
            "used": _TRUTH,
            "reason": _TEXT,
        },
        # flows in each reach
        "thresholds": {
            "reach": _TEXT,
            "laminar_below": _FLOW,
            "turbulent_above": _FLOW,
            "smooth_below": _FLOW,
            "rough_above": _FLOW,
        },
        "walls": {
            "wall": _TEXT,
            "roughness": _M,
            "source": _TEXT,
            "roughness_low": _M,
            "roughness_high": _M,
            "roughness_upper95": _M,
            "roughness_resolved": _TRUTH,
            "reason": _TEXT,
        },
        "fittings": {
            "fitting": _TEXT,
            "loss_coefficient": _NUMBER,
            "source": _TEXT,
            "loss_coefficient_u": _NUMBER,
            "reason": _TEXT,
        },
        "budget": {
            "quantity": _TEXT,
            "subject": _TEXT,
            "input": _TEXT,
            "contribution_u": _NUMBER,
            "variance_share": _NUMBER,
        },
        # what each change of the plan would do, worked out anew; S and f of the fastest run, relative
        "improvements": {
            "change": _TEXT,
            "wall": _TEXT,
            "roughness_low": _M,
            "roughness_high": _M,
            "width_ratio": _NUMBER,
            "slope_u": _NUMBER,
            "friction_factor_u": _NUMBER,
            "fits": _TRUTH,
        },
        "layout": {
            "tap": _TEXT,
            "chainage": _M,
            "recommended_chainage": _M,
            "disturbed": _TRUTH,
            # of the nearest fitting upstream; none is missing
            "bores_downstream": _NUMBER,
            "recommended_bores_downstream": _NUMBER,
        },
        "flows": {"run": _TEXT, "flow": _FLOW, "recommended_flow": _FLOW},
        # before and after all that is recommended
        "comparison": {
            "quantity": _TEXT,
            "subject": _TEXT,
            "now": _NUMBER,
            "recommended": _NUMBER,
        },
        # the expected lines along the pipe, for the figure
        "grade_lines": {
            "run": _TEXT,
            "chainage": _M,
            "piezometric_head": _M,
            "energy_head": _M,
            "elevation": _M,
            "crown": _M,
        },
        # the heads that each board shows, lowest and highest over its taps
        "boards": {"gauge": _TEXT, "first": _M, "last": _M, "head_low": _M, "head_high": _M},
    }
)


@dataclass(frozen=True)
class Plan:
    """What a survey is expected to tell before anybody has read a tap. All SI; a DataFrame for each of `PLAN_TABLES`.

    Parameters
    ----------
    title, source : str
        Of the survey.
    level : float
        Coverage of the intervals.
    assumptions, cautions : tuple of str
        What was taken for granted, and what a reader should know.
    spacing : float
        Least distance between two taps in the recommended layout, m.
    layout_efficiency : float
        D-efficiency of the present layout, dimensionless; NaN where none is recommended.
    layout_reason, flows_reason : str or None
        Why nothing, or nothing else, is recommended.
    flows_spread : str or None
        How the recommended flows are spread.
    greatest_flow : float
        The greatest flow of the plan's range at which all columns can be read, m³/s; NaN where none can.
    runs, levels, columns, thresholds, walls, fittings, budget, improvements, layout, flows, comparison, grade_lines, boards
        The tables.
    """

    title: str
    source: str
    level: float
    assumptions: tuple[str, ...]
    cautions: tuple[str, ...]
    spacing: float
    layout_efficiency: float
    layout_reason: str | None
    flows_reason: str | None
    flows_spread: str | None
    greatest_flow: float
    runs: pd.DataFrame
    levels: pd.DataFrame
    columns: pd.DataFrame
    thresholds: pd.DataFrame
    walls: pd.DataFrame
    fittings: pd.DataFrame
    budget: pd.DataFrame
    improvements: pd.DataFrame
    layout: pd.DataFrame
    flows: pd.DataFrame
    comparison: pd.DataFrame
    grade_lines: pd.DataFrame
    boards: pd.DataFrame

    def __repr__(self) -> str:
        return f"Plan({self.title!r}, {self.runs['run'].nunique()} flowing runs, {len(self.layout)} taps)"

    def _repr_html_(self) -> str:
        """Show the expected runs, and the expected roughness of each wall above them, for notebooks."""
        runs = self.runs["run"].nunique()
        lines = [counted((runs, "flowing run"), (len(self.layout), "tap"), (len(self.cautions), "caution"))]
        for wall in rows_of(self.walls):
            span = SI_DISPLAY.interval("roughness", wall["roughness_low"], wall["roughness_high"], unit=True)
            assumed = SI_DISPLAY.text("roughness", wall["roughness"], digits=3, unit=True)
            told = wall["reason"] or "not told by these runs"
            told = told if span == MISSING else f"{100 * self.level:.4g} % interval about {span}"
            lines.append(f"{wall['wall']}: roughness assumed {assumed}, {told}")
        return shown(
            f"{self.title}: plan",
            lines,
            self.runs,
            (
                Shown("run", "run"),
                *([Shown("reach", "reach")] if self.runs["reach"].nunique() > 1 else []),
                Shown("flow", "flow", "flow"),
                Shown("Re", "reynolds", "reynolds"),
                Shown("regime", "regime"),
                Shown("S expected", "slope", "slope"),
                Shown("f expected", "friction_factor", "number"),
                Shown("reason", "reason"),
            ),
        )

    @property
    def tables(self) -> dict[str, pd.DataFrame]:
        """The tables by name, in the order of `PLAN_TABLES`."""
        return {name: getattr(self, name) for name in PLAN_TABLES}

    @property
    def words(self) -> dict[str, Any]:
        """All that is no table, by name."""
        return {one.name: getattr(self, one.name) for one in fields(self) if one.name not in PLAN_TABLES}


def table_of(name: str, rows: Sequence[Sequence[Any]]) -> pd.DataFrame:
    """Make a table of a plan from its rows.

    Parameters
    ----------
    name : str
        A key of `PLAN_TABLES`.
    rows : sequence of sequence
        One value for each of its columns.

    Returns
    -------
    DataFrame
        Numbers as float with NaN, text as object with None, booleans nullable.

    Examples
    --------
    >>> table_of("flows", [("1", 0.001, 0.002)]).to_dict("records")
    [{'run': '1', 'flow': 0.001, 'recommended_flow': 0.002}]
    """
    kinds = {"text": "object", "number": "float64", "truth": "boolean"}
    columns = list(zip(*rows, strict=True)) if rows else [()] * len(PLAN_TABLES[name])
    made = {}
    for (key, column), values in zip(PLAN_TABLES[name].items(), columns, strict=True):
        given = [
            None if isinstance(v, float) and np.isnan(v) and column.kind != "number" else v for v in values
        ]
        made[key] = pd.Series(given, dtype=kinds[column.kind])
    return pd.DataFrame(made)
