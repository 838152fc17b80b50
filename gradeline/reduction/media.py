"""The fluids and the site of a survey: densities, viscosity and gravity for each run, and how they go with their inputs."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import ReductionError
from gradeline.hydraulics.fluid import (
    air_density,
    mercury_density,
    standard_atmosphere_pressure,
    water_density,
    water_surface_tension,
)
from gradeline.hydraulics.gravity import STANDARD_GRAVITY, normal_gravity
from gradeline.reduction.fluids import flowing_properties
from gradeline.survey import Site, Survey

__all__ = ["Media", "fluid_density", "media_of", "run_temperature_u"]

Array = NDArray[np.float64]

#: Temperature of the air beside columns and gauges, K: it matters by 1e-5 of the head at most.
_AIR_TEMPERATURE = 293.15
#: Half the step of the central difference by temperature, K: small against the curvature, large against rounding.
_STEP = 0.25


@dataclass(frozen=True)
class Media:
    """What fills the line and surrounds it.

    Parameters
    ----------
    density, kinematic_viscosity, surface_tension : (R,) array
        Of the flowing fluid in each run: kg/m³, m²/s, N/m.
    density_by_temperature : (R,) array
        kg/(m³ K).
    viscosity_by_temperature : (R,) array
        ∂ ln ν / ∂T, 1/K.
    air : float
        Density of the air at the site, kg/m³.
    gravity : float
        m/s².
    gravity_u : float
        Relative standard uncertainty of gravity, 0 where it is not stated.
    """

    density: Array
    kinematic_viscosity: Array
    surface_tension: Array
    density_by_temperature: Array
    viscosity_by_temperature: Array
    air: float
    gravity: float
    gravity_u: float


def media_of(survey: Survey) -> Media:
    """Work out the media of a survey.

    Parameters
    ----------
    survey : Survey
        Its fluid, site and run temperatures.

    Returns
    -------
    Media
        For its runs, in their order.
    """
    temperature = survey.runs["temperature"].to_numpy(float)
    fluid = survey.fluid
    density, viscosity = flowing_properties(fluid, temperature)
    by_density, by_viscosity = np.zeros_like(density), np.zeros_like(density)
    tension = np.full_like(density, 0.0728)
    if fluid.follows_temperature:
        sides = _sides(temperature, fluid.span)
        (below, thin), (above, thick) = (flowing_properties(fluid, temperature + step) for step in sides)
        width = np.subtract(*sides[::-1])
        by_density = (above - below) / width
        by_viscosity = np.log(thick / thin) / width
    if fluid.is_water:
        tension = np.asarray(water_surface_tension(temperature))
    gravity, gravity_u = _gravity(survey.site)
    pressure = standard_atmosphere_pressure(survey.site.altitude or 0.0)
    return Media(
        density=density,
        kinematic_viscosity=viscosity,
        surface_tension=tension,
        density_by_temperature=by_density,
        viscosity_by_temperature=by_viscosity,
        air=float(air_density(_AIR_TEMPERATURE, pressure)),
        gravity=gravity,
        gravity_u=gravity_u,
    )


def run_temperature_u(survey: Survey) -> Array:
    """Return the standard uncertainty of each run's own temperature (R,), K: as stated and from its change."""
    stated = np.full(len(survey.runs), survey.stated.temperature_run or 0.0)
    if "temperature_u" not in survey.runs.columns:
        return stated
    return np.asarray(np.hypot(stated, np.nan_to_num(survey.runs["temperature_u"].to_numpy(float))))


def _sides(temperature: Array, span: tuple[float, float] | None) -> tuple[Array, Array]:
    """Steps below and above each temperature that stay where the properties are known."""
    low, high = (-np.inf, np.inf) if span is None else span
    # The lowest temperature of water itself, its freezing point, is not one of its own.
    return np.maximum(-_STEP, low + 0.001 - temperature), np.minimum(_STEP, high - temperature)


def fluid_density(name: str, temperature: Array) -> Array:
    """Return the density of a fluid in a connecting line or a column.

    Parameters
    ----------
    name : str
        ``water``, ``mercury`` or ``air``.
    temperature : array
        K.

    Returns
    -------
    array
        kg/m³.

    Raises
    ------
    ReductionError
        For another name.
    """
    known: dict[str, Callable[[Array], Array]] = {
        "water": water_density,
        "mercury": mercury_density,
        "air": _air_density,
    }
    if name not in known:
        raise ReductionError(f"no density is known for the fluid {name!r}; known are {', '.join(known)}")
    return np.asarray(known[name](temperature))


def _air_density(temperature: Array) -> Array:
    return air_density(temperature, standard_atmosphere_pressure(0.0))


def _gravity(site: Site) -> tuple[float, float]:
    if site.gravity is not None:
        return site.gravity.value, site.gravity.relative_u or 0.0
    if site.latitude is not None:
        return float(normal_gravity(site.latitude, site.altitude or 0.0)), 0.0
    return STANDARD_GRAVITY, 0.0
