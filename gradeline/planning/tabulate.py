"""The tables of a plan from what was worked out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.hydraulics.friction import entrance_length
from gradeline.planning.accuracy import Accuracy
from gradeline.planning.assumed import Assumed
from gradeline.planning.expected import Expected
from gradeline.planning.flows import flow_marks
from gradeline.planning.improvements import Change
from gradeline.planning.layout import Layout, bores_downstream
from gradeline.planning.tables import table_of
from gradeline.reduction import Reduction
from gradeline.reduction.line import Line
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = [
    "board_table",
    "column_table",
    "comparison_table",
    "fitting_table",
    "flow_table",
    "flows_of",
    "grade_line_table",
    "improvement_table",
    "layout_table",
    "level_table",
    "run_table",
    "threshold_table",
    "wall_table",
]

Array = NDArray[np.float64]


def flows_of(expected: Expected) -> Array:
    """Return the flow of each run at the start of the line (R,), m³/s."""
    return np.asarray(expected.flow.velocity[:, 0] * expected.line.area[0])


def run_table(expected: Expected, reduction: Reduction, roughness: Mapping[str, float]) -> pd.DataFrame:
    """Return the flowing runs, a row for each reach; ε⁺ = ε u*/ν with u* = V √(f/8)."""
    line = expected.line
    length = np.asarray(entrance_length(expected.flow.reynolds, line.diameter))
    place = {name: n for n, name in enumerate(expected.survey.runs["run"])}
    reach = {one.name: k for k, one in enumerate(expected.survey.reaches)}
    rows = []
    for row in reduction.runs[(reduction.runs["flow"] > 0).to_numpy(bool)].to_dict("records"):
        run, k = place[row["run"]], reach[row["reach"]]
        shear = np.sqrt(expected.flow.factor[run, k] / 8.0) * expected.flow.velocity[run, k]
        rough = roughness[expected.survey.reaches[k].wall]
        rows.append(
            (
                row["run"],
                row["reach"],
                row["flow"],
                row["velocity"],
                row["temperature"],
                row["reynolds"],
                row["regime"],
                rough * shear / expected.media.kinematic_viscosity[run],
                length[run, k],
                expected.flow.slope[run, k],
                row["slope_u"],
                expected.flow.factor[run, k],
                row["friction_factor_u"],
                row["observations_used"],
                row["reason"],
            )
        )
    return table_of("runs", rows)


def level_table(expected: Expected) -> pd.DataFrame:
    """Return the head at the last tap of each run, static ones too."""
    low, high = np.where(np.isfinite(expected.window), expected.window, np.nan).T
    return table_of(
        "levels",
        list(
            zip(
                expected.survey.runs["run"],
                flows_of(expected),
                expected.level,
                low,
                high,
                expected.fits.tolist(),
                strict=True,
            )
        ),
    )


def column_table(expected: Expected, reduction: Reduction) -> pd.DataFrame:
    """Return every expected reading."""
    survey, line = expected.survey, expected.line
    names = [tap.name for tap in survey.taps]
    crown, readings, flow = expected.crown, expected.readings, flows_of(expected)
    inside = expected.on_scale
    told = (
        reduction.heads[["used", "reason"]].to_numpy(object).reshape(len(flow), len(survey.observations), 2)
    )
    order = {run: n for n, run in enumerate(dict.fromkeys(reduction.heads["run"]))}
    rows: list[tuple[Any, ...]] = []
    for r, run in enumerate(survey.runs["run"]):
        for n, one in enumerate(survey.observations):
            t = names.index(one.tap)
            far = None if one.tap_2 is None else names.index(one.tap_2)
            here = expected.heads[r]
            low, high, value = expected.low[n], expected.high[n], readings[r, n]
            used, reason = told[order[run], n]
            rows.append(
                (
                    run,
                    flow[r],
                    one.gauge,
                    one.tap,
                    one.tap_2,
                    line.chainage[t],
                    here[t] if far is None else here[t] - here[far],
                    value,
                    "m" if GAUGE_KINDS[survey.gauge(one.gauge).kind].reading == "length" else "Pa",
                    low if np.isfinite(low) else np.nan,
                    high if np.isfinite(high) else np.nan,
                    bool(inside[r, n]) if np.isfinite(low) or np.isfinite(high) else None,
                    bool(here[t] >= crown[t] - 1e-9) if expected.tells_level else None,
                    bool(used),
                    reason,
                )
            )
    return table_of("columns", rows)


def threshold_table(expected: Expected, roughness: Mapping[str, float]) -> pd.DataFrame:
    """Return the flows at which each reach changes its regime, at the mean temperature of the runs."""
    viscosity = float(expected.media.kinematic_viscosity.mean())
    rows = []
    for k, reach in enumerate(expected.survey.reaches):
        marks = flow_marks(
            float(expected.line.diameter[k]), float(expected.line.area[k]), viscosity, roughness[reach.wall]
        )
        rows.append((reach.name, marks.laminar, marks.turbulent, marks.smooth, marks.rough))
    return table_of("thresholds", rows)


def wall_table(reduction: Reduction, assumed: Mapping[str, Assumed]) -> pd.DataFrame:
    """Return the walls with their expected intervals."""
    return table_of(
        "walls",
        [
            (
                row["wall"],
                assumed[row["wall"]].value,
                assumed[row["wall"]].source,
                row["roughness_low"],
                row["roughness_high"],
                row["roughness_upper95"],
                None if pd.isna(row["roughness_resolved"]) else bool(row["roughness_resolved"]),
                row["reason"] if pd.isna(row["roughness_high"]) else None,
            )
            for row in reduction.walls.to_dict("records")
        ],
    )


def fitting_table(reduction: Reduction, assumed: Mapping[str, Assumed]) -> pd.DataFrame:
    """Return the fittings whose K is to be fitted."""
    return table_of(
        "fittings",
        [
            (
                row["fitting"],
                assumed[row["fitting"]].value,
                assumed[row["fitting"]].source,
                row["loss_coefficient_u"],
                row["reason"],
            )
            for row in reduction.fittings.to_dict("records")
            if row["fitting"] in assumed
        ],
    )


def _fastest(values: Array, flow: Array) -> float:
    """The largest value over the reaches in the fastest run that has one, NaN where none has."""
    known = np.isfinite(values).any(axis=1)
    if not known.any():
        return float("nan")
    return float(np.nanmax(values[int(np.argmax(np.where(known, flow, -np.inf)))]))


def improvement_table(
    changes: Sequence[Change], now: Accuracy, walls: Sequence[str], *, fits: bool
) -> pd.DataFrame:
    """Return what each change would do, a row for each wall; the plan as it is first."""
    rows: list[tuple[Any, ...]] = []
    for name, accuracy, readable in [
        ("the plan as it is", now, fits),
        *((one.name, one.accuracy, one.fits) for one in changes),
    ]:
        for wall in walls:
            low, high = accuracy.roughness[wall]
            ratio = accuracy.width(wall) / now.width(wall) if np.isfinite(now.width(wall)) else np.nan
            rows.append(
                (
                    name,
                    wall,
                    low,
                    high,
                    ratio if np.isfinite(ratio) else np.nan,
                    _fastest(accuracy.slope_u, accuracy.flow),
                    _fastest(accuracy.factor_u, accuracy.flow),
                    readable,
                )
            )
    return table_of("improvements", rows)


def layout_table(survey: Survey, line: Line, layout: Layout) -> pd.DataFrame:
    """Return the taps with their chainages now and as recommended."""
    recommended = layout.recommended if layout.reason is None else np.full(len(layout.places), np.nan)
    return table_of(
        "layout",
        [
            (tap.name, float(now), float(then), bool(out), float(after), float(then_after))
            for tap, now, then, out, after, then_after in zip(
                survey.taps,
                layout.places,
                recommended,
                layout.disturbed,
                bores_downstream(line, layout.places),
                bores_downstream(line, recommended),
                strict=True,
            )
        ],
    )


def flow_table(expected: Expected, recommended: Array | None) -> pd.DataFrame:
    """Return the flowing runs in rising order of their flow."""
    flow = flows_of(expected)
    names = expected.survey.runs["run"].to_numpy(object)
    order = [n for n in np.argsort(flow, kind="stable") if flow[n] > 0]
    then = np.full(len(order), np.nan) if recommended is None else np.sort(recommended)
    return table_of(
        "flows", [(names[n], float(flow[n]), float(value)) for n, value in zip(order, then, strict=True)]
    )


def comparison_table(
    before: Expected, now: Accuracy, after: Expected, later: Accuracy, walls: Sequence[str]
) -> pd.DataFrame:
    """Return the plan as it is beside the plan with all that is recommended."""
    rows: list[tuple[Any, ...]] = []
    for wall in walls:
        for n, end in enumerate(("roughness_low", "roughness_high")):
            rows.append((end, wall, now.roughness[wall][n], later.roughness[wall][n]))
    for name, attribute in (("slope_u", "slope_u"), ("friction_factor_u", "factor_u")):
        rows.append(
            (
                name,
                "fastest run",
                _fastest(getattr(now, attribute), now.flow),
                _fastest(getattr(later, attribute), later.flow),
            )
        )
    rows += [
        ("loss_coefficient_u", fitting, u, later.loss_u.get(fitting, float("nan")))
        for fitting, u in now.loss_u.items()
    ]
    rows.append(("runs_on_scale", None, float(before.fits.sum()), float(after.fits.sum())))
    return table_of("comparison", rows)


def grade_line_table(reduction: Reduction) -> pd.DataFrame:
    """Return the expected grade lines."""
    columns = ("run", "chainage", "piezometric_head", "energy_head", "elevation", "crown")
    return table_of(
        "grade_lines", list(reduction.grade_lines[list(columns)].itertuples(index=False, name=None))
    )


def board_table(expected: Expected) -> pd.DataFrame:
    """Return the heads that each board of columns can show, where both ends of its scale are known."""
    survey, rows = expected.survey, []
    names = [tap.name for tap in survey.taps]
    for gauge in survey.gauges:
        mine = [
            n for n, one in enumerate(survey.observations) if one.gauge == gauge.name and one.tap_2 is None
        ]
        if not mine or gauge.floats or not np.isfinite(expected.ends[:, :, mine]).all():
            continue
        at = [expected.line.chainage[names.index(survey.observations[n].tap)] for n in mine]
        ends = expected.ends[:, :, mine].mean(axis=1)
        rows.append((gauge.name, min(at), max(at), float(ends[0].min()), float(ends[1].max())))
    return table_of("boards", rows)
