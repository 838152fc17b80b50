"""The flowing fluid from ``[fluid]``: water, air, or a liquid by constants, by a table or by two viscosities."""

from __future__ import annotations

import difflib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import PurePath
from typing import TYPE_CHECKING, Annotated

import numpy as np
from pydantic import BeforeValidator

from gradeline.errors import QuantityError
from gradeline.loader.cells import Cells, column_index, read_cells
from gradeline.loader.columns import Columns, Known
from gradeline.loader.keys import exact_reader, measured_reader, read_text, written
from gradeline.loader.ledger import Ledger
from gradeline.quantities import Measured, parse_quantity
from gradeline.survey import BEYOND, Fluid, PropertyTable

if TYPE_CHECKING:
    from gradeline.loader.document import FluidTable

__all__ = [
    "Expansion",
    "Humidity",
    "LinePressure",
    "Temperature",
    "TemperatureRule",
    "TwoViscosities",
    "build_fluid",
    "state_fluid",
    "temperature_rule",
]

_NAME = "survey.toml"
_ZERO = 273.15
_AIR_STATED = (288.15, 300.15)
_TWO = '{"40 degC" = "46 mm^2/s", "100 degC" = "6.8 mm^2/s"}'
_VISCOSITIES = {"viscosity": "dynamic viscosity", "kinematic viscosity": "kinematic viscosity"}


def read_line_pressure(value: object) -> Measured:
    """An absolute pressure with the word abs; without it a pressure is one against the local atmosphere."""
    text = read_text(value) if isinstance(value, str) else ""
    words = text.split()
    if "abs" not in words:
        raise QuantityError(
            f"{written(value)} must be an absolute pressure and say so; write it as '105 kPa abs' (the gauge's reading plus "
            "the pressure of the atmosphere)"
        )
    return measured_reader("pressure", "105 kPa abs", 1e3, 2e6)(
        " ".join(word for word in words if word != "abs")
    )


def read_two_viscosities(value: object) -> tuple[tuple[float, Measured], ...]:
    """Two kinematic viscosities by their temperatures, the colder first."""
    if not isinstance(value, dict) or len(value) != 2:
        raise QuantityError(
            f"two temperatures with a kinematic viscosity each are wanted; write it as {_TWO}"
        )
    measured = measured_reader("kinematic viscosity", "46 mm^2/s", 0.21e-6, 20.0)
    found = []
    for at, viscosity in value.items():
        temperature = parse_quantity(read_text(at), "temperature")
        if not temperature.value > 0:
            raise QuantityError(f"{at!r} lies below absolute zero; mend the value or the unit")
        found.append((temperature.value, measured(viscosity)))
    (cold, thick), (warm, thin) = sorted(found, key=lambda pair: pair[0])
    if cold == warm:
        raise QuantityError(f"both viscosities are at {cold - _ZERO:g} degC; give two temperatures apart")
    if not thick.value > thin.value:
        raise QuantityError(
            f"{1e6 * thick.value:g} mm^2/s at {cold - _ZERO:g} degC is not above {1e6 * thin.value:g} mm^2/s at "
            f"{warm - _ZERO:g} degC; a liquid is the thinner the warmer it is: mend one of them"
        )
    return (cold, thick), (warm, thin)


LinePressure = Annotated[Measured, BeforeValidator(read_line_pressure)]
TwoViscosities = Annotated[tuple[tuple[float, Measured], ...], BeforeValidator(read_two_viscosities)]
Temperature = Annotated[float, BeforeValidator(exact_reader("temperature", "15 degC", 1.0, 2000.0))]
Expansion = Annotated[
    Measured, BeforeValidator(measured_reader("thermal expansion", "0.0007 1/K", 0, 0.01, strict=True))
]
Humidity = Annotated[float, BeforeValidator(exact_reader("dimensionless", "50 %", 0.0, 1.0))]

#: The keys of each way of giving a fluid's properties beside its name.
_CONSTANT = (
    "density",
    "viscosity",
    "kinematic_viscosity",
    "viscosity_at",
    "density_temperature",
    "expansion",
)
_TABLE = ("properties", "u_density", "u_viscosity")
_AIR = ("line_pressure", "relative_humidity")


def build_fluid(ledger: Ledger, table: FluidTable | None) -> Fluid | None:
    """Return the flowing fluid, None where its table is at fault or there is none."""
    if table is None:
        return None
    stated = [key for key in (*_CONSTANT, *_TABLE, *_AIR) if getattr(table, key) is not None]
    if table.name == "water":
        for key in stated:
            _fault(
                ledger,
                key,
                "water has its properties from the temperature; leave the key out, or give the fluid another name",
            )
        return None if stated else Fluid("water")
    if set(stated) & set(_AIR) or (table.name == "air" and not stated):
        return _air(ledger, table, stated)
    if set(stated) & set(_TABLE):
        return _tabled(ledger, table, stated)
    if not stated:
        near = difflib.get_close_matches(table.name.casefold(), ["water", "air"], 1, cutoff=0.6)
        hint = f" (did you mean {near[0]!r}?)" if near else ""
        _fault(
            ledger,
            "name",
            f"unknown fluid {table.name!r}{hint}; known are water and air, any other fluid needs density and viscosity",
        )
        return None
    return _constant(ledger, table)


def _fault(ledger: Ledger, key: str, message: str) -> None:
    ledger.problem(_NAME, None, f"fluid.{key}", message)


def _others(ledger: Ledger, stated: list[str], own: tuple[str, ...], why: str) -> bool:
    """Note keys of another way of giving the properties; return whether there are any."""
    others = [key for key in stated if key not in own]
    for key in others:
        _fault(ledger, key, f"{why}; take the key away")
    return bool(others)


def _air(ledger: Ledger, table: FluidTable, stated: list[str]) -> Fluid | None:
    if table.name != "air":
        key = next(key for key in stated if key in _AIR)
        _fault(
            ledger,
            key,
            f'the key is of air, but the fluid is {table.name!r}; take it away or say name = "air"',
        )
        return None
    if _others(ledger, stated, _AIR, "air at a line_pressure has its properties from the temperature"):
        return None
    if table.line_pressure is None:
        _fault(
            ledger,
            "line_pressure",
            'the key is missing; air needs the absolute pressure in the line, such as line_pressure = "105 kPa abs"',
        )
        return None
    humidity = 0.5 if table.relative_humidity is None else table.relative_humidity
    return Fluid("air", line_pressure=table.line_pressure, humidity=humidity)


def _constant(ledger: Ledger, table: FluidTable) -> Fluid:
    if table.density is None:
        _fault(ledger, "density", 'the key is missing; add it, such as density = "868 kg/m^3"')
    given = [
        key for key in ("viscosity", "kinematic_viscosity", "viscosity_at") if getattr(table, key) is not None
    ]
    if not given:
        _fault(ledger, "viscosity", 'the key is missing; add it, such as viscosity = "31 mPa s"')
    for key in given[1:]:
        _fault(ledger, key, f"{given[0]} is given as well; keep one of the two")
    if (table.expansion is None) != (table.density_temperature is None):
        missing, example = (
            ("expansion", "0.0007 1/K") if table.expansion is None else ("density_temperature", "15 degC")
        )
        _fault(ledger, missing, f'the key is missing; add it, such as {missing} = "{example}"')
    return Fluid(
        table.name,
        table.density,
        table.viscosity,
        table.kinematic_viscosity,
        viscosity_at=table.viscosity_at or (),
        density_temperature=table.density_temperature,
        expansion=table.expansion,
    )


def _tabled(ledger: Ledger, table: FluidTable, stated: list[str]) -> Fluid | None:
    if table.properties is None:
        _fault(ledger, "properties", 'the key is missing; add it, such as properties = "oil.csv"')
        return None
    if _others(ledger, stated, _TABLE, f"{table.properties} tells density and viscosity"):
        return None
    if PurePath(table.properties).name != table.properties or "\\" in table.properties:
        _fault(
            ledger,
            "properties",
            f"{table.properties!r} is no name of a file in the survey's folder; put the file there and give its name",
        )
        return None
    cells = read_cells(ledger, table.properties)
    if cells is None:
        return None
    found = _property_table(ledger, cells, table)
    return None if found is None else Fluid(table.name, table=found)


def _property_table(ledger: Ledger, cells: Cells, table: FluidTable) -> PropertyTable | None:
    known = {
        "temperature": Known(("temperature",), required=True, remedy="give the temperature"),
        "density": Known(("density",), required=True, remedy="give the density"),
        **{
            name: Known((dimension,), remedy="give the viscosity") for name, dimension in _VISCOSITIES.items()
        },
    }
    before = len(ledger.problems)
    columns = Columns(ledger, cells, known)
    present = [name for name in _VISCOSITIES if column_index(cells, name) is not None]
    if len(present) != 1 and len(ledger.problems) == before:
        rule = (
            "viscosity and kinematic viscosity are both there; keep one of the two"
            if present
            else "the column 'viscosity [mPa s]' or 'kinematic viscosity [mm^2/s]' is missing; add one"
        )
        ledger.problem(cells.file, cells.heading_line, None, rule)
    if len(ledger.problems) > before:
        return None
    values = {name: columns.values(name) for name in ("temperature", "density", present[0])}
    for name, column in values.items():
        for row in np.flatnonzero(~(column > 0)).tolist():
            cell = columns.raw(name)[row]
            if not cell:
                columns.problem(row, name, f"the cell is empty; give the {name} or take the row away")
            elif np.isfinite(column[row]):
                columns.problem(row, name, f"{cell} is not above zero; mend the value or the unit")
    temperature = values["temperature"]
    for row in np.flatnonzero(~(np.diff(temperature) > 0) & np.isfinite(np.diff(temperature))).tolist():
        columns.problem(
            row + 1,
            "temperature",
            f"{columns.raw('temperature')[row + 1]} does not lie above {columns.raw('temperature')[row]} in the row before; "
            "list the temperatures in rising order, each once",
        )
    if len(cells) < 2:
        ledger.problem(
            cells.file, None, None, "there is one row; properties against temperature take two at least"
        )
    if len(ledger.problems) > before:
        return None
    viscosity = values[present[0]]
    kinematic = viscosity / values["density"] if present[0] == "viscosity" else viscosity
    return PropertyTable(
        cells.file,
        tuple(temperature.tolist()),
        tuple(values["density"].tolist()),
        tuple(kinematic.tolist()),
        density_u=None if table.u_density is None else table.u_density.value,
        viscosity_u=None if table.u_viscosity is None else table.u_viscosity.value,
    )


@dataclass(frozen=True)
class TemperatureRule:
    """The temperatures that the runs of a fluid may have, K, and why they are needed."""

    low: float
    high: float
    why: str
    where: str


def temperature_rule(fluid: Fluid | None) -> TemperatureRule | None:
    """Return what the runs' temperatures are held to; None for water, which has its own words, and for constants."""
    if fluid is None or fluid.is_water or not fluid.follows_temperature:
        return None
    low, high = fluid.span or (0.0, np.inf)
    between = f"from {low - _ZERO:g} to {high - _ZERO:g} degC"
    if fluid.table is not None:
        where = (
            f"does not lie in the range of {fluid.table.file}, {between}; extend the table or mend the value"
        )
    elif fluid.is_air:
        where = f"does not lie {between}, where the properties of air are known; mend the value or the unit"
    elif fluid.viscosity_at:
        where = (
            f"lies more than {BEYOND:g} K beyond the temperatures of viscosity_at ({between} is followed); give viscosities at "
            "temperatures nearer to it"
        )
    else:
        where = "lies below absolute zero; mend the value or the unit"
    return TemperatureRule(low, high, f"{fluid.name} has its properties from it", where)


def state_fluid(ledger: Ledger, table: FluidTable | None, fluid: Fluid, temperatures: list[float]) -> None:
    """Note what is taken for granted of a fluid that is neither water nor constant, and what is doubtful."""
    say: Callable[[str], None] = ledger.cautions.append
    nothing = "it contributes nothing to the results"
    known = [value for value in temperatures if np.isfinite(value)]
    if fluid.is_air:
        if table is not None and table.relative_humidity is None:
            ledger.assumptions.append(
                "The relative humidity of the flowing air is not given: it is taken as 50 %."
            )
        if fluid.line_pressure is not None and fluid.line_pressure.u is None:
            say(f"The uncertainty of the line pressure is not stated: {nothing}.")
        pressure = fluid.line_pressure.value if fluid.line_pressure is not None else 0.0
        if (
            any(not _AIR_STATED[0] <= value <= _AIR_STATED[1] for value in known)
            or not 6e4 <= pressure <= 1.1e5
        ):
            say(
                "The density of the flowing air is worked out beyond 15 to 27 °C or 60 to 110 kPa, for which its equation is "
                "stated: it is used as an approximation there, good to some 0.1 % at a few bar."
            )
    if fluid.table is not None:
        bare = [
            word
            for word, value in (("density", fluid.table.density_u), ("viscosity", fluid.table.viscosity_u))
            if value is None
        ]
        if bare:
            keys = " and ".join(f"u_{word}" for word in bare)
            verb = "is" if len(bare) == 1 else "are"
            say(
                f"The uncertainty of the {' and the '.join(bare)} in {fluid.table.file} ({keys}) {verb} not stated: {nothing}."
            )
    if fluid.viscosity_at:
        (cold, thick), (warm, thin) = fluid.viscosity_at
        if any(not cold <= value <= warm for value in known):
            say(
                f"The viscosity of {fluid.name} is carried beyond {cold - _ZERO:g} to {warm - _ZERO:g} °C, between which it was "
                "given: below the cloud point, or with polymers, an oil does not follow the law."
            )
        if thick.u is None or thin.u is None:
            say(
                f"The uncertainty of the viscosity of {fluid.name} is not stated at both temperatures: {nothing}."
            )
    if fluid.viscosity_at and fluid.expansion is None:
        ledger.assumptions.append(
            f"The density of {fluid.name} is taken as constant (no expansion is given): run temperatures do not change it."
        )
