"""A chain of fluid legs between two points: the pressure along it, and the head that a compound manometer shows."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["chain_pressure", "compound_manometer_head"]

Array = npt.NDArray[Any]


def chain_pressure(
    density: npt.ArrayLike, start: npt.ArrayLike, end: npt.ArrayLike, *, gravity: npt.ArrayLike
) -> Array:
    """Return the pressure at the beginning of a chain of legs less that at its end.

    Parameters
    ----------
    density : (L, ...) array_like
        Density of the fluid in each leg, kg/m³.
    start, end : (L, ...) array_like
        Elevation at which each leg begins and ends above one datum, m.
    gravity : array_like
        Local gravity, m/s².

    Returns
    -------
    ndarray
        Σ ρ_k g (end_k − start_k), Pa. Walked backwards the chain gives the negative.

    References
    ----------
    Hydrostatics: the pressure falls by ρ g for each metre up.

    Examples
    --------
    Water 10 cm, oil of 850 kg/m³ 20 cm, mercury 35 cm below air at 85.6 kPa (Cengel and Cimbala, Fluid Mechanics,
    Ex. 3-6: 130 kPa).

    >>> p = chain_pressure([1000.0, 850.0, 13600.0], [0.1, 0.2, 0.0], [0.0, 0.0, 0.35], gravity=9.81)
    >>> print(f"{85.6 + p / 1000:.1f} kPa")
    129.6 kPa
    """
    rise = np.asarray(end) - np.asarray(start)
    pressure: Array = (np.asarray(density) * rise).sum(axis=0) * np.asarray(gravity)
    return pressure


def compound_manometer_head(
    reading: npt.ArrayLike,
    *,
    tap_elevation: npt.ArrayLike,
    tap_2_elevation: npt.ArrayLike,
    density: npt.ArrayLike,
    leg_density: npt.ArrayLike,
    leg_rise: npt.ArrayLike,
    leg_reading: npt.ArrayLike,
    leg_tap: npt.ArrayLike,
    leg_tap_2: npt.ArrayLike,
) -> Array:
    """Return the head, or the difference of heads, that a chain of legs shows.

    Parameters
    ----------
    reading : array_like
        The first level that is read, m above datum.
    tap_elevation, tap_2_elevation : array_like
        Elevation of the tap where the chain begins and of the one where it ends, m; 0 for the second where the chain
        ends open.
    density : array_like
        Density of the flowing fluid, kg/m³, above 0.
    leg_density : (L, ...) array_like
        Density of the fluid in each leg, kg/m³. A chain that ends open has a last leg of air down to the datum, so
        that its pressure refers to the atmosphere there.
    leg_rise : (L, ...) array_like
        Rise of each leg from its fixed ends and from its levels but the first, m.
    leg_reading, leg_tap, leg_tap_2 : (L, ...) array_like
        How often the first level and the two taps enter the rise of each leg, dimensionless: 1, 0 or −1.

    Returns
    -------
    ndarray
        h₁ − h₂, or h where the chain ends open, m of flowing fluid: Σ (ρ_k/ρ) Δz_k + z₁ − z₂.

    References
    ----------
    `chain_pressure`, with h = z + p/(ρ g) at both ends.

    Examples
    --------
    A u-tube of mercury under water, taps level, read at its two menisci 0.1 m apart: 12.6 times the deflection.

    >>> head = compound_manometer_head(-0.5, tap_elevation=0.0, tap_2_elevation=0.0, density=1000.0,
    ...                                leg_density=[1000.0, 13600.0, 1000.0], leg_rise=[0.0, -0.4, 0.4],
    ...                                leg_reading=[1, -1, 0], leg_tap=[-1, 0, 0], leg_tap_2=[0, 0, 1])
    >>> print(f"{head:.3f}")
    1.260
    """
    upper, lower = np.asarray(tap_elevation), np.asarray(tap_2_elevation)
    rise = (
        np.asarray(leg_rise)
        + np.asarray(leg_reading) * np.asarray(reading)
        + np.asarray(leg_tap) * upper
        + np.asarray(leg_tap_2) * lower
    )
    head: Array = (np.asarray(leg_density) / np.asarray(density) * rise).sum(axis=0) + upper - lower
    return head
