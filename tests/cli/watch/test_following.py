"""What follows on a saved file, and how it begins and ends."""

from __future__ import annotations

import json
import os
import re
import signal
import subprocess
import sys
from pathlib import Path
from threading import Timer

import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app
from gradeline.cli.reducing import Choices
from gradeline.cli.watch.following import Follower

CHOICES = Choices(level=0.95, correct="static", keep_all=False, exclude=(), monte_carlo=False)


@pytest.fixture
def follower(survey: Path, tmp_path: Path) -> Follower:
    return Follower(survey, tmp_path / "out", CHOICES)


def change(survey: Path, old: str, new: str) -> None:
    path = survey / "readings.csv"
    path.write_text(path.read_text().replace(old, new))


def test_it_reduces_once_and_again_when_something_was_saved(follower, survey, capsys):
    assert follower.step().code == 0
    assert "<title>Bench line</title>" in follower.live.shown.report
    first = follower.live.shown.version
    assert follower.step() is None
    change(survey, "455", "457")
    assert follower.step().code == 0
    assert follower.live.shown.version != first
    told = capsys.readouterr()
    assert told.out.count("copper ε ") == 2
    assert told.err == ""
    for name in ("report.html", "reduction.json", "runs.csv", "figures"):
        assert (follower.out / name).exists()
    assert not list(follower.out.parent.glob(".out-*"))


def test_the_last_good_page_stays_while_there_are_problems(follower, survey, capsys):
    follower.step()
    report = follower.live.shown.report
    change(survey, "455", "45x")
    assert follower.step().code == 3
    shown = follower.live.shown
    assert shown.report == report == (follower.out / "report.html").read_text(encoding="utf-8")
    assert shown.problems == (
        "readings.csv row 3, T2 [mm]: '45x' is not a number; leave the cell empty if the tap was not read",
    )
    assert f"{survey}: 1 problem" in capsys.readouterr().err
    change(survey, "45x", "455")
    assert follower.step().code == 0
    assert follower.live.shown.problems == ()


def test_problems_of_a_moment_are_not_told(follower, survey):
    """A program that writes one file, and the other half a second later."""
    follower.step()
    text = (survey / "readings.csv").read_text()
    change(survey, "455", "45x")
    Timer(0.6, lambda: (survey / "readings.csv").write_text(text)).start()
    assert follower.step().code == 0
    assert follower.live.shown.problems == ()


def test_a_file_that_goes_and_comes_is_followed(follower, survey):
    """As programs do that save under another name and rename."""
    follower.step()
    (survey / "readings.csv").rename(survey / "readings.bak")
    assert follower.step().code == 3
    assert "readings.csv: the file is missing" in follower.live.shown.problems[0]
    (survey / "readings.bak").rename(survey / "readings.csv")
    assert follower.step().code == 0


def test_a_file_that_stays_locked_is_told_and_tried_again(follower, survey, monkeypatch):
    follower.step()
    locked = {"on": True}

    def refusing(opened):
        def open_it(path, *arguments, **keys):
            if locked["on"] and str(path).endswith("readings.csv"):
                raise PermissionError(13, "Permission denied")
            return opened(path, *arguments, **keys)

        return open_it

    for place, name in ((os, "open"), (Path, "open"), (Path, "read_bytes")):
        monkeypatch.setattr(place, name, refusing(getattr(place, name)))
    monkeypatch.setattr("gradeline.cli.watch.following.PATIENCE", 0.5)
    os.utime(survey / "readings.csv", (1, 1))
    assert follower.step().code == 3
    assert follower.live.shown.problems == (
        "readings.csv: the file cannot be read (Permission denied); check its permissions",
    )
    locked["on"] = False
    assert follower.step().code == 0  # though nothing was saved since


def test_an_error_that_nobody_foresaw_does_not_end_it(follower, survey, monkeypatch):
    follower.step()
    monkeypatch.delenv("GRADELINE_TRACEBACK", raising=False)
    with monkeypatch.context() as patch:
        patch.setattr("gradeline.reduction.reduce", lambda *_a, **_k: 1 / 0)
        change(survey, "455", "456")
        assert follower.step().code == 1
    assert "does not know (ZeroDivisionError" in follower.live.shown.problems[0]
    change(survey, "456", "455")
    assert follower.step().code == 0


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments], prog_name="gradeline")


def test_a_survey_that_is_not_there_is_not_watched(tmp_path):
    result = run("watch", tmp_path / "nowhere")
    assert result.exit_code == 3
    assert "there is no such folder; give the folder that holds survey.toml" in result.stderr
    assert result.stdout == ""


def test_results_of_somebody_else_are_not_replaced(survey, tmp_path):
    out = tmp_path / "out"
    out.mkdir()
    (out / "thesis.txt").write_text("mine")
    result = run("watch", survey, "--out", out, "--no-monte-carlo")
    assert result.exit_code == 4
    assert "is not empty (it holds thesis.txt)" in result.stderr
    assert [path.name for path in out.iterdir()] == ["thesis.txt"]


def test_a_wrong_option_ends_it(survey):
    result = run("watch", survey, "--exclude", "T9", "--no-monte-carlo")
    assert result.exit_code == 2
    assert "--exclude T9: there is no tap 'T9'" in result.stderr


def test_the_page_is_opened_on_request(survey, monkeypatch):
    opened = []
    monkeypatch.setattr("webbrowser.open", opened.append)
    monkeypatch.setattr("gradeline.cli.watch.following.Follower.follow", lambda _self: None)
    result = run("watch", survey, "--no-monte-carlo", "--open")
    assert result.exit_code == 0, result.output
    assert opened == [result.stdout.split(": ")[1].split(" (")[0]]
    assert run("watch", survey, "--no-monte-carlo").exit_code == 0
    assert len(opened) == 1


@pytest.mark.parametrize("ended_by", [signal.SIGINT, signal.SIGTERM])
def test_it_ends_cleanly_and_leaves_nothing(survey, tmp_path, ended_by):
    """Ctrl-C, or a request to end: exit code 0, the folder for the results gone, the survey as it was."""
    before = {path: path.read_bytes() for path in survey.iterdir()}
    temporary = tmp_path / "temporary"
    temporary.mkdir()
    with subprocess.Popen(
        [sys.executable, "-u", "-m", "gradeline", "watch", str(survey), "--no-monte-carlo", "--json"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, "TMPDIR": str(temporary)},
    ) as process:
        serving = json.loads(process.stdout.readline())
        assert (serving["event"], serving["source"]) == ("serving", str(survey))
        assert serving["address"].startswith("http://127.0.0.1:")
        reduced = json.loads(process.stdout.readline())
        assert (reduced["event"], reduced["exit_code"]) == ("reduced", 0)
        assert list(temporary.iterdir())
        process.send_signal(ended_by)
        rest, told = process.communicate(timeout=90)
    assert (process.returncode, rest, told) == (0, "", "Stopped.\n")
    assert list(temporary.iterdir()) == []
    assert {path: path.read_bytes() for path in survey.iterdir()} == before


def test_a_workbook_is_followed(tmp_path):
    """One table of heads stands for a survey in one file; another file beside it changes nothing."""
    table = tmp_path / "heads.csv"
    table.write_text("chainage [m],head [mm]\n1,300\n2,200\n3,101\n4,0\n", encoding="utf-8")
    choices = Choices(
        **{**vars(CHOICES), "diameter": "26.6 mm", "flow": "0.84 L/s", "temperature": "18 degC"}
    )
    follower = Follower(table, tmp_path / "out", choices)
    assert follower.step().code == 0
    (tmp_path / "other.csv").write_text("x")
    assert follower.step() is None
    table.write_text(table.read_text(encoding="utf-8").replace("101", "100"), encoding="utf-8")
    assert follower.step().code == 0


def test_the_page_has_the_units_of_its_reader(survey, tmp_path, capsys):
    follower = Follower(survey, tmp_path / "out", CHOICES, units="us")
    assert follower.step().code == 0
    assert "ft/s" in follower.live.shown.report
    assert re.search(r"copper ε .* in(ch)?\b", capsys.readouterr().out)
