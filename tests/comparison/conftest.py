from __future__ import annotations

import dataclasses
from collections.abc import Callable, Sequence

import numpy as np
import pytest

from gradeline.reduction import Reduction, reduce
from tests.calibration.coverage import CHAINAGE, DIAMETER, FLOWS, STATED
from tests.simulate.surveys import NominalReach, make_survey

DATES = ("2020-03-01", "2022-03-01", "2025-03-01")


def simulated(
    relative: Sequence[float], dates: Sequence[str | None], *, seed: int = 4, bores: Sequence[float] = ()
) -> list[Reduction]:
    """Surveys of one pipe, of given true roughness over bore."""
    rng = np.random.default_rng(seed)
    found: list[Reduction] = []
    pipe = None
    for n, (size, date) in enumerate(zip(relative, dates, strict=True)):
        bore = bores[n] if bores else DIAMETER
        survey, truth = make_survey(
            rng,
            chainage=CHAINAGE,
            reaches=[NominalReach(0.0, 5.5, bore, size * DIAMETER, 0.001 * DIAMETER)],
            flows=FLOWS,
            sigma=1e-3,
            stated=STATED,
            same_pipe=pipe,
        )
        pipe = pipe or truth
        source = f"rig/{'' if date is None else date[:4]}survey {n + 1}"
        found.append(
            reduce(dataclasses.replace(survey, date=date, source=source, title="Rig"), monte_carlo=False)
        )
    return found


@pytest.fixture(scope="session")
def ageing() -> list[Reduction]:
    """ε of 53.2 µm, growing by 30 % in five years: 3.19 µm a year."""
    return simulated((2e-3, 2.24e-3, 2.6e-3), DATES)


@pytest.fixture(scope="session")
def unchanged() -> list[Reduction]:
    return simulated((2e-3, 2e-3), (None, None), seed=6)


@pytest.fixture(scope="session")
def smooth() -> list[Reduction]:
    return simulated((5e-6, 5e-6), DATES[:2], seed=7)


@pytest.fixture(scope="session")
def make() -> Callable[..., list[Reduction]]:
    return simulated
