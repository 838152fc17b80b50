"""What ails taps and line: the error of a tap in every run, and the energy heads about a break of the line."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import NormalDist
from typing import Any

import numpy as np
import numpy.typing as npt
from matplotlib.axes import Axes
from matplotlib.container import ErrorbarContainer
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.text import Annotation

from gradeline.quantities.printing import SI_DISPLAY, Display, format_change, rounded
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import COLOURS, INK, MUTED, legend_above, shorten
from gradeline.report.printed import known, percent, records

__all__ = [
    "BreakArtists",
    "TapErrorArtists",
    "ailing_taps",
    "break_title",
    "broken_places",
    "draw_break",
    "draw_tap_error",
]

_Array = npt.NDArray[np.float64]
#: Runs are named where there are at most this many.
_NAMED_RUNS = 20
_LABEL_SIZE = 8
#: Bars on more runs than this would be a wall.
_ERRORBARS = 400
_ROOM = 0.12


@dataclass(frozen=True)
class TapErrorArtists:
    """What `draw_tap_error` drew.

    Parameters
    ----------
    runs : ErrorbarContainer
        The error in each run, with its interval.
    patterns : mapping of str to Line2D
        The fitted patterns: ``"offset"``, ``"edge"``, ``"chainage"``, ``"still"``.
    labels : tuple of Annotation
        The runs' names, where they are few and have room.
    legend_rows : int
        Rows of the legend above the axes.
    """

    runs: ErrorbarContainer
    patterns: dict[str, Line2D]
    labels: tuple[Annotation, ...]
    legend_rows: int


@dataclass(frozen=True)
class BreakArtists:
    """What `draw_break` drew.

    Parameters
    ----------
    fast, slow : Line2D or None
        Readings of the faster and of the slower half of the runs.
    left_out : Line2D or None
        Readings that did not enter.
    fitted : Line2D
        What was fitted, the median over the runs.
    place : Rectangle
        The stretch that holds it.
    legend_rows : int
        Rows of the legend above the axes.
    """

    fast: Line2D | None
    slow: Line2D | None
    left_out: Line2D | None
    fitted: Line2D
    place: Rectangle
    legend_rows: int


def ailing_taps(reduction: Reduction) -> list[dict[str, Any]]:
    """Return the rows of ``ailments`` that are of taps or gauges."""
    return [row for row in records(reduction.ailments) if row["what"] != "line"]


def broken_places(reduction: Reduction) -> list[tuple[int, dict[str, Any]]]:
    """Return number and row of each break of the line that has heads to draw."""
    rows = [row for row in records(reduction.ailments) if row["what"] == "line"]
    drawn = set(reduction.break_heads["number"])
    return [(number, row) for number, row in enumerate(rows) if number in drawn]


def break_title(row: dict[str, Any], display: Display = SI_DISPLAY) -> str:
    """Return one line about a break: what it is and where."""
    ends = (display.text("chainage", row[end], digits=4) for end in ("start", "end"))
    what = str(row["ailment"])
    return f"{what[:1].upper()}{what[1:]} between {' and '.join(ends)} {display.unit('chainage')}"


def draw_tap_error(
    ax: Axes, reduction: Reduction, name: str, *, display: Display = SI_DISPLAY
) -> TapErrorArtists:
    """Draw the error of an ailing tap or gauge in every run, as the other readings show it.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``ailments`` and ``ailment_runs`` are read.
    name : str
        Tap or gauge.
    display : Display
        Units of the axes.

    Returns
    -------
    TapErrorArtists
        Against the velocity head; of a line that does not follow, against the head that it should show. Bars are
        intervals at the reduction's level.
    """
    row = next(one for one in ailing_taps(reduction) if one["name"] == name)
    rows = reduction.ailment_runs[(reduction.ailment_runs["name"] == name).to_numpy(bool)]
    values = {
        key: rows[key].to_numpy(float, na_value=np.nan)
        for key in ("velocity_head", "expected", "error", "error_u", "by_offset", "by_edge", "by_chainage")
    }
    still = "sluggish" in row["ailment"] and bool(np.isfinite(values["expected"]).any())
    x = values["expected" if still else "velocity_head"] * display.factor("head")
    scale = display.factor("small head")
    y, half = values["error"] * scale, values["error_u"] * scale
    half = NormalDist().inv_cdf((1 + reduction.level) / 2) * half
    seen = np.isfinite(x) & np.isfinite(y)

    ax.axhline(0, color=MUTED, linewidth=0.9, zorder=1.5)
    marks = ax.errorbar(
        x[seen],
        y[seen],
        yerr=half[seen] if seen.sum() <= _ERRORBARS else None,
        fmt="o",
        color=COLOURS["blue"],
        ecolor=INK,
        elinewidth=0.9,
        capsize=2.2,
        markersize=5,
        zorder=3,
    )
    patterns: dict[str, Line2D] = {}
    order = np.argsort(x[seen])
    start = np.zeros(0) if still else np.zeros(1)
    for key, colour, dashes in (
        ("offset", COLOURS["green"], (0, ())),
        ("edge", COLOURS["vermilion"], (0, (5, 2))),
        ("chainage", COLOURS["black"], (0, (1.5, 1.5))),
    ):
        fitted = values[f"by_{key}"][seen][order] * scale
        if not np.isfinite(fitted).any() or not _told(key, str(row["ailment"])):
            continue
        # A part that grows with the flow is nothing without one.
        at = x[seen][order]
        zero = fitted[0] - at[0] * (fitted[-1] - fitted[0]) / max(at[-1] - at[0], 1e-12)
        (patterns[key],) = ax.plot(
            np.concatenate([start, at]),
            np.concatenate([np.full(len(start), zero), fitted]),
            color=colour,
            linestyle=dashes,
            linewidth=1.4,
            label=_pattern_words(key, row, display),
            zorder=2,
        )
    if still and seen.any():
        middle = float(np.median((x * scale / display.factor("head") + y)[seen]))
        ends = np.array([x[seen].min(), x[seen].max()])
        (patterns["still"],) = ax.plot(
            ends,
            middle - ends * scale / display.factor("head"),
            color=MUTED,
            linestyle=(0, (5, 2)),
            linewidth=1.2,
            label="a reading that stands still",
            zorder=2,
        )
    heights = [y[seen] - np.nan_to_num(half[seen]), y[seen] + np.nan_to_num(half[seen]), np.zeros(1)]
    ax.set_ylim(*_limits(np.concatenate(heights)))
    if not still and seen.any():
        ax.set_xlim(0.0, 1.06 * float(x[seen].max()))
    ax.margins(x=0.05)
    what = "tap" if row["what"] == "tap" else "gauge"
    ax.set_ylabel(display.head(f"error of {what} {shorten(name, 16)}", "small head"))
    ax.set_xlabel(
        display.head("head that the other readings give", "head")
        if still
        else display.head("velocity head V²/2g", "head")
    )
    labels = _run_names(
        ax, rows["run"].to_numpy(object)[seen], x[seen], y[seen], half[seen], [*patterns.values()]
    )
    point = marks.lines[0]
    assert isinstance(point, Line2D)
    point.set_label(f"run, with its {percent(reduction.level)} interval")
    return TapErrorArtists(marks, patterns, labels, legend_above(ax, [point, *patterns.values()], columns=2))


def _told(pattern: str, ailment: str) -> bool:
    """Whether a pattern stands for an ailment: both that grow, where they are not told apart."""
    if "not distinguishable" in ailment:
        return pattern != "offset"
    return pattern in ailment or (pattern != "offset" and "grows" in ailment)


def _pattern_words(pattern: str, row: dict[str, Any], display: Display) -> str:
    beside = "constant and " if "datum offset and" in row["ailment"] else ""
    if pattern == "offset":
        return f"constant, {display.text('small head', row['offset'], row['offset_u'], unit=True)}"
    if pattern == "edge":
        return f"{beside}edge coefficient {rounded(row['edge_coefficient'], row['edge_coefficient_u'])}"
    size = display.text("small head", row["chainage_error"], row["chainage_error_u"], unit=True)
    return f"{beside}chainage off by {size}"


def _limits(heights: _Array) -> tuple[float, float]:
    kept = heights[np.isfinite(heights)]
    low, high = (float(kept.min()), float(kept.max())) if kept.size else (0.0, 1.0)
    room = _ROOM * (high - low) or 1.0
    return low - room, high + room


def _run_names(
    ax: Axes, names: npt.NDArray[np.object_], x: _Array, y: _Array, half: _Array, lines: list[Line2D]
) -> tuple[Annotation, ...]:
    """Names of the runs, few of them, each beside its mark where no other mark, bar, line or name is."""
    if len(names) > _NAMED_RUNS:
        return ()
    to_points = 72 / ax.figure.dpi
    at = ax.transData.transform(np.column_stack([x, y])) * to_points
    bars = np.nan_to_num(half) * ax.bbox.height * to_points / np.ptp(ax.get_ylim())
    taken = [
        (px - 3.5, py - max(bar, 3.5), px + 3.5, py + max(bar, 3.5))
        for (px, py), bar in zip(at, bars, strict=True)
    ]
    for line in lines:
        along, up = (np.asarray(data, float) for data in line.get_data())
        fine = np.linspace(along[0], along[-1], 200)
        for px, py in ax.transData.transform(np.column_stack([fine, np.interp(fine, along, up)])) * to_points:
            taken.append((px - 0.5, py - 1.0, px + 0.5, py + 1.0))
    x0, y0, x1, y1 = (side * to_points for side in ax.bbox.extents)
    labels = []
    for n in np.argsort(-x):
        text = shorten(names[n], 10)
        wide, tall = 0.62 * _LABEL_SIZE * len(text), 1.05 * _LABEL_SIZE
        px, py = at[n]
        for left, low in (
            (px + 5, py - tall / 2),
            (px - 5 - wide, py - tall / 2),
            (px - wide / 2, py + max(bars[n], 3.5) + 2),
            (px - wide / 2, py - max(bars[n], 3.5) - 2 - tall),
        ):
            box = (left, low, left + wide, low + tall)
            inside = box[0] >= x0 and box[1] >= y0 and box[2] <= x1 and box[3] <= y1
            if inside and not any(
                box[0] < other[2] and other[0] < box[2] and box[1] < other[3] and other[1] < box[3]
                for other in taken
            ):
                taken.append(box)
                labels.append(
                    ax.annotate(
                        text,
                        (x[n], y[n]),
                        xytext=(left - px, low - py),
                        textcoords="offset points",
                        fontsize=_LABEL_SIZE,
                        color=INK,
                        va="bottom",
                        zorder=5,
                    )
                )
                break
    return tuple(labels)


def draw_break(ax: Axes, reduction: Reduction, number: int, *, display: Display = SI_DISPLAY) -> BreakArtists:
    """Draw the energy heads of all runs about an unlisted loss or a change of slope, the line from upstream taken out.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``ailments``, ``break_heads`` and ``runs`` are read.
    number : int
        Which of the breaks, as in ``break_heads``.
    display : Display
        Units of the axes.

    Returns
    -------
    BreakArtists
        Over the velocity head for a loss, over the friction slope for a change of slope: so that all runs agree.
    """
    row = [one for one in records(reduction.ailments) if one["what"] == "line"][number]
    heads = reduction.break_heads[(reduction.break_heads["number"] == number).to_numpy(bool)]
    of_step, gradual = (row["ailment"] == words for words in ("unlisted loss", "gradual change of slope"))
    along = display.factor("chainage")
    scale = 1.0 if of_step else display.factor("length")
    x = heads["chainage"].to_numpy(float) * along
    y, fitted = (heads[name].to_numpy(float, na_value=np.nan) * scale for name in ("departure", "fitted"))
    used = heads["used"].fillna(False).to_numpy(bool)
    flow = dict(zip(reduction.runs["run"], reduction.runs["flow"].to_numpy(float), strict=True))
    flows = np.array([flow[run] for run in heads["run"]])
    quick = flows >= np.median(list({run: flow[run] for run in heads["run"]}.values()))

    place = ax.axvspan(
        row["start"] * along,
        row["end"] * along,
        color=COLOURS["orange"],
        alpha=0.08 if gradual else 0.22,
        linewidth=0,
        zorder=0.9,
        label="changes along here" if gradual else "holds the place (95 %)",
    )
    low, high = _limits(np.concatenate([y[used & quick], fitted, np.zeros(1)]))
    ax.set_ylim(low, high)
    ax.axhline(0, color=MUTED, linewidth=0.9, zorder=1.5)

    def marks(mine: npt.NDArray[np.bool_], words: str, **look: Any) -> Line2D | None:
        mine = mine & (y >= low) & (y <= high)
        if not mine.any():
            return None
        (drawn,) = ax.plot(x[mine], y[mine], linestyle="none", label=words, **look)
        return drawn

    slow = marks(
        used & ~quick,
        "slower half of the runs",
        marker="s",
        color=COLOURS["sky blue"],
        markersize=3.6,
        zorder=2.6,
    )
    fast = marks(
        used & quick, "faster half of the runs", marker="o", color=COLOURS["blue"], markersize=4.6, zorder=3
    )
    left_out = marks(
        ~used, "left out", marker="o", color=INK, markerfacecolor="white", markersize=4.6, zorder=2.8
    )
    (line,) = ax.plot(
        *_median_line(x, fitted, (row["start"] + row["end"]) / 2 * along, str(row["ailment"])),
        color=COLOURS["vermilion"],
        linewidth=1.5,
        zorder=2.2,
        label=_break_words(row),
    )
    ax.set_xlabel(display.head("chainage x", "chainage"))
    over = "V²/2g" if of_step else "S"
    head = f"energy head over {over}"
    words = head if of_step else display.head(head, "length")
    # Two lines beside wide tick labels.
    ax.set_ylabel(f"{words},\n{'mean' if gradual else 'upstream'} line taken out", labelpad=2, fontsize=9)
    handles = [one for one in (fast, slow, left_out, line, place) if one is not None]
    return BreakArtists(fast, slow, left_out, line, place, legend_above(ax, handles, columns=3))


def _median_line(x: _Array, fitted: _Array, middle: float, ailment: str) -> tuple[_Array, _Array]:
    """The median of the fitted lines over the runs: places and heights, bent at the middle of the gap."""
    places = np.unique(x)
    heights = np.array([np.nanmedian(fitted[x == place]) for place in places])
    if ailment == "gradual change of slope":
        # The slope changes evenly along the reach: a parabola.
        fine = np.linspace(places[0], places[-1], 80)
        return fine, np.asarray(np.polyval(np.polyfit(places, heights, 2), fine), float)
    before, after = places < middle, places >= middle
    slope, level = 0.0, float(heights[after].mean())
    if after.sum() > 1:
        slope, level = np.polyfit(places[after] - middle, heights[after], 1)
    up = np.concatenate([places[before], [middle]])
    down = np.concatenate([[middle], places[after]])
    return np.concatenate([up, down]), np.concatenate([np.zeros(len(up)), level + slope * (down - middle)])


def _break_words(row: dict[str, Any]) -> str:
    if row["ailment"] == "unlisted loss":
        return f"loss fitted, K = {rounded(row['loss_coefficient'], row['loss_coefficient_u'])}"
    change = row["slope_change"]
    way = "steeper" if known(change) and change > 0 else "flatter"
    where = "at the end" if row["ailment"] == "gradual change of slope" else "downstream"
    return f"fitted, {format_change(abs(change))} {way} {where}"
