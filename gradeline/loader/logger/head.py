"""What a logger's file looks like before it is read: its columns, its first and last rows, and some between."""

from __future__ import annotations

import csv
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from gradeline.loader.cells import Heading, parse_heading
from gradeline.loader.delimited import WITH_COMMA, read_rows, separator_of
from gradeline.loader.ledger import CONTROL, Ledger
from gradeline.loader.logger.engine import quoted

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

__all__ = ["Head", "csv_head", "parquet_head"]

#: Bytes that are looked at in one place, and at how many places.
_PIECE, _PLACES = 1_000_000, 8
_MOST_COLUMNS = 4096
_ROWS = 500
#: A line this long cannot be read.
LONGEST_LINE = 2_000_000


@dataclass(frozen=True)
class Head:
    """A logger's file as its head tells it.

    Parameters
    ----------
    file : str
        Its name.
    path : Path
        Where it lies.
    headings : tuple of Heading
        Of all columns.
    rows : sequence of sequence of str
        Its first rows.
    between : sequence of sequence of str
        Some rows further on, in their order.
    last : sequence of str
        The last row that has a cell for every column.
    heading_line : int
        Line of the heading; 0 in parquet.
    separator : str
        Between cells; empty in parquet.
    comma : bool
        Whether decimals are set off by a comma.
    types : tuple of str
        The engine's type of each column, in parquet.
    size : int
        Bytes.
    """

    file: str
    path: Path
    headings: tuple[Heading, ...]
    rows: Sequence[Sequence[str]]
    between: Sequence[Sequence[str]]
    last: Sequence[str]
    heading_line: int
    separator: str
    comma: bool
    types: tuple[str, ...]
    size: int

    @property
    def parquet(self) -> bool:
        """Whether the file is one of parquet."""
        return not self.separator


def csv_head(ledger: Ledger, name: str) -> Head | None:
    """Return the head of a csv file, None (with the problems noted) where it is none."""
    path = ledger.folder / name
    try:
        size = path.stat().st_size
        with path.open("rb") as stream:
            start = stream.read(_PIECE)
    except OSError as error:
        ledger.problem(name, None, None, f"the file cannot be read ({error.strerror}); check its permissions")
        return None
    if len(start) < size and b"\n" not in start:
        ledger.problem(
            name, 1, None, "the first line does not end within 1 MB; write a heading and a row for each time"
        )
        return None
    whole = start if len(start) == size else start[: start.rfind(b"\n") + 1]
    text = _text(ledger, name, whole)
    if text is None:
        return None
    separator = separator_of(text)
    rows, lines, fault = read_rows(text, separator)
    if fault is not None:
        ledger.problem(
            name, fault[0], None, f"the row cannot be read as csv ({fault[1]}); check its quotation marks"
        )
        return None
    if not rows:
        ledger.problem(name, None, None, "the file is empty; give a heading and rows")
        return None
    headings = tuple(parse_heading(cell) for cell in rows[0])
    if len(headings) > _MOST_COLUMNS:
        ledger.problem(
            name,
            lines[0],
            None,
            f"the heading has {len(headings)} columns, more than {_MOST_COLUMNS}; leave out what the survey does not need",
        )
        return None
    full = [row for row in rows[1:] if len(row) == len(headings)]
    if not full:
        ledger.problem(
            name, None, None, "there is no row with a cell for each heading; write a row for each time"
        )
        return None
    first = full[:_ROWS]
    later = [] if len(start) == size else _pieces(path, size, separator, len(headings))
    rest = [*full[_ROWS :: max(len(full) // _ROWS, 1)], *later, *([] if later else full[-1:])]
    comma = separator != "," and any(
        WITH_COMMA.fullmatch(cell.strip())
        for row in (*first, *rest)
        for cell, heading in zip(row, headings, strict=True)
        if heading.unit is not None
    )
    last = later[-1] if later else full[-1]
    return Head(name, path, headings, first, rest, last, lines[0], separator, comma, (), size)


def _text(ledger: Ledger, name: str, content: bytes) -> str | None:
    if content.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\0" in content[:400]:
        ledger.problem(name, None, None, "the file is not plain text in UTF-8; save it so")
        return None
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        ledger.problem(
            name, line, None, f"the byte 0x{content[error.start]:02X} is not UTF-8; save the file as UTF-8"
        )
        return None
    found = CONTROL.search(text)
    if found:
        line = text.count("\n", 0, found.start()) + 1
        ledger.problem(
            name,
            line,
            None,
            f"the character U+{ord(found[0]):04X} is not printable; take it out of the file",
        )
        return None
    return text


def _pieces(path: Path, size: int, separator: str, width: int) -> list[list[str]]:
    """Some rows from places spread over a file, the last ones from its end."""
    found: list[list[str]] = []
    with path.open("rb") as stream:
        for place in range(1, _PLACES + 1):
            stream.seek(max(place * size // _PLACES - _PIECE // 16, 0))
            lines = stream.read(_PIECE // 16).decode("utf-8", "replace").splitlines()[1:]
            if place < _PLACES:
                lines = lines[:-1]
            try:
                rows = list(csv.reader([line for line in lines if line.strip()], delimiter=separator))
            except csv.Error:  # a cell beyond any length: told when the file is read
                rows = []
            found += [row for row in rows if len(row) == width]
    return found


def parquet_head(ledger: Ledger, name: str, connection: DuckDBPyConnection, path: str) -> Head | None:
    """Return the head of a parquet file, None (with the problems noted) where it is none."""
    import duckdb  # noqa: PLC0415 (loaded when asked for: start-up time)

    source = f"read_parquet({quoted(path)})"
    try:
        described = connection.execute(f"DESCRIBE SELECT * FROM {source}").fetchall()
        names = [str(row[0]) for row in described]
        types = tuple(str(row[1]) for row in described)
        nested = [
            name
            for name, kind in zip(names, types, strict=True)
            if kind.endswith("]") or kind.startswith(("STRUCT", "MAP"))
        ]
        for heading in nested:
            ledger.problem(name, None, heading, "the column holds lists or tables; write one value a cell")
        if nested:
            return None
        texts = ", ".join(f"CAST({quoted(one, chr(34))} AS VARCHAR)" for one in names)
        first = connection.execute(f"SELECT {texts} FROM {source} LIMIT {_ROWS}").fetchall()
        count = connection.execute(f"SELECT count(*) FROM {source}").fetchall()[0][0]
        step = max(count // _ROWS, 1)
        later = connection.execute(
            f"SELECT {texts} FROM read_parquet({quoted(path)}, file_row_number = true) "
            f"WHERE file_row_number % {step} = 0 OR file_row_number = {count - 1} ORDER BY file_row_number"
        ).fetchall()
    except duckdb.Error as error:
        ledger.problem(
            name, None, None, f"the file cannot be read as parquet ({_said(error)}); write it again"
        )
        return None
    if not first:
        ledger.problem(name, None, None, "there are no rows; write a row for each time")
        return None
    rows, between = (
        [["" if cell is None else str(cell) for cell in row] for row in table] for table in (first, later)
    )
    headings = tuple(parse_heading(one) for one in names)
    size = Path(path).stat().st_size
    return Head(name, ledger.folder / name, headings, rows, between, between[-1], 0, "", False, types, size)


def _said(error: Exception) -> str:
    lines = str(error).splitlines()
    return lines[0][:160] if lines else "damaged"
