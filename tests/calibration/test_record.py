"""Small seeded versions of `tests.calibration.record`: they fail where a change has spoiled the statistics, not by chance."""

from __future__ import annotations

import numpy as np
import pytest

from tests.calibration.record import PLANS, coverage, faults, windows


@pytest.mark.parametrize("share", [0.0, 0.001, 0.01, 0.05, 0.1])
def test_intervals_of_a_mean_hold_the_truth(share: float) -> None:
    """93 to 97 % of 95 % intervals, give or take three standard errors of so many windows."""
    count = 800
    found = coverage(count, 200, 10, share * 2000, seed=3)
    room = 3 * np.sqrt(0.95 * 0.05 / count)
    assert 0.93 - room <= found.held <= 0.97 + room
    assert found.known >= 0.9


def test_batch_means_agree_where_a_batch_is_long_enough() -> None:
    found = coverage(300, 400, 10, 4.0, seed=4)
    assert found.batch_u == pytest.approx(found.u, rel=0.08)


@pytest.mark.parametrize("plan", PLANS)
def test_plateaus_are_found_and_drifts_refused(plan: str) -> None:
    found = windows(plan, 4, seed=5)
    assert found.found >= 0.9 or plan == "slow drift alone"
    assert found.outside == 0.0
    if "drift" in plan:
        assert found.refused == 1.0


@pytest.mark.parametrize("kind", [None, "drift", "step", "stuck", "spike", "gap"])
def test_planted_faults_are_found_and_sound_columns_left_alone(kind: str | None) -> None:
    """95 % found, at most 1 % of columns in false alarm, give or take three standard errors."""
    records = 25
    found = faults(kind, records, 20.0, seed=6)
    assert found.false <= 0.01 + 3 * np.sqrt(0.01 * 0.99 / (records * 7))
    if kind:
        assert found.found >= 0.95 - 3 * np.sqrt(0.95 * 0.05 / records)
