"""Does a logger's record say what it should? Simulated records with a known truth.

Run by hand: ``python -m tests.calibration.record --records 2000``. A small seeded version runs with the tests.

- `coverage`: windows of white noise and of autoregressions of first order with correlation times from below a block to a
  tenth of the window; the share of means whose 95 % interval (u with Student's t) holds the truth, nought.
- `windows`: records of plateaus of flow, one of them static, with settling, a ramp, a slow drift; the share of plateaus
  found, of windows that reach out of their plateau, of drifts refused.
- `faults`: sound records, and records with one planted fault; the share of columns with a false alarm and of faults found.
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter
from scipy.stats import t as student

from gradeline.fitting.record import Fault, faults_of, steady_windows, window_means


def autoregression(
    rng: np.random.Generator, samples: int, columns: int, time: float
) -> tuple[np.ndarray, float]:
    """Unit variance, correlation exp(−k / time), stationary from the first sample; and its φ."""
    phi = float(np.exp(-1.0 / time)) if time > 0 else 0.0
    drive = rng.standard_normal((samples, columns)) * np.sqrt(1.0 - phi**2)
    drive[0] = rng.standard_normal(columns)
    return lfilter([1.0], [1.0, -phi], drive, axis=0), phi


def blocks_of(x: np.ndarray, size: int) -> dict[str, np.ndarray]:
    """(samples, columns) in blocks of `size` samples."""
    parts = x.reshape(len(x) // size, size, -1)
    mean = parts.mean(axis=1)
    return {
        "count": np.full(mean.shape, float(size)),
        "mean": mean,
        "low": parts.min(axis=1),
        "high": parts.max(axis=1),
        "squares": ((parts - mean[:, None]) ** 2).sum(axis=1),
    }


@dataclass(frozen=True)
class Coverage:
    """Shares over the windows, and medians: u and the batch means' u over the exact one, effective samples."""

    known: float
    held: float
    u: float
    batch_u: float
    effective: float
    exact_effective: float


def coverage(windows: int, blocks: int, size: int, time: float, seed: int) -> Coverage:
    """Windows of `blocks` blocks of `size` samples; the correlation time is in samples."""
    rng = np.random.default_rng(seed)
    samples = blocks * size
    x, phi = autoregression(rng, samples, windows, time)
    found = window_means(*(blocks_of(x, size)[name] for name in ("count", "mean", "squares")))
    lag = np.arange(1, samples)
    # exactly, not only to first order in 1/n
    exact = np.sqrt((1.0 + 2.0 * ((1.0 - lag / samples) * phi**lag).sum()) / samples)
    u, dof, mean = (np.array([getattr(one, name) for one in found]) for name in ("u", "dof", "mean"))
    known = np.isfinite(u)
    held = np.abs(mean[known]) <= student.ppf(0.975, dof[known]) * u[known]
    batch = np.array([one.batch_u for one in found])[known]
    return Coverage(
        float(known.mean()),
        float(held.mean()),
        float(np.median(u[known]) / exact),
        float(np.median(batch) / exact),
        float(np.median([one.effective for one in found])),
        1.0 / exact**2,
    )


@dataclass(frozen=True)
class Plan:
    """Plateaus of a record: flow at the start and end of each (m³/s), its length (s), how the flow gets there."""

    levels: tuple[tuple[float, float], ...]
    lengths: tuple[float, ...]
    ramp: float = 10.0
    settling: float = 15.0
    noise: float = 0.01
    correlation: float = 20.0


PLANS = {
    "plateaus": Plan(
        ((0, 0), (4e-3, 4e-3), (3e-3, 3e-3), (2.2e-3, 2.2e-3), (1.5e-3, 1.5e-3), (1e-3, 1e-3), (0, 0)),
        (300, 600, 400, 900, 500, 700, 300),
    ),
    "noisy": Plan(
        ((0, 0), (4e-3, 4e-3), (3e-3, 3e-3), (2e-3, 2e-3)), (400, 900, 900, 900), noise=0.03, correlation=10.0
    ),
    "near steps": Plan(
        ((1e-3, 1e-3), (1.05e-3, 1.05e-3), (1.1e-3, 1.1e-3)), (600, 600, 600), noise=0.005, correlation=5.0
    ),
    "ramps": Plan(((0, 0), (2e-3, 2e-3), (4e-3, 4e-3)), (400, 400, 400), ramp=300.0),
    "one plateau": Plan(((2e-3, 2e-3),), (3600,)),
    "slow drift": Plan(((0, 0), (3e-3, 3.15e-3), (2e-3, 2e-3)), (400, 900, 600)),
    "slow drift alone": Plan(((2e-3, 2.1e-3),), (1800,), noise=0.005),
}
#: Limit of the drift over a window, shortest window and settling of the searches, dimensionless and s.
SEARCH = {"drift": 0.01, "least_length": 120.0, "settle": 60.0}


def simulated(plan: Plan, rng: np.random.Generator, heads: int = 6, rate: float = 10.0, block: int = 20):
    """Blocks of a record of one flow and some heads, and the (start, end, drifts) of its plateaus, s."""
    flow, edges, level = [], [], plan.levels[0][0]
    moment = 0.0
    for k, ((first, last), length) in enumerate(zip(plan.levels, plan.lengths, strict=True)):
        if k and plan.ramp:
            steps = round(plan.ramp * rate)
            flow.append(np.linspace(level, first, steps))
            moment += plan.ramp
        steps = round(length * rate)
        t = np.arange(steps) / rate
        step = 0.1 * (first - level) if k else 0.0
        flow.append(np.linspace(first, last, steps) - step * np.exp(-t / plan.settling))
        edges.append((moment, moment + length, first != last))
        moment += length
        level = last
    true = np.concatenate(flow)
    true = true[: len(true) // block * block]
    surge, _ = autoregression(rng, len(true), 1, plan.correlation * rate)
    moving = true * (1.0 + plan.noise * 0.3 * surge[:, 0])
    measured = (
        moving + 0.0 * true + np.where(true > 0, plan.noise * true, 0.0) * rng.standard_normal(len(true))
    )
    place = np.linspace(0.2, 1.0, heads)
    loss = 6e4 * moving[:, None] ** 2 * place
    head = 2.0 - loss + 1e-3 * rng.standard_normal(loss.shape)
    out = blocks_of(np.column_stack([measured, head]), block)
    start = np.arange(len(out["mean"])) * block / rate
    return start, start + block / rate, out, edges


@dataclass(frozen=True)
class Windows:
    """Shares: plateaus with one window over 60 % of what settling leaves; windows that reach out of a plateau; drifts refused."""

    found: float
    outside: float
    refused: float


def windows(name: str, records: int, seed: int) -> Windows:
    """Search simulated records of a plan."""
    rng = np.random.default_rng(seed)
    found = plateaus = reaching = told = drifts = refused = 0
    for _ in range(records):
        start, end, blocks, edges = simulated(PLANS[name], rng)
        is_flow = np.arange(blocks["mean"].shape[1]) == 0
        result = steady_windows(
            start, end, blocks["count"], blocks["mean"], blocks["squares"], is_flow, **SEARCH
        )
        told += len(result)
        for begin, finish, moves in edges:
            usable = finish - begin - SEARCH["settle"]
            over = [min(w.end, finish) - max(w.start, begin) for w in result]
            if moves:
                drifts += 1
                refused += max(over, default=0.0) < 0.25 * usable
            else:
                plateaus += 1
                found += max(over, default=0.0) >= 0.6 * usable
        reaching += sum(
            not any(w.start >= begin - 4 and w.end <= finish + 4 for begin, finish, _ in edges)
            for w in result
        )
    return Windows(found / max(plateaus, 1), reaching / max(told, 1), refused / max(drifts, 1))


#: Planted faults, each in one column of a record of 8 columns and 5 windows.
FAULTS = ("drift", "step", "stuck", "spike", "gap")
COLUMNS, WINDOWS, BLOCKS, SIZE, INTERVAL = 8, 5, 120, 50, 0.1


@dataclass(frozen=True)
class Alarms:
    """Shares: sound columns of the record with any fault told; planted faults found, of their kind, at their place."""

    false: float
    found: float


def record_with(
    kind: str | None, rng: np.random.Generator, correlation: float
) -> tuple[tuple[Fault, ...], int, float]:
    """The faults told of one record, the column and the time (s) of the planted one."""
    samples = WINDOWS * BLOCKS * SIZE
    x, _ = autoregression(rng, samples, COLUMNS, correlation)
    # half of the noise is correlated, half is not
    x = x + rng.standard_normal(x.shape)
    window = np.repeat(np.arange(WINDOWS), BLOCKS)
    x += 20.0 * np.repeat(np.arange(WINDOWS), BLOCKS * SIZE)[:, None]
    column, where = int(rng.integers(COLUMNS)), int(rng.integers(1, WINDOWS))
    first = where * BLOCKS * SIZE
    inside = np.arange(first, first + BLOCKS * SIZE)
    at = first + int(rng.integers(BLOCKS * SIZE // 4, 3 * BLOCKS * SIZE // 4))
    # standard deviation of a window's mean, from the autoregression
    u = np.sqrt((2.0 + 2.0 * correlation) / (BLOCKS * SIZE))
    if kind == "drift":
        x[inside, column] += 40.0 * u * np.linspace(0, 1, len(inside))
    elif kind == "step":
        x[at : inside[-1] + 1, column] += 25.0 * u
    elif kind == "stuck":
        x[at : at + 40 * SIZE, column] = x[at, column]
    elif kind == "spike":
        x[at, column] += 25.0 * rng.choice([-1.0, 1.0])
    blocks = blocks_of(x, SIZE)
    start = np.arange(len(window)) * SIZE * INTERVAL
    end = start + SIZE * INTERVAL
    keep = np.ones(len(window), dtype=bool)
    if kind == "gap":
        lost = at // SIZE
        keep[lost : lost + 2] = False
    values = [blocks[name][keep] for name in ("count", "mean", "low", "high", "squares")]
    told = faults_of(start[keep], end[keep], *values, INTERVAL, window[keep])
    return told, column, at * INTERVAL


def faults(kind: str | None, records: int, correlation: float, seed: int) -> Alarms:
    """Records with one planted fault, or sound ones; the correlation time is in samples."""
    rng = np.random.default_rng(seed)
    false = found = 0
    for _ in range(records):
        told, column, moment = record_with(kind, rng, correlation)
        planted = -1 if kind == "gap" else column
        false += len({one.column for one in told if kind is None or one.column != planted})
        found += any(
            one.kind == kind
            and one.column == planted
            and (
                kind == "drift"
                or one.start - 0.1 * BLOCKS * SIZE * INTERVAL
                <= moment
                <= one.end + 0.1 * BLOCKS * SIZE * INTERVAL
            )
            for one in told
        )
    sound = COLUMNS if kind in {None, "gap"} else COLUMNS - 1
    return Alarms(false / (records * sound), found / records)


def main() -> None:
    """Print the tables."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--records", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--only", choices=("coverage", "windows", "faults"))
    told = parser.parse_args()
    if told.only in {None, "coverage"}:
        print("blocks  time/window  time/block  exact eff  known  coverage  u/exact  batch/exact  effective")
        for blocks, size in ((12, 20), (24, 20), (40, 20), (100, 20), (400, 10), (1000, 5)):
            for time in sorted(
                {0.0, 0.2 * size, *(share * blocks * size for share in (0.01, 0.02, 0.05, 0.1))}
            ):
                got = coverage(told.records, blocks, size, time, told.seed)
                print(
                    f"{blocks:6d}  {time / (blocks * size):11.4f}  {time / size:10.2f}  {got.exact_effective:9.1f}"
                    f"  {100 * got.known:5.1f}  {100 * got.held:8.1f}  {got.u:7.2f}  {got.batch_u:11.2f}  {got.effective:9.1f}"
                )
    if told.only in {None, "windows"}:
        print("plan  plateaus found  windows reaching out  drifts refused")
        for name in PLANS:
            result = windows(name, max(told.records // 20, 5), told.seed)
            print(
                f"{name:18s} {100 * result.found:6.1f} % {100 * result.outside:6.1f} % {100 * result.refused:6.1f} %"
            )
    if told.only in {None, "faults"}:
        print("planted  correlation time (samples)  false alarms per column  found")
        for correlation in (0.0, 20.0, 100.0, 200.0):
            for kind in (None, *FAULTS):
                alarms = faults(kind, max(told.records // 4, 20), correlation, told.seed)
                print(
                    f"{kind or 'sound':6s} {correlation:6.0f} {100 * alarms.false:6.2f} % {100 * alarms.found:6.1f} %"
                )


if __name__ == "__main__":
    main()
