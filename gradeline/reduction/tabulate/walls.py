"""Walls over all runs."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.hydraulics.friction import roughness_reynolds
from gradeline.reduction.faint_flows import FAINT_FLOW
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall, bore_variants

__all__ = ["bore_table", "wall_table"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
_MISSING = {"roughness_resolved": None, "hydraulically_smooth": None}
#: Changes of the bore for which the roughness is worked out again.
_BORE_CHANGES = (-0.05, -0.02, -0.01, 0.0, 0.01, 0.02, 0.05)


def wall_table(walls: tuple[Wall, ...], conveyance: pd.DataFrame) -> pd.DataFrame:
    """Return the table of walls; `conveyance` has Hazen–Williams C and Manning n of each at its highest flow."""
    at_highest = {str(row["wall"]): row for row in conveyance.to_dict("records")}
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
        older = at_highest.get(wall.name, {})
        for name in ("hazen_williams_c", "manning_n"):
            rows[name].append(older.get(name, np.nan))
        rows["reason"].append("; ".join(filter(None, [*_wall_reasons(wall), older.get("caution")])))
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
        faint = int(wall.faint.any(axis=1).sum())
        reasons.append(f"{_runs(faint)} left out: S does not exceed twice its uncertainty")
    still = int((wall.turbulent.any(axis=1) & wall.unmoved).sum())
    if still:
        reasons.append(f"{_runs(still)} left out: {FAINT_FLOW}")
    if not np.isfinite(fit.trend):
        reasons.append("no trend over Re: too few turbulent runs")
    return reasons


def _runs(count: int) -> str:
    return "1 run" if count == 1 else f"{count} runs"


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
