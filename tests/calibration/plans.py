"""Does a plan say what surveys of that plan then show? Expected uncertainties beside those of simulated surveys.

Run by hand: ``python -m tests.calibration.plans --surveys 400``. A small seeded version runs with the tests. The surveys are
made by tests/simulate, which shares no code with the plan; every stated input is drawn from its statement.
"""

from __future__ import annotations

import argparse
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from gradeline.planning import plan
from gradeline.reduction import reduce
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties, make_survey

DIAMETER = 0.0266
STATED = Uncertainties(
    reading=1e-3, flow=0.004, flow_scale=0.003, chainage=1e-3, temperature=0.2, temperature_run=0.05
)
FLOWS = np.geomspace(3e-4, 1.5e-3, 10)


@dataclass(frozen=True)
class Case:
    """A plan: ε/D, taps, flows, a fitting at mid-line where `loss` is not None."""

    relative_roughness: float
    chainage: np.ndarray = field(default_factory=lambda: np.linspace(0.2, 5.3, 10))
    flows: np.ndarray = field(default_factory=lambda: FLOWS)
    loss: float | None = None


CASES: Mapping[str, Case] = {
    "rough": Case(2e-3),
    "nearly smooth": Case(1e-4),
    "smooth": Case(5e-6),
    "static run": Case(5e-4, flows=np.concatenate([[0.0], FLOWS])),
    "fitting": Case(1e-3, loss=2.0),
    "four taps, four runs": Case(1e-3, np.array([0.3, 1.9, 3.6, 5.2]), np.geomspace(5e-4, 1.5e-3, 4)),
    "two taps": Case(1e-3, np.array([0.3, 5.2])),
}


@dataclass(frozen=True)
class Compared:
    """What simulated surveys show over what the plan expects, each a ratio; the last two of K, NaN without a fitting.

    `slope_rms`, `factor_rms`: root mean square of errors over their expected standard uncertainties; `slope_u`, `factor_u`: mean
    of the stated ones over the expected; `width`: mean width of the interval of ε over the expected one, `width_median`
    its median; `roughness_rms`: of the errors of ε over an expected interval's width in standard uncertainties.
    """

    slope_rms: float
    slope_u: float
    factor_rms: float
    factor_u: float
    width: float
    width_median: float
    roughness_rms: float
    loss_rms: float
    loss_u: float


def _survey(rng: np.random.Generator, case: Case) -> tuple[Any, Any]:
    return make_survey(
        rng,
        chainage=case.chainage,
        reaches=[NominalReach(0.0, 5.5, DIAMETER, case.relative_roughness * DIAMETER, 0.001 * DIAMETER)],
        flows=case.flows,
        sigma=1e-3,
        stated=STATED,
        fittings=[] if case.loss is None else [NominalFitting(2.75, case.loss)],
        offsets=rng.normal(0.0, 2e-3, len(case.chainage)) if (case.flows == 0).any() else 0.0,
    )


def measure(surveys: int, case: Case, *, seed: int) -> Compared:
    """Plan once, simulate and reduce many surveys of the plan."""
    rng = np.random.default_rng([seed, int(1e9 * case.relative_roughness), len(case.chainage)])
    first, _ = _survey(rng, case)
    true = case.relative_roughness * DIAMETER
    told = plan(first, roughness=true, loss={} if case.loss is None else {"fitting 1": case.loss})
    flowing = case.flows > 0
    slope_u, factor_u = told.runs["slope_u"].to_numpy(), told.runs["friction_factor_u"].to_numpy()
    width = float((told.walls["roughness_high"] - told.walls["roughness_low"]).iloc[0])
    rows = []
    for _ in range(surveys):
        survey, truth = _survey(rng, case)
        found = reduce(survey, monte_carlo=False)
        runs, wall = found.runs[(found.runs["flow"] > 0).to_numpy(bool)], found.walls.iloc[0]
        loss = found.fittings.iloc[0] if case.loss is not None else None
        rows.append(
            (
                np.mean(((runs["slope"].to_numpy() - truth.slope[flowing, 0]) / slope_u) ** 2),
                np.mean(runs["slope_u"].to_numpy() / slope_u),
                np.mean(
                    ((runs["friction_factor"].to_numpy() - truth.friction_factor[flowing, 0]) / factor_u) ** 2
                ),
                np.mean(runs["friction_factor_u"].to_numpy() / factor_u),
                (wall["roughness_high"] - wall["roughness_low"]) / width,
                ((wall["roughness"] - true) / (width / 3.92)) ** 2,
                np.nan if loss is None else (loss["loss_coefficient"] - case.loss) ** 2,
                np.nan if loss is None else loss["loss_coefficient_u"],
            )
        )
    table = np.array(rows, dtype=float)
    mean = table.mean(axis=0)
    loss_u = float(told.fittings["loss_coefficient_u"].iloc[0]) if case.loss is not None else np.nan
    return Compared(
        slope_rms=float(np.sqrt(mean[0])),
        slope_u=float(mean[1]),
        factor_rms=float(np.sqrt(mean[2])),
        factor_u=float(mean[3]),
        width=float(mean[4]),
        width_median=float(np.median(table[:, 4])),
        roughness_rms=float(np.sqrt(mean[5])),
        loss_rms=float(np.sqrt(mean[6]) / loss_u),
        loss_u=float(mean[7] / loss_u),
    )


def main() -> None:
    """Measure all cases and print the ratios."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=400)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--only", choices=list(CASES))
    asked = parser.parse_args()
    for name, case in CASES.items():
        if asked.only in (None, name):
            found = measure(asked.surveys, case, seed=asked.seed)
            shown = ", ".join(
                f"{key} {value:.3f}" for key, value in vars(found).items() if np.isfinite(value)
            )
            print(f"{name}: {shown}", flush=True)


if __name__ == "__main__":
    main()
