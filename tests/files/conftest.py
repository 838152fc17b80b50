"""The copper bench of the demo data in every form that a survey can have."""

from __future__ import annotations

import csv
import io
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import pytest
import xlsxwriter

from gradeline.errors import SurveyError
from gradeline.loader import read_survey

BENCH = Path(__file__).resolve().parents[2] / "data_demo" / "copper_bench"

Sheet = list[list[Any]]


def value_of(cell: str) -> Any:
    """A cell as a spreadsheet program would hold it: a number where it is one."""
    try:
        return float(cell)
    except ValueError:
        return cell or None


def table(name: str, folder: Path = BENCH) -> Sheet:
    rows = list(csv.reader(io.StringIO((folder / name).read_text("utf-8"))))
    return [rows[0], *([value_of(cell) for cell in row] for row in rows[1:])]


def bench_sheets() -> dict[str, Sheet]:
    lines = (BENCH / "survey.toml").read_text("utf-8").splitlines()
    return {
        "survey": [[line] for line in lines],
        "taps": table("taps.csv"),
        "readings": table("readings.csv"),
    }


def write_workbook(path: Path, sheets: Mapping[str, Sheet]) -> Path:
    with xlsxwriter.Workbook(path, {"default_date_format": "yyyy-mm-dd"}) as book:
        for name, rows in sheets.items():
            sheet = book.add_worksheet(name)
            for row, cells in enumerate(rows):
                for column, cell in enumerate(cells):
                    if isinstance(cell, str):
                        sheet.write_string(row, column, cell)
                    elif cell is not None:
                        sheet.write(row, column, cell)
    return path


def write_folder(folder: Path, **whole: str | bytes) -> Path:
    """The bench as a folder, with files given anew."""
    folder.mkdir(parents=True, exist_ok=True)
    for path in BENCH.iterdir():
        if path.is_file():
            (folder / path.name).write_bytes(path.read_bytes())
    for name, content in whole.items():
        data = content if isinstance(content, bytes) else content.encode()
        (folder / name.replace("_", ".")).write_bytes(data)
    return folder


def problems_of(path: Path, **given: str) -> list[str]:
    with pytest.raises(SurveyError) as caught:
        read_survey(path, **given)
    return [str(problem) for problem in caught.value.problems]


@pytest.fixture
def workbook(tmp_path: Path) -> Callable[..., Path]:
    """Write the bench as bench.xlsx, with sheets given anew or (as None) left out."""

    def write(**sheets: Sheet | None) -> Path:
        kept = {name: rows for name, rows in {**bench_sheets(), **sheets}.items() if rows is not None}
        return write_workbook(tmp_path / "bench.xlsx", kept)

    return write
