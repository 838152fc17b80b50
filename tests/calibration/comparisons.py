"""Is a change called real as often as it should be, and only then? Simulated surveys of one pipe over the years.

The bore and the tap positions are drawn once a pipe, everything else anew in each survey. Run by hand:
``python -m tests.calibration.comparisons --surveys 400``. A small seeded version runs with the tests.
"""

from __future__ import annotations

import argparse
import dataclasses
import datetime
from collections.abc import Sequence

import numpy as np

import gradeline
from gradeline.reduction import Reduction, reduce
from tests.calibration.coverage import CHAINAGE, DIAMETER, FLOWS, STATED, Coverage
from tests.simulate.surveys import NominalReach, Uncertainties, make_survey

FIRST = datetime.date(2015, 6, 1)
#: The rough wall of `u(ε)/ε` = 5 % in one survey, a nearly smooth one, and one that no survey tells from smooth.
ROUGH, FINE, SMOOTH = 2e-3, 1e-4, 5e-6


def surveys_of_one_pipe(
    rng: np.random.Generator,
    relative_roughness: Sequence[float],
    *,
    years: Sequence[float] | None = None,
    bore_u: float = 0.001,
    stated: Uncertainties = STATED,
) -> list[Reduction]:
    """Reduce surveys of one pipe, of given true roughness over bore in each."""
    found: list[Reduction] = []
    pipe = None
    for n, relative in enumerate(relative_roughness):
        survey, truth = make_survey(
            rng,
            chainage=CHAINAGE,
            reaches=[NominalReach(0.0, 5.5, DIAMETER, relative * DIAMETER, bore_u * DIAMETER)],
            flows=FLOWS,
            sigma=1e-3,
            stated=stated,
            same_pipe=pipe,
        )
        pipe = pipe or truth
        if years is not None:
            day = FIRST + datetime.timedelta(days=round(365.2425 * years[n]))
            survey = dataclasses.replace(survey, date=day.isoformat())
        found.append(reduce(survey, monte_carlo=False))
    return found


def measure_pairs(
    pairs: int, relative_roughness: float, growth: float, *, seed: int
) -> tuple[Coverage, float]:
    """Compare pairs of surveys, the second of a wall `growth` times as rough.

    Returns how often a change was called real and its 95 % intervals held the true change, and the median u(ε)/ε of a
    survey (half the interval over 1.96).
    """
    rng = np.random.default_rng([seed, int(1e9 * relative_roughness), int(1000 * growth)])
    found, relative = Coverage(), []
    true = (growth - 1.0) * relative_roughness * DIAMETER
    for _ in range(pairs):
        both = surveys_of_one_pipe(rng, (relative_roughness, growth * relative_roughness))
        comparison = gradeline.compare(both, labels=["first", "second"])
        first, second = comparison.surveys.to_dict("records")
        found.count("changed", bool(comparison.walls["changed"].iloc[0]))
        if np.isfinite(second["roughness_change"]):
            found.count(
                "change of ε held", second["roughness_change_low"] <= true <= second["roughness_change_high"]
            )
        relative.append(
            (first["roughness_high"] - first["roughness_low"]) / (3.92 * max(first["roughness"], 1e-12))
        )
    return found, float(np.median(relative))


def measure_series(series: int, relative_roughness: float, rate: float, *, seed: int) -> Coverage:
    """Compare five surveys in ten years of a wall that grows by `rate` of its first roughness a year."""
    rng = np.random.default_rng([seed, int(1e9 * relative_roughness), int(1000 * rate), 5])
    years = np.array([0.0, 1.0, 4.0, 7.0, 10.0])
    found = Coverage()
    true_rate = rate * relative_roughness * DIAMETER
    for _ in range(series):
        surveys = surveys_of_one_pipe(rng, relative_roughness * (1.0 + rate * years), years=years)
        comparison = gradeline.compare(surveys, labels=list("ABCDE"), until="2035-06-01")
        wall, end = comparison.walls.iloc[0], comparison.ageing.iloc[-1]
        true_end = relative_roughness * DIAMETER * (1.0 + 20.0 * rate)
        found.count("rate held", wall["roughness_rate_low"] <= true_rate <= wall["roughness_rate_high"])
        found.count("ε at the date held", end["roughness_low"] <= true_end <= end["roughness_high"])
        found.count("off the line", wall["line_scale"] > 1.0)
        found.count("changed", bool(wall["changed"]))
        found.count("some survey odd", bool(comparison.surveys["odd"].fillna(False).any()))
    return found


def measure_many(rigs: int, count: int, odd_growth: float, *, seed: int) -> Coverage:
    """Compare `count` surveys of one rig, one of them of a wall `odd_growth` times as rough."""
    rng = np.random.default_rng([seed, count, int(1000 * odd_growth), 40])
    found = Coverage()
    for _ in range(rigs):
        relative = np.full(count, ROUGH)
        relative[count // 2] *= odd_growth
        comparison = gradeline.compare(
            surveys_of_one_pipe(rng, relative), labels=[str(n) for n in range(count)], same_meter=False
        )
        odd = comparison.surveys["odd"].to_numpy(bool)
        if odd_growth != 1.0:
            found.count("odd one found", bool(odd[count // 2]))
            odd[count // 2] = False
        found.count("sound one called odd", bool(odd.any()))
    return found


def _told(found: Coverage) -> str:
    return ", ".join(f"{name} {100 * found.share(name):.1f} % of {found.seen[name]}" for name in found.held)


def main() -> None:
    """Print what was measured."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=400, help="pairs of surveys of each kind")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--only", choices=("pairs", "series", "many"))
    asked = parser.parse_args()
    if asked.only in (None, "pairs"):
        for relative, growth in ((ROUGH, 1.0), (ROUGH, 1.3), (FINE, 1.0), (SMOOTH, 1.0)):
            found, u = measure_pairs(asked.surveys, relative, growth, seed=asked.seed)
            print(
                f"two surveys, roughness/bore {relative:g}, then times {growth:g}, u(ε)/ε {100 * u:.1f} %: {_told(found)}",
                flush=True,
            )
    if asked.only in (None, "series"):
        for relative, rate in ((ROUGH, 0.0), (ROUGH, 0.05), (FINE, 0.3)):
            found = measure_series(max(asked.surveys // 4, 1), relative, rate, seed=asked.seed)
            print(
                f"five surveys, roughness/bore {relative:g}, {100 * rate:g} % a year: {_told(found)}",
                flush=True,
            )
    if asked.only in (None, "many"):
        for growth in (1.0, 1.5):
            found = measure_many(max(asked.surveys // 10, 1), 12, growth, seed=asked.seed)
            print(f"twelve surveys, one times {growth:g}: {_told(found)}", flush=True)


if __name__ == "__main__":
    main()
