"""Do the intervals hold the truth as often as they claim? Simulated surveys, every stated input drawn from its statement.

Run by hand: ``python -m tests.calibration.coverage --surveys 4000``. A small seeded version runs with the tests.
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass, field

import numpy as np

from gradeline.reduction.estimates import estimates_of
from tests.calibration.likelihood import likelihood_upper_bound
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties, make_survey

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
        found = estimates_of(survey)
        friction, fit, fits = found.friction, found.walls[0].fit, found.flowing.fits
        flowing = flows > 0
        slope, factor = truth.slope[flowing, 0], truth.friction_factor[flowing, 0]
        coverage.count("slope", (friction.slope_low[:, 0] <= slope) & (slope <= friction.slope_high[:, 0]))
        coverage.count(
            "friction factor",
            (friction.factor_low[:, 0] <= factor) & (factor <= friction.factor_high[:, 0]),
        )
        true = relative_roughness * DIAMETER
        coverage.count("roughness", fit.low <= true <= fit.high)
        coverage.count("upper bound", true <= fit.upper95)
        coverage.count("runs off the law", bool(fit.off_law.any()))
        coverage.count("reading flags", bool(fits.flagged.any()))
        coverage.count("shared misfit", fits.misfit is not None and fits.misfit.shared)
        coverage.count("diagnosis", found.flowing.ailments.found)
    return coverage


#: K of the fitting and its place: the tap next downstream lies 10.6 bores from it.
LOSS, PLACE = 2.0, 2.75


def measure_loss(surveys: int, relative_roughness: float, *, seed: int) -> Coverage:
    """Reduce simulated surveys with a fitting at mid-line and count how often its 95 % interval holds the true K."""
    rng = np.random.default_rng([seed, int(1e9 * relative_roughness), 7])
    coverage = Coverage()
    for _ in range(surveys):
        survey, _ = make_survey(
            rng,
            chainage=CHAINAGE,
            reaches=[NominalReach(0.0, 5.5, DIAMETER, relative_roughness * DIAMETER, 0.001 * DIAMETER)],
            flows=FLOWS,
            sigma=1e-3,
            stated=STATED,
            fittings=[NominalFitting(PLACE, LOSS)],
        )
        loss = estimates_of(survey).losses[0]
        coverage.count("K", loss.fit.low <= LOSS <= loss.fit.high)
        coverage.count("K said to depend on Re", bool(loss.depends_on_reynolds))
        coverage.count("runs said to differ too much", any("differ" in note for note in loss.notes))
    return coverage


def measure_upper_bound(surveys: int, relative_roughness: float, *, seed: int) -> tuple[Coverage, float]:
    """Return the coverage of ε and of both upper bounds, and the median `roughness_upper95` over that of the likelihood.

    The likelihood is worked out in `tests.calibration.likelihood`, by brute force and on its own.
    """
    rng = np.random.default_rng([seed, int(1e9 * relative_roughness), 11])
    coverage = Coverage()
    ours, exact = [], []
    for _ in range(surveys):
        survey, _ = make_survey(
            rng,
            chainage=CHAINAGE,
            reaches=[NominalReach(0.0, 5.5, DIAMETER, relative_roughness * DIAMETER, 0.001 * DIAMETER)],
            flows=FLOWS,
            sigma=1e-3,
            stated=STATED,
        )
        fit = estimates_of(survey, monte_carlo=False).walls[0].fit
        true = relative_roughness * DIAMETER
        ours.append(fit.upper95)
        exact.append(likelihood_upper_bound(survey, STATED, 1e-3, 0.001))
        coverage.count("roughness", fit.low <= true <= fit.high)
        coverage.count("upper bound", true <= ours[-1])
        coverage.count("upper bound of the likelihood", true <= exact[-1])
    return coverage, float(np.median(ours) / np.median(exact))


def main() -> None:
    """Print the coverage for three roughnesses."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=4000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--static", action="store_true", help="a static run and taps with offsets")
    parser.add_argument("--only", choices=("wall", "loss", "bound"), help="one of the three measurements")
    asked = parser.parse_args()
    if asked.only in (None, "loss"):
        for relative in (2e-3, 1e-4):
            found = measure_loss(asked.surveys, relative, seed=asked.seed)
            print(
                f"fitting of K = {LOSS:g}, roughness/bore {relative:g}: "
                + ", ".join(f"{name} {100 * found.share(name):.1f} %" for name in found.held)
            )
    if asked.only in (None, "bound"):
        found, ratio = measure_upper_bound(asked.surveys, 5e-6, seed=asked.seed)
        print(
            "against the likelihood, roughness/bore 5e-06: "
            + ", ".join(f"{name} {100 * found.share(name):.1f} %" for name in found.held)
            + f"; median upper bound {ratio:.3f} times that of the likelihood"
        )
    if asked.only not in (None, "wall"):
        return
    for relative in (2e-3, 1e-4, 5e-6):
        found = measure(asked.surveys, relative, seed=asked.seed, static=asked.static)
        print(
            f"roughness/bore {relative:g}: "
            + ", ".join(f"{name} {100 * found.share(name):.1f} %" for name in found.held)
        )


if __name__ == "__main__":
    main()
