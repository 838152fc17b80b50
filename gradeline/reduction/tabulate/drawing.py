"""What figures need beside the results: grade lines, places along the line, exponents."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.fitting.exponent import fit_exponent
from gradeline.hydraulics.gradelines import grade_lines, stations
from gradeline.quantities import parse_unit
from gradeline.reduction.ailments import unlisted_fall
from gradeline.reduction.friction import Friction
from gradeline.reduction.levels import is_relative
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.sections import laminar_constant_of
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = [
    "ailment_table",
    "exponent_table",
    "grade_line_table",
    "laminar_table",
    "layout_table",
    "reading_unit_table",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
_BREAKS = {"step": "unlisted loss", "kink": "change of slope", "curve": "gradual change of slope"}


def grade_line_table(survey: Survey, line: Line, media: Media, flowing: Flowing) -> pd.DataFrame:
    """Return the fitted lines of every flowing run at the places where they bend, and at the taps."""
    listed = np.array([fitting.at for fitting in line.fittings])
    unlisted = flowing.ailments.names
    broken = np.array([one.at for one, what in unlisted if what == "step"])
    at = np.concatenate([listed, broken])
    chainage, side = stations(line.bounds, at, line.chainage)
    parameters = flowing.fits.lines.parameters
    reaches = len(line.diameter)
    relative = is_relative(survey)
    loss_head = flowing.velocity[:, line.reference] ** 2 / (2 * media.gravity)
    losses = np.zeros((len(loss_head), len(at)))
    last = parameters.shape[1] - len(unlisted)
    for number, (_, what) in enumerate(unlisted):
        if what == "step":
            losses[:, len(listed) + sum(w == "step" for _, w in unlisted[:number])] = parameters[
                :, last + number
            ]
    column = 1 + reaches
    for m, fitting in enumerate(line.fittings):
        if fitting.loss_coefficient is not None:
            losses[:, m] = fitting.loss_coefficient.value * loss_head[:, m]
        else:
            losses[:, m] = parameters[:, column]
            column += 1
    drawn = grade_lines(
        chainage,
        side,
        # Without a level only the fall is known: it is drawn from 0 at the line's start, and not against the pipe.
        start_energy=np.nan_to_num(parameters[:, 0]) if relative else parameters[:, 0],
        reach_bounds=line.bounds,
        slopes=parameters[:, 1 : 1 + reaches],
        velocity_heads=flowing.velocity_heads,
        loss_chainages=at,
        loss_heads=losses,
    )
    lengths = np.clip(chainage[:, None], line.bounds[:-1], line.bounds[1:]) - line.bounds[:-1]
    past = (chainage[:, None] > at) | ((side[:, None] > 0) & (chainage[:, None] == at))
    fitted = past[:, : len(listed)][:, line.fitted]
    known_columns = np.column_stack([np.ones(len(chainage)), -lengths, -fitted.astype(float)])
    # The levels of single gauges are no part of the line.
    rows = np.zeros((len(chainage), parameters.shape[1]))
    rows[:, : known_columns.shape[1]] = known_columns
    bent = np.zeros(drawn.energy_head.shape)
    for number, (one, what) in enumerate(unlisted):
        beyond = (
            past[:, len(listed) + sum(w == "step" for _, w in unlisted[:number])]
            if what == "step"
            else past[:, 0:0]
        )
        rows[:, last + number] = -unlisted_fall(one, what, chainage, beyond)
        if what != "step":
            bent += parameters[:, [last + number]] * rows[:, last + number]
    random = np.nan_to_num(flowing.random, nan=0.0) + flowing.own[:, :, None] * flowing.own[:, None, :]
    shared = np.einsum("mp,fpq->fmq", rows, flowing.effect)
    variance = np.einsum("mp,fpr,mr->fm", rows, random, rows) + np.einsum("fmq,fmq->fm", shared, shared)
    known = np.asarray(np.isfinite(flowing.random).all(axis=(1, 2)))[:, None]
    axis = np.interp(chainage, line.chainage, line.elevation) + (np.nan if relative else 0.0)
    reach = np.clip(
        np.where(
            side < 0, np.searchsorted(line.bounds, chainage), np.searchsorted(line.bounds, chainage, "right")
        )
        - 1,
        0,
        reaches - 1,
    )
    count = len(flowing.rows)
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    return frame(
        "grade_lines",
        {
            "run": np.repeat(names, len(chainage)),
            "chainage": np.tile(chainage, count),
            "energy_head": (drawn.energy_head + bent).ravel(),
            "energy_head_u": np.where(known, np.sqrt(variance), np.nan).ravel(),
            "piezometric_head": (drawn.piezometric_head + bent).ravel(),
            "velocity_head": drawn.velocity_head.ravel(),
            "elevation": np.tile(axis, count),
            "crown": np.tile(axis + line.diameter[reach] / 2, count),
        },
    )


def layout_table(survey: Survey, line: Line) -> pd.DataFrame:
    """Return the places along the line: taps, fittings and the ends of reaches."""
    rows: list[tuple[str, str, float, str]] = [
        ("tap", tap.name, tap.chainage, tap.gauge or "") for tap in survey.taps
    ]
    rows += [
        ("fitting", one.name, one.at, "change of bore" if one.change_of_bore else "") for one in line.fittings
    ]
    rows += [("reach", reach.name, reach.start, reach.wall) for reach in survey.reaches]
    at = np.array([row[2] for row in rows])
    return frame(
        "layout",
        {
            "what": [row[0] for row in rows],
            "name": [row[1] for row in rows],
            "chainage": at,
            "elevation": np.interp(at, line.chainage, line.elevation),
            "note": [row[3] for row in rows],
        },
    )


def laminar_table(survey: Survey, flowing: Flowing, friction: Friction) -> pd.DataFrame:
    """Return f Re over its value in laminar flow (64 for a circle) of each laminar run and reach."""
    at = np.argwhere(np.isfinite(friction.laminar_ratio))
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    return frame(
        "laminar",
        {
            "run": [names[run] for run, _ in at],
            "reach": [survey.reaches[k].name for _, k in at],
            "ratio": [friction.laminar_ratio[run, k] for run, k in at],
            "ratio_u": [friction.laminar_ratio_u[run, k] for run, k in at],
            "constant": [laminar_constant_of(survey.reaches[k]) for _, k in at],
        },
    )


def reading_unit_table(survey: Survey) -> pd.DataFrame:
    """Return the unit in which each observation was read: as the file gave it, else SI."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["reading_units"]}
    for one in survey.observations:
        kind = survey.gauge(one.gauge).kind
        dimension = GAUGE_KINDS[kind].reading
        text = survey.units.get(one.label, "m" if dimension == "length" else "Pa")
        scale = parse_unit(text, dimension).difference_to_si(1.0)
        for name, entry in zip(rows, (one.label, one.gauge, kind, dimension, text, scale), strict=True):
            rows[name].append(entry)
    return frame("reading_units", rows)


def exponent_table(
    survey: Survey, line: Line, flowing: Flowing, friction: Friction, walls: tuple[Wall, ...], *, level: float
) -> pd.DataFrame:
    """Return the exponent of S against Q (or V) for each reach, laminar and turbulent runs apart, those off the law left out."""
    off = np.zeros(friction.slope.shape, dtype=bool)
    for wall in walls:
        off[:, wall.reaches] = wall.fit.off_law | wall.unmoved[:, None]
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["exponents"]}
    for k, reach in enumerate(survey.reaches):
        for kind in ("laminar", "turbulent"):
            mine = (friction.regime[:, k] == kind) & np.isfinite(friction.slope[:, k]) & ~off[:, k]
            if not mine.any():
                continue
            slope = friction.slope[mine, k]
            safe = np.where(slope > 0, slope, np.nan)
            # Runs of different temperature are brought to one viscosity.
            thin = flowing.velocity[mine, k] * line.diameter[k] / flowing.reynolds[mine, k]
            thin = float(np.median(thin)) / thin
            fit = fit_exponent(
                flowing.velocity[mine, k] * thin,
                np.nan_to_num(safe * thin**2),
                friction.slope_u_random[mine, k] / safe,
                level=level,
                flow_u=flowing.reach_flow_u[mine, k],
                shared=np.nan_to_num(flowing.effect[mine, 1 + k] / safe[:, None]),
            )
            reason = None if np.isfinite(fit.exponent) else "fewer than two runs of different flow"
            values = (reach.name, kind, fit.exponent, fit.u, fit.low, fit.high, fit.runs, reason)
            for name, entry in zip(rows, values, strict=True):
                rows[name].append(entry)
    return frame("exponents", rows)


def ailment_table(flowing: Flowing) -> pd.DataFrame:
    """Return what ails taps and line, over all runs, with the evidence."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["ailments"]}
    found: list[dict[str, Any]] = [
        {
            "what": "tap" if one.is_tap else "gauge",
            "name": one.label,
            "ailment": one.name,
            "offset": one.what.offset,
            "offset_u": one.what.offset_u,
            "edge_coefficient": one.what.edge,
            "edge_coefficient_u": one.what.edge_u,
            "chainage_error": one.what.chainage,
            "chainage_error_u": one.what.chainage_u,
            "evidence": one.what.gain,
            "fate": "taken off" if one.corrected else "left out of the fits",
        }
        for one in flowing.ailments.taps
    ]
    found += [
        {
            "what": "line",
            "ailment": _BREAKS[one.kind],
            "start": one.low,
            "end": one.high,
            "loss_coefficient": one.loss,
            "loss_coefficient_u": one.loss_u,
            "slope_change": one.change,
            "slope_change_u": one.change_u,
            "evidence": one.gain,
            "rival": one.rival,
            "fate": "fitted in every run",
        }
        for one in dict.fromkeys(broken for broken, _ in flowing.ailments.names)
    ]
    for values in found:
        for name, column in rows.items():
            column.append(
                values.get(name, None if DRAWING_TABLES["ailments"][name].kind == "text" else np.nan)
            )
    return frame("ailments", rows)
