"""Is what ails a tap or a line found, named and placed? Simulated surveys, 10 taps, 10 runs, S from 0.01 to 1, σ = 1 mm.

Run by hand: ``python -m tests.calibration.diagnosis --surveys 1000``. A small seeded version runs with the tests.
"""

from __future__ import annotations

import argparse
from collections import Counter
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gradeline.reduction import reduce
from gradeline.reduction.tables import Reduction
from gradeline.survey import Survey
from tests.simulate.line import TrueReach, kinetic_energy_factor
from tests.simulate.surveys import AIR, NominalFitting, NominalReach, Truth, Uncertainties, make_survey
from tests.simulate.water import density

Floats = NDArray[np.float64]

DIAMETER, CHAINAGE, MIDDLE, SIGMA = 0.0266, np.linspace(0.2, 5.3, 10), 2.75, 1e-3
STATED = Uncertainties(chainage=1e-3, flow=0.004, flow_scale=0.003, temperature=0.2)
#: What ails a tap: a fixed offset, a burr, a mistyped place; a line that is stuck at the first run's head, one that goes
#: half of the way from run to run, one that goes a random part of it; air that comes and goes.
AILMENTS = ("offset", "edge", "chainage", "stuck line", "slow line", "sticky line", "air")
BREAKS = ("step", "off-take")
CASES = ("sound", *AILMENTS, *BREAKS)
NAMES = {
    "offset": ("datum offset",),
    "edge": ("edge error",),
    "chainage": ("chainage error",),
    "stuck line": ("sluggish or blocked line",),
    "slow line": ("sluggish or blocked line",),
    "sticky line": ("sluggish or blocked line", "unsteady"),
    "air": ("air in line",),
}
OFFSET, EDGE, MISPLACED, LOSS, SHARE = 0.005, 0.1, 0.02, 1.0, 0.1


def flows_of_slopes(slopes: Floats, relative_roughness: float) -> Floats:
    """Flows (m³/s) at which the pipe has these friction slopes at 15 °C."""
    reach = TrueReach(0.0, 5.5, DIAMETER, relative_roughness * DIAMETER)
    flow = np.full(len(slopes), 1e-3)
    for _ in range(60):
        flow = flow * np.sqrt(slopes / reach.slope(flow, np.full(len(slopes), 1.14e-6), 9.80665))
    return flow


def ailing_survey(
    rng: np.random.Generator, case: str, relative_roughness: float
) -> tuple[Survey, Truth, int]:
    """A survey with one thing wrong: (survey, truth, number of the tap)."""
    slopes = rng.permutation(np.geomspace(0.01, 1.0, 10))
    chainage = CHAINAGE.copy()
    tap, sign = int(rng.integers(len(chainage))), rng.choice([-1.0, 1.0])
    fittings = [NominalFitting(MIDDLE, LOSS, stated=None)] if case == "step" else []
    survey, truth = make_survey(
        rng,
        chainage=chainage + (sign * MISPLACED * (np.arange(10) == tap) if case == "chainage" else 0.0),
        reaches=[NominalReach(0.0, 5.5, DIAMETER, relative_roughness * DIAMETER, 0.001 * DIAMETER)],
        flows=flows_of_slopes(slopes, relative_roughness),
        sigma=SIGMA,
        stated=STATED,
        fittings=fittings,
    )
    survey = replace(
        survey,
        taps=tuple(replace(one, chainage=float(x)) for one, x in zip(survey.taps, chainage, strict=True)),
    )
    reach = truth.line.reaches[0]
    factor = 1 - AIR / density(truth.temperature)
    read = survey.readings.to_numpy(float).copy()
    # The level of the line is another in each run: no tap stays at the same height.
    read += rng.uniform(0.0, 0.5, len(read))[:, None]
    velocity_head = reach.velocity(truth.flow) ** 2 / (2 * 9.80665)
    true = read.copy()
    if case == "offset":
        read[:, tap] += sign * OFFSET
    elif case == "edge":
        read[:, tap] += sign * EDGE * velocity_head
    elif case == "stuck line":
        read[:, tap] = true[0, tap] + SIGMA * rng.standard_normal(len(read))
    elif case in ("slow line", "sticky line"):
        for run in range(1, len(read)):
            part = 0.5 if case == "slow line" else rng.uniform(0.0, 1.0)
            read[run, tap] = read[run - 1, tap] + part * (true[run, tap] - read[run - 1, tap])
    elif case == "air":
        read[:, tap] += np.where(rng.random(len(read)) < 0.5, rng.uniform(0.02, 0.1, len(read)), 0.0)
    elif case == "off-take":
        rest = (1 - SHARE) * truth.flow
        slope = reach.slope(truth.flow, truth.viscosity, 9.80665) - reach.slope(
            rest, truth.viscosity, 9.80665
        )
        heads = [
            kinetic_energy_factor(reach.reynolds(flow, truth.viscosity), relative_roughness)
            * reach.velocity(flow) ** 2
            / (2 * 9.80665)
            for flow in (truth.flow, rest)
        ]
        beyond = truth.chainage > MIDDLE
        rise = (
            slope[:, None] * np.maximum(truth.chainage - MIDDLE, 0.0)
            + (heads[0] - heads[1])[:, None] * beyond
        )
        read += rise / factor[:, None]
    readings = survey.readings.copy()
    readings.iloc[:, :] = read
    return replace(survey, readings=readings), truth, tap


def count(found: Reduction, case: str, tap: int, tally: Counter[str]) -> None:
    """Add what a reduction says to the counts."""
    label, ailments = f"T{tap + 1}", found.ailments
    taps, line = ailments[ailments["what"] == "tap"], ailments[ailments["what"] == "line"]
    tally["any diagnosis"] += len(ailments) > 0
    tally["anomaly of the line"] += len(line) > 0
    tally["innocent tap"] += bool((taps["name"] != label).any()) if case in AILMENTS else len(taps) > 0
    tally["innocent reading"] += bool(
        ((found.flags["kind"] == "reading") & (found.flags["tap"] != label)).any()
    )
    tally["unexplained misfit"] += any("share a misfit" in text for text in found.cautions)
    if case in AILMENTS:
        mine = taps["ailment"][(taps["name"] == label).to_numpy(bool)].tolist()
        tally["right tap"] += len(mine) == 1 and len(ailments) == 1
        name = mine[0] if mine else ""
        right = any(name.startswith(text) for text in NAMES[case])
        open_ = "not distinguishable" in name
        tally["named right"] += right
        tally["not distinguishable"] += open_
        tally["named wrongly"] += bool(name) and not right and not open_
    if case in BREAKS:
        what = "unlisted loss" if case == "step" else "change of slope"
        mine = line[(line["ailment"] == what).to_numpy(bool)]
        tally["found"] += len(mine) > 0
        tally["only that"] += len(mine) == 1 and len(ailments) == 1
        holds = ((mine["start"] <= MIDDLE) & (mine["end"] >= MIDDLE)).to_numpy(bool)
        tally["place held"] += bool(holds.any())
        if case == "off-take" and len(mine):
            tally["called an off-take"] += any(
                "agrees with" in text and "of the flow leaves" in text.split(", not with")[0]
                for text in found.flags["suggestion"]
            )


def measure(case: str, surveys: int, *, seed: int, relative_roughness: float = 2e-3) -> dict[str, float]:
    """Share of surveys in which each thing is so."""
    rng = np.random.default_rng([seed, CASES.index(case), int(1e9 * relative_roughness)])
    tally: Counter[str] = Counter()
    for _ in range(surveys):
        survey, _, tap = ailing_survey(rng, case, relative_roughness)
        count(reduce(survey, monte_carlo=False), case, tap, tally)
    return {name: value / surveys for name, value in tally.items()}


def main() -> None:
    """Print the shares for all cases."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--cases", nargs="*", default=CASES, choices=CASES)
    parser.add_argument("--roughness", type=float, nargs="*", default=[2e-3])
    asked = parser.parse_args()
    for relative in asked.roughness:
        for case in asked.cases:
            found = measure(case, asked.surveys, seed=asked.seed, relative_roughness=relative)
            told = ", ".join(f"{name} {100 * share:.1f} %" for name, share in found.items())
            print(f"roughness/bore {relative:g}, {case}: {told}", flush=True)


if __name__ == "__main__":
    main()
