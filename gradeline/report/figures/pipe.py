"""The pipe with its taps and fittings."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.collections import PathCollection
from matplotlib.lines import Line2D
from matplotlib.text import Text

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import COLOURS, INK, rows_for_labels, short_names, shorten

__all__ = ["Array", "PipeArtists", "column", "draw_pipe", "of_run"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class PipeArtists:
    """What `draw_pipe` drew.

    Parameters
    ----------
    axis, crown : Line2D
        Elevation of the pipe's axis and of its crown.
    taps : Line2D
        A mark for each tap on the axis.
    fittings : PathCollection or None
        A mark for each fitting.
    names : tuple of Text
        Names of taps and fittings.
    name_rows : int
        In how many rows the names of the taps stand.
    """

    axis: Line2D
    crown: Line2D
    taps: Line2D
    fittings: PathCollection | None
    names: tuple[Text, ...]
    name_rows: int


def of_run(table: pd.DataFrame, run: str) -> pd.DataFrame:
    """Return the rows of a table that belong to a run."""
    return table[(table["run"] == run).to_numpy(bool)]


def column(table: pd.DataFrame, name: str) -> Array:
    """Return a column of numbers, NaN where missing."""
    return table[name].to_numpy(float, na_value=np.nan)


def draw_pipe(
    ax: Axes, reduction: Reduction, run: str | None = None, *, display: Display = SI_DISPLAY
) -> PipeArtists:
    """Draw the pipe's axis and crown with its taps and fittings, chainage to the right.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``layout`` and ``grade_lines`` are read.
    run : str or None
        The run whose places along the line are taken; the first that has any where None.
    display : Display
        Units of the axes.

    Returns
    -------
    PipeArtists
    """
    scale, along = display.factor("elevation"), display.factor("chainage")
    lines = reduction.grade_lines
    known = set(lines["run"])
    if known:
        # a static run has no grade line of its own; the pipe is the same
        lines = of_run(lines, run if run is not None and run in known else str(lines["run"].iloc[0]))
    layout = reduction.layout
    what = layout["what"].to_numpy(object)
    taps, fittings = layout[what == "tap"], layout[(what == "fitting") | (what == "change of bore")]
    # without a level the lines hold no elevation: the axis is then drawn from tap to tap
    along_lines = len(lines) > 0 and bool(np.isfinite(column(lines, "elevation")).any())
    source = lines if along_lines else taps
    places = column(source, "chainage") * along
    level = column(source, "elevation") * scale
    top = column(source, "crown") * scale if along_lines else level
    (axis,) = ax.plot(
        places,
        level,
        color="#8a949c",
        linewidth=2.6,
        solid_capstyle="butt",
        label="pipe, with its crown",
        zorder=2,
    )
    (crown,) = ax.plot(places, top, color="#8a949c", linewidth=0.8, label="_crown", zorder=2)
    at, high = column(taps, "chainage") * along, column(taps, "elevation") * scale
    (marks,) = ax.plot(at, high, "|", color=INK, markersize=7, markeredgewidth=1.3, zorder=3, label="_taps")

    limits = ax.get_xlim()
    width = ax.bbox.width * 72 / ax.figure.dpi
    size = 8.0
    names: list[Text] = []
    labels = short_names(taps["name"].tolist(), 10)
    rows = rows_for_labels(at, labels, width=width, low=limits[0], high=limits[1], size=size, rows=2)
    for place, elevation, label, row in zip(at, high, labels, rows, strict=True):
        if row is not None and np.isfinite(elevation):
            names.append(
                ax.annotate(
                    label,
                    (place, elevation),
                    xytext=(0, -6 - 11 * row),
                    textcoords="offset points",
                    ha="center",
                    va="top",
                    fontsize=size,
                    color=INK,
                )
            )
    drawn: PathCollection | None = None
    if len(fittings):
        at, high = column(fittings, "chainage") * along, column(fittings, "elevation") * scale
        drawn = ax.scatter(
            at,
            high,
            marker="X",
            s=52,
            color=COLOURS["orange"],
            edgecolor=INK,
            linewidth=0.7,
            zorder=4,
            label="fitting",
        )
        bore = (fittings["note"] == "change of bore").to_numpy(bool) | (
            fittings["what"] != "fitting"
        ).to_numpy(bool)
        for place, elevation, name, change in zip(at, high, fittings["name"], bore, strict=True):
            names.append(
                ax.annotate(
                    "change of bore" if change else shorten(name, 24),
                    (place, elevation),
                    xytext=(0, 7),
                    textcoords="offset points",
                    ha="center",
                    va="bottom",
                    fontsize=size,
                    color=INK,
                    bbox={
                        "boxstyle": "square,pad=0.1",
                        "facecolor": "white",
                        "edgecolor": "none",
                        "alpha": 0.8,
                    },
                )
            )
    return PipeArtists(
        axis, crown, marks, drawn, tuple(names), 1 + max((row or 0 for row in rows), default=0)
    )
