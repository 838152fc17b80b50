"""Several surveys of one wall fitted together: against numbers by hand where the flow is fully rough."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.fitting.joint import Part, freedom_of, joint_levels, joint_line
from gradeline.fitting.wall import WallData, fit_wall, law_log_slope

BORE_U, SCALE_U, FLOW_U, SCATTER = 0.001, 0.003, 0.004, 0.005
#: So fast and so rough that f is that of the rough law alone to six digits (Colebrook and White 1939 without its smooth part).
ROUGHNESS, BORE, VELOCITY, VISCOSITY = 0.002, 0.1, 1e4, 1e-6
ROUGH_F = (-2.0 * np.log10(ROUGHNESS / BORE / 3.7)) ** -2
#: ∂ ln f/∂ ln(ε/D) of 1/√f = −2 log₁₀(ε/3.7D).
BY_RELATIVE = 4.0 / np.log(10.0) * np.sqrt(ROUGH_F)


def one_run(roughness: float = ROUGHNESS, runs: int = 1) -> WallData:
    """Runs on the law, their scatter relative; inputs: the bore, the flow's calibration."""
    data = WallData(
        slope=np.full((runs, 1), np.nan),
        slope_covariance=np.ones((runs, 1, 1)),
        velocity=np.full((runs, 1), VELOCITY),
        diameter=np.array([BORE]),
        kinematic_viscosity=np.full(runs, VISCOSITY),
        gravity=9.81,
        flow_u=np.full(runs, FLOW_U),
        own_slope_effect=np.zeros((runs, 1)),
        viscosity_u=np.zeros(runs),
        slope_effect=np.zeros((runs, 1, 2)),
        diameter_effect=np.array([[BORE_U, 0.0]]),
        flow_effect=np.array([0.0, SCALE_U]),
        viscosity_effect=np.zeros((runs, 2)),
        gravity_effect=np.zeros(2),
    )
    slope = np.exp(law_log_slope(data, roughness))
    return replace(data, slope=slope, slope_covariance=(SCATTER * slope[:, :, None]) ** 2)


def part(roughness: float, keys: tuple[object, ...], *, dof: float = np.inf, runs: int = 1) -> Part:
    data = one_run(roughness, runs)
    return Part(data, fit_wall(data, np.isfinite(data.slope), dof=dof), keys, True)


RANDOM = SCATTER**2 + (2 * FLOW_U) ** 2
METER = (2 * SCALE_U) ** 2


@pytest.mark.parametrize(
    ("meters", "variance"),
    [(("a", "b"), 2 * (RANDOM + METER)), (("a", "a"), 2 * RANDOM)],
    ids=["another meter", "the same meter"],
)
def test_the_bore_leaves_the_difference_and_the_meter_where_it_is_the_same(meters, variance) -> None:
    """ln f = ln 2gDS/V², so f goes as D⁵ and Q⁻²; ε/D as D⁻¹. By hand."""
    both = [part(ROUGHNESS, ("bore", meter)) for meter in meters]
    found = joint_levels(both, 1e9, BORE)
    bore = (5.0 + BY_RELATIVE) * BORE_U
    assert found.covariance[0, 0] == pytest.approx(RANDOM + METER + bore**2, rel=1e-4)
    difference = np.array([-1.0, 1.0])
    assert difference @ found.covariance @ difference == pytest.approx(variance, rel=1e-4)


def test_what_is_left_without_common_errors() -> None:
    found = joint_levels([part(ROUGHNESS, ("bore", n)) for n in range(3)], 1e9, BORE)
    assert np.diagonal(found.apart) == pytest.approx(RANDOM + METER, rel=1e-4)
    assert found.apart[0, 1] == pytest.approx(0.0, abs=1e-9)


def test_f_of_rough_walls_is_that_of_the_rough_law() -> None:
    both = [part(size, ("bore", n)) for n, size in enumerate((ROUGHNESS, 1.5 * ROUGHNESS))]
    found = joint_levels(both, 1e9, BORE)
    rough = [(-2.0 * np.log10(size / BORE / 3.7)) ** -2 for size in (ROUGHNESS, 1.5 * ROUGHNESS)]
    assert np.exp(found.log_factor) == pytest.approx(rough, rel=1e-5)
    assert found.roughness == pytest.approx([ROUGHNESS, 1.5 * ROUGHNESS], rel=1e-6)


def test_freedom_by_welch_and_satterthwaite() -> None:
    """(u₁² + u₂² + w)²/(u₁⁴/ν₁ + u₂⁴/ν₂): JCGM 100, G.4.1; only the scatter of runs has degrees of freedom."""
    both = [part(ROUGHNESS, ("bore", n), dof=dof) for n, dof in enumerate((4.0, 9.0))]
    found = joint_levels(both, 1e9, BORE)
    by_hand = (2 * (RANDOM + METER)) ** 2 / (SCATTER**4 / 4.0 + SCATTER**4 / 9.0)
    assert freedom_of(found, np.array([-1.0, 1.0])) == pytest.approx(by_hand, rel=1e-3)


def test_a_line_through_exact_surveys() -> None:
    """0.1 mm a year from 2 mm: three surveys that lie on it."""
    times = np.array([0.0, 1.0, 4.0])
    surveys = [part(0.002 + 1e-4 * t, ("bore", n)) for n, t in enumerate(times)]
    found = joint_line(surveys, times)
    assert found.settled
    assert found.rate == pytest.approx(1e-4, rel=1e-6)
    assert found.level == pytest.approx(0.002 + 1e-4 * times.mean(), rel=1e-6)


def test_the_rate_of_two_surveys_is_their_difference_over_the_time() -> None:
    """And its uncertainty that of the difference: (ε₂ − ε₁)/t, the bore being common."""
    surveys = [part(size, ("bore", n)) for n, size in enumerate((0.002, 0.0024))]
    line, levels = joint_line(surveys, np.array([0.0, 5.0])), joint_levels(surveys, 1e9, BORE)
    assert line.rate == pytest.approx(0.0004 / 5.0, rel=1e-6)
    by = np.array([-1.0, 1.0]) / levels.by_roughness
    assert line.covariance[1, 1] == pytest.approx(by @ levels.covariance @ by / 25.0, rel=1e-4)


def test_a_wall_not_told_from_smooth_is_measured_by_its_excess_over_the_law() -> None:
    """S 3 % below that of the smooth wall: ln f lower by as much, not cut off at the law."""
    data = replace(one_run(0.0, 4), velocity=np.full((4, 1), 1.0))
    smooth = np.exp(law_log_slope(data, 0.0))
    parts = []
    for n, factor in enumerate((1.0, 0.97)):
        mine = replace(data, slope=factor * smooth, slope_covariance=(SCATTER * smooth[:, :, None]) ** 2)
        parts.append(Part(mine, fit_wall(mine, np.isfinite(mine.slope)), ("bore", n), False))
    found = joint_levels(parts, 1e5, BORE)
    assert found.log_factor[1] - found.log_factor[0] == pytest.approx(np.log(0.97), abs=1e-6)
    assert not found.resolved.any()
