"""Gauges against worked examples of textbooks and against one another.

The textbook rows rest on transcriptions of the books' examples, recomputed by hand; no printed page was opened.
"""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.hydraulics.capillarity import capillary_rise
from gradeline.hydraulics.chain import chain_pressure
from gradeline.hydraulics.differential import (
    differential_pressure_difference,
    inverted_u_tube_difference,
    u_tube_difference,
)
from gradeline.hydraulics.manometry import closed_multitube_head, piezometer_head, pressure_gauge_head
from gradeline.reduction.media import fluid_density

LEVEL = {"tap_elevation": 0.0, "tap_2_elevation": 0.0}
KPA = 1000.0
FOOT, POUND_PER_CUBIC_FOOT, PSI = 0.3048, 16.018463, 6894.757


def test_mercury_under_water():
    # Geankoplis, Transport Processes, Ex. 2.2-4: 32.7 cm of mercury (13.6) under water, 4.040e4 N/m2
    head = u_tube_difference(
        0.327, density=1000.0, line_density=1000.0, gauge_density=13600.0, gravity=9.80665, **LEVEL
    )
    assert head * 1000.0 * 9.80665 == pytest.approx(4.040e4, abs=10)
    assert head * 1000.0 * 9.80665 == pytest.approx(40405.4, abs=0.1)


def test_mercury_u_tube_between_points_of_different_height():
    # Douglas, Fluid Mechanics, Ex. 2.8: B lies 0.3 m above A, deflection 0.7 m, 9.81 m/s2: 89.467 kPa
    head = u_tube_difference(
        0.7,
        tap_elevation=0.0,
        tap_2_elevation=0.3,
        density=1000.0,
        line_density=1000.0,
        gauge_density=13600.0,
        gravity=9.81,
    )
    pressure = 1000.0 * 9.81 * (head + 0.3)
    assert pressure / KPA == pytest.approx(89.467, abs=0.0005)


@pytest.mark.parametrize(("fill", "expected"), [(0.0, 1962.0), (800.0, -392.4)])
def test_inverted_u_tube_over_water(fill, expected):
    # Douglas Ex. 2.9: p_B - p_A = rho g (b - a) + (rho - rho_m) g h with a = 0.25, b = 0.15, h = 0.3 m above water, filled
    # with air (its weight neglected) or oil of 0.8: the sign flips with the fill. A's meniscus lies a above A, that of B
    # h higher and b + h above B, so A lies b - a above B.
    lift = 0.15 - 0.25
    head = inverted_u_tube_difference(
        -0.3,
        tap_elevation=lift,
        tap_2_elevation=0.0,
        density=1000.0,
        line_density=1000.0,
        gauge_density=fill,
        gravity=9.81,
    )
    assert -1000.0 * 9.81 * (head - lift) == pytest.approx(expected, abs=0.05)


def test_open_u_tube_above_and_below_the_atmosphere():
    # Douglas Ex. 2.7: pipe fluid 800 kg/m3, mercury 13600, 9.81 m/s2; (h1, h2) = (0.5, 0.9) and (0.1, -0.2) m
    for h1, h2, expected in ((0.5, 0.9, 116.15), (0.1, -0.2, -27.47)):
        p = chain_pressure([800.0, 13600.0], [h1, 0.0], [0.0, h2], gravity=9.81)
        assert p / KPA == pytest.approx(expected, abs=0.005)


def test_chain_of_water_oil_and_mercury_to_the_air():
    # Cengel and Cimbala Ex. 3-6: water 0.1 m, oil (850) 0.2 m, mercury 0.35 m, 85.6 kPa outside: 130 kPa
    p = chain_pressure([1000.0, 850.0, 13600.0], [0.1, 0.2, 0.0], [0.0, 0.0, 0.35], gravity=9.81)
    assert 85.6 + p / KPA == pytest.approx(129.647, abs=0.0005)


def test_single_fluid_to_the_air():
    # Cengel and Cimbala Ex. 3-5: SG 0.85, 55 cm, 96 kPa outside: 100.6 kPa
    p = chain_pressure([850.0], [0.0], [0.55], gravity=9.81)
    assert 96.0 + p / KPA == pytest.approx(100.6, abs=0.05)


def test_oil_and_mercury_in_inches():
    # Munson Ex. 2.4: down 36 and 6 in of oil (0.9), up 9 in of mercury (13.6), water 62.4 lb/ft3: 3.06 psi
    inch, water = FOOT / 12, 62.4 * POUND_PER_CUBIC_FOOT
    p = chain_pressure([0.9 * water, 13.6 * water], [42 * inch, 0.0], [0.0, 9 * inch], gravity=9.80665)
    assert p / PSI == pytest.approx(3.0550, abs=1e-4)


def test_gauge_fluid_between_two_water_lines():
    # Munson Ex. 2.5: up 1 m of water (9.80 kN/m3), up 0.5 m of gauge fluid (15.6), down 1.5 m of water: 2.90 kPa
    g = 9.8
    p = chain_pressure([1000.0, 15600.0 / g, 1000.0], [0.0, 1.0, 1.5], [1.0, 1.5, 0.0], gravity=g)
    assert p / KPA == pytest.approx(2.90, abs=0.005)


def test_well_type_reads_short_by_the_ratio_of_areas():
    # algebra: the well falls by R a/A, so that leaving it out loses 1/20 of the rise upright
    given = {"density": 1000.0, "line_density": 1000.0, "gauge_density": 13600.0, "gravity": 9.81, **LEVEL}
    whole = u_tube_difference(0.2, area_ratio=1 / 20, **given)
    assert whole / u_tube_difference(0.2, **given) == pytest.approx(1.05, rel=1e-14)
    # inclined by 30 degrees: half the rise from the limb, and the fall of the well as before
    lying = u_tube_difference(0.2, area_ratio=1 / 20, inclination=np.radians(30), **given)
    assert lying / u_tube_difference(0.2, **given) == pytest.approx(0.55, rel=1e-14)


def test_capillary_rises_of_equal_bores_cancel_and_of_unequal_ones_do_not():
    given = {"density": 1000.0, "line_density": 1000.0, "gravity": 9.81, **LEVEL}
    bare = inverted_u_tube_difference(0.1, gauge_density=0.0, **given)
    equal = inverted_u_tube_difference(
        0.1, gauge_density=0.0, left_bore=0.002, right_bore=0.002, surface_tension=0.073, **given
    )
    assert equal == bare
    # Choudhary and Om Prakash Ex. 2.6: water rises 14.88 mm in a bore of 2 mm, and half of that in 4 mm
    unequal = inverted_u_tube_difference(
        0.1, gauge_density=0.0, left_bore=0.002, right_bore=0.004, surface_tension=0.073, **given
    )
    assert bare - unequal == pytest.approx(0.01488 / 2, abs=5e-6)


def test_mercury_stands_too_low_in_the_narrower_limb():
    given = {"density": 1.2, "line_density": 1.2, "gauge_density": 13600.0, "gravity": 9.81, **LEVEL}
    tube = {"surface_tension": 0.51, "contact_angle": np.radians(130)}
    # Choudhary and Om Prakash Ex. 2.6: -4.914 mm in a bore of 2 mm; the right limb is read too low by half of it
    short = u_tube_difference(0.1, left_bore=0.004, right_bore=0.002, **tube, **given)
    bare = u_tube_difference(0.1, **given)
    assert (short - bare) * 1.2 / 13600 == pytest.approx(0.004914 / 2, rel=1e-3)
    assert capillary_rise(bore=0.002, density=13600.0, gravity=9.81, **tube) == pytest.approx(
        -0.004914, abs=1e-6
    )


def test_a_transducer_between_two_taps_equals_a_gauge_at_each():
    # both sides at one height: what each gauge would show there, and their difference
    water, line, air, g, at = 998.2, 992.2, 1.2, 9.81, 3.0
    taps, pressures = (1.3, -0.4), (84e3, 71e3)
    heads = [
        pressure_gauge_head(
            p,
            tap_elevation=z,
            gauge_elevation=at,
            density=water,
            line_density=line,
            air_density=air,
            gravity=g,
        )
        for z, p in zip(taps, pressures, strict=True)
    ]
    difference = differential_pressure_difference(
        pressures[0] - pressures[1],
        tap_elevation=taps[0],
        tap_2_elevation=taps[1],
        density=water,
        line_density=line,
        gravity=g,
    )
    assert difference == pytest.approx(heads[0] - heads[1], abs=1e-12)


@pytest.mark.parametrize(
    ("bore", "density", "tension", "angle", "rise", "tolerance"),
    [
        # Choudhary and Om Prakash, ex. 2.6, 9.81 m/s²: 14.88 mm of water, -4.914 mm of mercury in 2 mm
        (2e-3, 1000.0, 0.073, 0.0, 14.88e-3, 5e-6),
        (2e-3, 13600.0, 0.510, 130.0, -4.914e-3, 5e-7),
        # Cengel and Cimbala, capillary rise of water in a glass tube of 0.6 mm, 0.073 N/m (from memory, reproduced): 5.0 cm
        (0.6e-3, 1000.0, 0.073, 0.0, 5.0e-2, 5e-4),
        # Munson, ex. 1.8, 9.789 kN/m³ and 0.0728 N/m (from memory, reproduced): 29.8 mm of bore for 1.0 mm
        (29.8e-3, 9789 / 9.81, 0.0728, 0.0, 1.0e-3, 2e-6),
    ],
)
def test_an_open_column_stands_for_less_than_its_height(bore, density, tension, angle, rise, tolerance):
    head = piezometer_head(
        rise,
        tap_elevation=0.0,
        density=density,
        column_density=density,
        air_density=0.0,
        gravity=9.81,
        bore=bore,
        surface_tension=tension,
        contact_angle=np.radians(angle),
    )
    assert head == pytest.approx(0.0, abs=tolerance)


@pytest.mark.parametrize(
    ("fluid", "pascal", "tolerance"), [("water", 248.84, 0.005), ("mercury", 3376.85, 0.005 + 3e-6 * 3376.85)]
)
def test_an_inch_of_column_at_60_fahrenheit(fluid, pascal, tolerance):
    # NIST SP 811, appendix B.8 (from memory): inch of water and of mercury (60 degF) in Pa. Our mercury lies up to 3 ppm
    # below that of the older tables
    rho = fluid_density(fluid, np.array([288.7056]))
    head = piezometer_head(
        FOOT / 12, tap_elevation=0.0, density=rho, column_density=rho, air_density=0.0, gravity=9.80665
    )
    assert rho * 9.80665 * head == pytest.approx(pascal, abs=tolerance)


def test_gas_on_a_column_in_the_tank_of_the_chain():
    # Cengel and Cimbala Ex. 3-6 again: the air of 129.647 kPa in the tank (85.6 kPa outside) stands on 0.1 m of water; oil
    # 0.2 m and mercury 0.35 m lead from its foot to the air. Both ways the water's foot has one head.
    foot = -0.35 + 0.2
    p = chain_pressure([850.0, 13600.0], [foot, -0.35], [-0.35, 0.0], gravity=9.81)
    under_gas = closed_multitube_head(
        0.1,
        zero=foot,
        tap_elevation=foot,
        density=1000.0,
        column_density=1000.0,
        gauge_density=0.0,
        air_density=0.0,
        gravity=9.81,
        gas_pressure=(129.647 - 85.6) * KPA,
    )
    assert under_gas == pytest.approx(foot + p / (1000.0 * 9.81), abs=0.5 / 9810)
    # Ex. 3-5: gas of 100.6 kPa (96 kPa outside) holds a liquid of 0.85 down by 55 cm; and Douglas Ex. 2.9: two columns under
    # one gas, 0.3 m apart
    given = {"tap_elevation": 0.0, "gauge_density": 0.0, "air_density": 0.0, "gravity": 9.81}
    held = closed_multitube_head(
        0.0, density=850.0, column_density=850.0, gas_pressure=(100.6 - 96) * KPA, **given
    )
    assert held == pytest.approx(0.55, abs=50 / (850 * 9.81))
    columns = closed_multitube_head(
        np.array([0.25, 0.55]), density=1000.0, column_density=1000.0, gas_pressure=20e3, **given
    )
    # A stands 0.1 m below B, so its column of 0.25 m stands for p_A = 1000 g (h + 0.1): p_B - p_A = 1962 Pa
    assert 1000 * 9.81 * (columns[1] - columns[0] - 0.1) == pytest.approx(1962.0, abs=0.05)


def test_a_line_forty_kelvin_cooler_is_one_per_cent():
    # IAPWS-95 densities: 988.03505 kg/m³ at 50 °C in the pipe, 999.70247 at 10 °C in the line and the column
    pipe, line = 988.03505, 999.70247
    common = {"tap_elevation": 0.0, "density": pipe, "air_density": 0.0, "gravity": 9.81}
    cool = piezometer_head(2.0, column_density=line, **common)
    assert cool / piezometer_head(2.0, column_density=pipe, **common) - 1 == pytest.approx(0.0118, abs=5e-5)
    gauge = {"gauge_elevation": 2.0, **common}
    cool = pressure_gauge_head(0.0, line_density=line, **gauge)
    assert cool / pressure_gauge_head(0.0, line_density=pipe, **gauge) - 1 == pytest.approx(0.0118, abs=5e-5)
