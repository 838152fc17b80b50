"""Gauges between two taps: the difference of piezometric heads, upstream less downstream, from one reading.

The lines from the taps to the gauge are full of one fluid of density ρ_l. Loops in them go up as far as they go down
and cancel; the taps' own elevations stay where that fluid's density is not the flowing one's:
h₁ − h₂ = … + (1 − ρ_l/ρ)(z₁ − z₂). Plain arithmetic without comparisons, as in `gradeline.hydraulics.manometry`.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import numpy.typing as npt

from gradeline.hydraulics.capillarity import capillary_rise

__all__ = ["differential_pressure_difference", "inverted_u_tube_difference", "u_tube_difference"]

Array = npt.NDArray[Any]


def u_tube_difference(
    reading: npt.ArrayLike,
    *,
    tap_elevation: npt.ArrayLike,
    tap_2_elevation: npt.ArrayLike,
    density: npt.ArrayLike,
    line_density: npt.ArrayLike,
    gauge_density: npt.ArrayLike,
    gravity: npt.ArrayLike,
    inclination: npt.ArrayLike = math.pi / 2,
    area_ratio: npt.ArrayLike = 0.0,
    left_bore: npt.ArrayLike | None = None,
    right_bore: npt.ArrayLike | None = None,
    surface_tension: npt.ArrayLike = 0.0,
    contact_angle: npt.ArrayLike = 0.0,
) -> Array:
    """Return the difference of heads from a u-tube of a heavier gauge fluid, its left limb joined upstream.

    Parameters
    ----------
    reading : array_like
        Deflection along the scale, right less left limb, m; of a well-type gauge the rise in its one limb.
    tap_elevation, tap_2_elevation : array_like
        Elevation of the upstream and of the downstream tap above datum, m.
    density : array_like
        Density of the flowing fluid, kg/m³, above 0.
    line_density : array_like
        Density of the fluid in the connecting lines, kg/m³.
    gauge_density : array_like
        Density of the gauge fluid, kg/m³, above that in the lines.
    gravity : array_like
        Local gravity, m/s²; used for the capillary rise only.
    inclination : array_like
        Inclination of the limbs from the horizontal, rad; π/2 is upright.
    area_ratio : array_like
        Cross-section of the limb over that of the well, dimensionless; 0 for two limbs that are both read.
    left_bore, right_bore : array_like or None
        Bores of the limbs, m, for their capillary rise; None where they are equal or the rise is negligible.
    surface_tension : array_like
        Between gauge fluid and line fluid, N/m.
    contact_angle : array_like
        In the gauge fluid, rad; beyond π/2 for mercury.

    Returns
    -------
    ndarray
        h₁ − h₂, m of flowing fluid: ((ρ_g − ρ_l)/ρ) Δ + (1 − ρ_l/ρ)(z₁ − z₂) with Δ = R (sin θ + a/A) less what the
        right limb's capillary rise exceeds the left one's.

    References
    ----------
    Hydrostatics along the chain tap, line, gauge fluid, line, tap. The well falls by R a/A while the limb fills by R:
    volume kept. Capillary rise by Jurin with the difference of the two densities.

    Examples
    --------
    Mercury under water, 32.7 cm: 40.4 kPa (Geankoplis, Transport Processes and Unit Operations, Ex. 2.2-4).

    >>> head = u_tube_difference(0.327, tap_elevation=0.0, tap_2_elevation=0.0, density=1000.0, line_density=1000.0,
    ...                          gauge_density=13600.0, gravity=9.80665)
    >>> print(f"{head * 1000.0 * 9.80665:.0f} Pa")
    40405 Pa
    """
    rho, line, heavy = np.asarray(density), np.asarray(line_density), np.asarray(gauge_density)
    rise = np.asarray(reading) * (np.sin(np.asarray(inclination)) + np.asarray(area_ratio))
    rise = rise - _capillary_excess(
        right_bore, left_bore, heavy - line, gravity, surface_tension, contact_angle
    )
    head: Array = (heavy - line) / rho * rise + _lines(tap_elevation, tap_2_elevation, rho, line)
    return head


def inverted_u_tube_difference(
    reading: npt.ArrayLike,
    *,
    tap_elevation: npt.ArrayLike,
    tap_2_elevation: npt.ArrayLike,
    density: npt.ArrayLike,
    line_density: npt.ArrayLike,
    gauge_density: npt.ArrayLike,
    gravity: npt.ArrayLike,
    inclination: npt.ArrayLike = math.pi / 2,
    left_bore: npt.ArrayLike | None = None,
    right_bore: npt.ArrayLike | None = None,
    surface_tension: npt.ArrayLike = 0.0728,
    contact_angle: npt.ArrayLike = 0.0,
) -> Array:
    """Return the difference of heads from an inverted u-tube with a gas or a lighter liquid above.

    Parameters
    ----------
    reading : array_like
        Deflection along the scale, left less right limb, m; the left limb is joined to the upstream tap.
    tap_elevation, tap_2_elevation : array_like
        Elevation of the upstream and of the downstream tap above datum, m.
    density : array_like
        Density of the flowing fluid, kg/m³, above 0.
    line_density : array_like
        Density of the fluid in lines and limbs, kg/m³.
    gauge_density : array_like
        Density of the gas or liquid above, kg/m³, below that in the lines.
    gravity : array_like
        Local gravity, m/s²; used for the capillary rise only.
    inclination : array_like
        Inclination of the limbs from the horizontal, rad; π/2 is upright.
    left_bore, right_bore : array_like or None
        Bores of the limbs, m, for their capillary rise; None where they are equal or the rise is negligible.
    surface_tension : array_like
        Between the two fluids, N/m; the default is water and air at 20 °C.
    contact_angle : array_like
        In the line fluid, rad; 0 for water on clean glass.

    Returns
    -------
    ndarray
        h₁ − h₂, m of flowing fluid: ((ρ_l − ρ_g)/ρ) Δ + (1 − ρ_l/ρ)(z₁ − z₂).

    References
    ----------
    Hydrostatics, as `u_tube_difference`; the sign is the other way round, since the lighter fluid lies above.

    Examples
    --------
    >>> head = inverted_u_tube_difference(0.3, tap_elevation=0.0, tap_2_elevation=0.0, density=1000.0,
    ...                                   line_density=1000.0, gauge_density=800.0, gravity=9.81)
    >>> print(f"{head:.3f}")
    0.060
    """
    rho, line, light = np.asarray(density), np.asarray(line_density), np.asarray(gauge_density)
    rise = np.asarray(reading) * np.sin(np.asarray(inclination))
    rise = rise - _capillary_excess(
        left_bore, right_bore, line - light, gravity, surface_tension, contact_angle
    )
    head: Array = (line - light) / rho * rise + _lines(tap_elevation, tap_2_elevation, rho, line)
    return head


def differential_pressure_difference(
    reading: npt.ArrayLike,
    *,
    tap_elevation: npt.ArrayLike,
    tap_2_elevation: npt.ArrayLike,
    density: npt.ArrayLike,
    line_density: npt.ArrayLike,
    gravity: npt.ArrayLike,
    zero_reading: npt.ArrayLike = 0.0,
) -> Array:
    """Return the difference of heads from a differential pressure between two taps.

    Parameters
    ----------
    reading : array_like
        Pressure of the upstream side less that of the downstream side at the transducer, Pa.
    tap_elevation, tap_2_elevation : array_like
        Elevation of the upstream and of the downstream tap above datum, m.
    density : array_like
        Density of the flowing fluid, kg/m³, above 0.
    line_density : array_like
        Density of the fluid in the connecting lines, kg/m³.
    gravity : array_like
        Local gravity, m/s², above 0.
    zero_reading : array_like
        What it shows with both sides joined, Pa.

    Returns
    -------
    ndarray
        h₁ − h₂, m of flowing fluid: Δp/(ρ g) + (1 − ρ_l/ρ)(z₁ − z₂). The transducer's own elevation cancels.

    References
    ----------
    Hydrostatics of the two connecting lines.

    Examples
    --------
    >>> head = differential_pressure_difference(9806.65, tap_elevation=1.0, tap_2_elevation=0.0, density=1000.0,
    ...                                         line_density=1000.0, gravity=9.80665)
    >>> print(f"{head:.4f}")
    1.0000
    """
    rho, line = np.asarray(density), np.asarray(line_density)
    pressure = np.asarray(reading) - np.asarray(zero_reading)
    head: Array = pressure / (rho * np.asarray(gravity)) + _lines(tap_elevation, tap_2_elevation, rho, line)
    return head


def _lines(upper: npt.ArrayLike, lower: npt.ArrayLike, density: Array, line_density: Array) -> Array:
    """What lines of another density add, m."""
    part: Array = (1.0 - line_density / density) * (np.asarray(upper) - np.asarray(lower))
    return part


def _capillary_excess(
    rising: npt.ArrayLike | None,
    falling: npt.ArrayLike | None,
    difference: Array,
    gravity: npt.ArrayLike,
    surface_tension: npt.ArrayLike,
    contact_angle: npt.ArrayLike,
) -> Array:
    """How much too large capillarity makes the deflection, m: nothing for bores that are equal or not given."""
    if rising is None or falling is None:
        return np.zeros(())
    one, other = (
        capillary_rise(
            bore=bore,
            density=difference,
            gravity=gravity,
            surface_tension=surface_tension,
            contact_angle=contact_angle,
        )
        for bore in (rising, falling)
    )
    return np.asarray(one - other)
