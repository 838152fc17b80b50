"""Surveys whose gauges read differences alone, or a level of their own: what their grade lines can show."""

from __future__ import annotations

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection

from gradeline.quantities.printing import Display
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.pipe import column
from gradeline.report.figures.style import COLOURS

__all__ = ["draw_falls", "drawn_runs", "head_axis", "marks", "measured_falls", "only_differences"]


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
        for its tap, and the residual's sign turned: a fall too large is a head too low; ``from_chainage`` and
        ``from_head`` (m) are where the fall begins. No rows where the run has no line.
    """
    if not len(lines):
        return heads.iloc[:0].assign(from_chainage=[], from_head=[])
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
        from_chainage=column(heads, "chainage"),
        from_head=upstream,
    )


def marks(reduction: Reduction, lines: pd.DataFrame, heads: pd.DataFrame) -> pd.DataFrame:
    """Return the readings of one run as places to mark: heads where they were read, and after them the falls.

    Parameters
    ----------
    reduction, lines, heads
        As for `measured_falls`.

    Returns
    -------
    DataFrame
        ``heads`` with the rows of differential gauges from `measured_falls`; ``from_chainage`` is missing for the others.
    """
    between = heads["tap_2"].notna().to_numpy(bool)
    falls = measured_falls(reduction, lines, heads[between])
    if between.all():
        return falls
    single = heads[~between].assign(from_chainage=np.nan, from_head=np.nan)
    return pd.concat([single, falls], ignore_index=True) if len(falls) else single


def draw_falls(ax: Axes, falls: pd.DataFrame, along: float, scale: float) -> LineCollection | None:
    """Draw each fall as a step: level from the fitted head at its tap upstream, then down by what was read.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    falls : DataFrame
        Rows of `measured_falls`.
    along, scale : float
        What chainages and heads in metres are multiplied by.

    Returns
    -------
    LineCollection or None
        None where there is none.
    """
    start, end = column(falls, "from_chainage") * along, column(falls, "chainage") * along
    top, foot = column(falls, "from_head") * scale, column(falls, "head") * scale
    steps = [
        [(a, above), (b, above), (b, below)]
        for a, b, above, below in zip(start, end, top, foot, strict=True)
        if np.isfinite([a, b, above, below]).all()
    ]
    if not steps:
        return None
    drawn = LineCollection(
        steps, colors=[COLOURS["green"]], linewidths=0.9, linestyles=[(0, (2, 1.5))], zorder=2.0
    )
    ax.add_collection(drawn)
    return drawn
