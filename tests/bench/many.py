"""Many small surveys at once against parsing their files alone: ``python -m tests.bench.many``.

The surveys are simulated, each with a seed of its own: one straight pipe, ten taps read in open columns, ten runs. What is
compared reads the same files with pandas and tomllib and does nothing with them. Start-up (imports, workers) is taken off by
the difference between all the surveys and the first tenth of them.
"""

from __future__ import annotations

import argparse
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
import tomllib
from pathlib import Path

import numpy as np
import pandas as pd

from tests.simulate.bench_runs import simulate_runs

TAPS = RUNS = 10
_TOML = """\
[survey]
title = "Simulated pipe {number}"
date = 2026-05-06

[fluid]
name = "water"

[[reach]]
name = "test length"
from = "0 m"
to = "5.5 m"
diameter = "{diameter:.2f} mm +/- 0.03 mm"
wall = "drawn copper"

[gauge.board]
kind = "piezometer"
zero = "0 m"
uncertainty = "1 mm"
resolution = "1 mm"

[uncertainty]
chainage = "1 mm"
elevation = "1 mm"
flow = "0.4 %"
flow_scale = "0.3 %"
temperature = "0.2 K"
"""


def write_surveys(folder: Path, count: int, *, seed: int = 20261201) -> list[Path]:
    """Write so many simulated surveys of ten runs by ten taps; return their folders.

    The bore is 26 to 40 mm, the relative roughness 1e-4 to 3e-3 (even in its logarithm), the flow between 0.5 and 3 m/s.
    """
    folders = []
    chainage = np.linspace(0.5, 5.0, TAPS)
    for number in range(count):
        rng = np.random.default_rng((seed, number))
        diameter = round(float(rng.uniform(26, 40)), 2) * 1e-3
        area = np.pi * diameter**2 / 4
        runs = simulate_runs(
            rng,
            runs=RUNS,
            chainage=chainage,
            diameter=diameter,
            roughness=diameter * 10 ** float(rng.uniform(-4, -2.5)),
            flow_range=(0.5 * area, 3 * area),
            temperature=(286.15, 292.15),
            sigma=1e-3,
        )
        at = folder / f"pipe_{number:04d}"
        at.mkdir(parents=True)
        (at / "survey.toml").write_text(
            _TOML.format(number=number, diameter=1e3 * diameter), encoding="utf-8"
        )
        taps = [f"T{tap},{x:.3f},0" for tap, x in enumerate(chainage, start=1)]
        (at / "taps.csv").write_text(
            "\n".join(["tap,chainage [m],elevation [m]", *taps, ""]), encoding="utf-8"
        )
        heading = ",".join(
            ["run", "flow [L/s]", "temperature [degC]", *(f"T{tap} [mm]" for tap in range(1, TAPS + 1))]
        )
        rows = [
            f"{run},{1e3 * runs.flow[run - 1]:.5f},18.0," + ",".join(f"{1e3 * head:.0f}" for head in heads)
            for run, heads in enumerate(runs.heads, start=1)
        ]
        (at / "readings.csv").write_text("\n".join([heading, *rows, ""]), encoding="utf-8")
        folders.append(at)
    return folders


def parse(folder: Path) -> None:
    """Read a survey's files and do nothing with them."""
    tomllib.loads((folder / "survey.toml").read_text(encoding="utf-8"))
    pd.read_csv(folder / "taps.csv")
    pd.read_csv(folder / "readings.csv")


def parse_seconds(folders: list[Path]) -> tuple[float, float]:
    """Wall time and CPU time of parsing them all in this process, s."""
    begin, used = time.perf_counter(), time.process_time()
    for folder in folders:
        parse(folder)
    return time.perf_counter() - begin, time.process_time() - used


def reduce_seconds(folders: list[Path], jobs: int, formats: str) -> tuple[float, float]:
    """Wall time and CPU time of `gradeline reduce` of them all, in processes of its own, s."""
    with tempfile.TemporaryDirectory() as out:
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        begin = time.perf_counter()
        subprocess.run(
            [
                *(sys.executable, "-m", "gradeline", "reduce", *map(str, folders), "--jobs", str(jobs)),
                *("--out", str(Path(out) / "out"), "--formats", formats, "--no-monte-carlo"),
            ],
            check=True,
            capture_output=True,
            env=os.environ,
        )
        taken = time.perf_counter() - begin
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
    return taken, after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime


def main() -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("--surveys", type=int, default=1000)
    parser.add_argument("--rounds", type=int, default=3)
    parser.add_argument("--jobs", type=int, nargs="*", default=[1, 2])
    parser.add_argument("--formats", default="json,csv")
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as place:
        folders = write_surveys(Path(place), asked.surveys)
        few = folders[: max(2, len(folders) // 10)]
        rest = len(folders) - len(few)
        parse_seconds(few)  # warms the files
        parsing: list[tuple[float, float]] = []
        taken: dict[int, list[tuple[float, float]]] = {jobs: [] for jobs in asked.jobs}
        for _ in range(asked.rounds):
            wall, cpu = parse_seconds(folders)
            parsing.append((wall / len(folders), cpu / len(folders)))
            for jobs in asked.jobs:
                whole = reduce_seconds(folders, jobs, asked.formats)
                start = reduce_seconds(few, jobs, asked.formats)
                taken[jobs].append(((whole[0] - start[0]) / rest, (whole[1] - start[1]) / rest))
    bare, bare_cpu = (statistics.median(values) for values in zip(*parsing, strict=True))
    print(
        f"{len(folders):,} surveys of {RUNS} × {TAPS} readings, --no-monte-carlo, --formats {asked.formats}, medians of "
        f"{asked.rounds} rounds in turn, after start-up"
    )
    print(f"  {'pandas and tomllib alone':28}{1e3 * bare:>8.2f} ms a survey; CPU {1e3 * bare_cpu:.2f} ms")
    for jobs, pairs in taken.items():
        wall = statistics.median(wall for wall, _ in pairs)
        cpu = statistics.median(cpu for _, cpu in pairs)
        print(
            f"  {f'gradeline reduce --jobs {jobs}':28}{1e3 * wall:>8.2f} ms a survey, {wall / bare:.1f} × parsing; "
            f"CPU {1e3 * cpu:.2f} ms, {cpu / bare_cpu:.1f} ×"
        )


if __name__ == "__main__":
    main()
