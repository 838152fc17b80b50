"""Small seeded version of the measurement: a plan and the surveys made by it agree within 10 %, and the scatter of so few."""

from __future__ import annotations

import numpy as np
import pytest

from tests.calibration.plans import CASES, measure

SURVEYS = 24


@pytest.mark.parametrize("name", ["rough", "fitting"])
def test_expected_uncertainties_are_those_that_surveys_show(name: str) -> None:
    """Errors of one survey go together, so a root mean square of n has a standard error of about 1/√(2 n)."""
    found = measure(SURVEYS, CASES[name], seed=3)
    scatter = 3.0 / np.sqrt(2 * SURVEYS)
    assert found.slope_u == pytest.approx(1.0, abs=0.1)
    assert found.factor_u == pytest.approx(1.0, abs=0.1)
    assert found.width == pytest.approx(1.0, abs=0.1)
    assert found.slope_rms == pytest.approx(1.0, abs=0.1 + scatter)
    assert found.factor_rms == pytest.approx(1.0, abs=0.1 + scatter)
    if CASES[name].loss is not None:
        assert found.loss_u == pytest.approx(1.0, abs=0.1)
        assert found.loss_rms == pytest.approx(1.0, abs=0.1 + scatter)
