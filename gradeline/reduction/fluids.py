"""The flowing fluid: density and viscosity at each run's temperature, and how they go with what was stated of them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import ReductionError
from gradeline.hydraulics.fluid import air_density, water_properties
from gradeline.hydraulics.viscosity import (
    air_viscosity,
    expanded_density,
    interpolated_properties,
    two_point_viscosity,
)
from gradeline.quantities import Measured
from gradeline.survey import Fluid

__all__ = ["FluidInput", "air_cautions", "flowing_properties", "fluid_assumptions", "fluid_inputs"]

Array = NDArray[np.float64]

#: Flowing air is taken as incompressible; from this fall of its pressure along the line on that is told.
_LARGEST_FALL = 0.02


@dataclass(frozen=True)
class FluidInput:
    """Something stated of the fluid, by what one standard uncertainty of it changes in each run.

    Parameters
    ----------
    name, subject : str
        As the budget calls it.
    density, viscosity : (R,) array
        Relative change of density and kinematic viscosity.
    """

    name: str
    subject: str
    density: Array
    viscosity: Array


def flowing_properties(fluid: Fluid, temperature: Array) -> tuple[Array, Array]:
    """Return density (kg/m³) and kinematic viscosity (m²/s) of the flowing fluid.

    Parameters
    ----------
    fluid : Fluid
        As the survey states it.
    temperature : array
        K; not used where the properties are constant.

    Returns
    -------
    density, kinematic viscosity : array
        Of the shape of `temperature`.

    Raises
    ------
    ReductionError
        Where a viscosity is missing or has no value at a temperature.
    """
    if fluid.table is not None:
        table = fluid.table
        return interpolated_properties(
            temperature, table.temperature, table.density, table.kinematic_viscosity
        )
    if fluid.line_pressure is not None:
        density = air_density(temperature, fluid.line_pressure.value, fluid.humidity)
        return density, np.asarray(air_viscosity(temperature) / density)
    if fluid.density is None:
        density, viscosity = water_properties(temperature)
        return np.asarray(density), np.asarray(viscosity / density)
    density = np.full(temperature.shape, fluid.density.value)
    if fluid.expansion is not None and fluid.density_temperature is not None:
        density = expanded_density(
            temperature, fluid.density.value, fluid.density_temperature, fluid.expansion.value
        )
    if fluid.viscosity_at:
        (cold, thick), (warm, thin) = fluid.viscosity_at
        kinematic = two_point_viscosity(temperature, cold, thick.value, warm, thin.value)
        if (np.isnan(kinematic) & np.isfinite(temperature)).any():
            raise ReductionError(
                f"the viscosity of {fluid.name!r} by its two values falls below 0.21 mm²/s at a run's temperature, where "
                "their law ends; give a table of properties"
            )
        return density, kinematic
    if fluid.kinematic_viscosity is not None:
        return density, np.full(temperature.shape, fluid.kinematic_viscosity.value)
    if fluid.viscosity is None:
        raise ReductionError(f"the fluid {fluid.name!r} has a density but no viscosity; give one in [fluid]")
    return density, np.asarray(fluid.viscosity.value / density)


def fluid_inputs(fluid: Fluid, temperature: Array) -> list[FluidInput]:
    """List what is stated of the fluid with an uncertainty.

    Parameters
    ----------
    fluid : Fluid
        As the survey states it.
    temperature : (R,) array
        Of the runs, K.
    """
    found = []
    one, none = np.ones(temperature.shape), np.zeros(temperature.shape)
    if fluid.density is not None and fluid.density.relative_u:
        # A dynamic viscosity over an uncertain density is an uncertain kinematic one.
        thinner = none if fluid.viscosity is None else -fluid.density.relative_u * one
        found.append(FluidInput("density", "", fluid.density.relative_u * one, thinner))
    viscosity = fluid.kinematic_viscosity or fluid.viscosity
    if viscosity is not None and viscosity.relative_u:
        found.append(FluidInput("viscosity", "", none, viscosity.relative_u * one))
    if fluid.table is not None:
        for name, size, density, thin in (
            ("density", fluid.table.density_u, one, none),
            ("viscosity", fluid.table.viscosity_u, none, one),
        ):
            if size:
                found.append(FluidInput(name, fluid.table.file, size * density, size * thin))
    if fluid.line_pressure is not None and fluid.line_pressure.relative_u:
        found.append(
            _by_difference(fluid, temperature, "line pressure", "", fluid.line_pressure, "line_pressure")
        )
    if fluid.expansion is not None and fluid.expansion.u:
        found.append(_by_difference(fluid, temperature, "expansion", "", fluid.expansion, "expansion"))
    for place, (at, value) in enumerate(fluid.viscosity_at):
        if value.u:
            points = list(fluid.viscosity_at)
            points[place] = (at, Measured(value.value + 0.01 * value.u, value.u))
            changed = replace(fluid, viscosity_at=tuple(points))
            found.append(_difference(fluid, changed, temperature, "viscosity", f"{at - 273.15:g} °C"))
    return found


def _by_difference(
    fluid: Fluid, temperature: Array, name: str, subject: str, value: Measured, key: str
) -> FluidInput:
    stepped = Measured(value.value + 0.01 * (value.u or 0.0), value.u)
    changed = (
        replace(fluid, line_pressure=stepped) if key == "line_pressure" else replace(fluid, expansion=stepped)
    )
    return _difference(fluid, changed, temperature, name, subject)


def _difference(fluid: Fluid, changed: Fluid, temperature: Array, name: str, subject: str) -> FluidInput:
    """What a hundredth of a standard uncertainty changes, as of a whole one."""
    before, after = flowing_properties(fluid, temperature), flowing_properties(changed, temperature)
    density, viscosity = (100.0 * np.log(new / old) for new, old in zip(after, before, strict=True))
    return FluidInput(name, subject, np.asarray(density), np.asarray(viscosity))


def fluid_assumptions(fluid: Fluid) -> list[str]:
    """Say where the properties of the flowing fluid come from, where they follow the temperature."""
    if fluid.is_water:
        return [
            "Water: density by IAPWS-95 at 101.325 kPa and viscosity by IAPWS R12-08, at each run's temperature."
        ]
    if fluid.table is not None:
        return [
            f"{fluid.name}: density and ln ν by a monotone cubic (Fritsch and Butland) between the entries of "
            f"{fluid.table.file}, at each run's temperature."
        ]
    if fluid.line_pressure is not None:
        return [
            f"Air at {fluid.line_pressure.value / 1000:.6g} kPa absolute and a relative humidity of {100 * fluid.humidity:g} %, "
            "taken as incompressible: density by CIPM-2007, viscosity by Sutherland's formula (U.S. Standard Atmosphere, "
            "1976), at each run's temperature."
        ]
    said = []
    if fluid.viscosity_at:
        (cold, thick), (warm, thin) = fluid.viscosity_at
        said.append(
            f"{fluid.name}: viscosity by ASTM D341 through {1e6 * thick.value:g} mm²/s at {cold - 273.15:g} °C and "
            f"{1e6 * thin.value:g} mm²/s at {warm - 273.15:g} °C, at each run's temperature."
        )
    if fluid.expansion is not None and fluid.density_temperature is not None:
        said.append(
            f"{fluid.name}: density from {fluid.density_temperature - 273.15:g} °C to each run's temperature by its "
            "coefficient of expansion."
        )
    return said


def air_cautions(
    fluid: Fluid, runs: list[str], density: Array, gravity: float, piezometric: Array
) -> list[str]:
    """Say where flowing air loses so much of its pressure along the line that its density changes.

    Parameters
    ----------
    fluid : Fluid
        The flowing fluid; nothing is said where it is not air.
    runs : list of str
        Labels of the flowing runs.
    density : (F,) array
        In each of them, kg/m³.
    gravity : float
        m/s².
    piezometric : (F, m) array
        Hydraulic grade line along the line, m.
    """
    if fluid.line_pressure is None or not piezometric.size:
        return []
    known = np.isfinite(piezometric)
    high = np.where(known, piezometric, -np.inf).max(axis=1)
    low = np.where(known, piezometric, np.inf).min(axis=1)
    fall = np.where(known.any(axis=1), high - low, 0.0) * density * gravity / fluid.line_pressure.value
    over = np.flatnonzero(fall > _LARGEST_FALL)
    if not len(over):
        return []
    worst = over[np.argmax(fall[over])]
    names = ", ".join(runs[i] for i in over[:6]) + (" and others" if len(over) > 6 else "")
    return [
        f"The pressure of the air falls by more than {100 * _LARGEST_FALL:g} % along the line in run{'s' * (len(over) > 1)} "
        f"{names} (by {100 * fall[worst]:.1f} % in run {runs[worst]}): its density falls and its velocity rises by as much, which "
        "is not taken into account. Read a shorter length, or less flow."
    ]
