"""The hydraulic and the energy grade line of a run, and the pipe below them."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.collections import FillBetweenPolyCollection, LineCollection
from matplotlib.lines import Line2D
from matplotlib.text import Annotation

from gradeline.quantities.printing import SI_DISPLAY, Display, format_number, thousands
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.differences import draw_falls, head_axis, marks
from gradeline.report.figures.pipe import Array, PipeArtists, column, draw_pipe, of_run
from gradeline.report.figures.reading_marks import RING, draw_readings
from gradeline.report.figures.style import COLOURS, INK, MUTED, legend_above, shorten
from gradeline.report.tables import elevations_known

__all__ = [
    "GradeLineArtists",
    "PipeArtists",
    "draw_grade_lines",
    "draw_pipe",
    "energy_line_is_cut",
    "flagged_words",
    "pipe_fits_the_scale",
    "run_title",
]

#: A velocity head above so many times the fall of the hydraulic grade line leaves nothing to be seen of the latter.
_DWARFS = 5.0


@dataclass(frozen=True)
class GradeLineArtists:
    """What `draw_grade_lines` drew; None where the run has nothing of that kind.

    Parameters
    ----------
    hgl, egl : Line2D or None
        Fitted piezometric and energy head against chainage.
    band : FillBetweenPolyCollection or None
        The fitted line's interval at the level of the reduction.
    below_crown : FillBetweenPolyCollection or None
        Where the hydraulic grade line lies below the pipe's crown.
    used, falls : Line2D or None
        Readings in the fit: heads at their taps, and differences between two taps at the downstream one.
    steps : LineCollection or None
        Each difference as a step from the fitted head upstream.
    left_out, flagged : Line2D or None
        Readings left out as disturbed or by hand; rings around the flagged ones.
    labels : tuple of Annotation
        Tap and reason beside each ring, and beside the readings of taps that were left out for an ailment.
    pipe : PipeArtists or None
        The pipe, where it was drawn on the same axes.
    legend_rows : int
        Rows of the legend above the axes.
    """

    hgl: Line2D | None
    egl: Line2D | None
    band: FillBetweenPolyCollection | None
    below_crown: FillBetweenPolyCollection | None
    used: Line2D | None
    falls: Line2D | None
    steps: LineCollection | None
    left_out: Line2D | None
    flagged: Line2D | None
    labels: tuple[Annotation, ...]
    pipe: PipeArtists | None
    legend_rows: int


def coverage_factor(reduction: Reduction, run: str) -> float:
    """Return half the interval of the run's slope in standard uncertainties; the normal one where it is missing."""
    rows = of_run(reduction.runs, run)
    with np.errstate(invalid="ignore", divide="ignore"):
        factors = (column(rows, "slope_high") - column(rows, "slope_low")) / (2 * column(rows, "slope_u"))
    factors = factors[np.isfinite(factors) & (factors > 0)]
    return float(factors[0]) if factors.size else NormalDist().inv_cdf((1 + reduction.level) / 2)


def run_title(reduction: Reduction, run: str, display: Display = SI_DISPLAY) -> str:
    """Return one line about a run: its flow, and Re and friction slope of its first reach."""
    rows = of_run(reduction.runs, run)
    parts = [f"Run {shorten(run, 24)}"]
    if len(rows):
        first = rows.iloc[0]
        if first["regime"] == "static":
            return f"{parts[0]}: no flow"
        parts.append(display.text("flow", first["flow"], unit=True))
        if np.isfinite(first["reynolds"]):
            parts.append("Re " + thousands(first["reynolds"]))
        if np.isfinite(first["slope"]) and len(rows) == 1:
            parts.append("S = " + display.text("slope", first["slope"], first["slope_u"], unit=True))
    return " · ".join(parts)


def flagged_words(reduction: Reduction, run: str) -> str:
    """Return what stands under the title of a run that lies off the friction law; empty for the others."""
    flags = reduction.flags
    if not ((flags["kind"] == "run") & (flags["run"] == run)).to_numpy(bool).any():
        return ""
    return "flagged: off the law of the other runs; its readings do not enter the wall's fit"


def energy_line_is_cut(reduction: Reduction, run: str) -> bool:
    """Whether a run lies off the law and its velocity head dwarfs its fall, so that both lines on one axis show nothing."""
    lines = of_run(reduction.grade_lines, run)
    if not len(lines) or not flagged_words(reduction, run):
        return False
    hgl, egl = column(lines, "piezometric_head"), column(lines, "energy_head")
    return bool(np.isfinite(egl).all() and np.max(egl - hgl) > _DWARFS * max(float(np.ptp(hgl)), 1e-3))


def pipe_fits_the_scale(reduction: Reduction, run: str) -> bool:
    """Whether the pipe can share the scale of the heads: they come near it, or lie on a hill or dale.

    True where the grade lines take at least a sixth of the height that lines and pipe need together, or where the
    hydraulic grade line lies below the crown somewhere.
    """
    lines = of_run(reduction.grade_lines, run)
    if not len(lines):
        return False
    hgl, egl = column(lines, "piezometric_head"), column(lines, "energy_head")
    if energy_line_is_cut(reduction, run):
        egl = hgl
    axis, crown = column(lines, "elevation"), column(lines, "crown")
    if elevations_known(reduction) and np.any(hgl < crown):
        return True
    if not np.isfinite([*hgl, *egl, *axis]).all():
        return False
    own = max(float(egl.max() - hgl.min()), float(np.ptp(axis)))
    whole = float(max(egl.max(), axis.max()) - min(hgl.min(), axis.min()))
    return own >= whole / 6


def draw_grade_lines(
    ax: Axes,
    reduction: Reduction,
    run: str,
    *,
    with_pipe: bool = False,
    small: bool = False,
    display: Display = SI_DISPLAY,
) -> GradeLineArtists:
    """Draw a run's hydraulic and energy grade line with its readings, chainage to the right.

    A difference between two taps is a mark at the downstream one, as far below the fitted head upstream.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    reduction : Reduction
        Its tables ``grade_lines``, ``heads``, ``runs`` and ``layout`` are read.
    run : str
        Label of the run.
    with_pipe : bool
        Whether the pipe is drawn on the same axes, to the same scale.
    small : bool
        A panel among many: no legend, no labels beside the rings but the tap.
    display : Display
        Units of the axes.

    Returns
    -------
    GradeLineArtists
    """
    lines, heads = of_run(reduction.grade_lines, run), of_run(reduction.heads, run)
    heads = marks(reduction, lines, heads)
    fall = heads["tap_2"].notna().to_numpy(bool)
    scale, along = display.factor("head"), display.factor("chainage")
    x, y = column(heads, "chainage") * along, column(heads, "head") * scale
    used = heads["used"].fillna(False).to_numpy(bool)
    flags = heads["flag"].to_numpy(object)
    outlying = np.array([flag == "outlier" for flag in flags], bool)
    # Left out for what ails the tap: named as well, but not ringed.
    ailing = np.array([str(reason).startswith("left out: ") for reason in heads["reason"]], bool)
    size = 3.5 if small else 5.0

    cut = energy_line_is_cut(reduction, run)
    hgl = egl = band = below = None
    half_band = 0.0
    if len(lines):
        places = column(lines, "chainage") * along
        low_line, high_line = (column(lines, name) * scale for name in ("piezometric_head", "energy_head"))
        half = coverage_factor(reduction, run) * column(lines, "energy_head_u") * scale
        # Of a line that is cut off the band would be that of the velocity head, and hide the other.
        if np.isfinite(half).any() and not cut:
            half_band = float(np.nanmax(half))
            band = ax.fill_between(
                places,
                low_line - half,
                low_line + half,
                color=COLOURS["sky blue"],
                alpha=0.4,
                linewidth=0,
                label=f"{100 * reduction.level:.3g} % band",
                zorder=1.5,
            )
        egl = Line2D(
            places, high_line, color=COLOURS["black"], linewidth=1.1, linestyle=(0, (5, 2)), label="EGL"
        )
        # As a mere artist it does not stretch the axis.
        (ax.add_artist if cut else ax.add_line)(egl)
        if cut:
            _tell_cut(ax, float(np.max(high_line - low_line)), display, small=small)
        (hgl,) = ax.plot(places, low_line, color=COLOURS["blue"], linewidth=1.4, label="HGL")
        crown = column(lines, "crown") * scale
        if with_pipe and elevations_known(reduction) and np.any(low_line < crown):
            below = ax.fill_between(
                places,
                low_line,
                crown,
                where=low_line < crown,
                interpolate=True,
                facecolor="none",
                edgecolor=RING,
                hatch="////",
                linewidth=0,
                label="HGL below crown",
            )
    steps = draw_falls(ax, heads[fall], along, scale)
    drawn = draw_readings(
        ax,
        x,
        y,
        used=used,
        flagged=outlying,
        fall=fall,
        size=size,
        words="reading used for S" if flagged_words(reduction, run) else "reading used",
    )
    labels: list[Annotation] = []
    pipe = draw_pipe(ax, reduction, run, display=display) if with_pipe else None
    if pipe is not None:  # room for the names of the taps under the lowest part of the pipe
        low, high = ax.get_ylim()
        ax.set_ylim(low - (0.08 if pipe.name_rows < 2 else 0.13) * (high - low), high)
    at_rest = not _flows(reduction, run)
    span = float(np.ptp(x)) if x.size else 0.0
    _least_height(ax, max(0.01 * scale, 2e-4 * span / along * scale))
    if at_rest and not small and np.isfinite(y).any() and np.nanmax(y) - np.nanmin(y) < 1e-6 * scale:
        ax.text(
            0.5,
            0.08,
            "the offsets were taken from this run: its levels agree by construction",
            transform=ax.transAxes,
            ha="center",
            fontsize=8.5,
            color=MUTED,
        )
    named = outlying | (ailing & np.isfinite(y))
    if named.any():
        labels = _ring_labels(
            ax,
            heads[named],
            x[named],
            y[named],
            lines=(hgl, hgl if cut else egl),
            small=small,
            with_pipe=with_pipe,
        )
    rows = 0
    if not small:
        handles: list[Artist | None] = [
            band if _visible(ax, half_band) else None,
            hgl,
            None if cut else egl,
            drawn.used,
            drawn.falls,
            drawn.left_out,
            drawn.flagged,
            below,
        ]
        if pipe is not None:
            handles += [pipe.axis, pipe.fittings]
        rows = _furnish(
            ax,
            display,
            [artist for artist in handles if artist is not None],
            words=head_axis(reduction, display),
            flowing=not at_rest,
        )
    return GradeLineArtists(
        hgl,
        egl,
        band,
        below,
        drawn.used,
        drawn.falls,
        steps,
        drawn.left_out,
        drawn.flagged,
        tuple(labels),
        pipe,
        rows,
    )


def _tell_cut(ax: Axes, rise: float, display: Display, *, small: bool) -> None:
    """Say in a corner how far above the axis the energy line lies, in its unit."""
    where = f"the EGL lies {format_number(rise, 3)} {display.unit('head')} above and is cut off"
    ax.text(
        0.02,
        0.955,
        "EGL cut off" if small else where,
        transform=ax.transAxes,
        va="center",
        fontsize=7 if small else 8.5,
        color=MUTED,
    )


def _visible(ax: Axes, half: float) -> bool:
    """Whether a band of that half-width stands out from its line by a pixel (1/96 inch) or more."""
    low, high = ax.get_ylim()
    pixels = ax.bbox.height / ax.figure.dpi * 96
    line = 1.4 * 96 / 72
    return 2 * half / (high - low) * pixels > line + 1.0


def _flows(reduction: Reduction, run: str) -> bool:
    return bool((of_run(reduction.runs, run)["regime"] != "static").any())


def _least_height(ax: Axes, least: float) -> None:
    """Give the axis a least height, so that a line at rest looks neither like a storm nor like a dot."""
    low, high = ax.dataLim.intervaly
    if np.isfinite([low, high]).all() and high - low < least:
        middle = (low + high) / 2
        ax.set_ylim(middle - 0.6 * least, middle + 0.6 * least)


def _ring_labels(
    ax: Axes,
    heads: pd.DataFrame,
    x: Array,
    y: Array,
    *,
    lines: tuple[Line2D | None, Line2D | None],
    small: bool,
    with_pipe: bool,
) -> list[Annotation]:
    """Tap and reason of each ringed reading, clear of the lines.

    Above the energy line for readings that are too high, below the hydraulic line for the others. The pipe lies
    below, so there they all go above.
    """
    size = 7.5 if small else 8.5
    left, right = ax.get_xlim()
    low, high = ax.get_ylim()
    width, height = (side * 72 / ax.figure.dpi for side in (ax.bbox.width, ax.bbox.height))
    places = np.asarray(lines[0].get_xdata(), float) if lines[0] is not None else x
    under, over = (np.asarray(line.get_ydata(), float) if line is not None else y for line in lines)
    # the axis grows to make room, so a point is worth more than now
    point = (high - low) / height * (1.35 if small else 1.25)
    counts = {True: 0, False: 0}
    labels = []
    for n, head in enumerate(heads.to_dict("records")):
        text = shorten(head["tap"], 14)
        if not small and head["reason"]:
            # "left out: datum offset" goes on from the tap's name; of an outlier only the reason is told.
            joint = " " if head["flag"] == "excluded" else ": "
            text = f"{text}{joint}{shorten(head['reason'], 52)}"
        up = with_pipe or not head["residual"] < 0
        wide = 0.56 * size * len(text) / width * (right - left)
        start = min(x[n], right - wide) if up else max(x[n] - wide, left)
        span = (places >= start) & (places <= start + wide)
        ends = np.array([start, start + wide, x[n]])
        line = np.concatenate(
            [np.interp(ends, places, over if up else under), (over if up else under)[span], y[n : n + 1]]
        )
        shift = (9 + 1.4 * size * counts[up]) * point
        counts[up] += 1
        labels.append(
            ax.annotate(
                text,
                (x[n], y[n]),
                xytext=(start, np.nanmax(line) + shift if up else np.nanmin(line) - shift),
                textcoords="data",
                ha="left",
                va="bottom" if up else "top",
                fontsize=size,
                color=INK,
                zorder=5,
                arrowprops={
                    "arrowstyle": "-",
                    "color": RING,
                    "linewidth": 0.8,
                    "shrinkA": 0,
                    "shrinkB": 5,
                    "relpos": ((x[n] - start) / wide if wide else 0.0, 0 if up else 1),
                },
            )
        )
    heights = [label.xyann[1] for label in labels]
    room = 1.6 * size * point
    ax.set_ylim(min(low, min(heights) - room), max(high, max(heights) + room))
    return labels


def _furnish(ax: Axes, display: Display, handles: list[Artist], *, words: str, flowing: bool) -> int:
    low, high = ax.get_ylim()
    ax.set_ylim(low, high + 0.11 * (high - low))
    ax.locator_params(axis="y", nbins=6)
    ax.set_xlabel(display.head("chainage x", "chainage"))
    ax.set_ylabel(words)
    if flowing:
        ax.annotate(
            "",
            xy=(0.995, 0.955),
            xytext=(0.905, 0.955),
            xycoords="axes fraction",
            arrowprops={"arrowstyle": "-|>", "color": MUTED, "linewidth": 1.2},
        )
        ax.text(
            0.895, 0.955, "flow", transform=ax.transAxes, ha="right", va="center", fontsize=9, color=MUTED
        )
    return legend_above(ax, handles)
