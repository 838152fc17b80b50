"""How often the law that a wall's runs follow is named right, and wrongly, over simulated surveys.

Every stated input is drawn from its stated uncertainty. ``python -m tests.calibration.laws --surveys 1000``
"""

from __future__ import annotations

import argparse
from collections import Counter
from unittest.mock import patch

import numpy as np

from gradeline.fitting.laws import NONE
from gradeline.hydraulics.sand_grain import sand_grain
from gradeline.reduction import reduce
from gradeline.survey import Survey
from tests.simulate.surveys import NominalReach, Uncertainties, make_survey

DIAMETER, TAPS = 0.05, np.linspace(0.2, 8.0, 10)
STATED = Uncertainties(reading=1e-3, flow=4e-3, flow_scale=5e-3, chainage=1e-3, temperature=0.2)
#: ε/D that spans the transition between smooth and rough over the flows below; smooth; rough.
RELATIVE = {"between": 2e-3, "nearly smooth": 1e-4, "smooth": 0.0, "rough": 2e-2}
FLOWS = np.geomspace(4e-4, 8e-3, 10)


def survey_of(rng: np.random.Generator, relative: float, *, sand: bool, intercept: float = 0.0) -> Survey:
    """One survey; `intercept` is an error of the heads that grows with the chainage, m/m, stated nowhere."""
    law = sand_grain if sand else None
    reach = NominalReach(0.0, 8.2, DIAMETER, relative * DIAMETER, diameter_u=0.002 * DIAMETER)

    def made() -> Survey:
        return make_survey(
            rng,
            chainage=TAPS,
            reaches=[reach],
            flows=FLOWS,
            sigma=1e-3,
            stated=STATED,
            offsets=-intercept * TAPS,
        )[0]

    if law is None:
        return made()
    with patch("tests.simulate.line.colebrook_white", law):
        return made()


def measure(surveys: int, relative: float, *, sand: bool, intercept: float = 0.0, seed: int = 1) -> Counter:
    """Count the verdicts, and the flags of the law by what they say."""
    rng = np.random.default_rng(seed)
    found: Counter = Counter()
    for _ in range(surveys):
        reduction = reduce(survey_of(rng, relative, sand=sand, intercept=intercept), monte_carlo=False)
        found[str(reduction.laws["verdict"].iloc[0])] += 1
        said = reduction.flags["suggestion"][(reduction.flags["kind"] == "law").to_numpy(bool)]
        found["flag: trend"] += int(said.str.contains("per decade").any())
        found["flag: sand-grain"] += int(said.str.contains("sand-grain").any())
        found["flag: intercept"] += int(said.str.contains("in all runs").any())
        found["flag: below smooth"] += int(said.str.contains("smooth wall").any())
    return found


def false_verdicts(found: Counter, *, sand: bool) -> int:
    """Surveys in which the other rough law, or none, is named."""
    return found[NONE] + found["Colebrook–White" if sand else "sand-grain"]


def main() -> None:
    """Print the verdicts for both laws at four roughnesses, and for heads with an error along the chainage."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--surveys", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=1)
    asked = parser.parse_args()
    for sand in (False, True):
        for name, relative in RELATIVE.items():
            found = measure(asked.surveys, relative, sand=sand, seed=asked.seed)
            wrong = 100 * false_verdicts(found, sand=sand) / asked.surveys
            shares = {key: f"{100 * count / asked.surveys:.1f} %" for key, count in found.items() if count}
            print(
                f"{'sand-grain' if sand else 'Colebrook–White'}, {name}: wrong or none {wrong:.1f} %; {shares}"
            )
    found = measure(asked.surveys, RELATIVE["between"], sand=False, intercept=3e-3, seed=asked.seed)
    print(f"Colebrook–White, heads off by 3 mm/m: { {key: count for key, count in found.items() if count} }")


if __name__ == "__main__":
    main()
