"""What a prediction is: its tables, their columns, and the kind and unit of each column."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import pandas as pd

from gradeline.quantities.printing import SI_DISPLAY
from gradeline.quantities.shown import Shown, counted, rows_of, shown
from gradeline.reduction.tables import Column

__all__ = ["PREDICTION_TABLES", "Prediction"]

_TEXT, _NUMBER, _TRUTH = Column("text"), Column("number"), Column("truth")
_M, _FLOW, _W, _J = (Column("number", unit) for unit in ("m", "m3/s", "W", "J"))


def _with_interval(name: str, column: Column) -> dict[str, Column]:
    return {name: column, f"{name}_low": column, f"{name}_high": column}


#: The tables of a prediction in order, each with its columns in order.
PREDICTION_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        # one row a flow: the whole line, and the pump that drives it
        "flows": {
            "flow": _FLOW,
            **_with_interval("head_loss", _M),
            **_with_interval("pump_head", _M),
            **_with_interval("pump_power", _W),
            "extrapolated": _TRUTH,
            "reason": _TEXT,
        },
        # one row a flow and reach; `beyond` is Re over the highest tested, or over the lowest where it lies below
        "reaches": {
            "flow": _FLOW,
            "reach": _TEXT,
            "wall": _TEXT,
            "roughness": _M,
            "velocity": Column("number", "m/s"),
            "reynolds": _NUMBER,
            "regime": _TEXT,
            "friction_factor": _NUMBER,
            "slope": _NUMBER,
            **_with_interval("head_loss", _M),
            "tested_reynolds_low": _NUMBER,
            "tested_reynolds_high": _NUMBER,
            "beyond": _NUMBER,
            "reason": _TEXT,
        },
        "fittings": {
            "flow": _FLOW,
            "fitting": _TEXT,
            "loss_coefficient": _NUMBER,
            **_with_interval("head_loss", _M),
            "reason": _TEXT,
        },
        # the lines at every place where they bend
        "grade_lines": {
            "flow": _FLOW,
            "chainage": _M,
            "place": _TEXT,
            "elevation": _M,
            **_with_interval("energy_head", _M),
            **_with_interval("piezometric_head", _M),
        },
        # what the line carries under a given head
        "capacity": {"available_head": _M, **_with_interval("flow", _FLOW), "reason": _TEXT},
        # what the line loses beyond a new one
        "new_pipe": {
            "flow": _FLOW,
            "head_loss_new": _M,
            **_with_interval("extra_head", _M),
            **_with_interval("extra_power", _W),
            **_with_interval("extra_energy", _J),
            "reason": _TEXT,
        },
    }
)


@dataclass(frozen=True, repr=False)
class Prediction:
    """What a line loses at other flows: one DataFrame a table, in SI units. A missing number is NaN, a text None.

    Parameters
    ----------
    title : str
        Of the survey.
    flows, reaches, fittings, grade_lines, capacity, new_pipe : DataFrame
        The tables of `PREDICTION_TABLES`, with exactly those columns.
    assumptions, cautions : tuple of str
        Every default and choice made; what a reader must know.
    level : float
        Coverage of the intervals.
    temperature : float
        Of the fluid, K.
    """

    title: str
    flows: pd.DataFrame
    reaches: pd.DataFrame
    fittings: pd.DataFrame
    grade_lines: pd.DataFrame
    capacity: pd.DataFrame
    new_pipe: pd.DataFrame
    assumptions: tuple[str, ...]
    cautions: tuple[str, ...]
    level: float
    temperature: float

    def __repr__(self) -> str:
        count = len(self.flows)
        return f"Prediction({self.title!r}, {count} flow{'' if count == 1 else 's'})"

    def _repr_html_(self) -> str:
        """Show what the line carries and what it loses, for notebooks."""
        capacity = []
        for row in rows_of(self.capacity):
            flow = SI_DISPLAY.within("flow", row["flow"], row["flow_low"], row["flow_high"], unit=True)
            span = SI_DISPLAY.interval("flow", row["flow_low"], row["flow_high"])
            told = f"{100 * self.level:.4g} %: {span}" if row["reason"] is None else row["reason"]
            head = SI_DISPLAY.text("head", row["available_head"], unit=True)
            capacity.append(f"under {head} it carries {flow} ({told})")
        new = self.new_pipe.drop(columns=["flow", "reason"]).set_axis(self.flows.index[: len(self.new_pipe)])
        return shown(
            f"{self.title}: prediction",
            [counted((len(self.flows), "flow"), (len(self.cautions), "caution")), *capacity],
            self.flows.join(new),
            (
                Shown("flow", "flow", "flow"),
                Shown("head loss", "head_loss", "head"),
                Shown("beyond the tested Re", "extrapolated"),
                Shown("new pipe", "head_loss_new", "head"),
                Shown("extra head", "extra_head", "head"),
                Shown("reason", "reason"),
            ),
        )
