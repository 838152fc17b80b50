"""The marks of a run's readings among its grade lines: used, left out, flagged."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from gradeline.report.figures.pipe import Array
from gradeline.report.figures.style import COLOURS, INK

__all__ = ["RING", "ReadingMarks", "draw_readings"]

RING = COLOURS["vermilion"]
Mask = NDArray[np.bool_]
#: A diamond is as large as to be seen behind a head that was read at the same tap.
_DIAMOND = 1.4


@dataclass(frozen=True)
class ReadingMarks:
    """What `draw_readings` drew, None where there is nothing of that kind: in the order of a legend."""

    used: Line2D | None
    falls: Line2D | None
    left_out: Line2D | None
    flagged: Line2D | None


def draw_readings(
    ax: Axes,
    x: Array,
    y: Array,
    *,
    used: Mask,
    flagged: Mask,
    fall: Mask,
    size: float,
    words: str = "reading used",
) -> ReadingMarks:
    """Mark the readings of a run.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    x, y : (n,) array
        Places and heads, in the units of the axes.
    used, flagged, fall : (n,) bool array
        Which are in the fit, which are outliers, which are differences between two taps.
    size : float
        Of a mark, points.
    words : str
        What the legend says of the heads that are in the fit.

    Returns
    -------
    ReadingMarks
        Heads as circles, differences as diamonds; filled where used, rings around the flagged ones.
    """

    def marks(mine: Mask, colour: str, words: str, *, diamonds: bool, filled: bool = True) -> Line2D | None:
        if not mine.any():
            return None
        (drawn,) = ax.plot(
            x[mine],
            y[mine],
            "D" if diamonds else "o",
            markersize=_DIAMOND * size if diamonds else size,
            color=colour,
            markerfacecolor=colour if filled else "white",
            label=words,
            zorder=2.9 if diamonds else 3,
        )
        return drawn

    out = ~used & np.isfinite(y)
    heads = marks(used & ~fall, COLOURS["blue"], words, diamonds=False)
    falls = marks(used & fall, COLOURS["green"], "fall from the tap upstream", diamonds=True)
    left_out = [
        marks(out & of, INK, "left out", diamonds=diamonds, filled=False)
        for of, diamonds in ((~fall, False), (fall, True))
    ]
    rings = None
    if flagged.any():
        (rings,) = ax.plot(
            x[flagged],
            y[flagged],
            "o",
            markersize=(2.3 if not (flagged & fall).any() else 2.8) * size,
            markerfacecolor="none",
            markeredgecolor=RING,
            markeredgewidth=1.6,
            label="flagged",
            zorder=4,
        )
    return ReadingMarks(heads, falls, left_out[0] or left_out[1], rings)
