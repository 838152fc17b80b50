"""Text with a unit and a stated uncertainty to SI values.

The number and its ± are read by `uncertainties`, which is imported when the first ± is read, the unit by
`gradeline.quantities.units`.
"""

from __future__ import annotations

import functools
import math
import re
import warnings

from gradeline.errors import QuantityError
from gradeline.quantities.meant import beyond_meaning
from gradeline.quantities.measured import Measured
from gradeline.quantities.units import DIMENSIONS, Unit, offer, parse_unit

__all__ = ["parse_number", "parse_quantity", "parse_uncertainty", "unit_of"]

_NUMBER = r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)"
_EXPONENT = r"(?:[eE][+-]?[0-9]+)?"
_LEADING = re.compile(rf"({_NUMBER}(?:\([0-9]+(?:\.[0-9]*)?\))?{_EXPONENT})(?![0-9.,(])\s*(.*)", re.DOTALL)
_BRACKETED = re.compile(r"\(\s*([^()]+?)\s*\)\s*(.*)", re.DOTALL)
_THOUSANDS = re.compile(r"[+-]?[0-9]{1,3}(?:[\s'’][0-9]{3})+(?:\.[0-9]*)?(?![0-9.,(])")
_LONGEST = 200


def parse_number(text: str) -> float:
    """Return a plain finite number with a decimal point.

    Parameters
    ----------
    text : str
        Such as ``"12.4"`` or ``"-3e-2"``, dimensionless.

    Returns
    -------
    float
        The number.

    Raises
    ------
    QuantityError
        For anything else: words, ``inf``, ``nan``, a decimal comma, a number too large for a float.

    Examples
    --------
    >>> parse_number("12.4")
    12.4
    >>> parse_number("12,4x")
    Traceback (most recent call last):
        ...
    gradeline.errors.QuantityError: '12,4x' is not a number
    """
    stripped = text.strip()
    if re.fullmatch(_NUMBER + _EXPONENT, stripped):
        return _finite(float(stripped), stripped)
    if re.fullmatch(r"[+-]?[0-9]+,[0-9]+", stripped):
        raise QuantityError(
            f"{stripped!r} has a comma; write decimals with a point and no mark between thousands"
        )
    if _THOUSANDS.fullmatch(stripped):
        joined = re.sub(r"[\s'’]", "", stripped)
        raise QuantityError(f"{stripped!r} has a gap; write no space between thousands, such as {joined}")
    if stripped.casefold().lstrip("+-") in {"inf", "infinity", "nan"}:
        raise QuantityError(f"{stripped!r} is not a finite number")
    raise QuantityError(f"{_shorten(stripped)!r} is not a number")


def _finite(value: float, text: str) -> float:
    if not math.isfinite(value):
        raise QuantityError(f"{_shorten(text)!r} is too large for a number")
    return value


def _shorten(text: str) -> str:
    return text if len(text) <= 40 else text[:37] + "..."


def _split(text: str, dimension: str) -> tuple[str, str]:
    """A text as its number (with a shorthand uncertainty perhaps) and its unit."""
    thousands = _THOUSANDS.match(text)
    if thousands:
        parse_number(thousands[0])  # says what is wrong with it
    found = _LEADING.fullmatch(text)
    if found is None:
        first = text.split(maxsplit=1)[0] if text.split() else text
        parse_number(first)  # says what is wrong with it
        raise QuantityError(
            f"{_shorten(text)!r} is not a number with a unit; write it as '1.5 {DIMENSIONS[dimension].units[0]}'"
        )
    return found[1], found[2]


def _unit(text: str, dimension: str, whole: str) -> Unit:
    """The unit of a quantity; a pure number needs none."""
    if text.strip():
        return parse_unit(text, dimension)
    if dimension == "dimensionless":
        return Unit("", dimension, 1.0)
    raise QuantityError(f"{_shorten(whole)!r} has no unit; {offer(dimension)}")


def _ufloat(text: str) -> tuple[float, float]:
    """Value and ± of ``26.64+/-0.03`` or ``26.64(3)``."""
    from uncertainties import ufloat_fromstr  # noqa: PLC0415 (loaded when asked for: start-up time)

    with warnings.catch_warnings():
        warnings.simplefilter(
            "ignore", UserWarning
        )  # "may give unexpected results": for a stated ± 0 it does not
        number = ufloat_fromstr(text)
    return _finite(number.nominal_value, text), _finite(number.std_dev, text)


def _signs(text: str) -> str:
    """A text with one sign for ±, minus and space."""
    return text.strip().replace("+/-", "±").replace("−", "-").replace("\u00a0", " ").replace("\u202f", " ")


def unit_of(text: str) -> str:
    """Return the unit of a text that `parse_quantity` or `parse_uncertainty` takes, as written; empty without one.

    Parameters
    ----------
    text : str
        Such as ``"0.15 kPa"``.

    Returns
    -------
    str
        The unit of the value.

    Examples
    --------
    >>> unit_of("0.15 kPa"), unit_of("0.8 m +/- 20 mm"), unit_of("(26.64 ± 0.03) mm"), unit_of("0.4 %")
    ('kPa', 'm', 'mm', '%')
    """
    plain = _signs(text)
    bracketed = _BRACKETED.fullmatch(plain)
    if bracketed and "±" in bracketed[1]:
        return bracketed[2].strip()
    units = (found[2].strip() for part in plain.split("±") if (found := _LEADING.fullmatch(part.strip())))
    return next((unit for unit in units if unit), "")


@functools.lru_cache(maxsize=4096)
def parse_quantity(text: str, dimension: str) -> Measured:
    """Return the SI value and the stated standard uncertainty of a text.

    Parameters
    ----------
    text : str
        Such as ``"26.64 mm"``, ``"26.64 mm +/- 0.03 mm"``, ``"26.64 mm ± 0.1 %"``, ``"26.64(3) mm"`` or
        ``"(26.64 ± 0.03) mm"``. A percentage is of the value.
    dimension : str
        A key of `DIMENSIONS`.

    Returns
    -------
    Measured
        In SI units; its uncertainty is None where none stands in the text.

    Raises
    ------
    QuantityError
        Where the text is no finite number or too large to be meant, where a unit is missing, ambiguous or of another
        dimension, or where the uncertainty is negative.

    Examples
    --------
    >>> parse_quantity("26.64(4) mm", "length")
    Measured(value=0.02664, u=4e-05)
    >>> parse_quantity("18 degC +/- 0.2 K", "temperature")
    Measured(value=291.15, u=0.2)
    >>> parse_quantity("5.5 s", "length")
    Traceback (most recent call last):
        ...
    gradeline.errors.QuantityError: the unit 's' is a time, not a length; give a unit such as m, mm, cm, ft, in
    """
    if len(text) > _LONGEST:
        raise QuantityError(f"{_shorten(text)!r} is too long for a number with a unit")
    found = _quantity(text, dimension)
    if any(beyond_meaning(size, dimension) for size in (found.value, found.u or 0.0)):
        raise QuantityError(f"{_shorten(text)!r} is too large to be meant; mend the number or its unit")
    return found


def _quantity(text: str, dimension: str) -> Measured:
    """What `parse_quantity` returns, of any size."""
    plain = _signs(text)
    if plain.count("±") > 1:
        raise QuantityError(f"{text!r} has more than one ±; state one uncertainty")
    bracketed = _BRACKETED.fullmatch(plain)
    if bracketed and "±" in bracketed[1]:
        inner, outer = bracketed.groups()
        left, right = (part.strip() for part in inner.split("±"))
        return _measured((left, outer), (right, outer), dimension, text)
    if "±" in plain:
        before, after = (part.strip() for part in plain.split("±"))
        left, left_unit = _split(before, dimension)
        right, right_unit = _split(after, dimension)
        if "(" in left or "(" in right:
            raise QuantityError(f"{text!r} states two uncertainties; state one")
        if right_unit.strip() == "%" and (dimension != "dimensionless" or not left_unit.strip()):
            unit = _unit(left_unit, dimension, text)
            value, percent = _ufloat(f"{left}±{right}")
            return Measured(
                _finite(unit.to_si(value), text), abs(_finite(unit.to_si(value), text)) * percent / 100
            )
        if dimension == "dimensionless" and left_unit.strip() == right_unit.strip() == "%":
            raise QuantityError(
                f"{text!r} can be read in two ways; write the value as a number, such as '0.05 +/- 0.01'"
            )
        if left_unit.strip() and not right_unit.strip():
            raise QuantityError(f"{text!r} has no unit after the ±; write '{before} +/- {right} {left_unit}'")
        # "26.64 ± 0.03 mm": one unit for both
        return _measured((left, left_unit or right_unit), (right, right_unit), dimension, text)
    number, unit_text = _split(plain, dimension)
    unit = _unit(unit_text, dimension, text)
    if "(" in number:
        value, u = _ufloat(number)
        return Measured(_finite(unit.to_si(value), text), _finite(unit.difference_to_si(u), text))
    return Measured(_finite(unit.to_si(_finite(float(number), number)), text))


def _measured(left: tuple[str, str], right: tuple[str, str], dimension: str, text: str) -> Measured:
    """A value and an absolute uncertainty, each as its number and its unit."""
    for number, _ in (left, right):
        parse_number(number)
    if float(right[0]) < 0:
        raise QuantityError(f"{text!r} has a negative uncertainty; state it above zero")
    value, u = _ufloat(f"{left[0]}±{right[0]}")
    spread = "temperature difference" if dimension == "temperature" else dimension
    return Measured(
        _finite(_unit(left[1], dimension, text).to_si(value), text),
        _finite(_unit(right[1], spread, text).difference_to_si(u), text),
    )


def parse_uncertainty(text: str, dimension: str) -> tuple[float, bool]:
    """Return a stated standard uncertainty and whether it is relative to the value.

    Parameters
    ----------
    text : str
        Such as ``"0.5 mm"`` (absolute) or ``"0.4 %"`` (relative).
    dimension : str
        A key of `DIMENSIONS`, of the quantity that the uncertainty belongs to.

    Returns
    -------
    tuple of (float, bool)
        In SI units and False, or as a fraction and True.

    Raises
    ------
    QuantityError
        As `parse_quantity`, and for a negative value.

    Examples
    --------
    >>> parse_uncertainty("0.4 %", "flow")
    (0.004, True)
    >>> parse_uncertainty("0.2 degC", "temperature")
    (0.2, False)
    """
    relative = text.strip().endswith("%")
    kind = "dimensionless" if relative else dimension
    if relative and not text.strip()[:-1].strip():
        raise QuantityError(f"{text!r} is not a number; write it as '0.4 %'")
    found = parse_quantity(text, "temperature difference" if kind == "temperature" else kind)
    if found.u is not None:
        raise QuantityError(f"{text!r} states an uncertainty of an uncertainty; leave out the ±")
    if found.value < 0:
        raise QuantityError(f"{text!r} is negative; an uncertainty is zero or above")
    return found.value, relative
