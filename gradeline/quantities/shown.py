"""How results show themselves in a notebook: a title, a line that sums up, and the main table, as HTML."""

from __future__ import annotations

import html
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

from gradeline.quantities.printing import SI_DISPLAY, thousands

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["MOST_ROWS", "Shown", "counted", "rows_of", "shown"]

#: Rows of a table beyond which the rest is only counted.
MOST_ROWS = 30


class Shown(NamedTuple):
    """A column as a notebook shows it.

    Parameters
    ----------
    words : str
        Its head, without the unit.
    column : str
        Its name in the table. Where the table has ``NAME_u`` too, that is its standard uncertainty and printed with it; else
        where it has ``NAME_low`` and ``NAME_high``, they follow as its interval.
    quantity : str
        A quantity of `Display`; ``"reynolds"`` for a large pure number; empty for text and for yes or no.
    """

    words: str
    column: str
    quantity: str = ""


def counted(*counts: tuple[int, str]) -> str:
    """Return counts with their nouns, those of zero left out.

    Examples
    --------
    >>> counted((9, "flowing run"), (1, "wall"), (0, "flag"))
    '9 flowing runs, 1 wall'
    """
    return ", ".join(f"{count} {noun}{'' if count == 1 else 's'}" for count, noun in counts if count)


def rows_of(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table as dicts, a missing value of any kind as None.

    Examples
    --------
    >>> import pandas as pd
    >>> rows_of(pd.DataFrame({"run": ["1", None], "flow": [float("nan"), 0.5]}))
    [{'run': '1', 'flow': None}, {'run': None, 'flow': 0.5}]
    """
    plain = table.astype(object).where(table.notna(), None)
    names = [str(name) for name in plain.columns]
    return [dict(zip(names, row, strict=True)) for row in plain.itertuples(index=False, name=None)]


def shown(title: str, lines: Sequence[str], table: pd.DataFrame, columns: Sequence[Shown]) -> str:
    """Return a result as HTML; every text in it is escaped.

    Parameters
    ----------
    title : str
        What the result is called.
    lines : sequence of str
        What sums it up; empty ones are left out.
    table : DataFrame
        Its main table, SI units, of which the first `MOST_ROWS` rows are printed.
    columns : sequence of Shown
        What is printed of it; a column without any value is left out.

    Returns
    -------
    str
        A fragment of HTML without styles or scripts of its own, in units of the size that readers use.
    """
    rows = rows_of(table.head(MOST_ROWS))
    heads: list[str] = []
    cells: list[list[str]] = []
    for one in columns:
        if any(row.get(one.column) is not None for row in rows):
            for head, column in _columns(one, rows, set(table.columns)):
                heads.append(head)
                cells.append(column)
    parts = [f"<p><strong>{html.escape(title)}</strong>"]
    parts += [f"<br>{html.escape(line)}" for line in lines if line]
    parts.append("</p>")
    if cells:
        parts.append('<table class="dataframe"><thead>')
        parts.append(_row("th", heads))
        parts.append("</thead><tbody>")
        parts += [_row("td", row) for row in zip(*cells, strict=True)]
        parts.append("</tbody></table>")
    if len(table) > MOST_ROWS:
        parts.append(f"<p>and {counted((len(table) - MOST_ROWS, 'more row'))}</p>")
    return "".join(parts)


def _row(tag: str, cells: Sequence[str]) -> str:
    return "<tr>" + "".join(f"<{tag}>{html.escape(cell)}</{tag}>" for cell in cells) + "</tr>"


def _columns(one: Shown, rows: Sequence[dict[str, Any]], names: set[str]) -> list[tuple[str, list[str]]]:
    """The printed column, and the interval that follows it where there is one."""
    name, quantity = one.column, one.quantity
    if not quantity:
        return [(one.words, [_text(row[name]) for row in rows])]
    if quantity == "reynolds":
        return [(one.words, [thousands(row[name], 3) for row in rows])]
    head = SI_DISPLAY.head(one.words, quantity)
    if f"{name}_u" in names:
        return [(head, [SI_DISPLAY.text(quantity, row[name], row[f"{name}_u"]) for row in rows])]
    ends = [f"{name}_low", f"{name}_high"]
    if not names.issuperset(ends) or all(row[end] is None for row in rows for end in ends):
        return [(head, [SI_DISPLAY.text(quantity, row[name]) for row in rows])]
    low, high = ends
    return [
        (head, [SI_DISPLAY.within(quantity, row[name], row[low], row[high]) for row in rows]),
        (
            SI_DISPLAY.head("interval", quantity),
            [SI_DISPLAY.interval(quantity, row[low], row[high]) for row in rows],
        ),
    ]


def _text(value: object) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    return "" if value is None else str(value)
