"""One survey in every form gives one reduction, to the last digit."""

from __future__ import annotations

import datetime
import hashlib
import tomllib
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from gradeline.loader import read_survey
from gradeline.reduction import Reduction, reduce
from gradeline.reduction.tables import RESULT_TABLES
from tests.files.conftest import BENCH, bench_sheets, table, write_folder, write_workbook

TABLES = ("taps.csv", "readings.csv")


def reworded(folder: Path, change: Callable[[str], str], encoding: str = "utf-8") -> Path:
    texts = {name: change((BENCH / name).read_text("utf-8")).encode(encoding) for name in TABLES}
    return write_folder(folder, **{name.replace(".", "_"): text for name, text in texts.items()})


def semicolons(folder: Path) -> Path:
    return reworded(folder, lambda text: text.replace(",", ";"))


def decimal_commas(folder: Path) -> Path:
    return reworded(folder, lambda text: text.replace(",", ";").replace(".", ","))


def with_hint(folder: Path) -> Path:
    return reworded(folder, lambda text: "sep=;\n" + text.replace(",", ";").replace(".", ","))


def tabs(folder: Path) -> Path:
    return reworded(folder, lambda text: text.replace(",", "\t").replace(".", ","))


def windows_lines(folder: Path) -> Path:
    written = reworded(folder, lambda text: text.replace("\n", "\r\n"))
    toml = written / "survey.toml"
    toml.write_bytes(toml.read_bytes().replace(b"\n", b"\r\n"))
    return written


def utf_16(folder: Path) -> Path:
    return reworded(folder, lambda text: text.replace(",", ";").replace(".", ","), "utf-16")


def byte_order_mark(folder: Path) -> Path:
    return reworded(folder, str, "utf-8-sig")


def workbook(folder: Path) -> Path:
    return write_workbook(folder.parent / "bench one.xlsx", bench_sheets())


def one_cell_of_toml(folder: Path) -> Path:
    text = (BENCH / "survey.toml").read_text("utf-8")
    return write_workbook(folder.parent / "bench.xlsx", {**bench_sheets(), "survey": [[text]]})


def parquet(folder: Path) -> Path:
    written = write_folder(folder)
    for name in TABLES:
        heading, *rows = table(name)
        frame = pd.DataFrame(rows, columns=heading)
        if "run" in frame:
            frame["run"] = [str(run) if isinstance(run, str) else f"{run:.0f}" for run in frame["run"]]
        frame.to_parquet(written / name.replace(".csv", ".parquet"))
        (written / name).unlink()
    return written


FORMS = {
    form.__name__: form
    for form in (
        semicolons,
        decimal_commas,
        with_hint,
        tabs,
        windows_lines,
        utf_16,
        byte_order_mark,
        workbook,
        one_cell_of_toml,
        parquet,
    )
}


@pytest.fixture(scope="module")
def expected() -> Reduction:
    return reduce(read_survey(BENCH))


@pytest.mark.parametrize("form", FORMS)
def test_every_form_gives_the_reduction_of_the_folder(form: str, expected: Reduction, tmp_path: Path) -> None:
    found = reduce(read_survey(FORMS[form](tmp_path / "Prüfstand zwei")))
    for name in RESULT_TABLES:
        pd.testing.assert_frame_equal(getattr(found, name), getattr(expected, name), check_exact=True)


@pytest.mark.parametrize("form", ["semicolons", "workbook", "parquet"])
def test_every_file_read_is_hashed(form: str, tmp_path: Path) -> None:
    path = FORMS[form](tmp_path / "bench")
    folder = path if path.is_dir() else path.parent
    files = {file.name: file.sha256 for file in read_survey(path).files}
    on_disk = [path] if path.is_file() else sorted(folder.iterdir())
    assert files == {each.name: hashlib.sha256(each.read_bytes()).hexdigest() for each in on_disk}


@pytest.mark.parametrize("form", ["decimal_commas", "tabs", "utf_16"])
def test_a_decimal_comma_is_told(form: str, tmp_path: Path) -> None:
    told = read_survey(FORMS[form](tmp_path / "bench")).assumptions
    assert (
        "The decimals of readings.csv are set off by a comma ('15,1' in row 2, temperature [degC]): 1,234 is a "
        "little more than one." in told
    )


def test_semicolons_with_decimal_points_assume_nothing(tmp_path: Path) -> None:
    told = read_survey(semicolons(tmp_path / "bench")).assumptions
    assert not any("comma" in sentence for sentence in told)


def test_labels_keep_their_commas(tmp_path: Path) -> None:
    """A run called `1,5` is text, also where numbers have a decimal comma."""
    text = (BENCH / "readings.csv").read_text("utf-8").replace(",", ";").replace(".", ",")
    folder = write_folder(tmp_path / "bench", readings_csv=text.replace("\n1;", '\n"1,5";', 1))
    assert "1,5" in set(read_survey(folder).runs["run"])


def test_a_table_of_keys_says_what_toml_says(tmp_path: Path) -> None:
    """Headers in brackets, or whole paths; a date cell is a date."""
    written = tomllib.loads((BENCH / "survey.toml").read_text("utf-8"))
    rows: list[list[object]] = [["key", "value"]]
    for name, content in written.items():
        if isinstance(content, list):
            for each in content:
                rows += [[f"[[{name}]]"], *([key, value] for key, value in each.items()), []]
        elif name == "gauge":
            rows += [[f"[gauge.{one}]"] for one in content]
            rows += [[key, value] for one in content.values() for key, value in one.items()]
        else:
            rows.append([f"[{name}]"])
            rows += [[key, value] for key, value in content.items()]
    assert any(isinstance(row[-1], datetime.date) for row in rows if row)
    sheets = {**bench_sheets(), "survey": rows}
    found, plain = read_survey(write_workbook(tmp_path / "bench.xlsx", sheets)), read_survey(BENCH)
    for name in ("title", "date", "reaches", "fittings", "taps", "gauges", "fluid", "site", "stated"):
        assert getattr(found, name) == getattr(plain, name)


def test_long_readings_as_sheets(tmp_path: Path) -> None:
    heading, *rows = table("readings.csv")
    taps = [name.split(" ")[0] for name in heading[3:]]
    sheets = {
        **bench_sheets(),
        "runs": [heading[:3], *(row[:3] for row in rows)],
        "readings": [
            ["run", "tap", "reading [mm]"],
            *([row[0], tap, value] for row in rows for tap, value in zip(taps, row[3:], strict=True)),
        ],
    }
    found, plain = read_survey(write_workbook(tmp_path / "bench.xlsx", sheets)), read_survey(BENCH)
    pd.testing.assert_frame_equal(found.readings, plain.readings, check_exact=True)


def test_a_number_keeps_every_digit(tmp_path: Path) -> None:
    """Not the two decimals that a cell's format shows."""
    sheets = bench_sheets()
    sheets["readings"][1][3] = 658.0123456789012
    survey = read_survey(write_workbook(tmp_path / "bench.xlsx", sheets))
    assert survey.readings.iloc[0, 0] == 658.0123456789012 * 1e-3


def test_other_sheets_are_told(tmp_path: Path) -> None:
    path = write_workbook(tmp_path / "bench.xlsx", {**bench_sheets(), "plots": [["x"]]})
    told = "Other sheets of bench.xlsx are not part of the survey and not read: plots."
    assert told in read_survey(path).assumptions
