"""Labels of the runs in a figure, clear of marks, bars, laws and each other."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import numpy.typing as npt
from matplotlib.axes import Axes
from matplotlib.container import ErrorbarContainer
from matplotlib.lines import Line2D
from matplotlib.text import Annotation

from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import COLOURS, INK, shorten

__all__ = ["drawn_lines", "flagged_runs", "run_labels"]

_Array = npt.NDArray[np.float64]
_NAMED_RUNS = 20
_LABEL_SIZE = 8
#: Where the label of a run may stand about its mark, the best place first: to the right or left, up or down.
_LABEL_PLACES = ((1, 1), (1, -1), (-1, -1), (-1, 1), (1, 0), (-1, 0))


def flagged_runs(reduction: Reduction) -> list[str]:
    """Return the runs that a flag calls off the law of the others."""
    flags = reduction.flags
    return list(dict.fromkeys(flags["run"][(flags["kind"] == "run").to_numpy(bool)]))


def run_labels(
    ax: Axes,
    reduction: Reduction,
    reynolds: _Array,
    factor: _Array,
    seen: npt.NDArray[np.bool_],
    lines: list[tuple[_Array, _Array]],
) -> tuple[tuple[Annotation, ...], Line2D | None]:
    """Name the runs, all of them where they are few, else the flagged ones; ring the flagged ones.

    Parameters
    ----------
    ax : Axes
        With its limits set.
    reduction : Reduction
        Its tables ``runs`` and ``flags`` are read.
    reynolds, factor : (n,) array
        Where each row of ``runs`` stands.
    seen : (n,) bool array
        Which of them are drawn.
    lines : list of pairs of arrays
        What the labels keep clear of beside the marks, as `drawn_lines` gives it.

    Returns
    -------
    tuple of Annotation, Line2D or None
        The labels and the rings.
    """
    names = reduction.runs["run"].to_numpy(object)
    flagged = set(flagged_runs(reduction))
    ringed = np.array([name in flagged for name in names], bool) & seen
    ring = None
    if ringed.any():
        (ring,) = ax.plot(
            reynolds[ringed],
            factor[ringed],
            "o",
            markersize=12,
            markerfacecolor="none",
            markeredgecolor=COLOURS["vermilion"],
            markeredgewidth=1.6,
            label="run flagged",
            zorder=4,
        )
    wanted = seen if seen.sum() <= _NAMED_RUNS else ringed
    labels = []
    to_points = 72 / ax.figure.dpi
    x0, y0, x1, y1 = (side * to_points for side in ax.bbox.extents)
    # marks weigh more than what is drawn beside them; the labels that stand already join them one by one
    marks = _boxes(ax, reynolds[seen], factor[seen], 3.5)
    beside = np.concatenate([_boxes(ax, *line, 1.0) for line in lines] or [marks[:0]])
    for row in sorted(np.flatnonzero(wanted)[: 2 * _NAMED_RUNS], key=lambda row: reynolds[row]):
        x, y = ax.transData.transform((reynolds[row], factor[row])) * to_points
        if not (x0 - 1 <= x <= x1 + 1 and y0 - 1 <= y <= y1 + 1):
            continue
        text = shorten(names[row], 12)
        wide, tall, away = 0.6 * _LABEL_SIZE * len(text), 1.05 * _LABEL_SIZE, 9.0 if ringed[row] else 4.5
        choices = []
        for place, (across, up) in enumerate(_LABEL_PLACES):
            left = x + across * away - (wide if across < 0 else 0)
            low = y + up * away - (tall if up < 0 else tall / 2 if up == 0 else 0)
            box = np.array([left, low, left + wide, low + tall])
            outside = box[0] < x0 or box[2] > x1 or box[1] < y0 or box[3] > y1
            cost = 100 * outside + 10 * _hits(box, marks) + min(_hits(box, beside), 8)
            choices.append((cost, place, across, up, box))
        _, _, across, up, box = min(choices, key=lambda choice: choice[:2])
        marks = np.vstack([marks, box])
        labels.append(
            ax.annotate(
                text,
                (reynolds[row], factor[row]),
                xytext=(across * away, up * away),
                textcoords="offset points",
                ha="left" if across > 0 else "right",
                va={1: "bottom", 0: "center", -1: "top"}[up],
                fontsize=_LABEL_SIZE,
                color=INK,
                zorder=5,
            )
        )
    return tuple(labels), ring


def _boxes(ax: Axes, x: _Array, y: _Array, half: float) -> _Array:
    """Boxes (left, low, right, high) of a half-width about places on the axes, all in points."""
    at = ax.transData.transform(np.column_stack([x, y])) * 72 / ax.figure.dpi
    return np.hstack([at - half, at + half])


def _hits(box: _Array, others: _Array) -> int:
    """How many of the others a box overlaps."""
    return int(
        np.count_nonzero((box[:2] < others[:, 2:]).all(axis=1) & (others[:, :2] < box[2:]).all(axis=1))
    )


def drawn_lines(
    drawn: dict[tuple[str, str], ErrorbarContainer], laws: Iterable[Line2D | None]
) -> list[tuple[_Array, _Array]]:
    """Places along the laws and the bars, close enough together that no label slips between them."""
    found = []
    for law in laws:
        if law is not None:
            x, y = (np.asarray(data, float) for data in law.get_data())
            fine = np.geomspace(x[0], x[-1], 80)
            found.append((fine, np.exp(np.interp(np.log(fine), np.log(x), np.log(y)))))
    for container in drawn.values():
        for bars in container.lines[2]:
            for (x, low), (_, high) in bars.get_segments():
                found.append((np.full(12, x), np.geomspace(low, high, 12)))
    return found
