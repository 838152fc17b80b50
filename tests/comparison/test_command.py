"""`gradeline compare`: exit codes, streams, messages."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app
from gradeline.cli.compare import labels_of


def run(*arguments):
    return CliRunner().invoke(app, ["compare", *map(str, arguments)], prog_name="gradeline")


@pytest.fixture(scope="module")
def folders(tmp_path_factory) -> Path:
    root = tmp_path_factory.mktemp("line")
    for year in (2026, 2031):
        shutil.copytree(
            "data_demo/copper_bench", root / str(year), ignore=shutil.ignore_patterns("reduction")
        )
        toml = root / str(year) / "survey.toml"
        toml.write_text(toml.read_text("utf-8").replace("2026-05-06", f"{year}-05-06"), "utf-8")
    return root


def test_two_surveys_are_told_and_written(folders, tmp_path) -> None:
    done = run(folders / "2026", folders / "2031", "--out", tmp_path / "out")
    assert done.exit_code == 0
    assert done.stdout.startswith(
        "Comparison of 2 surveys, 2026-05-06 to 2031-05-06\n\nFound\n  - No change is told"
    )
    assert done.stderr == f"Written to {tmp_path / 'out'}\n"
    assert (tmp_path / "out/figures/friction_factor_1.svg").is_file()
    again = run(folders / "2026", folders / "2031", "--out", tmp_path / "out")
    assert again.exit_code == 4
    assert "is not empty" in again.stderr
    assert again.stdout == ""


def test_json_is_all_that_stands_on_stdout(folders) -> None:
    done = run(folders / "2026", folders / "2031", "--json", "--same-meter", "--same-gauges")
    record = json.loads(done.stdout)
    assert [row["survey"] for row in record["surveys"]] == ["2026", "2031"]
    assert all(
        row["common"] for row in record["shared"] if row["input"] in ("flow calibration", "gauge zero")
    )


def test_a_bad_survey_is_told_and_nothing_is_compared(folders) -> None:
    done = run(folders / "2026", folders / "2099")
    assert done.exit_code == 3
    assert "2099: there is no such folder" in done.stderr
    assert "nothing was compared: mend the surveys named above, or leave them out" in done.stderr
    assert done.stdout == ""


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["2026"], "a comparison takes two surveys or more; found 1"),
        (["2026", "2026"], "one survey is given twice; name each survey once"),
        (["2026", "2031", "--level", "95"], "95 is no coverage; it lies between 0 and 1, such as 0.95"),
        (["2026", "2031", "--until", "soon"], "'soon' is not a date; write it as 2035-01-01"),
        (["2026", "2031", "--reynolds", "900"], "the common Reynolds number is 900"),
    ],
)
def test_wrong_use_is_told(folders, arguments, message) -> None:
    done = run(*[folders / one if one.isdigit() and len(one) == 4 else one for one in arguments])
    assert done.exit_code == 2
    assert message in " ".join(done.stderr.replace("│", " ").split())


def test_surveys_of_one_folder_name_are_told_apart() -> None:
    assert labels_of([Path("a/x.xlsx"), Path("b/x.xlsx"), Path("b/y")]) == ["a/x", "b/x", "b/y"]


def test_what_a_reduction_wrote_is_refused_with_the_remedy(folders) -> None:
    written = folders / "2031" / "reduction"
    written.mkdir()
    (written / "reduction.json").write_text("{}", "utf-8")
    for given in (written, written / "reduction.json"):
        done = run(folders / "2026", given)
        assert done.exit_code == 2
        assert done.stderr.splitlines()[0] == (
            f"{given}: this is what a reduction wrote, while a comparison fits the runs of the surveys anew; give the folder "
            f"of the survey, {folders / '2031'}"
        )
    shutil.rmtree(written)


@pytest.mark.parametrize(
    ("arguments", "code", "message"),
    [
        (["2026"], 2, "a comparison takes two surveys or more; found 1"),
        (["2026", "2099"], 3, "nothing was compared: mend the surveys named above, or leave them out"),
        (["2026", "2031", "--until", "soon"], 2, "'soon' is not a date; write it as 2035-01-01"),
    ],
)
def test_a_failure_is_a_record_as_well(folders, arguments, code, message) -> None:
    done = run(*[folders / one if one.isdigit() and len(one) == 4 else one for one in arguments], "--json")
    assert done.exit_code == code
    record = json.loads(done.stdout)
    assert (record["exit_code"], record["message"]) == (code, message)
    assert message in done.stderr
    if code == 3:
        good, bad = record["surveys"]
        assert (good["exit_code"], good["problems"]) == (0, [])
        assert (bad["exit_code"], bad["problems"][0]["file"]) == (3, str(folders / "2099"))


@pytest.mark.parametrize("command", ["plan", "predict"])
def test_predictions_and_plans_tell_a_failure_in_json_too(tmp_path, command) -> None:
    done = CliRunner().invoke(app, [command, str(tmp_path / "nowhere"), "--json"], prog_name="gradeline")
    assert done.exit_code == 3
    record = json.loads(done.stdout)
    assert (record["source"], record["exit_code"]) == (str(tmp_path / "nowhere"), 3)
    assert record["message"] or record["problems"]
    assert done.stderr
