"""The few degrees of freedom of a calibration line."""

from __future__ import annotations

import numpy as np
import pytest

import gradeline
from gradeline.fitting.calibration import fit_calibration
from gradeline.reduction.calibrations import freedom_factor
from tests.gauges.conftest import GRAVITY, NAMES, RHO, heads

#: t at 95 % by degrees of freedom: JCGM 100:2008, table G.2.
TABLE_G2 = {1: 12.71, 2: 4.30, 3: 3.18, 5: 2.57, 9: 2.26, 20: 2.09, 100: 1.984}


@pytest.mark.parametrize("dof", TABLE_G2)
def test_the_factor_is_students_t_over_the_normal(dof):
    assert freedom_factor(dof) == pytest.approx(TABLE_G2[dof] / 1.96, rel=3e-3)


def test_of_many_points_it_is_one():
    assert freedom_factor(10**6) == pytest.approx(1.0, abs=1e-5)


def test_intervals_of_three_point_calibrations_hold_the_truth():
    """4000 calibrations of three points: 95 % of u t/1.96 times 1.96 hold the true correction, of u alone 70 % (t of 1)."""
    rng = np.random.default_rng(20261201)
    reading, at = np.array([0.0, 50.0, 100.0]), np.array([50.0])
    held = np.zeros(2)
    for _ in range(4000):
        line = fit_calibration(reading, reading + rng.normal(0.0, 1.0, 3))
        error, u = abs(line.correction(at)[0]), line.correction_u(at)[0]
        held += [error < 1.96 * u * freedom_factor(line.dof), error < 1.96 * u]
    share = held / 4000
    assert share[0] == pytest.approx(0.95, abs=0.012)
    assert share[1] == pytest.approx(0.70, abs=0.03)  # 2/π arctan 1.96, the Cauchy distribution


def test_it_is_told_and_carried(bench):
    """Three points 0, +2, 0 Pa off: s² = Σ r²/1 with r = (2, −4, 2)/3, so s = √(24)/3 Pa; mid-range u = s/√3, times 6.48."""
    gauge = '[gauge.dial]\nkind = "pressure gauge"\nuncertainty = "1 Pa"\ncalibration = "dial.csv"\n'
    table = "reading [Pa],true [Pa]\n0,0\n20000,20002\n40000,40000\n"
    columns = {f"{name} [Pa]": heads()[:, t] * RHO * GRAVITY for t, name in enumerate(NAMES)}
    folder = bench(gauge, columns, dict.fromkeys(NAMES, ("dial", 0.0)), dial__csv=table)
    survey = gradeline.read_survey(folder)
    assert any(
        "by the straight line through the 3 points of dial.csv, with its uncertainty from their scatter, times 6.48 for its 1 "
        "degree of freedom (Student's t over the normal at 95 %)." in text
        for text in gradeline.reduce(survey).assumptions
    )
    from gradeline.reduction.calibrations import calibrated  # noqa: PLC0415 (used once)

    errors = [change for _, change in calibrated(survey).errors]
    size = np.sqrt(sum(change**2 for change in errors))
    away = (survey.readings.to_numpy(float) - 20e3) / 20e3
    s = np.sqrt(24) / 3
    expected = 6.4829 * s * np.sqrt(1 / 3 + away**2 / 2)
    assert size == pytest.approx(expected, rel=1e-3)
