"""Text of separated cells to rows: which sign separates the cells, and which one sets off decimals."""

from __future__ import annotations

import csv
import re
from collections.abc import Iterator, Sequence

__all__ = ["LONGEST_LINE", "POINTED", "WITH_COMMA", "read_rows", "separator_of", "without_marks"]

_SEPARATORS = (",", ";", "\t")
_HINT = re.compile(r"\s*sep=(.)[^\S\n]*(?=\r?\n|\r)")
_HEAD = 1_000_000
_LINE = re.compile(r"[^\r\n]+(?:\r\n?|\n)?|\r\n?|\n")
_MOST_LINES = 1000

#: A longer line is refused, in characters: as cells, each character may take a hundred bytes.
LONGEST_LINE = 2_000_000

#: A number whose decimals are set off by a comma.
WITH_COMMA = re.compile(r"[+\-−]?[0-9]*,[0-9]+(?:[eE][+-]?[0-9]+)?")
#: A number with a point, also one that marks thousands before a decimal comma.
POINTED = re.compile(r"[+\-−]?[0-9]*\.[0-9]+(?:\.[0-9]{3})*(?:,[0-9]+)?(?:[eE][+-]?[0-9]+)?")


def separator_of(text: str) -> str:
    r"""Return the sign that splits the heading into most cells; a comma where signs are equal.

    A first line ``sep=;``, as spreadsheet programs write it, goes before.

    Examples
    --------
    >>> separator_of("tap;chainage [m]\nT1;0,5\n"), separator_of("run\n1\n")
    (';', ',')
    """
    hint = _HINT.match(text)
    if hint:
        return hint[1]
    heading = next((line for line in text[:_HEAD].splitlines() if line.strip(" ,;\t")), "")
    counts: dict[str, int] = {}
    for mark in _SEPARATORS:
        try:
            counts[mark] = len(next(csv.reader([heading], delimiter=mark, skipinitialspace=True), []))
        except csv.Error:  # a cell beyond any length: told when the rows are read
            counts[mark] = 0
    return max(_SEPARATORS, key=lambda mark: counts[mark])


def read_rows(text: str, separator: str) -> tuple[list[list[str]], list[int], tuple[int, str] | None]:
    r"""Return the rows that hold any text, the line each begins on, and the line and words of a fault.

    Where there is a fault the rows are empty.

    Examples
    --------
    >>> read_rows("a,b\n\n1,2\n", ",")
    ([['a', 'b'], ['1', '2']], [1, 3], None)
    """
    hint = _HINT.match(text)
    if hint:
        text = text[hint.end() :]  # its line break stays, and with it the count of lines
    rows: list[list[str]] = []
    lines: list[int] = []
    in_row = 0

    def bounded() -> Iterator[str]:
        nonlocal in_row
        for found in _LINE.finditer(text):
            if found.end() - found.start() > LONGEST_LINE:
                raise csv.Error(f"it has more than {LONGEST_LINE} characters")
            if in_row >= _MOST_LINES:
                raise csv.Error(f"it goes on over {_MOST_LINES} lines")
            in_row += 1
            yield found[0]

    reader = csv.reader(bounded(), delimiter=separator, strict=True, skipinitialspace=True)
    line = 1
    try:
        for row in reader:
            in_row = 0
            if any(row) and "".join(row).strip():
                rows.append(row)
                lines.append(line)
            line = reader.line_num + 1
    except csv.Error as error:
        return [], [], (line, str(error))
    return rows, lines, None


def without_marks(cells: Sequence[str]) -> list[str]:
    """Return numbers with a decimal comma as numbers with a point.

    Examples
    --------
    >>> without_marks(["12,4", "1.234,5", "7"])
    ['12.4', '1234.5', '7']
    """
    return [
        (cell.replace(".", "") if "." in cell else cell).replace(",", ".") if "," in cell else cell
        for cell in cells
    ]
