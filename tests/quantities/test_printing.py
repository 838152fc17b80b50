"""Rounding to two digits of the uncertainty, intervals, and units for readers."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from uncertainties import ufloat

from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    Display,
    DisplayUnit,
    format_change,
    format_interval,
    format_number,
    format_within,
    rounded,
    thousands,
)

NAN = float("nan")


@pytest.mark.parametrize(
    ("value", "u", "text"),
    [
        # JCGM 100:2008, 7.2.2: m_S = 100.02147 g with u_c = 0.35 mg
        (100.02147, 0.00035, "100.02147 ± 0.00035"),
        # JCGM 100:2008, 7.2.6: 10.05762 ohm with 27 milliohm is to be rounded to 10.058 ohm
        (10.05762, 0.027, "10.058 ± 0.027"),
        (0.022314, 0.000421, "0.02231 ± 0.00042"),
        (0.0, 0.13, "0.00 ± 0.13"),
        (-0.0004, 0.13, "0.00 ± 0.13"),
        (-1.236, 0.13, "−1.24 ± 0.13"),
        (28437.0, 1234.0, "28400 ± 1200"),
        (5.0, 0.0996, "5.00 ± 0.10"),
        (7.0, 99.7, "10 ± 100"),
        (1.4142e-7, 3.3e-9, "(1.414 ± 0.033)×10⁻⁷"),
        (6.1234e9, 2.2e7, "(6.123 ± 0.022)×10⁹"),
    ],
)
def test_value_and_uncertainty_end_at_the_same_digit(value: float, u: float, text: str) -> None:
    assert rounded(value, u) == text


@pytest.mark.parametrize("value", [None, NAN, math.inf, -math.inf])
def test_a_missing_value_is_a_dash_whatever_its_uncertainty(value: float | None) -> None:
    assert rounded(value, 0.1) == rounded(value, None) == format_number(value) == thousands(value) == MISSING


@pytest.mark.parametrize("u", [None, NAN, 0.0, -1.0, math.inf])
def test_an_unknown_uncertainty_is_not_printed(u: float | None) -> None:
    assert rounded(12.3456, u) == "12.35"


@given(
    st.floats(1e-3, 1e5),
    st.floats(1e-4, 0.5),
)
def test_digits_agree_with_an_independent_library(value: float, relative: float) -> None:
    # the `uncertainties` package rounds by itself, to two digits of the uncertainty with the format .2u
    u = value * relative
    ours = rounded(value, u)
    theirs = f"{ufloat(value, u):.2uf}".replace("+/-", " ± ")
    if "." in theirs:
        our_value, our_u = (float(part) for part in ours.split(" ± "))
        their_value, their_u = (float(part) for part in theirs.split(" ± "))
        step = 10.0 ** -len(theirs.rsplit(".", 1)[1])
        # the two may fall to either side where the value lies half-way
        assert our_value == pytest.approx(their_value, abs=1.01 * step)
        assert our_u == pytest.approx(their_u, abs=1.01 * step)


@given(st.floats(allow_nan=True, allow_infinity=True), st.floats(allow_nan=True, allow_infinity=True))
def test_no_input_prints_nan_or_infinity(value: float, u: float) -> None:
    for text in (rounded(value, u), format_interval(value, u), format_number(value), thousands(value)):
        assert text
        assert "nan" not in text.lower()
        assert "inf" not in text.lower()


@pytest.mark.parametrize(
    ("low", "high", "text"),
    [
        (0.021472, 0.023156, "0.02147 to 0.02316"),
        (0.0, 0.00312, "0 to 0.0031"),
        (-1.5, 2.5, "−1.5 to 2.5"),
        (0.00004, 0.3, "4.0×10⁻⁵ to 0.30"),
        (None, 2.0, "at most 2.000"),
        (2.0, NAN, "at least 2.000"),
        (None, None, MISSING),
        (3.0, 3.0, "3.000 to 3.000"),
    ],
)
def test_intervals(low: float | None, high: float | None, text: str) -> None:
    assert format_interval(low, high) == text


@pytest.mark.parametrize(
    ("value", "low", "high", "text"),
    [
        # half the width 0.019: two digits of it are thousandths
        (0.15291, 0.13412, 0.17203, "0.153"),
        (1047.399, 1012.0, 1082.8, "1047"),
        (0.0, 0.0, 0.0047, "0"),
        (0.00012, 0.0, 0.0047, "0.00012"),
        (0.91, None, 1.1, "0.91"),
        (None, 0.1, 0.2, MISSING),
    ],
)
def test_a_value_has_the_digits_of_its_interval(
    value: float | None, low: float | None, high: float | None, text: str
) -> None:
    assert format_within(value, low, high) == text


def test_a_change_beyond_double_is_a_factor() -> None:
    assert format_change(0.99) == "99 %"
    assert format_change(1.01) == "a factor of 2.0"
    assert format_change(-0.9) == "90 %"
    assert format_change(NAN) == MISSING


def test_units_for_readers() -> None:
    # 20 degC is 273.15 K above absolute zero by definition of the Celsius scale (SI brochure, 9th ed., 2.3.1)
    assert SI_DISPLAY.value("temperature", 293.15) == pytest.approx(20.0)
    assert SI_DISPLAY.text("flow", 0.00125, 0.00001, unit=True) == "(1.250 ± 0.010) L/s"
    assert SI_DISPLAY.text("diameter", 0.02664, unit=True) == "26.64 mm"
    assert SI_DISPLAY.text("pressure", None, unit=True) == MISSING
    assert SI_DISPLAY.interval("roughness", 1e-6, 3e-6, unit=True) == "0.0010 to 0.0030 mm"
    assert SI_DISPLAY.interval("roughness", NAN, None, unit=True) == MISSING
    assert SI_DISPLAY.head("Re", "number") == "Re"


def test_another_system_of_units_is_another_table() -> None:
    # 1 ft = 0.3048 m exactly (international yard and pound agreement, 1959)
    feet = Display({"head": DisplayUnit("ft", 1 / 0.3048)})
    assert feet.text("head", 3.048, 0.03048, unit=True) == "(10.00 ± 0.10) ft"
    with pytest.raises(KeyError):
        feet.unit("flow")


def test_thousands_are_set_apart_by_a_narrow_space() -> None:
    assert thousands(1234567, 3) == "1\u202f230\u202f000"
    assert thousands(0) == "0"
    assert thousands(812.3) == "812"
