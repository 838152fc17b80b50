"""The workbook, read back with another library than the one that wrote it."""

from __future__ import annotations

import dataclasses
import io
import re
import zipfile
from pathlib import Path

import pandas as pd
import pytest
from python_calamine import CalamineWorkbook

from gradeline.reduction.tables import RESULT_TABLES, Reduction
from gradeline.report import write
from gradeline.report.xlsx import _pattern, as_xlsx


def sheets(content: bytes) -> dict[str, list[list[object]]]:
    book = CalamineWorkbook.from_filelike(io.BytesIO(content))
    return {name: book.get_sheet_by_name(name).to_python(skip_empty_area=False) for name in book.sheet_names}


def parts(content: bytes) -> dict[str, str]:
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        return {name: archive.read(name).decode() for name in archive.namelist() if name.endswith(".xml")}


@pytest.fixture(scope="module")
def content(field: Reduction) -> bytes:
    return as_xlsx(field, "9.9")


def test_a_sheet_for_each_table_with_its_columns_and_units(content: bytes) -> None:
    found = sheets(content)
    assert list(found) == ["survey", *RESULT_TABLES, "charts", "chart data"]
    for name, columns in RESULT_TABLES.items():
        assert found[name][0] == list(columns)
        for unit, column in zip(found[name][1], columns.values(), strict=True):
            assert unit == (column.unit or ("1" if column.kind == "number" else ""))


@pytest.mark.parametrize("name", [name for name in RESULT_TABLES if name != "budget"])
def test_numbers_are_numbers_and_missing_ones_empty(content: bytes, field: Reduction, name: str) -> None:
    rows, table = sheets(content)[name][2:], getattr(field, name)
    assert len(rows) == len(table)
    assert len(rows) > 0
    for place, (key, column) in enumerate(RESULT_TABLES[name].items()):
        for row, value in zip(rows, table[key], strict=True):
            cell = row[place]
            if pd.isna(value):
                assert cell == ""
            elif column.kind == "number":
                assert isinstance(cell, float)
                assert cell == pytest.approx(float(value), rel=1e-15)
            elif column.kind == "truth":
                assert cell is bool(value)
            else:
                assert cell == value


def test_assumptions_cautions_and_files_are_told(content: bytes, field: Reduction) -> None:
    rows = [tuple(row[:2]) for row in sheets(content)["survey"]]
    for text in field.assumptions:
        assert ("assumption", text) in rows
    for text in field.cautions:
        assert ("caution", text) in rows
    assert ("SHA-256 of taps.csv", "1a" * 32) in rows
    assert ("units", "SI throughout") in rows


def test_nothing_can_run_as_a_formula(hostile: Reduction) -> None:
    content = as_xlsx(hostile, "9.9")
    runs = [row[0] for row in sheets(content)["runs"][2:]]
    assert "'=2+3" in runs
    assert "-5" in runs  # a number is let be
    flags = sheets(content)["flags"]
    assert flags[2][list(RESULT_TABLES["flags"]).index("suggestion")] == '\'=HYPERLINK("http://x")'
    for name, xml in parts(content).items():
        if name.startswith("xl/worksheets/"):
            assert "<f>" not in xml
            assert "hyperlink" not in xml.lower()


def test_heads_stay_in_sight(content: bytes) -> None:
    for name, xml in parts(content).items():
        if re.fullmatch(r"xl/worksheets/sheet([2-9])\.xml", name):
            pane = re.search(r"<pane [^>]*>", xml)
            assert pane is not None
            assert 'xSplit="1"' in pane[0]
            assert 'ySplit="2"' in pane[0]
            assert 'state="frozen"' in pane[0]


def test_charts_show_the_runs_on_log_axes(content: bytes, field: Reduction) -> None:
    charts = [xml for name, xml in parts(content).items() if name.startswith("xl/charts/chart")]
    assert len(charts) == 2
    for xml in charts:
        assert "(1)" not in xml
        assert xml.count("<c:errBars>") == len(field.reaches)
    fitted = sum("fitted law" in xml for xml in charts)
    assert [xml.count("<c:ser>") for xml in charts] == [len(field.reaches), 2 * len(field.reaches)]
    assert fitted == 1
    rows = sheets(content)["chart data"]
    upper = field.runs[(field.runs["reach"] == "upper main") & (field.runs["regime"] != "static")]
    shown = [(row[0], row[1]) for row in rows[3:] if row[0] != ""]
    assert shown == [
        pytest.approx(pair, rel=1e-15) for pair in zip(upper["velocity"], upper["slope"], strict=True)
    ]


def test_axes_lie_about_the_data(content: bytes, field: Reduction) -> None:
    flowing = field.runs[field.runs["regime"] != "static"]
    charts = [xml for name, xml in sorted(parts(content).items()) if name.startswith("xl/charts/chart")]
    for xml, names in zip(charts, (("velocity", "slope"), ("reynolds", "friction_factor")), strict=True):
        limits = [
            (float(low), float(high))
            for high, low in re.findall(r'<c:max val="([^"]+)"/><c:min val="([^"]+)"/>', xml)
        ]
        for (low, high), name in zip(limits, names, strict=True):
            assert low <= flowing[name].min() <= flowing[name].max() <= high
            # the next of 1, 2 and 5 on a log axis, at the interval's ends on an even one
            assert high / low < 30 * flowing[name].max() / flowing[name].min()


def test_sheets_are_made_for_paper(content: bytes) -> None:
    found = parts(content)
    for name, xml in found.items():
        if name.startswith("xl/worksheets/"):
            assert 'fitToWidth="1"' in xml or "<pageSetUpPr fitToPage" in xml
            assert "page &amp;P of &amp;N" in xml
    assert found["xl/workbook.xml"].count("_xlnm.Print_Titles") >= len(RESULT_TABLES)
    survey = found["xl/worksheets/sheet1.xml"]
    heights = [float(height) for height in re.findall(r'<row [^>]* ht="([^"]+)"', survey)]
    assert max(heights) >= 30  # a long text has more than one line


@pytest.mark.parametrize(
    ("sizes", "pattern"),
    [
        ([6.0, 12.0], "0"),
        ([0.041234, 0.0375], "0.000000"),
        ([20164.3, 2576.1], "0"),
        ([1.2e-6], "0.0000E+00"),
        ([], "0"),
    ],
)
def test_number_formats_show_about_five_digits(sizes: list[float], pattern: str) -> None:
    assert _pattern(sizes) == pattern


def test_a_survey_at_rest_has_no_charts(make) -> None:
    at_rest = make["field"](flows=[])
    assert "charts" not in sheets(as_xlsx(at_rest, "9.9"))


def test_text_that_no_cell_can_hold(bench: Reduction) -> None:
    odd = dataclasses.replace(
        bench, survey={**bench.survey, "source": "caf\udce9\x07"}, cautions=("y" * 40_000,)
    )
    rows = sheets(as_xlsx(odd, "9.9"))["survey"]
    assert any(row[0] == "source" and str(row[1]).startswith("caf?") for row in rows)
    assert max(len(str(row[1])) for row in rows) == 32_767


def test_pdf_and_xlsx_are_written_where_asked_for(bench: Reduction, tmp_path: Path) -> None:
    write(bench, tmp_path / "out", formats=("pdf", "xlsx"), paper="letter")
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == ["reduction.xlsx", "report.pdf"]
    assert (tmp_path / "out" / "report.pdf").read_bytes().startswith(b"%PDF-")
    write(bench, tmp_path / "out", formats=("xlsx",), overwrite=True)
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["reduction.xlsx"]
