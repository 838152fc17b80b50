"""Faults are told at the place that the user knows, whatever the survey came in."""

from __future__ import annotations

import pytest

from tests.files.conftest import bench_sheets, problems_of, write_folder, write_workbook

UTUBE = [
    "",
    "[gauge.m1]",
    'kind = "u-tube"',
    'upstream = "T1"',
    'downstream = "T99"',
    'gauge_fluid = "mercury"',
]


def test_a_gauge_without_its_column_names_the_sheet(tmp_path):
    sheets = bench_sheets()
    sheets["survey"] += [[line] for line in UTUBE]
    told = problems_of(write_workbook(tmp_path / "bench.xlsx", sheets))
    (tap,) = [text for text in told if "there is no tap" in text]
    assert "there is no tap 'T99' in bench.xlsx sheet taps" in tap
    (column,) = [text for text in told if "has no readings of the gauge" in text]
    assert "bench.xlsx sheet readings has no readings of the gauge; add the column 'm1 [mm]'" in column
    assert not any(".csv" in text for text in told)


@pytest.mark.parametrize("ending", [".csv", ".tsv"])
def test_a_gauge_without_its_column_names_the_file(tmp_path, ending):
    folder = write_folder(tmp_path / "bench")
    toml = folder / "survey.toml"
    toml.write_text(toml.read_text("utf-8") + "\n".join(UTUBE), encoding="utf-8")
    if ending != ".csv":
        for name in ("taps", "readings"):
            table = (folder / f"{name}.csv").read_text("utf-8").replace(",", "\t")
            (folder / f"{name}.csv").unlink()
            (folder / f"{name}{ending}").write_text(table, encoding="utf-8")
    told = problems_of(folder)
    assert any(f"there is no tap 'T99' in taps{ending}" in text for text in told)
    assert any(f"readings{ending} has no readings of the gauge" in text for text in told)


@pytest.mark.parametrize(
    "flow",
    ["", '[flow]\nmethod = "direct"\nread = "sideways"\n', '[flow]\nmethod = "bucket"\n'],
)
def test_units_in_round_brackets_are_told_whatever_the_flow_says(tmp_path, flow):
    folder = write_folder(tmp_path / "bench")
    toml, readings = folder / "survey.toml", folder / "readings.csv"
    toml.write_text(toml.read_text("utf-8") + "\n" + flow, encoding="utf-8")
    table = readings.read_text("utf-8")
    assert "flow [L/s]" in table
    assert "T1 [mm]" in table
    table = table.replace("flow [L/s]", "flow (L/s)").replace("T1 [mm]", "T1 (mm)")
    readings.write_text(table, encoding="utf-8")
    told = [text for text in problems_of(folder) if "readings.csv" in text]
    assert told == [
        "readings.csv row 1, flow (L/s): units stand in square brackets; write 'flow [L/s]'",
        "readings.csv row 1, T1 (mm): units stand in square brackets; write 'T1 [mm]'",
    ]


def test_units_in_round_brackets_of_what_a_method_reads(tmp_path):
    folder = write_folder(tmp_path / "bench")
    toml, readings = folder / "survey.toml", folder / "readings.csv"
    toml.write_text(toml.read_text("utf-8") + '\n[flow]\nmethod = "hydrant pitto"\n', encoding="utf-8")
    readings.write_text(
        readings.read_text("utf-8").replace("flow [L/s]", "pitot north (kPa)"), encoding="utf-8"
    )
    assert [text for text in problems_of(folder) if "readings.csv" in text] == [
        "readings.csv row 1, pitot north (kPa): units stand in square brackets; write 'pitot north [kPa]'"
    ]
