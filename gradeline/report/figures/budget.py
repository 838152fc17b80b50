"""The uncertainty budget as bars: for each value, what share of its variance every input adds."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.container import BarContainer
from matplotlib.figure import Figure
from matplotlib.text import Text

from gradeline.reduction.tables import Reduction
from gradeline.report.figures.style import COLOURS, INK, MUTED, shorten
from gradeline.report.uncertainty import BudgetedValue, budgeted_values, ordered_inputs

__all__ = ["BudgetArtists", "budget_alt", "budget_figure", "draw_budget"]

#: Panels in a row, and panels at most.
_ACROSS, MOST_VALUES = 3, 12
_WIDTH, _BAR = 5.6, 0.235
#: Most letters of an input's name, and the breadth of one in inches.
_LETTERS, _LETTER = 28, 0.069


@dataclass(frozen=True)
class BudgetArtists:
    """What `draw_budget` drew.

    Parameters
    ----------
    bars : BarContainer
        One bar an input, from above, as long as its share of the variance in %.
    labels : tuple of Text
        The share at the end of each bar that is there.
    """

    bars: BarContainer
    labels: tuple[Text, ...]


def draw_budget(
    ax: Axes, value: BudgetedValue, inputs: Sequence[str], *, names: bool = True
) -> BudgetArtists:
    """Draw the budget of one value.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    value : BudgetedValue
        Whose shares.
    inputs : sequence of str
        Rows, from above.
    names : bool
        Whether the rows are named on the axis.

    Returns
    -------
    BudgetArtists
        The largest share is drawn darker.
    """
    shares = np.array([100.0 * value.shares.get(name, 0.0) for name in inputs])
    places = np.arange(len(inputs))
    largest = shares.argmax() if len(shares) else -1
    bars = ax.barh(
        places,
        shares,
        height=0.62,
        color=[COLOURS["blue"] if n == largest else COLOURS["sky blue"] for n in places],
        zorder=2,
    )
    labels = tuple(
        ax.text(
            share + 2.5,
            float(place),
            f"{share:.0f}" if share >= 0.5 else "< 0.5",
            va="center",
            fontsize=8.5,
            color=INK if place == largest else MUTED,
            fontweight="bold" if place == largest else "normal",
        )
        for place, share, name in zip(places, shares, inputs, strict=True)
        if name in value.shares
    )
    ax.set_xlim(0, 122)
    ax.set_xticks([0, 50, 100])
    ax.set_ylim(len(inputs) - 0.4, -0.6)
    ax.set_yticks(places, [shorten(name, _LETTERS) for name in inputs] if names else [""] * len(inputs))
    ax.tick_params(axis="y", length=0)
    ax.grid(visible=False, axis="y")
    symbol, _, subject = value.name.partition(", ")
    ax.set_title(f"{shorten(symbol, 22)}\n{shorten(subject, 25)}", fontsize=8.5, fontweight="normal", pad=4)
    return BudgetArtists(bars, labels)


def budget_figure(reduction: Reduction) -> Figure:
    """Return the budgets of all values that are shown, three panels in a row with common rows."""
    values = budgeted_values(reduction)[:MOST_VALUES]
    inputs = ordered_inputs(values)
    rows = -(-len(values) // _ACROSS)
    across = min(len(values), _ACROSS)
    body, above, between = _BAR * len(inputs) + 0.1, 0.74, 0.56
    height = above + rows * body + (rows - 1) * between + 0.46
    figure = Figure(figsize=(_WIDTH, height))
    figure.text(
        0.012,
        1 - 0.07 / height,
        "Where the uncertainty comes from",
        fontsize=10.5,
        fontweight="bold",
        va="top",
    )
    gap = 0.16
    names = 0.2 + _LETTER * min(max(map(len, inputs)), _LETTERS)
    breadth = (_WIDTH - names - 0.12 - gap * (_ACROSS - 1)) / _ACROSS
    for n, value in enumerate(values):
        row, column = divmod(n, _ACROSS)
        left = names + column * (breadth + gap)
        bottom = height - above - row * (body + between) - body
        ax = figure.add_axes((left / _WIDTH, bottom / height, breadth / _WIDTH, body / height))
        draw_budget(ax, value, inputs, names=column == 0)
        if n + across < len(values):
            ax.tick_params(axis="x", labelbottom=False)
        else:
            ax.set_xlabel("share of variance (%)", fontsize=8.5)
    return figure


def budget_alt(reduction: Reduction) -> str:
    """Return the figure in words: of each value the two inputs that add most."""
    words = []
    for value in budgeted_values(reduction)[:MOST_VALUES]:
        first = sorted(value.shares.items(), key=lambda item: -item[1])[:2]
        words.append(f"{value.name}: " + ", ".join(f"{name} {100 * share:.0f} %" for name, share in first))
    return f"Bars of each input's share of the variance. {'; '.join(words)}."
