"""Small seeded version of the measurement: thresholds are the target and three standard errors of the binomial."""

from __future__ import annotations

import numpy as np
import pytest

from tests.calibration.two_taps import CASES, measure

SURVEYS = 40


@pytest.mark.parametrize(
    ("case", "gauge", "static"),
    [("readings alone", "differential", True), ("wide span", "columns", False), ("both", "columns", True)],
)
def test_sound_runs_are_seldom_off_the_law_and_planted_ones_are(case: str, gauge: str, static: bool) -> None:
    """At most 5 % of surveys with a run off; by a scatter that is relative alone it was a third of them."""
    sound = measure(SURVEYS, seed=2, gauge=gauge, static=static, **CASES[case])
    assert sound.run_flags / SURVEYS <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / SURVEYS)
    planted = measure(SURVEYS, seed=2, gauge=gauge, static=static, planted=10.0, **CASES[case])
    assert planted.slips / SURVEYS > 0.5
