"""Surveys whose gauges read differences alone, or a level of their own: what their grade lines can show."""

from __future__ import annotations

import numpy as np
import pandas as pd

from gradeline.quantities.printing import Display
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.pipe import column

__all__ = ["drawn_runs", "head_axis", "measured_falls", "only_differences"]


def only_differences(reduction: Reduction) -> bool:
    """Return whether every reading is a difference between two taps, so that no level is known."""
    return len(reduction.heads) > 0 and bool(reduction.heads["tap_2"].notna().all())


def head_axis(reduction: Reduction, display: Display) -> str:
    """Return the words of an axis of heads: above datum only where a gauge tells the level."""
    if only_differences(reduction):
        return display.head("head relative to the line's start", "head")
    elevation = reduction.grade_lines["elevation"]
    free = len(elevation) > 0 and bool(elevation.isna().all())
    return display.head("head above a free level" if free else "head above datum", "head")


def drawn_runs(reduction: Reduction) -> list[str]:
    """Return the runs that have grade lines to draw: without a level, those that flow."""
    runs = reduction.runs
    if only_differences(reduction):
        runs = runs[(runs["regime"] != "static").to_numpy(bool)]
    return list(dict.fromkeys(runs["run"]))


def measured_falls(reduction: Reduction, lines: pd.DataFrame, heads: pd.DataFrame) -> pd.DataFrame:
    """Return differences as heads at their downstream tap: the fitted head upstream less the measured fall.

    Parameters
    ----------
    reduction : Reduction
        Its ``layout`` tells where the taps lie.
    lines, heads : DataFrame
        Rows of ``grade_lines`` and ``heads`` of one run.

    Returns
    -------
    DataFrame
        ``heads`` with the chainage of ``tap_2``, its head (m) on the fitted hydraulic grade line's level, the gauge's name
        for its tap, and the residual's sign turned: a fall too large is a head too low. No rows where the run has no line.
    """
    if not len(lines):
        return heads.iloc[:0]
    taps = reduction.layout[(reduction.layout["what"] == "tap").to_numpy(bool)]
    chainage = dict(zip(taps["name"], column(taps, "chainage"), strict=True))
    upstream = np.interp(
        column(heads, "chainage"), column(lines, "chainage"), column(lines, "piezometric_head")
    )
    return heads.assign(
        chainage=[chainage.get(tap, np.nan) for tap in heads["tap_2"]],
        head=upstream - column(heads, "head"),
        tap=heads["gauge"],
        residual=-column(heads, "residual"),
    )
