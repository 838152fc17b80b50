"""Printing: values rounded to two digits of their uncertainty, intervals, and the units a reader expects."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from decimal import ROUND_HALF_EVEN, Decimal
from types import MappingProxyType

__all__ = [
    "DISPLAYS",
    "MISSING",
    "SI_DISPLAY",
    "US_DISPLAY",
    "Display",
    "DisplayUnit",
    "format_change",
    "format_interval",
    "format_number",
    "format_within",
    "rounded",
    "thousands",
]

#: What stands where there is no value.
MISSING = "–"

_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_LARGEST_FIXED = 1e7
_SMALLEST_FIXED = 1e-4


def rounded(value: float | None, u: float | None = None, *, digits: int = 4) -> str:
    """Print a value rounded to two digits of its standard uncertainty, with that uncertainty.

    Parameters
    ----------
    value : float or None
        In the unit that is printed beside it. None, NaN and infinities print as an en dash.
    u : float or None
        Standard uncertainty in the same unit. None, NaN, zero and negative mean that none is known: the value is
        then printed alone to `digits` significant digits.
    digits : int
        Significant digits where there is no uncertainty, at least 1.

    Returns
    -------
    str
        Such as ``0.02231 ± 0.00042``, in powers of ten where the digits would not be readable.

    Notes
    -----
    Two digits of the uncertainty, as JCGM 100:2008, 7.2.6 advises; halves go to the even digit.

    Examples
    --------
    >>> rounded(0.022314, 0.000421)
    '0.02231 ± 0.00042'
    >>> rounded(28437.0, 1234.0)
    '28400 ± 1200'
    >>> rounded(1.4142e-7, 3.3e-9)
    '(1.414 ± 0.033)×10⁻⁷'
    >>> rounded(12.3456, None), rounded(float("nan"), 0.1)
    ('12.35', '–')
    """
    if not _finite(value):
        return MISSING
    assert value is not None
    if not _finite(u) or u is None or u <= 0:
        return format_number(value, digits)
    largest = max(abs(value), u)
    # a float has no more than some sixteen digits, however small the uncertainty
    place = max(_place(u, 2), _place(largest, 16))
    if _SMALLEST_FIXED <= largest < _LARGEST_FIXED and place >= -8:
        return f"{_fixed(value, place)} ± {_fixed(u, place)}"
    power = _place(largest, 1)
    shown, shown_u = (_fixed(number, place - power, shift=power) for number in (value, u))
    return f"({shown} ± {shown_u})×10{str(power).translate(_SUPERSCRIPT)}"


def format_number(value: float | None, digits: int = 4) -> str:
    """Print a number to `digits` significant digits; an en dash where it is missing.

    Parameters
    ----------
    value : float or None
        In the unit that is printed beside it.
    digits : int
        Significant digits, at least 1. Digits before the decimal point are always kept.

    Examples
    --------
    >>> format_number(0.0223142), format_number(45231.7, 3), format_number(1.5e-6, 2), format_number(None)
    ('0.02231', '45232', '1.5×10⁻⁶', '–')
    """
    if not _finite(value):
        return MISSING
    assert value is not None
    if value == 0:
        return "0"
    if _SMALLEST_FIXED <= abs(value) < _LARGEST_FIXED:
        return _fixed(value, min(_place(abs(value), digits), 0))
    place = _place(abs(value), digits)
    power = place + digits - 1
    return f"{_fixed(value, place - power, shift=power)}×10{str(power).translate(_SUPERSCRIPT)}"


def thousands(value: float | None, digits: int = 4) -> str:
    """Print a large number rounded to `digits` significant digits, its thousands apart.

    Parameters
    ----------
    value : float or None
        Such as a Reynolds number; missing ones print as an en dash.
    digits : int
        Significant digits, at least 1.

    Examples
    --------
    >>> thousands(304361.2), thousands(812.3), thousands(None)
    ('304\u202f400', '812', '–')
    """
    if not _finite(value):
        return MISSING
    assert value is not None
    if value == 0 or abs(value) >= _LARGEST_FIXED:
        return format_number(value, digits)
    place = max(_place(abs(value), digits), 0)
    return f"{round(value, -place):,.0f}".replace(",", "\u202f").replace("-", "−")


def format_interval(low: float | None, high: float | None) -> str:
    """Print an interval, its ends rounded to two digits of half its width.

    A missing end leaves a bound; where both are missing there is an en dash. An end so near to zero that it would
    round to it, without being it, keeps two digits of its own.

    Parameters
    ----------
    low, high : float or None
        In the unit that is printed beside them.

    Examples
    --------
    >>> format_interval(0.021472, 0.023156)
    '0.02147 to 0.02316'
    >>> format_interval(0.0, 0.00312), format_interval(None, 2.0), format_interval(float("nan"), None)
    ('0 to 0.0031', 'at most 2.000', '–')
    """
    if not _finite(low) and not _finite(high):
        return MISSING
    if not _finite(low):
        return f"at most {format_number(high)}"
    if not _finite(high):
        return f"at least {format_number(low)}"
    assert low is not None
    assert high is not None
    if low == high:
        return f"{format_number(low)} to {format_number(high)}"
    return f"{format_within(low, low, high)} to {format_within(high, low, high)}"


def format_within(value: float | None, low: float | None, high: float | None) -> str:
    """Print a value rounded as the ends of its interval are: to two digits of half the interval's width.

    Parameters
    ----------
    value : float or None
        In the unit that is printed beside it; an en dash where it is missing.
    low, high : float or None
        Its interval. Where an end is missing or both are the same the value has two significant digits.

    Examples
    --------
    >>> format_within(0.15291, 0.13412, 0.17203), format_interval(0.13412, 0.17203)
    ('0.153', '0.134 to 0.172')
    >>> format_within(0.0021, 0.0, 0.0047), format_within(0.91, None, None)
    ('0.0021', '0.91')
    """
    if not _finite(value):
        return MISSING
    assert value is not None
    if value == 0:
        return "0"
    if not _finite(low) or not _finite(high) or low == high:
        return format_number(value, 2)
    assert low is not None
    assert high is not None
    half = abs(high - low) / 2
    largest = max(abs(low), abs(high))
    if not (_SMALLEST_FIXED <= largest < _LARGEST_FIXED) or abs(value) < _SMALLEST_FIXED:
        return format_number(value, 2)
    place = max(_place(half, 2), _place(largest, 16)) if math.isfinite(half) else 0
    # a value much smaller than its interval is wide keeps two digits of its own
    return _fixed(value, min(place, _place(abs(value), 2)))


def format_change(fraction: float | None) -> str:
    """Print by how much something is larger or smaller: a percentage, or a factor where it more than doubles.

    Parameters
    ----------
    fraction : float or None
        The relative change; its sign is left to the sentence around it. A fall of more than half is told as the
        percentage, since a fall has no more than 100 of them.

    Examples
    --------
    >>> format_change(0.0352), format_change(-0.4), format_change(7.1)
    ('3.5 %', '40 %', 'a factor of 8.1')
    >>> format_change(None)
    '–'
    """
    if not _finite(fraction):
        return MISSING
    assert fraction is not None
    if fraction > 1:
        return f"a factor of {format_number(1 + fraction, 2)}"
    return f"{format_number(100 * abs(fraction), 2)} %"


def _finite(value: float | None) -> bool:
    return value is not None and math.isfinite(value)


def _place(value: float, digits: int) -> int:
    """The power of ten of the last of `digits` significant digits, after rounding."""
    exact = abs(Decimal(repr(float(value))))
    place = exact.adjusted() - digits + 1
    # 0.0997 to two digits is 0.10, not 0.100
    return place + 1 if exact.scaleb(-place).to_integral_value(ROUND_HALF_EVEN) >= 10**digits else place


def _fixed(value: float, place: int, *, shift: int = 0) -> str:
    """`value` / 10^shift in plain digits, rounded to the given power of ten."""
    exact = Decimal(repr(float(value))).scaleb(-shift)
    text = format(exact.quantize(Decimal(1).scaleb(place), rounding=ROUND_HALF_EVEN), "f")
    # a rounded -0.00 would read as if it had a sign; the minus is a true one, as in print
    if float(text) == 0:
        text = text.removeprefix("-")
    return text.replace("-", "−")


@dataclass(frozen=True)
class DisplayUnit:
    """How a quantity is shown: shown = SI × factor + offset.

    Parameters
    ----------
    label : str
        The unit as printed; empty for a pure number.
    factor : float
        Shown units for each SI unit.
    offset : float
        Added after the factor, in the shown unit (temperatures).
    """

    label: str
    factor: float = 1.0
    offset: float = 0.0


_SI_UNITS: Mapping[str, DisplayUnit] = MappingProxyType(
    {
        "chainage": DisplayUnit("m"),
        "elevation": DisplayUnit("m"),
        "head": DisplayUnit("m"),
        "small head": DisplayUnit("mm", 1e3),
        "length": DisplayUnit("m"),
        "diameter": DisplayUnit("mm", 1e3),
        "roughness": DisplayUnit("mm", 1e3),
        "flow": DisplayUnit("L/s", 1e3),
        "velocity": DisplayUnit("m/s"),
        "temperature": DisplayUnit("°C", 1.0, -273.15),
        "density": DisplayUnit("kg/m³"),
        "kinematic viscosity": DisplayUnit("mm²/s", 1e6),
        "pressure": DisplayUnit("kPa", 1e-3),
        "slope": DisplayUnit("mm/m", 1e3),
        "gravity": DisplayUnit("m/s²"),
        "viscosity": DisplayUnit("mPa s", 1e3),
        "temperature difference": DisplayUnit("K"),
        "angle": DisplayUnit("°", 180 / math.pi),
        "relative": DisplayUnit("%", 100.0),
        "number": DisplayUnit(""),
    }
)

# International foot 0.3048 m, pound 0.45359237 kg, US gallon 231 in³: exact (NIST SP 811, appendix B.8).
_FOOT = 0.3048
_POUND = 0.45359237
_US_GALLON = 231 * 0.0254**3
_POUND_FORCE = _POUND * 9.80665

_US_UNITS: Mapping[str, DisplayUnit] = MappingProxyType(
    {
        "chainage": DisplayUnit("ft", 1 / _FOOT),
        "elevation": DisplayUnit("ft", 1 / _FOOT),
        "head": DisplayUnit("ft", 1 / _FOOT),
        "small head": DisplayUnit("in", 12 / _FOOT),
        "length": DisplayUnit("ft", 1 / _FOOT),
        "diameter": DisplayUnit("in", 12 / _FOOT),
        "roughness": DisplayUnit("in", 12 / _FOOT),
        "flow": DisplayUnit("US gal/min", 60 / _US_GALLON),
        "velocity": DisplayUnit("ft/s", 1 / _FOOT),
        "temperature": DisplayUnit("°F", 1.8, -459.67),
        "density": DisplayUnit("lb/ft³", _FOOT**3 / _POUND),
        "kinematic viscosity": DisplayUnit("ft²/s", 1 / _FOOT**2),
        "pressure": DisplayUnit("psi", 0.0254**2 / _POUND_FORCE),
        "slope": DisplayUnit("ft/1000 ft", 1e3),
        "gravity": DisplayUnit("ft/s²", 1 / _FOOT),
        "viscosity": DisplayUnit("lbf s/ft²", _FOOT**2 / _POUND_FORCE),
        "temperature difference": DisplayUnit("°F", 1.8),
        "angle": DisplayUnit("°", 180 / math.pi),
        "relative": DisplayUnit("%", 100.0),
        "number": DisplayUnit(""),
    }
)


@dataclass(frozen=True)
class Display:
    """The units a reader sees, one for each quantity.

    Parameters
    ----------
    units : mapping of str to DisplayUnit
        By quantity: chainage, elevation, head, small head, length, diameter, roughness, flow, velocity,
        temperature, density, kinematic viscosity, pressure, slope, gravity, viscosity, temperature difference, angle,
        relative, number.

    Examples
    --------
    >>> SI_DISPLAY.value("flow", 0.00125), SI_DISPLAY.unit("flow")
    (1.25, 'L/s')
    >>> SI_DISPLAY.text("diameter", 0.02664, 0.00003)
    '26.640 ± 0.030'
    >>> SI_DISPLAY.head("friction slope S", "slope")
    'friction slope S (mm/m)'
    """

    units: Mapping[str, DisplayUnit] = field(default_factory=lambda: _SI_UNITS)

    def unit(self, quantity: str) -> str:
        """Return the label of the unit; KeyError for an unknown quantity."""
        return self.units[quantity].label

    def factor(self, quantity: str) -> float:
        """Return the shown units for each SI unit."""
        return self.units[quantity].factor

    def value(self, quantity: str, value: float) -> float:
        """Return a value in SI in the shown unit."""
        unit = self.units[quantity]
        return value * unit.factor + unit.offset

    def text(
        self,
        quantity: str,
        value: float | None,
        u: float | None = None,
        *,
        digits: int = 4,
        unit: bool = False,
    ) -> str:
        """Print a value in SI, with its uncertainty, in the shown unit; the unit is added where `unit` asks."""
        if not _finite(value):
            return MISSING
        assert value is not None
        u_shown = u * self.factor(quantity) if u is not None else None
        shown = rounded(self.value(quantity, value), u_shown, digits=digits)
        label = self.unit(quantity)
        if not unit or not label:
            return shown
        return f"({shown}) {label}" if " ± " in shown and "×10" not in shown else f"{shown} {label}"

    def interval(self, quantity: str, low: float | None, high: float | None, *, unit: bool = False) -> str:
        """Print an interval given in SI in the shown unit."""
        ends = [
            self.value(quantity, end) if end is not None and _finite(end) else None for end in (low, high)
        ]
        shown = format_interval(*ends)
        label = self.unit(quantity)
        return f"{shown} {label}" if unit and label and shown != MISSING else shown

    def within(
        self,
        quantity: str,
        value: float | None,
        low: float | None,
        high: float | None,
        *,
        unit: bool = False,
    ) -> str:
        """Print a value in SI in the shown unit, rounded as the ends of its interval are."""
        shown = format_within(
            *(
                self.value(quantity, one) if one is not None and _finite(one) else None
                for one in (value, low, high)
            )
        )
        label = self.unit(quantity)
        return f"{shown} {label}" if unit and label and shown != MISSING else shown

    def head(self, words: str, quantity: str) -> str:
        """Return the words of a column head or an axis with the unit in brackets."""
        label = self.unit(quantity)
        return f"{words} ({label})" if label else words


#: SI units of the size that readers use.
SI_DISPLAY = Display()

#: US customary units. Bore and roughness share one, so that ε/D can be read off.
US_DISPLAY = Display(_US_UNITS)

#: By the name that ``--units`` takes.
DISPLAYS: Mapping[str, Display] = MappingProxyType({"si": SI_DISPLAY, "us": US_DISPLAY})
