"""Faults of workbooks, parquet files and tables of heads."""

from __future__ import annotations

import io
import zipfile
from collections.abc import Callable, Mapping
from functools import cache

import pandas as pd

from tests.broken.bases import BASES, Files, sheets_of, workbook_of
from tests.broken.kinds.case import GIVEN, Broken, R, U, also, cells, whole

__all__ = ["CASES"]


@cache
def _base(name: str) -> Mapping[str, bytes]:
    return BASES[name]()


def _TABLES() -> Files:  # noqa: N802  the tables that the workbook and the parquet file are made of
    files = dict(_base("listed"))
    flows = {"01": "0", "02": "0.25", "NA": "0.5"}
    heads = {"01": "700,700,700,700", "02": "670,655,641,603", "NA": "610,560,511,386"}
    rows = [f"{run},{flows[run]},18.2,{heads[run]}" for run in flows]
    heading = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [mm]"
    del files[U]
    files[R] = "\n".join([heading, *rows, ""]).encode()
    return files


def _sheet(sheet: str, row: int, column: int, value: str | float) -> Callable[[Files], None]:
    """Replace a cell of the workbook; rows and columns count from 1."""

    def change(files: Files) -> None:
        sheets = sheets_of(_TABLES())
        sheets[sheet][row - 1][column - 1] = value
        files["bench.xlsx"] = workbook_of(sheets)

    return change


def _sheets(change_all: Callable[[dict[str, list[list[str | float]]]], object]) -> Callable[[Files], None]:
    """Change the sheets of the workbook."""

    def change(files: Files) -> None:
        sheets = sheets_of(_TABLES())
        change_all(sheets)
        files["bench.xlsx"] = workbook_of(sheets)

    return change


def _table(change_all: Callable[[pd.DataFrame], pd.DataFrame]) -> Callable[[Files], None]:
    """Change the parquet file."""

    def change(files: Files) -> None:
        table = pd.read_parquet(io.BytesIO(files["readings.parquet"]))
        files["readings.parquet"] = change_all(table).to_parquet()

    return change


def _repacked(part: str, content: bytes | None) -> Callable[[Files], None]:
    """Replace a part of the workbook's archive, or leave it out."""

    def change(files: Files) -> None:
        out = io.BytesIO()
        with zipfile.ZipFile(io.BytesIO(files["bench.xlsx"])) as archive, zipfile.ZipFile(out, "w") as packed:
            for name in archive.namelist():
                data = archive.read(name)
                if name != part:
                    packed.writestr(name, data)
                elif content is not None:
                    packed.writestr(name, content)
        files["bench.xlsx"] = out.getvalue()

    return change


_WORKBOOKS = [
    Broken("workbook", "no archive", "workbook", whole("bench.xlsx", b"run,flow\n1,2\n"), "bench.xlsx"),
    Broken(
        "workbook",
        "cut short",
        "workbook",
        lambda files: files.update({"bench.xlsx": files["bench.xlsx"][:2000]}),
        "bench.xlsx",
    ),
    Broken("workbook", "another archive", "workbook", _repacked("xl/workbook.xml", None), "bench.xlsx"),
    Broken(
        "workbook",
        "a sheet of no XML",
        "workbook",
        _repacked("xl/worksheets/sheet3.xml", b"<worksheet><sheetData><row"),
        "bench.xlsx sheet readings",
    ),
    Broken(
        "workbook",
        "a sheet that is not there",
        "workbook",
        _repacked("xl/worksheets/sheet3.xml", None),
        "bench.xlsx sheet readings",
    ),
    Broken(
        "workbook",
        "a document type",
        "workbook",
        _repacked("xl/workbook.xml", b'<?xml version="1.0"?><!DOCTYPE a [<!ENTITY b "c">]><a/>'),
        "bench.xlsx",
    ),
    Broken(
        "workbook",
        "no sheet of taps",
        "workbook",
        _sheets(lambda sheets: sheets.pop("taps")),
        "bench.xlsx sheet taps",
    ),
    Broken(
        "workbook",
        "no sheet of readings",
        "workbook",
        _sheets(lambda sheets: sheets.pop("readings")),
        "bench.xlsx sheet readings",
    ),
    Broken(
        "workbook",
        "no sheet of the line",
        "workbook",
        _sheets(lambda sheets: sheets.pop("survey")),
        "bench.xlsx sheet survey",
    ),
    Broken(
        "workbook",
        "an empty sheet",
        "workbook",
        _sheets(lambda sheets: sheets.update(readings=[])),
        "bench.xlsx sheet readings",
    ),
    Broken(
        "workbook",
        "a word for a reading",
        "workbook",
        _sheet("readings", 3, 5, "off"),
        "bench.xlsx sheet readings row 3, T2 [mm]",
    ),
    Broken(
        "workbook",
        "an error for a reading",
        "workbook",
        _sheet("readings", 3, 5, "=#DIV/0!"),
        "bench.xlsx sheet readings row 3",
    ),
    Broken(
        "workbook",
        "a negative flow",
        "workbook",
        _sheet("readings", 3, 2, -0.25),
        "bench.xlsx sheet readings row 3, flow [L/s]",
    ),
    Broken(
        "workbook",
        "a huge reading",
        "workbook",
        _sheet("readings", 3, 5, 1e300),
        "bench.xlsx sheet readings row 3, T2 [mm]",
    ),
    Broken(
        "workbook",
        "an unknown tap",
        "workbook",
        _sheet("readings", 1, 5, "T22 [mm]"),
        "bench.xlsx sheet readings row 1, T22 [mm]",
    ),
    Broken(
        "workbook",
        "a tap beyond the line",
        "workbook",
        _sheet("taps", 5, 2, 60.0),
        "bench.xlsx sheet taps row 5, chainage [m]",
    ),
    Broken(
        "workbook",
        "an unknown key",
        "workbook",
        _sheet("survey", 17, 1, 'wal = "copper"'),
        "bench.xlsx sheet survey reach[1].wal",
    ),
    Broken(
        "workbook",
        "a line that is no key",
        "workbook",
        _sheet("survey", 17, 1, "wall copper"),
        "bench.xlsx sheet survey row 17",
    ),
    Broken(
        "workbook",
        "a sign that is not printable",
        "workbook",
        _sheet("readings", 3, 1, "0\x7f2"),
        "bench.xlsx sheet readings row 3",
    ),
    Broken(
        "workbook",
        "a sheet of a million columns",
        "workbook",
        _repacked(
            "xl/worksheets/sheet3.xml",
            b'<worksheet><sheetData><row r="1048576"><c r="XFD1048576"><v>1</v></c></row></sheetData></worksheet>',
        ),
        "bench.xlsx",
    ),
]

_PARQUETS = [
    Broken(
        "parquet", "no parquet", "parquet", whole("readings.parquet", b"run,flow\n1,2\n"), "readings.parquet"
    ),
    Broken(
        "parquet",
        "cut short",
        "parquet",
        lambda files: files.update({"readings.parquet": files["readings.parquet"][:-30]}),
        "readings.parquet",
    ),
    Broken(
        "parquet",
        "its middle damaged",
        "parquet",
        lambda files: files.update(
            {
                "readings.parquet": files["readings.parquet"][:60]
                + bytes(400)
                + files["readings.parquet"][460:]
            }
        ),
        "readings.parquet",
    ),
    Broken("parquet", "no rows", "parquet", _table(lambda table: table.iloc[:0]), "readings.parquet"),
    Broken(
        "parquet",
        "lists in a column",
        "parquet",
        _table(lambda table: table.assign(**{"T2 [mm]": [[1], [2], [3]]})),
        "readings.parquet T2 [mm]",
    ),
    Broken(
        "parquet",
        "an infinite reading",
        "parquet",
        _table(lambda table: table.assign(**{"T2 [mm]": [1.0, float("inf"), 2.0]})),
        "readings.parquet row 2, T2 [mm]",
    ),
    Broken(
        "parquet",
        "truths for readings",
        "parquet",
        _table(lambda table: table.assign(**{"T2 [mm]": [True, False, True]})),
        "readings.parquet row 1, T2 [mm]",
    ),
    Broken(
        "parquet",
        "days for readings",
        "parquet",
        _table(lambda table: table.assign(**{"T2 [mm]": pd.Timestamp("2026-05-06")})),
        "readings.parquet row 1, T2 [mm]",
    ),
    Broken(
        "parquet",
        "an unknown column",
        "parquet",
        _table(lambda table: table.rename(columns={"T2 [mm]": "T22 [mm]"})),
        "readings.parquet T22 [mm]",
    ),
    Broken(
        "parquet",
        "a flow of nothing known",
        "parquet",
        _table(lambda table: table.assign(**{"flow [L/s]": [0.0, float("nan"), 0.5]})),
        "readings.parquet row 2, flow [L/s]",
    ),
]

_HEADS = [
    *cells(
        "heads",
        "one table",
        [
            ("no column of heads", "heads.csv", "head [mm]", "high [mm]", " row 1"),
            ("no unit of the heads", "heads.csv", "head [mm]", "head", " row 1, head"),
            ("a pressure for a head", "heads.csv", "head [mm]", "head [kPa]", " row 1, head [kPa]"),
            ("no column of chainages", "heads.csv", "chainage [m]", "place [m]", " row 1"),
            ("a word for a head", "heads.csv", "B,1,850", "B,1,high", " row 3, head [mm]"),
            ("a word for a chainage", "heads.csv", "B,1,850", "B,near,850", " row 3, chainage [m]"),
            ("no chainage", "heads.csv", "B,1,850", "B,,850", " row 3, chainage [m]"),
            ("two taps at one place", "heads.csv", "B,1,850", "B,0,850", " row 3, chainage [m]"),
            ("one tap twice", "heads.csv", "B,1,850", "A,1,850", " row 3, tap"),
            ("one row", "heads.csv", "B,1,850\nC,2,801\nD,3,752\n", "", ""),
            ("a column too many", "heads.csv", "tap,", "tip,", " row 1, tip"),
        ],
    ),
    Broken(
        "one table",
        "a negative flow beside it",
        "heads",
        also(),
        "--flow",
        given={**GIVEN, "flow": "-1 L/s"},
    ),
    Broken(
        "one table",
        "no unit of the bore",
        "heads",
        also(),
        "--diameter",
        given={**GIVEN, "diameter": "26.6"},
    ),
    Broken(
        "one table",
        "a word for a temperature",
        "heads",
        also(),
        "--temperature",
        given={**GIVEN, "temperature": "warm"},
    ),
    Broken(
        "one table",
        "no flow beside it",
        "heads",
        also(),
        "--flow",
        given={key: GIVEN[key] for key in ("diameter", "temperature")},
    ),
    Broken(
        "one table", "a bore of metres", "heads", also(), "--diameter", given={**GIVEN, "diameter": "26.6 m"}
    ),
    Broken(
        "one table", "steam", "heads", also(), "--temperature", given={**GIVEN, "temperature": "180 degC"}
    ),
]

#: Every fault of these kinds.
CASES = [*_WORKBOOKS, *_PARQUETS, *_HEADS]
