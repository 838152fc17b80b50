"""Figures of a comparison: roughness by date or survey with the line of ageing, and f against Re of all surveys."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from functools import partial
from statistics import NormalDist
from typing import Any

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection, PolyCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from gradeline.comparison.bores import ONE
from gradeline.comparison.tables import Comparison
from gradeline.hydraulics.friction import colebrook_white
from gradeline.quantities.printing import SI_DISPLAY, Display, thousands
from gradeline.report.figures.compose import WIDTH, _head
from gradeline.report.figures.render import Picture, _render
from gradeline.report.figures.style import (
    COLOURS,
    INK,
    MUTED,
    REACH_COLOURS,
    legend_above,
    log_ticks,
    short_names,
    shorten,
    styled,
)
from gradeline.report.printed import Row, known, percent, records

__all__ = [
    "FactorArtists",
    "RoughnessArtists",
    "comparison_pictures",
    "draw_factors",
    "draw_roughness",
]

Array = NDArray[np.float64]

#: More surveys than this are not each given a colour, nor a name beside its point.
_EACH, _NAMED = 6, 10
_MARKERS = ("o", "s", "D", "^", "v", "P")
_YEAR = 365.2425


@dataclass(frozen=True)
class RoughnessArtists:
    """What `draw_roughness` drew.

    Parameters
    ----------
    points, bounds, odd : Line2D or None
        ε of each survey; upper bounds where ε is not told from zero; rings around the odd ones.
    intervals, apart : LineCollection or None
        Whole intervals, and those without what all surveys share.
    line, beyond : Line2D or None
        The line of ageing within the surveys and past them.
    band : PolyCollection or None
        Its interval.
    legend_rows : int
        Rows of the legend.
    """

    points: Line2D | None
    bounds: Line2D | None
    odd: Line2D | None
    intervals: LineCollection | None
    apart: LineCollection | None
    line: Line2D | None
    beyond: Line2D | None
    band: PolyCollection | None
    legend_rows: int


@dataclass(frozen=True)
class FactorArtists:
    """What `draw_factors` drew.

    Parameters
    ----------
    runs : dict of str to Line2D
        Runs of each survey, by its name.
    laws : dict of str to Line2D
        The law at its roughness.
    smooth, common : Line2D
        The law of a smooth wall; the common Re.
    legend_rows : int
        Rows of the legend.
    """

    runs: dict[str, Line2D]
    laws: dict[str, Line2D]
    smooth: Line2D
    common: Line2D | None
    legend_rows: int
    handles: tuple[Artist, ...] = field(default=())


def _rows(comparison: Comparison, wall: str, table: str = "surveys") -> list[dict[str, Any]]:
    return [row for row in records(getattr(comparison, table)) if row["wall"] == wall]


def _year(date: str) -> float:
    """A date as a year with a fraction."""
    day = datetime.date.fromisoformat(date)
    start = datetime.date(day.year, 1, 1)
    return day.year + (day - start).days / _YEAR


def draw_roughness(
    ax: Axes, comparison: Comparison, wall: str, *, display: Display = SI_DISPLAY
) -> RoughnessArtists:
    """Draw the roughness of a wall by date, with the line of ageing, or by survey where they have no dates.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    comparison : Comparison
        What was compared.
    wall : str
        Which wall.
    display : Display
        Units of the axes.

    Returns
    -------
    RoughnessArtists
    """
    rows = [row for row in _rows(comparison, wall) if known(row["roughness"])]
    dated = comparison.dated and all(row["date"] for row in rows)
    factor = display.factor("roughness")
    places = [_year(row["date"]) if dated else float(n) for n, row in enumerate(rows)]
    there = list(zip(places, rows, strict=True))
    told = [(x, row) for x, row in there if row["roughness_resolved"] is not False]
    open_ = [(x, row) for x, row in there if row["roughness_resolved"] is False]
    level = percent(comparison.level)
    colour = COLOURS["blue"]
    line = beyond = points = bounds = odd = None
    band: PolyCollection | None = None
    ageing = _rows(comparison, wall, "ageing")
    if ageing and dated:
        at = np.array([_year(row["date"]) for row in ageing])
        size, low, high = (
            factor * np.array([row[f"roughness{end}"] for row in ageing], float)
            for end in ("", "_low", "_high")
        )
        band = ax.fill_between(
            at,
            low,
            high,
            color=COLOURS["orange"],
            alpha=0.22,
            linewidth=0,
            zorder=1,
            label=f"its {level} interval",
        )
        past = np.array([row["beyond_surveys"] for row in ageing], bool)
        last = max(int(np.flatnonzero(~past).max(initial=0)), 0)
        (line,) = ax.plot(
            at[: last + 1],
            size[: last + 1],
            color=COLOURS["vermilion"],
            linewidth=1.5,
            zorder=2,
            label="line of ageing",
        )
        if past.any():
            (beyond,) = ax.plot(
                at[last:],
                size[last:],
                color=COLOURS["vermilion"],
                linewidth=1.5,
                linestyle=(0, (5, 2.5)),
                zorder=2,
                label="carried on",
            )
    intervals = _bars(ax, told, factor, "roughness", 1.1, colour, f"{level} interval")
    apart = _bars(ax, told, factor, "roughness_apart", 4.0, colour, "without what all surveys share")
    if told:
        (points,) = ax.plot(
            [x for x, _ in told],
            [factor * row["roughness"] for _, row in told],
            linestyle="none",
            marker="o",
            markersize=5.5,
            color=colour,
            markeredgecolor="white",
            markeredgewidth=0.7,
            zorder=5,
            label="roughness",
        )
    bounded = [(x, row) for x, row in open_ if known(row["roughness_upper95"])]
    if bounded:
        (bounds,) = ax.plot(
            [x for x, _ in bounded],
            [factor * row["roughness_upper95"] for _, row in bounded],
            linestyle="none",
            marker="v",
            markersize=6,
            markerfacecolor="white",
            color=colour,
            zorder=5,
            label="95 % upper bound",
        )
    ringed = [(x, row) for x, row in there if row["odd"]]
    height = {
        id(row): factor * row["roughness_upper95" if row["roughness_resolved"] is False else "roughness"]
        for _, row in there
    }
    if ringed:
        (odd,) = ax.plot(
            [x for x, _ in ringed],
            [height[id(row)] for _, row in ringed],
            linestyle="none",
            marker="o",
            markersize=12,
            markerfacecolor="none",
            markeredgecolor=COLOURS["vermilion"],
            markeredgewidth=1.5,
            zorder=6,
            label="odd",
        )
    ax.set_ylim(bottom=0.0)
    ax.set_ylabel(display.head("roughness ε", "roughness"))
    tops = {
        id(row): max(
            height[id(row)], factor * (row["roughness_high"] if row["roughness_resolved"] else 0.0) or 0.0
        )
        for _, row in there
    }
    _name(ax, there, tops, dated=dated)
    if not there:
        ax.text(0.5, 0.5, "no survey gives a roughness", transform=ax.transAxes, ha="center", color=MUTED)
    handles = [points, intervals, apart, bounds, odd, line, beyond, band]
    legend = legend_above(ax, [handle for handle in handles if handle is not None])
    return RoughnessArtists(points, bounds, odd, intervals, apart, line, beyond, band, legend)


def _bars(
    ax: Axes,
    there: Sequence[tuple[float, Row]],
    factor: float,
    name: str,
    width: float,
    colour: str,
    label: str,
) -> LineCollection | None:
    ends = [
        (x, factor * row[f"{name}_low"], factor * row[f"{name}_high"])
        for x, row in there
        if known(row[f"{name}_low"]) and known(row[f"{name}_high"])
    ]
    if not ends:
        return None
    x, low, high = zip(*ends, strict=True)
    return ax.vlines(
        x, low, high, color=colour, linewidth=width, alpha=1.0 if width < 2 else 0.45, zorder=3, label=label
    )


def _name(ax: Axes, there: Sequence[tuple[float, Row]], height: dict[int, float], *, dated: bool) -> None:
    """Name the surveys: below the axis where they stand by number, beside their points where by date."""
    places = [x for x, _ in there]
    if not dated:
        names = short_names([str(row["survey"]) for _, row in there], 16)
        ax.set_xlabel("survey")
        ax.set_xticks(places, names)
        if sum(len(name) + 2 for name in names) > 62:
            ax.tick_params(axis="x", labelrotation=90, labelsize=8 if len(names) <= 24 else 6.5)
        ax.set_xlim(-0.6, max(len(places) - 0.4, 0.6))
        ax.grid(visible=False, axis="x")
        return
    ax.set_xlabel("date")
    low, high = ax.get_xlim()
    span = high - low
    if span < 1.5:  # months
        whole = [
            y + m / 12 for y in range(int(low), int(high) + 2) for m in range(0, 12, 1 if span < 0.5 else 3)
        ]
        shown = [at for at in whole if low <= at <= high]
        ax.set_xticks(shown, [f"{int(at + 1e-6)}-{round((at % 1) * 12) % 12 + 1:02d}" for at in shown])
    else:
        ax.locator_params(axis="x", integer=True, nbins=8)
        ax.xaxis.set_major_formatter(lambda value, _: f"{value:.0f}")
    marked = there if len(there) <= _NAMED else [(x, row) for x, row in there if row["odd"]]
    # A name that is the date says no more than the axis does.
    marked = [(x, row) for x, row in marked if row["survey"] != row["date"]]
    if not marked:
        return
    bottom, top = ax.get_ylim()
    ax.set_ylim(bottom, bottom + 1.25 * (top - bottom))
    width = ax.bbox.width * 72 / ax.figure.dpi
    taken = -np.inf
    for x, row in marked:
        at = (x - low) / span * width
        if at - taken < 9.0:
            continue
        taken = at
        ax.annotate(
            shorten(row["survey"], 16),
            (x, height[id(row)]),
            xytext=(0, 4),
            textcoords="offset points",
            ha="center",
            va="bottom",
            rotation=90,
            fontsize=7.5,
            color=INK,
            zorder=7,
        )


def draw_factors(ax: Axes, comparison: Comparison, wall: str) -> FactorArtists:
    """Draw f against Re of the runs of all surveys of a wall, with the law at the roughness of each.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    comparison : Comparison
        What was compared.
    wall : str
        Which wall.

    Returns
    -------
    FactorArtists
        Up to six surveys have a colour, a mark and intervals of their runs each; of more, the first, the last and the odd ones.
    """
    rows, runs = _rows(comparison, wall), _rows(comparison, wall, "runs")
    about = _rows(comparison, wall, "walls")[0]
    names = [row["survey"] for row in rows if any(run["survey"] == row["survey"] for run in runs)]
    told = names if len(names) <= _EACH else _told(rows, names)
    reynolds = np.array([run["reynolds"] for run in runs], float)
    factor = np.array([run["friction_factor"] for run in runs], float)
    low, high = (reynolds.min() / 1.15, reynolds.max() * 1.15) if len(runs) else (4e3, 1e5)
    grid = np.geomspace(max(low, 3e3), high, 80)
    drawn: dict[str, Line2D] = {}
    laws: dict[str, Line2D] = {}
    others = [name for name in names if name not in told]
    if others:
        here = np.array([run["survey"] in others for run in runs])
        (drawn["others"],) = ax.plot(
            reynolds[here],
            factor[here],
            linestyle="none",
            marker="o",
            markersize=3,
            color=MUTED,
            alpha=0.45,
            zorder=2,
            label=f"{len(others)} other surveys",
        )
    heights = [factor, colebrook_white(grid, 0.0)]
    # About what each run's interval is: the table of runs holds standard uncertainties alone.
    reach_of = NormalDist().inv_cdf(0.5 + comparison.level / 2.0)
    for n, name in enumerate(told):
        colour = REACH_COLOURS[n] if n < len(REACH_COLOURS) else COLOURS["vermilion"]
        here = np.array([run["survey"] == name for run in runs])
        (drawn[name],) = ax.plot(
            reynolds[here],
            factor[here],
            linestyle="none",
            marker=_MARKERS[n % len(_MARKERS)],
            markersize=5,
            color=colour,
            markeredgecolor="white",
            markeredgewidth=0.5,
            zorder=4,
            label=shorten(name, 18),
        )
        spread = reach_of * np.array(
            [run["friction_factor_u"] if known(run["friction_factor_u"]) else np.nan for run in runs], float
        )
        bars = here & np.isfinite(spread)
        if bars.any():
            ax.vlines(
                reynolds[bars],
                np.maximum(factor[bars] - spread[bars], 0.2 * factor[bars]),
                factor[bars] + spread[bars],
                color=colour,
                linewidth=0.9,
                alpha=0.7,
                zorder=3.5,
            )
            heights += [
                factor[bars] + spread[bars],
                np.maximum(factor[bars] - spread[bars], 0.2 * factor[bars]),
            ]
        row = next(row for row in rows if row["survey"] == name)
        if known(row["roughness"]):
            # Of unlike bores that are taken as one, the runs stand in that one, and so does the law.
            one = about["bores"] == ONE and known(row["roughness_together"])
            relative = (
                row["roughness_together"] / about["diameter"] if one else row["roughness"] / row["diameter"]
            )
            law = colebrook_white(grid, relative)
            (laws[name],) = ax.plot(grid, law, color=colour, linewidth=1.1, zorder=3)
            heights.append(law)
    (smooth,) = ax.plot(
        grid, heights[1], color=INK, linewidth=1.1, linestyle=(0, (1.5, 1.5)), label="smooth wall", zorder=2
    )
    every = np.concatenate(heights)
    log_ticks(ax, "x", low, high)
    log_ticks(ax, "y", float(every.min()) / 1.03, float(every.max()) * 1.03)
    common = None
    if known(about["reynolds"]) and low < about["reynolds"] < high:
        common = ax.axvline(
            about["reynolds"],
            color=MUTED,
            linewidth=0.9,
            zorder=1,
            label=f"common Re {thousands(about['reynolds'], 3)}",
        )
    ax.set_xlabel("Reynolds number Re")
    ax.set_ylabel("Darcy friction factor f")
    handles = [*drawn.values(), smooth, *([common] if common is not None else [])]
    return FactorArtists(drawn, laws, smooth, common, legend_above(ax, handles), tuple(handles))


def _told(rows: Sequence[Row], names: Sequence[str]) -> list[str]:
    """The odd surveys, then the first and the last, as many as have a colour."""
    odd = [row["survey"] for row in rows if row["odd"]]
    chosen = dict.fromkeys([*odd, names[0], names[-1]])
    kept = list(chosen)[:_EACH]
    return [name for name in names if name in kept]


def comparison_pictures(
    comparison: Comparison, *, svg: bool = True, png: bool = True, display: Display = SI_DISPLAY
) -> tuple[Picture, ...]:
    """Draw every figure of a comparison.

    Parameters
    ----------
    comparison : Comparison
        What was compared.
    svg, png : bool
        Which formats are wanted.
    display : Display
        Units of the axes.

    Returns
    -------
    tuple of Picture
        Two for each wall: its roughness, and f against Re.
    """
    with styled():
        return tuple(_render(*plan, svg=svg, png=png, paper=False) for plan in _plans(comparison, display))


def _plans(
    comparison: Comparison, display: Display
) -> Iterator[tuple[str, str, str, str, Callable[[], Figure]]]:
    for n, wall in enumerate(comparison.walls["wall"], 1):
        name = shorten(wall, 32)
        by = "date" if comparison.dated else "survey"
        title = f"Roughness by {by}, {name}"
        yield (
            f"roughness_{n}",
            title,
            f"{title}: the roughness that each survey found, with its interval and with what is left of it without the errors "
            "that all surveys share, and the line of ageing where there is one.",
            "comparison",
            partial(
                _figure, partial(draw_roughness, comparison=comparison, wall=wall, display=display), title
            ),
        )
        title = f"Friction factor and Reynolds number, {name}"
        yield (
            f"friction_factor_{n}",
            title,
            f"{title}: the runs of all surveys on log axes, with the friction law at the roughness of each survey.",
            "comparison",
            partial(_figure, partial(draw_factors, comparison=comparison, wall=wall), title),
        )


def _figure(draw: Callable[[Axes], RoughnessArtists | FactorArtists], title: str) -> Figure:
    """Return a figure of one pair of axes under a title and a legend."""
    height = 4.0
    figure = Figure(figsize=(WIDTH, height))
    bottom = 0.54 / height
    ax = figure.add_axes((0.15, bottom, 0.82, 0.9 - bottom))
    drawn = draw(ax)
    names = [label for label in ax.get_xticklabels() if label.get_rotation() == 90]
    if names:  # long names need room below
        longest = max(len(label.get_text()) * float(label.get_fontsize()) for label in names)
        bottom += 0.62 * longest / 72 / height
        ax.set_position((0.15, bottom, 0.82, 0.9 - bottom))
    _head(figure, ax, title, drawn.legend_rows)
    return figure
