"""Labels of lines at their left ends, beside the picture's lines and clear of each other."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.text import Annotation
from numpy.typing import NDArray

from gradeline.report.figures.style import INK, MUTED

__all__ = ["label_left_ends", "spread"]

#: Least distance of two labels, as a share of the picture's height.
_APART = 0.042
#: Room for labels on the left, as a share of the picture's width.
_ROOM = 0.16
#: A label moved by more than this share of the height is tied to its line.
_MOVED = 0.012


def spread(wanted: Sequence[float], apart: float, low: float, high: float) -> NDArray[np.float64]:
    """Return heights at least `apart` from each other between `low` and `high`, as near as can be to those wanted.

    Parameters
    ----------
    wanted : sequence of float
        Heights, in any order.
    apart, low, high : float
        In the same unit. Where there is too little room the distance shrinks.

    Examples
    --------
    >>> spread([0.5, 0.52, 0.1], 0.1, 0.0, 1.0).round(2).tolist()
    [0.46, 0.56, 0.1]
    """
    order = np.argsort(np.asarray(wanted, dtype=float), kind="stable")
    count = len(order)
    apart = min(apart, (high - low) / max(count - 1, 1))
    # Groups that touch stand about the middle of what their members want (pooling of neighbours that violate the order).
    groups: list[tuple[float, int]] = []
    for place, n in enumerate(order):
        total, size = float(wanted[n]) - place * apart, 1
        while groups and groups[-1][0] / groups[-1][1] >= total / size:
            before, others = groups.pop()
            total, size = total + before, size + others
        groups.append((total, size))
    at = np.concatenate([np.full(size, total / size) for total, size in groups]) if groups else np.zeros(0)
    at = np.clip(at, low, high - (count - 1) * apart) + apart * np.arange(count)
    found = np.empty(count)
    found[order] = at
    return found


def label_left_ends(ax: Axes, lines: Sequence[Line2D], names: Sequence[str]) -> tuple[Annotation, ...]:
    """Write a name left of the first point of each line; a label that had to move is tied to its line.

    Parameters
    ----------
    ax : Axes
        Its limits are widened on the left.
    lines : sequence of Line2D
        In data coordinates.
    names : sequence of str
        One a line.

    Returns
    -------
    tuple of Annotation
        In the order of the lines.
    """
    if not lines:
        return ()
    left, right = ax.get_xlim()
    bottom, top = ax.get_ylim()
    room = _ROOM * (right - left)
    starts = [np.asarray(line.get_xydata(), dtype=float)[0] for line in lines]
    wanted = [(float(start[1]) - bottom) / (top - bottom) for start in starts]
    heights = spread(wanted, _APART, 0.02, 0.98)
    first = min(float(start[0]) for start in starts)
    ax.set_xticks(
        [tick for tick in ax.get_xticks() if first - 1e-9 <= tick <= right]
    )  # none under the labels
    ax.set_xlim(min(left, first - room), right)
    found = []
    for start, name, at, height in zip(starts, names, wanted, heights, strict=True):
        moved = abs(height - at) > _MOVED
        found.append(
            ax.annotate(
                name,
                (float(start[0]), float(start[1])),
                xytext=(first - 0.22 * room, bottom + float(height) * (top - bottom)),
                ha="right",
                va="center",
                fontsize=8,
                color=INK,
                arrowprops={
                    "arrowstyle": "-",
                    "color": MUTED,
                    "linewidth": 0.6 if moved else 0.0,
                    "relpos": (1.0, 0.5),
                    "shrinkA": 1,
                    "shrinkB": 1,
                },
            )
        )
    return tuple(found)
