"""What is noted down while a survey is read: problems, input files, assumptions and cautions."""

from __future__ import annotations

import hashlib
import os
import re
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from gradeline.errors import Problem, SurveyError
from gradeline.survey import SourceFile

if TYPE_CHECKING:
    from gradeline.loader.tables import Source

__all__ = ["CONTROL", "LARGEST_FILE", "MOST_PROBLEMS", "PLACEHOLDER", "Ledger"]

#: A value that `gradeline new` leaves to be filled in begins with this sign.
PLACEHOLDER = "?"

#: A larger file is refused, in bytes: a survey of a million runs stays below it.
LARGEST_FILE = 200_000_000
_ADD_IT = "; add it to the folder"
#: What is said of a file that has yet to be written.
_ADD = {"readings.csv": f"{_ADD_IT} (before there are readings: gradeline plan, gradeline sheet)"}

#: Where this many problems are noted, reading stops.
MOST_PROBLEMS = 1000

#: Characters that no text needs and that some terminal or XML reader acts on or refuses.
CONTROL = re.compile(r"[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x84\x86-\x9f\ufffe\uffff]")

_SIGNATURES = {
    b"PK\x03\x04": "an Excel workbook or another zip archive",
    b"\xd0\xcf\x11\xe0": "an old Excel workbook",
    b"PAR1": "a parquet file",
    b"%PDF": "a PDF",
    b"\x1f\x8b": "a gzip archive",
}


@dataclass
class Ledger:
    """The notes of one reading of a survey; each part of the loader adds to it.

    Parameters
    ----------
    folder : Path
        The survey's folder.
    problems : list of Problem
        Every fault found so far.
    files : list of SourceFile
        The files read so far, with their SHA-256.
    assumptions, cautions : list of str
        Sentences for the survey.
    order : dict
        Where each TOML key, or each column by ``file: heading``, stands in its file, so that problems are told in
        that order.
    source : Source or None
        Where the survey's tables are; None stands for files in the folder.
    planned : bool
        Whether the readings are still to be taken, so that none need be there.
    progress : callable or None
        Is told the share of a logger's file that was read, 0 to 1.
    threads : int or None
        Cores that may read a logger's file; None: all that there are.
    """

    folder: Path
    problems: list[Problem] = field(default_factory=list)
    files: list[SourceFile] = field(default_factory=list)
    assumptions: list[str] = field(default_factory=list)
    cautions: list[str] = field(default_factory=list)
    order: dict[str, int] = field(default_factory=dict)
    source: Source | None = None
    planned: bool = False
    progress: Callable[[float], None] | None = None
    threads: int | None = None

    def problem(self, file: str, row: int | None, column: str | None, message: str) -> None:
        """Note one fault at its place; so many that nobody reads them end the reading (SurveyError)."""
        self.problems.append(Problem(file, row, column, message))
        if len(self.problems) >= MOST_PROBLEMS:
            said = f"reading stopped after {MOST_PROBLEMS} problems; mend the first ones and read the survey again"
            self.problems.append(Problem(file, row, None, said))
            self.raise_problems()

    def raise_problems(self) -> None:
        """Raise SurveyError with all that was noted, where there is anything."""
        if self.problems:
            ordered = sorted(self.problems, key=self._key_place)
            raise SurveyError(ordered if self.source is None else map(self.source.placed, ordered))

    def _key_place(self, problem: Problem) -> int:
        """Where the key or the column of a problem stands in its file; the error sorts by file and row."""
        key = problem.column or ""
        if not problem.file.endswith(".toml"):
            return self.order.get(f"{problem.file}: {key}", -1)
        while key and key not in self.order:
            key = key[: max(key.rfind("."), key.rfind("["), 0)]
        return self.order.get(key, -1 if not problem.column else len(self.order))

    def text_of(self, name: str, *, required: bool = True, largest: int = LARGEST_FILE) -> str | None:
        """Return the text of a file in the folder, None (with a problem noted) where there is none or it is too large.

        UTF-8 with or without a byte order mark and UTF-16 are read.
        """
        content = self.content_of(name, required=required, largest=largest)
        return None if content is None else self._decode(name, content)

    def content_of(self, name: str, *, required: bool = True, largest: int = LARGEST_FILE) -> bytes | None:
        """Return the bytes of a file in the folder, at most `largest`; None (with a problem noted) where that fails."""
        path = self.folder / name
        if not path.is_file():
            if path.exists():
                what = "a folder" if path.is_dir() else "no file but a device or a pipe"
                self.problem(name, None, None, f"this is {what}; put the file in its place")
            elif required:
                other = self._beside(path)
                self.problem(name, None, None, f"the file is missing{other or _ADD.get(name, _ADD_IT)}")
            return None
        try:
            content = _bounded(path, largest)
            if len(content) > largest:
                self.problem(
                    name, None, None, f"the file is larger than {largest // 10**6} MB; split the survey"
                )
                return None
        except OSError as error:
            self.problem(
                name, None, None, f"the file cannot be read ({error.strerror}); check its permissions"
            )
            return None
        self.files.append(SourceFile(name, hashlib.sha256(content).hexdigest()))
        return content

    def _beside(self, path: Path) -> str | None:
        """What a user may have put there instead of a csv file."""
        workbook = path.with_suffix(".xlsx")
        if path.suffix != ".csv" or not workbook.is_file():
            return None
        with workbook.open("rb") as stream:
            if stream.read(4) != b"PK\x03\x04":
                return f"; {workbook.name} is there, but it is no Excel workbook: save the table as csv"
        return f"; {workbook.name} is there, but only csv is read: save the sheet as csv"

    def _decode(self, name: str, content: bytes) -> str | None:
        kind = next((what for start, what in _SIGNATURES.items() if content.startswith(start)), None)
        if kind:
            self.problem(name, None, None, f"the file is {kind}, not text; save it as {path_kind(name)}")
            return None
        head = content[:200]
        if content.startswith((b"\xff\xfe", b"\xfe\xff")):
            encoding = "utf-16"
        elif len(head) > 3 and not any(head[1::2]) and all(head[::2]):
            encoding = "utf-16-le"
        elif len(head) > 3 and not any(head[::2]) and all(head[1::2]):
            encoding = "utf-16-be"
        else:
            encoding = "utf-8-sig"
        try:
            text = content.decode(encoding)
        except UnicodeDecodeError as error:
            line = content[: error.start].count(b"\n") + 1
            if b"\0" in content:
                self._binary(name)
            else:
                self.problem(
                    name,
                    line,
                    None,
                    f"the byte 0x{content[error.start]:02X} is not UTF-8; save the file as UTF-8",
                )
            return None
        if "\0" in text:
            self._binary(name)
            return None
        found = CONTROL.search(text)
        if found:
            line = len(text[: found.start()].splitlines()) or 1
            self.problem(
                name,
                line,
                None,
                f"the character U+{ord(found[0]):04X} is not printable; take it out of the file",
            )
            return None
        return text

    def _binary(self, name: str) -> None:
        self.problem(name, None, None, f"the file is binary, not text; save it as {path_kind(name)}")


def _bounded(path: Path, largest: int) -> bytes:
    """The bytes of a file, or more than `largest` of them where it is longer, whatever its length is said to be.

    Opened so that what turns out to be a pipe without a writer does not wait for one.
    """
    flags = os.O_RDONLY | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0)
    with os.fdopen(os.open(path, flags), "rb") as stream:
        if os.fstat(stream.fileno()).st_size > largest:
            return bytes(largest + 1)
        return stream.read(largest + 1)


def path_kind(name: str) -> str:
    """What a file of this name has to be, for a remedy.

    Examples
    --------
    >>> path_kind("taps.csv")
    'csv in UTF-8'
    """
    return "csv in UTF-8" if name.endswith(".csv") else "plain text in UTF-8"
