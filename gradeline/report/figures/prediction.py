"""The grade lines of a prediction with their band, and the head loss over the flow."""

from __future__ import annotations

import warnings
from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.collections import FillBetweenPolyCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from gradeline.prediction.tables import Prediction
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.report.figures.render import _as_png, _as_svg
from gradeline.report.figures.style import COLOURS, INK, MUTED, REACH_COLOURS, legend_above, shorten, styled

__all__ = [
    "HeadLossArtists",
    "PredictedLineArtists",
    "draw_head_loss",
    "draw_predicted_lines",
    "prediction_pictures",
]

Array = NDArray[np.float64]

_SIZE = (6.4, 4.3)
#: Flows beyond which one figure no longer tells them apart.
_MOST_LINES = 5
_DPI = 125
#: The pipe is drawn where the heads take at least this part of the height that both need, as 1 over it.
_SHARE = 6.0


@dataclass(frozen=True)
class PredictedLineArtists:
    """What `draw_predicted_lines` drew: a line and a band for each flow, and the pipe; None where there is none."""

    hgl: tuple[Line2D, ...]
    egl: tuple[Line2D, ...]
    bands: tuple[FillBetweenPolyCollection | None, ...]
    axis: Line2D | None
    legend_rows: int


@dataclass(frozen=True)
class HeadLossArtists:
    """What `draw_head_loss` drew."""

    line: Line2D
    band: FillBetweenPolyCollection | None
    new: Line2D | None
    legend_rows: int


def _numbers(table: pd.DataFrame, name: str) -> Array:
    return table[name].to_numpy(float)


def _chosen(prediction: Prediction) -> list[float]:
    """Flows whose lines are drawn: all where they are few, else evenly spread over them."""
    flows = [
        float(row["flow"]) for row in prediction.flows.to_dict("records") if np.isfinite(row["head_loss"])
    ]
    if len(flows) <= _MOST_LINES:
        return flows
    return [flows[n] for n in np.linspace(0, len(flows) - 1, _MOST_LINES).round().astype(int)]


def draw_predicted_lines(
    ax: Axes, prediction: Prediction, *, display: Display = SI_DISPLAY
) -> PredictedLineArtists:
    """Draw the hydraulic and energy grade line at each flow with the band of the former, and the pipe's axis.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    prediction : Prediction
        Its table ``grade_lines`` is read; of more than five flows five are drawn.
    display : Display
        Units of the axes.

    Returns
    -------
    PredictedLineArtists
    """
    scale, along = display.factor("head"), display.factor("chainage")
    hgl: list[Line2D] = []
    egl: list[Line2D] = []
    bands: list[FillBetweenPolyCollection | None] = []
    handles: list[Artist] = []
    flows = _chosen(prediction)
    for n, flow in enumerate(flows):
        rows = prediction.grade_lines[prediction.grade_lines["flow"] == flow]
        colour = REACH_COLOURS[n % len(REACH_COLOURS)]
        x = _numbers(rows, "chainage") * along
        low, high = (_numbers(rows, f"piezometric_head_{end}") * scale for end in ("low", "high"))
        band = None
        if np.isfinite(low).any():
            band = ax.fill_between(x, low, high, color=colour, alpha=0.25, linewidth=0, zorder=1.5)
        name = display.text("flow", flow, unit=True)
        (upper,) = ax.plot(
            x,
            _numbers(rows, "energy_head") * scale,
            color=colour,
            linewidth=1.0,
            linestyle=(0, (5, 2)),
            label="_egl",
        )
        (lower,) = ax.plot(
            x, _numbers(rows, "piezometric_head") * scale, color=colour, linewidth=1.5, label=f"HGL, {name}"
        )
        if len(flows) > 1:  # which is which without the colour
            ax.annotate(
                name,
                (x[0], lower.get_ydata()[0]),  # type: ignore[index]
                xytext=(4, -4),
                textcoords="offset points",
                va="top",
                fontsize=8,
                color=INK,
            )
        hgl.append(lower)
        egl.append(upper)
        bands.append(band)
        handles.append(lower)
    axis = _draw_axis(ax, prediction, flows, display)
    if egl:
        handles.append(Line2D([], [], color=MUTED, linewidth=1.0, linestyle=(0, (5, 2)), label="EGL"))
    drawn = next((band for band in bands if band is not None), None)
    if drawn is not None:
        drawn.set_label(f"{100 * prediction.level:.3g} % band of the HGL")
        handles.append(drawn)
    if axis is not None:
        handles.append(axis)
    ax.set_xlabel(display.head("chainage x", "chainage"))
    ax.set_ylabel(display.head("head above datum", "head"))
    ax.margins(x=0.02)
    bottom, top = ax.get_ylim()
    ax.set_ylim(bottom, top + 0.1 * (top - bottom))
    ax.annotate(
        "",
        xy=(0.995, 0.955),
        xytext=(0.905, 0.955),
        xycoords="axes fraction",
        arrowprops={"arrowstyle": "-|>", "color": MUTED, "linewidth": 1.2},
    )
    ax.text(0.895, 0.955, "flow", transform=ax.transAxes, ha="right", va="center", fontsize=9, color=MUTED)
    return PredictedLineArtists(tuple(hgl), tuple(egl), tuple(bands), axis, legend_above(ax, handles))


def _draw_axis(ax: Axes, prediction: Prediction, flows: list[float], display: Display) -> Line2D | None:
    """The pipe's axis, where it can share the scale of the heads."""
    lines = prediction.grade_lines
    lines = lines[lines["flow"].isin(flows)]
    if not len(lines):
        return None
    own = float(_numbers(lines, "energy_head").max() - _numbers(lines, "piezometric_head").min())
    every = [_numbers(lines, name) for name in ("energy_head", "piezometric_head", "elevation")]
    if own * _SHARE < max(one.max() for one in every) - min(one.min() for one in every):
        return None
    first = lines[lines["flow"] == flows[0]]
    (axis,) = ax.plot(
        _numbers(first, "chainage") * display.factor("chainage"),
        _numbers(first, "elevation") * display.factor("elevation"),
        color="#8a949c",
        linewidth=2.6,
        solid_capstyle="butt",
        label="pipe's axis",
        zorder=1,
    )
    return axis


def draw_head_loss(ax: Axes, prediction: Prediction, *, display: Display = SI_DISPLAY) -> HeadLossArtists:
    """Draw the head loss of the line over the flow with its band, and that of a new pipe where it was asked for.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    prediction : Prediction
        Its tables ``flows`` and ``new_pipe`` are read.
    display : Display
        Units of the axes.

    Returns
    -------
    HeadLossArtists
    """
    table = prediction.flows.sort_values("flow")
    scale, across = display.factor("head"), display.factor("flow")
    x = _numbers(table, "flow") * across
    low, high = (_numbers(table, f"head_loss_{end}") * scale for end in ("low", "high"))
    band = None
    if np.isfinite(low).any():
        band = ax.fill_between(
            x,
            low,
            high,
            color=COLOURS["sky blue"],
            alpha=0.4,
            linewidth=0,
            label=f"{100 * prediction.level:.3g} % band",
        )
    (line,) = ax.plot(
        x,
        _numbers(table, "head_loss") * scale,
        color=COLOURS["blue"],
        marker="o",
        markersize=3.5,
        label="this line",
    )
    new = None
    if len(prediction.new_pipe):
        fresh = prediction.new_pipe.sort_values("flow")
        (new,) = ax.plot(
            _numbers(fresh, "flow") * across,
            _numbers(fresh, "head_loss_new") * scale,
            color=COLOURS["green"],
            linestyle=(0, (5, 2)),
            marker="s",
            markersize=3.5,
            label="new pipe",
        )
    ax.set_xlabel(display.head("flow Q", "flow"))
    ax.set_ylabel(display.head("head loss of the line", "head"))
    ax.set_ylim(bottom=0)
    handles = [one for one in (line, band, new) if one is not None]
    return HeadLossArtists(line, band, new, legend_above(ax, handles))


def prediction_pictures(
    prediction: Prediction, kinds: Collection[str], display: Display = SI_DISPLAY
) -> dict[str, dict[str, bytes]]:
    """Return every figure of a prediction as bytes, by its name and then by ``svg`` or ``png``.

    Parameters
    ----------
    prediction : Prediction
        What was predicted.
    kinds : collection of {"svg", "png"}
        What is made.
    display : Display
        Units of the axes.

    Returns
    -------
    dict
        ``grade_lines``, and ``head_loss`` where there are several flows; nothing where no head loss is told.
    """
    found: dict[str, dict[str, bytes]] = {}
    # The same bytes for the same prediction.
    with styled(**{"svg.hashsalt": "prediction"}), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from", category=UserWarning)
        if _chosen(prediction):
            figure, ax = _canvas()
            rows = draw_predicted_lines(ax, prediction, display=display).legend_rows
            _title(figure, f"{shorten(prediction.title, 50)}: predicted grade lines", rows)
            found["grade_lines"] = _rendered(figure, kinds)
        if len(_chosen(prediction)) > 1:
            figure, ax = _canvas()
            rows = draw_head_loss(ax, prediction, display=display).legend_rows
            _title(figure, f"{shorten(prediction.title, 50)}: head loss", rows)
            found["head_loss"] = _rendered(figure, kinds)
    return found


def _canvas() -> tuple[Figure, Axes]:
    figure = Figure(figsize=_SIZE)
    return figure, figure.add_axes((0.13, 0.125, 0.84, 0.70))


def _title(figure: Figure, text: str, rows: int) -> None:
    figure.text(
        0.02, 0.955 if rows < 3 else 0.965, text, fontsize=10.5, fontweight="bold", color=INK, va="center"
    )


def _rendered(figure: Figure, kinds: Collection[str]) -> dict[str, bytes]:
    made = {}
    if "svg" in kinds:
        made["svg"] = _as_svg(figure)
    if "png" in kinds:
        made["png"] = _as_png(figure, _DPI)
    return made
