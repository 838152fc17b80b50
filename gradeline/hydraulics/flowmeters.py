"""Flow from tanks, pitots and calibrated meters: SI in, SI out, arrays throughout.

Meters with a differential reading are in `gradeline.hydraulics.differential_meters`, weirs in `gradeline.hydraulics.weirs`.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gradeline.errors import ReductionError

__all__ = [
    "buoyancy_factor",
    "interpolated_flow",
    "pitot_flow",
    "volumetric_flow",
    "weighed_flow",
]

Array = NDArray[np.float64]


def volumetric_flow(volume: ArrayLike, time: ArrayLike) -> Array:
    """Return the flow that fills a volume in a time.

    Parameters
    ----------
    volume : array_like
        m³.
    time : array_like
        s, above 0.

    Returns
    -------
    array
        m³/s, Q = V/t.

    Raises
    ------
    ReductionError
        Where a time is not above 0.

    Examples
    --------
    >>> volumetric_flow(0.120, 60.0).item()
    0.002
    """
    _above_zero("time", time)
    return np.asarray(np.asarray(volume, float) / np.asarray(time, float))


def buoyancy_factor(
    density: ArrayLike, air_density: ArrayLike = 1.2, weight_density: ArrayLike = 8000.0
) -> Array:
    """Return what a balance's reading is multiplied by for the buoyancy of the air.

    Parameters
    ----------
    density : array_like
        Of the weighed liquid, kg/m³, above `air_density`.
    air_density : array_like
        kg/m³.
    weight_density : array_like
        Of the weights that the balance was adjusted with, kg/m³; 8000 by convention.

    Returns
    -------
    array
        Dimensionless, (1 − ρ_a/ρ_w)/(1 − ρ_a/ρ); ISO 4185 writes it as 1 + ρ_a (1/ρ − 1/ρ_w), the same to 1e-6.

    Examples
    --------
    >>> round(buoyancy_factor(998.2).item(), 7)
    1.0010534
    """
    air = np.asarray(air_density, float)
    return np.asarray(
        (1.0 - air / np.asarray(weight_density, float)) / (1.0 - air / np.asarray(density, float))
    )


def weighed_flow(
    mass: ArrayLike,
    time: ArrayLike,
    density: ArrayLike,
    air_density: ArrayLike = 1.2,
    weight_density: ArrayLike = 8000.0,
) -> Array:
    """Return the flow that brings a mass on the balance in a time.

    Parameters
    ----------
    mass : array_like
        As the balance shows it, kg.
    time : array_like
        s, above 0.
    density : array_like
        Of the liquid, kg/m³, above 0.
    air_density, weight_density : array_like
        Of the air and of the balance's weights, kg/m³.

    Returns
    -------
    array
        m³/s, Q = m/(ρ t) times `buoyancy_factor` (ISO 4185, weighing method).

    Raises
    ------
    ReductionError
        Where a time or a density is not above 0.

    Examples
    --------
    >>> round(weighed_flow(120.0, 60.0, 998.2).item(), 10)
    0.0020057172
    """
    _above_zero("time", time)
    _above_zero("density", density)
    factor = buoyancy_factor(density, air_density, weight_density)
    return np.asarray(
        np.asarray(mass, float) / (np.asarray(time, float) * np.asarray(density, float)) * factor
    )


def pitot_flow(
    pressure: ArrayLike, density: ArrayLike, bore: ArrayLike, coefficient: ArrayLike = 0.9
) -> Array:
    """Return the discharge of an outlet from the stagnation pressure in its jet.

    Parameters
    ----------
    pressure : array_like
        Pitot pressure against the atmosphere, Pa, at least 0.
    density : array_like
        kg/m³, above 0.
    bore : array_like
        Of the outlet, m.
    coefficient : array_like
        Of discharge c, dimensionless: about 0.9 for a smooth and rounded outlet, 0.8 for a square and sharp one, 0.7 for
        a square one that projects into the barrel (common practice).

    Returns
    -------
    array
        m³/s, Q = c A √(2 p/ρ).

    Raises
    ------
    ReductionError
        Where a density is not above 0.

    Examples
    --------
    >>> round(pitot_flow(100e3, 999.0, 0.0635, 0.9).item(), 5)
    0.04033
    """
    _above_zero("density", density)
    head = 2.0 * np.asarray(pressure, float) / np.asarray(density, float)
    return np.asarray(
        np.asarray(coefficient, float) * np.pi / 4 * np.asarray(bore, float) ** 2 * np.sqrt(head)
    )


def interpolated_flow(reading: ArrayLike, table_reading: ArrayLike, table_flow: ArrayLike) -> Array:
    """Return the flow of a calibrated meter, straight between the points of its table.

    Parameters
    ----------
    reading : array_like
        Dimensionless, or in the unit of the table.
    table_reading : (n,) array_like
        Strictly rising, dimensionless or in a unit of its own.
    table_flow : (n,) array_like
        m³/s, strictly rising.

    Returns
    -------
    array
        m³/s; beyond the table along its last straight, so that the caller can flag it.

    Raises
    ------
    ReductionError
        Where the table is not monotonic or has fewer than two points.

    Examples
    --------
    >>> interpolated_flow([15.0, 45.0], [10.0, 20.0, 40.0], [1e-3, 2e-3, 4e-3]).round(6).tolist()
    [0.0015, 0.0045]
    """
    x, y = np.asarray(table_reading, float), np.asarray(table_flow, float)
    if len(x) < 2 or not ((np.diff(x) > 0).all() and (np.diff(y) > 0).all()):
        raise ReductionError(
            "a meter's table has two points at least, and its readings and its flows rise together"
        )
    at = np.asarray(reading, float)
    part = np.clip(np.searchsorted(x, at) - 1, 0, len(x) - 2)
    return np.asarray(y[part] + (at - x[part]) * (y[part + 1] - y[part]) / (x[part + 1] - x[part]))


def _above_zero(name: str, value: ArrayLike) -> None:
    if not (np.asarray(value, float) > 0).all():
        raise ReductionError(f"every {name} must be above 0; found {float(np.min(np.asarray(value))):g}")
