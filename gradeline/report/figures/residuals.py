"""Residuals by tap over all runs."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.lines import Line2D
from matplotlib.text import Annotation

from gradeline.quantities.printing import SI_DISPLAY, Display, format_number
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import (
    COLOURS,
    INK,
    MUTED,
    REGIME_COLOURS,
    REGIME_MARKERS,
    legend_above,
    short_names,
    shorten,
)

__all__ = ["ResidualArtists", "any_left_over", "draw_residuals"]

_MANY_MARKS = 4000
#: Taps whose scatter differs by more than this factor are drawn in standard deviations.
_UNLIKE = 4.0
_DEVIATIONS = "standard deviations"
#: A residual below this, in the unit of the axis, is no more than the rounding of the arithmetic.
_ROUNDING = 1e-6
_NAMED_TAPS = 24
_NAMED_RINGS = 12


@dataclass(frozen=True)
class ResidualArtists:
    """What `draw_residuals` drew.

    Parameters
    ----------
    used : mapping of str to Line2D
        Readings in the fit, by regime.
    left_out : Line2D or None
        Readings left out.
    flagged : Line2D or None
        Rings around the flagged ones; those beyond the axis stand at its edge.
    labels : tuple of Annotation
        Run, and the residual where it lies beyond the axis, beside each ring.
    still, fastest : PolyCollection or None
        Two standard deviations of the scatter to either side, at rest and in the fastest run.
    legend_rows : int
        Rows of the legend above the axes.
    beyond : bool
        Whether marks that lie beyond the axis stand at its edge.
    """

    used: dict[str, Line2D]
    left_out: Line2D | None
    flagged: Line2D | None
    labels: tuple[Annotation, ...]
    still: PolyCollection | None
    fastest: PolyCollection | None
    legend_rows: int
    beyond: bool


def any_left_over(reduction: Reduction) -> bool:
    """Whether any reading of a flowing run lies off its line by more than the rounding of the arithmetic."""
    flowing = reduction.runs["run"][(reduction.runs["regime"] != "static").to_numpy(bool)]
    mine = reduction.heads["run"].isin(set(flowing)).to_numpy(bool)
    residual = reduction.heads["residual"].to_numpy(float, na_value=np.nan)[mine]
    with np.errstate(invalid="ignore"):
        return bool((np.abs(residual) > 1e-3 * _ROUNDING).any())


def draw_residuals(ax: Axes, reduction: Reduction, *, display: Display = SI_DISPLAY) -> ResidualArtists:
    """Draw measured minus fitted energy head for every reading, the taps in order from left to right.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``heads``, ``runs``, ``scatter`` and ``reading_units`` are read.
    display : Display
        Units of the axes.

    Returns
    -------
    ResidualArtists
    """
    heads, runs = reduction.heads, reduction.runs
    labels_in_order = list(dict.fromkeys(_names(heads)))
    order = {name: n for n, name in enumerate(labels_in_order)}
    run_names = list(dict.fromkeys(runs["run"]))
    regimes = dict(zip(reversed(runs["run"].tolist()), reversed(runs["regime"].tolist()), strict=True))
    spread = dict(zip(run_names, np.linspace(-0.3, 0.3, max(len(run_names), 2)), strict=False))

    run_of = heads["run"].to_numpy(object)
    x = np.array(
        [order[name] + spread.get(run, 0.0) for name, run in zip(_names(heads), run_of, strict=True)], float
    )
    y, halves, unit = _on_one_axis(reduction, labels_in_order, display)
    # static runs from which the offsets were taken lie on the line by construction
    at_rest = np.array([regimes.get(run) == "static" for run in run_of], bool)
    if not (np.abs(y[at_rest]) > 1e-6).any():
        y = np.where(at_rest, np.nan, y)
    nothing_left = not (np.abs(y[np.isfinite(y)]) > _ROUNDING).any()
    used = heads["used"].fillna(False).to_numpy(bool) & np.isfinite(y)
    flags = heads["flag"].to_numpy(object)
    outlying = np.array([flag == "outlier" for flag in flags], bool) & np.isfinite(y)
    regime = np.array([regimes.get(run, "static") for run in run_of], object)

    still, fastest, two_sigma = _scatter_bands(ax, *halves)
    near = np.isfinite(y) & ~outlying & (used | (np.abs(y) < 3 * two_sigma))
    sound = np.abs(y[near])
    limit = 1.35 * max([two_sigma, *sound.tolist()], default=1.0)
    if limit < _ROUNDING:
        limit = 1.0
    shown = np.clip(y, -limit * 0.9, limit * 0.9)

    raster = len(heads) > _MANY_MARKS
    drawn: dict[str, Line2D] = {}
    for name, marker in REGIME_MARKERS.items():
        mask = used & (regime == name)
        if mask.any():
            (drawn[name],) = ax.plot(
                x[mask],
                shown[mask],
                marker,
                color=REGIME_COLOURS[name],
                markersize=4.2,
                linestyle="none",
                label=name,
                rasterized=raster,
                zorder=3,
            )
    left_out = flagged = None
    out = ~used & np.isfinite(y)
    if out.any():
        (left_out,) = ax.plot(
            x[out],
            shown[out],
            "o",
            color=INK,
            markerfacecolor="white",
            markersize=4.6,
            label="left out",
            zorder=3,
        )
    labels: list[Annotation] = []
    if outlying.any():
        (flagged,) = ax.plot(
            x[outlying],
            shown[outlying],
            "o",
            markersize=10,
            markerfacecolor="none",
            markeredgecolor=COLOURS["vermilion"],
            markeredgewidth=1.6,
            label="flagged",
            zorder=4,
        )
        labels = _ring_labels(ax, np.flatnonzero(outlying), run_of, (x, y, shown), len(order), unit)
    ax.vlines(np.arange(len(order) - 1) + 0.5, -limit, limit, color="#d5dadd", linewidth=0.7, zorder=0.8)
    ax.axhline(0, color=MUTED, linewidth=0.9, zorder=2)
    ax.set_ylim(-limit, limit)
    if nothing_left and np.isfinite(y).any():
        ax.text(
            0.5,
            0.08,
            "no run has more readings than its line has parameters: nothing is left over",
            transform=ax.transAxes,
            ha="center",
            fontsize=8.5,
            color=MUTED,
        )
    _tap_axis(ax, labels_in_order)
    ax.set_ylabel(
        "residual / scatter of its gauge"
        if unit == _DEVIATIONS
        else f"measured − fitted energy head ({unit})"
    )
    handles = [
        artist for artist in (*drawn.values(), left_out, flagged, still, fastest) if artist is not None
    ]
    rows_of_legend = legend_above(ax, handles, columns=4)
    beyond = bool((np.abs(y[np.isfinite(y)]) > 0.9 * limit).any())
    return ResidualArtists(drawn, left_out, flagged, tuple(labels), still, fastest, rows_of_legend, beyond)


def _tap_axis(ax: Axes, labels: list[str]) -> None:
    """Name the taps along the axis, on end where the names are long."""
    ax.set_xlim(-0.6, max(len(labels) - 0.4, 0.6))
    step = max(1, -(-len(labels) // _NAMED_TAPS))
    names = short_names(labels, 10)[::step]
    ax.set_xticks(range(0, len(labels), step), names)
    if sum(max(len(name), 2) for name in names) > 66:
        ax.tick_params(axis="x", labelrotation=90)
    ax.grid(visible=False, axis="x")
    ax.set_xlabel("tap, in order of chainage (within a tap: runs in order)")


def _names(heads: object) -> list[str]:
    """The tap of each row, or the gauge of a differential reading."""
    taps, second, gauges = heads["tap"], heads["tap_2"], heads["gauge"]  # type: ignore[index]  # columns of a table that is there
    return [
        str(gauge) if isinstance(other, str) else str(tap)
        for tap, other, gauge in zip(taps, second, gauges, strict=True)
    ]


def _ring_labels(
    ax: Axes,
    rows: npt.NDArray[np.intp],
    run_of: npt.NDArray[np.object_],
    places: tuple[npt.NDArray[np.float64], npt.NDArray[np.float64], npt.NDArray[np.float64]],
    taps: int,
    unit: str,
) -> list[Annotation]:
    """Name the first rings: x, residual and where it is shown are the three `places`."""
    x, y, shown = places
    labels = []
    named: list[tuple[float, bool, int]] = []
    for row in rows[:_NAMED_RINGS]:
        at = (float(x[row]), float(shown[row]))
        # a label goes a line further in where a neighbour's stands on the same side
        taken = {
            level for place, up, level in named if up == (y[row] > 0) and abs(place - at[0]) < 0.4 * taps
        }
        level = min(set(range(_NAMED_RINGS)) - taken)
        named.append((at[0], bool(y[row] > 0), level))
        name, to_right = shorten(run_of[row], 16), bool(x[row] < 0.6 * taps)
        labels.append(_ring_label(ax, name, at, y[row], level=level, to_right=to_right, unit=unit))
    return labels


def _ring_label(
    ax: Axes, run: str, at: tuple[float, float], value: float, *, level: int, to_right: bool, unit: str
) -> Annotation:
    x, shown = at
    beyond = abs(value) > abs(shown) * 1.0001
    text = f"run {run}"
    if beyond:
        text = f"run {run}: {'+' if value > 0 else ''}{format_number(value, 3)} {unit} {'↑' if value > 0 else '↓'}"
    return ax.annotate(
        text,
        (x, shown),
        xytext=(9 if to_right else -9, 0 if not beyond else (-11 * level) * (1 if value > 0 else -1)),
        textcoords="offset points",
        ha="left" if to_right else "right",
        va="center",
        fontsize=8.5,
        color=INK,
        bbox={"boxstyle": "square,pad=0.1", "facecolor": "white", "edgecolor": "none", "alpha": 0.85},
        zorder=5,
    )


def _on_one_axis(
    reduction: Reduction, labels: list[str], display: Display
) -> tuple[npt.NDArray[np.float64], tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]], str]:
    """The residuals, the half widths of the bands at rest and in the fastest run, and the unit of them all.

    Gauges of unlike accuracy share no axis of heads, since fine scatter of one is gross in another: there the residuals
    are in standard deviations of the scatter in the fastest run.
    """
    heads = reduction.heads
    y = heads["residual"].to_numpy(float, na_value=np.nan) * display.factor("small head")
    still, fastest = _half_widths(reduction, labels, display)
    if not _kinds_apart(fastest):
        return y, (still, fastest), display.unit("small head")
    size = fastest / 2
    place = {name: n for n, name in enumerate(labels)}
    return y / size[[place[name] for name in _names(heads)]], (still / size, fastest / size), _DEVIATIONS


def _kinds_apart(half: npt.NDArray[np.float64]) -> bool:
    """Whether the scatter of the taps is so unlike that one axis of heads shows that of some alone."""
    told = half[np.isfinite(half) & (half > 0)]
    return len(told) == len(half) > 0 and bool(told.max() > _UNLIKE * told.min())


def _half_widths(
    reduction: Reduction, labels: list[str], display: Display
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Two standard deviations of the pooled scatter at each tap, at rest and in the fastest run; NaN where not known."""
    heads, scatter = reduction.heads, reduction.scatter
    gauge_of = dict(zip(_names(heads), heads["gauge"].tolist(), strict=True))
    row_of = {gauge: _scatter_row(reduction, gauge) for gauge in set(gauge_of.values())}
    velocity = reduction.runs["velocity"].to_numpy(float, na_value=np.nan)
    velocity = velocity[np.isfinite(velocity)]
    head = float(velocity.max()) ** 2 / (2 * reduction.gravity) if velocity.size else 0.0
    scale = 2 * display.factor("small head")
    rows = [row_of.get(gauge_of.get(name)) for name in labels]

    def of_taps(column: str) -> npt.NDArray[np.float64]:
        values = scatter[column].to_numpy(float, na_value=np.nan)
        return np.array([np.nan if row is None else values[row] for row in rows], float)

    low, moving = of_taps("base"), of_taps("surge")
    return scale * low, scale * np.hypot(low, np.nan_to_num(moving) * head)


def _scatter_bands(
    ax: Axes, low: npt.NDArray[np.float64], high: npt.NDArray[np.float64]
) -> tuple[PolyCollection | None, PolyCollection | None, float]:
    """Bands of these half widths at each tap, and the largest of them."""
    if not np.isfinite(low).any():
        return None, None, 0.0
    places = np.concatenate([[n - 0.5, n + 0.5] for n in range(len(low))])

    def band(half: npt.NDArray[np.float64], alpha: float, label: str) -> PolyCollection:
        both = np.repeat(half, 2)
        return ax.fill_between(
            places, -both, both, color=COLOURS["sky blue"], alpha=alpha, linewidth=0, label=label, zorder=1
        )

    fastest = (
        band(high, 0.18, "±2 scatter, fastest run") if np.nanmax(high - low) > 0.02 * np.nanmax(low) else None
    )
    still = band(low, 0.30, "±2 scatter, at rest" if fastest is not None else "±2 scatter")
    return still, fastest, float(np.nanmax(high))


def _scatter_row(reduction: Reduction, gauge: object) -> int | None:
    """The row of the scatter table for a gauge: by its name, by its kind, or the only one."""
    names = reduction.scatter["gauge"].tolist()
    units = reduction.reading_units
    kinds = units["kind"][(units["gauge"] == gauge).to_numpy(bool)].tolist()
    for name in (gauge, *kinds):
        if name in names:
            return names.index(name)
    return 0 if len(names) == 1 else None
