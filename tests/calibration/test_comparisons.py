"""A small seeded version of the measurement: it fails where a change has spoiled the test, not by chance."""

from __future__ import annotations

import numpy as np

from tests.calibration.comparisons import ROUGH, SMOOTH, measure_pairs


def most(target: float, count: int) -> float:
    """Three standard errors above the target."""
    return target + 3 * np.sqrt(target * (1 - target) / count)


def test_an_unchanged_pipe_is_called_changed_in_one_case_of_twenty() -> None:
    pairs = 10
    for relative in (ROUGH, SMOOTH):
        found, _ = measure_pairs(pairs, relative, 1.0, seed=3)
        assert found.share("changed") <= most(0.05, pairs)


def test_growth_by_thirty_per_cent_is_found() -> None:
    """In 95 % where u(ε)/ε is 5 %."""
    pairs = 10
    found, u = measure_pairs(pairs, ROUGH, 1.3, seed=3)
    assert 0.04 < u < 0.06
    assert found.share("changed") >= 0.95 - 3 * np.sqrt(0.05 * 0.95 / pairs)
