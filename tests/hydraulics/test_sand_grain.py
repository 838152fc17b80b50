"""The sand-grain law against the smooth and rough laws, the published joints and the velocity profile it comes with."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import gradeline.hydraulics.sand_grain as module
from gradeline.hydraulics.friction import colebrook_white, roughness_reynolds
from gradeline.hydraulics.friction_laws import COLEBROOK_WHITE, SAND_GRAIN, SMOOTH
from gradeline.hydraulics.sand_grain import roughness_function, sand_grain, sand_grain_sensitivities

REYNOLDS = st.floats(3e3, 1e8)
RELATIVE = st.floats(1e-7, 0.1)


def grain(reynolds, relative):
    """ε⁺ of the grains: V = 1, D = 1, ν = 1/Re."""
    f = sand_grain(reynolds, relative)
    return roughness_reynolds(relative, 1.0, f, 1.0 / np.asarray(reynolds, float))


@pytest.mark.parametrize(
    ("reynolds", "factor"),
    # Prandtl–Kármán smooth law, 1/√f = 2 log₁₀(Re √f/2.51): two libraries and a 40-digit root agree on these.
    [(4e3, 0.0399070140556349), (1e5, 0.0179897730842738), (1e7, 0.0081026694308749)],
)
def test_below_the_first_joint_it_is_the_smooth_law(reynolds, factor):
    assert sand_grain(reynolds, 0.0) == pytest.approx(factor, rel=1e-13)
    fine = 3.0 / (reynolds * np.sqrt(factor / 8))  # ε⁺ = 3
    assert sand_grain(reynolds, fine) == pytest.approx(factor, rel=1e-12)


@pytest.mark.parametrize(
    ("relative", "factor"),
    # von Kármán's rough law, 1/√f = −2 log₁₀(ε/3.7 D).
    [(1e-3, 0.019635465935527), (1e-2, 0.037903711892391), (5e-2, 0.071550673223843)],
)
def test_above_the_last_joint_it_is_the_rough_law(relative, factor):
    reynolds = 200.0 / relative / np.sqrt(factor / 8)
    assert grain(reynolds, relative) == pytest.approx(200.0)
    assert sand_grain(reynolds, relative) == pytest.approx(factor, rel=1e-12)


def test_the_pieces_meet_where_the_paper_ends_them():
    """log₁₀ ε⁺ = 0.55, 0.85, 1.15, 1.83 (Nikuradse 1933, from memory): the pieces were fitted one by one."""
    np.testing.assert_allclose(module._JOINTS, [0.55, 0.85, 1.15, 1.83], atol=0.012)


def test_the_velocity_profile_over_sand_gives_the_same():
    """B of the same paper, U/u* = 5.75 log₁₀(y/ε) + B, from memory: 1/√f = (5.75/√8) log₁₀(r/ε) + (B − 3.75)/√8."""
    level = np.linspace(np.log10(5.0), 2.5, 200)
    b = np.select(
        [level < 0.55, level < 0.85, level < 1.15, level < 1.83],
        [5.5 + 5.75 * level, 6.59 + 3.5 * level, 9.58 + 0.0 * level, 11.5 - 1.62 * level],
        8.48,
    )
    for radius in (30.6, 126.0, 507.0):  # r/ε of three of the pipes
        by_profile = (5.75 * np.log10(radius) + b - 3.75) / np.sqrt(8)
        by_law = 2 * np.log10(7.4 * radius) + roughness_function(10**level)
        # 1.1 % of 1/√f: his two sets of constants differ by so much between themselves.
        np.testing.assert_allclose(by_law, by_profile, rtol=0.011)


@given(reynolds=REYNOLDS, relative=RELATIVE)
def test_it_satisfies_its_own_equation(reynolds, relative):
    f = float(sand_grain(reynolds, relative))
    plus = mpmath.mpf(relative) * reynolds * mpmath.sqrt(mpmath.mpf(f) / 8)
    right = 2 * mpmath.log10(mpmath.mpf("3.7") / relative) + float(roughness_function(float(plus)))
    assert float(1 / mpmath.sqrt(f)) == pytest.approx(float(right), rel=1e-12)


@given(reynolds=REYNOLDS, relative=RELATIVE, more=st.floats(1.0, 3.0))
def test_a_coarser_grain_never_lowers_friction_and_none_lies_above_colebrook_white_by_more_than_a_little(
    reynolds, relative, more
):
    f = sand_grain(reynolds, relative)
    assert sand_grain(reynolds, relative * more) >= f * (1 - 1e-13)
    assert f >= sand_grain(reynolds, 0.0) * (1 - 1e-13)
    # Colebrook and White drew their law above the dip of the sand; only the hump before the rough end passes it.
    assert f <= colebrook_white(reynolds, relative) * 1.03


@given(reynolds=REYNOLDS, relative=RELATIVE)
def test_derivatives(reynolds, relative):
    step = 1e-6
    plus = float(grain(reynolds, relative))
    near = np.abs(np.log10(plus) - np.array([0.545, 0.8496, 1.1395, 1.8223]))
    if near.min() < 1e-3:
        return  # across a joint there is no derivative
    _, by_reynolds, by_roughness = sand_grain_sensitivities(reynolds, relative)
    ends = np.log(sand_grain(reynolds * np.array([1 - step, 1 + step]), relative))
    assert by_reynolds == pytest.approx((ends[1] - ends[0]) / (2 * step), abs=1e-7)
    ends = np.log(sand_grain(reynolds, relative * np.array([1 - step, 1 + step])))
    assert by_roughness * relative == pytest.approx((ends[1] - ends[0]) / (2 * step), abs=1e-7)


def test_nothing_comes_of_rest_and_friction_dips_between_smooth_and_rough():
    assert np.isnan(sand_grain([0.0, -1.0], 1e-3)).all()
    along = sand_grain(np.geomspace(1e4, 1e7, 400), 2e-3)
    assert along.min() < 0.95 * along[-1], "sand dips below its rough friction before it reaches it"
    glides = colebrook_white(np.geomspace(1e4, 1e7, 400), 2e-3)
    assert glides.min() == glides[-1]


def test_the_laws_under_their_names():
    for law in (COLEBROOK_WHITE, SAND_GRAIN, SMOOTH):
        assert law.factor(1e5, 0.0) == pytest.approx(0.0179897730842738, rel=1e-13)
        assert law.sensitivities(1e5, 1e-2)[0] == law.factor(1e5, 1e-2)
        assert bool(law.factor(1e5, 1e-2) > law.factor(1e5, 0.0)) == law.rough
