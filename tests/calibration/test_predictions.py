"""A small seeded version of `predictions`: three standard errors of the binomial about 95 %."""

from __future__ import annotations

import pytest

from tests.calibration.predictions import measure
from tests.calibration.test_calibration import least

SURVEYS = 60


@pytest.mark.parametrize("setting", ["smooth", "fitting", "law"])
def test_intervals_hold_what_is_measured(setting: str) -> None:
    """Measurements of one survey share its errors: only the surveys are counted."""
    found = measure(SURVEYS, setting, seed=3)
    for name in found.held:
        assert found.share(name) >= least(0.95, SURVEYS), name
