"""Walls and fittings over all runs."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.fitting.losses import fit_loss_coefficient
from gradeline.hydraulics.friction import roughness_reynolds
from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall, bore_variants

__all__ = ["bore_table", "fitting_table", "wall_table"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
_MISSING = {"roughness_resolved": None, "hydraulically_smooth": None}
_LATER = "not estimated in this version"
#: Changes of the bore for which the roughness is worked out again.
_BORE_CHANGES = (-0.05, -0.02, -0.01, 0.0, 0.01, 0.02, 0.05)


def wall_table(walls: tuple[Wall, ...]) -> pd.DataFrame:
    """Return the table of walls."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["walls"]}
    for wall in walls:
        fit = wall.fit
        why = wall.implausible()
        if why is not None:
            # A number would be taken for a roughness.
            told = {"wall": wall.name, "runs_used": 0, "reason": why} | _MISSING
            for name, column in rows.items():
                column.append(told.get(name, np.nan))
            continue
        rows["wall"].append(wall.name)
        rows["roughness"].append(fit.roughness)
        rows["roughness_low"].append(fit.low)
        rows["roughness_high"].append(fit.high)
        rows["roughness_upper95"].append(fit.upper95)
        rows["roughness_resolved"].append(bool(fit.low > 0) if np.isfinite(fit.low) else None)
        plus, plus_upper = _fastest(wall)
        rows["hydraulically_smooth"].append(bool(plus_upper < 5.0) if np.isfinite(plus_upper) else None)
        rows["roughness_reynolds"].append(plus)
        rows["law_trend"].append(fit.trend)
        rows["law_trend_u"].append(fit.trend_u)
        rows["runs_used"].append(int(fit.used.any(axis=1).sum()))
        rows["hazen_williams_c"].append(np.nan)
        rows["manning_n"].append(np.nan)
        rows["reason"].append("; ".join(_wall_reasons(wall)))
    return frame("walls", rows)


def _wall_reasons(wall: Wall) -> list[str]:
    fit, reasons = wall.fit, []
    if not np.isfinite(fit.roughness):
        if not wall.turbulent.any():
            return ["no turbulent run: only turbulent friction depends on the wall"]
        if wall.faint.any():
            return ["in no turbulent run is the slope above zero and twice its uncertainty"]
        return ["in no turbulent run is there a slope above zero that its taps determine"]
    if not np.isfinite(fit.low):
        reasons.append("one slope and no stated reading uncertainty: nothing tells how sure the roughness is")
    elif not np.isfinite(fit.high):
        reasons.append("the readings set no upper bound to the roughness")
    if fit.roughness == 0:
        reasons.append("f lies at or below that of a smooth wall: the roughness is not told from zero")
    elif fit.low == 0:
        reasons.append("the roughness is not told from zero: the upper bound is what the readings say")
    if wall.faint.any():
        reasons.append(
            f"{int(wall.faint.any(axis=1).sum())} runs left out: S does not exceed twice its uncertainty"
        )
    if not np.isfinite(fit.trend):
        reasons.append("no trend over Re: too few turbulent runs")
    reasons.append(f"Hazen–Williams C and Manning n: {_LATER}")
    return reasons


def _fastest(wall: Wall) -> tuple[float, float]:
    """ε⁺ of the roughness and of its upper bound at the fastest run that entered."""
    fit = wall.fit
    if not np.isfinite(fit.roughness):
        return float("nan"), float("nan")
    reynolds = np.where(fit.used, wall.data.reynolds, -1.0)
    run, k = np.unravel_index(int(reynolds.argmax()), reynolds.shape)
    velocity, viscosity = float(wall.data.velocity[run, k]), float(wall.data.kinematic_viscosity[run])
    slope = float(fit.expected_slope[run, k])
    factor = 2 * wall.data.gravity * float(wall.data.diameter[k]) * slope / velocity**2
    values = [
        float(roughness_reynolds(size, velocity, factor, viscosity)) for size in (fit.roughness, fit.upper95)
    ]
    return values[0], values[1]


def bore_table(walls: tuple[Wall, ...]) -> pd.DataFrame:
    """Return each wall's roughness if its bore were a little different; f goes as the fifth power of the bore."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["bore_sensitivity"]}
    for wall in walls:
        if not np.isfinite(wall.fit.roughness) or wall.implausible() is not None:
            continue
        for change, roughness in zip(_BORE_CHANGES, bore_variants(wall, _BORE_CHANGES), strict=True):
            for name, entry in zip(rows, (wall.name, change, (1 + change) ** 5 - 1, roughness), strict=True):
                rows[name].append(entry)
    return frame("bore_sensitivity", rows)


def fitting_table(
    line: Line, media: Media, flowing: Flowing, friction: Friction, *, level: float
) -> pd.DataFrame:
    """Return the table of fittings: fitted ones over all runs, given ones as they were given."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["fittings"]}
    column = 1 + len(line.diameter)
    fastest = int(flowing.flow.argmax()) if len(flowing.flow) else None
    for m, fitting in enumerate(line.fittings):
        k = line.reference[m]
        if fitting.loss_coefficient is not None:
            given = fitting.loss_coefficient
            value, u, low, high = given.value, np.nan if given.u is None else given.u, np.nan, np.nan
            reason: str | None = "given, not fitted"
        else:
            head = flowing.velocity[:, k] ** 2 / (2 * media.gravity)
            estimate = flowing.fits.lines.parameters[:, column] / head
            own = flowing.own[:, column] / head - 2 * estimate * flowing.reach_flow_u[:, k]
            effect = flowing.effect[:, column] / head[:, None] + estimate[:, None] * _head_effects(
                flowing, int(k)
            )
            fit = fit_loss_coefficient(
                estimate,
                flowing.random[:, column, column] / head**2 + own**2,
                effect,
                level=level,
                dof=flowing.fits.pooled_dof or np.inf,
            )
            value, u, low, high = fit.coefficient, fit.u, fit.low, fit.high
            reason = None if np.isfinite(value) else _no_coefficient(line, m, estimate)
            column += 1
        length = np.nan
        if fastest is not None and np.isfinite(value) and np.isfinite(friction.factor[fastest, k]):
            length = value * line.diameter[k] / friction.factor[fastest, k]
        for name, entry in zip(rows, (fitting.name, value, u, low, high, length, reason), strict=True):
            rows[name].append(entry)
    return frame("fittings", rows)


def _head_effects(flowing: Flowing, k: int) -> Array:
    """Relative change of K by the velocity head it is counted in, for each run and shared input."""
    shape = flowing.velocity.shape
    found = [
        (0.0 if one.diameter is None else 4.0 * float(one.diameter[k]))
        - 2.0 * np.broadcast_to(one.flow, shape)[:, k]
        + one.gravity
        for one in flowing.inputs
    ]
    return np.stack(found, axis=1) if found else np.zeros((shape[0], 0))


def _no_coefficient(line: Line, m: int, estimate: Array) -> str:
    if not len(estimate):
        return "no flowing run"
    if np.isfinite(estimate).any():
        return (
            "one line through as many readings as it has parameters: no weight without a stated uncertainty"
        )
    at = line.fittings[m].at
    same = [other.name for i, other in enumerate(line.fittings) if i != m and line.fitted[i]]
    between = f", and {' and '.join(same)} may lie between the same taps" if same else ""
    return f"the usable taps do not separate the loss at {at:g} m from the friction of the reaches beside it{between}"
