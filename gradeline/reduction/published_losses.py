"""What was published of a fitting of the same kind, in the velocity head that its loss coefficient refers to."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gradeline.fitting_kinds import fitting_kinds
from gradeline.hydraulics.local_losses import change_of_bore_loss_coefficient, fully_rough_loss_coefficient
from gradeline.reduction.line import Line

__all__ = ["Published", "compare", "published_loss"]


@dataclass(frozen=True)
class Published:
    """A published loss coefficient.

    Parameters
    ----------
    value, low, high : float
        K, and how far fittings of the kind and handbooks differ from it.
    described : str
        What it is of.
    source : str
        Where it was published.
    """

    value: float
    low: float
    high: float
    described: str
    source: str


def published_loss(line: Line, place: int) -> Published | None:
    """Return the published loss coefficient of a fitting's kind, None where none is held.

    Parameters
    ----------
    line : Line
        The layout.
    place : int
        Which of its fittings.
    """
    fitting = line.fittings[place]
    name = fitting.kind or ("change of bore" if fitting.change_of_bore else None)
    if name is None:
        return None
    last = len(line.diameter) - 1
    before, after = (
        int(np.clip(np.searchsorted(line.bounds, fitting.at, side=side) - 1, 0, last))
        for side in ("left", "right")
    )
    # The bore of the circle that has the area: what counts where the section changes.
    bores = np.sqrt(4 * line.area[[before, after]] / np.pi)
    if name == "change of bore":
        name = "sudden contraction" if bores[1] < bores[0] else "sudden expansion"
    kind = fitting_kinds()[name]
    if kind.coefficient is not None:
        value = kind.coefficient
    elif kind.rule is None:
        return None
    elif kind.rule.endswith("f_T"):
        value = float(fully_rough_loss_coefficient(float(kind.rule.split()[0]), bores.min()))
    else:
        value = float(change_of_bore_loss_coefficient(*bores))
    # Published values refer to the smaller bore; K goes with the square of the area.
    value *= float(line.area[line.reference[place]] / line.area[[before, after]].min()) ** 2
    room = kind.variation or 0.0
    return Published(
        value, value * (1 - room), value * (1 + room), kind.described or kind.name, kind.source or ""
    )


def compare(low: float, high: float, published: Published) -> str | None:
    """Return whether an interval of K lies above or below what was published, or cannot be told from it.

    Examples
    --------
    >>> valve = Published(0.15, 0.1, 0.2, "gate valve fully open", "a handbook")
    >>> compare(3.8, 4.2, valve), compare(0.1, 0.3, valve)
    ('above', 'not distinguishable')
    """
    if not (np.isfinite(low) and np.isfinite(high)):
        return None
    return "above" if low > published.high else "below" if high < published.low else "not distinguishable"
