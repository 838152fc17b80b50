"""Friction slope against velocity, and friction factor against Reynolds number with the laws."""

from __future__ import annotations

import math
from dataclasses import dataclass
from statistics import NormalDist
from typing import Literal

import numpy as np
import numpy.typing as npt
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.container import ErrorbarContainer
from matplotlib.lines import Line2D
from matplotlib.markers import CARETDOWN, CARETUP
from matplotlib.patches import Polygon, Rectangle
from matplotlib.text import Annotation

from gradeline.hydraulics.friction import LAMINAR_LIMIT, TURBULENT_LIMIT, colebrook_white
from gradeline.hydraulics.sand_grain import sand_grain
from gradeline.quantities.printing import SI_DISPLAY, Display, rounded
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.run_labels import drawn_lines, flagged_runs, run_labels
from gradeline.report.figures.style import (
    INK,
    MUTED,
    REACH_COLOURS,
    REGIME_MARKERS,
    legend_above,
    log_ticks,
    shorten,
)

__all__ = ["FrictionFactorArtists", "SlopeVelocityArtists", "draw_friction_factor", "draw_slope_velocity"]

_Array = npt.NDArray[np.float64]
_ERRORBARS = 400
_Corner = Literal["upper left", "lower right", "upper right", "lower left"]
#: Room that a legend inside the axes takes, as shares of them.
_LEGEND_WIDTH, _LEGEND_MARGIN, _LEGEND_ROW = 0.5, 0.05, 0.08


@dataclass(frozen=True)
class SlopeVelocityArtists:
    """What `draw_slope_velocity` drew.

    Parameters
    ----------
    runs : mapping of (str, str) to ErrorbarContainer
        The runs with their intervals, by reach and regime.
    powers : mapping of (str, str) to Line2D
        S proportional to V^n, by reach and regime.
    open_ends : tuple of Line2D
        Arrowheads at the edge where an interval goes on beyond the axis, downwards and upwards.
    transition : Rectangle or Polygon or None
        From the last laminar to the first turbulent velocity, all reaches and directions together.
    flagged : Line2D or None
        Rings around the runs that are flagged; the powers are those of the others.
    """

    runs: dict[tuple[str, str], ErrorbarContainer]
    powers: dict[tuple[str, str], Line2D]
    open_ends: tuple[Line2D, ...]
    transition: Rectangle | Polygon | None = None
    flagged: Line2D | None = None


@dataclass(frozen=True)
class FrictionFactorArtists:
    """What `draw_friction_factor` drew.

    Parameters
    ----------
    runs : mapping of (str, str) to ErrorbarContainer
        The runs with their intervals, by reach and regime.
    fitted : mapping of str to Line2D
        The friction law at the wall's roughness, by reach.
    bands : mapping of str to PolyCollection
        Its band, by reach: the roughness interval and the law's own uncertainty.
    sand : mapping of str to Line2D
        The sand-grain law at the roughness that suits it, by reach, where the runs follow it.
    laminar, smooth : Line2D or None
        f = 64/Re (another constant where the section is no circle), and the law of a smooth wall.
    critical : Rectangle or Polygon or None
        The critical zone.
    flagged : Line2D or None
        Rings around the runs that are flagged.
    labels : tuple of Annotation
        Labels of the runs.
    open_ends : tuple of Line2D
        Arrowheads at the edge where an interval goes on beyond the axis, downwards and upwards.
    legend_rows : int
        Rows of the legend above the axes.
    """

    runs: dict[tuple[str, str], ErrorbarContainer]
    fitted: dict[str, Line2D]
    bands: dict[str, PolyCollection]
    sand: dict[str, Line2D]
    laminar: Line2D | None
    smooth: Line2D | None
    critical: Rectangle | Polygon | None
    flagged: Line2D | None
    labels: tuple[Annotation, ...]
    open_ends: tuple[Line2D, ...]
    legend_rows: int


def _column(table: pd.DataFrame, name: str) -> _Array:
    return table[name].to_numpy(float, na_value=np.nan)


def _colours(reduction: Reduction) -> dict[str, str]:
    return {name: REACH_COLOURS[n % len(REACH_COLOURS)] for n, name in enumerate(reduction.reaches["reach"])}


def _limits(values: _Array, margin: float) -> tuple[float, float]:
    """Limits of a log axis that leave the same room at both ends."""
    kept = values[np.isfinite(values) & (values > 0)]
    if not kept.size:
        return 0.1, 10.0
    low, high = float(kept.min()), float(kept.max())
    room = (high / low) ** margin * 1.08
    return low / room, high * room


def _scatter_runs(
    ax: Axes, runs: pd.DataFrame, x: str, y: str, *, scale: float, colours: dict[str, str]
) -> dict[tuple[str, str], ErrorbarContainer]:
    """Runs with their intervals, one container for each reach and regime; colour by reach, mark by regime."""
    drawn: dict[tuple[str, str], ErrorbarContainer] = {}
    several = len(colours) > 1
    reach_of, regime_of = runs["reach"].to_numpy(object), runs["regime"].to_numpy(object)
    for reach, colour in colours.items():
        for regime, marker in REGIME_MARKERS.items():
            mask = (reach_of == reach) & (regime_of == regime)
            along, value = _column(runs, x), _column(runs, y) * scale
            mask &= np.isfinite(along) & np.isfinite(value) & (value > 0) & (along > 0)
            if not mask.any():
                continue
            low = np.nan_to_num(value - _column(runs, f"{y}_low") * scale)[mask].clip(min=0)
            high = np.nan_to_num(_column(runs, f"{y}_high") * scale - value)[mask].clip(min=0)
            low = np.minimum(low, value[mask] * 0.95)  # a bar that reaches 0 has no place on a log axis
            label = f"{shorten(reach, 18)}, {regime}" if several else str(regime)
            drawn[str(reach), regime] = ax.errorbar(
                along[mask],
                value[mask],
                yerr=(low, high) if mask.sum() <= _ERRORBARS else None,
                fmt=marker,
                color=colour,
                ecolor=INK,
                elinewidth=0.9,
                capsize=2.2,
                markersize=5,
                linestyle="none",
                label=label,
                markerfacecolor=colour if regime == "turbulent" else "white",
                markeredgewidth=1.2,
                zorder=3,
                rasterized=bool(mask.sum() > 1500),
            )
    return drawn


def _open_ends(ax: Axes, drawn: dict[tuple[str, str], ErrorbarContainer]) -> tuple[Line2D, ...]:
    """Arrowheads where an interval leaves the axis, whose limits stand by now."""
    low, high = ax.get_ylim()
    left, right = ax.get_xlim()
    ends: dict[int, list[float]] = {CARETDOWN: [], CARETUP: []}
    for container in drawn.values():
        for bars in container.lines[2]:
            for (x, below), (_, above) in bars.get_segments():
                if left <= x <= right:
                    ends[CARETDOWN] += [x] if below < low < above else []
                    ends[CARETUP] += [x] if below < high < above else []
    return tuple(
        ax.plot(
            places,
            [low if marker == CARETDOWN else high] * len(places),
            linestyle="none",
            marker=marker,
            markersize=6,
            color=INK,
            clip_on=False,
            zorder=4,
            label="_goes on beyond the axis",
        )[0]
        for marker, places in ends.items()
        if places
    )


def draw_slope_velocity(
    ax: Axes, reduction: Reduction, *, display: Display = SI_DISPLAY
) -> SlopeVelocityArtists:
    """Draw friction slope against mean velocity on log axes, with the fitted powers.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``runs``, ``reaches``, ``exponents`` and ``flags`` are read.
    display : Display
        Units of the axes.

    Returns
    -------
    SlopeVelocityArtists
        A run whose slope is not above zero has no place on a log axis and is not among them.
    """
    runs, colours = reduction.runs, _colours(reduction)
    scale = display.factor("slope")
    fast = display.factor("velocity")
    shown = runs.assign(velocity=_column(runs, "velocity") * fast)
    drawn = _scatter_runs(ax, shown, "velocity", "slope", scale=scale, colours=colours)
    off = np.isin(shown["run"].to_numpy(object), flagged_runs(reduction))
    powers: dict[tuple[str, str], Line2D] = {}
    for row in reduction.exponents.to_dict("records"):
        key = (str(row["reach"]), str(row["regime"]))
        if key not in drawn or not math.isfinite(row["exponent"]):
            continue
        velocity, slope, weight = _entered(shown, key, scale, off)
        if not velocity.size:
            continue
        ends = np.array([velocity.min() / 1.05, velocity.max() * 1.05])
        middle = (np.average(np.log(velocity), weights=weight), np.average(np.log(slope), weights=weight))
        (powers[key],) = ax.plot(
            ends,
            np.exp(middle[1] + row["exponent"] * (np.log(ends) - middle[0])),
            color=colours[key[0]],
            linewidth=1.2,
            linestyle="-" if key[1] == "turbulent" else (0, (5, 2)),
            zorder=2,
            label=f"S ∝ Vⁿ, n = {rounded(row['exponent'], row['exponent_u'])}",
        )
    points = [line.lines[0].get_data() for line in drawn.values()]
    log_ticks(ax, "x", *_limits(np.concatenate([p[0] for p in points]) if points else np.array([]), 0.05))
    log_ticks(ax, "y", *_limits(np.concatenate([p[1] for p in points]) if points else np.array([]), 0.05))
    open_ends = _open_ends(ax, drawn)
    ax.set_xlabel(display.head("mean velocity V", "velocity"))
    ax.set_ylabel(display.head("friction slope S", "slope"))
    turning = _transition(ax, reduction, fast)
    x, y = _column(shown, "velocity"), _column(shown, "slope") * scale
    with np.errstate(invalid="ignore"):
        seen = (x > 0) & (y > 0)
    _, flagged = run_labels(ax, reduction, x, y, seen & off, drawn_lines(drawn, powers.values()))
    if drawn:
        order: list[Artist] = []
        for key, container in drawn.items():
            order += [_mark(container), *([powers[key]] if key in powers else [])]
        order += [artist for artist in (flagged, turning) if artist is not None]
        corner = _clearest_corner(ax, x[seen], y[seen], len(order))
        # upon a band of its own, so that the grey one between the critical velocities does not run through it
        ax.legend(
            handles=order,
            loc=corner,
            handlelength=1.8,
            labelspacing=0.35,
            frameon=True,
            facecolor="white",
            framealpha=0.92,
            edgecolor="none",
        )
    else:
        ax.text(
            0.5,
            0.5,
            "no run has a friction slope above zero",
            transform=ax.transAxes,
            ha="center",
            color=MUTED,
        )
    return SlopeVelocityArtists(drawn, powers, open_ends, turning, flagged)


def _entered(
    runs: pd.DataFrame, key: tuple[str, str], scale: float, off: npt.NDArray[np.bool_]
) -> tuple[_Array, _Array, _Array]:
    """V, S and weights of the runs of a reach and regime that the exponent is of."""
    velocity, slope = _column(runs, "velocity"), _column(runs, "slope")
    mine = (runs["reach"].to_numpy(object) == key[0]) & (runs["regime"].to_numpy(object) == key[1]) & ~off
    with np.errstate(invalid="ignore", divide="ignore"):
        mine &= (velocity > 0) & (slope > 0)
        weight = (slope / _column(runs, "slope_u_random"))[mine] ** 2
    if not (np.isfinite(weight).all() and (weight > 0).all()):
        weight = np.ones(int(mine.sum()))
    return velocity[mine], scale * slope[mine], weight


def _clearest_corner(ax: Axes, x: _Array, y: _Array, rows: int) -> _Corner:
    """The corner in which a legend of so many rows covers the fewest marks."""
    at = ax.transAxes.inverted().transform(ax.transData.transform(np.column_stack([x, y])))
    wide, tall = _LEGEND_WIDTH, _LEGEND_MARGIN + _LEGEND_ROW * rows
    left, right = at[:, 0] < wide, at[:, 0] > 1 - wide
    low, high = at[:, 1] < tall, at[:, 1] > 1 - tall
    covered: dict[_Corner, int] = {
        "upper left": int((left & high).sum()),
        "lower right": int((right & low).sum()),
        "upper right": int((right & high).sum()),
        "lower left": int((left & low).sum()),
    }
    return min(covered, key=lambda corner: covered[corner])


def _transition(ax: Axes, reduction: Reduction, scale: float) -> Rectangle | Polygon | None:
    """Shade the velocities between the last laminar and the first turbulent run."""
    table = reduction.transition
    low, high = _column(table, "lower_from"), _column(table, "upper_to")
    if not (np.isfinite(low).any() and np.isfinite(high).any()) or np.nanmin(low) >= np.nanmax(high):
        return None
    return ax.axvspan(
        float(np.nanmin(low)) * scale,
        float(np.nanmax(high)) * scale,
        color="#eceff1",
        linewidth=0,
        zorder=0.5,
        label="critical velocities",
    )


def draw_friction_factor(ax: Axes, reduction: Reduction) -> FrictionFactorArtists:
    """Draw the Darcy friction factor against the Reynolds number with the laws, on log axes.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``runs``, ``reaches``, ``walls`` and ``flags`` are read.

    Returns
    -------
    FrictionFactorArtists
    """
    runs, colours = reduction.runs, _colours(reduction)
    reynolds, factor = _column(runs, "reynolds"), _column(runs, "friction_factor")
    several = len(colours) > 1
    drawn = _scatter_runs(ax, runs, "reynolds", "friction_factor", scale=1.0, colours=colours)
    seen = np.isfinite(reynolds) & np.isfinite(factor) & (factor > 0) & (reynolds > 0)
    low, high = _limits(reynolds[seen] if seen.any() else np.array([1e3, 1e5]), 0.06)
    grid_high = np.geomspace(max(low, TURBULENT_LIMIT), high, 80) if high > TURBULENT_LIMIT else np.array([])
    grid_low = np.array([low, min(high, LAMINAR_LIMIT)]) if low < LAMINAR_LIMIT else np.array([])

    heights = [factor[seen]]
    line = smooth = critical = None
    if grid_low.size:
        # Of several shapes the first stands for all: each run's own check is in the text.
        constant = float(reduction.laminar["constant"].iloc[0]) if len(reduction.laminar) else 64.0
        (line,) = ax.plot(
            grid_low,
            constant / grid_low,
            color=INK,
            linewidth=1.2,
            label=f"laminar, {constant:.4g}/Re",
            zorder=2,
        )
        heights.append(constant / grid_low)
    if low < TURBULENT_LIMIT and high > LAMINAR_LIMIT:
        critical = ax.axvspan(
            max(low, LAMINAR_LIMIT),
            min(high, TURBULENT_LIMIT),
            color="#eceff1",
            linewidth=0,
            zorder=0.5,
            label="critical zone",
        )
    fitted: dict[str, Line2D] = {}
    sand: dict[str, Line2D] = {}
    bands: dict[str, PolyCollection] = {}
    if grid_high.size:
        (smooth,) = ax.plot(
            grid_high,
            colebrook_white(grid_high, 0.0),
            color=INK,
            linewidth=1.1,
            linestyle=(0, (1.5, 1.5)),
            label="smooth wall",
            zorder=2,
        )
        heights.append(colebrook_white(grid_high, 0.0))
        for reach, law, ends in _fitted_laws(reduction, grid_high):
            name = f", {shorten(reach, 18)}" if several else ""
            if ends is not None:
                bands[reach] = ax.fill_between(
                    grid_high,
                    *ends,
                    color=colours[reach],
                    alpha=0.20,
                    linewidth=0,
                    zorder=1,
                    label=f"{100 * reduction.level:.3g} % band of the law",
                )
            (fitted[reach],) = ax.plot(
                grid_high, law, color=colours[reach], linewidth=1.5, label=f"fitted law{name}", zorder=2.2
            )
            heights.append(law)
        for reach, law in _sand_grain_laws(reduction, grid_high):
            name = f", {shorten(reach, 18)}" if several else ""
            (sand[reach],) = ax.plot(
                grid_high,
                law,
                color=colours[reach],
                linewidth=1.5,
                linestyle=(0, (6, 1.5, 1.5, 1.5)),
                label=f"sand-grain law{name}",
                zorder=2.3,
            )
            heights.append(law)
    log_ticks(ax, "x", low, high)
    bars = np.concatenate([_column(runs, f"friction_factor_{end}")[seen] for end in ("low", "high")])
    middle = np.tile(factor[seen], 2)
    with np.errstate(invalid="ignore"):  # a long bar may leave the figure, its run may not
        heights.append(bars[(bars > middle / 2) & (bars < middle * 2)])
    log_ticks(ax, "y", *_limits(np.concatenate(heights), 0.05))
    open_ends = _open_ends(ax, drawn)
    lines = drawn_lines(drawn, (line, *fitted.values(), *sand.values()))
    labels, flagged = run_labels(ax, reduction, reynolds, factor, seen, lines)
    ax.set_xlabel("Reynolds number Re")
    ax.set_ylabel("Darcy friction factor f")
    rows = legend_above(
        ax, _law_handles(drawn, fitted, bands, *sand.values(), line, smooth, critical, flagged), columns=4
    )
    if not seen.any():
        ax.text(0.5, 0.5, "no run has a friction factor", transform=ax.transAxes, ha="center", color=MUTED)
    return FrictionFactorArtists(
        drawn, fitted, bands, sand, line, smooth, critical, flagged, labels, open_ends, rows
    )


def _mark(container: ErrorbarContainer) -> Line2D:
    """The marks of a container, with its label, for the legend."""
    marks = container.lines[0]
    assert isinstance(marks, Line2D)
    marks.set_label(container.get_label())
    return marks


def _law_handles(
    drawn: dict[tuple[str, str], ErrorbarContainer],
    fitted: dict[str, Line2D],
    bands: dict[str, PolyCollection],
    *others: Artist | None,
) -> list[Artist]:
    """What the legend names: reach by reach its runs and its law, then one band, then what all share."""
    handles: list[Artist] = []
    for reach in dict.fromkeys([key[0] for key in drawn] + list(fitted)):
        handles += [_mark(container) for key, container in drawn.items() if key[0] == reach]
        handles += [fitted[reach]] if reach in fitted else []
    handles += list(bands.values())[:1]
    return handles + [artist for artist in others if artist is not None]


def _sand_grain_laws(reduction: Reduction, reynolds: _Array) -> list[tuple[str, _Array]]:
    """The sand-grain law of each reach whose wall's runs follow it."""
    sizes = {
        row["wall"]: row["roughness"]
        for row in reduction.laws.to_dict("records")
        if row["law"] == row["verdict"] == "sand-grain"
    }
    return [
        (str(reach["reach"]), sand_grain(reynolds, sizes[reach["wall"]] / reach["diameter"]))
        for reach in reduction.reaches.to_dict("records")
        if reach["wall"] in sizes
    ]


def _fitted_laws(
    reduction: Reduction, reynolds: _Array
) -> list[tuple[str, _Array, tuple[_Array, _Array] | None]]:
    """The law of each reach at its wall's roughness, and the band of roughness interval and law together."""
    walls = {row["wall"]: row for row in reduction.walls.to_dict("records")}
    factor = NormalDist().inv_cdf((1 + reduction.level) / 2)
    law_u = reduction.friction_law_u if math.isfinite(reduction.friction_law_u) else 0.0
    found: list[tuple[str, _Array, tuple[_Array, _Array] | None]] = []
    for reach in reduction.reaches.to_dict("records"):
        wall = walls.get(reach["wall"])
        if wall is None or not math.isfinite(wall["roughness"]):
            continue
        bore = reach["diameter"]
        law = colebrook_white(reynolds, wall["roughness"] / bore)
        ends: tuple[_Array, _Array] | None = None
        if math.isfinite(wall["roughness_low"]) and math.isfinite(wall["roughness_high"]):
            own = math.log1p(factor * law_u)
            low, high = (
                colebrook_white(reynolds, wall[f"roughness_{end}"] / bore) for end in ("low", "high")
            )
            ends = (
                law * np.exp(-np.hypot(np.log(law / low), own)),
                law * np.exp(np.hypot(np.log(high / law), own)),
            )
        found.append((str(reach["reach"]), law, ends))
    return found
