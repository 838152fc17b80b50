"""A logger's csv of a given size, and what reading it costs beside the bare engine: ``python tests/bench/logger.py``.

The record is invented: ten steady flows through a drawn tube, eleven columns of heads, a temperature, correlated noise, all
seeded. In one sitting it measures the engine alone (read the file, mean of every column over each window) and
`gradeline reduce --no-figures --no-monte-carlo`, with windows given and with windows to be found, each the best of some turns in a
process of its own: wall time, processor time and the most memory, and how the time grows from a tenth of the size.
"""

from __future__ import annotations

import argparse
import json
import os
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

TAPS = 11
RUNS = 10
RATE = 10.0
SEED = 20_261_201
_ROWS_A_PIECE = 100_000
_BYTES_A_ROW = 93

SURVEY = """# Invented: nobody measured it.
[survey]
title = "A logged test length"

[fluid]
name = "water"

[site]
latitude = "51.0 deg"

[[reach]]
name = "test length"
from = "0 m"
to = "12 m"
diameter = "40.0 mm +/- 0.05 mm"
wall = "drawn"

[gauge.board]
kind = "piezometer"
zero = "0 m"
uncertainty = "0.3 mm"
u_zero = "1 mm"

[uncertainty]
chainage = "1 mm"
flow_scale = "0.2 %"
temperature = "0.1 K"
"""

#: The engine alone, in a process of its own: the file, the bounds of the windows and how many columns.
ENGINE = """
import duckdb, json, sys
path, bounds, columns = sys.argv[1], json.loads(sys.argv[2]), int(sys.argv[3])
connection = duckdb.connect(config={"memory_limit": "500MB", "threads": len(__import__("os").sched_getaffinity(0))})
kinds = ", ".join(f"'c{k}': 'DOUBLE'" for k in range(columns))
window = "CASE " + " ".join(f"WHEN c0 >= {a} AND c0 < {b} THEN {k}" for k, (a, b) in enumerate(bounds)) + " END"
means = ", ".join(f"avg(c{k})" for k in range(1, columns))
query = (
    f"SELECT {window} AS w, {means} FROM read_csv('{path}', columns = {{{kinds}}}, header = false, skip = 1, "
    "auto_detect = false, delim = ',') GROUP BY w"
)
assert len(connection.execute(query).fetchall()) >= len(bounds)
"""


def flows() -> np.ndarray:
    """Return the flows of the runs, L/s: the first is static."""
    return np.concatenate([[0.0], np.geomspace(0.4, 3.0, RUNS - 1)])


def slope(flow: float) -> float:
    """Return the friction slope of a smooth tube by Blasius (1913), f = 0.3164 Re^(-1/4), as the record is made with."""
    bore, viscosity, gravity = 0.040, 1.0e-6, 9.81
    velocity = flow / 1000.0 / (np.pi * bore**2 / 4.0)
    if velocity == 0:
        return 0.0
    return float(0.3164 * (velocity * bore / viscosity) ** -0.25 * velocity**2 / (2 * gravity * bore))


def make(folder: Path, rows: int) -> list[tuple[float, float]]:
    """Write a survey with a logger's file of so many rows; return the bounds of its windows, s."""
    folder.mkdir(parents=True, exist_ok=True)
    chainage = np.linspace(0.5, 11.5, TAPS)
    (folder / "survey.toml").write_text(SURVEY, encoding="utf-8")
    taps = "".join(f"T{k + 1},{at:.3f}\n" for k, at in enumerate(chainage))
    (folder / "taps.csv").write_text("tap,chainage [m]\n" + taps, encoding="utf-8")
    rng = np.random.default_rng(SEED)
    of_run = -(-rows // RUNS)
    length = of_run / RATE
    bounds = [((k + 0.1) * length, (k + 0.95) * length) for k in range(RUNS)]
    headings = ["time [s]", "flow [L/s]", "temperature [degC]", *(f"T{k + 1} [mm]" for k in range(TAPS))]
    carried = np.zeros(TAPS + 2)
    kept = 0.8
    with (folder / "logger.csv").open("w", encoding="utf-8") as stream:
        stream.write(",".join(headings) + "\n")
        for start in range(0, rows, _ROWS_A_PIECE):
            count = min(_ROWS_A_PIECE, rows - start)
            at = np.arange(start, start + count)
            run = np.minimum(at // of_run, RUNS - 1)
            noise = rng.standard_normal((count, TAPS + 2)) * np.sqrt(1 - kept**2)
            for row in range(0, count, 1000):
                # Blocks of an autoregression, each begun where the last one ended.
                carried = _correlated(noise[row : row + 1000], carried, kept)
            table = np.empty((count, TAPS + 3))
            table[:, 0] = at / RATE
            flow = flows()[run]
            table[:, 1] = np.where(flow > 0, flow * (1 + 0.004 * noise[:, 0]), 0.0)
            table[:, 2] = 20.0 + 0.02 * noise[:, 1]
            falls = np.array([slope(one) for one in flows()])[run]
            table[:, 3:] = 1500.0 - 1000.0 * falls[:, None] * chainage + 2.0 * noise[:, 2:]
            np.savetxt(stream, table, delimiter=",", fmt=["%.1f", "%.4f", "%.3f", *["%.2f"] * TAPS])
    return bounds


def _correlated(noise: np.ndarray, before: np.ndarray, kept: float) -> np.ndarray:
    """Make white noise an autoregression of first order, in place; return its last values."""
    from scipy.signal import lfilter  # noqa: PLC0415 (only the maker needs it)

    noise[:], _ = lfilter([1.0], [1.0, -kept], noise, axis=0, zi=(kept * before)[None, :])
    return noise[-1].copy()


def give_windows(folder: Path, bounds: list[tuple[float, float]]) -> None:
    """Write ``runs.csv``."""
    lines = "".join(f"{k},{a},{b}\n" for k, (a, b) in enumerate(bounds))
    (folder / "runs.csv").write_text("run,start [s],end [s]\n" + lines, encoding="utf-8")


def timed(command: list[str]) -> tuple[float, float, float]:
    """Return wall time (s), processor time (s) and the most memory (MB) of a process."""
    start = time.perf_counter()
    child = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE)
    assert child.stderr is not None
    said = child.stderr.read()
    _, status, used = os.wait4(child.pid, 0)
    wall = time.perf_counter() - start
    if status:
        raise SystemExit(f"{' '.join(command[:4])} failed: {said.decode('utf-8', 'replace')[-800:]}")
    scale = 1e3 if sys.platform != "darwin" else 1e6
    return wall, used.ru_utime + used.ru_stime, used.ru_maxrss / scale


def best(command: list[str], turns: int) -> tuple[float, float, float]:
    """Return the least times and the greatest memory of some turns."""
    found = [timed(command) for _ in range(turns)]
    return min(one[0] for one in found), min(one[1] for one in found), max(one[2] for one in found)


def measured(
    folder: Path, bounds: list[tuple[float, float]], turns: int
) -> dict[str, tuple[float, float, float]]:
    """Return what the engine alone, given and found windows take."""
    reduce = [
        sys.executable,
        "-m",
        "gradeline",
        "reduce",
        str(folder),
        "--no-monte-carlo",
        "--formats",
        "json",
    ]
    reduce += ["--out", str(folder / "reduction"), "--overwrite"]
    runs = folder / "runs.csv"
    found = {
        "engine": best(
            [sys.executable, "-c", ENGINE, str(folder / "logger.csv"), json.dumps(bounds), str(TAPS + 3)],
            turns,
        )
    }
    give_windows(folder, bounds)
    found["given"] = best(reduce, turns)
    runs.unlink()
    found["found"] = best(reduce, turns)
    return found


def main() -> None:
    """Measure, and print a table."""
    asked = argparse.ArgumentParser(description=__doc__)
    asked.add_argument("--gigabytes", type=float, default=2.0)
    asked.add_argument("--turns", type=int, default=3)
    asked.add_argument("--folder", type=Path, default=None, help="where the files go for the while")
    choice = asked.parse_args()
    cores = len(os.sched_getaffinity(0))
    place = Path(tempfile.mkdtemp(prefix="logged-", dir=choice.folder))
    try:
        print(f"{cores} cores, load {os.getloadavg()[0]:.1f}, python {sys.version.split()[0]}")
        results = {}
        for part in (0.1, 1.0):
            rows = int(part * choice.gigabytes * 1e9 / _BYTES_A_ROW)
            bounds = make(place / "survey", rows)
            size = (place / "survey" / "logger.csv").stat().st_size / 1e9
            results[part] = measured(place / "survey", bounds, choice.turns)
            engine = results[part]["engine"]
            print(f"{size:.2f} GB, {rows} rows, {TAPS + 3} columns")
            for name, (wall, processor, memory) in results[part].items():
                print(
                    f"  {name:8s} {wall:7.2f} s  {processor:7.2f} s of processor  {memory:5.0f} MB"
                    f"  {wall / engine[0]:5.2f} times the engine ({processor / engine[1]:.2f} of processor)"
                )
            shutil.rmtree(place / "survey")
        for name in ("engine", "given", "found"):
            print(
                f"  {name}: ten times the rows take {results[1.0][name][0] / results[0.1][name][0]:.1f} times as long"
            )
    finally:
        shutil.rmtree(place, ignore_errors=True)


if __name__ == "__main__":
    main()
