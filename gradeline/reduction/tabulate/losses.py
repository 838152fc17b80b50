"""Fittings over all runs and run by run."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.losses import Loss
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall, runs_off_law
from gradeline.survey import Survey

__all__ = ["fitting_table", "loss_run_table", "loss_table"]


def fitting_table(
    line: Line, flowing: Flowing, friction: Friction, losses: tuple[Loss, ...], walls: tuple[Wall, ...] = ()
) -> pd.DataFrame:
    """Return the table of fittings: fitted ones over all runs, given ones as they were given."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["fittings"]}
    fitted = {one.place: one for one in losses}
    for m, fitting in enumerate(line.fittings):
        k = line.reference[m]
        given = fitting.loss_coefficient
        if given is None:
            one = fitted[m]
            fit, reason = one.fit, one.reason
            values = (fit.coefficient, fit.u, fit.low, fit.high, one.equivalent_length)
        else:
            length = np.nan
            off = runs_off_law(walls, int(k), len(flowing.flow))
            fastest = int(np.where(off, -1.0, flowing.flow).argmax()) if len(flowing.flow) else None
            if fastest is not None and np.isfinite(friction.factor[fastest, k]):
                length = given.value * line.diameter[k] / friction.factor[fastest, k]
            reason = "given, not fitted"
            values = (given.value, np.nan if given.u is None else given.u, np.nan, np.nan, length)
        for name, entry in zip(rows, (fitting.name, *values, reason), strict=True):
            rows[name].append(entry)
    return frame("fittings", rows)


def loss_table(line: Line, losses: tuple[Loss, ...]) -> pd.DataFrame:
    """Return what stands beside each fitted K: taps, published value, trend over Re."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["losses"]}
    for one in losses:
        fitting, published = line.fittings[one.place], one.published
        there = bool(one.fit.runs)
        weight = one.fit.weight
        typical = 10 ** float(weight @ np.log10(np.maximum(one.reynolds, 1.0))) if there else np.nan
        most = one.taps.max(axis=0, initial=0)
        entries = (
            fitting.name,
            fitting.kind,
            fitting.length,
            one.fit.runs,
            most[0],
            most[1],
            typical,
            one.equivalent_length_u,
            np.nan if published is None else published.value,
            np.nan if published is None else published.low,
            np.nan if published is None else published.high,
            None if published is None else published.described,
            None if published is None else published.source,
            one.verdict,
            one.trend.slope,
            one.trend.slope_u,
            one.trend.p,
            one.depends_on_reynolds,
            "; ".join(one.notes),
        )
        for name, entry in zip(rows, entries, strict=True):
            rows[name].append(entry)
    return frame("losses", rows)


def loss_run_table(survey: Survey, line: Line, flowing: Flowing, losses: tuple[Loss, ...]) -> pd.DataFrame:
    """Return K of each flowing run and fitted loss."""
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["loss_runs"]}
    for one in losses:
        columns: tuple[list[Any], ...] = (
            names.tolist(),
            [line.fittings[one.place].name] * len(names),
            one.reynolds.tolist(),
            one.value.tolist(),
            one.u.tolist(),
            one.used.tolist(),
            list(one.why_not),
        )
        for name, column in zip(rows, columns, strict=True):
            rows[name] += column
    return frame("loss_runs", rows)
