"""Whole figures: axes, title and legend put together."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from gradeline.quantities.printing import Display
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.ailments import BreakArtists, TapErrorArtists
from gradeline.report.figures.differences import head_axis
from gradeline.report.figures.grade_lines import draw_grade_lines, flagged_words, pipe_fits_the_scale
from gradeline.report.figures.laws import FrictionFactorArtists, SlopeVelocityArtists
from gradeline.report.figures.likelihood import LikelihoodArtists
from gradeline.report.figures.losses import LossArtists
from gradeline.report.figures.pipe import draw_pipe
from gradeline.report.figures.reading_marks import RING
from gradeline.report.figures.residuals import ResidualArtists
from gradeline.report.figures.style import MUTED, shorten

__all__ = ["Canvases", "grade_line_figure", "sheet_figure", "single"]

#: Inches.
WIDTH = 5.6
_LEFT, _BREADTH = 0.15, 0.82


def single(
    draw: Callable[
        [Axes],
        ResidualArtists
        | FrictionFactorArtists
        | SlopeVelocityArtists
        | LossArtists
        | LikelihoodArtists
        | TapErrorArtists
        | BreakArtists,
    ],
    title: str,
    *,
    height: float = 4.0,
    below: float = 0.54,
) -> Figure:
    """Return a figure of one pair of axes, `below` inches above its lower edge, under a title and a legend."""
    figure = Figure(figsize=(WIDTH, height))
    bottom = below / height
    ax = figure.add_axes((_LEFT, bottom, _BREADTH, 0.9 - bottom))
    drawn = draw(ax)
    if any(label.get_rotation() == 90 for label in ax.get_xticklabels()):  # long names need room below
        bottom += 0.6 / height
        ax.set_position((_LEFT, bottom, _BREADTH, 0.9 - bottom))
    _head(figure, ax, title, drawn.legend_rows if not isinstance(drawn, SlopeVelocityArtists) else 0)
    if isinstance(drawn, ResidualArtists) and drawn.beyond:
        figure.text(
            0.985,
            1 - 0.085 / height,
            "a mark at the edge lies beyond the axis",
            fontsize=8.5,
            color=MUTED,
            ha="right",
            va="top",
        )
    return figure


def _head(figure: Figure, ax: Axes, title: str, rows: int, note: str = "") -> None:
    """Write the title at the top, a note under it, and lower the axes until their legend has room under both."""
    inches = float(figure.get_figheight())
    figure.text(0.012, 1 - 0.07 / inches, title, fontsize=10.5, fontweight="bold", va="top")
    if note:
        figure.text(0.012, 1 - 0.27 / inches, note, fontsize=8.5, color=RING, va="top")
    left, bottom, width, _ = ax.get_position().bounds
    taken = (0.54 if note else 0.36) + 0.178 * rows
    ax.set_position((left, bottom, width, 1 - taken / inches - bottom))


class Canvases:
    """Figures with their axes, used again for the next run: making axes and ticks costs as much as drawing them."""

    def __init__(self) -> None:
        self._made: dict[bool, Figure] = {}

    def blank(self, *, with_pipe: bool, limits: tuple[float, float]) -> Figure:
        """Return an empty figure with one pair of axes, or two where the pipe has its own."""
        height = 4.2 if with_pipe else 4.3
        figure = self._made.get(with_pipe)
        if figure is None:
            figure = self._made[with_pipe] = Figure(figsize=(WIDTH, height))
            figure.add_axes((0, 0, 1, 1))
            if not with_pipe:
                figure.add_axes((_LEFT, 0.52 / height, _BREADTH, 0.78 / height))
        figure.set_dpi(100)
        for text in list(figure.texts):
            text.remove()
        for ax in figure.axes:
            legend = ax.get_legend()
            if legend is not None:
                legend.remove()
            for artist in [*ax.lines, *ax.collections, *ax.texts, *ax.patches]:
                artist.remove()
            ax.relim()
            ax.set_autoscaley_on(True)
            ax.set_xlim(limits)
        figure.axes[0].set_position((_LEFT, (0.54 if with_pipe else 1.42) / height, _BREADTH, 0.5))
        return figure


def grade_line_figure(
    reduction: Reduction, run: str, title: str, display: Display, blanks: Canvases
) -> Figure:
    """Return the grade lines of a run with the pipe below them, on the same axes where the scales agree."""
    with_pipe = pipe_fits_the_scale(reduction, run)
    figure = blanks.blank(with_pipe=with_pipe, limits=_chainage_limits(reduction, display))
    ax = figure.axes[0]
    drawn = draw_grade_lines(ax, reduction, run, with_pipe=with_pipe, display=display)
    _head(figure, ax, title, drawn.legend_rows, flagged_words(reduction, run))
    if with_pipe:
        return figure
    ax.set_xlabel("")
    ax.tick_params(axis="x", labelbottom=False)
    below = figure.axes[1]
    pipe = draw_pipe(below, reduction, run, display=display)
    low, high = below.get_ylim()
    span = max(high - low, 1e-3 * display.factor("elevation"))
    below.set_ylim(low - (1.05 if pipe.name_rows < 2 else 1.6) * span, high + 0.55 * span)
    below.grid(visible=False, axis="y")
    below.locator_params(axis="y", nbins=2)
    below.set_xlabel(display.head("chainage x", "chainage"))
    below.set_ylabel(display.head("pipe's\naxis", "elevation"))
    ends = np.asarray(pipe.crown.get_xydata(), float)
    rise = np.asarray(pipe.crown.get_ydata(), float) - np.asarray(pipe.axis.get_ydata(), float)
    if len(ends) and np.isfinite(ends[-1]).all() and rise[-1] > 0.2 * span:
        below.annotate(
            "crown",
            tuple(ends[-1]),
            xytext=(0, 1),
            textcoords="offset points",
            ha="right",
            va="bottom",
            fontsize=7.5,
            color=MUTED,
        )
    return figure


def _chainage_limits(reduction: Reduction, display: Display) -> tuple[float, float]:
    x = np.concatenate(
        [
            table["chainage"].to_numpy(float, na_value=np.nan)
            for table in (reduction.grade_lines, reduction.layout)
        ]
    )
    x = x[np.isfinite(x)] * display.factor("chainage")
    if not x.size:
        return 0.0, 1.0
    room = 0.03 * (x.max() - x.min()) or 1.0
    return float(x.min() - room), float(x.max() + room)


def sheet_figure(reduction: Reduction, runs: list[str], display: Display) -> Figure:
    """Return the grade lines of several runs as panels, three a row."""
    rows = -(-len(runs) // 3)
    figure = Figure(figsize=(WIDTH, 0.55 + 1.5 * rows))
    axes = figure.subplots(rows, 3, squeeze=False)
    figure.subplots_adjust(
        left=0.105,
        right=0.985,
        top=1 - 0.52 / (0.55 + 1.5 * rows),
        bottom=0.5 / (0.55 + 1.5 * rows),
        hspace=0.62,
        wspace=0.34,
    )
    limits = _chainage_limits(reduction, display)
    named: dict[str, Artist] = {}
    for n, ax in enumerate(axes.flat):
        if n >= len(runs):
            ax.set_visible(False)
            continue
        ax.set_xlim(limits)
        drawn = draw_grade_lines(ax, reduction, runs[n], small=True, display=display)
        for artist in (
            drawn.band,
            drawn.hgl,
            drawn.egl,
            drawn.used,
            drawn.falls,
            drawn.left_out,
            drawn.flagged,
        ):
            if artist is not None:
                named.setdefault(str(artist.get_label()), artist)
        flow = reduction.runs["flow"][(reduction.runs["run"] == runs[n]).to_numpy(bool)].iloc[0]
        ax.set_title(
            f"{shorten(runs[n], 12)} · {display.text('flow', flow, digits=3, unit=True)}"
            f"{', flagged' if flagged_words(reduction, runs[n]) else ''}",
            fontsize=8.5,
            pad=3,
        )
        ax.tick_params(labelsize=7.5, length=2.5)
        ax.locator_params(axis="x", nbins=4)
        ax.locator_params(axis="y", nbins=3)
    if named:
        figure.legend(
            handles=list(named.values()),
            loc="upper left",
            bbox_to_anchor=(0.09, 1.0),
            ncols=6,
            borderaxespad=0.3,
            handletextpad=0.5,
            columnspacing=1.2,
            handlelength=1.7,
        )
    figure.text(
        0.55,
        0.1 / (0.55 + 1.5 * rows),
        display.head("chainage x", "chainage"),
        ha="center",
        va="bottom",
        fontsize=9,
    )
    figure.text(0.012, 0.5, head_axis(reduction, display), rotation=90, va="center", fontsize=9)
    return figure
