"""What a workbook at fault is told, and that none is read beyond its bounds."""

from __future__ import annotations

import datetime
import io
import zipfile
from collections.abc import Mapping
from pathlib import Path

import pytest
import xlsxwriter

from gradeline.errors import SurveyError
from gradeline.loader import read_survey
from tests.files.conftest import bench_sheets, problems_of, write_workbook


def test_a_cell_at_fault_is_told_with_sheet_and_row(workbook) -> None:
    readings = bench_sheets()["readings"]
    readings[6][6] = "12,4x"
    assert problems_of(workbook(readings=readings)) == [
        "bench.xlsx sheet readings row 7, T4 [mm]: '12,4x' is not a number; leave the cell empty if the tap was not read"
    ]


def test_faults_of_all_sheets_are_told_in_the_order_of_reading(workbook) -> None:
    sheets = bench_sheets()
    sheets["readings"][3][3] = "x"
    sheets["taps"][2][1] = "y"
    sheets["survey"] = [[line[0].replace('"5.5 m"', '"5.5"')] for line in sheets["survey"]]
    places = [told.partition(":")[0] for told in problems_of(workbook(**sheets))]
    assert places[:3] == [
        "bench.xlsx sheet survey reach[1].to",
        "bench.xlsx sheet taps row 3, chainage [m]",
        "bench.xlsx sheet readings row 4, T1 [mm]",
    ]


def test_a_number_typed_as_text_with_a_comma_is_told(workbook) -> None:
    readings = bench_sheets()["readings"]
    readings[2][3] = "644,5"
    assert problems_of(workbook(readings=readings)) == [
        "bench.xlsx sheet readings row 3, T1 [mm]: '644,5' has a comma; write decimals with a point and no mark between "
        "thousands; leave the cell empty if the tap was not read"
    ]


def test_a_reading_that_became_a_date_is_told(workbook) -> None:
    readings = bench_sheets()["readings"]
    readings[2][3] = datetime.date(2026, 5, 1)
    assert problems_of(workbook(readings=readings)) == [
        "bench.xlsx sheet readings row 3, T1 [mm]: '2026-05-01' is not a number; leave the cell empty if the tap was "
        "not read"
    ]


def test_an_error_of_a_formula_is_no_empty_cell(tmp_path: Path) -> None:
    path = tmp_path / "bench.xlsx"
    with xlsxwriter.Workbook(path) as book:
        for name, rows in bench_sheets().items():
            sheet = book.add_worksheet(name)
            for row, cells in enumerate(rows):
                sheet.write_row(row, 0, ["" if cell is None else cell for cell in cells])
            if name == "readings":
                sheet.write_formula("E4", "=1/0", None, "#DIV/0!")
    assert problems_of(path) == [
        "bench.xlsx sheet readings row 4: the formula in cell E4 has an error for its value; mend it or empty the cell"
    ]


def test_a_missing_sheet_is_told(workbook) -> None:
    assert "bench.xlsx sheet taps: the sheet is missing; add it (sheets are survey, readings)" in problems_of(
        workbook(taps=None)
    )


def test_a_fault_of_toml_is_told_at_its_row(workbook) -> None:
    rows = [["[survey]"], [], ['title = "x']]
    assert (
        "bench.xlsx sheet survey row 3: this is not TOML: Illegal character '\\n', at character 11; mend the line"
        in problems_of(workbook(survey=rows))
    )


@pytest.mark.parametrize(
    ("rows", "told"),
    [
        (
            [["[gauge.board]"], ["kind", "piezometer"], ["zeros", "0.8 m"]],
            "bench.xlsx sheet survey row 3, gauge.board.zeros: unknown key 'zeros'; did you mean 'zero'?",
        ),
        (
            [["reach[1].name", "a"], ["reach[1].from", 26.6]],
            "bench.xlsx sheet survey row 2, reach[1].from: 26.6 has no unit; write it in quotes with its unit, such as "
            "'5.5 m'",
        ),
        (
            [["survey.title", "a"], ["survey.title", "b"]],
            "bench.xlsx sheet survey row 2: the key 'survey.title' stands above already; keep one of the two",
        ),
        (
            [["reach[2].name", "a"]],
            "bench.xlsx sheet survey row 1: 'reach[2]' comes before its forerunner; count from 1",
        ),
        (
            [["survey..title", "a"]],
            "bench.xlsx sheet survey row 1: 'survey..title' is no key; write it as fluid.name or reach[1].diameter",
        ),
        ([["", "26 mm"]], "bench.xlsx sheet survey row 1: '26 mm' has no key before it; name it"),
        (
            [["fluid", "water"], ["fluid.name", "water"]],
            "bench.xlsx sheet survey row 2: 'fluid' has a value already; a table cannot stand there",
        ),
        (
            [["reach[1]", "a"]],
            "bench.xlsx sheet survey row 1: 'reach[1]' is one of a list; write a key of it, such as reach[1].name",
        ),
        (
            [["[fluid]"], ["[[fluid]]"]],
            "bench.xlsx sheet survey row 2: 'fluid' is a table already; head it [fluid] or make each of them [[fluid]]",
        ),
        (
            [["fluid.name", "water", "tap water"]],
            "bench.xlsx sheet survey row 1: 'tap water' stands in column C, but a key and its value take two columns; "
            "move it, or head the column 'note'",
        ),
        (
            [['name = "water"', "tap water"]],
            "bench.xlsx sheet survey row 1: 'tap water' stands in column B, but column A holds lines of TOML, and nothing "
            "may stand beside them; move it, or head the column 'note'",
        ),
        (
            [['name = "water"'], [5.0]],
            'bench.xlsx sheet survey row 2: 5.0 is no line of TOML; write it as text, such as name = "water"',
        ),
    ],
)
def test_a_survey_sheet_at_fault_is_told(workbook, rows, told) -> None:
    assert told in problems_of(workbook(survey=rows))


def packed(parts: Mapping[str, bytes], **options: object) -> bytes:
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED, **options) as archive:
        for name, content in parts.items():
            archive.writestr(name, content)
    return stream.getvalue()


def parts_of(path: Path) -> dict[str, bytes]:
    with zipfile.ZipFile(path) as archive:
        return {name: archive.read(name) for name in archive.namelist()}


def told_of(path: Path, content: bytes) -> str:
    path.write_bytes(content)
    with pytest.raises(SurveyError) as caught:
        read_survey(path)
    return str(caught.value)


def test_a_zip_bomb_is_refused_unread(tmp_path: Path) -> None:
    content = packed({"xl/workbook.xml": b"", "xl/sharedStrings.xml": bytes(450_000_000)}, compresslevel=1)
    assert len(content) < 3_000_000
    assert told_of(tmp_path / "bench.xlsx", content) == (
        "bench.xlsx: the workbook unpacks to 450 MB; at most 400 MB in 2000 parts are read: keep only the survey's "
        "sheets, or save them as csv"
    )


def test_a_directory_that_lies_about_a_size_is_refused(workbook) -> None:
    """The directory says 10 bytes where a part unpacks to many more."""
    path = workbook()
    content = bytearray(path.read_bytes())
    entry = content.rindex(b"xl/worksheets/sheet1.xml") - 46
    assert content[entry : entry + 4] == b"PK\x01\x02"
    content[entry + 24 : entry + 28] = (10).to_bytes(4, "little")
    assert told_of(path, bytes(content)) == (
        "bench.xlsx: the file is damaged or locked by a password; save it again as .xlsx without one"
    )


def test_a_sheet_that_spans_everything_is_refused(tmp_path: Path) -> None:
    sheets = bench_sheets()
    path = write_workbook(tmp_path / "bench.xlsx", sheets)
    with xlsxwriter.Workbook(path) as book:
        book.add_worksheet("taps").write(0, 0, 1)
        book.get_worksheet_by_name("taps").write(1_048_575, 16_383, 1)
    assert told_of(path, path.read_bytes()) == (
        "bench.xlsx: a sheet spans 1048576 rows by 16384 columns, more than 5000000 cells; delete the empty rows and "
        "columns, or save the sheets as csv"
    )


def test_long_texts_in_many_cells_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "bench.xlsx"
    with xlsxwriter.Workbook(path) as book:
        sheet = book.add_worksheet("taps")
        for row in range(40_000):
            sheet.write_string(row, 0, "x" * 32_000)
    assert told_of(path, path.read_bytes()) == (
        "bench.xlsx: the texts of a sheet are too long to be meant; shorten them"
    )


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"tap,chainage [m]\n", "the file is no Excel workbook (.xlsx); save it as one"),
        (b"\xd0\xcf\x11\xe0", "the file is no Excel workbook (.xlsx); save it as one"),
        (
            b"PK\x03\x04 cut off",
            "the file is damaged or locked by a password; save it again as .xlsx without one",
        ),
        (packed({"a.txt": b"x"}), "the file is a zip archive but no Excel workbook; save it as .xlsx"),
        (
            packed({"xl/workbook.xml": b"<!DOCTYPE x [<!ENTITY a 'b'>]><workbook/>"}),
            "'xl/workbook.xml' in the workbook declares a document type; save it again as .xlsx",
        ),
    ],
)
def test_what_is_no_workbook_is_told(tmp_path: Path, content: bytes, told: str) -> None:
    assert told_of(tmp_path / "bench.xlsx", content) == f"bench.xlsx: {told}"


def test_a_damaged_part_reaches_no_user_as_a_traceback(workbook) -> None:
    path = workbook()
    for name in (
        "xl/workbook.xml",
        "xl/worksheets/sheet1.xml",
        "xl/sharedStrings.xml",
        "xl/_rels/workbook.xml.rels",
    ):
        for broken in (b"", b"<a><b", b"\xff\xfe\x00"):
            content = packed({**parts_of(path), name: broken})
            with pytest.raises(SurveyError):
                read_survey(_written(path.with_name("broken.xlsx"), content))


def _written(path: Path, content: bytes) -> Path:
    path.write_bytes(content)
    return path
