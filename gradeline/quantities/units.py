"""Dimensions and units: a unit's text to its conversion into SI.

Units are read by `pint`. With its registry it takes a third of a second to import, so the commonest units are written
out here (a test holds them against it) and it is imported when the first other one is read.
"""

from __future__ import annotations

import difflib
import functools
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, TypeVar, cast, overload

from gradeline.errors import QuantityError

if TYPE_CHECKING:
    import numpy as np

__all__ = ["DIMENSIONS", "Dimension", "Unit", "offer", "parse_unit"]

T = TypeVar("T")


@dataclass(frozen=True)
class Dimension:
    """A kind of quantity: its exponents over the SI base and the units that messages offer.

    Parameters
    ----------
    noun : str
        With its article, for messages: ``"a length"``.
    exponents : mapping of str to int
        Exponents of length, mass, time, temperature, current; empty for angles and pure numbers.
    units : tuple of str
        Usual units, the first one for examples.
    """

    noun: str
    exponents: Mapping[str, int]
    units: tuple[str, ...]


def _dimension(noun: str, units: str, **exponents: int) -> Dimension:
    named = {f"[{base}]": exponent for base, exponent in exponents.items()}
    return Dimension(noun, MappingProxyType(named), tuple(units.split(", ")))


#: Every dimension by its name. A temperature has a zero (18 degC is 291.15 K), a temperature difference has none.
DIMENSIONS: Mapping[str, Dimension] = MappingProxyType(
    {
        "length": _dimension("a length", "m, mm, cm, ft, in", length=1),
        "pressure": _dimension("a pressure", "kPa, Pa, bar, psi, mH2O, mmHg", mass=1, length=-1, time=-2),
        "flow": _dimension("a flow", "L/s, m^3/s, m^3/h, L/min, ft^3/s, US_gal/min", length=3, time=-1),
        "temperature": _dimension("a temperature", "degC, K, degF", temperature=1),
        "temperature difference": _dimension("a temperature difference", "K, degC, degF", temperature=1),
        "angle": _dimension("an angle", "deg, rad"),
        "density": _dimension("a density", "kg/m^3, g/cm^3, lb/ft^3", mass=1, length=-3),
        "dynamic viscosity": _dimension("a dynamic viscosity", "mPa s, Pa s, cP", mass=1, length=-1, time=-1),
        "kinematic viscosity": _dimension("a kinematic viscosity", "mm^2/s, m^2/s, cSt", length=2, time=-1),
        "acceleration": _dimension("an acceleration", "m/s^2, ft/s^2", length=1, time=-2),
        "dimensionless": _dimension("a pure number", "%"),
        "area": _dimension("an area", "m^2, mm^2, in^2", length=2),
        "mass": _dimension("a mass", "kg, g, lb", mass=1),
        "time": _dimension("a time", "s, min, h", time=1),
        "volume": _dimension("a volume", "L, m^3, ft^3, US_gal", length=3),
        "velocity": _dimension("a velocity", "m/s, ft/s", length=1, time=-1),
        "surface tension": _dimension("a surface tension", "N/m, mN/m", mass=1, time=-2),
        "thermal expansion": _dimension("a thermal expansion", "1/K", temperature=-1),
        "frequency": _dimension("a frequency", "Hz, kHz, 1/s", time=-1),
        # of the same exponents as a frequency, told apart by its radians: 60 rpm are one turn a second, not 1 Hz of pulses
        "rotational speed": _dimension("a rotational speed", "rpm, rad/s", time=-1),
        "electric current": _dimension("an electric current", "mA, A", current=1),
        "voltage": _dimension("a voltage", "V, mV", mass=1, length=2, time=-3, current=-1),
    }
)

# Units of the trade that pint lacks or reads otherwise: it takes cfm for a centifermi.
_DEFINITIONS = (
    "US_gal = 231 * inch ** 3",
    "imp_gal = 4.54609 * liter",
    "cubic_foot_per_second = foot ** 3 / second = cfs",
    "cubic_foot_per_minute = foot ** 3 / minute = cfm",
    "psig = pound_force_per_square_inch",
    "barg = bar",
)

#: A gallon as sentences write it.
_GALLONS = re.compile(r"\b(US|imp) gal\b")

# Units that mean one thing in one country or trade and another elsewhere, by pint's own name for each.
_AMBIGUOUS = {
    "gallon": "say US_gal or imp_gal",
    "barrel": "say oil_bbl (42 US_gal), or give the volume in L or US_gal",
    "quart": "give the volume in L, US_gal or imp_gal",
    "pint": "give the volume in L, US_gal or imp_gal",
    "ton": "say tonne, short_ton or long_ton",
    "gpm": "say US_gal/min or imp_gal/min",
    "gph": "say US_gal/h or imp_gal/h",
    "mgd": "give the flow in m^3/d, or a million US_gal/d or imp_gal/d",
}
# Further units for "did you mean", and spellings of the trade that name something else, or nothing, as written.
_FURTHER = {
    "length": ("km", "µm", "inch"),
    "pressure": ("MPa", "mbar", "mmH2O", "inHg", "atm", "kgf/cm^2"),
    "flow": ("L/h", "m^3/min", "m^3/d", "ft^3/min", "imp_gal/min"),
}
_CELSIUS = {"c": "degC", "oc": "degC", "ºc": "degC", "f": "degF", "of": "degF", "ºf": "degF"}
_SPELLINGS: Mapping[str, Mapping[str, str]] = {
    "temperature": _CELSIUS,
    "temperature difference": _CELSIUS,
    "pressure": {
        "kg/cm2": "kgf/cm^2",
        "kgcm2": "kgf/cm^2",
        "kg/cm²": "kgf/cm^2",
        "mwc": "mH2O",
        "mwg": "mH2O",
    },
    "flow": {"lps": "L/s", "lpm": "L/min", "lph": "L/h", "cumec": "m^3/s", "cumecs": "m^3/s"},
    "dynamic viscosity": {"mpa.s": "mPa s", "pa.s": "Pa s"},
}
# The units that most surveys are written in, as (factor, divisor): what pint says of them, without importing it.
_COMMON: Mapping[str, Mapping[str, tuple[float, float]]] = {
    "length": {
        "m": (1.0, 1.0),
        "mm": (1.0, 1000.0),
        "cm": (1.0, 100.0),
        "in": (0.0254, 1.0),
        "ft": (0.3048, 1.0),
    },
    "pressure": {"Pa": (1.0, 1.0), "kPa": (1000.0, 1.0), "bar": (100000.0, 1.0), "mbar": (100.0, 1.0)},
    "flow": {"L/s": (1.0, 1000.0), "m^3/s": (1.0, 1.0), "m^3/h": (1.0, 3600.0), "L/min": (1.0, 60000.0)},
    "temperature difference": {"K": (1.0, 1.0)},
    "dimensionless": {"%": (1.0, 100.0)},
    "angle": {"deg": (math.pi / 180.0, 1.0)},
    "density": {"kg/m^3": (1.0, 1.0)},
    "mass": {"kg": (1.0, 1.0), "g": (1.0, 1000.0)},
    "time": {"s": (1.0, 1.0), "min": (60.0, 1.0)},
    "velocity": {"m/s": (1.0, 1.0)},
}
_OFFSETS = {"degree_Celsius": (1.0, 273.15), "degree_Fahrenheit": (5 / 9, 459.67)}

_LONGEST = 64
_UNIT = re.compile(
    r"(?:[A-Za-zµμ°ΩÅ%][A-Za-z0-9_µμ°]*+|(?:\^|\*\*)[+-]?[1-9](?![0-9^*])|(?<=[A-Za-z])-[1-9](?![0-9])"
    r"|⁻?[¹²³]|[*/·⋅ ()]|1(?=\s*/))++"
)


@dataclass(frozen=True)
class Unit:
    """A unit of a known dimension and how it becomes SI: ``(value + offset) * factor / divisor``.

    A divisor stands where SI is smaller by a whole number, so that 26.64 mm is 0.02664 m to the last digit.

    Parameters
    ----------
    text : str
        As written.
    dimension : str
        A key of `DIMENSIONS`.
    factor, divisor : float
        SI units per unit, as a quotient.
    offset : float
        Added before scaling; 0 but for temperatures in degC and degF.

    Examples
    --------
    >>> parse_unit("degC", "temperature").to_si(18.0)
    291.15
    >>> parse_unit("degC", "temperature").difference_to_si(0.2)
    0.2
    """

    text: str
    dimension: str
    factor: float
    divisor: float = 1.0
    offset: float = 0.0

    @property
    def label(self) -> str:
        """The unit as sentences print it."""
        return self.text.replace("_gal", " gal")

    @overload
    def to_si(self, values: float) -> float: ...
    @overload
    def to_si(self, values: np.ndarray) -> np.ndarray: ...
    def to_si(self, values: float | np.ndarray) -> float | np.ndarray:
        """Return `values` (a float or an array of any shape) in SI units."""
        return self._scale(values + self.offset if self.offset else values)

    @overload
    def difference_to_si(self, values: float) -> float: ...
    @overload
    def difference_to_si(self, values: np.ndarray) -> np.ndarray: ...
    def difference_to_si(self, values: float | np.ndarray) -> float | np.ndarray:
        """Return differences or uncertainties in SI units: scaled, without the offset of the zero."""
        return self._scale(values)

    def from_si(self, value: float) -> float:
        """Return a value in SI units in this unit.

        Examples
        --------
        >>> parse_unit("mm", "length").from_si(0.0007)
        0.7
        """
        return self.difference_from_si(value) - self.offset

    def difference_from_si(self, value: float) -> float:
        """Return a difference or an uncertainty in SI units in this unit."""
        return value * self.divisor / self.factor

    def _scale(self, values: T) -> T:
        scaled: Any = values
        scaled = scaled * self.factor / self.divisor
        return cast("T", scaled)


@functools.cache
def _registry() -> Any:
    """The one registry of units, made when the first unit is read."""
    import pint  # noqa: PLC0415 (loaded when asked for: start-up time)

    registry: Any = pint.UnitRegistry()
    for definition in _DEFINITIONS:
        registry.define(definition)
    return registry


def offer(dimension: str) -> str:
    """Usual units of a dimension as a phrase for a remedy."""
    return "give a unit such as " + ", ".join(DIMENSIONS[dimension].units)


def _plain(text: str) -> str:
    """A unit without what does not matter for a near miss: case, spaces and signs of powers."""
    return re.sub(r"[\s^]|\*\*", "", text).casefold()


def _remedy(text: str, dimension: str) -> str:
    """The unit of the dimension that was meant perhaps, or its usual units."""
    spelling = _SPELLINGS.get(dimension, {}).get(_plain(text))
    units = (*DIMENSIONS[dimension].units, *_FURTHER.get(dimension, ()))
    meant = spelling or next((unit for unit in units if _plain(unit) == _plain(text)), None)
    return f"did you mean {meant!r}?" if meant else offer(dimension)


@functools.lru_cache(maxsize=4096)
def parse_unit(text: str, dimension: str) -> Unit:
    """Return the unit that `text` names, checked to be of `dimension`.

    Parameters
    ----------
    text : str
        Such as ``"mm"``, ``"L/s"``, ``"kg/m^3"``, ``"mPa s"``, ``"degC"``; upper and lower case differ.
    dimension : str
        A key of `DIMENSIONS`.

    Returns
    -------
    Unit
        With the conversion of floats and arrays to SI.

    Raises
    ------
    QuantityError
        Where the unit is missing, unknown, ambiguous or of another dimension.

    Examples
    --------
    >>> parse_unit("m^3/h", "flow").to_si(36.0)
    0.01
    >>> parse_unit("gal", "volume")
    Traceback (most recent call last):
        ...
    gradeline.errors.QuantityError: the unit 'gal' is ambiguous; say US_gal or imp_gal
    """
    stripped = _GALLONS.sub(r"\1_gal", text.strip())
    if not stripped:
        raise QuantityError(f"a unit is missing; {offer(dimension)}")
    if len(stripped) > _LONGEST:
        raise QuantityError(f"{stripped[:40] + '...'!r} is not a unit that is known; {offer(dimension)}")
    lowered = stripped.casefold()
    if dimension == "pressure" and re.search(r"\babs\b|\bpsia\b|\bbara\b", lowered):
        raise QuantityError(
            f"the unit {stripped!r} asks for absolute pressure; give pressures against the local atmosphere"
        )
    if stripped in _COMMON.get(dimension, {}):
        return Unit(stripped, dimension, *_COMMON[dimension][stripped])
    if (stripped, dimension) == ("degC", "temperature"):
        factor, offset = _OFFSETS["degree_Celsius"]
        return Unit(stripped, dimension, factor, 1.0, offset)
    return _by_pint(stripped, dimension)


def _by_pint(stripped: str, dimension: str) -> Unit:
    """The unit as pint reads it, checked to be of the dimension."""
    wanted = DIMENSIONS[dimension]
    unit = _pint_unit(stripped, dimension)
    names = dict(unit._units)
    found = _dimension_of(unit)
    if found != dimension and not (dimension == "temperature difference" and found == "temperature"):
        what = f"is {DIMENSIONS[found].noun}" if found else "is of another dimension"
        raise QuantityError(
            f"the unit {stripped!r} {what}, not {wanted.noun}; {_remedy(stripped, dimension)}"
        )
    if found == "temperature":
        (name,) = names
        if name.startswith("delta_") and dimension == "temperature":
            raise QuantityError(
                f"the unit {stripped!r} is a temperature difference, not a temperature; {offer(dimension)}"
            )
        if name.removeprefix("delta_") in _OFFSETS:
            factor, offset = _OFFSETS[name.removeprefix("delta_")]
            return Unit(stripped, dimension, factor, 1.0, offset if dimension == "temperature" else 0.0)
    return Unit(stripped, dimension, *_quotient(float(unit._REGISTRY.Quantity(1.0, unit).to_base_units().m)))


def _pint_unit(text: str, dimension: str) -> Any:
    """The unit as pint reads it, refusing what pint would guess or compute."""
    remedy = _remedy(text, dimension)
    unknown = f"{text!r} is not a unit that is known; {remedy}"
    if text.casefold() in _AMBIGUOUS or text.casefold().split("/")[0].rstrip("s") in _AMBIGUOUS:
        key = text.casefold() if text.casefold() in _AMBIGUOUS else text.casefold().split("/")[0].rstrip("s")
        raise QuantityError(f"the unit {text!r} is ambiguous; {_AMBIGUOUS[key]}")
    # what reaches pint is names, powers of one digit, products and quotients: nothing that takes time to work out
    if not _UNIT.fullmatch(text):
        raise QuantityError(unknown)
    tidy = re.sub(r"(?<![A-Za-z0-9_])([a-zµμ]{1,2})([23])(?![A-Za-z0-9_])", r"\1^\2", text)  # m3/h
    tidy = re.sub(r"(?<=[A-Za-z])-([1-9])(?![0-9])", r"^-\1", tidy)
    try:
        unit = _registry().parse_units(tidy)
    except Exception as error:  # pint raises many kinds, some of them bare assertions
        if remedy != offer(dimension):
            raise QuantityError(unknown) from error
        usual = [name for known in DIMENSIONS.values() for name in known.units]
        near = difflib.get_close_matches(text, usual, n=1, cutoff=0.7)
        hint = f"did you mean {near[0]!r}?" if near else remedy
        raise QuantityError(f"{text!r} is not a unit that is known; {hint}") from error
    for name in dict(unit._units):
        for ambiguous, remedy in _AMBIGUOUS.items():
            if name.endswith(ambiguous) and not name.endswith(
                ("imperial_" + ambiguous, "_" + ambiguous, "newton")
            ):
                raise QuantityError(f"the unit {text!r} is ambiguous; {remedy}")
    return unit


def _dimension_of(unit: Any) -> str | None:
    """The dimension of a unit of pint's, None where it is none of `DIMENSIONS`."""
    exponents = dict(unit.dimensionality)
    if not exponents:
        roots = dict(unit._REGISTRY.get_base_units(unit)[1]._units)
        return {(): "dimensionless", (("radian", 1),): "angle"}.get(tuple(roots.items()))
    if "[temperature]" in exponents and len(dict(unit._units)) > 1:
        return None
    if exponents == {"[time]": -1}:
        turns = "radian" in dict(unit._REGISTRY.get_base_units(unit)[1]._units)
        return "rotational speed" if turns else "frequency"
    return next((name for name, known in DIMENSIONS.items() if dict(known.exponents) == exponents), None)


def _quotient(factor: float) -> tuple[float, float]:
    """A factor without the noise of its own multiplication, as (factor, divisor)."""
    tidy = float(f"{factor:.13g}")
    if abs(tidy - factor) <= 4 * math.ulp(factor):
        factor = tidy
    whole = round(1 / factor) if factor < 1 else 1
    if whole > 1 and math.isclose(whole * factor, 1, rel_tol=1e-15):
        return 1.0, float(whole)
    return factor, 1.0
