"""The summary over many surveys: its columns, and what a spreadsheet or another program makes of it."""

import csv
import io

import numpy as np
import pytest

import gradeline
from gradeline.reduction.columns import RESULT_TABLES
from gradeline.report.summary import SUMMARY_COLUMNS, failed_row, summary_csv, summary_parquet, summary_rows


@pytest.fixture(scope="module")
def cast_main():
    return gradeline.reduce(gradeline.read_survey("data_demo/cast_main"), monte_carlo=False)


def test_a_column_that_a_result_table_has_too_means_the_same_there():
    for table in ("walls", "runs", "reaches"):
        for name, column in RESULT_TABLES[table].items():
            if name in SUMMARY_COLUMNS:
                assert SUMMARY_COLUMNS[name] == column, name


def test_a_row_says_what_the_tables_say(cast_main):
    (row,) = summary_rows(cast_main, "data_demo/cast_main")
    assert list(row) == list(SUMMARY_COLUMNS)
    wall, runs = cast_main.walls.iloc[0], cast_main.runs
    for name in ("roughness", "roughness_low", "roughness_high", "roughness_upper95"):
        assert row[name] == wall[name]
    assert row["roughness_resolved"] is True
    fastest = runs.loc[runs["reynolds"].idxmax()]
    for name in ("reynolds", "velocity", "friction_factor", "friction_factor_u"):
        assert row[name] == fastest[name]
    # the narrower of the two mains, in which the same flow has the higher Re (its survey.toml: 203 mm)
    assert row["diameter"] == 0.203
    assert (row["slope_least"], row["slope_greatest"]) == (runs["slope"].min(), runs["slope"].max())
    assert row["runs"] == 6  # flows in its readings.csv beside the static run
    assert (row["flags"], row["cautions"]) == (len(cast_main.flags), len(cast_main.cautions))
    assert (row["exit_code"], row["problem"]) == (0, None)
    assert (row["survey"], row["date"]) == ("data_demo/cast_main", "2026-03-18")


def test_static_runs_are_no_runs_of_the_summary():
    bench = gradeline.reduce(gradeline.read_survey("data_demo/copper_bench"), monte_carlo=False)
    (row,) = summary_rows(bench, "bench")
    assert row["runs"] == (bench.runs["regime"] != "static").sum() < len(bench.runs)
    assert row["slope_least"] > 0


def test_no_cell_of_the_csv_is_a_formula(cast_main):
    named = dict(cast_main.survey, title="=HYPERLINK(1)", date=None)
    (row,) = summary_rows(type(cast_main)(**{**vars(cast_main), "survey": named}), "@sum/-2+3")
    text = summary_csv([row, failed_row("+1+1", 3, "taps.csv: -no taps; add them")]).decode()
    first, second = csv.DictReader(io.StringIO(text))
    assert first["title"] == "'=HYPERLINK(1)"
    assert first["survey"] == "'@sum/-2+3"
    assert first["date"] == ""
    assert second["survey"] == "'+1+1"
    assert not any(cell[:1] in "=+-@" for one in (first, second) for cell in one.values() if cell)
    assert float(first["roughness"]) == row["roughness"]


def test_parquet_holds_the_same_with_units_and_the_names_as_they_were(cast_main):
    parquet = pytest.importorskip("pyarrow.parquet", reason="the extra parquet is not installed")
    rows = [*summary_rows(cast_main, "=a"), failed_row("b\udcff", 3, "taps.csv: missing")]
    table = parquet.read_table(io.BytesIO(summary_parquet(rows)))
    assert table.column_names == list(SUMMARY_COLUMNS)
    for name, column in SUMMARY_COLUMNS.items():
        unit = (table.schema.field(name).metadata or {}).get(b"unit", b"").decode()
        assert unit == column.unit
    first, second = table.to_pylist()
    assert first == dict(rows[0])
    assert second["survey"] == "b\\udcff"  # a file name that is no text stands escaped
    assert second["roughness"] is None
    assert second["exit_code"] == 3


def test_no_number_is_ever_nan(cast_main):
    walls = cast_main.walls.assign(roughness=np.nan, roughness_low=np.inf)
    (row,) = summary_rows(type(cast_main)(**{**vars(cast_main), "walls": walls}), "a")
    assert row["roughness"] is None
    assert row["roughness_low"] is None
