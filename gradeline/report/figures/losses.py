"""The loss coefficient of a fitting against the Reynolds number."""

from __future__ import annotations

import math
from dataclasses import dataclass
from statistics import NormalDist
from typing import Any

import numpy as np
import numpy.typing as npt
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.container import ErrorbarContainer
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon, Rectangle

from gradeline.quantities.printing import format_number, rounded
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import COLOURS, INK, MUTED, legend_above, log_ticks
from gradeline.report.printed import known, percent, records

__all__ = ["LossArtists", "draw_loss_coefficient", "drawn_losses"]

_Array = npt.NDArray[np.float64]
_ERRORBARS = 400
#: Room above and below what is drawn, as a share of its height.
_ROOM = 0.12


@dataclass(frozen=True)
class LossArtists:
    """What `draw_loss_coefficient` drew.

    Parameters
    ----------
    used : ErrorbarContainer or None
        Runs that entered the mean, with their intervals.
    left_out : Line2D or None
        Runs that did not.
    mean : Line2D or None
        K over all runs.
    band : Rectangle or Polygon or None
        Its interval.
    published : Line2D or None
        The published K of the fitting's kind.
    published_band : PolyCollection or None
        By how much handbooks and makes differ, hatched.
    trend : Line2D or None
        The trend over Re, where K depends on Re.
    legend_rows : int
        Rows of the legend above the axes.
    """

    used: ErrorbarContainer | None
    left_out: Line2D | None
    mean: Line2D | None
    band: Rectangle | Polygon | None
    published: Line2D | None
    published_band: PolyCollection | None
    trend: Line2D | None
    legend_rows: int


def drawn_losses(reduction: Reduction) -> list[str]:
    """Return the fittings that have a K over all runs, and so a figure."""
    there = reduction.losses["runs_used"].to_numpy(float, na_value=0.0) > 0
    return [str(name) for name in reduction.losses["fitting"][there]]


def draw_loss_coefficient(ax: Axes, reduction: Reduction, fitting: str) -> LossArtists:
    """Draw K of each run against its Reynolds number, with the mean over all runs and the published value.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``fittings``, ``losses`` and ``loss_runs`` are read.
    fitting : str
        Which fitted loss.

    Returns
    -------
    LossArtists
        Bars are intervals at the reduction's level with the normal distribution, shared errors included.
    """
    runs = reduction.loss_runs[(reduction.loss_runs["fitting"] == fitting).to_numpy(bool)]
    reynolds, value, u = (
        runs[name].to_numpy(float, na_value=np.nan)
        for name in ("reynolds", "loss_coefficient", "loss_coefficient_u")
    )
    half = NormalDist().inv_cdf((1 + reduction.level) / 2) * np.nan_to_num(u)
    used = runs["used"].fillna(False).to_numpy(bool) & np.isfinite(value)
    rest = ~used & np.isfinite(value)
    row = next(one for one in records(reduction.fittings) if one["fitting"] == fitting)
    beside = next(one for one in records(reduction.losses) if one["fitting"] == fitting)
    level = percent(reduction.level)

    mean = band = trend = left_out = marks = None
    heights: list[_Array] = [value[used] - half[used], value[used] + half[used]]
    seen = reynolds[used | rest]
    low, high = (float(seen.min()) / 1.15, float(seen.max()) * 1.15) if seen.size else (1e4, 1e5)
    log_ticks(ax, "x", low, high)
    if known(row["loss_coefficient"]):
        mean = ax.axhline(
            row["loss_coefficient"],
            color=COLOURS["blue"],
            linewidth=1.5,
            zorder=2,
            label=f"K = {rounded(row['loss_coefficient'], row['loss_coefficient_u'])}",
        )
        heights.append(np.array([row["loss_coefficient"]]))
    if known(row["loss_coefficient_low"]) and known(row["loss_coefficient_high"]):
        band = ax.axhspan(
            row["loss_coefficient_low"],
            row["loss_coefficient_high"],
            color=COLOURS["blue"],
            alpha=0.16,
            linewidth=0,
            zorder=1,
            label=f"its {level} interval",
        )
        heights.append(np.array([row["loss_coefficient_low"], row["loss_coefficient_high"]]))
    if used.any():
        marks = ax.errorbar(
            reynolds[used],
            value[used],
            yerr=half[used] if used.sum() <= _ERRORBARS else None,
            fmt="o",
            color=COLOURS["blue"],
            ecolor=INK,
            elinewidth=0.9,
            capsize=2.2,
            markersize=5,
            linestyle="none",
            zorder=3,
            label="run",
            rasterized=bool(used.sum() > 1500),
        )
    published, published_band = _published(ax, beside, low, high)
    if published is not None:
        heights.append(np.array([beside["published_low"], beside["published_high"]]))
    if beside["depends_on_reynolds"] and known(row["loss_coefficient"]):
        at = np.array([reynolds[used].min(), reynolds[used].max()])
        (trend,) = ax.plot(
            at,
            row["loss_coefficient"] + beside["trend"] * (np.log10(at) - math.log10(beside["reynolds"])),
            color=INK,
            linewidth=1.2,
            linestyle=(0, (1.5, 1.5)),
            zorder=2.4,
            label=f"trend, {rounded(beside['trend'], beside['trend_u'])} per decade",
        )
    bottom, top = _limits(np.concatenate(heights))
    inside = rest & (value >= bottom) & (value <= top)
    if rest.any():
        # One that lies beyond the axis stands at its edge.
        (left_out,) = ax.plot(
            reynolds[rest],
            np.clip(value[rest], bottom, top),
            "o",
            markersize=5,
            markerfacecolor="white",
            markeredgecolor=MUTED,
            markeredgewidth=1.2,
            clip_on=bool(inside.sum() == rest.sum()),
            zorder=2.8,
            label="run left out",
        )
    ax.set_ylim(bottom, top)
    ax.set_xlabel("Reynolds number Re")
    ax.set_ylabel("loss coefficient K")
    handles: list[Artist] = []
    if marks is not None:
        point = marks.lines[0]
        assert isinstance(point, Line2D)
        point.set_label("run")
        handles.append(point)
    handles += [one for one in (left_out, mean, band, trend, published, published_band) if one is not None]
    if not seen.size:
        ax.text(0.5, 0.5, "no run has a loss coefficient", transform=ax.transAxes, ha="center", color=MUTED)
    rows = legend_above(ax, handles, columns=4)
    return LossArtists(marks, left_out, mean, band, published, published_band, trend, rows)


def _limits(heights: _Array) -> tuple[float, float]:
    """Limits of K with room above and below."""
    kept = heights[np.isfinite(heights)]
    bottom, top = (float(kept.min()), float(kept.max())) if kept.size else (0.0, 1.0)
    room = _ROOM * (top - bottom) or 0.1 * abs(top) or 0.1
    return bottom - room, top + room


def _published(
    ax: Axes, beside: dict[str, Any], low: float, high: float
) -> tuple[Line2D | None, PolyCollection | None]:
    """The published K and by how much handbooks and makes differ, from `low` to `high` in Re."""
    if not known(beside["published"]):
        return None, None
    line = ax.axhline(
        beside["published"],
        color=COLOURS["vermilion"],
        linewidth=1.4,
        linestyle=(0, (5, 2)),
        zorder=2.2,
        label=f"published, {format_number(beside['published'], 2)}",
    )
    band = ax.fill_between(
        [low, high],
        [beside["published_low"]] * 2,
        [beside["published_high"]] * 2,
        facecolor="none",
        edgecolor=COLOURS["vermilion"],
        hatch="////",
        alpha=0.35,
        linewidth=0,
        zorder=0.8,
        label="handbooks and makes differ",
    )
    return line, band
