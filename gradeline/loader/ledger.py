"""What is noted down while a survey is read: problems, input files, assumptions and cautions."""

from __future__ import annotations

import hashlib
import re
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from gradeline.errors import Problem, SurveyError
from gradeline.survey import SourceFile

if TYPE_CHECKING:
    from gradeline.loader.tables import Source

__all__ = ["CONTROL", "LARGEST_FILE", "PLACEHOLDER", "Ledger"]

#: A value that `gradeline new` leaves to be filled in begins with this sign.
PLACEHOLDER = "?"

#: A larger file is refused, in bytes: a survey of a million runs stays below it.
LARGEST_FILE = 200_000_000

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
    """

    folder: Path
    problems: list[Problem] = field(default_factory=list)
    files: list[SourceFile] = field(default_factory=list)
    assumptions: list[str] = field(default_factory=list)
    cautions: list[str] = field(default_factory=list)
    order: dict[str, int] = field(default_factory=dict)
    source: Source | None = None
    planned: bool = False

    def problem(self, file: str, row: int | None, column: str | None, message: str) -> None:
        """Note one fault at its place."""
        self.problems.append(Problem(file, row, column, message))

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

    def text_of(self, name: str, *, required: bool = True) -> str | None:
        """Return the text of a file in the folder, None (with a problem noted) where there is none.

        UTF-8 with or without a byte order mark and UTF-16 are read.
        """
        content = self.content_of(name, required=required)
        return None if content is None else self._decode(name, content)

    def content_of(self, name: str, *, required: bool = True, largest: int = LARGEST_FILE) -> bytes | None:
        """Return the bytes of a file in the folder, at most `largest`; None (with a problem noted) where that fails."""
        path = self.folder / name
        if not path.is_file():
            if required:
                other = self._beside(path)
                self.problem(name, None, None, f"the file is missing{other or '; add it to the folder'}")
            return None
        try:
            if path.stat().st_size > largest:
                self.problem(
                    name, None, None, f"the file is larger than {largest // 10**6} MB; split the survey"
                )
                return None
            content = path.read_bytes()
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


def path_kind(name: str) -> str:
    """What a file of this name has to be, for a remedy.

    Examples
    --------
    >>> path_kind("taps.csv")
    'csv in UTF-8'
    """
    return "csv in UTF-8" if name.endswith(".csv") else "plain text in UTF-8"
