"""Two taps, or one differential gauge, and nothing stated of the readings: how often are sound runs called off the law?

Without scatter within a run, the runs are judged by one another alone. Run by hand: ``python -m
tests.calibration.two_taps --surveys 300``. A small seeded version runs with the tests.
"""

from __future__ import annotations

import argparse
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from gradeline.reduction import reduce
from gradeline.survey import Gauge, Observation, Survey
from tests.simulate.surveys import NominalReach, Uncertainties, make_survey

DIAMETER, CHAINAGE, RUNS = 0.0266, np.array([0.5, 5.0]), 8
WALL = NominalReach(0.0, 5.5, DIAMETER, 5e-5, 0.001 * DIAMETER)
STATED = Uncertainties(flow_scale=0.003)


@dataclass
class Found:
    """Counts over the surveys of one case."""

    surveys: int = 0
    run_flags: int = 0
    law_flags: int = 0
    slips: int = 0
    trend: int = 0
    trend_seen: int = 0


def differential(survey: Survey, pascal: float = 9.79e3) -> Survey:
    """Return the same survey read by one differential transducer between the two taps, nothing stated of it."""
    drop = ((survey.readings["T1"] - survey.readings["T2"]) * pascal).to_frame("dp")
    settings = {"upstream": "T1", "downstream": "T2"}
    return replace(
        survey,
        gauges=(Gauge("dp", "differential transducer", settings),),
        taps=tuple(replace(tap, gauge=None) for tap in survey.taps),
        observations=(Observation("dp", "T1", "T2"),),
        readings=drop,
        repeats=survey.repeats[["T1"]].set_axis(["dp"], axis=1),
        spreads=survey.spreads[["T1"]].set_axis(["dp"], axis=1),
    )


def measure(
    surveys: int,
    *,
    seed: int,
    gauge: str = "columns",
    static: bool = False,
    sigma: float = 1e-3,
    flow_u: float = 0.0,
    span: float = 5.0,
    planted: float = 0.0,
) -> Found:
    """Reduce simulated surveys of eight runs whose flows span a ratio, a run planted off by so many scatters."""
    rng = np.random.default_rng(seed)
    flows = np.geomspace(1.5e-3 / span, 1.5e-3, RUNS)
    found = Found()
    for _ in range(surveys):
        true = flows * (1 + flow_u * rng.standard_normal(RUNS))
        survey, truth = make_survey(
            rng,
            chainage=CHAINAGE,
            reaches=[WALL],
            flows=np.concatenate([[0.0], true]) if static else true,
            sigma=sigma,
            stated=STATED,
            offsets=rng.normal(0.0, 2e-3, 2) if static else 0.0,
        )
        survey = replace(survey, runs=survey.runs.assign(flow=[0.0, *flows] if static else flows))
        off = int(rng.integers(RUNS))
        if planted:
            slope = truth.slope[off + static, 0]
            drop = slope * float(np.ptp(CHAINAGE))
            error = planted * float(np.hypot(np.sqrt(2) * sigma, 1.8 * flow_u * drop))
            readings = survey.readings.copy()
            readings.iloc[off + static, 0] += error
            survey = replace(survey, readings=readings)
        if gauge == "differential":
            survey = differential(survey)
        reduction = reduce(survey)
        flags = reduction.flags
        runs = flags.loc[flags["kind"] == "run", "run"].tolist()
        name = survey.runs["run"].iloc[off + static]
        found.surveys += 1
        found.run_flags += bool(set(runs) - {name}) if planted else bool(runs)
        found.law_flags += bool((flags["kind"] == "law").any())
        found.slips += bool(planted) and name in runs
    return found


CASES: dict[str, dict[str, float]] = {
    "readings alone": {"sigma": 1e-3, "flow_u": 0.0},
    "flows alone": {"sigma": 1e-6, "flow_u": 0.004},
    "both": {"sigma": 1e-3, "flow_u": 0.004},
    "wide span": {"sigma": 1e-3, "flow_u": 0.002, "span": 10.0},
}


def main() -> None:
    """Print how often sound surveys are flagged, and planted runs found."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=300)
    parser.add_argument("--seed", type=int, default=1)
    asked = parser.parse_args()
    for case, values in CASES.items():
        for gauge in ("columns", "differential"):
            for static in (False, True):
                part: Callable[..., Found] = measure
                sound = part(asked.surveys, seed=asked.seed, gauge=gauge, static=static, **values)
                slip = part(
                    asked.surveys, seed=asked.seed, gauge=gauge, static=static, planted=10.0, **values
                )
                n = asked.surveys
                print(
                    f"{case}, {gauge}, {'static run' if static else 'no static run'}: run flags "
                    f"{100 * sound.run_flags / n:.1f} %, law flags {100 * sound.law_flags / n:.1f} %; planted 10 scatters "
                    f"found {100 * slip.slips / n:.0f} %, others flagged {100 * slip.run_flags / n:.1f} %",
                    flush=True,
                )


if __name__ == "__main__":
    main()
