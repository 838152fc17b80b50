"""Several surveys at once: a line each, a bar where somebody sees it, and one bad survey stops nobody."""

import contextlib
import csv
import json
import os
import pickle
import pty
import re
import select
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from typer.testing import CliRunner

import gradeline
from gradeline.cli.app import app
from gradeline.cli.many import workers
from gradeline.cli.many.choices import Choices
from gradeline.cli.many.one import carry_out
from gradeline.cli.many.orders import Order
from gradeline.cli.many.printed import Records
from gradeline.report import one_line
from tests.bench.many import write_surveys

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
    result = run("reduce", *three, "--out", tmp_path / "out", "--jobs", "1")
    assert result.exit_code == 3
    assert result.stdout.splitlines() == [f"{survey}: line of Bench line", f"{other}: line of Bench line"]
    assert [folder for _, folder, _ in rooms.written] == [
        tmp_path / "out" / "bench_line",
        tmp_path / "out" / "other_line",
    ]
    lines = result.stderr.splitlines()
    assert lines[0] == f"{bad}: 2 problems"
    out = tmp_path / "out"
    assert lines[-1] == f"2 of 3 surveys reduced; results in {out}; summary in {out / 'summary.csv'}"


def test_without_a_folder_the_results_lie_in_each_survey(three, rooms):
    result = run("reduce", three[0], three[2], "--jobs", "1")
    assert result.exit_code == 0
    assert result.stderr == "2 of 2 surveys reduced; results beside each\n"
    assert [folder for _, folder, _ in rooms.written] == [
        three[0] / "reduction",
        three[2] / "reduction",
    ]


def test_an_error_that_nobody_foresaw_stops_one_survey_alone(three, rooms, monkeypatch):
    monkeypatch.delenv("GRADELINE_TRACEBACK", raising=False)
    rooms.error = ZeroDivisionError("division by zero")
    result = run("reduce", three[0], three[1], "--jobs", "1")
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


# In worker processes.

DEADLY = """\
import os, sys

def hook(event, args):
    # whoever opens this survey dies as one does that runs out of memory; with a flag named, only the first
    if event == "open" and isinstance(args[0], str) and "deadly" in args[0] and args[0].endswith("survey.toml"):
        flag = os.environ.get("DEADLY_ONCE")
        if not flag or not os.path.exists(flag):
            if flag:
                os.close(os.open(flag, os.O_CREAT))
            os.kill(os.getpid(), 9)

sys.addaudithook(hook)
"""


def files_in(folder):
    return {path.relative_to(folder): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def summary_of(folder):
    return list(csv.DictReader((folder / "summary.csv").read_text().splitlines()))


def command(*arguments, **environment):
    return subprocess.run(
        [sys.executable, "-m", "gradeline", *map(str, arguments)],
        capture_output=True,
        text=True,
        timeout=180,
        env={**os.environ, **environment},
        check=False,
    )


@pytest.fixture
def pipes(tmp_path):
    return write_surveys(tmp_path / "many", 6)


QUICK = ("--formats", "json,csv", "--no-monte-carlo")


def test_worker_processes_write_the_same_bytes_and_tell_the_same_in_the_same_order(
    pipes, bad_survey, tmp_path
):
    surveys = [*pipes[:2], bad_survey, pipes[2]]
    told = {}
    for jobs in (1, 2):
        done = command("reduce", *surveys, "--out", tmp_path / "out", "--jobs", jobs, *QUICK)
        assert done.returncode == 3
        told[jobs] = (done.stdout, done.stderr, files_in(tmp_path / "out"))
        shutil.rmtree(tmp_path / "out")
    assert told[1] == told[2]
    assert [line.split(":")[0] for line in told[2][0].splitlines()] == [
        str(survey) for survey in (*pipes[:2], pipes[2])
    ]
    assert f"{bad_survey}: 2 problems" in told[2][1]


def test_json_is_the_same_from_workers_and_one_document(pipes):
    alone, together = (
        command("reduce", *pipes[:2], "--json", "--no-monte-carlo", "--jobs", jobs) for jobs in (1, 2)
    )
    assert alone.stdout == together.stdout
    record = json.loads(together.stdout)
    assert [one["source"] for one in record["surveys"]] == [str(one) for one in pipes[:2]]
    assert together.stdout == json.dumps(record, indent=1) + "\n"


@pytest.mark.parametrize("once", [True, False])
def test_a_worker_that_dies_takes_no_other_survey_with_it(pipes, tmp_path, once):
    deadly = pipes[2].rename(pipes[2].with_name("deadly"))
    surveys = [*pipes[:2], deadly, *pipes[3:]]
    (tmp_path / "hook").mkdir()
    (tmp_path / "hook" / "sitecustomize.py").write_text(DEADLY)
    environment = {"PYTHONPATH": str(tmp_path / "hook")}
    if once:
        environment["DEADLY_ONCE"] = str(tmp_path / "died")
    out = tmp_path / "out"
    done = command("reduce", *surveys, "--out", out, "--jobs", 2, *QUICK, **environment)
    told = [line.split(":")[0] for line in done.stdout.splitlines()]
    assert told == [str(survey) for survey in surveys if once or survey != deadly]
    assert "Traceback" not in done.stderr
    summary = summary_of(out)
    assert [row["survey"] for row in summary] == [str(survey) for survey in surveys]
    if once:
        assert done.returncode == 0
        shutil.rmtree(out)
        assert (command("reduce", *surveys, "--out", out, "--jobs", 1, *QUICK)).returncode == 0
        assert summary_of(out) == summary
    else:
        assert done.returncode == 1
        assert f"{deadly}: the process that reduced it ended without a word, and again" in done.stderr
        assert summary[2]["exit_code"] == "1"
        assert "ended without a word" in summary[2]["problem"]
        assert not (out / "deadly").exists()


def children_of(process):
    return [int(pid) for pid in Path(f"/proc/{process}/task/{process}/children").read_text().split()]


@pytest.mark.skipif(not Path("/proc/self/task").is_dir(), reason="looks for the workers in /proc")
def test_ctrl_c_leaves_whole_results_and_nobody_behind(tmp_path):
    surveys, out = write_surveys(tmp_path / "many", 40), tmp_path / "out"
    arguments = ["reduce", *map(str, surveys), "--out", str(out), "--jobs", "2", *QUICK]
    process = subprocess.Popen(
        [sys.executable, "-m", "gradeline", *arguments],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    until = time.monotonic() + 120
    while time.monotonic() < until and not (out / "pipe_0001").is_dir():
        time.sleep(0.02)
    started = children_of(process.pid)
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: to all of them
    told, said = process.communicate(timeout=60)
    assert process.returncode == 130
    assert "Traceback" not in said
    assert said.startswith("interrupted: ")
    # whole folders and nothing else: no half-made one, no summary
    written = sorted(path.name for path in out.iterdir())
    assert 1 <= len(written) < 40
    assert all(
        (out / name / "heads.csv").is_file() and (out / name / "reduction.json").is_file() for name in written
    )
    assert set(re.findall(r"pipe_\d{4}(?=: )", told)) <= set(written)
    while time.monotonic() < until and any(Path(f"/proc/{pid}").exists() for pid in started):
        time.sleep(0.05)  # one that keeps the books of the others hears last of their end
    assert not any(Path(f"/proc/{pid}").exists() for pid in started)


@pytest.mark.skipif(not Path("/proc/self/task").is_dir(), reason="looks for the workers in /proc")
def test_workers_end_with_the_process_that_started_them(tmp_path):
    surveys, out = write_surveys(tmp_path / "many", 40), tmp_path / "out"
    arguments = ["reduce", *map(str, surveys), "--out", str(out), "--jobs", "2", *QUICK]
    process = subprocess.Popen(
        [sys.executable, "-m", "gradeline", *arguments], stdout=subprocess.DEVNULL, stderr=subprocess.PIPE
    )
    until = time.monotonic() + 120
    while time.monotonic() < until and not (out / "pipe_0001").is_dir():
        time.sleep(0.02)
    started = children_of(process.pid)
    assert len(started) >= 2
    process.kill()
    _, said = process.communicate(timeout=60)
    while time.monotonic() < until and any(Path(f"/proc/{pid}").exists() for pid in started):
        time.sleep(0.05)
    assert not any(Path(f"/proc/{pid}").exists() for pid in started)
    assert b"Traceback" not in said


def test_as_many_jobs_as_there_are_cores_that_may_be_used(monkeypatch):
    monkeypatch.setattr(workers.os, "process_cpu_count", lambda: 5, raising=False)
    assert workers.cores() == 5
    monkeypatch.delattr(workers.os, "process_cpu_count")
    monkeypatch.setattr(workers.os, "sched_getaffinity", lambda _process: {0, 3, 7}, raising=False)
    assert workers.cores() == 3


def test_what_comes_back_of_a_survey_is_small(pipes):
    choices = Choices(0.95, "static", keep_all=False, exclude=(), monte_carlo=False)
    order = Order(pipes[0], None, choices, ("json",), several=True, summary=True)
    assert order.results_alone
    done = carry_out(order)
    assert done.code == 0
    assert len(pickle.dumps(done)) < 5_000


def test_a_document_cut_short_is_json_all_the_same(capsys):
    with contextlib.suppress(KeyboardInterrupt), Records() as records:
        records.add('{"source": "a"}')
        raise KeyboardInterrupt
    assert json.loads(capsys.readouterr().out) == {"surveys": [{"source": "a"}]}
