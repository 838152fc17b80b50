"""A logger's record: flow, a few heads and the temperature over time, the windows on it and its faults below."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.text import Text
from numpy.typing import NDArray

from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import COLOURS, INK, MUTED, clean, legend_above, shorten

__all__ = [
    "FaultArtists",
    "TraceArtists",
    "draw_faults",
    "draw_trace",
    "record_alt",
    "record_figure",
    "recorded",
]

_Array = NDArray[np.float64]

#: Inches: width, and height of each panel.
_WIDTH = 5.6
_HEIGHTS = {"flow": 1.55, "head": 1.75, "temperature": 0.85}
_LANE = 0.2
#: Room for title, note and runs.
_HEAD = 0.62
_LEFT, _BREADTH = 0.15, 0.82
#: Columns with faults that get a lane.
_MOST_LANES = 8
_HEAD_LINES = (
    (COLOURS["blue"], "-"),
    (COLOURS["vermilion"], (0, (5, 1.5))),
    (COLOURS["green"], (0, (1.5, 1.2))),
    (COLOURS["purple"], (0, (4, 1.5, 1, 1.5))),
)
_LINES = {
    "flow": ((COLOURS["blue"], "-"),),
    "head": _HEAD_LINES,
    "temperature": ((COLOURS["orange"], "-"),),
}
_WORDS = {"flow": "flow", "head": "reading", "temperature": "temp."}
#: Every kind of fault has a mark of its own.
_MARKS = {"drift": "d", "step": "s", "stuck": "P", "spike": "v", "gap": "X"}
#: Longest span shown in each unit of time, s, and the seconds in it.
_TIMES = ((600.0, "s", 1.0), (6 * 3600.0, "min", 60.0), (4 * 86400.0, "h", 3600.0), (np.inf, "d", 86400.0))


@dataclass(frozen=True)
class TraceArtists:
    """What `draw_trace` drew.

    Parameters
    ----------
    means : tuple of Line2D
        The mean of each column.
    envelopes : tuple of PolyCollection
        From the least to the greatest sample.
    windows : tuple of Patch
        The shaded windows.
    names : tuple of Text
        Runs, above those windows that have room for them.
    legend_rows : int
        Rows of the legend above the axes.
    """

    means: tuple[Line2D, ...]
    envelopes: tuple[PolyCollection, ...]
    windows: tuple[Patch, ...]
    names: tuple[Text, ...]
    legend_rows: int


@dataclass(frozen=True)
class FaultArtists:
    """What `draw_faults` drew.

    Parameters
    ----------
    spans : tuple of Line2D
        From the beginning to the end of each fault.
    marks : tuple of Line2D
        The faults of each kind, at their beginning.
    words : tuple of Text
        Their kinds, where there is room.
    """

    spans: tuple[Line2D, ...]
    marks: tuple[Line2D, ...]
    words: tuple[Text, ...]


def recorded(reduction: Reduction) -> bool:
    """Return whether there is a logger's record to draw."""
    return len(reduction.record_trace) > 1


def time_unit(reduction: Reduction) -> tuple[str, float]:
    """Return the unit of the time axis and the seconds in it."""
    time = reduction.record_trace["time"].to_numpy(float)
    span = float(np.nanmax(time) - np.nanmin(time))
    return next((unit, seconds) for most, unit, seconds in _TIMES if span <= most)


def draw_trace(
    ax: Axes, reduction: Reduction, role: str, *, numbered: bool = False, named: bool = True
) -> TraceArtists:
    """Draw the columns of one role over time, with the windows shaded.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``record_trace`` and ``windows`` are read.
    role : {"flow", "head", "temperature"}
        Which columns.
    numbered : bool
        Whether the runs stand above their windows.
    named : bool
        Whether a legend names the columns.

    Returns
    -------
    TraceArtists
    """
    _, seconds = time_unit(reduction)
    trace = reduction.record_trace
    mine = trace[(trace["role"] == role).to_numpy(bool)]
    spans = _windows(ax, reduction, seconds)
    means, envelopes = [], []
    for place, (name, table) in enumerate(mine.groupby("column", sort=False)):
        colour, dashes = _LINES[role][place % len(_LINES[role])]
        time, low, mean, high = _with_breaks(table)
        envelopes.append(
            ax.fill_between(time / seconds, low, high, color=colour, alpha=0.3, linewidth=0, zorder=2)
        )
        (line,) = ax.plot(
            time / seconds,
            mean,
            color=colour,
            linestyle=dashes,
            linewidth=1.1,
            zorder=3,
            label=shorten(name, 18),
        )
        means.append(line)
    unit = str(mine["unit"].iloc[0] or "") if len(mine) else ""
    ax.set_ylabel(f"{_WORDS[role]}, {clean(unit)}" if unit else _WORDS[role])
    ax.margins(x=0.01)
    names = _numbers(ax, reduction, seconds) if numbered else ()
    rows = legend_above(ax, means, columns=5) if named and means else 0
    return TraceArtists(tuple(means), tuple(envelopes), spans, names, rows)


def draw_faults(ax: Axes, reduction: Reduction) -> FaultArtists:
    """Draw the faults of the record, a lane for each column that has any, each kind with a mark of its own and its name.

    Parameters
    ----------
    ax : Axes
        Where to draw; its limits of time are kept.
    reduction : Reduction
        Its table ``record_flags`` is read.

    Returns
    -------
    FaultArtists
    """
    _, seconds = time_unit(reduction)
    lanes = fault_lanes(reduction)
    _windows(ax, reduction, seconds)
    spans, marks, words = [], [], []
    free = dict.fromkeys(lanes, -np.inf)
    low, high = ax.get_xlim()
    for kind, marker in _MARKS.items():
        rows = reduction.record_flags[(reduction.record_flags["kind"] == kind).to_numpy(bool)]
        at = [
            (float(row.start) / seconds, lanes.index(_column(row.column)))  # type: ignore[arg-type]  # a row has no types
            for row in rows.itertuples()
            if _column(row.column) in lanes
        ]
        if at:
            (mark,) = ax.plot(
                *zip(*at, strict=True), marker, color=COLOURS["vermilion"], markersize=5, zorder=4, label=kind
            )
            marks.append(mark)
    for row in reduction.record_flags.sort_values("start", kind="stable").itertuples():
        name = _column(row.column)
        if name not in lanes:
            continue
        lane = lanes.index(name)
        start, end = float(row.start) / seconds, float(row.end) / seconds  # type: ignore[arg-type]  # a row has no types
        (span,) = ax.plot([start, end], [lane, lane], color=COLOURS["vermilion"], linewidth=2.2, zorder=3)
        spans.append(span)
        # a word of eight points takes about 4.4 points a letter
        wide = (high - low) * (4.4 * len(str(row.kind)) + 10) / (_WIDTH * _BREADTH * 72)
        after = end + (high - low) * 0.012
        place, side = (after, "left") if after + wide <= high else (start - (high - low) * 0.012, "right")
        left = place if side == "left" else place - wide
        if left >= free[name]:
            words.append(
                ax.text(place, lane, str(row.kind), fontsize=8, color=INK, ha=side, va="center", zorder=5)
            )
            free[name] = max(end, left + wide)
    ax.set_yticks(range(len(lanes)), [shorten(name, 12) for name in lanes])
    ax.set_ylim(len(lanes) - 0.4, -0.6)
    ax.grid(visible=False, axis="y")
    ax.set_xlim(low, high)
    return FaultArtists(tuple(spans), tuple(marks), tuple(words))


def fault_lanes(reduction: Reduction) -> list[str]:
    """Return the columns that get a lane, those that are hit first before the others."""
    return list(dict.fromkeys(_column(name) for name in reduction.record_flags["column"]))[:_MOST_LANES]


def record_alt(reduction: Reduction) -> str:
    """Return what the figure shows, for readers who do not see it."""
    columns = list(dict.fromkeys(reduction.record_trace["column"]))
    faults = reduction.record_flags["kind"].value_counts(sort=False)
    told = ", ".join(f"{number} × {kind}" for kind, number in faults.items()) or "none"
    windows = len(reduction.windows)
    return (
        f"The logger's record over time: {', '.join(map(clean, columns))}, each with its mean and the span from its least to its "
        f"greatest sample; {windows} window{'' if windows == 1 else 's'} shaded and named by run; faults: {told}."
    )


def record_figure(reduction: Reduction) -> Figure:
    """Return the record: a panel each for flow, heads and temperature, and one for the faults."""
    roles = [role for role in _HEIGHTS if (reduction.record_trace["role"] == role).any()]
    lanes = len(fault_lanes(reduction))
    below = 0.52 + (0.12 + _LANE * lanes + 0.1 if lanes else 0.0)
    above = {"flow": _HEAD, "head": 0.3, "temperature": 0.12}
    height = below + _HEAD + 0.2 * (roles[0] != "flow") - above[roles[0]]
    height += sum(_HEIGHTS[role] + above[role] for role in roles)
    figure = Figure(figsize=(_WIDTH, height))
    # the first panel has the title above it, whichever it is
    top = height - _HEAD - (0.2 if roles[0] != "flow" else 0.0)
    shared: Axes | None = None
    for place, role in enumerate(roles):
        size = _HEIGHTS[role]
        ax = figure.add_axes((_LEFT, (top - size) / height, _BREADTH, size / height), sharex=shared)
        shared = shared or ax
        draw_trace(ax, reduction, role, numbered=place == 0, named=role == "head")
        ax.locator_params(axis="y", nbins=5 if role != "temperature" else 3)
        ax.tick_params(axis="x", labelbottom=False)
        top -= size + (above[roles[place + 1]] if place + 1 < len(roles) else 0.0)
    last = figure.axes[-1]
    if lanes:
        size = _LANE * lanes
        last = figure.add_axes((_LEFT, 0.52 / height, _BREADTH, size / height), sharex=shared)
        draw_faults(last, reduction)
        figure.text(
            0.012, (0.52 + size / 2) / height, "faults", rotation=90, va="center", fontsize=9.5, color=INK
        )
    last.tick_params(axis="x", labelbottom=True)
    unit, _ = time_unit(reduction)
    begins = clean((reduction.survey.get("record") or {}).get("begins", ""))
    # a clock that starts at nought needs no telling
    since = "time" if begins.split(" ")[0] == "0" else f"time since {begins or 'the beginning of the record'}"
    last.set_xlabel(f"{since}, {unit}")
    figure.align_ylabels(figure.axes[: len(roles)])
    how = (
        "found"
        if len(reduction.windows) and bool(reduction.windows["found"].fillna(False).any())
        else "given"
    )
    figure.text(0.012, 1 - 0.07 / height, "The logger's record", fontsize=10.5, fontweight="bold", va="top")
    figure.text(
        0.012,
        1 - 0.27 / height,
        f"Lines: means; bands: from the least to the greatest sample; shaded: windows {how}, by run.",
        fontsize=8.5,
        color=MUTED,
        va="top",
    )
    return figure


def _column(name: object) -> str:
    return "all" if name is None or name != name else str(name)  # noqa: PLR0124 (NaN alone does so)


def _windows(ax: Axes, reduction: Reduction, seconds: float) -> tuple[Patch, ...]:
    """Shade the windows, their ends marked by lines."""
    spans = []
    for start, end in reduction.windows[["start", "end"]].itertuples(index=False, name=None):
        spans.append(
            ax.axvspan(
                start / seconds, end / seconds, color=COLOURS["sky blue"], alpha=0.22, linewidth=0, zorder=0
            )
        )
        for edge in (start, end):
            ax.axvline(edge / seconds, color=MUTED, linewidth=0.6, linestyle=(0, (2, 2)), zorder=1)
    return tuple(spans)


def _numbers(ax: Axes, reduction: Reduction, seconds: float) -> tuple[Text, ...]:
    """The runs above their windows, where they have room."""
    ax.autoscale_view()
    low, high = ax.get_xlim()
    room = (high - low) / (_WIDTH * _BREADTH * 72)
    words, free = [], -np.inf
    for run, start, end in reduction.windows[["run", "start", "end"]].itertuples(index=False, name=None):
        middle, name = 0.5 * (start + end) / seconds, shorten(run, 8)
        half = 0.5 * (5.2 * len(name) + 3) * room
        if middle - half < free:
            continue
        words.append(
            ax.annotate(
                name,
                (middle, 1.0),
                xycoords=("data", "axes fraction"),
                xytext=(0, 2),
                textcoords="offset points",
                ha="center",
                va="bottom",
                fontsize=8.5,
                color=INK,
            )
        )
        free = middle + half
    return tuple(words)


def _with_breaks(table: pd.DataFrame) -> tuple[_Array, _Array, _Array, _Array]:
    """Times and values of a column, parted by NaN where samples are missing."""
    columns = [table[name].to_numpy(float) for name in ("time", "low", "mean", "high")]
    time = columns[0]
    if len(time) < 3:
        return columns[0], columns[1], columns[2], columns[3]
    step = np.diff(time)
    gaps = np.flatnonzero(step > 2.5 * np.median(step)) + 1
    time, low, mean, high = (
        np.insert(column, gaps, time[gaps] - step[gaps - 1] / 2 if place == 0 else np.nan)
        for place, column in enumerate(columns)
    )
    return time, low, mean, high
