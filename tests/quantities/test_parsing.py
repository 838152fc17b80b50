import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gradeline.errors import QuantityError
from gradeline.quantities import (
    DIMENSIONS,
    parse_number,
    parse_quantity,
    parse_uncertainty,
    parse_unit,
    units,
)


@pytest.mark.parametrize(
    ("text", "dimension", "value", "u"),
    [
        ("26.64 mm", "length", 0.02664, None),
        ("26.64 mm +/- 0.03 mm", "length", 0.02664, 3e-5),
        ("26.64 mm ± 0.03 mm", "length", 0.02664, 3e-5),
        ("26.64 mm ± 30 µm", "length", 0.02664, 3e-5),
        ("26.64 ± 0.03 mm", "length", 0.02664, 3e-5),
        ("(26.64 ± 0.03) mm", "length", 0.02664, 3e-5),
        ("26.64(3) mm", "length", 0.02664, 3e-5),
        ("26.64(12)mm", "length", 0.02664, 1.2e-4),
        ("26.64 mm +/- 0.1 %", "length", 0.02664, 2.664e-5),
        ("0.9 +/- 5 %", "dimensionless", 0.9, 0.045),
        ("-1.5e-2 m", "length", -0.015, None),
        ("53.4 deg", "angle", math.radians(53.4), None),
        ("868 kg/m^3", "density", 868, None),
        ("0.868 g/cm³", "density", 868, None),
        ("31 mPa s", "dynamic viscosity", 0.031, None),
        ("31 cP", "dynamic viscosity", 0.031, None),
        ("1 cSt", "kinematic viscosity", 1e-6, None),
        ("9.8137 m s-2", "acceleration", 9.8137, None),
        ("18 degC", "temperature", 291.15, None),
        ("18 °C ± 0.2 K", "temperature", 291.15, 0.2),
        ("18 ± 0.2 degC", "temperature", 291.15, 0.2),
        # the ice point and the boiling point, by the definition of the Fahrenheit scale
        ("32 degF", "temperature", 273.15, None),
        ("212 degF ± 1.8 degF", "temperature", 373.15, 1.0),
        # NIST SP 811 (2008), appendix B.8: the US gallon 3.785411784 L, the imperial 4.54609 L, psi 6.894757 kPa,
        # the conventional metre of water 9.80665 kPa, millimetre of mercury 133.3224 Pa, cfs 0.028316846592 m3/s
        ("1 US_gal", "volume", 3.785411784e-3, None),
        ("1 imp_gal/min", "flow", 4.54609e-3 / 60, None),
        ("1 cfs", "flow", 0.028316846592, None),
        ("60 cfm", "flow", 0.028316846592, None),
        ("1 mH2O", "pressure", 9806.65, None),
        ("1 mmH2O", "pressure", 9.80665, None),
        ("3.6 m3/h", "flow", 1e-3, None),
        ("60 L/min", "flow", 1e-3, None),
        # the technical atmosphere, 98.0665 kPa exactly (NIST SP 811, appendix B.8)
        ("1 kgf/cm^2", "pressure", 98066.5, None),
        ("1 ft", "length", 0.3048, None),
        ("2 in", "length", 0.0508, None),
    ],
)
def test_text_becomes_si(text, dimension, value, u):
    found = parse_quantity(text, dimension)
    assert found.value == pytest.approx(value, rel=1e-14)
    assert found.u == (None if u is None else pytest.approx(u, rel=1e-12))


def test_pressure_columns_agree_with_the_table_to_its_digits():
    # NIST SP 811 (2008), appendix B.8
    assert parse_quantity("1 psi", "pressure").value == pytest.approx(6894.757, abs=5e-4)
    assert parse_quantity("1 mmHg", "pressure").value == pytest.approx(133.3224, abs=5e-5)


def test_a_decimal_unit_adds_no_noise():
    assert parse_quantity("26.64 mm", "length").value == 0.02664
    assert parse_quantity("0.35 L/s", "flow").value == 0.00035
    assert parse_quantity("1.1 kPa", "pressure").value == 1100.0


@pytest.mark.parametrize(
    ("text", "dimension", "message"),
    [
        ("5.5", "length", "'5.5' has no unit; give a unit such as m, mm, cm, ft, in"),
        ("5.5 s", "length", "the unit 's' is a time, not a length; give a unit such as m, mm, cm, ft, in"),
        (
            "2 m",
            "pressure",
            "the unit 'm' is a length, not a pressure; give a unit such as kPa, Pa, bar, psi, mH2O, mmHg",
        ),
        ("2 mH2O", "length", "the unit 'mH2O' is a pressure, not a length; give a unit such as"),
        ("1 gal", "volume", "the unit 'gal' is ambiguous; say US_gal or imp_gal"),
        ("1 gal/min", "flow", "the unit 'gal/min' is ambiguous; say US_gal or imp_gal"),
        ("1 kgal/d", "flow", "the unit 'kgal/d' is ambiguous; say US_gal or imp_gal"),
        ("1 gpm", "flow", "the unit 'gpm' is ambiguous; say US_gal/min or imp_gal/min"),
        ("1 bbl/d", "flow", "the unit 'bbl/d' is ambiguous; say oil_bbl (42 US_gal)"),
        ("12,4x mm", "length", "'12,4x' is not a number"),
        ("12,4 mm", "length", "'12,4' has a comma; write decimals with a point"),
        ("1e999 m", "length", "'1e999' is too large for a number"),
        ("inf m", "length", "'inf' is not a finite number"),
        ("nan", "length", "'nan' is not a finite number"),
        ("1e308 km", "length", "'1e308 km' is too large for a number"),
        ("", "length", "'' is not a number"),
        ("mm", "length", "'mm' is not a number"),
        ("5 MM", "length", "the unit 'MM' is of another dimension, not a length"),
        ("18 C", "temperature", "'C' is of another dimension, not a temperature; did you mean 'degC'?"),
        ("64 F", "temperature", "did you mean 'degF'?"),
        ("0.2 C", "temperature difference", "did you mean 'degC'?"),
        ("2 l/S", "flow", "the unit 'l/S' is of another dimension, not a flow; did you mean 'L/s'?"),
        ("2 M3/H", "flow", "'M3/H' is not a unit that is known; did you mean 'm^3/h'?"),
        ("2 lpm", "flow", "'lpm' is not a unit that is known; did you mean 'L/min'?"),
        ("2 KPa", "pressure", "'KPa' is not a unit that is known; did you mean 'kPa'?"),
        (
            "2 kg/cm2",
            "pressure",
            "'kg/cm2' is of another dimension, not a pressure; did you mean 'kgf/cm^2'?",
        ),
        ("31 mPa.s", "dynamic viscosity", "did you mean 'mPa s'?"),
        ("5 MM", "length", "; did you mean 'mm'?"),
        ("1 870 mm", "length", "'1 870' has a gap; write no space between thousands, such as 1870"),
        ("-12 345.6 m", "length", "write no space between thousands, such as -12345.6"),
        ("5 mmm", "length", "'mmm' is not a unit that is known; did you mean 'mm'?"),
        ("5 m^9^9^9", "length", "'m^9^9^9' is not a unit that is known"),
        ("5 __import__('os')", "length", "is not a unit that is known"),
        ("5 10 m", "length", "'10 m' is not a unit that is known"),
        ("26.64 mm ± 0.03", "length", "has no unit after the ±; write '26.64 mm +/- 0.03 mm'"),
        ("26.64 mm ± -0.03 mm", "length", "has a negative uncertainty; state it above zero"),
        ("26.64 mm ± 1 mm ± 2 mm", "length", "has more than one ±; state one uncertainty"),
        ("26.64(3) mm ± 1 mm", "length", "states two uncertainties; state one"),
        ("5 % ± 1 %", "dimensionless", "can be read in two ways"),
        ("5 %", "angle", "the unit '%' is a pure number, not an angle; give a unit such as deg, rad"),
        ("5 deg", "dimensionless", "the unit 'deg' is an angle, not a pure number"),
        ("5 delta_degC", "temperature", "is a temperature difference, not a temperature"),
        ("5 kPa abs", "pressure", "asks for absolute pressure; give pressures against the local atmosphere"),
        ("1 " + "m" * 300, "length", "is too long for a number with a unit"),
    ],
)
def test_what_cannot_be_read_is_told(text, dimension, message):
    with pytest.raises(QuantityError) as caught:
        parse_quantity(text, dimension)
    assert message in str(caught.value)


def test_uncertainties_are_absolute_or_relative():
    assert parse_uncertainty("0.4 %", "flow") == (0.004, True)
    assert parse_uncertainty("2 L/min", "flow") == (pytest.approx(2e-3 / 60), False)
    assert parse_uncertainty("0.5 degF", "temperature") == (pytest.approx(0.5 * 5 / 9), False)
    with pytest.raises(QuantityError, match="is negative; an uncertainty is zero or above"):
        parse_uncertainty("-1 mm", "length")
    with pytest.raises(QuantityError, match="uncertainty of an uncertainty"):
        parse_uncertainty("1 mm ± 0.1 mm", "length")


def test_a_unit_converts_whole_arrays():
    celsius = parse_unit("degC", "temperature")
    assert celsius.to_si(np.array([0.0, 18.0])).tolist() == [273.15, 291.15]
    assert celsius.difference_to_si(np.array([0.5])).tolist() == [0.5]
    assert parse_unit("mm", "length").to_si(np.array([[1.0, np.nan]])).tolist()[0][0] == 0.001


def test_a_unit_gives_back_what_it_took():
    fahrenheit = parse_unit("degF", "temperature")
    assert fahrenheit.from_si(fahrenheit.to_si(64.4)) == pytest.approx(64.4, rel=1e-14)
    assert fahrenheit.difference_from_si(1.0) == pytest.approx(1.8, rel=1e-14)
    assert parse_unit("kPa", "pressure").difference_from_si(150.0) == 0.15


def test_every_unit_that_a_near_miss_names_is_taken():
    for table in (units._FURTHER, {name: spelt.values() for name, spelt in units._SPELLINGS.items()}):
        for dimension, names in table.items():
            for name in names:
                assert parse_unit(name, dimension).dimension == dimension


def test_every_unit_that_a_message_offers_is_taken():
    for name, dimension in DIMENSIONS.items():
        for unit in dimension.units:
            assert parse_unit(unit, name).dimension == name


@given(st.floats(allow_nan=False, allow_infinity=False, min_value=-1e8, max_value=1e8))
def test_a_printed_number_is_read_back(value):
    assert parse_number(repr(value)) == value
    assert parse_quantity(f"{value!r} m", "length").value == value


@given(
    st.integers(-(10**7), 10**7),
    st.integers(1, 9999),
    st.integers(0, 4),
    st.sampled_from(["{v} {n} ± {u} {n}", "{v} {n} +/- {u} {n}", "({v}±{u}) {n}"]),
    st.sampled_from([("mm", "length", 1e-3), ("L/s", "flow", 1e-3), ("kPa", "pressure", 1e3)]),
)
def test_value_and_uncertainty_are_read_back(value, u, decimals, form, unit):
    name, dimension, factor = unit
    scale = 10**decimals
    text = form.format(v=f"{value / scale:.{decimals}f}", u=f"{u / scale:.{decimals}f}", n=name)
    found = parse_quantity(text, dimension)
    assert found.value == pytest.approx(value / scale * factor, rel=1e-12, abs=1e-15)
    assert found.u == pytest.approx(u / scale * factor, rel=1e-9)


@given(st.text(max_size=40), st.sampled_from(sorted(DIMENSIONS)))
def test_any_text_is_a_quantity_or_told(text, dimension):
    try:
        found = parse_quantity(text, dimension)
    except QuantityError as error:
        assert str(error)  # noqa: PT017 (either outcome is right)
    else:
        assert math.isfinite(found.value)
        assert found.u is None or (math.isfinite(found.u) and found.u >= 0)
