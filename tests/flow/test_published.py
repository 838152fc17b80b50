"""The flow methods against worked examples and against the standards' equations written out once more."""

import math

import numpy as np
import pytest
from fluids.open_flow import Q_weir_V_Shen
from hypothesis import assume, given
from hypothesis import strategies as st

from gradeline.errors import ReductionError
from gradeline.hydraulics import differential_meters, flowmeters, weirs
from gradeline.hydraulics.fluid import air_density, water_density

CORNER, FLANGE, RADIUS = (f"orifice plate, {taps}" for taps in ("corner", "flange", "D and D/2"))


def reader_harris_gallagher(D, d, re, taps):
    """ISO 5167-2:2003, equation (4), from memory; lengths in m."""
    beta = d / D
    l1, l2 = {CORNER: (0, 0), FLANGE: (0.0254 / D, 0.0254 / D), RADIUS: (1, 0.47)}[taps]
    m2 = 2 * l2 / (1 - beta)
    a = (19000 * beta / re) ** 0.8
    c = 0.5961 + 0.0261 * beta**2 - 0.216 * beta**8 + 0.000521 * (1e6 * beta / re) ** 0.7
    c += (0.0188 + 0.0063 * a) * beta**3.5 * (1e6 / re) ** 0.3
    c += (
        (0.043 + 0.080 * math.exp(-10 * l1) - 0.123 * math.exp(-7 * l1))
        * (1 - 0.11 * a)
        * beta**4
        / (1 - beta**4)
    )
    c -= 0.031 * (m2 - 0.8 * m2**1.1) * beta**1.3
    if D < 0.07112:
        c += 0.011 * (0.75 - beta) * (2.8 - D / 0.0254)
    return c


@pytest.mark.parametrize("taps", [CORNER, FLANGE, RADIUS])
@pytest.mark.parametrize("d", [0.012, 0.03, 0.05])
@pytest.mark.parametrize("D", [0.0665, 0.1])
@pytest.mark.parametrize("re", [8e3, 1.2e5, 3e6])
def test_orifice_coefficient_is_that_of_the_standard(taps, d, D, re):
    assert differential_meters.discharge_coefficient(taps, D, d, re) == pytest.approx(
        reader_harris_gallagher(D, d, re, taps), rel=1e-12
    )


@pytest.mark.parametrize(
    ("taps", "coefficient"),
    [(CORNER, 0.6000085121444), (RADIUS, 0.5988219225154), (FLANGE, 0.5990042535667)],
)
def test_orifice_coefficient_of_the_fluids_library(taps, coefficient):
    # Test values of the fluids library (Reader-Harris/Gallagher): D 73.91 mm, d 22.2 mm
    re = 4 * 0.124431876 / (math.pi * 0.07391 * 1.85861753095e-5)
    assert differential_meters.discharge_coefficient(taps, 0.07391, 0.0222, re) == pytest.approx(
        coefficient, rel=1e-9
    )


def test_expansibility_of_orifice_and_nozzle():
    # ISO 5167-2 (a value printed there, by the fluids library's own test) and ISO/TR 11583, worked example 1
    orifice = differential_meters.expansibility(CORNER, 0.0739, 0.0222, 1e5, 1e3, 1.4)
    nozzle = differential_meters.expansibility("venturi, machined", 0.1, 0.06, 60e5, 0.5e5, 1.3)
    assert orifice == pytest.approx(0.9974739057, abs=5e-5)
    assert nozzle == pytest.approx(0.994236, abs=5e-7)


@pytest.mark.parametrize("d", [0.07, 0.12, 0.15])
@pytest.mark.parametrize("re", [2e4, 2e5, 2e6])
def test_nozzle_coefficients_are_those_of_the_standard(re, d):
    # ISO 5167-3:2003, equations of the ISA 1932 and the long radius nozzle and of the venturi nozzle, from memory
    D = 0.2
    beta = d / D
    isa = 0.99 - 0.2262 * beta**4.1 - (0.00175 * beta**2 - 0.0033 * beta**4.15) * (1e6 / re) ** 1.15
    radius = 0.9965 - 0.00653 * math.sqrt(beta) * math.sqrt(1e6 / re)
    venturi = 0.9858 - 0.196 * beta**4.5
    for shape, expected in (("ISA 1932", isa), ("long radius", radius), ("venturi", venturi)):
        assert differential_meters.discharge_coefficient(f"nozzle, {shape}", D, d, re) == pytest.approx(
            expected, rel=1e-12
        )


def test_water_through_an_orifice_of_80_mm_pipe():
    # Crane TP-410M example 7.29: 17 kPa, d 50 mm in 73.66 mm, 15 °C: 478 L/min with C from a chart
    flow = differential_meters.differential_meter_flow(17e3, 999.1, 1.138e-6, 0.07366, 0.05, RADIUS)
    assert flow * 60e3 == pytest.approx(478, rel=0.01)


def test_water_through_an_orifice_of_4_inch_pipe():
    # Crane TP-410 example 7.23: d 2 in, 4.4 in mercury under water, 62.364 lb/ft³, 1.1 cP: 106 US gal/min
    rho = 62.364 * 16.018463
    pressure = (13570 - rho) * 9.80665 * 4.4 * 0.0254
    flow = differential_meters.differential_meter_flow(pressure, rho, 1.1e-3 / rho, 0.10226, 0.0508, RADIUS)
    assert flow / 231 / 0.0254**3 * 60 == pytest.approx(106, rel=0.005)


def test_methanol_through_an_orifice():
    # Cengel and Cimbala, example 8-10: mercury manometer 11 cm, D 4 cm, d 3 cm, C 0.61: 3.09e-3 m³/s
    pressure = (13600 - 788.4) * 9.81 * 0.11
    flow = differential_meters.differential_meter_flow(
        pressure, 788.4, 7.4e-7, 0.04, 0.03, CORNER, coefficient=0.61
    )
    assert flow == pytest.approx(3.09e-3, abs=5e-6)


def test_sulphuric_acid_through_a_small_orifice():
    # Coulson and Richardson 1, example 6.2: 10 mm in a wide pipe, mercury 0.1 m over acid 1300 kg/m³, C 0.61: 0.268 kg/s
    pressure = (13550 - 1300) * 9.81 * 0.1
    flow = differential_meters.differential_meter_flow(
        pressure, 1300, 1e-6, 10.0, 0.01, CORNER, coefficient=0.61
    )
    assert pressure == pytest.approx(12e3, abs=0.5e2)
    assert flow * 1300 == pytest.approx(0.268, abs=5e-4)


def test_venturi_coefficient_found_from_a_flow():
    # Coulson and Richardson 1, example 6.3: 150/50 mm, 121 mm of water, 2.91 kg/s: C = 0.96
    ideal = differential_meters.differential_meter_flow(
        1000 * 9.8 * 0.121, 1000, 1e-6, 0.15, 0.05, "venturi, machined", coefficient=1.0
    )
    assert 2.91e-3 / ideal == pytest.approx(0.96, abs=0.005)


def test_sharp_weir_of_full_width():
    # Cengel and Cimbala, example 13-11: H 0.9 m, P 0.6 m, b 5 m by a Rehbock form: 9.24 m³/s
    assert weirs.rehbock_flow(0.9, 0.6, 5.0, 9.81) == pytest.approx(9.24, rel=0.01)
    # Ackers: 0.564 (1 + 0.150 h/P) b √g (h + 0.001)^1.5
    ackers = 0.564 * (1 + 0.150 * 0.3 / 0.4) * 2 * math.sqrt(9.80665) * 0.301**1.5
    assert weirs.rehbock_flow(0.3, 0.4, 2.0) == pytest.approx(ackers, rel=0.012)
    assert weirs.kindsvater_carter_flow(0.3, 0.4, 2.0, 2.0) == pytest.approx(ackers, rel=0.012)


def test_full_width_weirs_of_the_fluids_library():
    # Its test values for h 0.3, P 0.4, b 2 m (checked against each other to 1.2 %)
    assert weirs.rehbock_flow(0.3, 0.4, 2.0) == pytest.approx(0.6486856, rel=1e-3)
    assert weirs.kindsvater_carter_flow(0.3, 0.4, 2.0, 2.0) == pytest.approx(0.6415603, rel=1e-4)


def test_contracted_weir_against_francis():
    # Francis: Q = 1.84 (b − 0.2 h) h^1.5 for two end contractions and a far bed (common practice)
    flow = weirs.kindsvater_carter_flow(0.15, 0.6, 0.6, 2.0)
    assert flow == pytest.approx(1.84 * (0.6 - 0.2 * 0.15) * 0.15**1.5, rel=0.02)


@pytest.mark.parametrize("head", [0.1, 0.2, 0.3])
def test_right_angled_notch(head):
    # Q = 1.38 h^2.5 (common practice)
    assert weirs.kindsvater_shen_flow(head, math.pi / 2) == pytest.approx(1.38 * head**2.5, rel=0.012)


def test_right_angled_notch_of_the_standard():
    # ISO 1438, Kindsvater and Shen: C_e 0.578, k_h 0.85 mm at 90 deg
    expected = 8 / 15 * 0.578 * math.sqrt(2 * 9.80665) * (0.2 + 0.00085) ** 2.5
    assert weirs.kindsvater_shen_flow(0.2, math.pi / 2) == pytest.approx(expected, rel=0.003)


@pytest.mark.parametrize(
    ("angle", "coefficient", "added"), [(28.07, 0.587, 2.2e-3), (53.13, 0.577, 1.2e-3), (90, 0.578, 0.85e-3)]
)
def test_notch_coefficients_by_angle(angle, coefficient, added):
    # C_e and k_h read off the Kindsvater-Shen curves (ISO 1438), from memory: quarter 90, half 90 and 90 deg notches
    flow = weirs.kindsvater_shen_flow(0.3, math.radians(angle))
    ideal = 8 / 15 * math.sqrt(2 * 9.80665) * math.tan(math.radians(angle) / 2) * (0.3 + added) ** 2.5
    assert flow / ideal == pytest.approx(coefficient, abs=0.003)


@pytest.mark.parametrize("angle", [25, 35, 45, 53.13, 60, 75, 90, 100])
def test_notches_of_other_angles_by_curves_of_the_fluids_library(angle):
    # Its Q_weir_V_Shen lacks the factor 8/15 √2 = 0.754247, but carries Shen's curves of C_e and k_h (USGS Water Supply
    # Paper 1617-B, 1981) as tables read off on its own, where ours are polynomials: to within 0.4 %, most at the least head.
    for head in (0.06, 0.12, 0.2, 0.38):
        other = 8 / 15 * math.sqrt(2) * Q_weir_V_Shen(head, angle)
        assert weirs.kindsvater_shen_flow(head, math.radians(angle)) == pytest.approx(other, rel=4.1e-3)


@pytest.mark.parametrize(("beta", "slow", "more"), [(0.45, 5e3, 0.0), (0.6, 9.9e3, 0.5), (0.6, 1.01e4, 0.0)])
def test_a_plate_at_a_small_reynolds_number_is_less_certain(beta, slow, more):
    # ISO 5167-2:2003, 5.3.3.1, from memory: 0.5 % for 0.2 ≤ β ≤ 0.6, and 0.5 % more for β > 0.5 and Re_D < 10 000 (95 %)
    u = differential_meters.discharge_coefficient_u(CORNER, 0.1, beta * 0.1, [slow, 1e6])
    assert 200 * u == pytest.approx([0.5 + more, 0.5])


def test_a_small_pipe_and_a_small_reynolds_number_add_up():
    # ISO 5167-2:2003, 5.3.3.1, from memory: 0.9 (0.75 − β)(2.8 − D/25.4 mm) % added arithmetically below 71.12 mm
    u = differential_meters.discharge_coefficient_u(FLANGE, 0.0508, 0.55 * 0.0508, 8e3)
    assert 200 * u == pytest.approx(0.5 + 0.9 * 0.2 * 0.8 + 0.5)


def test_buoyancy_factor():
    # ISO 4185 and the same in NIST SOP 2, evaluated: water 998.2, weights 8000, air 1.2 kg/m³; and its linear form
    assert flowmeters.buoyancy_factor(998.2) == pytest.approx(1.0010534, abs=1e-7)
    assert flowmeters.buoyancy_factor(998.2) - 1 == pytest.approx(1.2 * (1 / 998.2 - 1 / 8000), abs=3e-6)


@pytest.mark.parametrize(
    ("celsius", "hectopascal", "z"),
    [
        # µL/mg: an accredited pipette certificate to ISO 8655-6 at 18.75 °C and 986 hPa
        (18.75, 986, 1.00258),
        # ISO 8655-6:2002, table A.1, 101.3 kPa (from memory)
        (15, 1013, 1.0020),
        (20, 1013, 1.0029),
        (25, 1013, 1.0040),
        (30, 1013, 1.0054),
    ],
)
def test_mass_to_volume_of_weighed_water(celsius, hectopascal, z):
    kelvin = celsius + 273.15
    flow = flowmeters.weighed_flow(1e-3, 1.0, water_density(kelvin), air_density(kelvin, 100.0 * hectopascal))
    assert flow * 1e6 == pytest.approx(z, abs=1e-4)


GALLON = 231 * 0.0254**3


@pytest.mark.parametrize(("inches", "coefficient", "psi"), [(2.5, 0.9, 25), (2.5, 0.8, 9), (4.5, 0.9, 49)])
def test_hydrant_outlet_against_the_trade_rule(inches, coefficient, psi):
    # Q [US gal/min] = 29.84 c d² √p, d in inch, p in psi (NFPA 291, from memory)
    flow = flowmeters.pitot_flow(psi * 6894.757, 999.0, inches * 0.0254, coefficient)
    rule = 29.84 * coefficient * inches**2 * math.sqrt(psi)
    assert flow / GALLON * 60 == pytest.approx(rule, rel=1e-3)


@pytest.mark.parametrize(
    ("volume", "time", "flow"),
    [
        # 1 US gal is 231 in³ (NIST Handbook 44): 10 US gal in a minute are 0.630902 L/s
        (10 * GALLON, 60.0, 0.630902e-3),
        # 1 ft³/s is 28.316847 L/s (NIST SP 811, appendix B.8)
        (0.3048**3, 1.0, 28.316847e-3),
        # 1 imp gal is 4.54609 L (Weights and Measures Act 1985): 100 in 5 min are 1.515363 L/s
        (100 * 4.54609e-3, 300.0, 1.515363e-3),
    ],
)
def test_a_volumetric_tank_by_the_units_of_the_trade(volume, time, flow):
    assert flowmeters.volumetric_flow(volume, time) == pytest.approx(flow, rel=1e-6)


@pytest.mark.parametrize(
    ("table_reading", "table_flow", "reading", "flow"),
    [
        # A turbine meter of 1000 pulses a litre: 500 Hz are 0.5 L/s
        ([100.0, 1000.0], [1e-4, 1e-3], 500.0, 0.5e-3),
        # A current loop, 4 to 20 mA for 0 to 40 m³/h: 12 mA are 20 m³/h
        ([4.0, 20.0], [0.0, 40 / 3600], 12.0, 20 / 3600),
        # A notch of Q = 1.38 h^2.5 tabled each 10 mm: the chord lies above the curve by h²/8 Q'' at most
        ([0.10, 0.11, 0.12], [1.38 * h**2.5 for h in (0.10, 0.11, 0.12)], 0.115, 1.38 * 0.115**2.5),
    ],
)
def test_a_calibrated_meter_by_plain_arithmetic(table_reading, table_flow, reading, flow):
    chord = 0.01**2 / 8 * 1.38 * 2.5 * 1.5 * math.sqrt(0.12) if reading == 0.115 else 1e-15
    found = float(flowmeters.interpolated_flow(reading, table_reading, table_flow))
    assert 0 <= found - flow + 1e-15 <= chord + 2e-15


def test_calibrated_meter_keeps_its_points_and_goes_on_straight():
    reading, flow = [10.0, 20.0, 40.0], [1e-3, 2.2e-3, 4e-3]
    assert flowmeters.interpolated_flow(reading, reading, flow) == pytest.approx(flow)
    assert flowmeters.interpolated_flow(50.0, reading, flow) == pytest.approx(4.9e-3)
    with pytest.raises(ReductionError, match="rise together"):
        flowmeters.interpolated_flow(15.0, reading, flow[::-1])


def test_limits_are_told_with_the_value_and_the_limit():
    assert differential_meters.meter_limits(CORNER, 0.1, 0.05, [1e4]) == []
    found = differential_meters.meter_limits("venturi, machined", 0.04, 0.032, [1e5, 2e6])
    assert found == [
        "D = 40 mm, where the standard holds from 50 to 250 mm",
        "β = 0.8, where the standard holds from 0.4 to 0.75",
        "Re = 100\u202f000, where the standard holds from 200\u202f000",
        "Re = 2\u202f000\u202f000, where the standard holds to 1\u202f000\u202f000",
    ]
    assert weirs.v_notch_limits([0.3], math.pi / 2, 0.3, 1.0) == [
        "p = 0.3 m, where the equation holds from 0.45 m",
        "h/p = 1, where the equation holds up to 0.4",
        "h/B = 0.3, where the equation holds up to 0.2",
    ]


def test_no_throat_as_wide_as_its_pipe():
    with pytest.raises(ReductionError, match="β = 1 must be below 1"):
        differential_meters.differential_meter_flow(1e3, 998.0, 1e-6, 0.05, 0.05, CORNER)


@given(
    pressure=st.floats(50.0, 5e4),
    beta=st.floats(0.2, 0.75),
    taps=st.sampled_from([CORNER, FLANGE, RADIUS]),
)
def test_the_iterated_flow_satisfies_its_own_coefficient(pressure, beta, taps):
    D, rho, nu = 0.1, 998.0, 1e-6
    flow = differential_meters.differential_meter_flow(pressure, rho, nu, D, beta * D, taps)
    re = float(4 * flow / (math.pi * D * nu))
    assume(re > 5000)  # below, the library goes on by terms that the standard does not have
    c = reader_harris_gallagher(D, beta * D, re, taps)
    ideal = math.pi / 4 * (beta * D) ** 2 * math.sqrt(2 * pressure / rho / (1 - beta**4))
    assert float(flow) == pytest.approx(c * ideal, rel=1e-10)


@given(head=st.floats(0.03, 0.7), part=st.floats(0.1, 1.0))
def test_weirs_rise_with_head_and_width(head, part):
    heads = np.array([head, 1.01 * head])
    low, high = weirs.kindsvater_carter_flow(heads, 0.5, part, 1.0)
    assert high > low > 0
    assert weirs.kindsvater_carter_flow(0.0, 0.5, part, 1.0) == 0
