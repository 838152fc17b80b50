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
from gradeline.report.figures.end_labels import label_left_ends
from gradeline.report.figures.render import png_of, svg_of
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
_MOST_LINES = 8
_DPI = 125
#: The pipe is drawn where the heads take at least this part of the height that both need, as 1 over it.
_SHARE = 6.0
#: Both grade lines have bands of their own where a velocity head takes at least this part of the height.
_APART = 0.02


@dataclass(frozen=True)
class PredictedLineArtists:
    """What `draw_predicted_lines` drew: two lines and their bands for each flow, and the pipe; None where there is none.

    `egl_bands` is empty where they lie upon those of the HGL.
    """

    hgl: tuple[Line2D, ...]
    egl: tuple[Line2D, ...]
    bands: tuple[FillBetweenPolyCollection | None, ...]
    egl_bands: tuple[FillBetweenPolyCollection | None, ...]
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


def _left_out(prediction: Prediction) -> str:
    """Say that only some flows are drawn; nothing where all are."""
    told = int(prediction.flows["head_loss"].notna().sum())
    return f", {_MOST_LINES} of {told} flows" if told > _MOST_LINES else ""


def draw_predicted_lines(
    ax: Axes, prediction: Prediction, *, display: Display = SI_DISPLAY
) -> PredictedLineArtists:
    """Draw the hydraulic and energy grade line at each flow, each with its band, and the pipe's axis.

    Where all velocity heads are too small for the two bands to be told apart, one stands for both and the legend says so.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    prediction : Prediction
        Its table ``grade_lines`` is read; of more than eight flows eight are drawn, and the figure says so.
    display : Display
        Units of the axes.

    Returns
    -------
    PredictedLineArtists
    """
    scale, along = display.factor("head"), display.factor("chainage")
    hgl: list[Line2D] = []
    egl: list[Line2D] = []
    egl_bands: list[FillBetweenPolyCollection | None] = []
    bands: list[FillBetweenPolyCollection | None] = []
    handles: list[Artist] = []
    flows = _chosen(prediction)
    apart = _bands_apart(prediction, flows)
    for n, flow in enumerate(flows):
        rows = prediction.grade_lines[prediction.grade_lines["flow"] == flow]
        colour = REACH_COLOURS[n % len(REACH_COLOURS)]
        # One flow: the lines have their colours of every report. Several: that of the flow, and a grey band for the EGL.
        egl_colour = INK if len(flows) == 1 else colour
        x = _numbers(rows, "chainage") * along
        band = _draw_band(ax, x, rows, "piezometric_head", scale, colour, 0.25)
        if apart:
            egl_bands.append(_draw_band(ax, x, rows, "energy_head", scale, MUTED, 0.22))
        name = display.text("flow", flow, unit=True)
        (upper,) = ax.plot(
            x,
            _numbers(rows, "energy_head") * scale,
            color=egl_colour,
            linewidth=1.0,
            linestyle=(0, (5, 2)),
            label="_egl",
        )
        (lower,) = ax.plot(
            x, _numbers(rows, "piezometric_head") * scale, color=colour, linewidth=1.5, label=f"HGL, {name}"
        )
        hgl.append(lower)
        egl.append(upper)
        bands.append(band)
    if len(flows) == 1:
        handles += hgl
    elif hgl:  # the labels at their ends tell the flows
        handles.append(Line2D([], [], color=MUTED, linewidth=1.5, label="HGL"))
    axis = _draw_axis(ax, prediction, flows, display)
    if egl:
        muted = INK if len(flows) == 1 else MUTED
        handles.append(Line2D([], [], color=muted, linewidth=1.0, linestyle=(0, (5, 2)), label="EGL"))
    words = f"{100 * prediction.level:.3g} % band of"
    for drawn, name in ((bands, "the HGL" if apart else "both lines"), (egl_bands, "the EGL")):
        first = next((band for band in drawn if band is not None), None)
        if first is not None:
            first.set_label(f"{words} {name}")
            handles.append(first)
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
    if len(flows) > 1:  # which is which without the colour
        label_left_ends(ax, hgl, [display.text("flow", flow, digits=3, unit=True) for flow in flows])
    return PredictedLineArtists(
        tuple(hgl), tuple(egl), tuple(bands), tuple(egl_bands), axis, legend_above(ax, handles)
    )


def _draw_band(
    ax: Axes, x: Array, rows: pd.DataFrame, name: str, scale: float, colour: str, alpha: float
) -> FillBetweenPolyCollection | None:
    low, high = (_numbers(rows, f"{name}_{end}") * scale for end in ("low", "high"))
    if not np.isfinite(low).any():
        return None
    return ax.fill_between(x, low, high, color=colour, alpha=alpha, linewidth=0, zorder=1.5)


def _bands_apart(prediction: Prediction, flows: list[float]) -> bool:
    """Whether HGL and EGL lie so far apart that a band of each can be seen; they differ by the velocity head alone."""
    lines = prediction.grade_lines[prediction.grade_lines["flow"].isin(flows)]
    if not len(lines):
        return False
    egl, hgl = _numbers(lines, "energy_head"), _numbers(lines, "piezometric_head")
    return float(np.max(egl - hgl)) >= _APART * float(egl.max() - hgl.min())


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
    # In the critical zone no line is drawn, and the interval there is no band about one.
    told = table["head_loss"].notna().to_numpy(bool)
    low, high = (
        np.where(told, _numbers(table, f"head_loss_{end}") * scale, np.nan) for end in ("low", "high")
    )
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
            _title(
                figure, f"{shorten(prediction.title, 50)}: predicted grade lines{_left_out(prediction)}", rows
            )
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
        made["svg"] = svg_of(figure)
    if "png" in kinds:
        made["png"] = png_of(figure, _DPI)
    return made
