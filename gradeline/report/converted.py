"""Sentences that a reduction wrote in SI units, in the units of the reader: the same words, other numbers."""

from __future__ import annotations

import dataclasses
import re
from collections.abc import Iterable

import pandas as pd

from gradeline.quantities.printing import SI_DISPLAY, Display, format_number
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES, Reduction

__all__ = ["converted", "converted_sentences", "converted_text"]

#: What a unit of the reduction's sentences measures.
_QUANTITIES = {
    "m": "length",
    "mm": "small head",
    "L/s": "flow",
    "m/s": "velocity",
    "°C": "temperature",
    "K": "temperature difference",
    "kPa": "pressure",
    "mm/m": "slope",
    "m/s²": "gravity",
    "kg/m³": "density",
    "mm²/s": "kinematic viscosity",
    "mPa s": "viscosity",
}
_NUMBER = r"[−-]?\d+(?:[\u202f \u00a0]\d{3})*(?:\.\d+)?(?:×10[⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+)?"
_QUANTITY = re.compile(
    rf"(?<![\w.])(?P<open>\(?)(?P<numbers>{_NUMBER}(?:(?: ± | to | and (?=[\d.]+ ?[mk°L])){_NUMBER})*)(?P<close>\)?)"
    rf"[ \u00a0](?P<unit>{'|'.join(sorted(map(re.escape, _QUANTITIES), key=len, reverse=True))})(?![\w/²³^])"
)
_POWERS = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")
#: Columns that hold sentences; the others hold labels, which stay as they are.
_SENTENCES = frozenset({"reason", "note", "suggestion", "text", "caution", "fate", "diagnosis"})
#: Columns that hold labels.
_LABELS = frozenset({"run", "reach", "wall", "fitting", "tap", "tap_2", "gauge", "name", "source"})


def converted(reduction: Reduction, display: Display) -> Reduction:
    """Return a reduction whose assumptions, cautions and reasons speak in the units of a reader.

    Parameters
    ----------
    reduction : Reduction
        As it was made; its numbers stay in SI.
    display : Display
        Units of the reader. With those of SI the reduction itself comes back.

    Returns
    -------
    Reduction
        What quotes the record (flagged readings and slips of the pen) stays in the units of the record.
    """
    if display is SI_DISPLAY:
        return reduction
    kept = _odd_labels(reduction)
    tables: dict[str, pd.DataFrame] = {}
    for name, columns in (*RESULT_TABLES.items(), *DRAWING_TABLES.items()):
        table = getattr(reduction, name)
        wanted = [column for column in columns if column in _SENTENCES]
        if name == "slips" or not wanted or not len(table):
            continue
        told = table.copy()
        for column in wanted:
            cells = [
                converted_text(cell, display, kept) if isinstance(cell, str) else cell
                for cell in table[column]
            ]
            told[column] = pd.Series(cells, index=table.index, dtype=object)
        if name == "flags":
            quoting = (table["kind"] == "reading").to_numpy(bool)
            told.loc[quoting, "suggestion"] = table.loc[quoting, "suggestion"]
        tables[name] = told
    return dataclasses.replace(
        reduction,
        assumptions=tuple(converted_text(text, display, kept) for text in reduction.assumptions),
        cautions=tuple(converted_text(text, display, kept) for text in reduction.cautions),
        **tables,  # type: ignore[arg-type]  # tables by their own names
    )


def _odd_labels(reduction: Reduction) -> tuple[str, ...]:
    """Labels that read like a quantity, such as a wall called '50 mm steel'."""
    found: set[str] = set()
    for name, columns in (*RESULT_TABLES.items(), *DRAWING_TABLES.items()):
        for column in columns:
            if column in _LABELS:
                found.update(label for label in getattr(reduction, name)[column] if isinstance(label, str))
    return tuple(sorted((label for label in found if _QUANTITY.search(label)), key=len, reverse=True))


def converted_sentences(sentences: Iterable[str], display: Display, labels: Iterable[object]) -> list[str]:
    """Return sentences in the units of a reader, labels that read like a quantity as they are; as given for SI.

    Examples
    --------
    >>> from gradeline.quantities.printing import US_DISPLAY
    >>> converted_sentences(["0.046 mm of wall '50 mm steel'."], US_DISPLAY, ["50 mm steel"])
    ["0.0018 in of wall '50 mm steel'."]
    """
    if display is SI_DISPLAY:
        return list(sentences)
    odd = sorted({str(one) for one in labels if _QUANTITY.search(str(one))}, key=len, reverse=True)
    return [converted_text(sentence, display, odd) for sentence in sentences]


def converted_text(text: str, display: Display, kept: Iterable[str] = ()) -> str:
    """Return a sentence with its quantities in the units of a reader, each with as many digits as it had.

    Parameters
    ----------
    text : str
        With SI units as the program prints them.
    display : Display
        Units of the reader.
    kept : iterable of str
        Labels that stay as they are, also where they read like a quantity.

    Examples
    --------
    >>> from gradeline.quantities.printing import US_DISPLAY
    >>> converted_text("between 3.05 m and 6.10 m the head falls by (1.0 ± 0.2) m", US_DISPLAY)
    'between 10.0 ft and 20.0 ft the head falls by (3.3 ± 0.7) ft'
    >>> converted_text("water near 15 °C in bores above 50 mm at 0.3 to 3 m/s", US_DISPLAY)
    'water near 59 °F in bores above 2.0 in at 0.98 to 9.8 ft/s'
    """

    def shown(match: re.Match[str]) -> str:
        quantity = _QUANTITIES[match["unit"]]
        parts = re.split(r"( ± | to | and )", match["numbers"])
        told = "".join(
            part
            if place % 2
            else _number(part, quantity, display, spread=place > 0 and parts[place - 1] == " ± ")
            for place, part in enumerate(parts)
        )
        return f"{match['open']}{told}{match['close']} {display.unit(quantity)}"

    labels = "|".join(re.escape(label) for label in kept)
    pattern = re.compile(f"(?P<label>{labels})|{_QUANTITY.pattern}") if labels else _QUANTITY
    return pattern.sub(lambda match: match["label"] if labels and match["label"] else shown(match), text)


def _number(text: str, quantity: str, display: Display, *, spread: bool) -> str:
    """One number in the unit of the reader, to as many digits as it had, two at least for what is no uncertainty."""
    bare = re.sub(r"[\u202f \u00a0]", "", text).replace("−", "-")
    mantissa, _, power = bare.partition("×10")
    value = float(mantissa) * 10.0 ** int(power.translate(_POWERS) or 0)
    in_si = _from_shown(value, quantity, spread=spread)
    factor = display.factor(quantity)
    other = in_si * factor if spread else display.value(quantity, in_si)
    digits = len(re.sub(r"^0+", "", mantissa.lstrip("-").replace(".", ""))) or 1
    if quantity == "temperature" and not spread:
        decimals = len(mantissa.partition(".")[2])
        return f"{other:.{decimals}f}".replace("-", "−")
    return format_number(other, digits if spread else max(digits, 2))


def _from_shown(value: float, quantity: str, *, spread: bool) -> float:
    """A number in the unit of the program's own sentences in SI."""
    factor, offset = SI_DISPLAY.factor(quantity), SI_DISPLAY.units[quantity].offset
    return value / factor if spread else (value - offset) / factor
