"""Do the intervals hold the truth as often as they claim? Simulated surveys, every stated input drawn from its statement.

Run by hand: ``python -m tests.calibration.coverage --surveys 4000``. A small seeded version runs with the tests.
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass, field

import numpy as np

from gradeline.reduction import reduce
from tests.simulate.surveys import NominalReach, Uncertainties, make_survey

DIAMETER, CHAINAGE = 0.0266, np.linspace(0.2, 5.3, 10)
STATED = Uncertainties(
    reading=1e-3, flow=0.004, flow_scale=0.003, chainage=1e-3, temperature=0.2, temperature_run=0.05
)
FLOWS = np.geomspace(3e-4, 1.5e-3, 10)


@dataclass
class Coverage:
    """Counts of intervals that held the truth, and of those that there were."""

    held: dict[str, int] = field(default_factory=dict)
    seen: dict[str, int] = field(default_factory=dict)

    def count(self, name: str, inside: np.ndarray | bool) -> None:
        inside = np.atleast_1d(inside)
        self.held[name] = self.held.get(name, 0) + int(inside.sum())
        self.seen[name] = self.seen.get(name, 0) + inside.size

    def share(self, name: str) -> float:
        return self.held[name] / self.seen[name]


def measure(surveys: int, relative_roughness: float, *, seed: int, static: bool = False) -> Coverage:
    """Reduce simulated surveys and count how often S, f and ε of the truth lie in their 95 % intervals."""
    rng = np.random.default_rng([seed, int(1e9 * relative_roughness)])
    coverage = Coverage()
    flows = np.concatenate([[0.0], FLOWS]) if static else FLOWS
    for _ in range(surveys):
        survey, truth = make_survey(
            rng,
            chainage=CHAINAGE,
            reaches=[NominalReach(0.0, 5.5, DIAMETER, relative_roughness * DIAMETER, 0.001 * DIAMETER)],
            flows=flows,
            sigma=1e-3,
            stated=STATED,
            offsets=rng.normal(0.0, 2e-3, len(CHAINAGE)) if static else 0.0,
        )
        reduction = reduce(survey)
        runs, wall = reduction.runs[reduction.runs["flow"] > 0], reduction.walls.iloc[0]
        flowing = flows > 0
        slope, factor = truth.slope[flowing, 0], truth.friction_factor[flowing, 0]
        coverage.count("slope", (runs["slope_low"] <= slope) & (slope <= runs["slope_high"]))
        coverage.count(
            "friction factor",
            (runs["friction_factor_low"] <= factor) & (factor <= runs["friction_factor_high"]),
        )
        true = relative_roughness * DIAMETER
        coverage.count("roughness", wall["roughness_low"] <= true <= wall["roughness_high"])
        coverage.count("upper bound", true <= wall["roughness_upper95"])
        coverage.count("law flags", bool((reduction.flags["kind"] == "law").any()))
        coverage.count("run flags", (reduction.flags["kind"] == "run").sum() > 0)
        coverage.count("reading flags", (reduction.flags["kind"] == "reading").sum() > 0)
        coverage.count("shared misfit", any("share a misfit" in text for text in reduction.cautions))
    return coverage


def main() -> None:
    """Print the coverage for three roughnesses."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=4000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--static", action="store_true", help="a static run and taps with offsets")
    asked = parser.parse_args()
    for relative in (2e-3, 1e-4, 5e-6):
        found = measure(asked.surveys, relative, seed=asked.seed, static=asked.static)
        print(
            f"roughness/bore {relative:g}: "
            + ", ".join(f"{name} {100 * found.share(name):.1f} %" for name in found.held)
        )


if __name__ == "__main__":
    main()
