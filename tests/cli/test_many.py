"""Several surveys at once: a line each, a bar where somebody sees it, and one bad survey stops nobody."""

import os
import pty
import re
import select
import shutil
import subprocess
import sys
import time
from pathlib import Path

import pytest
from typer.testing import CliRunner

import gradeline
from gradeline.cli.app import app
from gradeline.report import one_line

DEMO = Path(__file__).resolve().parents[2] / "data_demo"


def run(*arguments, **environment):
    return CliRunner(env=environment).invoke(
        app, [str(argument) for argument in arguments], prog_name="gradeline"
    )


@pytest.fixture
def three(survey, bad_survey, tmp_path):
    other = tmp_path / "other_line"
    shutil.copytree(survey, other)
    return survey, bad_survey, other


def test_each_has_a_line_and_a_folder_and_the_bad_one_its_problems(three, rooms, tmp_path):
    survey, bad, other = three
    result = run("reduce", *three, "--out", tmp_path / "out")
    assert result.exit_code == 3
    assert result.stdout.splitlines() == [f"{survey}: line of Bench line", f"{other}: line of Bench line"]
    assert [folder for _, folder, _ in rooms.written] == [
        tmp_path / "out" / "bench_line",
        tmp_path / "out" / "other_line",
    ]
    lines = result.stderr.splitlines()
    assert lines[0] == f"{bad}: 2 problems"
    assert lines[-1] == f"2 of 3 surveys reduced; results in {tmp_path / 'out'}"


def test_without_a_folder_the_results_lie_in_each_survey(three, rooms):
    result = run("reduce", three[0], three[2])
    assert result.exit_code == 0
    assert result.stderr == "2 of 2 surveys reduced; results beside each\n"
    assert [folder for _, folder, _ in rooms.written] == [
        three[0] / "reduction",
        three[2] / "reduction",
    ]


def test_an_error_that_nobody_foresaw_stops_one_survey_alone(three, rooms, monkeypatch):
    monkeypatch.delenv("GRADELINE_TRACEBACK", raising=False)
    rooms.error = ZeroDivisionError("division by zero")
    result = run("reduce", three[0], three[1])
    assert result.exit_code == 3  # the highest, not the last
    assert (
        f"{three[0]}: gradeline met an error that it does not know (ZeroDivisionError: division by zero)"
        in result.stderr
    )
    assert "Traceback" not in result.output
    assert f"{three[1]}: 2 problems" in result.stderr
    assert result.stderr.splitlines()[-1] == "0 of 2 surveys reduced"


def test_no_bar_and_no_colour_where_there_is_no_terminal(three, tmp_path):
    result = run("reduce", *three, "--out", tmp_path / "out", "--formats", "csv", "--no-monte-carlo")
    assert result.stdout.count("copper ε ") == 2
    assert "\x1b" not in result.output
    assert "━" not in result.output


def in_terminal(arguments, **environment):
    """What a terminal shows of a command, everything it writes to either stream."""
    leader, follower = pty.openpty()
    process = subprocess.Popen(
        [sys.executable, "-m", "gradeline", *map(str, arguments)],
        stdin=subprocess.DEVNULL,
        stdout=follower,
        stderr=follower,
        env={**os.environ, "TERM": "xterm", "COLUMNS": "100", **environment},
    )
    os.close(follower)
    shown, until = b"", time.monotonic() + 120
    while time.monotonic() < until:
        if not select.select([leader], [], [], 1)[0]:
            if process.poll() is not None:
                break
            continue
        try:
            part = os.read(leader, 65536)
        except OSError:  # the other end is closed
            break
        if not part:
            break
        shown += part
    os.close(leader)
    return process.wait(timeout=60), shown.decode()


@pytest.mark.parametrize("no_colour", ["", "1"])
def test_the_bar_is_drawn_in_a_terminal_alone_and_not_with_no_color(three, tmp_path, no_colour):
    survey, bad, other = three
    arguments = ("reduce", *three, "--out", tmp_path / "out", "--formats", "csv", "--no-monte-carlo")
    code, shown = in_terminal(arguments, NO_COLOR=no_colour)
    assert code == 3
    assert ("/3" in shown) == (not no_colour)
    assert ("\x1b[" in shown) == (not no_colour)
    # the lines are whole, whatever the bar does between them
    plain = re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", shown).replace("\r", "\n").splitlines()
    assert f"{bad}: 2 problems" in plain
    for source in (survey, other):
        assert sum(line.startswith(f"{source}: copper ε ") for line in plain) == 1
    assert (tmp_path / "out" / "other_line" / "runs.csv").is_file()


def test_the_line_tells_the_wall_and_how_much_to_look_at():
    reduction = gradeline.reduce(gradeline.read_survey(DEMO / "cast_main"), monte_carlo=False)
    line = one_line(reduction)
    assert re.fullmatch(
        r"cast iron ε [\d.]+ mm \([\d.]+ to [\d.]+ mm\); 6 runs, \d+ flags?, \d+ cautions?", line
    )
    low, high = (float(number) for number in re.search(r"\(([\d.]+) to ([\d.]+) mm", line).groups())
    assert low < 0.9 < high  # the truth, at the head of its survey.toml
