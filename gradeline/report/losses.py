"""What the page says of fitted loss coefficients beside their value: taps, published value, trend over Re."""

from __future__ import annotations

import re
from typing import Any

from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    Display,
    format_interval,
    format_number,
    rounded,
    thousands,
)
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import (
    PrintedTable,
    Row,
    TableColumn,
    count,
    known,
    lay_out,
    name_column,
    records,
)

__all__ = [
    "equivalent_length_uncertainties",
    "is_unlisted",
    "loss_sentence",
    "loss_table",
    "not_told_from_zero",
]

_UNLISTED = re.compile(r"unlisted loss [\d.]+–[\d.]+ m")


def equivalent_length_uncertainties(reduction: Reduction) -> dict[str, float]:
    """Return the standard uncertainty of the equivalent length of each fitted loss, m, by its fitting."""
    table = reduction.losses
    return {
        str(name): float(u)
        for name, u in zip(table["fitting"], table["equivalent_length_u"], strict=True)
        if known(u)
    }


def is_unlisted(fitting: str) -> bool:
    """Tell whether a fitted loss is one that the readings showed, by the name that it has then."""
    return _UNLISTED.fullmatch(fitting) is not None


def loss_table(reduction: Reduction) -> PrintedTable:
    """Return the fitted losses with their taps, the published value of their kind and their trend over Re."""
    return lay_out(
        "Fitted losses. Taps are the usable ones on either side, as far as the next fitted loss. The published K has a range, "
        "by which fittings of the kind and handbooks differ. The trend is the change of K per decade of Re.",
        records(reduction.losses),
        [
            name_column("fitting"),
            TableColumn("taps upstream", lambda row: count(row["taps_upstream"])),
            TableColumn("taps downstream", lambda row: count(row["taps_downstream"])),
            TableColumn("runs used", lambda row: count(row["runs_used"])),
            TableColumn("weighted mean Re", lambda row: thousands(row["reynolds"], 2)),
            TableColumn("trend of K per decade", lambda row: rounded(row["trend"], row["trend_u"])),
            TableColumn("trend p", lambda row: _probability(row["trend_p"]), always=False),
            TableColumn("published K", _published, always=False),
            name_column("published_for", "of a", always=False),
            TableColumn("K against it", lambda row: row["verdict"] or MISSING, text=True, always=False),
            name_column("source", always=False),
        ],
        note="note",
    )


def _probability(p: float | None) -> str:
    if not known(p):
        return MISSING
    return "< 0.001" if p < 1e-3 else f"{p:.2g}"  # type: ignore[operator]  # known


def _published(row: Row) -> str:
    if not known(row["published"]):
        return MISSING
    between = format_interval(row["published_low"], row["published_high"])
    return f"{format_number(row['published'], 2)} ({between})"


def not_told_from_zero(fitting: Row) -> bool:
    """Tell whether the interval of a K reaches to zero or below, and that of a negative one above."""
    low, high = fitting["loss_coefficient_low"], fitting["loss_coefficient_high"]
    return known(low) and known(high) and low <= 0 <= high


def loss_sentence(
    fitting: dict[str, Any], beside: Row | None, words: str, display: Display = SI_DISPLAY
) -> str:
    """Return what follows the value of a K: its equivalent length, the published value, whether it goes with Re.

    Parameters
    ----------
    fitting : dict
        A row of ``fittings``.
    beside : mapping or None
        The row of ``losses`` of the same fitting; None where K was given.
    words : str
        The sentence so far, without its full stop.
    display : Display
        Units of the reader.
    """
    if beside is None:
        return f"{words}."
    if not_told_from_zero(fitting):
        words += "; faster runs or steadier readings would tell"
    elif known(fitting["equivalent_length"]):
        length = display.text(
            "length", fitting["equivalent_length"], beside["equivalent_length_u"], digits=2, unit=True
        )
        words += f", as much as {length} of straight pipe in the fastest run"
    words += "."
    if beside["verdict"]:
        of = f"the {format_number(beside['published'], 2)} published for a {beside['published_for']}"
        room = f"({format_interval(beside['published_low'], beside['published_high'])} by handbook and make)"
        words += {
            "above": f" It lies above {of} {room}.",
            "below": f" It lies below {of} {room}.",
        }.get(beside["verdict"], f" It is not distinguishable from {of} {room}.")
    if beside["depends_on_reynolds"]:
        way = "falls" if beside["trend"] < 0 else "rises"
        words += (
            f" It {way} with Re, by {rounded(abs(beside['trend']), beside['trend_u'])} per decade: the value is that of "
            f"runs near Re {thousands(beside['reynolds'], 2)}."
        )
    return words
