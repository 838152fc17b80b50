"""`gradeline plan`: passes on, prints, writes, and ends with the right code."""

from __future__ import annotations

import json
import shutil
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app

BENCH = "data_demo/copper_bench"
FEW = ["--flows", "0.3 to 1.2 L/s", "--runs", "3"]


def run(*arguments: str) -> Any:
    return CliRunner().invoke(app, ["plan", *arguments])


def test_help_is_calm() -> None:
    result = run("--help")
    assert result.exit_code == 0
    assert "Tell what a test will show before it is made" in result.stdout


def test_the_text_fits_a_terminal() -> None:
    result = run(BENCH, *FEW, "--roughness", "0.01 mm", "--fixed", "T5", "--spacing", "200 mm")
    assert result.exit_code == 0, result.stderr
    lines = result.stdout.splitlines()
    assert max(map(len, lines)) <= 100
    for head in (
        "To expect",
        "What buys most",
        "Runs as expected",
        "Readings as expected",
        "Taken for granted",
    ):
        assert any(line.startswith(head) for line in lines), head
    assert result.stderr == ""


def test_json_alone_goes_to_stdout(tmp_path: Path) -> None:
    result = run(BENCH, *FEW, "--json", "--out", str(tmp_path / "plan"))
    assert result.exit_code == 0, result.stderr

    def refuse(text: str) -> None:
        raise AssertionError(text)

    record = json.loads(result.stdout, parse_constant=refuse)
    assert [row["run"] for row in record["levels"]] == ["1", "2", "3"]
    assert record["walls"][0]["wall"] == "drawn copper"
    assert result.stderr.startswith("Written to ")
    assert json.loads((tmp_path / "plan" / "plan.json").read_text(encoding="utf-8")) == record
    assert (tmp_path / "plan" / "expected_grade_lines.png").stat().st_size > 10_000
    assert (
        (tmp_path / "plan" / "columns.csv")
        .read_text()
        .startswith("run,flow,gauge,tap,tap_2,chainage,head,reading")
    )


def test_a_folder_with_something_in_it_is_left_alone(tmp_path: Path) -> None:
    (tmp_path / "notes.txt").write_text("mine")
    result = run(BENCH, *FEW, "--out", str(tmp_path))
    assert result.exit_code == 4
    assert "is not empty (it holds notes.txt)" in result.stderr
    result = run(BENCH, *FEW, "--out", str(tmp_path), "--overwrite")
    assert result.exit_code == 4
    assert "notes.txt, which is no part of a plan" in result.stderr
    assert (tmp_path / "notes.txt").read_text() == "mine"


@pytest.mark.parametrize(
    ("more", "code", "message"),
    [
        (["--flows", "fast"], 2, "--flows 'fast'"),
        ([*FEW, "--reading", "1 s"], 2, "--reading '1 s'"),
        ([*FEW, "--reading", "0 mm"], 2, "give an uncertainty above 0"),
        ([*FEW, "--roughness", "1 mm", "--wall", "a=1 mm"], 2, "both say how rough a wall is"),
        ([*FEW, "--wall", "1 mm"], 2, 'give a name and a value, such as "lower main=0.15 mm"'),
        ([*FEW, "--wall", "copper=1 mm"], 2, "there is no wall 'copper'; walls are drawn copper"),
        ([*FEW, "--loss", "valve=x"], 2, "'x' is not a number; K has no unit"),
        ([*FEW, "--head", "1 m +/- 1 mm"], 2, "give the value alone, without an uncertainty"),
        ([*FEW, "--level", "95"], 2, "--level 95 is no coverage"),
        ([*FEW, "--fixed", "T99"], 2, "there is no tap 'T99'"),
    ],
)
def test_mistakes_are_told_with_their_code(more: list[str], code: int, message: str) -> None:
    result = run(BENCH, *more)
    assert result.exit_code == code
    assert message in result.stderr
    assert result.stdout == ""


def test_a_survey_without_readings_is_enough(tmp_path: Path) -> None:
    folder = tmp_path / "bench"
    shutil.copytree(BENCH, folder)
    (folder / "readings.csv").unlink()
    result = run(str(folder))
    assert result.exit_code == 2
    assert "there are no flows to plan for; give --flows" in result.stderr
    result = run(str(folder), *FEW, "--units", "us")
    assert result.exit_code == 0, result.stderr
    assert "US gal/min" in result.stdout


def test_problems_of_a_survey() -> None:
    result = run("no such folder", *FEW)
    assert result.exit_code == 3
    assert "there is no such folder" in result.stderr
