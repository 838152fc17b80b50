"""From what a reduction carries to head losses, grade lines, pump power and capacity, each with its interval."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.errors import UsageError
from gradeline.fitting.one_thread import one_thread
from gradeline.prediction.carried import Carried, carried_from
from gradeline.prediction.line import Answer, PipeLine
from gradeline.prediction.losses import Conditions
from gradeline.prediction.questions import (
    flows_asked,
    new_roughness,
    quantity,
    roughness_of_walls,
    taken_flows,
)
from gradeline.prediction.sentences import assumptions_of, cautions_of
from gradeline.prediction.tables import PREDICTION_TABLES, Prediction
from gradeline.reduction.fluids import flowing_properties
from gradeline.reduction.tables import Reduction

__all__ = ["predict"]

Array = NDArray[np.float64]
_HOUR = 3600.0
_LONGEST_YEAR = 8784.0


@one_thread
def predict(
    source: Reduction | Mapping[str, Any] | str | Path,
    *,
    flow: str | float | Sequence[float] | Array | None = None,
    steps: int | None = None,
    available_head: str | float | None = None,
    temperature: str | float | None = None,
    roughness: str | float | None = None,
    walls: Mapping[str, str | float] | None = None,
    new_pipe: str | float | None = None,
    hours: float | None = None,
    efficiency: str | float | None = None,
    static_head: str | float | None = None,
    end_head: str | float | None = None,
    offtakes: Mapping[str, str | float] | None = None,
    head_loss_u: str | float | None = None,
) -> Prediction:
    """Predict what a line loses at other flows, and what it carries, from its reduction.

    Parameters
    ----------
    source : Reduction, mapping or path
        A reduction, what its `carried` holds, or the folder that ``gradeline reduce`` wrote.
    flow : str, float or sequence
        ``"12 L/s"``, ``"2 to 12 L/s"``, or numbers in m³/s: the true flow at the line's start.
    steps : int
        Flows in a range, both ends included; 6 where not given.
    available_head : str or float
        Head that the line's losses and the static head may take, ``"14 m"`` or m: the flow it drives.
    temperature : str or float
        Of the fluid, ``"12 degC"`` or K; the mean of the runs where not given.
    roughness : str or float
        What if: ε of all walls, ``"0.1 mm"`` or m, an uncertainty may stand with it.
    walls : mapping
        The same for single walls, by their label.
    new_pipe : str or float
        Roughness of a new pipe to compare with: ``"0.05 mm"``, m, the name of a known surface, or ``"published"``
        where the survey states it.
    hours : float
        Of the duty in a year.
    efficiency : str or float
        Of pump and motor, ``"70 %"`` or 0.7; 1 where not given.
    static_head : str or float
        Head that the pump lifts beside the losses, m; 0 where not given.
    end_head : str or float
        Piezometric head at the line's downstream end, m above datum; the pipe's axis there where not given.
    offtakes : mapping
        What each off-take takes, ``{"north": "2 L/s"}``; shut where not given.
    head_loss_u : str or float
        Standard uncertainty of a measured head loss that is to be held against the prediction, m: widens the intervals.

    Returns
    -------
    Prediction
        A frozen set of tables, SI units.

    Raises
    ------
    UsageError
        Where what is asked cannot be.
    ReductionError
        Where the source is not what ``gradeline reduce`` writes.

    Notes
    -----
    For each roughness that the runs leave room for, the errors that stay with the pipe (its bore, say) are as the runs
    then show them, so that an error of the bore that went into ε cancels again. The interval is that of the profile
    likelihood, ε bounded by 0; the friction law's own uncertainty is added.

    Examples
    --------
    >>> import gradeline
    >>> reduction = gradeline.reduce(gradeline.read_survey("data_demo/copper_bench"))
    >>> found = gradeline.predict(reduction, flow="0.8 L/s")
    >>> row = found.flows.iloc[0]
    >>> bool(row["head_loss_low"] < row["head_loss"] < row["head_loss_high"])
    True
    """
    carried = carried_from(source)
    flows = flows_asked(flow, steps)
    if not len(flows) and available_head is None:
        raise UsageError(
            "nothing to predict: give a flow, such as '12 L/s', or an available head, such as '14 m'"
        )
    conditions, kelvin = _conditions(carried, temperature, taken_flows(carried, offtakes or {}))
    replaced = roughness_of_walls(carried, roughness, walls or {})
    new = new_roughness(carried, new_pipe)
    if hours is not None and not 0 < hours <= _LONGEST_YEAR:
        raise UsageError(f"hours: a year has up to {_LONGEST_YEAR:g} of them; found {hours:g}")
    if new is None and hours is not None:
        raise UsageError(
            "hours: they count for the energy that is lost beyond a new pipe; give its roughness as well, such as '0.05 mm'"
        )
    share = 1.0 if efficiency is None else quantity(efficiency, "dimensionless", "efficiency").value
    if not 0 < share <= 1:
        raise UsageError(f"efficiency: lies above 0 and up to 1 (or 100 %); found {efficiency!r}")
    lift = 0.0 if static_head is None else quantity(static_head, "length", "static head", above=None).value
    if lift < 0:
        raise UsageError(
            f"static head: is what the pump lifts, 0 or above; found {static_head!r}; for a fall that drives the flow give it "
            "as the available head"
        )
    spread = 0.0 if head_loss_u is None else quantity(head_loss_u, "length", "head loss uncertainty").value
    end = None if end_head is None else quantity(end_head, "length", "end head", above=None).value
    line = PipeLine(
        carried,
        conditions,
        replaced,
        new_roughness=None if new is None else new[0],
        end_head=end,
        measured_u=spread,
    )
    _none_missing(carried, line, flows, available_head)
    too_low = flows[flows <= conditions.taken.max()] if conditions.taken.max() > 0 else flows[:0]
    if len(too_low):
        raise UsageError(
            f"flow: has to exceed what the off-takes take ({1000 * conditions.taken.max():.4g} L/s); found "
            f"{1000 * too_low[0]:.4g} L/s"
        )
    capacity = []
    if available_head is not None:
        available = quantity(available_head, "length", "available head").value
        if available <= lift:
            raise UsageError(
                f"available head: has to exceed the static head of {lift:g} m; found {available:g} m"
            )
        capacity = [_capacity(line, available, lift)]
        if not len(flows) and math.isfinite(capacity[0]["flow"]):
            flows = np.array([capacity[0]["flow"]])
    answers = [line.at(float(one)) for one in flows]
    carries = [line.at(row["flow"]) for row in capacity if math.isfinite(row["flow"])]
    power = conditions.density * carried.gravity / share
    tables = {
        "flows": [_flow_row(one, lift, power) for one in answers],
        "reaches": [row for one in answers for row in one.reaches],
        "fittings": [row for one in answers for row in one.fittings],
        "grade_lines": [row for one in answers for row in one.grade_lines],
        "capacity": capacity,
        "new_pipe": [] if new is None else [_new_row(one, power, hours) for one in answers],
    }
    return Prediction(
        title=carried.title,
        **{name: _frame(name, rows) for name, rows in tables.items()},
        assumptions=assumptions_of(
            carried,
            line,
            answers,
            temperature=(kelvin, temperature is not None),
            new=None if new is None else new[1],
            efficiency=(share, efficiency is not None),
            static_head=(lift, static_head is not None),
            hours=hours,
        ),
        cautions=cautions_of(carried, line, [*answers, *(one for one in carries if one.flow not in flows)]),
        level=carried.level,
        temperature=kelvin,
    )


def _conditions(carried: Carried, temperature: str | float | None, taken: Array) -> tuple[Conditions, float]:
    kelvin = (
        carried.temperature
        if temperature is None
        else quantity(temperature, "temperature", "temperature").value
    )
    if not math.isfinite(kelvin):
        if carried.fluid.follows_temperature:
            raise UsageError(
                "temperature: the reduction has no flowing run to take it from; give one, such as '15 degC'"
            )
        kelvin = 293.15
    span = carried.fluid.span
    if span is not None and not span[0] <= kelvin <= span[1]:
        raise UsageError(
            f"temperature: the properties of {carried.fluid.name} are known from {span[0] - 273.15:.4g} to "
            f"{span[1] - 273.15:.4g} °C; found {kelvin - 273.15:.4g} °C"
        )
    density, viscosity = flowing_properties(carried.fluid, np.array([kelvin]))
    return Conditions(float(density[0]), float(viscosity[0]), taken), kelvin


def _none_missing(carried: Carried, line: PipeLine, flows: Array, available_head: str | float | None) -> None:
    """Refuse where a wall of which nothing is known would carry turbulent flow."""
    for w, wall in enumerate(carried.walls):
        if w in line.replaced or math.isfinite(wall.roughness):
            continue
        mine = carried.wall_of == w
        fastest = max(
            (line.conditions.reynolds(carried, float(one))[mine].max() for one in flows), default=0.0
        )
        if available_head is not None or fastest >= 2000.0:
            raise UsageError(
                f"wall {wall.name!r} has no roughness ({wall.reason}); state one with --wall {wall.name}=0.1mm or --roughness"
            )


def _capacity(line: PipeLine, available: float, lift: float) -> dict[str, Any]:
    flow, low, high, reason = line.capacity(available - lift)
    return {
        "available_head": available,
        "flow": flow,
        "flow_low": low,
        "flow_high": high,
        "reason": reason,
    }


def _three(
    name: str, values: tuple[float, float, float], factor: float = 1.0, plus: float = 0.0
) -> dict[str, float]:
    return {
        f"{name}{end}": factor * (value + plus)
        for end, value in zip(("", "_low", "_high"), values, strict=True)
    }


def _flow_row(answer: Answer, lift: float, power: float) -> dict[str, Any]:
    return {
        "flow": answer.flow,
        **_three("head_loss", answer.total),
        **_three("pump_head", answer.total, plus=lift),
        **_three("pump_power", answer.total, power * answer.flow, lift),
        "extrapolated": any(math.isfinite(row["beyond"]) and row["beyond"] != 1 for row in answer.reaches),
        "reason": answer.reason,
    }


def _new_row(answer: Answer, power: float, hours: float | None) -> dict[str, Any]:
    seconds = math.nan if hours is None else hours * _HOUR
    return {
        "flow": answer.flow,
        "head_loss_new": answer.new_total,
        **_three("extra_head", answer.extra),
        **_three("extra_power", answer.extra, power * answer.flow),
        **_three("extra_energy", answer.extra, power * answer.flow * seconds),
        "reason": answer.extra_reason,
    }


def _frame(table: str, rows: list[dict[str, Any]]) -> pd.DataFrame:
    kinds = {"text": "object", "number": "float", "truth": "boolean"}
    return pd.DataFrame(
        {
            name: pd.Series([row[name] for row in rows], dtype=kinds[column.kind])
            for name, column in PREDICTION_TABLES[table].items()
        }
    )
