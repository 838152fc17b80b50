"""Sheets of an Excel workbook as rows of cells, its size bounded before it is read.

A workbook is a zip archive, in which a small file can unpack to any size, and a sheet with two cells can span
seventeen thousand million. So the archive's directory is looked at first, its parts are unpacked no further than the
directory says, the span of every sheet is taken from the references of its cells, and only what passed is handed on.
"""

from __future__ import annotations

import io
import itertools
import posixpath
import re
import zipfile
import zlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from gradeline.loader.ledger import CONTROL, Ledger

__all__ = ["Workbook", "cell_text", "open_workbook"]

_LARGEST_FILE = 100_000_000
_LARGEST_UNPACKED = 400_000_000
_MOST_PARTS = 2_000
_MOST_CELLS = 5_000_000
_MOST_TEXT = 1_000_000_000

_PLACES = re.compile(rb"""\sr\s*=\s*["']([A-Za-z]*)([0-9]+)["']""")
_TEXT_CELLS = re.compile(rb"""\st\s*=\s*["']s["']""")
_ERROR_CELLS = re.compile(
    rb"""<(?:\w+:)?c\b(?=[^>]*\st\s*=\s*["']e["'])[^>]*\sr\s*=\s*["']([A-Z]+[0-9]+)["'][^>]*>"""
)
_SHEET = re.compile(rb"<(?:\w+:)?sheet\b[^>]*>")
_RELATION = re.compile(rb"<(?:\w+:)?Relationship\b[^>]*>")


@dataclass(frozen=True)
class Workbook:
    """A workbook whose size was found to be sound.

    Parameters
    ----------
    file : str
        Its name.
    sheets : tuple of str
        The names of its sheets.
    book : object
        What reads the sheets.
    errors : mapping of str to tuple of str
        By sheet, the cells that hold the error of a formula instead of a value, such as ``"C5"``.
    """

    file: str
    sheets: tuple[str, ...]
    book: Any
    errors: Mapping[str, tuple[str, ...]]

    def sheet_called(self, name: str) -> str | None:
        """Return the sheet of a name as the workbook writes it; capitals make no difference."""
        return next((sheet for sheet in self.sheets if sheet.strip().casefold() == name), None)

    def place(self, sheet: str) -> str:
        """Return what messages call a sheet."""
        return f"{self.file} sheet {sheet.strip()}"

    def rows(self, ledger: Ledger, sheet: str) -> list[list[Any]] | None:
        """Return all rows of a sheet from its first one, with the values of their cells; None where it is damaged.

        A cell that holds an error or a sign that is not printable is a problem.
        """
        place = self.place(sheet)
        for reference in self.errors.get(sheet, ())[:20]:
            ledger.problem(
                place,
                int(re.sub(r"\D", "", reference)),
                None,
                f"the formula in cell {reference} has an error for its value; mend it or empty the cell",
            )
        try:
            rows: list[list[Any]] = self.book.get_sheet_by_name(sheet).to_python(skip_empty_area=False)
        except BaseException as error:
            if not _is_fault(error):
                raise
            ledger.problem(
                place, None, None, f"the sheet cannot be read ({error}); save the workbook again as .xlsx"
            )
            return None
        for line, row in enumerate(rows, start=1):
            for cell in row:
                found = CONTROL.search(cell) if isinstance(cell, str) else None
                if found:
                    ledger.problem(
                        place,
                        line,
                        None,
                        f"the character U+{ord(found[0]):04X} is not printable; take it out of the cell",
                    )
        return rows


def cell_text(value: object) -> str:
    """Return the text of a cell's value; a number keeps every digit.

    Examples
    --------
    >>> cell_text(1.0), cell_text(0.1), cell_text("01"), cell_text(None), cell_text(True)
    ('1', '0.1', '01', '', 'TRUE')
    """
    if value is None or value != value:  # noqa: PLR0124  a value that is not itself is NaN
        return ""
    if isinstance(value, bool):
        return str(value).upper()
    if isinstance(value, float):
        return str(int(value)) if value.is_integer() and abs(value) < 1e15 else repr(value)
    return str(value).strip()


def open_workbook(ledger: Ledger, name: str) -> Workbook | None:
    """Return a workbook of the ledger's folder, None (with a problem noted) where it is none or too large.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems and the file's SHA-256.
    name : str
        The file's name.

    Returns
    -------
    Workbook or None
        Its sheets are read when they are asked for.
    """
    from python_calamine import CalamineWorkbook  # noqa: PLC0415 (loaded when asked for: start-up time)

    content = ledger.content_of(name, largest=_LARGEST_FILE)
    if content is None:
        return None
    if not content.startswith(b"PK\x03\x04"):
        ledger.problem(name, None, None, "the file is no Excel workbook (.xlsx); save it as one")
        return None
    parts: dict[str, bytes] = {}
    try:
        fault = _unpack(content, parts)
    except (zipfile.BadZipFile, zlib.error, RuntimeError, NotImplementedError, EOFError, OSError, ValueError):
        fault = "the file is damaged or locked by a password; save it again as .xlsx without one"
    fault = fault or _too_large(parts)
    if fault is None and "xl/workbook.xml" not in parts:
        fault = "the file is a zip archive but no Excel workbook; save it as .xlsx"
    if fault is not None:
        ledger.problem(name, None, None, fault)
        return None
    packed = io.BytesIO()
    with zipfile.ZipFile(packed, "w", zipfile.ZIP_STORED) as archive:
        for part, data in parts.items():
            archive.writestr(part, data)
    packed.seek(0)
    try:
        book = CalamineWorkbook.from_filelike(packed)
        return Workbook(name, tuple(book.sheet_names), book, _errors_by_sheet(parts))
    except BaseException as error:
        if not _is_fault(error):
            raise
        ledger.problem(name, None, None, f"the workbook cannot be read ({error}); save it again as .xlsx")
        return None


def _is_fault(error: BaseException) -> bool:
    """Whether an error tells of a damaged workbook: those of the reader, whose own slips are no `Exception`."""
    return isinstance(error, Exception) or type(error).__name__ == "PanicException"


def _unpack(content: bytes, parts: dict[str, bytes]) -> str | None:
    """Fill `parts` with what holds cells; return what is wrong with the archive."""
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        entries = archive.infolist()
        wanted = [entry for entry in entries if entry.filename.casefold().endswith((".xml", ".rels"))]
        unpacked = sum(entry.file_size for entry in wanted)
        if unpacked > _LARGEST_UNPACKED or len(entries) > _MOST_PARTS:
            what = f"{unpacked // 10**6} MB" if unpacked > _LARGEST_UNPACKED else f"{len(entries)} parts"
            return (
                f"the workbook unpacks to {what}; at most {_LARGEST_UNPACKED // 10**6} MB in {_MOST_PARTS} parts are "
                "read: keep only the survey's sheets, or save them as csv"
            )
        for entry in wanted:
            if entry.filename in parts:
                return f"the workbook holds {entry.filename!r} twice; save it again as .xlsx"
            parts[entry.filename] = archive.read(entry)  # no more than the directory says
            if b"<!DOCTYPE" in parts[entry.filename][:4096]:
                return f"{entry.filename!r} in the workbook declares a document type; save it again as .xlsx"
    return None


def _too_large(parts: Mapping[str, bytes]) -> str | None:
    """What makes the sheets too large to be read, None where nothing does."""
    longest = max(
        (_longest_text(data) for part, data in parts.items() if "sharedstrings" in part.casefold()), default=0
    )
    for part, data in parts.items():
        if "sharedstrings" in part.casefold():
            continue
        width = height = 1
        for letters, digits in _PLACES.findall(data):
            width = max(width, _column(letters))
            height = max(height, int(digits[:12]))
        if width * height > _MOST_CELLS:
            return (
                f"a sheet spans {height} rows by {width} columns, more than {_MOST_CELLS} cells; delete the empty rows "
                "and columns, or save the sheets as csv"
            )
        if longest * len(_TEXT_CELLS.findall(data)) > _MOST_TEXT:
            return "the texts of a sheet are too long to be meant; shorten them"
    return None


def _longest_text(shared: bytes) -> int:
    ends = [0, *(found.start() for found in re.finditer(rb"</(?:\w+:)?si>", shared)), len(shared)]
    return max(after - before for before, after in itertools.pairwise(ends))


def _column(letters: bytes) -> int:
    number = 0
    for letter in letters.upper()[:8]:
        number = 26 * number + letter - 64
    return number


def _errors_by_sheet(parts: Mapping[str, bytes]) -> dict[str, tuple[str, ...]]:
    """The cells of each sheet whose formula has an error; the reader of sheets would call them empty."""
    targets = {
        _attribute(relation, "Id"): posixpath.normpath(
            posixpath.join("/xl", _attribute(relation, "Target"))
        ).lstrip("/")
        for relation in _RELATION.findall(parts.get("xl/_rels/workbook.xml.rels", b""))
    }
    found: dict[str, tuple[str, ...]] = {}
    for sheet in _SHEET.findall(parts["xl/workbook.xml"]):
        data = parts.get(targets.get(_attribute(sheet, r"\w+:id"), ""), b"")
        if b't="e"' in data or b"t='e'" in data:
            errors = tuple(reference.decode() for reference in _ERROR_CELLS.findall(data))
            found[_attribute(sheet, "name")] = errors
    return found


def _attribute(tag: bytes, name: str) -> str:
    from html import unescape  # noqa: PLC0415 (loaded when asked for: start-up time)

    found = re.search(rf"""\s{name}\s*=\s*("([^"]*)"|'([^']*)')""", tag.decode("utf-8", "replace"))
    return unescape(found[2] or found[3] or "") if found else ""


def trimmed(rows: Sequence[Sequence[Any]]) -> tuple[list[list[str]], list[int]]:
    """Return the rows that hold anything as text, each with its number.

    Examples
    --------
    >>> trimmed([["", ""], ["tap", None], ["T1", 0.5]])
    ([['tap', ''], ['T1', '0.5']], [2, 3])
    """
    texts = [(line, [cell_text(cell) for cell in row]) for line, row in enumerate(rows, start=1)]
    kept = [(line, row) for line, row in texts if any(row)]
    return [row for _, row in kept], [line for line, _ in kept]
