"""The ratios of the speed targets, measured in one sitting: ``python -m tests.bench.ratios``.

What is compared takes turns, caches are warmed first, and medians over the rounds are told.
"""

from __future__ import annotations

import argparse
import importlib.util
import os
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import numpy as np
from fluids.friction import Colebrook
from scipy.optimize import curve_fit

from gradeline.fitting.wall import example_wall, fit_wall
from tests.bench.monte_carlo import DRAWN_RUNS, draw_factors, draw_normal, run_draws
from tests.bench.runs import RUNS, SCRIPT_RUNS, batch, bench_runs, frame, run_script, script_readings

TOP = Path(__file__).resolve().parents[2]
BARE = "import pandas, scipy.stats, matplotlib.pyplot"


def alternate(rounds: int, jobs: dict[str, Callable[[], object]]) -> dict[str, list[float]]:
    """Seconds of each job, round by round, after one round that does not count."""
    taken: dict[str, list[float]] = {name: [] for name in jobs}
    for turn in range(rounds + 1):
        for name, job in jobs.items():
            start = time.perf_counter()
            job()
            if turn:
                taken[name].append(time.perf_counter() - start)
    return taken


def per_run(rounds: int) -> None:
    """The script against the batch, with and without the search, and the table beside it."""
    spec = importlib.util.spec_from_file_location("plain_script", Path(__file__).with_name("script.py"))
    assert spec is not None
    assert spec.loader is not None
    script = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(script)
    runs = bench_runs()
    readings, result = script_readings(runs), batch(runs, search=True)
    jobs: dict[str, tuple[int, Callable[[], object]]] = {
        "plain script": (SCRIPT_RUNS, lambda: run_script(script, readings, runs)),
        "with outlier search": (RUNS, lambda: batch(runs, search=True)),
        "without outlier search": (RUNS, lambda: batch(runs, search=False)),
        "building the table": (RUNS, lambda: frame(result)),
    }
    taken = alternate(rounds, {name: job for name, (_, job) in jobs.items()})
    rate = {name: count / statistics.median(taken[name]) for name, (count, _) in jobs.items()}
    print(f"{RUNS:,} runs × {runs.heads.shape[1]} taps, medians of {rounds} rounds in turn")
    for name, value in rate.items():
        print(f"  {name:24}{value:>14,.0f} runs/s {value / rate['plain script']:>10.1f} × the script")
    for search in (True, False):
        tracemalloc.start()
        batch(runs, search=search)
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        print(f"  peak memory, search {search!s:5}: {peak / runs.heads.nbytes:.1f} × the readings' own")


def command(rounds: int, survey: Path) -> None:
    """`gradeline reduce` against the bare imports, each a process of its own."""
    bare = [sys.executable, "-c", BARE]
    with tempfile.TemporaryDirectory() as folder:
        out = Path(folder) / "out"
        ours = [sys.executable, "-m", "gradeline", "reduce", str(survey), "--out", str(out), "--overwrite"]

        def run(arguments: list[str]) -> Callable[[], object]:
            return lambda: subprocess.run(arguments, check=True, capture_output=True, env=os.environ)

        try:
            taken = alternate(rounds, {"bare imports": run(bare), "gradeline reduce": run(ours)})
        except subprocess.CalledProcessError as error:
            print(f"gradeline reduce {survey.name}: exit {error.returncode}\n{error.stderr.decode()}")
            return
        finally:
            shutil.rmtree(out, ignore_errors=True)
    seconds = {name: statistics.median(values) for name, values in taken.items()}
    print(f"a process each, medians of {rounds} rounds in turn")
    for name, value in seconds.items():
        print(f"  {name:24}{value:>8.2f} s {value / seconds['bare imports']:>8.2f} × the bare imports")


def monte_carlo(rounds: int, count: int) -> None:
    """Draws of f against standard normal numbers."""
    draws = run_draws()
    taken = alternate(
        rounds,
        {"standard_normal": lambda: draw_normal(count), "draws of f": lambda: draw_factors(draws, count)},
    )
    seconds = {name: statistics.median(values) for name, values in taken.items()}
    print(f"{count:,} draws for {DRAWN_RUNS} runs, medians of {rounds} rounds in turn")
    for name, value in seconds.items():
        ratio = value / seconds["standard_normal"]
        print(
            f"  {name:24}{1e9 * value / count / DRAWN_RUNS:>8.1f} ns a value {ratio:>8.2f} × standard_normal"
        )
    tracemalloc.start()
    draw_factors(draws, 20_000)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    print(f"  peak memory of the draws: {peak / 1e6:.0f} MB")


def wall(rounds: int) -> None:
    """The joint fit of a wall against the curve that a practitioner would fit: same slopes, one roughness."""
    data = example_wall()
    used = np.isfinite(data.slope)
    diameter, gravity = float(data.diameter[0]), data.gravity
    viscosity = data.kinematic_viscosity

    def slopes(velocity: np.ndarray, roughness: float) -> np.ndarray:
        factors = [
            Colebrook(Re=v * diameter / nu, eD=abs(roughness) / diameter)
            for v, nu in zip(velocity, viscosity, strict=True)
        ]
        return np.log(np.array(factors) * velocity**2 / (2 * gravity * diameter))

    def plain() -> float:
        found, _ = curve_fit(slopes, data.velocity[:, 0], np.log(data.slope[:, 0]), p0=[1e-3 * diameter])
        return float(found[0])

    taken = alternate(rounds, {"plain curve fit": plain, "fit_wall": lambda: fit_wall(data, used)})
    seconds = {name: statistics.median(values) for name, values in taken.items()}
    print(f"one wall of {used.sum()} slopes, medians of {rounds} rounds in turn")
    for name, value in seconds.items():
        print(f"  {name:24}{1e3 * value:>8.2f} ms {value / seconds['plain curve fit']:>8.2f} × the plain fit")


def main() -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("--rounds", type=int, default=7)
    parser.add_argument("--survey", type=Path, default=TOP / "data_demo" / "copper_bench")
    parser.add_argument("--draws", type=int, default=1_000_000)
    asked = parser.parse_args()
    monte_carlo(min(asked.rounds, 3), asked.draws)
    per_run(asked.rounds)
    wall(asked.rounds)
    command(asked.rounds, asked.survey)


if __name__ == "__main__":
    main()
