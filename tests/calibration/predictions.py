"""Do predicted intervals hold what is then measured? Simulated surveys, then a head loss measured at another flow.

What is "measured": the true head loss over the whole line at a flow that is known exactly, of the pipe that was drawn, plus
the scatter of two readings (√2 mm), which the prediction is told (`head_loss_u`). Beside it the share of true head losses
in the intervals without that scatter, and of true flows in the interval of the capacity under the true head loss.

Run by hand: ``python -m tests.calibration.predictions --surveys 1000``. A small seeded version runs with the tests.
"""

from __future__ import annotations

import argparse
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np

from gradeline.prediction import predict
from gradeline.reduction.carried import carried_of
from gradeline.reduction.estimates import estimates_of
from gradeline.survey import Survey
from tests.calibration.coverage import CHAINAGE, DIAMETER, FLOWS, STATED, Coverage
from tests.simulate.surveys import NominalFitting, NominalReach, make_survey
from tests.simulate.water import kinematic_viscosity

#: Below, between and beyond the tested ones (0.3 to 1.5 L/s).
OTHER_FLOWS = (2.2e-4, 7e-4, 1.8e-3)
TEMPERATURE = 288.15
READING = 1e-3
LENGTH = 5.5
LAW = 0.01
SETTINGS = {
    "rough": (2e-3, None),
    "in between": (1e-4, None),
    "smooth": (5e-6, None),
    "fitting": (1e-4, "fitting"),
    "two walls": (1e-3, "two walls"),
    "law": (1e-3, "law"),
}


def carried_from_fits(survey: Survey) -> Mapping[str, Any]:
    """What `reduce` carries, without its tables."""
    fits = estimates_of(survey, monte_carlo=False)
    return carried_of(
        fits.survey,
        fits.whole,
        fits.media,
        fits.flowing,
        fits.corrections,
        fits.walls,
        fits.losses,
        level=0.95,
    )


def measure(surveys: int, setting: str, *, seed: int) -> Coverage:
    """Reduce simulated surveys, predict at other flows, and count what the intervals hold."""
    relative, more = SETTINGS[setting]
    rng = np.random.default_rng([seed, list(SETTINGS).index(setting)])
    coverage = Coverage()
    for _ in range(surveys):
        bore_u = 0.001 * DIAMETER
        reaches = [NominalReach(0.0, LENGTH, DIAMETER, relative * DIAMETER, bore_u)]
        fittings = []
        if more == "fitting":
            fittings = [NominalFitting(2.75, 2.0)]
        if more == "two walls":
            reaches = [
                NominalReach(0.0, 2.7, DIAMETER, relative * DIAMETER, bore_u, wall="first"),
                NominalReach(2.7, LENGTH, DIAMETER, relative / 5 * DIAMETER, bore_u, wall="second"),
            ]
        survey, truth = make_survey(
            rng,
            chainage=CHAINAGE,
            reaches=reaches,
            flows=FLOWS,
            temperature=TEMPERATURE,
            sigma=READING,
            stated=STATED,
            fittings=fittings,
        )
        law = 1.0
        if more == "law":
            survey = replace(survey, stated=replace(survey.stated, friction_law=LAW))
            law = 1.0 + LAW * rng.standard_normal()
        carried = carried_from_fits(survey)
        gravity = truth.line.gravity
        viscosity = kinematic_viscosity(np.array([TEMPERATURE]))
        at = np.array(OTHER_FLOWS)
        true = law * np.sum(
            [one.slope(at, viscosity, gravity) * (one.end - one.start) for one in truth.line.reaches], axis=0
        )
        for one in fittings:
            true += one.true_coefficient * truth.line.reaches[0].velocity(at) ** 2 / (2 * gravity)
        u = np.sqrt(2.0) * READING
        measured = true + u * rng.standard_normal(len(at))
        found = predict(carried, flow=OTHER_FLOWS, temperature=TEMPERATURE, available_head=float(true[-1]))
        wide = predict(carried, flow=OTHER_FLOWS, temperature=TEMPERATURE, head_loss_u=u).flows
        plain = found.flows
        for n, flow in enumerate(OTHER_FLOWS):
            name = f"{1000 * flow:.3g} L/s"
            low, high = wide["head_loss_low"][n], wide["head_loss_high"][n]
            coverage.count(f"measured {name}", low <= measured[n] <= high)
            low, high = plain["head_loss_low"][n], plain["head_loss_high"][n]
            coverage.count(f"true {name}", low <= true[n] <= high)
        carries = found.capacity.iloc[0]
        coverage.count("capacity", carries["flow_low"] <= OTHER_FLOWS[-1] <= carries["flow_high"])
    return coverage


def pooled(coverage: Coverage, what: str) -> float:
    """Share over all flows of the counts whose name begins with `what`."""
    names = [name for name in coverage.held if name.startswith(what)]
    return sum(coverage.held[name] for name in names) / sum(coverage.seen[name] for name in names)


def main() -> None:
    """Print the shares for every setting."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--only", choices=tuple(SETTINGS), help="one setting")
    asked = parser.parse_args()
    for setting in SETTINGS if asked.only is None else (asked.only,):
        found = measure(asked.surveys, setting, seed=asked.seed)
        shares = ", ".join(f"{name} {100 * found.share(name):.1f} %" for name in found.held)
        print(
            f"{setting}: measured {100 * pooled(found, 'measured'):.1f} %, true {100 * pooled(found, 'true'):.1f} % "
            f"({shares})",
            flush=True,
        )


if __name__ == "__main__":
    main()
