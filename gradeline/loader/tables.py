"""Where the tables of a survey are: files in a folder, sheets of a workbook, or one table of heads.

A format of tables is an entry in `READERS`, a survey in one file an entry in `ONE_FILE`.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from typing import Any, Protocol

from gradeline.errors import Problem, UsageError
from gradeline.loader.cells import Cells, cells_of, read_cells
from gradeline.loader.heads import GIVEN, TableOfHeads, given_values
from gradeline.loader.keyed import SurveySheet, read_survey_sheet
from gradeline.loader.ledger import Ledger
from gradeline.loader.parquet import read_parquet
from gradeline.loader.toml import DOCUMENT, LARGEST_DOCUMENT, parse_toml
from gradeline.loader.workbook import Workbook, open_workbook, trimmed

__all__ = ["ONE_FILE", "READERS", "Source", "place_of", "read_data", "read_table", "source_of"]

#: What reads a table in a file of its own, by the ending of its name.
READERS: Mapping[str, Callable[..., Cells | None]] = {
    ".csv": read_cells,
    ".tsv": read_cells,
    ".parquet": read_parquet,
}


class Source(Protocol):
    """Where the line's description and the tables ``taps``, ``readings`` and ``runs`` of a survey come from."""

    def data(self, ledger: Ledger) -> dict[str, Any] | None:
        """Return what ``survey.toml`` would say, None (with the problems noted) where it cannot be had."""

    def table(self, ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
        """Return a table, None where it cannot be had (with a problem noted, if it is required)."""

    def place_of(self, ledger: Ledger, name: str) -> str | None:
        """Return what messages call a table, None where there is no such table."""

    def placed(self, problem: Problem) -> Problem:
        """Return a problem of a folder's file as one of this source."""


@dataclass(frozen=True)
class Folder:
    """Files in a folder: ``survey.toml`` and each table as csv, tab-separated or parquet."""

    def data(self, ledger: Ledger) -> dict[str, Any] | None:
        """Return what ``survey.toml`` says."""
        text = ledger.text_of(DOCUMENT, largest=LARGEST_DOCUMENT)
        return None if text is None else parse_toml(ledger, text)

    def _files(self, ledger: Ledger, name: str) -> list[str]:
        names = [name + ending for ending in READERS if (ledger.folder / (name + ending)).exists()]
        files = [each for each in names if (ledger.folder / each).is_file()]
        return files or names[:1]  # what is no file is told where it is read

    def table(self, ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
        """Return the file of a table as cells."""
        files = self._files(ledger, name) or [f"{name}.csv"]
        for other in files[1:]:
            ledger.problem(other, None, None, f"{files[0]} holds the same table; keep one of the two files")
        return READERS[Path(files[0]).suffix](ledger, files[0], required=required)

    def place_of(self, ledger: Ledger, name: str) -> str | None:
        """Return the file of a table."""
        return next(iter(self._files(ledger, name)), None)

    def placed(self, problem: Problem) -> Problem:
        """Return the problem as it is."""
        return problem


@dataclass
class Sheets:
    """The sheets ``survey``, ``taps``, ``readings`` and ``runs`` of a workbook."""

    workbook: Workbook
    _survey: SurveySheet | None = None

    def data(self, ledger: Ledger) -> dict[str, Any] | None:
        """Return what the sheet ``survey`` says."""
        book = self.workbook
        sheet = self._sheet(ledger, "survey", "add it, with the lines of survey.toml in column A")
        others = [
            each.strip()
            for each in book.sheets
            if each.strip().casefold() not in {"survey", "taps", "readings", "runs"}
        ]
        if others:
            ledger.assumptions.append(
                f"Other sheets of {book.file} are not part of the survey and not read: {', '.join(others)}."
            )
        if sheet is None:
            return None
        rows = book.rows(ledger, sheet)
        self._survey = None if rows is None else read_survey_sheet(ledger, book.place(sheet), rows)
        if self._survey is None:
            return None
        text = self._survey.text
        return self._survey.data if text is None else parse_toml(ledger, text)

    def _sheet(self, ledger: Ledger, name: str, remedy: str) -> str | None:
        sheet = self.workbook.sheet_called(name)
        if sheet is None:
            ledger.problem(
                self.workbook.place(name),
                None,
                None,
                f"the sheet is missing; {remedy} (sheets are {', '.join(self.workbook.sheets)})",
            )
        return sheet

    def table(self, ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
        """Return a sheet as cells."""
        sheet = self._sheet(ledger, name, "add it") if required else self.workbook.sheet_called(name)
        return None if sheet is None else sheet_cells(ledger, self.workbook, sheet)

    def place_of(self, ledger: Ledger, name: str) -> str | None:  # noqa: ARG002 (all sources are asked alike)
        """Return the sheet of a table."""
        sheet = self.workbook.sheet_called(name)
        return None if sheet is None else self.workbook.place(sheet)

    def placed(self, problem: Problem) -> Problem:
        """Return a problem of ``survey.toml`` at its row of the sheet."""
        if problem.file != DOCUMENT:
            return problem
        row, sheet = problem.row, self._survey
        if sheet is not None and row is not None and sheet.lines:
            row = sheet.lines[min(row, len(sheet.lines)) - 1]
        elif sheet is not None and problem.column is not None:
            row = sheet.row_of(problem.column)
        place = self.workbook.place(self.workbook.sheet_called("survey") or "survey")
        return replace(problem, file=place, row=row)


def sheet_cells(ledger: Ledger, workbook: Workbook, sheet: str) -> Cells | None:
    """Return a sheet of a workbook as cells."""
    rows = workbook.rows(ledger, sheet)
    return None if rows is None else cells_of(ledger, workbook.place(sheet), *trimmed(rows))


def _from_workbook(ledger: Ledger, name: str, given: Mapping[str, str]) -> Source | None:
    workbook = open_workbook(ledger, name)
    if workbook is None:
        return None
    if workbook.sheet_called("survey") is not None or not given:
        _refuse(given)
        return Sheets(workbook)
    sheet = workbook.sheet_called("heads") or workbook.sheets[0]
    values = given_values(given)
    return TableOfHeads(
        workbook.place(sheet), partial(sheet_cells, workbook=workbook, sheet=sheet), given, values
    )


def _from_table(ledger: Ledger, name: str, given: Mapping[str, str]) -> Source | None:
    if not given and (ledger.folder / DOCUMENT).is_file():
        raise UsageError(f"{DOCUMENT} lies beside this table; give the folder that holds both")
    values = given_values(given)
    return TableOfHeads(name, partial(READERS[Path(name).suffix.casefold()], name=name), given, values)


#: What reads a survey in one file, by the ending of its name.
ONE_FILE: Mapping[str, Callable[[Ledger, str, Mapping[str, str]], Source | None]] = {
    ".xlsx": _from_workbook,
    ".xlsm": _from_workbook,
    **dict.fromkeys(READERS, _from_table),
}


def _refuse(given: Mapping[str, str]) -> None:
    """A survey that describes its line takes nothing beside it."""
    if given:
        raise UsageError(
            f"the survey says its {' and '.join(given)} itself; leave out {' and '.join(f'--{one}' for one in given)}"
        )


def source_of(ledger: Ledger, path: Path, given: Mapping[str, str | None]) -> Source | None:
    """Return where the tables of a survey are, None (with a problem noted) where there are none.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems; its folder is the survey's, or that of its one file.
    path : Path
        A folder, a workbook, or one table of heads.
    given : mapping of str to str or None
        Diameter, flow and temperature for one table of heads, by the names of `gradeline.loader.heads.GIVEN`.

    Returns
    -------
    Source or None
        What the tables are read from.

    Raises
    ------
    UsageError
        Where something is given that the survey says itself, or is missing beside a table of heads.
    """
    here = {name: text for name in GIVEN if (text := given.get(name)) is not None}
    if path.is_dir() and path.suffix.casefold() in ONE_FILE and not (path / DOCUMENT).exists():
        ledger.problem(
            str(path),
            None,
            None,
            f"this is a folder without {DOCUMENT}, not a file; give the survey's file or folder",
        )
        return None
    if path.is_dir():
        _refuse(here)
        return Folder()
    ending = path.suffix.casefold()
    if not path.is_file():
        what = "there is no such file" if ending in ONE_FILE else "there is no such folder"
        ledger.problem(str(path), None, None, f"{what}; give the folder that holds {DOCUMENT}")
        return None
    if ending not in ONE_FILE:
        what = "this is a file, not a folder"
        ledger.problem(str(path), None, None, f"{what}; give the folder that holds {DOCUMENT}")
        return None
    return ONE_FILE[ending](ledger, path.name, here)


def _source(ledger: Ledger) -> Source:
    return ledger.source if ledger.source is not None else Folder()


def read_data(ledger: Ledger) -> dict[str, Any] | None:
    """Return what ``survey.toml``, or what stands in its place, says; None with the problems noted."""
    return _source(ledger).data(ledger)


def read_table(ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
    """Return the table ``taps``, ``readings`` or ``runs`` of the survey, None with the problems noted."""
    return _source(ledger).table(ledger, name, required=required)


def place_of(ledger: Ledger, name: str) -> str | None:
    """Return what messages call a table of the survey, None where there is no such table."""
    return _source(ledger).place_of(ledger, name)
