"""One look for every figure: colours, sizes, ticks on log axes, and labels that do not run into each other."""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from typing import Any, cast

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.ticker import FixedFormatter, FixedLocator, NullFormatter, NullLocator

__all__ = [
    "COLOURS",
    "INK",
    "MUTED",
    "RC",
    "REACH_COLOURS",
    "REGIME_COLOURS",
    "REGIME_MARKERS",
    "clean",
    "legend_above",
    "log_ticks",
    "one_two_five",
    "rows_for_labels",
    "short_names",
    "shorten",
    "styled",
]

#: The colours of Okabe and Ito (2008), told apart with every common kind of colour vision.
COLOURS = {
    "black": "#000000",
    "orange": "#E69F00",
    "sky blue": "#56B4E9",
    "green": "#009E73",
    "yellow": "#F0E442",
    "blue": "#0072B2",
    "vermilion": "#D55E00",
    "purple": "#CC79A7",
}
INK = "#1f2933"
MUTED = "#5b6670"
REACH_COLOURS = (COLOURS["blue"], COLOURS["green"], COLOURS["purple"], COLOURS["orange"], COLOURS["sky blue"])
REGIME_COLOURS = {
    "laminar": COLOURS["green"],
    "critical": COLOURS["orange"],
    "turbulent": COLOURS["blue"],
    "static": MUTED,
}
REGIME_MARKERS = {"laminar": "s", "critical": "D", "turbulent": "o", "static": "^"}

#: Everything that decides how a figure looks and that its bytes are the same every time.
RC: dict[str, Any] = {
    "axes.edgecolor": MUTED,
    "axes.grid": True,
    "axes.labelcolor": INK,
    "axes.labelsize": 9.5,
    "axes.linewidth": 0.8,
    "axes.spines.right": False,
    "axes.spines.top": False,
    "axes.titlelocation": "left",
    "axes.titlesize": 10.5,
    "axes.titleweight": "bold",
    "axes.axisbelow": True,
    "axes.formatter.useoffset": False,
    "axes.unicode_minus": True,
    "figure.facecolor": "white",
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans", "Verdana", "Arial", "Helvetica", "sans-serif"],
    "font.size": 9.5,
    "grid.color": "#e3e7ea",
    "grid.linewidth": 0.7,
    "hatch.linewidth": 0.6,
    "legend.fontsize": 8.5,
    "legend.frameon": False,
    "path.simplify": True,
    "svg.fonttype": "none",
    "text.color": INK,
    "text.hinting": "none",
    "text.parse_math": False,
    "xtick.color": MUTED,
    "xtick.labelcolor": INK,
    "xtick.labelsize": 9,
    "ytick.color": MUTED,
    "ytick.labelcolor": INK,
    "ytick.labelsize": 9,
}

#: Ticks in a decade of a log axis, from coarse to fine: the first that gives four is taken.
_STEPS: tuple[tuple[float, ...], ...] = (
    (1,),
    (1, 2, 5),
    (1, 1.5, 2, 3, 5, 7),
    (1, 1.2, 1.4, 1.6, 1.8, 2, 2.5, 3, 3.5, 4, 5, 6, 7, 8, 9),
    tuple(step / 20 for step in range(20, 200)),
)
_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


@contextmanager
def styled(**more: Any) -> Iterator[None]:
    """Draw in this look inside the context; the user's own matplotlib settings come back after it."""
    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(cast(Any, RC | more))
        yield


def clean(text: object) -> str:
    """Return a text from a file without characters that no picture can hold (control characters, line ends)."""
    return "".join(
        " " if unicodedata.category(letter) in ("Cc", "Cs", "Zl", "Zp") else letter for letter in str(text)
    )


def shorten(text: object, length: int) -> str:
    """Return a text of at most `length` letters, the last an ellipsis where some were left out.

    Examples
    --------
    >>> shorten("pressure tap behind the pump", 12)
    'pressure ta…'
    """
    plain = clean(text)
    return plain if len(plain) <= length else plain[: length - 1].rstrip() + "…"


def short_names(names: Sequence[str], length: int) -> list[str]:
    """Return names of at most `length` letters, first by dropping the words that all of them share.

    Examples
    --------
    >>> short_names(["chamber 7 east", "chamber 12 east"], 8), short_names(["T1", "T2"], 8)
    (['7', '12'], ['T1', 'T2'])
    """
    plain = [clean(name) for name in names]
    if len(plain) > 1 and max(map(len, plain)) > length:
        words = [name.split() for name in plain]
        fewest = min(map(len, words))
        front = back = 0
        while front < fewest - 1 and len({one[front] for one in words}) == 1:
            front += 1
        while back < fewest - 1 - front and len({one[-1 - back] for one in words}) == 1:
            back += 1
        plain = [" ".join(one[front : len(one) - back]) for one in words]
    return [shorten(name, length) for name in plain]


def one_two_five(low: float, high: float) -> list[float]:
    """Return ticks for a log axis: the coarsest of a few round series that puts four of them in the range.

    Examples
    --------
    >>> one_two_five(0.018, 0.07)
    [0.02, 0.03, 0.05, 0.07]
    >>> one_two_five(800, 7e4)
    [1000.0, 2000.0, 5000.0, 10000.0, 20000.0, 50000.0]
    """
    decades = range(math.floor(math.log10(low)), math.floor(math.log10(high)) + 1)
    ticks: list[float] = []
    for steps in _STEPS:
        ticks = [float(f"{step}e{decade}") for decade in decades for step in steps]
        ticks = [tick for tick in ticks if low * (1 - 1e-9) <= tick <= high * (1 + 1e-9)]
        if len(ticks) >= 4:
            return ticks
    # less than a twentieth of a decade: even steps do
    step = 10.0 ** math.floor(math.log10(high - low) - 0.3)
    while (high - low) / step > 8:
        step *= 2 if (high - low) / step <= 16 else 5
    first, last = math.ceil(low / step), math.floor(high / step)
    return [round(n * step, 12) for n in range(first, last + 1)]


def _tick_text(tick: float) -> str:
    if 1e-3 <= tick < 1e4:
        return f"{tick:.6g}"
    if 1e4 <= tick < 1e6:
        return f"{tick:,.0f}".replace(",", "\u202f")
    power = math.floor(math.log10(tick) + 1e-9)
    lead = f"{tick / 10.0**power:.3g}"
    return ("" if lead == "1" else f"{lead}×") + f"10{str(power).translate(_SUPERSCRIPT)}"


def _roomy(
    ticks: Sequence[float], texts: Sequence[str], low: float, high: float, length: float, *, across: bool
) -> list[bool]:
    """Which labels of a log axis, `length` points long, have room: the rounder ones come first."""

    def roundness(n: int) -> tuple[int, float]:
        lead = float(f"{ticks[n]:e}".partition("e")[0])
        return (0 if lead == 1 else 1 if lead in (2, 5) else 2 if lead in (3, 7) else 3), ticks[n]

    taken: list[tuple[float, float]] = []
    kept = [False] * len(ticks)
    for n in sorted(range(len(ticks)), key=roundness):
        centre = math.log(ticks[n] / low) / math.log(high / low) * length
        half = 0.33 * 9 * len(texts[n]) + 3 if across else 6.5
        if all(abs(centre - other) >= half + own for other, own in taken):
            taken.append((centre, half))
            kept[n] = True
    return kept


def log_ticks(ax: Axes, axis: str, low: float, high: float) -> None:
    """Make an axis logarithmic from `low` to `high` with a few plain ticks (no mathtext, no minor ticks)."""
    ticks = one_two_five(low, high)
    if axis == "x":
        ax.set_xscale("log")
        ax.set_xlim(low, high)
    else:
        ax.set_yscale("log")
        ax.set_ylim(low, high)
    one = ax.xaxis if axis == "x" else ax.yaxis
    one.set_major_locator(FixedLocator(ticks))
    texts = [_tick_text(tick) for tick in ticks]
    length = (ax.bbox.width if axis == "x" else ax.bbox.height) * 72 / ax.figure.dpi
    roomy = _roomy(ticks, texts, low, high, length, across=axis == "x")
    one.set_major_formatter(
        FixedFormatter([text if kept else "" for text, kept in zip(texts, roomy, strict=True)])
    )
    one.set_minor_locator(NullLocator())
    one.set_minor_formatter(NullFormatter())


def rows_for_labels(
    places: Iterable[float],
    labels: Iterable[str],
    *,
    width: float,
    low: float,
    high: float,
    size: float,
    rows: int,
) -> list[int | None]:
    """Deal labels along an axis into rows so that none touches its neighbour.

    Parameters
    ----------
    places : iterable of float
        Where each label is centred, in data units, ascending.
    labels : iterable of str
        The labels.
    width : float
        Width of the axis, points.
    low, high : float
        Limits of the axis, data units.
    size : float
        Font size, points.
    rows : int
        How many rows there are.

    Returns
    -------
    list of int or None
        The row of each label, None where none has room.

    Examples
    --------
    >>> rows_for_labels([0, 1, 50], ["T1", "T2", "T3"], width=100, low=0, high=100, size=9, rows=2)
    [0, 1, 0]
    """
    ends = [-math.inf] * rows
    dealt: list[int | None] = []
    for place, label in zip(places, labels, strict=True):
        half = 0.32 * size * max(len(label), 1)
        centre = (place - low) / (high - low) * width
        free = [row for row in range(rows) if centre - half > ends[row] + 0.35 * size]
        dealt.append(free[0] if free else None)
        if free:
            ends[free[0]] = centre + half
    return dealt


def _split(wide: list[float], columns: int) -> Iterator[list[float]]:
    """Deal entries into columns as a legend does: the first ones are longer by one where it does not come out even."""
    short, longer = divmod(len(wide), columns)
    at = 0
    for column in range(columns):
        size = short + (column < longer)
        yield wide[at : at + size]
        at += size


def legend_above(ax: Axes, handles: Sequence[Any], *, columns: int = 7) -> int:
    """Put a legend above the axes, on the left, where it hides no data; return how many rows it takes.

    It has as many columns as its words leave room for, `columns` at most.
    """
    if not handles:
        return 0
    size = 8.5
    room = ax.bbox.width * 72 / ax.figure.dpi
    wide = [(0.53 * len(str(handle.get_label())) + 1.7 + 0.5 + 1.2) * size for handle in handles]
    columns = min(columns, len(handles))
    while columns > 1 and sum(max(part) for part in _split(wide, columns)) > room:
        columns -= 1
    ax.legend(
        handles=list(handles),
        loc="lower left",
        bbox_to_anchor=(-0.012, 1.0),
        ncols=columns,
        borderaxespad=0.1,
        handletextpad=0.5,
        columnspacing=1.2,
        handlelength=1.7,
        borderpad=0.25,
        labelspacing=0.3,
        fontsize=size,
    )
    return -(-len(handles) // columns)
