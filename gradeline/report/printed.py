"""How a table of text is laid out from rows of a result table."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from gradeline.quantities.printing import MISSING

__all__ = [
    "PrintedTable",
    "Row",
    "TableColumn",
    "columns_of",
    "count",
    "known",
    "lay_out",
    "name_column",
    "percent",
    "records",
    "together",
    "truth",
]

Row = Mapping[str, Any]


@dataclass(frozen=True)
class PrintedTable:
    """A table of text.

    Parameters
    ----------
    caption : str
        What it holds and how to read it.
    heads : tuple of str
        Column heads with units.
    rows : tuple of tuple of str
        The cells. The first column names the row.
    text_columns : frozenset of int
        Columns that hold words, aligned on the left; the others hold numbers.
    notes : tuple of str
        What the numbers in the column "note" stand for, from 1 on.
    """

    caption: str
    heads: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    text_columns: frozenset[int]
    notes: tuple[str, ...] = ()


def records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table as dicts, a missing value of any kind as None."""
    columns = columns_of(table)
    return [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]


def columns_of(table: pd.DataFrame) -> dict[str, list[Any]]:
    """Return the columns of a table as lists of plain values, a missing value of any kind as None.

    Examples
    --------
    >>> columns_of(pd.DataFrame({"wall": ["steel", None], "roughness": [1e-5, float("nan")]}))
    {'wall': ['steel', None], 'roughness': [1e-05, None]}
    """
    return {str(name): _values(column) for name, column in table.items()}


def _values(column: pd.Series[Any]) -> list[Any]:
    # By kind of column: pandas' own test for missing values costs more than all else for the short tables of a survey.
    kind = column.dtype.kind if isinstance(column.dtype, np.dtype) else ""
    if kind in ("i", "u", "b"):
        return column.tolist()
    if kind == "f":
        return [None if value != value else value for value in column.tolist()]  # noqa: PLR0124 (NaN alone does so)
    return [
        None if missing else value
        for value, missing in zip(column.tolist(), column.isna().tolist(), strict=True)
    ]


def percent(level: float) -> str:
    """Return a level as a percentage.

    Examples
    --------
    >>> percent(0.95)
    '95 %'
    """
    return f"{100 * level:.4g} %"


def known(value: float | None) -> bool:
    """Return whether there is a finite value."""
    return value is not None and math.isfinite(value)


def truth(value: bool | None) -> str:
    """Return yes, no or an en dash."""
    return MISSING if value is None else "yes" if value else "no"


def count(value: float | None) -> str:
    """Return a whole number or an en dash."""
    return MISSING if not known(value) else f"{value:.0f}"


@dataclass(frozen=True)
class TableColumn:
    """A column of a printed table: its head, what makes a cell of a row, and whether it holds words.

    One that is not `always` shown is left out where every cell is missing.
    """

    head: str
    cell: Callable[[Row], str]
    text: bool = False
    always: bool = True


def lay_out(
    caption: str,
    rows: Sequence[Row],
    columns: Sequence[TableColumn],
    *,
    note: str | None = "reason",
    common_note: bool = False,
) -> PrintedTable:
    """Lay out rows; equal notes share a number. With `common_note`, one that all rows share joins the caption."""
    cells = [[column.cell(row) for row in rows] for column in columns]
    kept = [
        n for n, column in enumerate(columns) if column.always or any(cell != MISSING for cell in cells[n])
    ]
    heads = [columns[n].head for n in kept]
    body = [cells[n] for n in kept]
    words = {place for place, n in enumerate(kept) if columns[n].text}
    notes: dict[str, int] = {}
    texts = [_of_this_version(row.get(note)) for row in rows] if note is not None else []
    if common_note and len(texts) > 1 and texts[0] and len(set(texts)) == 1:
        caption = f"{caption} {texts[0][:1].upper()}{texts[0][1:].rstrip('.')}."
    elif any(texts):
        marks = [str(notes.setdefault(text, len(notes) + 1)) if text else "" for text in texts]
        words.add(len(heads))
        heads.append("note")
        body.append(marks)
    return PrintedTable(
        caption, tuple(heads), tuple(zip(*body, strict=True)) if rows else (), frozenset(words), tuple(notes)
    )


def _of_this_version(reason: object) -> str:
    """A reason without the parts that speak of columns which no table shows yet."""
    parts = str(reason or "").split("; ")
    return "; ".join(part for part in parts if not part.endswith("not estimated in this version"))


def name_column(key: str, head: str | None = None, *, always: bool = True) -> TableColumn:
    """Return the column of a text that stands in the table as it is."""
    return TableColumn(
        head or key, lambda row: MISSING if row[key] is None else str(row[key]), text=True, always=always
    )


def together(text: str) -> str:
    r"""Return a text in which a value and its uncertainty, and a number and its unit, stay on one line.

    Examples
    --------
    >>> ascii(together("(3.2 ± 0.1) % of 12 mm"))
    "'(3.2\\xa0\\xb1\\xa00.1)\\xa0% of 12 mm'"
    """
    joined = str(text).replace(" ± ", "\u00a0±\u00a0")
    for unit in ("%", "mm", "m", "kPa", "ft", "psi"):
        joined = (
            joined.replace(f" {unit}.", f"\u00a0{unit}.")
            .replace(f" {unit} ", f"\u00a0{unit} ")
            .replace(f" {unit})", f"\u00a0{unit})")
        )
    return joined
