"""The record for machines: DESIGN's contract, no NaN, no formula in a cell."""

from __future__ import annotations

import csv
import dataclasses
import importlib.util
import io
import json
import math
from pathlib import Path

import pandas as pd
import pytest

from gradeline.reduction.tables import RESULT_TABLES, Reduction
from gradeline.report.record import as_csv, as_json

CONTRACT = Path(__file__).parents[3] / "shared" / "contract.py"


def parsed(reduction: Reduction) -> dict:
    def refuse(name: str) -> None:
        raise AssertionError(f"{name} stands in the JSON")

    return json.loads(as_json(reduction, "1.2.3"), parse_constant=refuse)


@pytest.mark.parametrize("name", ["bench", "field", "many", "hostile"])
def test_every_table_has_its_keys_in_order_and_only_plain_values(
    name: str, request: pytest.FixtureRequest
) -> None:
    reduction = request.getfixturevalue(name)
    record = parsed(reduction)
    assert list(record) == ["gradeline", "survey", "assumptions", "cautions", *RESULT_TABLES]
    assert record["gradeline"] == "1.2.3"
    for table, columns in RESULT_TABLES.items():
        assert len(record[table]) == len(getattr(reduction, table))
        for row in record[table]:
            assert list(row) == list(columns)
            for key, value in row.items():
                kind = {"text": str, "truth": bool, "number": (int, float)}[columns[key].kind]
                assert value is None or isinstance(value, kind), (table, key, value)
                if columns[key].kind == "number" and value is not None:
                    assert not isinstance(value, bool)
                    assert math.isfinite(value)


@pytest.mark.skipif(not CONTRACT.exists(), reason="the project's contract script is not here")
@pytest.mark.parametrize("name", ["bench", "field", "many"])
def test_the_contract_script_agrees(name: str, request: pytest.FixtureRequest) -> None:
    spec = importlib.util.spec_from_file_location("contract", CONTRACT)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    assert list(module.faults(parsed(request.getfixturevalue(name)))) == []


def test_values_come_through_unrounded_and_missing_ones_as_null(bench: Reduction) -> None:
    record = parsed(bench)
    static, flowing = record["runs"][0], record["runs"][6]
    assert static["slope"] is None
    assert static["reason"] == "static run: no flow, no slope"
    assert flowing["slope"] == bench.runs["slope"].iloc[6]
    assert record["walls"][0]["roughness_resolved"] is False
    assert record["survey"]["files"]["survey.toml"] == "0" * 64
    assert record["runs"][6]["observations_used"] == 9


def test_infinity_becomes_null(bench: Reduction) -> None:
    walls = bench.walls.copy()
    walls["roughness_high"] = math.inf
    assert parsed(dataclasses.replace(bench, walls=walls))["walls"][0]["roughness_high"] is None


def test_names_are_kept_as_written_in_json(hostile: Reduction) -> None:
    record = parsed(hostile)
    assert record["flags"][0]["suggestion"] == '=HYPERLINK("http://x")'
    assert record["runs"][1]["run"] == "=2+3"


def test_a_name_that_was_no_unicode_still_makes_a_valid_file(bench: Reduction) -> None:
    broken = dataclasses.replace(bench, survey={**bench.survey, "source": "caf\udce9"})
    assert parsed(broken)["survey"]["source"] == "caf\udce9"


def rows(data: bytes) -> list[list[str]]:
    return list(csv.reader(io.StringIO(data.decode("utf-8"))))


def test_csv_holds_the_same_numbers(bench: Reduction) -> None:
    data = as_csv(bench, "runs")
    assert b"\r" not in data
    head, *body = rows(data)
    assert head == list(RESULT_TABLES["runs"])
    assert float(body[6][head.index("slope")]) == bench.runs["slope"].iloc[6]
    assert body[0][head.index("slope")] == ""
    assert "nan" not in data.decode().lower()


def test_a_table_without_rows_has_its_heading(bench: Reduction) -> None:
    assert as_csv(bench, "budget") == b"quantity,subject,input,contribution_u,variance_share\n"


def test_what_a_spreadsheet_would_run_gets_an_apostrophe(hostile: Reduction) -> None:
    head, *body = rows(as_csv(hostile, "runs"))
    assert [row[head.index("run")] for row in body[:3]] == ["S0", "'=2+3", "-5"]  # -5 is a number
    head, *body = rows(as_csv(hostile, "flags"))
    assert body[0][head.index("suggestion")] == '\'=HYPERLINK("http://x")'


@pytest.mark.parametrize("text", ["=1", "+cmd|x", "-x", "@SUM(A1)", "\t=1", "\r=1"])
def test_every_leading_sign_is_defused(bench: Reduction, text: str) -> None:
    taps = bench.taps.copy()
    taps.loc[0, "tap"] = text
    changed = dataclasses.replace(bench, taps=taps)
    data = as_csv(changed, "taps").decode()
    first = next(iter(list(csv.reader(io.StringIO(data, newline="")))[1:]))[0]
    assert first == "'" + text.replace("\r", "\n")


def test_negative_numbers_stay_numbers(field: Reduction) -> None:
    data = pd.read_csv(io.BytesIO(as_csv(field, "flags")))
    assert data["score"].iloc[0] == field.flags["score"].iloc[0] < 0
