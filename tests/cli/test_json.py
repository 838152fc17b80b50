"""What other programs get: one JSON on stdout and nothing else, SI units, no NaN."""

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app

DEMO = Path(__file__).resolve().parents[2] / "data_demo"


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments], prog_name="gradeline")


def strict(text):
    """Parse JSON as its standard has it."""

    def refuse(name):
        raise AssertionError(f"{name} is no JSON")

    return json.loads(text, parse_constant=refuse)


def test_check_says_what_was_understood_in_si_units(survey):
    result = run("check", survey, "--json")
    assert result.exit_code == 0
    (one,) = strict(result.stdout)["surveys"]
    assert (one["source"], one["exit_code"], one["message"], one["problems"]) == (str(survey), 0, None, [])
    said = one["survey"]
    assert (said["title"], said["date"]) == ("Bench line", "2026-05-06")
    assert said["reaches"][0]["diameter"] == pytest.approx({"value": 0.02664, "u": 0.00003}, rel=1e-12)
    assert [tap["chainage"] for tap in said["taps"]] == [0.5, 1.5, 2.5]
    assert said["runs"][1]["flow"] == 0.25e-3
    assert said["readings"][1] == {"run": "2", "T1": 0.48, "T2": 0.455, "T3": 0.431}
    assert said["readings"][2]["T2"] is None  # a reading not taken
    assert any("latitude" in text for text in said["assumptions"])


def test_problems_have_their_places(bad_survey, survey):
    result = run("check", bad_survey, survey, "--json")
    assert result.exit_code == 3
    bad, good = strict(result.stdout)["surveys"]
    assert (bad["exit_code"], bad["survey"], good["exit_code"]) == (3, None, 0)
    assert bad["problems"][1] == {
        "file": "readings.csv",
        "row": 3,
        "column": "T2 [mm]",
        "message": "'45x' is not a number; leave the cell empty if the tap was not read",
    }


def test_gauges_in_si_units():
    (one,) = strict(run("gauges", DEMO / "copper_bench", "--json").stdout)["surveys"]
    board = one["gauges"][0]
    assert board["kind"] == "piezometer"
    assert board["largest"] > board["smallest"] > 0
    assert all(isinstance(choice["fits"], bool) for choice in board["choices"])


def test_new_names_its_files_and_refuses_in_json_too(tmp_path):
    folder = tmp_path / "my_pipe"
    made = strict(run("new", folder, "--json").stdout)
    assert made == {
        "folder": str(folder),
        "exit_code": 0,
        "message": None,
        "files": ["survey.toml", "taps.csv", "readings.csv"],
    }
    again = run("new", folder, "--json")
    assert again.exit_code == 4
    refused = strict(again.stdout)
    assert (refused["exit_code"], refused["files"]) == (4, [])
    assert refused["message"].endswith("exists already and is not empty; name a new folder")


def test_reduce_prints_the_record_and_writes_nothing_unasked(survey, bad_survey):
    result = run("reduce", survey, bad_survey, "--json", "--no-monte-carlo")
    assert result.exit_code == 3
    good, bad = strict(result.stdout)["surveys"]
    assert [run["flow"] for run in good["reduction"]["runs"]] == [0.0, 0.25e-3, 0.5e-3]
    assert good["written_to"] is None
    assert not (survey / "reduction").exists()
    assert (bad["reduction"], len(bad["problems"])) == (None, 2)


def test_reduce_prints_what_it_writes(survey, tmp_path):
    out = tmp_path / "out"
    result = run("reduce", survey, "--json", "--no-monte-carlo", "--out", out, "--formats", "json")
    (one,) = strict(result.stdout)["surveys"]
    assert one["written_to"] == str(out)
    assert one["reduction"] == strict((out / "reduction.json").read_text(encoding="utf-8"))


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_completion_is_installed_and_completes(shell, tmp_path):
    """In a home of its own; then the command is asked as the shell would ask it."""
    environment = {
        **os.environ,
        "HOME": str(tmp_path),
        "_TYPER_COMPLETE_TEST_DISABLE_SHELL_DETECTION": "1",
        "PYTHONWARNINGS": "error",
    }
    done = subprocess.run(
        [sys.executable, "-m", "gradeline", "--install-completion", shell],
        capture_output=True,
        text=True,
        check=False,
        env=environment,
    )
    assert done.returncode == 0, done.stderr
    assert f"{shell} completion installed in " in done.stdout
    written = [
        path for path in tmp_path.rglob("*") if path.is_file() and "_GRADELINE_COMPLETE" in path.read_text()
    ]
    assert len(written) == 1
    asked = subprocess.run(
        [sys.executable, "-m", "gradeline"],
        capture_output=True,
        text=True,
        check=False,
        env={
            **environment,
            "_GRADELINE_COMPLETE": f"complete_{shell}",
            "COMP_WORDS": "gradeline re",
            "COMP_CWORD": "1",
            "_TYPER_COMPLETE_ARGS": "gradeline re",
            "_TYPER_COMPLETE_FISH_ACTION": "get-args",
        },
    )
    assert "reduce" in asked.stdout, asked.stderr
    assert "check" not in asked.stdout
