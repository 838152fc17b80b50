"""Properties for simulated surveys, by a route of their own: IAPWS-95 and IAPWS R12-08 through `chemicals`."""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

ZERO_CELSIUS = 273.15
_KELVIN = np.arange(273.0, 334.0)


@cache
def _table() -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    from chemicals.iapws import iapws95_rho  # noqa: PLC0415 (loaded when asked for: start-up time)
    from chemicals.viscosity import mu_IAPWS  # noqa: PLC0415 (loaded when asked for: start-up time)

    density = np.array([iapws95_rho(kelvin, 101325.0) for kelvin in _KELVIN])
    viscosity = np.array([mu_IAPWS(*state) for state in zip(_KELVIN, density, strict=True)])
    return density, viscosity / density


def density(temperature: ArrayLike) -> NDArray[np.float64]:
    """Density of water, kg/m³, at a temperature in K between 273 and 333, at one atmosphere."""
    return np.interp(temperature, _KELVIN, _table()[0])


def kinematic_viscosity(temperature: ArrayLike) -> NDArray[np.float64]:
    """Kinematic viscosity of water, m²/s, at a temperature in K between 273 and 333; within 0.01 %."""
    return np.exp(np.interp(temperature, _KELVIN, np.log(_table()[1])))


def air_density(temperature: float, altitude: float = 0.0) -> float:
    """Density of dry air, kg/m³, in the ISO 2533 standard atmosphere's pressure at `altitude` (m)."""
    pressure = 101325.0 * (1 - 2.25577e-5 * altitude) ** 5.25588
    return pressure / (287.053 * temperature)
