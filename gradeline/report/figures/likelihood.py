"""The likelihood of a wall's roughness, with its interval and upper bound."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.lines import Line2D

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import COLOURS, INK, MUTED, legend_above
from gradeline.report.printed import percent

__all__ = ["LikelihoodArtists", "draw_likelihood", "drawn_walls"]

#: Room above the curve for a line of words.
_TOP = 1.2


@dataclass(frozen=True)
class LikelihoodArtists:
    """What `draw_likelihood` drew.

    Parameters
    ----------
    curve : Line2D
        exp(−Δχ²/2) against ε.
    interval : PolyCollection
        The area under it within the interval.
    best : Line2D
        The estimate.
    level : Line2D
        The height at which the interval is cut.
    bound : Line2D
        The one-sided 95 % upper bound.
    smooth : Line2D or None
        ε⁺ = 5 at the fastest run, where it lies within the axis.
    legend_rows : int
        Rows of the legend above the axes.
    """

    curve: Line2D
    interval: PolyCollection
    best: Line2D
    level: Line2D
    bound: Line2D
    smooth: Line2D | None
    legend_rows: int


def drawn_walls(reduction: Reduction) -> list[str]:
    """Return the walls that have a likelihood, and so a figure."""
    return [str(name) for name in dict.fromkeys(reduction.likelihood["wall"])]


def draw_likelihood(
    ax: Axes, reduction: Reduction, wall: str, *, display: Display = SI_DISPLAY
) -> LikelihoodArtists:
    """Draw the likelihood of the roughness of a wall.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``likelihood`` and ``walls`` are read.
    wall : str
        Which one.
    display : Display
        Units of the axis.

    Returns
    -------
    LikelihoodArtists
    """
    table = reduction.likelihood[(reduction.likelihood["wall"] == wall).to_numpy(bool)]
    row = reduction.walls[(reduction.walls["wall"] == wall).to_numpy(bool)].iloc[0]
    factor = display.factor("roughness")
    x = table["roughness"].to_numpy(float) * factor
    y = np.exp(-table["chi_square_rise"].to_numpy(float) / 2.0)
    ends = float(row["roughness_low"]) * factor, float(row["roughness_high"]) * factor
    inside = (x >= ends[0] * (1 - 1e-9)) & (x <= ends[1] * (1 + 1e-9))
    interval = ax.fill_between(
        x[inside],
        0.0,
        y[inside],
        color=COLOURS["sky blue"],
        alpha=0.45,
        linewidth=0,
        zorder=1,
        label=f"{percent(reduction.level)} interval",
    )
    (curve,) = ax.plot(x, y, color=COLOURS["blue"], linewidth=1.6, zorder=3, label="likelihood of ε")
    (best,) = ax.plot(
        [float(row["roughness"]) * factor],
        [1.0],
        "o",
        color=COLOURS["blue"],
        markersize=5,
        zorder=4,
        label="best estimate",
        clip_on=False,
    )
    height = math.exp(-float(table["interval_rise"].iloc[0]) / 2.0)
    level = ax.axhline(
        height, color=MUTED, linewidth=0.9, linestyle=(0, (1.5, 1.5)), zorder=2, label="cut of the interval"
    )
    bound = ax.axvline(
        float(row["roughness_upper95"]) * factor,
        ymax=1.03 / _TOP,
        color=COLOURS["vermilion"],
        linewidth=1.2,
        linestyle=(0, (5, 2)),
        zorder=2.5,
        label="95 % upper bound, one-sided",
    )
    low, high = float(x.min()), float(x.max())
    limit = float(table["smooth_limit"].iloc[0]) * factor
    smooth = None
    if low < limit < high:
        smooth = ax.axvline(
            limit,
            ymax=1.03 / _TOP,
            color=INK,
            linewidth=1.1,
            linestyle=(0, (4, 1.5, 1, 1.5)),
            zorder=2.5,
            label="ε⁺ = 5 (sand grains smooth below)",
        )
    else:
        side, words = ("right", "smooth by the sand-grain criterion throughout: ε⁺ = 5 at")
        if limit <= low:
            side, words = "left", "ε⁺ = 5 lies to the left, at"
        ax.text(
            0.985 if side == "right" else 0.015,
            0.975,
            f"{words} {display.text('roughness', limit / factor, digits=2, unit=True)}",
            transform=ax.transAxes,
            ha=side,
            va="top",
            fontsize=8.5,
            color=MUTED,
        )
    ax.set_xlim(low, high)
    ax.set_ylim(0, _TOP)
    ax.set_yticks([0, 0.25, 0.5, 0.75, 1.0])
    ax.set_xlabel(display.head("roughness ε", "roughness"))
    ax.set_ylabel("relative likelihood")
    handles: list[Artist] = [curve, best, interval, level, bound, *([smooth] if smooth is not None else [])]
    return LikelihoodArtists(
        curve, interval, best, level, bound, smooth, legend_above(ax, handles, columns=3)
    )
