"""What only matters in a large file: order of times by samples of it, memory, and what is loaded for small surveys."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import tests.bench.logger as bench
from gradeline.errors import SurveyError
from gradeline.loader import read_survey
from gradeline.loader.logger import order
from gradeline.reduction.record import with_record_read
from tests.logger.made import Logged


@pytest.fixture
def _large(monkeypatch: pytest.MonkeyPatch) -> None:
    """Every csv file counts as a large one."""
    monkeypatch.setattr(order, "_SMALL", -1)


@pytest.mark.usefixtures("_large")
def test_a_clock_set_back_in_a_large_file(logged: Logged) -> None:
    later = logged.table["time [s]"] > 300
    logged.table.loc[later, "time [s]"] -= 3.0
    logged.write()
    with pytest.raises(
        SurveyError, match=r"logger.csv row 1203, time \[s\]: 297.25 s comes after 300 s in row 1202"
    ):
        read_survey(logged.folder)


@pytest.mark.usefixtures("_large")
def test_parts_in_the_wrong_order_in_a_large_file(logged: Logged) -> None:
    count = len(logged.table)
    logged.table = logged.table.iloc[[*range(count // 2, count), *range(count // 2)]]
    (logged.folder / "runs.csv").unlink()
    logged.write()
    with pytest.raises(SurveyError, match=r"row 1202, time \[s\]: 0 s comes after 599.75 s in row 1201"):
        read_survey(logged.folder)


@pytest.mark.usefixtures("_large")
def test_a_large_file_in_order_is_not_looked_through(logged: Logged, monkeypatch: pytest.MonkeyPatch) -> None:
    def never(*_: object) -> None:
        raise AssertionError("the file was gone through line by line")

    monkeypatch.setattr(order, "first_backwards", never)
    assert len(read_survey(logged.folder).runs) == 4


def test_the_bench_makes_what_it_says(tmp_path: Path) -> None:
    """Its survey reads, and its windows are found where they are."""
    bounds = bench.make(tmp_path, 30_000)
    bench.give_windows(tmp_path, bounds)
    given = with_record_read(read_survey(tmp_path))
    np.testing.assert_allclose(given.runs["flow"] * 1000, bench.flows(), rtol=1e-3)
    (tmp_path / "runs.csv").unlink()
    found = with_record_read(read_survey(tmp_path))
    np.testing.assert_allclose(found.runs["flow"] * 1000, bench.flows(), rtol=1e-3)


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="the most memory is told by /proc alone")
def test_memory_does_not_grow_with_the_file(tmp_path: Path) -> None:
    """A file ten times as large costs a reader less than 60 MB more: twice what the engine holds of it a core at once."""
    program = (
        "import sys\nfrom pathlib import Path\nfrom gradeline.loader import read_survey\n"
        "read_survey(sys.argv[1], threads=1)\n"
        # not ru_maxrss, which a process takes over from the one that started it
        "print(Path('/proc/self/status').read_text().partition('VmHWM:')[2].split()[0])"
    )
    most = []
    for rows in (30_000, 300_000):
        folder = tmp_path / str(rows)
        bench.give_windows(folder, bench.make(folder, rows))
        ran = subprocess.run(
            [sys.executable, "-c", program, str(folder)], capture_output=True, text=True, check=True
        )
        most.append(int(ran.stdout) / 1e3)
    assert most[1] < most[0] + 60
    assert most[1] < 400


def test_the_engine_is_not_loaded_without_a_logger() -> None:
    program = "import sys, gradeline\ngradeline.read_survey('data_demo/copper_bench')\nprint('duckdb' in sys.modules)"
    root = Path(__file__).parents[2]
    ran = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, cwd=root
    )
    assert ran.stdout.strip() == "False"


def test_reduce_and_check(logged: Logged) -> None:
    """The commands take a logged survey as any other; a found run can be named."""
    (logged.folder / "runs.csv").unlink()
    ran = subprocess.run(
        [sys.executable, "-m", "gradeline", "check", str(logged.folder)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert ran.returncode == 0, ran.stderr
    assert "4 windows of logger.csv found steady" in ran.stdout
    out = logged.folder.parent / "out"
    command = [sys.executable, "-m", "gradeline", "reduce", str(logged.folder), "--formats", "json"]
    command += ["--no-monte-carlo", "--exclude", "4:T2", "--out", str(out)]
    ran = subprocess.run(command, capture_output=True, text=True, check=False)
    assert ran.returncode == 0, ran.stderr
    assert "3 flowing runs" in ran.stdout
    assert (out / "reduction.json").is_file()
