"""Does the search find what is wrong, and leave alone what is right? Simulated surveys with planted errors.

Run by hand: ``python -m tests.calibration.outliers --surveys 2000``. A small seeded version runs with the tests.

A survey is 12 runs of 10 taps with a scatter of 1 mm unless its row says otherwise. The planted errors stand in one
run of each survey, chosen at random; the other runs are sound. Errors are given in standard deviations of the reading.
"""

from __future__ import annotations

import argparse
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from gradeline.fitting.runs import Model, RunFits, fit_runs

TAPS, RUNS, SIGMA = 10, 12, 1e-3
CHAINAGE = np.linspace(0.2, 5.3, TAPS)


@dataclass(frozen=True)
class Case:
    """A kind of survey: exact heads, the deviations that are drawn, and what the fit is told.

    `deviation` (R, n) is the true standard deviation of each reading, m; `told` is the model. `prepare`, if given,
    returns the readings and the model of one survey from the scattered heads (a static run, say).
    """

    name: str
    heads: np.ndarray
    deviation: np.ndarray
    told: Model
    prepare: Callable[[np.random.Generator, np.ndarray, Model], tuple[np.ndarray, Model]] | None = None


@dataclass(frozen=True)
class Found:
    """Shares over the surveys, 0 to 1.

    all_found: every planted error was flagged. innocents: another reading of that run was flagged.
    sound_runs: sound runs with a flag. surveys: surveys with a flag in a sound run. shared: surveys in which the
    search was called off because most runs seemed to share a misfit.
    """

    all_found: float
    innocents: float
    sound_runs: float
    surveys: float
    shared: float


def line_case(
    name: str,
    *,
    runs: int = RUNS,
    stated: bool = False,
    surge: float = 0.0,
    deviation: np.ndarray | None = None,
    kind: np.ndarray | None = None,
    prepare: Callable[..., tuple[np.ndarray, Model]] | None = None,
) -> Case:
    """One bore: S from 0.015 to 0.3, velocity heads to 0.33 m; `deviation` (n,) replaces the common scatter."""
    rate = np.linspace(0.2, 1.0, runs)
    velocity_head = 0.33 * rate**2
    tap_deviation = np.full(TAPS, SIGMA) if deviation is None else deviation
    sigma = np.hypot(tap_deviation, surge * velocity_head[:, None])
    told = Model(
        design=np.column_stack([np.ones(TAPS), -CHAINAGE]),
        velocity_head=velocity_head,
        kind=np.zeros(TAPS, dtype=int) if kind is None else kind,
        floor=tap_deviation if stated else np.zeros(TAPS),
    )
    return Case(name, 2.0 - 0.3 * rate[:, None] ** 1.8 * CHAINAGE, sigma, told, prepare)


def two_bores_case(name: str, taps: int = TAPS) -> Case:
    """Two bores and a fitted loss between: four parameters."""
    chainage, rate = np.linspace(0.2, 5.3, taps), np.linspace(0.2, 1.0, RUNS)
    design = np.column_stack(
        [
            np.ones(taps),
            -np.minimum(chainage, 2.75),
            -np.maximum(chainage - 2.75, 0.0),
            -(chainage > 2.75).astype(float),
        ]
    )
    truth = np.column_stack([2.0 + 0 * rate, 0.1 * rate**1.8, 0.3 * rate**1.8, 0.8 * rate**2])
    told = Model(design, 0.33 * rate**2, np.zeros(taps, dtype=int), np.zeros(taps))
    return Case(name, truth @ design.T, np.full((RUNS, taps), SIGMA), told)


def after_static_run(rng: np.random.Generator, heads: np.ndarray, told: Model) -> tuple[np.ndarray, Model]:
    """Take a static reading off all runs: its own error is then common to them, and the fit is told of it."""
    static = SIGMA * rng.standard_normal(TAPS)
    heads = heads - (static - static.mean())
    first = fit_runs(heads, np.isfinite(heads), told, details=False)
    alone = first.scatter[0].base / np.sqrt(2.0)
    # As the reduction does it: each static reading shifts its own tap by 1 − 1/n, the others by 1/n.
    spread = np.eye(TAPS) - 1.0 / TAPS
    persistent = alone * np.sqrt((spread**2).sum(axis=1))
    return heads, replace(told, persistent=np.broadcast_to(persistent, heads.shape), steady=True)


def taps_out_of_place(rng: np.random.Generator, heads: np.ndarray, told: Model) -> tuple[np.ndarray, Model]:
    """Chainages wrong by 2 mm, and stated so: an error that grows with S and is the same in all runs."""
    slope = (heads[:, :1] - heads[:, -1:]) / (CHAINAGE[-1] - CHAINAGE[0])
    heads = heads - slope * 2e-3 * rng.standard_normal(TAPS)
    return heads, replace(
        told, persistent=np.broadcast_to(np.abs(slope) * 2e-3, heads.shape), along_slope=True
    )


def with_gaps(rng: np.random.Generator, heads: np.ndarray, told: Model) -> tuple[np.ndarray, Model]:
    """One reading in ten not taken; those of the first run, where the errors are planted, all were."""
    gaps = rng.random(heads.shape) < 0.1
    gaps[0] = False
    return np.where(gaps, np.nan, heads), told


def at_random(*places: tuple[int, ...]) -> Callable[[np.random.Generator], tuple[int, ...]]:
    """A chooser of taps among sets of taps."""
    return lambda rng: places[rng.integers(len(places))]


MID = at_random(*((tap,) for tap in range(1, TAPS - 1)))
END = at_random((0,), (TAPS - 1,))
END_PAIR = at_random((0, 1), (TAPS - 2, TAPS - 1))
PLANTED = (
    ("nothing", None, 0.0),
    ("one 6σ, mid tap", MID, 6.0),
    ("one 6σ, end tap", END, 6.0),
    ("two 8σ, neighbouring end taps", END_PAIR, 8.0),
)


def measure(
    case: Case,
    choose: Callable[[np.random.Generator], tuple[int, ...]] | None,
    size: float,
    *,
    surveys: int,
    seed: int,
) -> Found:
    """Simulate surveys of one case with errors of one kind and count."""
    rng = np.random.default_rng([seed, len(case.name), int(10 * size)])
    runs = len(case.heads)
    hits = innocents = flagged_runs = flagged_surveys = shared = 0
    for _ in range(surveys):
        # The run with the planted errors comes first; which flow it has is drawn.
        order = rng.permutation(runs)
        deviation = case.deviation[order]
        heads = case.heads[order] + deviation * rng.standard_normal(deviation.shape)
        planted = np.zeros(heads.shape[1], dtype=bool)
        if choose is not None:
            planted[list(choose(rng))] = True
            heads[0] += rng.choice([-1.0, 1.0]) * size * deviation[0] * planted
        told = replace(case.told, velocity_head=case.told.velocity_head[order])
        if case.prepare is not None:
            heads, told = case.prepare(rng, heads, told)
        fits: RunFits = fit_runs(heads, np.isfinite(heads), told, details=False)
        hits += bool(fits.flagged[0, planted].all())
        innocents += bool(fits.flagged[0, ~planted].any())
        sound = fits.flagged if choose is None else fits.flagged[1:]
        flagged_runs += int(sound.any(axis=1).sum())
        flagged_surveys += bool(sound.any())
        shared += bool(fits.misfit is not None and fits.misfit.shared)
    sound_runs = surveys * (runs if choose is None else runs - 1)
    return Found(
        all_found=hits / surveys if choose is not None else np.nan,
        innocents=innocents / surveys if choose is not None else np.nan,
        sound_runs=flagged_runs / max(sound_runs, 1),
        surveys=flagged_surveys / surveys,
        shared=shared / surveys,
    )


CASES = (
    line_case("σ estimated"),
    line_case("σ stated", stated=True),
    line_case("surge, σ estimated", surge=0.01),
    line_case("static run taken off", prepare=after_static_run),
    line_case("chainages ± 2 mm, stated", prepare=taps_out_of_place),
    line_case("one reading in ten missing", prepare=with_gaps),
    line_case(
        "two gauge kinds, 1 and 3 mm, stated",
        stated=True,
        deviation=np.where(np.arange(TAPS) % 2, 3e-3, 1e-3),
        kind=np.arange(TAPS) % 2,
    ),
    line_case(
        "two gauge kinds, 1 and 3 mm, estimated",
        deviation=np.where(np.arange(TAPS) % 2, 3e-3, 1e-3),
        kind=np.arange(TAPS) % 2,
    ),
    line_case("one kind, stated 0.5 to 3 mm by tap", stated=True, deviation=np.linspace(0.5e-3, 3e-3, TAPS)),
    two_bores_case("two bores and a fitted K"),
    line_case("two runs", runs=2),
    line_case("four runs", runs=4),
    line_case("sixty runs", runs=60),
)


def _percent(value: float) -> str:
    return "     –" if np.isnan(value) else f"{100 * value:6.2f}"


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("--surveys", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--only", help="cases whose name holds this text")
    asked = parser.parse_args()
    print(f"{asked.surveys} surveys a row, seed {asked.seed}; shares in %")
    print(
        f"{'case':40}{'planted':32}{'all found':>10}{'innocent too':>14}{'sound runs':>12}"
        f"{'surveys with one':>18}{'called shared':>15}"
    )
    for case in CASES:
        if asked.only and asked.only not in case.name:
            continue
        for name, choose, size in PLANTED:
            found = measure(case, choose, size, surveys=asked.surveys, seed=asked.seed)
            print(
                f"{case.name:40}{name:32}{_percent(found.all_found):>10}{_percent(found.innocents):>14}"
                f"{_percent(found.sound_runs):>12}{_percent(found.surveys):>18}{_percent(found.shared):>15}",
                flush=True,
            )


if __name__ == "__main__":
    main()
