"""A small seeded version of `tests.calibration.laws`: the law behind simulated surveys is seldom named wrongly."""

from __future__ import annotations

import pytest

from tests.calibration.laws import RELATIVE, false_verdicts, measure

SURVEYS = 25
#: 5 % of them, three standard errors above.
MOST = SURVEYS * 0.05 + 3 * (SURVEYS * 0.05 * 0.95) ** 0.5


@pytest.mark.parametrize("name", ["between", "smooth"])
def test_commercial_walls_are_not_called_sand_or_none(name: str) -> None:
    found = measure(SURVEYS, RELATIVE[name], sand=False, seed=5)
    assert false_verdicts(found, sand=False) <= MOST


def test_sand_is_found_where_the_runs_span_the_transition() -> None:
    found = measure(SURVEYS, RELATIVE["between"], sand=True, seed=6)
    assert found["sand-grain"] >= SURVEYS - MOST


def test_heads_off_along_the_chainage_are_found() -> None:
    found = measure(10, RELATIVE["between"], sand=False, intercept=3e-3, seed=7)
    assert found["flag: intercept"] == 10
