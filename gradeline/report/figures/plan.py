"""What a plan expects, drawn: the grade lines of all runs on the board, and deflections on their scales."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.collections import FillBetweenPolyCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.text import Annotation

from gradeline.planning.tables import Plan
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.report.figures.end_labels import label_left_ends
from gradeline.report.figures.render import png_of, svg_of
from gradeline.report.figures.style import COLOURS, INK, MUTED, REACH_COLOURS, legend_above, shorten, styled

__all__ = [
    "DeflectionArtists",
    "ExpectedArtists",
    "draw_deflections",
    "draw_expected_lines",
    "plan_figures",
    "plan_pictures",
]

_MARKERS = ("o", "s", "D", "^", "v", "P", "X")
_DPI = 150


@dataclass(frozen=True)
class ExpectedArtists:
    """What `draw_expected_lines` drew.

    Parameters
    ----------
    lines : dict of str to Line2D
        Expected piezometric head against chainage, by run.
    read, unread : Line2D or None
        Columns that can be read, and those beyond their scale, at the heads of their taps.
    boards : tuple of FillBetweenPolyCollection
        What each board can show.
    crown : Line2D or None
        The pipe's crown.
    labels : tuple of Annotation
        The flow beside a line's end.
    """

    lines: dict[str, Line2D]
    read: Line2D | None
    unread: Line2D | None
    boards: tuple[FillBetweenPolyCollection, ...]
    crown: Line2D | None
    labels: tuple[Annotation, ...]


@dataclass(frozen=True)
class DeflectionArtists:
    """What `draw_deflections` drew: readings against the flow by gauge, and the ends of their scales."""

    lines: dict[str, Line2D]
    ends: tuple[Line2D, ...]


def draw_expected_lines(ax: Axes, plan: Plan, *, display: Display = SI_DISPLAY) -> ExpectedArtists:
    """Draw the expected hydraulic grade line of every run, with what the boards can show.

    Parameters
    ----------
    ax : Axes
        Where.
    plan : Plan
        What was planned.
    display : Display
        Units of the reader.

    Returns
    -------
    ExpectedArtists
        Of gauges between two taps nothing is marked: `draw_deflections` has them.
    """
    along, up = display.factor("chainage"), display.factor("head")
    boards = []
    for board in plan.boards.to_dict("records"):
        ends = np.array([board["first"], board["last"]]) * along
        boards.append(
            ax.fill_between(
                ends,
                board["head_low"] * up,
                board["head_high"] * up,
                facecolor=COLOURS["sky blue"],
                alpha=0.16,
                edgecolor=COLOURS["blue"],
                linewidth=0.8,
                linestyle=(0, (4, 3)),
                zorder=0.5,
            )
        )
    lines: dict[str, Line2D] = {}
    flow = dict(zip(plan.levels["run"], plan.levels["flow"], strict=True))
    for run, part in plan.grade_lines.groupby("run", sort=False):
        x, y = part["chainage"].to_numpy(float) * along, part["piezometric_head"].to_numpy(float) * up
        (lines[str(run)],) = ax.plot(x, y, color=COLOURS["blue"], linewidth=1.2, zorder=2)
    crown = None
    if len(plan.grade_lines):
        first = plan.grade_lines[plan.grade_lines["run"] == plan.grade_lines["run"].iloc[0]]
        (crown,) = ax.plot(
            first["chainage"].to_numpy(float) * along,
            first["crown"].to_numpy(float) * up,
            color=MUTED,
            linewidth=1.4,
            linestyle=(0, (1, 1.5)),
            zorder=1,
        )
    single = plan.columns[plan.columns["tap_2"].isna().to_numpy(bool)]
    out = (single["on_scale"].fillna(value=True) == False).to_numpy(bool)  # noqa: E712 (a nullable column)
    read = _marks(ax, single[~out], along, up, filled=True)
    unread = _marks(ax, single[out], along, up, filled=False)
    labels = _flow_labels(ax, lines, flow, display)
    ax.set_xlabel(display.head("chainage x", "chainage"))
    ax.set_ylabel(display.head("piezometric head h", "head"))
    handles: list[object] = [
        Line2D([], [], color=COLOURS["blue"], linewidth=1.2, label="HGL of each run, expected"),
    ]
    if read is not None:
        handles.append(read)
    if unread is not None:
        handles.append(unread)
    if boards:
        handles.append(
            Patch(
                facecolor=COLOURS["sky blue"],
                alpha=0.3,
                edgecolor=COLOURS["blue"],
                label="what its gauge can show",
            )
        )
    if crown is not None:
        handles.append(
            Line2D([], [], color=MUTED, linewidth=1.4, linestyle=(0, (1, 1.5)), label="crown of the pipe")
        )
    legend_above(ax, handles)
    return ExpectedArtists(lines, read, unread, tuple(boards), crown, labels)


def _marks(ax: Axes, columns: pd.DataFrame, along: float, up: float, *, filled: bool) -> Line2D | None:
    if not len(columns):
        return None
    (marks,) = ax.plot(
        columns["chainage"].to_numpy(float) * along,
        columns["head"].to_numpy(float) * up,
        linestyle="none",
        marker="o" if filled else "x",
        markersize=4.5 if filled else 6,
        color=COLOURS["blue"] if filled else COLOURS["vermilion"],
        label="column that can be read" if filled else "beyond the scale",
        zorder=3,
    )
    return marks


def _flow_labels(
    ax: Axes, lines: dict[str, Line2D], flow: dict[str, float], display: Display
) -> tuple[Annotation, ...]:
    """The flow at the upstream end of each line, where the lines lie furthest apart."""
    drawn = {
        run: line
        for run, line in lines.items()
        if len(np.asarray(line.get_ydata())) and math.isfinite(float(np.asarray(line.get_ydata())[0]))
    }
    named: dict[str, Line2D] = {}
    for run, line in drawn.items():  # two runs of one flow share a label
        named.setdefault(display.text("flow", flow[run], digits=3, unit=True), line)
    return label_left_ends(ax, list(named.values()), list(named))


def draw_deflections(ax: Axes, plan: Plan, *, display: Display = SI_DISPLAY) -> DeflectionArtists:
    """Draw the expected readings of gauges between two taps against the flow, with the ends of their scales.

    Parameters
    ----------
    ax : Axes
        Where; both axes linear.
    plan : Plan
        What was planned; its gauges between two taps read one dimension.
    display : Display
        Units of the reader.

    Returns
    -------
    DeflectionArtists
        By gauge; those that show the same share a line.
    """
    pairs = plan.columns[plan.columns["tap_2"].notna().to_numpy(bool)]
    quantity = "small head" if (pairs["reading_unit"] == "m").all() else "pressure"
    scale, along = display.factor(quantity), display.factor("flow")
    lines: dict[str, Line2D] = {}
    highest = float(np.nanmax(pairs["high"].to_numpy(float), initial=0.0))
    ends: list[Line2D] = []
    for place, gauges in enumerate(_alike(pairs)):
        ordered = pairs[(pairs["gauge"] == gauges[0]).to_numpy(bool)].sort_values("flow")
        colour, name = REACH_COLOURS[place % len(REACH_COLOURS)], ", ".join(gauges)
        (lines[name],) = ax.plot(
            ordered["flow"].to_numpy(float) * along,
            ordered["reading"].to_numpy(float) * scale,
            marker=_MARKERS[place % len(_MARKERS)],
            markersize=5,
            linewidth=1.1,
            color=colour,
            label=shorten(name, 40),
        )
        end = float(ordered["high"].iloc[0])
        if math.isfinite(end):
            ends.append(
                ax.axhline(
                    end * scale,
                    color=colour,
                    linewidth=1.0,
                    linestyle=(0, (4, 3)),
                    label=f"end of the scale of {shorten(name, 40)}",
                )
            )
    if highest > 0:
        # What lies far beyond every scale is told by its line leaving the picture.
        ax.set_ylim(-0.05 * highest * scale, 1.4 * highest * scale)
    ax.set_xlabel(display.head("flow Q", "flow"))
    ax.set_ylabel(display.head("deflection" if quantity == "small head" else "difference", quantity))
    legend_above(ax, [*lines.values(), *ends])
    return DeflectionArtists(lines, tuple(ends))


def _alike(pairs: pd.DataFrame) -> list[list[str]]:
    """Gauges in groups that show the same, within a hundredth, on scales of one length."""
    groups: list[tuple[np.ndarray, float, list[str]]] = []
    for gauge, part in pairs.groupby("gauge", sort=False):
        reading, end = part["reading"].to_numpy(float), float(part["high"].iloc[0])
        for other, its_end, names in groups:
            if np.allclose(reading, other, rtol=0.01, atol=1e-9) and (end == its_end or math.isnan(end)):
                names.append(str(gauge))
                break
        else:
            groups.append((reading, end, [str(gauge)]))
    return [names for _, _, names in groups]


def plan_figures(plan: Plan, *, display: Display = SI_DISPLAY) -> dict[str, Figure]:
    """Return the figures of a plan by the name of their file: grade lines, and deflections where gauges read between taps."""
    found: dict[str, Figure] = {}
    pairs = bool(plan.columns["tap_2"].notna().any())
    with styled():
        figure = Figure(figsize=(8.0, 4.6), layout="constrained")
        _title(figure, plan, "expected grade lines")
        draw_expected_lines(figure.add_subplot(), plan, display=display)
        found["expected_grade_lines"] = figure
        if pairs:
            figure = Figure(figsize=(8.0, 4.2), layout="constrained")
            _title(figure, plan, "expected deflections")
            draw_deflections(figure.add_subplot(), plan, display=display)
            found["expected_deflections"] = figure
    return found


def _title(figure: Figure, plan: Plan, words: str) -> None:
    figure.suptitle(
        f"{shorten(plan.title, 50)}: {words}", x=0.02, ha="left", fontsize=10.5, fontweight="bold", color=INK
    )


def plan_pictures(plan: Plan, *, display: Display = SI_DISPLAY) -> dict[str, tuple[bytes, bytes]]:
    """Return the figures of a plan as svg and png, by the name of their file; the same bytes for the same plan."""
    with styled(**{"svg.hashsalt": "plan"}):
        return {
            name: (svg_of(figure), png_of(figure, _DPI))
            for name, figure in plan_figures(plan, display=display).items()
        }
