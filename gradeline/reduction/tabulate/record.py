"""The tables of a logger's record: its windows, what is wrong with it, and what is drawn of it."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.errors import QuantityError
from gradeline.fitting.record.trend import trend_of
from gradeline.flow_methods import FLOW_METHODS
from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.quantities import parse_unit
from gradeline.quantities.printing import format_number
from gradeline.reduction.columns import RECORD_TABLES
from gradeline.reduction.drawing_columns import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.survey import Record, Survey, Target

__all__ = ["record_facts", "record_flag_table", "record_trace_table", "window_table"]

Array = NDArray[np.float64]

#: Stretches of a column that are drawn, and heads.
_POINTS, _HEADS = 900, 4
_DIMENSIONS = {"flow": ("flow",), "temperature": ("temperature",)}


def record_facts(survey: Survey) -> dict[str, Any]:
    """Return what stands of a logger's record beside the survey's title; nothing without one.

    Parameters
    ----------
    survey : Survey
        Worked out.

    Returns
    -------
    dict
        Under ``record``: its ``file``, its first moment as the file tells time, its samples and their ``interval``, s.
    """
    record = survey.record
    if record is None:
        return {}
    facts = {
        "file": record.file,
        "begins": record.clock.told(0.0),
        "samples": int(record.rows),
        "interval": float(record.interval),
    }
    return {"record": facts}


def window_table(survey: Survey) -> pd.DataFrame:
    """Return the windows of a logger's record: when, how long, how many samples, how far the flow drifts over each."""
    record = survey.record
    if record is None or not record.windows:
        return frame("windows", {name: [] for name in RECORD_TABLES["windows"]})
    column = _flow_column(survey, record)
    statistics = record.statistics
    rows: list[dict[str, Any]] = []
    for k, window in enumerate(record.windows):
        mine = statistics[
            ((statistics["window"] == k) & (statistics["column"] == max(column, 0))).to_numpy(bool)
        ]
        drift, drift_u = _drift(record, k, column)
        reason = None
        if len(mine) and not np.isfinite(drift):
            reason = "nothing flows" if column >= 0 else "the flow was not logged"
        rows.append(
            {
                "run": window.run,
                "start": window.start,
                "end": window.end,
                "length": window.end - window.start,
                "begins": record.clock.told(window.start),
                "ends": record.clock.told(window.end),
                "samples": float(mine["samples"].iloc[0]) if len(mine) else np.nan,
                "effective_samples": float(mine["effective"].iloc[0]) if len(mine) else np.nan,
                "flow_drift": drift,
                "flow_drift_u": drift_u,
                "found": not window.given,
                "reason": reason or (_told(mine["reason"].iloc[0]) if len(mine) else "no sample lies in it"),
            }
        )
    return frame("windows", {name: [row[name] for row in rows] for name in RECORD_TABLES["windows"]})


def record_flag_table(survey: Survey) -> pd.DataFrame:
    """Return what is wrong with a logger's record, in words, with its times."""
    record = survey.record
    if record is None or not len(record.faults):
        return frame("record_flags", {name: [] for name in RECORD_TABLES["record_flags"]})
    rows = []
    for column, kind, start, end, size in record.faults[
        ["column", "kind", "start", "end", "size"]
    ].itertuples(index=False, name=None):
        inside = [one.run for one in record.windows if one.start < end and one.end > start]
        rows.append(
            {
                "column": _told(column),
                "kind": kind,
                "start": start,
                "end": end,
                "begins": record.clock.told(float(start)),
                "ends": record.clock.told(float(end)),
                "run": inside[0] if len(inside) == 1 else None,
                "what": _words(survey, record, column, str(kind), float(size), float(end) - float(start)),
            }
        )
    return frame(
        "record_flags", {name: [row[name] for row in rows] for name in RECORD_TABLES["record_flags"]}
    )


def record_trace_table(survey: Survey) -> pd.DataFrame:
    """Return a logger's record thinned for drawing: the flow, a few heads and the temperature."""
    record = survey.record
    columns: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["record_trace"]}
    if record is None or not len(record.time_start):
        return frame("record_trace", columns)
    for k, role in _drawn(survey, record):
        scale, offset = _scale(survey, record, k)
        for time, low, mean, high in zip(*_thinned(record, k), strict=True):
            values = (
                record.names[k],
                role,
                record.units[k],
                time,
                (low - offset) / scale,
                (mean - offset) / scale,
                (high - offset) / scale,
            )
            for name, value in zip(columns, values, strict=True):
                columns[name].append(value)
    return frame("record_trace", columns)


def _told(text: Any) -> str | None:
    """A text of a column that may have missing ones."""
    return text if isinstance(text, str) else None


def _flow_column(survey: Survey, record: Record) -> int:
    """The column of the flow, or of what it is read from; -1 without."""
    if Target("run", "flow") in record.targets:
        return record.targets.index(Target("run", "flow"))
    primary = FLOW_METHODS[survey.flow.method].primary
    names = [
        k
        for k, target in enumerate(record.targets)
        if target.kind == "flow reading" and (target.name == primary or target.name.startswith(f"{primary} "))
    ]
    return names[0] if names else -1


def _drift(record: Record, window: int, column: int) -> tuple[float, float]:
    """Change of the flow over a window with its uncertainty, both over its mean; NaN where nothing flows."""
    mine = np.flatnonzero(record.window == window)
    if column < 0 or len(mine) < 4:
        return float("nan"), float("nan")
    one = record.windows[window]
    middle = 0.5 * (record.time_start[mine] + record.time_end[mine])
    count, mean = record.count[mine][:, [column]], record.mean[mine][:, [column]]
    line = trend_of(middle, one.end - one.start, count, mean)
    level = float(line.mean[0])
    greatest = np.nanmax(np.abs(record.mean[:, column]), initial=0.0)
    if not abs(level) > 0.01 * greatest:
        return float("nan"), float("nan")
    return float(line.change[0] / level), float(line.u[0] / abs(level))


def _words(survey: Survey, record: Record, column: Any, kind: str, size: float, length: float) -> str:
    """What a fault is, with its size in the unit of the file."""
    if kind == "gap":
        return f"{format_number(size, 3)} s of samples are missing"
    k = record.names.index(column)
    scale, offset = _scale(survey, record, k)
    unit = f" {record.units[k]}".rstrip()
    away = f"{format_number(abs(size) / scale, 3)}{unit}"
    if kind == "drift":
        return f"{'rises' if size > 0 else 'falls'} by {away} over the window"
    if kind == "step":
        return f"jumps {'up' if size > 0 else 'down'} by {away} within the window"
    if kind == "stuck":
        return f"stands still at {format_number((size - offset) / scale, 5)}{unit} for {format_number(length, 3)} s"
    side = "above" if size > 0 else "below"
    # a spike that is told alone is as long as its block
    if length > 2.0 * float(np.max(record.time_end - record.time_start)):
        return f"single samples here and there, the farthest {away} {side} those around it, taken out of the means"
    return f"a single sample {away} {side} those around it, taken out of the means"


def _scale(survey: Survey, record: Record, column: int) -> tuple[float, float]:
    """SI per unit of the file, and the SI value of its zero."""
    target, text = record.targets[column], record.units[column]
    dimensions: tuple[str, ...] = _DIMENSIONS.get(target.name, ())
    if target.kind == "reading":
        gauge = next(one.gauge for one in survey.observations if one.label == target.name)
        dimensions = (GAUGE_KINDS[survey.gauge(gauge).kind].reading,)
    elif target.kind == "level":
        dimensions = ("length",)
    elif target.kind == "flow reading":
        known = FLOW_METHODS[survey.flow.method].columns
        name = next((one for one in known if target.name == one or target.name.startswith(f"{one} ")), "")
        dimensions = known[name].dimensions if name else ()
    for dimension in dimensions:
        try:
            unit = parse_unit(text, dimension)
        except QuantityError:
            continue
        return unit.difference_to_si(1.0), unit.to_si(0.0)
    return 1.0, 0.0


def _drawn(survey: Survey, record: Record) -> list[tuple[int, str]]:
    """Columns that are drawn, and as what: heads evenly spread, those with a fault first."""
    flow = _flow_column(survey, record)
    heads = [k for k, target in enumerate(record.targets) if target.kind in {"reading", "level"}]
    # one axis holds one unit
    units = [record.units[k] for k in heads]
    common = max(dict.fromkeys(units), key=units.count, default="")
    heads = [k for k in heads if record.units[k] == common]
    faulty = set(record.faults["column"].dropna()) if len(record.faults) else set()
    chosen = [k for k in heads if record.names[k] in faulty][:_HEADS]
    rest = [k for k in heads if k not in chosen]
    spread = np.unique(
        np.linspace(0, len(rest) - 1, min(_HEADS - len(chosen), len(rest))).round().astype(int)
    )
    chosen += [rest[k] for k in spread] if rest else []
    found = [(flow, "flow")] if flow >= 0 else []
    found += [(k, "head") for k in sorted(chosen)]
    found += [(k, "temperature") for k, target in enumerate(record.targets) if target.name == "temperature"]
    return found


def _thinned(record: Record, column: int) -> tuple[Array, Array, Array, Array]:
    """Times, least, mean and greatest of stretches of a column; NaN where a gap lies between two."""
    size = -(-len(record.time_start) // _POINTS)
    starts = np.arange(0, len(record.time_start), size)
    count, mean = record.count[:, column], np.nan_to_num(record.mean[:, column])
    total = np.add.reduceat(count, starts)
    some = total > 0
    low = np.minimum.reduceat(np.where(count > 0, record.low[:, column], np.inf), starts)
    high = np.maximum.reduceat(np.where(count > 0, record.high[:, column], -np.inf), starts)
    middle = np.add.reduceat(count * mean, starts) / np.where(some, total, 1.0)
    ends = np.append(starts[1:], len(record.time_end)) - 1
    time = 0.5 * (record.time_start[starts] + record.time_end[ends])
    blank = np.full(len(time), np.nan)
    return time, np.where(some, low, blank), np.where(some, middle, blank), np.where(some, high, blank)
