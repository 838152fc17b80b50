"""Fluid properties against verification tables and independent formulas."""

from __future__ import annotations

import chemicals.viscosity
import numpy as np
import pytest
from chemicals.interface import sigma_IAPWS

from gradeline.hydraulics import fluid

ZERO = 273.15


@pytest.mark.parametrize(
    ("temperature", "density", "expected"),
    # IAPWS R12-08 (2008) Table 4, in micropascal seconds; its other points are hotter than this function takes
    [(298.15, 998.0, 889.735100), (373.15, 1000.0, 307.883622)],
)
def test_viscosity_verification_table(temperature, density, expected):
    assert 1e6 * fluid.water_viscosity(temperature, density) == pytest.approx(expected, abs=5.1e-7)


@pytest.mark.parametrize(
    ("pressure", "expected", "tolerance"),
    # IAPWS R6-95 Table 7 at 300 K, turned round; the second from memory
    [(0.0992418352e6, 996.5560, 1e-8), (20.0022515e6, 1005.308, 1e-8)],
)
def test_density_verification_table(pressure, expected, tolerance):
    assert fluid.water_density(300.0, pressure) == pytest.approx(expected, rel=tolerance)


def test_density_at_one_atmosphere():
    # IAPWS-95 by two independent implementations, chemicals and CoolProp 8.0, which agree in all digits
    celsius = np.array([4, 5, 10, 15, 20, 25, 30, 40, 50, 60])
    expected = [
        999.97487,
        999.96663,
        999.70247,
        999.10262,
        998.20715,
        997.04764,
        995.64945,
        992.21635,
        988.03505,
        983.19582,
    ]
    assert fluid.water_density(celsius + ZERO) == pytest.approx(expected, abs=1e-5)


def test_density_in_the_water_meter_standard():
    # ISO 4064, table of densities in kg/L; the table cuts its last digit
    celsius = np.array([4, 5, 10, 15, 16, 20, 21, 22])
    printed = [0.99997, 0.99996, 0.99970, 0.99910, 0.99894, 0.99820, 0.99799, 0.99777]
    assert fluid.water_density(celsius + ZERO) / 1000 == pytest.approx(printed, abs=1e-5)


def _tanaka(t):
    return 999.974950 * (1 - (t - 3.983035) ** 2 * (t + 301.797) / (522528.9 * (t + 69.34881)))


def _kell(t):
    top = np.polyval([-280.54253e-12, 105.56302e-9, -46.170461e-6, -7.9870401e-3, 16.945176, 999.83952], t)
    return top / (1 + 16.879850e-3 * t)


def test_density_against_the_metrology_formula():
    # M. Tanaka et al., Metrologia 38 (2001) 301, coefficients from memory: within 1.2 ppm up to 40 degC
    celsius = np.linspace(0.5, 40, 12)
    assert fluid.water_density(celsius + ZERO) == pytest.approx(_tanaka(celsius), rel=1.4e-6)
    assert _tanaka(60.0) / fluid.water_density(60.0 + ZERO) - 1 == pytest.approx(-17.7e-6, abs=0.2e-6)


def test_density_against_kell():
    # G. S. Kell, J. Chem. Eng. Data 20 (1975) 97, coefficients from memory; an older temperature scale
    off = _kell(np.array([1.0, 15.0, 30.0, 60.0])) / fluid.water_density(
        np.array([1.0, 15.0, 30.0, 60.0]) + ZERO
    )
    assert ((off[:3] - 1 > -3.9e-6) & (off[:3] - 1 < -1.9e-6)).all()
    assert off[3] - 1 == pytest.approx(3.1e-6, abs=0.3e-6)


def test_reference_viscosity_of_water():
    # ISO/TR 3666 (1998), from memory: 1.0016 mPa s and 1.0034 mm2/s at 20 degC
    density, viscosity = fluid.water_properties(20.0 + ZERO)
    assert 1e3 * viscosity == pytest.approx(1.0016, abs=5e-5)
    assert 1e6 * viscosity / density == pytest.approx(1.0034, abs=5e-5)


@pytest.mark.parametrize(
    ("celsius", "viscosity", "tolerance"),
    [
        # Cengel & Cimbala, property table as used in Ex 8-2, 8-3, 8-8
        (15, 1.138e-3, 1e-3),
        (10, 1.307e-3, 1e-3),
        (5, 1.519e-3, 1e-3),
        # Munson, Young & Okiishi Ex 8.1: 2.73e-5 and 0.974e-5 lbf s/ft2 at 50 and 140 degF
        (10, 2.73e-5 * 47.880259, 2e-3),
        (60, 0.974e-5 * 47.880259, 2e-3),
    ],
)
def test_viscosity_in_textbook_tables(celsius, viscosity, tolerance):
    assert fluid.water_properties(celsius + ZERO)[1] == pytest.approx(viscosity, rel=tolerance)


def test_density_in_us_units():
    # Crane TP-410 ex 7.9: 62.364 lbm/ft3 at 60 degF
    assert fluid.water_density((60 - 32) / 1.8 + ZERO) / 16.018463 == pytest.approx(62.364, rel=2e-3)


def test_compressibility():
    # handbook value 4.59e-10 1/Pa at 20 degC, from memory
    low, high = fluid.water_density(20 + ZERO, [1e5, 2e5])
    assert np.log(high / low) / 1e5 == pytest.approx(4.59e-10, abs=1e-12)


def test_boiling_water_is_the_liquid():
    # 958.35 kg/m3 at 100 degC, saturated liquid, in any steam table; boiling point 99.974 degC at 1 atm
    assert fluid.water_density(373.15) == pytest.approx(958.35, abs=0.01)
    assert fluid.water_density(373.15) < fluid.water_density(373.12) < fluid.water_density(373.0)


def test_each_temperature_is_evaluated_once(monkeypatch):
    calls = []

    def counted(temperature, density):
        calls.append(temperature)
        return temperature * density

    monkeypatch.setattr(chemicals.viscosity, "mu_IAPWS", counted)
    temperature = np.tile([290.0, 300.0, np.nan], (50, 1))
    got = fluid.water_viscosity(temperature, 998.0)
    assert sorted(calls) == [290.0, 300.0]
    assert got.shape == (50, 3)
    assert (got[:, :2] == np.array([290.0, 300.0]) * 998.0).all()
    assert np.isnan(got[:, 2]).all()


def test_unread_temperatures_pass_through():
    density, viscosity = fluid.water_properties([np.nan, 300.0])
    assert np.isnan([density[0], viscosity[0]]).all()
    assert np.isfinite([density[1], viscosity[1]]).all()
    assert np.isnan(fluid.water_density(np.nan))
    assert np.isnan(fluid.mercury_density(np.nan))
    assert np.isnan(fluid.air_density(np.nan, 1e5))


@pytest.mark.parametrize("temperature", [273.15, 453.15, 20.0])
def test_water_out_of_range_names_range_and_value(temperature):
    with pytest.raises(ValueError, match=rf"water lies outside 273\.15 K .* 373\.15 K.*: {temperature:.6g}"):
        fluid.water_density([300.0, temperature])
    with pytest.raises(ValueError, match="temperature of water"):
        fluid.water_viscosity(temperature, 998.0)
    with pytest.raises(ValueError, match="temperature of water"):
        fluid.water_surface_tension(temperature)


def test_other_arguments_out_of_range():
    with pytest.raises(ValueError, match=r"pressure of water lies outside 100 to 1e8 Pa: 1.01"):
        fluid.water_density(300.0, 1.01)
    with pytest.raises(ValueError, match=r"density of liquid water lies outside 900 to 1100 kg/m3: 0.998"):
        fluid.water_viscosity(300.0, 0.998)
    with pytest.raises(ValueError, match=r"temperature of mercury lies outside .*: 20"):
        fluid.mercury_density(20.0)
    with pytest.raises(ValueError, match=r"temperature of air lies outside .*: 20"):
        fluid.air_density(20.0, 1e5)
    with pytest.raises(ValueError, match="relative humidity lies outside 0 to 1: 50"):
        fluid.air_density(293.15, 1e5, 50.0)
    with pytest.raises(ValueError, match="pressure of air"):
        fluid.air_density(293.15, 0.0)
    with pytest.raises(ValueError, match="altitude lies outside -2000 to 11000 m: 12000"):
        fluid.standard_atmosphere_pressure(12000.0)


@pytest.mark.parametrize(
    ("celsius", "tension"),
    # IAPWS R1-76 table, in mN/m; from memory
    [(10, 74.22), (20, 72.74), (30, 71.19), (50, 67.94), (100, 58.91)],
)
def test_surface_tension_table(celsius, tension):
    assert 1e3 * fluid.water_surface_tension(celsius + ZERO) == pytest.approx(tension, abs=0.0051)


def test_surface_tension_against_another_implementation():
    assert fluid.water_surface_tension(300.0) == pytest.approx(sigma_IAPWS(300.0), rel=1e-12)


@pytest.mark.parametrize(
    ("celsius", "millilitres"),
    # CRC Handbook, specific volume of mercury in old millilitres (1 ml = 1.000028 cm3) per gram
    [(0, 0.073554), (10, 0.0736877), (20, 0.0738215), (40, 0.0740891)],
)
def test_mercury_table(celsius, millilitres):
    density = 1e3 / (millilitres * 1.000028)
    half_a_digit = 5e-7 if celsius == 0 else 5e-8
    # the polynomial itself lies up to 2.8 ppm below the table
    assert fluid.mercury_density(celsius + ZERO) == pytest.approx(
        density, rel=half_a_digit / millilitres + 3e-6
    )


def test_mercury_elsewhere():
    # CRC Handbook, 25 degC: 13533.6; metrology value at 20 degC 13545.85 (from memory)
    assert fluid.mercury_density(25 + ZERO) == pytest.approx(13533.6, abs=0.05)
    assert fluid.mercury_density(20 + ZERO) == pytest.approx(13545.85, abs=0.03)
    # the metre of mercury, 13595.1 kg/m3 at 0 degC by convention
    assert fluid.mercury_density(ZERO) == pytest.approx(13595.1, abs=0.05)


MMHG = 133.322387415


@pytest.mark.parametrize(
    ("celsius", "mmhg", "humidity", "density", "tolerance"),
    [
        # "Mass Metrology", appendix p 205, CIPM-2007
        (10.0, 730.0, 0.40, 1.19569, 1e-5),
        # Jones 1978, NIST: CIPM-2007 lies 5e-5 higher for its argon
        (22.3, 748.1, 0.37, 1.17194, 1e-4),
        # NIST IR 6969, SOP 2, exponential approximation
        (25.0, 760.0, 0.40, 1.1787, 5e-5),
    ],
)
def test_air_density(celsius, mmhg, humidity, density, tolerance):
    assert fluid.air_density(celsius + ZERO, mmhg * MMHG, humidity) == pytest.approx(density, abs=tolerance)


def test_moist_air_is_lighter_and_carbon_dioxide_heavier():
    dry, moist = fluid.air_density(293.15, 101325.0, [0.0, 1.0])
    assert moist < dry
    # 1 mole of CO2 for one of O2 adds the carbon, 12.011 of 28.965 g/mol
    assert fluid.air_density(293.15, 101325.0, 0.0, 1.4e-3) / dry - 1 == pytest.approx(
        1e-3 * 12.011 / 28.965, rel=1e-3
    )


@pytest.mark.parametrize(
    ("altitude", "pressure"),
    # ISO 2533 / ICAO Doc 7488 tables, geopotential altitude; from memory
    [(0, 101325.0), (1000, 89874.6), (5000, 54019.9), (11000, 22632.1)],
)
def test_standard_atmosphere(altitude, pressure):
    assert fluid.standard_atmosphere_pressure(altitude) == pytest.approx(pressure, abs=0.06)
