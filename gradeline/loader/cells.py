"""A table as columns of text cells with their line numbers, and the text of cells as numbers.

Every table format (see `gradeline.loader.tables`) hands its rows to `cells_of`; nothing else has to change.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from gradeline.errors import QuantityError
from gradeline.loader.delimited import POINTED, WITH_COMMA, read_rows, separator_of, without_marks
from gradeline.loader.ledger import PLACEHOLDER, Ledger
from gradeline.quantities import Unit, parse_number
from gradeline.quantities.meant import beyond_meaning

__all__ = [
    "Cells",
    "Heading",
    "Hints",
    "cells_of",
    "column_index",
    "nearest",
    "numbers",
    "parse_heading",
    "read_cells",
    "round_brackets",
]

_NOT_NUMERIC = re.compile(r"[^0-9eE.+\-\n]")
_TO_FILL_IN = "the value is still to be filled in"
_LISTED = 12
_HINTED = 20


@dataclass(frozen=True)
class Heading:
    """The heading of a column: a name and the text between its square brackets.

    `unit` is None where there are no brackets.
    """

    text: str
    name: str
    unit: str | None


@dataclass(frozen=True)
class Cells:
    """A table of text cells, stripped.

    Parameters
    ----------
    file : str
        Its name, for messages.
    headings : tuple of Heading
        One for each column.
    columns : tuple of list of str
        The cells below each heading.
    lines : list of int
        The line of each row as an editor or a spreadsheet program shows it.
    heading_line : int or None
        The line of the heading; None where the format has none.
    doubled : frozenset of str
        Names that more than one heading has; the first of them is kept.
    decimal_comma : bool
        Whether decimals are set off by a comma.
    """

    file: str
    headings: tuple[Heading, ...]
    columns: tuple[list[str], ...]
    lines: list[int]
    heading_line: int | None = 1
    doubled: frozenset[str] = frozenset()
    decimal_comma: bool = False

    def __len__(self) -> int:
        return len(self.lines)


def parse_heading(text: str) -> Heading:
    """Return the name and the unit of a heading.

    Examples
    --------
    >>> parse_heading("flow [L/s]")
    Heading(text='flow [L/s]', name='flow', unit='L/s')
    >>> parse_heading("run").unit is None
    True
    """
    stripped = " ".join(text.split())
    found = re.fullmatch(r"(.*?)\s*\[([^\[\]]*)\]", stripped)
    return Heading(stripped, found[1], found[2].strip()) if found else Heading(stripped, stripped, None)


def round_brackets(heading: Heading, known: Iterable[str]) -> tuple[str, str] | None:
    """Return the known name and the unit of a heading whose unit stands in round brackets, None otherwise.

    Examples
    --------
    >>> round_brackets(parse_heading("T3 (mm)"), ["T3"])
    ('T3', 'mm')
    >>> round_brackets(parse_heading("T3 (top)"), ["T3 (top)"]) is None
    True
    """
    found = re.fullmatch(r"(.+?)\s*[({]\s*([^(){}]*?)\s*[)}]", heading.text)
    names = set(known)
    if heading.unit is not None or heading.name in names or found is None or found[1] not in names:
        return None
    return found[1], found[2]


def nearest(name: str, known: Iterable[str]) -> str:
    """Return the remedy for an unknown name: the nearest known one, or all of them.

    Examples
    --------
    >>> nearest("chainge", ["tap", "chainage"])
    "did you mean 'chainage'?"
    >>> nearest("x", ["tap", "gauge"])
    'known are gauge, tap'
    """
    folded = {each.casefold(): each for each in known}
    close = difflib.get_close_matches(name.casefold(), folded, n=1, cutoff=0.6)
    if close:
        return f"did you mean {folded[close[0]]!r}?"
    listed = sorted(folded.values())
    more = f" and {len(listed) - _LISTED} more" if len(listed) > _LISTED else ""
    return f"known are {', '.join(listed[:_LISTED])}{more}" if listed else "none is known here"


class Hints:
    """The remedy for each of many unknown names: the nearest known one, for the first few that differ.

    To compare thousands of names with thousands would take minutes, and a list of remedies so long helps nobody.

    Parameters
    ----------
    known : iterable of str
        The known names.

    Examples
    --------
    >>> Hints(["T1", "T2"])("T11")
    "did you mean 'T1'?"
    """

    def __init__(self, known: Iterable[str]) -> None:
        self._known = list(known)
        self._found: dict[str, str] = {}

    def __call__(self, name: str) -> str:
        """Return the remedy for `name`."""
        if name not in self._found:
            if len(self._found) >= _HINTED:
                return "see the remedies above"
            self._found[name] = nearest(name, self._known)
        return self._found[name]


def read_cells(ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
    """Return a csv file of the survey as cells, None (with its problems noted) where that fails.

    Rows without any text are passed over. A column that begins with ``note`` is dropped.
    """
    text = ledger.text_of(name, required=required)
    if text is None:
        return None
    separator = separator_of(text)
    rows, lines, fault = read_rows(text, separator)
    if fault is not None:
        ledger.problem(
            name, fault[0], None, f"the row cannot be read as csv ({fault[1]}); check its quotation marks"
        )
        return None
    cells = cells_of(ledger, name, rows, lines)
    return cells if cells is None or separator == "," else _decimals(ledger, cells)


def cells_of(
    ledger: Ledger, name: str, rows: Sequence[Sequence[str]], lines: Sequence[int | None]
) -> Cells | None:
    """Return rows of text as a table, None (with its problems noted) where they are none.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    name : str
        What messages call the table.
    rows : sequence of sequence of str
        The heading and the rows below it, none of them without any text.
    lines : sequence of int or None
        The line of each; of the heading it may be None.

    Returns
    -------
    Cells or None
        The columns that have a name, without notes.
    """
    if not rows:
        ledger.problem(name, None, None, "the file is empty; give a heading and rows")
        return None
    headings = tuple(parse_heading(cell) for cell in rows[0])
    width = len(headings)
    ledger.order.update({f"{name}: {heading.text}": place for place, heading in enumerate(headings)})
    wrong = [index for index, row in enumerate(rows) if len(row) != width]
    for index in wrong:
        ledger.problem(
            name,
            lines[index],
            None,
            f"the row has {len(rows[index])} cell{'s' * (len(rows[index]) != 1)}, the heading has {width}; "
            "give every column a cell, empty where there is no value",
        )
    if wrong:
        left_out = set(wrong)
        lines = [line for index, line in enumerate(lines) if index not in left_out]
        rows = [row for index, row in enumerate(rows) if index not in left_out]
    if len(rows) == 1 and not wrong:
        ledger.problem(name, None, None, "there are no rows below the heading; add one for each line of data")
        return None
    columns = [[cell.strip() for cell in column] for column in zip(*rows[1:], strict=True)]
    columns = columns or [[] for _ in headings]
    below = [line for line in lines[1:] if line is not None]
    return _named_columns(ledger, Cells(name, headings, tuple(columns), below, lines[0]))


def _decimals(ledger: Ledger, cells: Cells) -> Cells:
    """Find out whether the decimals of a table are set off by a comma: one number with a comma says so for all.

    A number with a point is then a problem, as nobody can tell which of the two marks thousands.
    """
    measured = [
        index
        for index, heading in enumerate(cells.headings)
        if heading.unit is not None or heading.name == "reading"
    ]
    found = {
        mark: [
            (row, index)
            for index in measured
            if mark in "".join(cells.columns[index])
            for row, cell in enumerate(cells.columns[index])
            if mark in cell and form.fullmatch(cell)
        ]
        for mark, form in ((",", WITH_COMMA), (".", POINTED))
    }
    if not found[","]:
        return cells
    row, index = min(found[","])
    comma = f"{cells.columns[index][row]!r} in row {cells.lines[row]}, {cells.headings[index].text}"
    if found["."]:
        row, index = min(found["."])
        others = f", and so have {len(found['.']) - 1} more cells" if len(found["."]) > 1 else ""
        ledger.problem(
            cells.file,
            cells.lines[row],
            cells.headings[index].text,
            f"{cells.columns[index][row]!r} has a point{others}, but {comma} has a decimal comma; write all "
            "numbers of the file alike, with no mark between thousands",
        )
    else:
        ledger.assumptions.append(
            f"The decimals of {cells.file} are set off by a comma ({comma}): 1,234 is a little more than one."
        )
    return replace(cells, decimal_comma=True)


def _named_columns(ledger: Ledger, cells: Cells) -> Cells:
    """Drop notes and empty columns without a name; note columns that are named twice or not at all."""
    line = cells.heading_line
    kept: list[int] = []
    seen: set[str] = set()
    doubled: set[str] = set()
    listed = any(heading.name == "tap" for heading in cells.headings)
    for index, heading in enumerate(cells.headings):
        if heading.name.casefold().startswith("note"):
            continue
        if not heading.name:
            if any(cells.columns[index]):
                ledger.problem(cells.file, line, None, f"column {index + 1} has no heading; name it")
            continue
        if heading.name in seen:
            rule = "keep one of them"
            if listed and heading.name == "reading":
                rule = (
                    "readings listed one a row have one column 'reading [unit]', or a column 'reading' beside a "
                    "column 'unit'"
                )
            ledger.problem(cells.file, line, heading.text, f"two columns are called {heading.name!r}; {rule}")
            doubled.add(heading.name)
            continue
        seen.add(heading.name)
        kept.append(index)
    return Cells(
        cells.file,
        tuple(cells.headings[index] for index in kept),
        tuple(cells.columns[index] for index in kept),
        cells.lines,
        line,
        frozenset(doubled),
    )


def numbers(
    ledger: Ledger, cells: Cells, index: int, unit: Unit, *, remedy: str, difference: bool = False
) -> np.ndarray:
    """Return a column in SI units, NaN for an empty cell and for one that is no number (noted as a problem).

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    cells : Cells
        The table.
    index : int
        Which column.
    unit : Unit
        Of the column.
    remedy : str
        What to do about a cell that is no number.
    difference : bool
        Whether the column holds differences or uncertainties, to which an offset does not apply.

    Returns
    -------
    ndarray
        One value a row, SI.
    """
    column = without_marks(cells.columns[index]) if cells.decimal_comma else cells.columns[index]
    values: np.ndarray | None = None
    if not _NOT_NUMERIC.search("\n".join(column)):
        try:
            values = np.array([float(cell) if cell else np.nan for cell in column], dtype=float)
        except ValueError:
            values = None
        if values is not None and values.size:
            with np.errstate(invalid="ignore", over="ignore"):
                sizes = np.abs(unit.to_si(values[~np.isnan(values)]))
            if sizes.size and beyond_meaning(float(sizes.max()), unit.dimension):
                values = None
    if values is None:
        values = np.array(
            [_number(ledger, cells, index, row, text, unit, remedy) for row, text in enumerate(column)]
        )
    return unit.difference_to_si(values) if difference else unit.to_si(values)


def _number(ledger: Ledger, cells: Cells, index: int, row: int, text: str, unit: Unit, remedy: str) -> float:
    """One cell, `text` with a decimal point, with its problem noted; taken where a column holds anything unusual."""
    cell = cells.columns[index][row]
    if not cell:
        return np.nan
    if cell.startswith(PLACEHOLDER):
        message = _TO_FILL_IN
    else:
        try:
            value = parse_number(text)
        except QuantityError as error:
            message = str(error) if text == cell else f"{cell!r} is not a number"
        else:
            if not beyond_meaning(unit.to_si(value), unit.dimension):
                return value
            message = f"{cell!r} is too large to be meant"
    ledger.problem(cells.file, cells.lines[row], cells.headings[index].text, f"{message}; {remedy}")
    return np.nan


def column_index(cells: Cells, name: str) -> int | None:
    """Return where the column called `name` is, None where there is none."""
    return next((index for index, heading in enumerate(cells.headings) if heading.name == name), None)
