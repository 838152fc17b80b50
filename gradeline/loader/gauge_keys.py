"""The values of keys that gauges alone have: gas pressures, ranges, ends of legs, names of files."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Any, Self

from gradeline.errors import QuantityError
from gradeline.gauge_kinds import GaugeKey, Pressure
from gradeline.loader.keys import choice_reader, measured_reader, read_text, written
from gradeline.quantities import Measured, Unit, parse_quantity, parse_unit

__all__ = [
    "EXAMPLES",
    "Elevation",
    "Span",
    "gauge_key_reader",
    "plain_value",
    "range_reader",
    "read_file_name",
    "read_leg_end",
]

#: What a value of each dimension looks like, for messages and for the written survey.
EXAMPLES = {
    "length": "0.80 m",
    "angle": "30 deg",
    "temperature": "18 degC",
    "text": "water",
    "pressure": "2 kPa",
    "dimensionless": "1 %",
}
_RIGHT_ANGLE = 1.5708


def gauge_key_reader(name: str, key: GaugeKey, line_fluids: tuple[str, ...]) -> Callable[[object], Any]:
    """A reader of one key of a gauge kind."""
    example = key.example or EXAMPLES.get(key.dimension, "1")
    if name == "line_fluid":
        return choice_reader(*line_fluids)
    if key.dimension == "text":
        return read_text
    if key.dimension == "gas pressure":
        return _read_gas_pressure
    low, strict = (0.0, True) if key.positive else (None, False)
    high = _RIGHT_ANGLE if key.high is None and key.dimension == "angle" else key.high
    return measured_reader(key.dimension, example, low, high, strict=strict)


def plain_value(text: str) -> str:
    """Return a value without what stands before or behind it in a range or an absolute pressure.

    Examples
    --------
    >>> plain_value("0 to 1.2 m"), plain_value("150 kPa abs"), plain_value("2 mm +/- 1 mm")
    ('1.2 m', '150 kPa', '2 mm +/- 1 mm')
    """
    return re.sub(r"\s+abs(?:olute)?\.?$", "", re.split(r"\s+to\s+", text)[-1])


def _read_gas_pressure(value: object) -> Pressure:
    """A pressure against the atmosphere, or absolute where ``abs`` stands behind it."""
    text = read_text(value)
    found = re.fullmatch(r"(.*\S)\s+abs(?:olute)?\.?", text)
    pressure = measured_reader("pressure", "150 kPa abs")(found[1] if found else text)
    if found and pressure.value <= 0:
        raise QuantityError(f"{text!r} is no absolute pressure, which lies above 0; leave abs away")
    return Pressure(pressure.value, pressure.u, absolute=bool(found))


class Span(tuple[float, float]):
    """The lowest and the highest reading of a scale, SI, with the unit that the range is written in."""

    unit: Unit

    def __new__(cls, ends: tuple[float, float], unit: Unit | None = None) -> Self:
        """Make one; without a unit it is told as it is."""
        made = super().__new__(cls, ends)
        made.unit = unit or Unit("", "dimensionless", 1.0)
        return made


def range_reader(dimension: str, example: str) -> Callable[[object], Span]:
    """A reader of the lowest and the highest reading, such as ``"0 to 1.2 m"``."""

    def read(value: object) -> Span:
        text = read_text(value)
        parts = re.split(r"\s+to\s+", text)
        if len(parts) != 2:
            raise QuantityError(f"{text!r} is not a range; write it as {example!r}")
        high = parse_quantity(parts[1], dimension)
        bare = re.fullmatch(r"[+-]?[0-9.eE+-]+", parts[0])
        unit = re.sub(r"^[+-]?[0-9.]+(?:[eE][+-]?[0-9]+)?\s*", "", parts[1])
        low = parse_quantity(f"{parts[0]} {unit}" if bare else parts[0], dimension)
        if high.value <= low.value:
            raise QuantityError(f"{text!r} ends below its beginning; write it as {example!r}")
        return Span((low.value, high.value), parse_unit(re.split(r"\+/-|±", unit)[0].strip(), dimension))

    return read


class Elevation(float):
    """An elevation above datum, m, with its standard uncertainty `u`, m, where one is stated."""

    u: float | None

    def __new__(cls, value: float, u: float | None = None) -> Self:
        """Make one."""
        made = super().__new__(cls, value)
        made.u = u
        return made


def read_leg_end(value: object) -> Elevation | str:
    """An elevation (an `Elevation`), or the name of a tap or of a level that is read."""
    if isinstance(value, int | float) and not isinstance(value, bool):
        raise QuantityError(f"{written(value)} has no unit; write an elevation such as '1.2 m', or a name")
    text = read_text(value)
    try:
        found: Measured = parse_quantity(text, "length")
    except QuantityError:
        return text
    return Elevation(found.value, found.u)


def read_file_name(value: object) -> str:
    """The name of a csv file in the survey's own folder."""
    text = read_text(value)
    if re.search(r"[/\\:]", text) or text.startswith(".") or not text.casefold().endswith(".csv"):
        raise QuantityError(
            f"{text!r} is not the name of a csv file in the survey's folder; write such as 'dial.csv'"
        )
    return text
