"""The uncertainty budget, what pays most, and the likelihood of each wall's roughness."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd
from scipy.special import stdtrit

from gradeline.fitting.wall import likelihood_rise
from gradeline.hydraulics.friction import roughness_reynolds
from gradeline.reduction.budget import Budget
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall

__all__ = ["budget_table", "improvement_table", "likelihood_table"]

#: Places at which the likelihood of a wall is worked out.
_PLACES = 121
#: ε⁺ below which a wall is hydraulically smooth (Nikuradse 1933).
_SMOOTH = 5.0


def budget_table(budgets: Sequence[Budget]) -> pd.DataFrame:
    """Return the table of the budget: a row for each input of each value, the largest first."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["budget"]}
    for one in budgets:
        variance = one.u**2
        for name, u in one.contributions.items():
            for column, entry in zip(
                rows, (one.quantity, one.subject, name, u, u**2 / variance), strict=True
            ):
                rows[column].append(entry)
    return frame("budget", rows)


def improvement_table(budgets: Sequence[Budget]) -> pd.DataFrame:
    """Return what half the uncertainty of the input that pays most would do, one row a value."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["improvements"]}
    for one in budgets:
        best = one.improvement
        if best is None:
            continue
        entries = (
            one.quantity,
            one.subject,
            best.input,
            one.value,
            best.u,
            best.u_halved,
            best.bound,
            best.bound_halved,
        )
        for column, entry in zip(rows, entries, strict=True):
            rows[column].append(entry)
    return frame("improvements", rows)


def likelihood_table(walls: tuple[Wall, ...]) -> pd.DataFrame:
    """Return Δχ² of each wall over its roughness, to well beyond its interval; nothing where there is no interval."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["likelihood"]}
    for wall in walls:
        fit = wall.fit
        if not np.isfinite(fit.low) or not np.isfinite(fit.high) or wall.implausible() is not None:
            continue
        ends = (max(fit.low - 0.6 * (fit.high - fit.low), 0.0), fit.high + 0.35 * (fit.high - fit.low))
        places = np.unique(
            np.append(np.linspace(*ends, _PLACES), [fit.roughness, fit.low, fit.high, fit.upper95])
        )
        reynolds, per_metre = _fastest(wall)
        dof = min(fit.dof, 1e9)
        columns: dict[str, Any] = {
            "wall": [wall.name] * len(places),
            "roughness": places,
            "chi_square_rise": np.maximum(likelihood_rise(wall.data, fit, places), 0.0),
            "interval_rise": np.full(len(places), stdtrit(dof, 0.5 + fit.level / 2.0) ** 2),
            "bound_rise": np.full(len(places), stdtrit(dof, 0.95) ** 2),
            "smooth_limit": np.full(len(places), _SMOOTH / per_metre),
            "reynolds": np.full(len(places), reynolds),
        }
        for name, column in columns.items():
            rows[name] += list(column)
    return frame("likelihood", rows)


def _fastest(wall: Wall) -> tuple[float, float]:
    """Re of the fastest run that entered, and its ε⁺ for a roughness of one metre."""
    fit, data = wall.fit, wall.data
    reynolds = np.where(fit.used, data.reynolds, -1.0)
    run, k = np.unravel_index(int(reynolds.argmax()), reynolds.shape)
    velocity = float(data.velocity[run, k])
    factor = 2 * data.gravity * float(data.diameter[k]) * float(fit.expected_slope[run, k]) / velocity**2
    return float(reynolds[run, k]), float(
        roughness_reynolds(1.0, velocity, factor, data.kinematic_viscosity[run])
    )
