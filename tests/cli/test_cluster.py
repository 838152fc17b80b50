"""`gradeline reduce --scheduler`: the same calls on a Dask cluster, and what is told where there is none."""

import os
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import pytest

from gradeline.cli.many.cluster import on_cluster
from gradeline.errors import UsageError
from tests.bench.many import write_surveys

TOP = Path(__file__).resolve().parents[2]
QUICK = ("--formats", "json,csv", "--no-monte-carlo")

# In a process of its own: the cluster's loops and loggers are none of the tests'.
CLUSTER = """\
import sys
from distributed import LocalCluster

if __name__ == "__main__":
    with LocalCluster(n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None) as cluster:
        print(cluster.scheduler_address, *(nanny.pid for nanny in cluster.workers.values()), flush=True)
        sys.stdin.read()
"""


def reduce(surveys, out, *options, cwd):
    return [sys.executable, "-m", "gradeline", "reduce", *surveys, "--out", out, *QUICK, *options], {
        "cwd": cwd,
        "text": True,
        "stdout": subprocess.PIPE,
        "stderr": subprocess.PIPE,
        "env": {**os.environ, "PYTHONPATH": str(TOP)},
    }


def files_in(folder):
    return {path.relative_to(folder): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


class WithNannies:
    """Two workers that are started again when they die."""

    def __init__(self, place):
        script = place / "cluster.py"
        script.write_text(CLUSTER)
        self.process = subprocess.Popen(
            [sys.executable, str(script)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            text=True,
            env={**os.environ, "PYTHONPATH": str(TOP)},
        )
        self.address, *pids = self.process.stdout.readline().split()
        self.workers = [int(pid) for pid in pids]

    def close(self):
        self.process.communicate("", timeout=60)


class WithoutNannies:
    """Two workers that nobody starts again."""

    def __init__(self, place):
        self.address = f"tcp://127.0.0.1:{free_port()}"
        host, port = self.address.removeprefix("tcp://").split(":")
        self.processes = []
        self.start(
            "dask_scheduler",
            "--host",
            host,
            "--port",
            port,
            "--dashboard-address",
            "127.0.0.1:0",
            place=place,
        )
        for _ in range(2):
            options = ("--no-nanny", "--nthreads", "1", "--dashboard-address", "127.0.0.1:0")
            self.start("dask_worker", self.address, *options, place=place)
        self.workers = [process.pid for process in self.processes[1:]]

    def start(self, module, *options, place):
        self.processes.append(
            subprocess.Popen(
                [sys.executable, "-m", f"distributed.cli.{module}", *options],
                cwd=place,
                stdout=subprocess.DEVNULL,
                stderr=subprocess.DEVNULL,
                env={**os.environ, "PYTHONPATH": str(TOP)},
            )
        )

    def close(self):
        for process in self.processes:
            process.kill()  # the workers would wait for the scheduler to come back
        for process in self.processes:
            process.wait(timeout=60)


def free_port():
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return one.getsockname()[1]


@pytest.mark.parametrize("kind", [WithNannies, WithoutNannies])
def test_a_worker_killed_half_way_changes_nothing(tmp_path, kind):
    pytest.importorskip("distributed", reason="the extra cluster is not installed")
    surveys = [folder.relative_to(tmp_path) for folder in write_surveys(tmp_path / "many", 12)]
    arguments, how = reduce(surveys, "alone", "--jobs", "1", cwd=tmp_path)
    alone = subprocess.run(arguments, check=True, timeout=180, **how)
    cluster = kind(tmp_path)
    try:
        arguments, how = reduce(surveys, "out", "--scheduler", cluster.address, cwd=tmp_path)
        process = subprocess.Popen(arguments, **how)
        while process.poll() is None and len(list((tmp_path / "out").glob("pipe_*"))) < 3:
            time.sleep(0.02)
        assert process.poll() is None
        os.kill(cluster.workers[0], signal.SIGKILL)
        told, said = process.communicate(timeout=180)
    finally:
        cluster.close()
    assert process.returncode == 0, said
    assert told == alone.stdout
    assert said == alone.stderr.replace("alone", "out")
    found, expected = files_in(tmp_path / "out"), files_in(tmp_path / "alone")
    # what the dead worker was at may have left a folder that it never finished, by a hidden name
    found = {path: content for path, content in found.items() if not path.parts[0].startswith(".")}
    assert found == expected


def test_where_nobody_answers_it_is_told_within_seconds(tmp_path):
    pytest.importorskip("distributed", reason="the extra cluster is not installed")
    surveys = [folder.relative_to(tmp_path) for folder in write_surveys(tmp_path / "many", 1)]
    address = f"tcp://127.0.0.1:{free_port()}"
    arguments, how = reduce(surveys, "out", "--scheduler", address, cwd=tmp_path)
    done = subprocess.run(arguments, check=False, timeout=60, **how)
    assert done.returncode == 2
    assert done.stderr.startswith(f"--scheduler {address}: no Dask scheduler answers there within 10 s (")
    assert "start one with `dask scheduler`" in done.stderr
    assert len(done.stderr.splitlines()) == 1
    assert not (tmp_path / "out").exists()


def test_without_the_extra_it_says_how_to_get_it(monkeypatch):
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(UsageError, match=r"pip install 'gradeline\[cluster\]'"):
        next(iter(on_cluster([], "tcp://127.0.0.1:8786", None)))


def test_jobs_and_scheduler_are_not_given_together(survey):
    arguments = [
        sys.executable,
        "-m",
        "gradeline",
        "reduce",
        str(survey),
        "--jobs",
        "2",
        "--scheduler",
        "tcp://a:1",
    ]
    done = subprocess.run(arguments, check=False, capture_output=True, text=True, timeout=60)
    assert done.returncode == 2
    assert "give one of them" in " ".join(done.stderr.replace("│", " ").split())
