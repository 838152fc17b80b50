"""Friction laws against 50-digit arithmetic, published values and measurements."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from fluids.friction import Colebrook, oregon_fd_smooth, oregon_Res
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from gradeline.hydraulics import friction

REYNOLDS = st.floats(4.001e3, 1e8)
ROUGHNESS = st.floats(0.0, 0.05)

# f of the law from an own 40-digit root; fluids.friction.Colebrook with tol=0 agrees
LAW = [
    (1e5, 1e-4, 0.01851386607747164),
    (4e3, 1e-3, 0.04091038986284613),
    (1e4, 0.01, 0.04312658470681169),
    (1e5, 1e-3, 0.02217453594451508),
    (1e6, 1e-5, 0.01186954482794495),
    (1e6, 1e-3, 0.01994346584047687),
    (1e7, 1e-4, 0.01216608095889658),
    (1e8, 0.05, 0.07155090409108326),
    # a hard case of the tests of fluids 1.3.1, whose own constant is off by 3e-12; 40-digit root
    (1.048e11, 2.55e-8, 0.0037751087365340033),
    # smooth: Prandtl's law, Lambert-W closed form in fluids and a 40-digit root
    (4e3, 0.0, 0.0399070140556349),
    (1e4, 0.0, 0.0308829503534877),
    (1e5, 0.0, 0.0179897730842738),
    (1e6, 0.0, 0.0116450409979916),
    (1e7, 0.0, 0.0081026694308749),
]


@pytest.mark.parametrize(("reynolds", "roughness", "expected"), LAW)
def test_law_at_known_points(reynolds, roughness, expected):
    assert friction.colebrook_white(reynolds, roughness) == pytest.approx(expected, rel=1e-13)


def test_law_against_50_digits(colebrook_root, digits, law_points):
    got = friction.colebrook_white(law_points[:, 0], law_points[:, 1])
    error = [
        abs(float(digits.mpf(float(f)) * colebrook_root(re, rel) ** 2 - 1))
        for f, (re, rel) in zip(got, law_points, strict=True)
    ]
    assert max(error) < 1e-14


def test_law_solves_the_implicit_equation_at_many_points():
    rng = np.random.default_rng(7)
    re, rel = 10 ** rng.uniform(np.log10(4e3), 8, 100_000), rng.uniform(0, 0.05, 100_000)
    x = friction.colebrook_white(re, rel) ** -0.5
    assert np.abs(x + 2 * np.log10(rel / 3.7 + 2.51 * x / re)).max() < 2e-14


def test_law_agrees_with_the_root_finder_of_fluids():
    for re, rel in [(5e3, 0.03), (2e5, 3e-4), (3e7, 2e-6)]:
        assert friction.colebrook_white(re, rel) == pytest.approx(Colebrook(re, rel), rel=1e-9)


@pytest.mark.parametrize(
    ("roughness", "expected"),
    # rough limit 1/sqrt f = -2 log10(rel/3.7); fluids.friction.von_Karman, its test prints the first
    [
        (1e-4, 0.011979797083255),
        (1e-3, 0.019635465935527),
        (1e-2, 0.037903711892391),
        (5e-2, 0.071550673223843),
    ],
)
def test_law_tends_to_the_rough_limit(roughness, expected):
    assert friction.colebrook_white(1e17, roughness) == pytest.approx(expected, rel=1e-10)


@pytest.mark.parametrize(
    ("reynolds", "printed"),
    # F. M. White, Fluid Mechanics, ch. 6, smooth pipe; from memory
    [(1e4, 0.0309), (1e5, 0.0180), (1e6, 0.0116), (1e7, 0.0081)],
)
def test_smooth_law_rounds_to_the_handbook(reynolds, printed):
    assert friction.colebrook_white(reynolds, 0.0) == pytest.approx(printed, abs=5e-5)


@pytest.mark.parametrize(("reynolds", "excess"), [(1e4, 0.0245), (1e5, -0.0110)])
def test_blasius_differs_as_known(reynolds, excess):
    # Blasius 0.3164 Re^-1/4 against Prandtl's law; both printed in any text, the difference recomputed
    assert 0.3164 * reynolds**-0.25 / friction.colebrook_white(reynolds, 0.0) - 1 == pytest.approx(
        excess, abs=5e-5
    )


def test_smooth_law_against_measurements():
    # B. J. McKeon et al., J. Fluid Mech. 511 (2004) 41-44, as carried by fluids.friction; worst known -4.60 %
    re, f = np.array(oregon_Res), np.array(oregon_fd_smooth)
    turbulent = re >= 3264
    assert turbulent.sum() == 20
    assert np.abs(f[turbulent] / friction.colebrook_white(re[turbulent], 0.0) - 1).max() < 0.05


@pytest.mark.parametrize(("reynolds", "fit", "excess"), [(1e6, 0.0118551, 0.018), (1e7, 0.0083162, 0.026)])
def test_smooth_law_lies_below_the_superpipe_fit(reynolds, fit, excess):
    # B. J. McKeon et al., J. Fluid Mech. 538 (2005) 429: 1/sqrt f = 1.930 log10(Re sqrt f) - 0.537; from memory
    assert fit**-0.5 == pytest.approx(1.930 * np.log10(reynolds * fit**0.5) - 0.537, rel=1e-5)
    assert fit / friction.colebrook_white(reynolds, 0.0) - 1 == pytest.approx(excess, abs=1e-3)


@pytest.mark.parametrize(
    ("reynolds", "roughness", "expected", "tolerance"),
    [
        # Cengel & Cimbala, Fluid Mechanics, Ex 8-3 p 360; f read to three digits
        (3.0558 * 0.05 * 999 / 1.138e-3, 0.002e-3 / 0.05, 0.0172, 0.00005),
        # Cengel & Cimbala Ex 8-4 p 361: smooth duct
        (100800, 0.0, 0.0180, 0.00005),
        # Vennard, Elementary Fluid Mechanics, Ex 9.3 p 288: f 0.0255 at relative roughness 0.002
        (8e4, 0.002, 0.0255, 0.00005),
        # Crane TP-410M ex 7.13: chart f 0.0230
        (4 * 2 * 3.785411784e-3 / (np.pi * 0.0525 * 2.7e-6), 0.0018 / (52.5 / 25.4), 0.0230, 0.0004),
        # Crane TP-410M ex 7.1: smooth, f 0.0179 at Re 100 600
        (100600, 0.0, 0.0179, 0.0001),
    ],
)
def test_law_in_worked_examples(reynolds, roughness, expected, tolerance):
    assert friction.colebrook_white(reynolds, roughness) == pytest.approx(expected, abs=tolerance)


def test_inverse_in_a_worked_example_run_backwards():
    # Subramanya, Fluid Mechanics, Ex 10.19 p 222: D 0.25 m, roughness 0.15 mm
    f = 0.0180720
    relative = friction.relative_roughness(f, 87544.6 / np.sqrt(f))
    assert 250 * relative == pytest.approx(0.150, abs=0.0005)


def test_inverse_is_signed_and_silent():
    # algebra: f = 0.0178 at Re 1e5 lies below the smooth law
    assert friction.relative_roughness(0.0178, 1e5) == pytest.approx(-3.46e-5, rel=1e-3)
    assert friction.relative_roughness(LAW[0][2], 1e5) == pytest.approx(1e-4, rel=1e-10)
    assert np.isnan(friction.relative_roughness([0.0, -0.01, np.nan, 0.02], [1e5, 1e5, 1e5, 0.0])).all()


def test_inverse_against_50_digits(digits, law_points):
    rng = np.random.default_rng(11)
    factors = friction.colebrook_white(*law_points.T) * rng.uniform(0.9, 1.1, len(law_points))
    got = friction.relative_roughness(factors, law_points[:, 0])
    for value, f, re in zip(got, factors, law_points[:, 0], strict=True):
        root = 1 / digits.sqrt(digits.mpf(float(f)))
        wall = digits.mpf("3.7") * digits.mpf(10) ** (-root / 2)
        film = digits.mpf("3.7") * digits.mpf("2.51") * root / digits.mpf(float(re))
        # the terms cancel near the smooth law: rounding is relative to them, not to their difference, and the
        # exponent (up to 15 in natural units) multiplies its own rounding
        assert abs(float(digits.mpf(float(value)) - (wall - film))) < 5e-15 * float(wall + film)


@given(REYNOLDS, ROUGHNESS)
def test_forward_and_inverse_undo_each_other(reynolds, roughness):
    f = friction.colebrook_white(reynolds, roughness)
    back = friction.relative_roughness(f, reynolds)
    # one rounding of f is about ln(10)/(4 sqrt f) roundings of the terms of the inverse
    terms = roughness + 3.7 * 2.51 / (reynolds * np.sqrt(f))
    assert back == pytest.approx(roughness, abs=4e-15 * terms / np.sqrt(f))


@given(REYNOLDS, ROUGHNESS, st.floats(1.001, 2.0))
def test_friction_grows_with_roughness_and_falls_with_reynolds(reynolds, roughness, factor):
    f = friction.colebrook_white(reynolds, roughness)
    assert friction.colebrook_white(reynolds, roughness * factor + 1e-8) > f
    assert friction.colebrook_white(reynolds * factor, roughness) <= f * (1 + 4e-16)


def test_sensitivities_against_50_digits(colebrook_root, digits, law_points):
    points = law_points[::5]
    f, by_reynolds, by_roughness = friction.colebrook_white_sensitivities(*points.T)
    assert np.array_equal(f, friction.colebrook_white(*points.T))
    step = digits.mpf("1e-14")

    def central(low, high, width):
        return -2 * (digits.log(high) - digits.log(low)) / width

    for k, (re, rel) in enumerate(points.tolist()):
        re_mp, rel_mp = digits.mpf(re), digits.mpf(rel)
        exact = central(
            colebrook_root(re_mp * digits.exp(-step), rel),
            colebrook_root(re_mp * digits.exp(step), rel),
            2 * step,
        )
        assert by_reynolds[k] == pytest.approx(float(exact), rel=1e-12)
        width = step * (rel_mp + 1 / re_mp)
        exact = central(colebrook_root(re, rel_mp - width), colebrook_root(re, rel_mp + width), 2 * width)
        assert by_roughness[k] == pytest.approx(float(exact), rel=1e-12)


def test_laminar_law():
    # fluids' test of the laminar law: f(128) = 0.5
    assert friction.laminar(128.0) == 0.5
    # glycerin, Cengel & Cimbala Ex 8-1 p 349: Re 489, pressure drop 1291 kPa by Hagen-Poiseuille
    rho, mu, bore, length, velocity = 1252.0, 0.3073, 0.04, 70.0, 3.0
    reynolds = rho * velocity * bore / mu
    assert reynolds == pytest.approx(489, abs=0.5)
    drop = friction.laminar(reynolds) * length / bore * rho * velocity**2 / 2
    assert drop == pytest.approx(1291e3, abs=500)
    assert drop == pytest.approx(32 * mu * length * velocity / bore**2, rel=1e-14)
    # Theodore Ex 13.5 p 139: Re 1440, Fanning 0.0111, so Darcy four times as much
    assert friction.laminar(1438.1) == pytest.approx(4 * 0.0111, abs=2e-4)


def test_regimes_and_their_laws():
    reynolds = np.array([0.0, 1.0, 1999.9, 2000.0, 3000.0, 4000.0, 4000.1, np.nan, -5.0])
    names = ["static", "laminar", "laminar", "critical", "critical", "critical", "turbulent", "", ""]
    assert friction.regime(reynolds).tolist() == names
    f = friction.friction_factor(reynolds, 1e-3)
    assert np.isnan(f).tolist() == [name not in ("laminar", "turbulent") for name in names]
    assert f[1] == 64.0
    assert f[6] == friction.colebrook_white(4000.1, 1e-3)


def test_no_value_where_there_is_no_flow_and_no_warning():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert np.isnan(friction.colebrook_white([0.0, -1.0, np.nan], 1e-3)).all()
        assert np.isnan(friction.colebrook_white_sensitivities(0.0, 0.0)).all()
        assert np.isnan(friction.laminar(0.0))
        assert np.isnan(friction.darcy_friction_factor(0.1, 0.02, 0.0, 9.81))


def test_arguments_broadcast():
    assert friction.colebrook_white(np.full((3, 1), 1e5), np.zeros(4)).shape == (3, 4)
    assert friction.friction_factor(np.full((3, 1), 1e5), np.zeros(4)).shape == (3, 4)
    assert friction.kinetic_energy_coefficient(np.full((3, 1), 1e5), np.full(4, 0.02)).shape == (3, 4)


@pytest.mark.parametrize("f", [0.008, 0.015, 0.025, 0.04])
def test_kinetic_energy_coefficient_of_a_logarithmic_profile(f):
    # u/V = 1 + sqrt(f/8) (ln(y/R) + 3/2)/0.4, cubed and averaged over the section
    star = np.sqrt(f / 8)
    alpha, _ = quad(lambda y: 2 * (1 - y) * (1 + star / 0.4 * (np.log(y) + 1.5)) ** 3, 0, 1, limit=200)
    assert friction.kinetic_energy_coefficient(1e5, f) == pytest.approx(alpha, abs=0.005)


def test_kinetic_energy_coefficient_of_the_parabola():
    alpha, _ = quad(lambda r: 2 * r * (2 * (1 - r**2)) ** 3, 0, 1)
    assert friction.kinetic_energy_coefficient(500.0, np.nan) == pytest.approx(alpha, rel=1e-12)


def test_kinetic_energy_coefficient_has_no_step():
    below, at, just, above = friction.kinetic_energy_coefficient([1999.999, 2000.0, 4000.0, 4000.001], 0.04)
    assert at == pytest.approx(below, abs=1e-6)
    assert just == pytest.approx(above, abs=1e-6)
    assert np.isnan(friction.kinetic_energy_coefficient([5000.0, np.nan], [np.nan, 0.02])).all()


def test_loss_coefficient_of_an_entrance_with_this_alpha():
    # Fox & McDonald p 357: h 85.1 ft over 10 ft of 1.5 in pipe, 0.566 ft3/s, f 0.013: K 0.50 with alpha 1.04
    bore, length, f, g = 1.5 / 12, 10.0, 0.013, 32.2
    velocity = 0.566 / (np.pi / 4 * bore**2)
    alpha = friction.kinetic_energy_coefficient(velocity * bore / 1.05e-5, f)
    k = 85.1 / friction.velocity_head(velocity, g) - alpha - f * length / bore
    assert k == pytest.approx(0.50, abs=0.01)


@pytest.mark.parametrize(
    ("slope", "diameter", "velocity", "expected", "tolerance"),
    [
        # Vennard Ex 9.1 p 281, ft and s: f 0.025
        (17.5 / 100, 0.5, 15.0, 0.025, 0.0005),
        # Daugherty & Franzini Ex 8.3 p 222: f 0.0388
        (25 / 200, 0.5, 2 / (np.pi / 16), 0.0388, 0.00005),
    ],
)
def test_friction_factor_from_a_measured_slope(slope, diameter, velocity, expected, tolerance):
    got = friction.darcy_friction_factor(slope, diameter, velocity, 32.2)
    assert got == pytest.approx(expected, abs=tolerance)


def test_friction_factor_from_a_measured_pressure_drop():
    # Munson, Young & Okiishi Ex 8.4 p 427: 2.59 kPa/m in D 0.1 m at 0.04 m3/s of water, Re 5.07e5, f 0.02001
    velocity = 0.04 / (np.pi / 4 * 0.1**2)
    f = friction.darcy_friction_factor(2590 / (998 * 9.81), 0.1, velocity, 9.81)
    assert f == pytest.approx(0.020011, abs=2e-5)
    # and its viscous sublayer 5 nu/u* = 0.02 mm
    assert 5 / friction.roughness_reynolds(1.0, velocity, f, 1.004e-6) == pytest.approx(1.97e-5, abs=5e-8)


def test_friction_velocity_of_the_roughness_reynolds_number():
    # Vennard Ex 9.1 p 281: u* 0.84 ft/s
    assert friction.roughness_reynolds(1.0, 15.0, 0.025044, 1.0) == pytest.approx(0.84, abs=0.005)


def test_entrance_length():
    # factor 0.06 against the 0.05 of Theodore Ex 13.5 p 139, where Le = 12 ft at Re 1440 in 0.1667 ft
    assert friction.entrance_length(1440.0, 0.1667) == pytest.approx(12.0 * 0.06 / 0.05, rel=0.005)
    # 4.4 Re^(1/6) is 44 bores at Re 1e6, algebra
    assert friction.entrance_length(1e6, 2.0) == pytest.approx(88.0, rel=1e-12)
    assert friction.entrance_length([0.0, 4000.0], 1.0).tolist() == [0.0, 240.0]
