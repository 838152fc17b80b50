"""Small seeded versions of the measurements: they fail where a change has spoiled the statistics, not by chance.

Each threshold is the target less three standard errors of the binomial for so many surveys.
"""

from __future__ import annotations

import numpy as np
import pytest

from tests.calibration.coverage import measure as measure_coverage
from tests.calibration.outliers import CASES, END, END_PAIR, MID, measure

SURVEYS = 200
BY_NAME = {case.name: case for case in CASES}


def least(target: float, count: int = SURVEYS) -> float:
    """Three standard errors below the target."""
    return target - 3 * np.sqrt(target * (1 - target) / count)


def most(target: float, count: int) -> float:
    """Three standard errors above the target."""
    return target + 3 * np.sqrt(target * (1 - target) / count)


@pytest.mark.parametrize(
    ("choose", "size", "target"), [(MID, 6.0, 0.96), (END, 6.0, 0.90), (END_PAIR, 8.0, 0.96)]
)
def test_planted_errors_are_found_and_sound_runs_left_alone(choose, size, target) -> None:
    """One 6σ off at a mid tap 96 %, at an end tap 90 %; two 8σ off side by side at an end, both, 96 %."""
    found = measure(BY_NAME["σ estimated"], choose, size, surveys=SURVEYS, seed=3)
    assert found.all_found >= least(target)
    assert found.sound_runs <= most(0.015, SURVEYS * 11)


@pytest.mark.parametrize("name", BY_NAME)
def test_sound_runs_are_left_alone(name: str) -> None:
    """At most 1.5 % of them, whatever the weights, gaps, parameters and number of runs."""
    case = BY_NAME[name]
    surveys = 40 if len(case.heads) > 20 else 100
    found = measure(case, None, 0.0, surveys=surveys, seed=4)
    assert found.sound_runs <= most(0.015, surveys * len(case.heads))
    assert found.shared <= most(0.01, surveys)


@pytest.mark.parametrize("relative_roughness", [2e-3, 5e-6])
def test_intervals_hold_the_truth(relative_roughness: float) -> None:
    """95 % intervals of ε and of the slopes. Slopes of one survey share errors: only the surveys are counted."""
    surveys = 60
    found = measure_coverage(surveys, relative_roughness, seed=5)
    for name in ("slope", "friction factor", "roughness", "upper bound"):
        assert found.share(name) >= least(0.95, surveys), name
    assert found.share("shared misfit") <= most(0.01, surveys)
