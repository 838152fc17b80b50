"""Values of a survey as `gradeline check` shows them: in SI as they were stated, or in the US customary units of a reader."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from gradeline.quantities import Measured, parse_unit
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.report.converted import converted_text
from gradeline.survey import Survey

__all__ = ["ShownUnit", "ShownUnits", "plain_number"]

#: A stated length in a unit below this size (m) is told in inches, another one in feet.
_SMALL = 0.1
_QUANTITIES = {
    "pressure": "pressure",
    "temperature": "temperature",
    "density": "density",
    "flow": "flow",
    "temperature difference": "temperature difference",
}
_POWER = re.compile(r"e([+-])0*(\d+)$")
_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def plain_number(value: float, digits: int = 6) -> str:
    """Return a number to so many significant digits, none after the last that is not 0.

    Examples
    --------
    >>> plain_number(12.5), plain_number(1.0763910e-5, 3)
    ('12.5', '1.08×10⁻⁵')
    """
    return _POWER.sub(
        lambda found: "×10" + (found[1].replace("+", "") + found[2]).translate(_SUPERSCRIPT),
        f"{value:.{digits}g}",
    )


@dataclass(frozen=True)
class ShownUnit:
    """A unit with its name: shown = SI × factor + offset."""

    text: str
    factor: float
    offset: float = 0.0

    def value(self, value: float) -> str:
        """Return an SI value in the unit, without its name."""
        return plain_number(value * self.factor + self.offset)

    def difference(self, value: float, digits: int = 6) -> str:
        """Return an SI difference or uncertainty in the unit, without its name."""
        return plain_number(value * self.factor, digits)

    def measured(self, value: Measured) -> str:
        """Return a value with its uncertainty, where it has one."""
        text = self.value(value.value)
        return text if value.u is None else f"{text} ± {self.difference(value.u, 2)}"


@dataclass(frozen=True)
class ShownUnits:
    """The units in which a survey is told.

    Parameters
    ----------
    survey : Survey
        Its `units` tell what was stated in which unit.
    display : Display
        Units of the reader.
    """

    survey: Survey
    display: Display = SI_DISPLAY

    def of(self, quantity: str) -> ShownUnit:
        """Return the unit of a quantity that `Display` knows."""
        unit = self.display.units[quantity]
        return ShownUnit(unit.label, unit.factor, unit.offset)

    def told(self, quantity: str, value: Measured) -> str:
        """Return a value with its uncertainty and its unit."""
        unit = self.of(quantity)
        return f"{unit.measured(value)} {unit.text}"

    def per_kelvin(self, value: Measured) -> str:
        """Return a thermal expansion."""
        unit = self.of("temperature difference")
        return f"{ShownUnit('', 1 / unit.factor).measured(value)} 1/{unit.text}"

    def stated(self, place: str, dimension: str, usual: Mapping[str, str]) -> ShownUnit:
        """Return the unit in which a value was stated, in US customary units that of its quantity.

        Parameters
        ----------
        place : str
            Where it was stated: a key of the survey's units.
        dimension : str
            What it measures.
        usual : mapping of str to str
            Units by dimension, where a survey was not read from files.
        """
        unit = parse_unit(self.survey.units.get(place, usual[dimension]), dimension)
        if self.display is not SI_DISPLAY:
            if dimension == "length":
                return self.of("small head" if unit.difference_to_si(1.0) < _SMALL else "length")
            if dimension == "thermal expansion":
                kelvin = self.of("temperature difference")
                return ShownUnit(f"1/{kelvin.text}", 1 / kelvin.factor)
            if dimension in _QUANTITIES:
                return self.of(_QUANTITIES[dimension])
        return ShownUnit(unit.text, unit.difference_from_si(1.0), unit.from_si(0.0))

    def sentences(self, texts: Iterable[str]) -> list[str]:
        """Return assumptions and cautions; labels in them stay as they are."""
        if self.display is SI_DISPLAY:
            return list(texts)
        labels = {
            str(one.name)
            for part in ("reaches", "fittings", "gauges", "flow_gauges", "taps", "offtakes", "side_valves")
            for one in getattr(self.survey, part)
        } | {reach.wall for reach in self.survey.reaches}
        odd = [label for label in labels if converted_text(label, self.display) != label]
        kept = sorted(odd, key=len, reverse=True)
        return [converted_text(text, self.display, kept) for text in texts]
