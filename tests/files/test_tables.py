"""Tables as csv of several dialects and as parquet: what is ambiguous or at fault is told."""

from __future__ import annotations

import re
import sys
from pathlib import Path

import pandas as pd
import pytest

from gradeline.errors import UsageError
from gradeline.loader import read_survey
from tests.files.conftest import BENCH, problems_of, write_folder

READINGS = (BENCH / "readings.csv").read_text("utf-8")
GERMAN = READINGS.replace(",", ";").replace(".", ",")


def test_a_point_among_decimal_commas_is_told_by_its_cell(tmp_path: Path) -> None:
    folder = write_folder(tmp_path / "bench", readings_csv=GERMAN.replace("658,5", "658.5", 1))
    assert problems_of(folder) == [
        "readings.csv row 2, T2 [mm]: '658.5' has a point, but '15,1' in row 2, temperature [degC] has a decimal comma; "
        "write all numbers of the file alike, with no mark between thousands"
    ]


def test_marks_between_thousands_are_told_once(tmp_path: Path) -> None:
    """1.658,5 can be meant, but 1.658 beside it could be either."""
    text = GERMAN.replace("658,5", "1.658,5")
    folder = write_folder(tmp_path / "bench", readings_csv=text)
    more = text.count("1.658,5") - 1
    assert [told.partition(" write")[0] for told in problems_of(folder)] == [
        f"readings.csv row 2, T2 [mm]: '1.658,5' has a point, and so have {more} more cells, but '15,1' in row 2, "
        "temperature [degC] has a decimal comma;"
    ]


def test_a_decimal_comma_in_quotes_between_commas_is_told(tmp_path: Path) -> None:
    text = READINGS.replace("658.5", '"658,5"', 1)
    assert problems_of(write_folder(tmp_path / "bench", readings_csv=text)) == [
        "readings.csv row 2, T2 [mm]: '658,5' has a comma; write decimals with a point and no mark between thousands; "
        "leave the cell empty if the tap was not read"
    ]


def test_what_is_no_number_is_told_as_it_stands(tmp_path: Path) -> None:
    text = GERMAN.replace("658,5", "658,5x", 1)
    assert problems_of(write_folder(tmp_path / "bench", readings_csv=text)) == [
        "readings.csv row 2, T2 [mm]: '658,5x' is not a number; leave the cell empty if the tap was not read"
    ]


def test_two_files_of_one_table_are_told(tmp_path: Path) -> None:
    folder = write_folder(tmp_path / "bench", taps_tsv="tap\tchainage [m]\n")
    assert problems_of(folder) == ["taps.tsv: taps.csv holds the same table; keep one of the two files"]


def parquet_folder(folder: Path, change: str | None = None) -> Path:
    frame = pd.read_csv(BENCH / "taps.csv")
    if change is not None:
        frame = frame.astype({"chainage [m]": object})
        frame.loc[2, "chainage [m]"] = change
        frame = frame.astype({"chainage [m]": str})
    written = write_folder(folder)
    (written / "taps.csv").unlink()
    frame.to_parquet(written / "taps.parquet")
    return written


def test_a_cell_of_parquet_at_fault_is_told_by_its_row(tmp_path: Path) -> None:
    """The first row of data is row 1: there is no row for headings."""
    assert problems_of(parquet_folder(tmp_path / "bench", "1.2x"))[0] == (
        "taps.parquet row 3, chainage [m]: '1.2x' is not a number; give the tap's chainage"
    )


def test_a_missing_column_of_parquet_is_told(tmp_path: Path) -> None:
    folder = write_folder(tmp_path / "bench")
    (folder / "taps.csv").unlink()
    pd.DataFrame({"tap": ["T1"]}).to_parquet(folder / "taps.parquet")
    assert "taps.parquet: the column 'chainage [m]' is missing; add it" in problems_of(folder)


def test_parquet_that_is_none_is_told(tmp_path: Path) -> None:
    folder = parquet_folder(tmp_path / "bench")
    (folder / "taps.parquet").write_bytes(b"tap,chainage [m]\nT1,0\n")
    assert problems_of(folder)[0].startswith("taps.parquet: the file cannot be read as parquet (")


def test_parquet_without_its_reader_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder = parquet_folder(tmp_path / "bench")
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    assert problems_of(folder)[0] == (
        "taps.parquet: parquet files need pyarrow, which is not installed; run pip install 'gradeline[parquet]', or save "
        "the table as csv"
    )


def test_a_text_written_once_and_pointed_at_a_thousand_times_is_refused(tmp_path: Path) -> None:
    """Two megabytes in every cell of a file of a few kilobytes."""
    folder = write_folder(tmp_path / "bench")
    (folder / "taps.csv").unlink()
    frame = pd.DataFrame({"tap": ["x" * 2_000_000] * 1000, "chainage [m]": range(1000)})
    frame.astype({"tap": "category"}).to_parquet(folder / "taps.parquet", compression="zstd")
    assert (folder / "taps.parquet").stat().st_size < 100_000
    (told,) = (each for each in problems_of(folder) if each.startswith("taps.parquet"))
    assert re.fullmatch(
        r"taps.parquet: the table unpacks to 20\d\d MB in 2000 cells, more than 1000 MB or 20000000 cells; split the survey",
        told,
    )


def test_a_column_of_lists_is_told(tmp_path: Path) -> None:
    folder = write_folder(tmp_path / "bench")
    (folder / "taps.csv").unlink()
    pd.DataFrame({"tap": ["T1"], "chainage [m]": [[1.0, 2.0]]}).to_parquet(folder / "taps.parquet")
    assert (
        "taps.parquet chainage [m]: the column holds lists or tables; write one value a cell"
        in problems_of(folder)
    )


def test_a_table_of_a_folder_is_no_survey_by_itself() -> None:
    with pytest.raises(UsageError) as caught:
        read_survey(BENCH / "taps.csv")
    assert str(caught.value) == "survey.toml lies beside this table; give the folder that holds both"
