"""From a gauge's reading to a piezometric head in metres of flowing fluid above datum.

Every formula is plain arithmetic without comparisons, so that complex arguments pass through: a caller takes
derivatives with respect to any argument by a complex step. The air terms refer every pressure to the atmosphere
at the datum; without them an open column or a gauge reads slopes 0.12 % too high.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt

from gradeline.hydraulics.capillarity import capillary_rise
from gradeline.hydraulics.chain import compound_manometer_head
from gradeline.hydraulics.differential import (
    differential_pressure_difference,
    inverted_u_tube_difference,
    u_tube_difference,
)

__all__ = [
    "HEADS",
    "capillary_rise",
    "closed_multitube_head",
    "piezometer_head",
    "pressure_gauge_head",
    "stated_head",
]

# float64 for float arguments, complex128 where an argument is complex
Array = npt.NDArray[Any]


def piezometer_head(
    reading: npt.ArrayLike,
    *,
    tap_elevation: npt.ArrayLike,
    density: npt.ArrayLike,
    column_density: npt.ArrayLike,
    air_density: npt.ArrayLike,
    gravity: npt.ArrayLike,
    zero: npt.ArrayLike = 0.0,
    inclination: npt.ArrayLike = math.pi / 2,
    bore: npt.ArrayLike | None = None,
    surface_tension: npt.ArrayLike = 0.0728,
    contact_angle: npt.ArrayLike = 0.0,
) -> Array:
    """Return the piezometric head from the height of an open column.

    Parameters
    ----------
    reading : array_like
        Reading R along the scale, m.
    tap_elevation : array_like
        Elevation of the pipe's axis at the tap above datum, m.
    density : array_like
        Density of the flowing fluid, kg/m³, above 0.
    column_density : array_like
        Density of the fluid in the column, kg/m³; its own temperature may differ from the pipe's.
    air_density : array_like
        Density of the air, kg/m³.
    gravity : array_like
        Local gravity, m/s²; used for the capillary rise only.
    zero : array_like
        Elevation of the scale's zero above datum, m.
    inclination : array_like
        Inclination of the scale from the horizontal, rad; π/2 is upright.
    bore : array_like or None
        Bore of the tube, m, for its capillary rise; None where the rise is negligible or already taken off.
    surface_tension : array_like
        Of the column against air, N/m; the default is water at 20 °C.
    contact_angle : array_like
        Between column and tube, rad.

    Returns
    -------
    ndarray
        Head, m of flowing fluid above datum: h = z_tap + (ρ_c/ρ)(z_c − z_tap) − (ρ_a/ρ) z_c, the column's top at
        z_c = z_zero + R sin θ − capillary rise.

    References
    ----------
    Hydrostatics of the column and of the air beside it. `capillary_rise` for the tube.

    Examples
    --------
    >>> h = piezometer_head(0.5, tap_elevation=0.0, zero=0.8, density=998.2, column_density=998.2,
    ...                     air_density=1.2, gravity=9.80665)
    >>> print(f"{h:.5f}")
    1.29844
    """
    top = np.asarray(zero) + np.asarray(reading) * np.sin(np.asarray(inclination))
    if bore is not None:
        top = top - capillary_rise(
            bore=bore,
            density=column_density,
            gravity=gravity,
            surface_tension=surface_tension,
            contact_angle=contact_angle,
        )
    tap, rho = np.asarray(tap_elevation), np.asarray(density)
    head: Array = tap + np.asarray(column_density) / rho * (top - tap) - np.asarray(air_density) / rho * top
    return head


def pressure_gauge_head(
    reading: npt.ArrayLike,
    *,
    tap_elevation: npt.ArrayLike,
    gauge_elevation: npt.ArrayLike,
    density: npt.ArrayLike,
    line_density: npt.ArrayLike,
    air_density: npt.ArrayLike,
    gravity: npt.ArrayLike,
    zero_reading: npt.ArrayLike = 0.0,
) -> Array:
    """Return the piezometric head from a pressure read at the gauge's own elevation.

    Parameters
    ----------
    reading : array_like
        Pressure against the local atmosphere, Pa.
    tap_elevation : array_like
        Elevation of the pipe's axis at the tap above datum, m.
    gauge_elevation : array_like
        Elevation of the gauge above datum, m.
    density : array_like
        Density of the flowing fluid, kg/m³, above 0.
    line_density : array_like
        Density of the fluid in the connecting line, kg/m³.
    air_density : array_like
        Density of the air, kg/m³.
    gravity : array_like
        Local gravity, m/s², above 0.
    zero_reading : array_like
        What the gauge shows when it is open to the atmosphere, Pa; taken off the reading.

    Returns
    -------
    ndarray
        Head, m of flowing fluid above datum:
        h = z_tap + (p + ρ_l g (z_g − z_tap))/(ρ g) − (ρ_a/ρ) z_g.

    References
    ----------
    Hydrostatics of the connecting line and of the air at the gauge.

    Examples
    --------
    >>> h = pressure_gauge_head(50e3, tap_elevation=2.0, gauge_elevation=3.2, density=999.1, line_density=999.1,
    ...                         air_density=1.2, gravity=9.80665)
    >>> print(f"{h:.4f}")
    8.2993
    """
    tap, gauge, rho = np.asarray(tap_elevation), np.asarray(gauge_elevation), np.asarray(density)
    g = np.asarray(gravity)
    shown = np.asarray(reading) - np.asarray(zero_reading)
    pressure_at_tap = shown + np.asarray(line_density) * g * (gauge - tap)
    head: Array = tap + pressure_at_tap / (rho * g) - np.asarray(air_density) / rho * gauge
    return head


def closed_multitube_head(
    reading: npt.ArrayLike,
    *,
    tap_elevation: npt.ArrayLike,
    density: npt.ArrayLike,
    column_density: npt.ArrayLike,
    gauge_density: npt.ArrayLike,
    air_density: npt.ArrayLike,
    gravity: npt.ArrayLike,
    gas_pressure: npt.ArrayLike = 0.0,
    zero: npt.ArrayLike = 0.0,
    inclination: npt.ArrayLike = math.pi / 2,
    bore: npt.ArrayLike | None = None,
    surface_tension: npt.ArrayLike = 0.0728,
    contact_angle: npt.ArrayLike = 0.0,
) -> Array:
    """Return the piezometric head from a column under trapped gas.

    Parameters
    ----------
    reading : array_like
        Reading R along the scale, m.
    tap_elevation : array_like
        Elevation of the pipe's axis at the tap above datum, m.
    density, column_density : array_like
        Density of the flowing fluid and of that in the column, kg/m³.
    gauge_density : array_like
        Density of the trapped gas, kg/m³.
    air_density : array_like
        Density of the air outside, kg/m³.
    gravity : array_like
        Local gravity, m/s², above 0.
    gas_pressure : array_like
        Pressure of the gas at the scale's zero against the local atmosphere, Pa. Where it is not known any value
        serves: it moves all columns of a run alike.
    zero : array_like
        Elevation of the scale's zero above datum, m.
    inclination : array_like
        Inclination of the scale from the horizontal, rad; π/2 is upright.
    bore : array_like or None
        Bore of the tube, m, for its capillary rise; None where the rise is negligible or already taken off.
    surface_tension : array_like
        Of the column against the gas, N/m; the default is water and air at 20 °C.
    contact_angle : array_like
        Between column and tube, rad.

    Returns
    -------
    ndarray
        Head, m of flowing fluid above datum: that of an open column, the gas in the place of the air above the
        scale's zero, and p_gas/(ρ g).

    References
    ----------
    Hydrostatics of column, gas and air. Without pressure and filled with air it is `piezometer_head`.

    Examples
    --------
    >>> h = closed_multitube_head(0.5, tap_elevation=0.0, zero=0.8, density=998.2, column_density=998.2,
    ...                           gauge_density=1.2, air_density=1.2, gravity=9.80665, gas_pressure=9789.0)
    >>> print(f"{h:.4f}")
    2.2984
    """
    base, rho = np.asarray(zero), np.asarray(density)
    gas, air = np.asarray(gauge_density), np.asarray(air_density)
    under_gas = piezometer_head(
        reading,
        tap_elevation=tap_elevation,
        density=density,
        column_density=column_density,
        air_density=gas,
        gravity=gravity,
        zero=zero,
        inclination=inclination,
        bore=bore,
        surface_tension=surface_tension,
        contact_angle=contact_angle,
    )
    head: Array = (
        under_gas + (gas - air) / rho * base + np.asarray(gas_pressure) / (rho * np.asarray(gravity))
    )
    return head


def stated_head(reading: npt.ArrayLike) -> Array:
    """Return the piezometric head where it is what was written down.

    Parameters
    ----------
    reading : array_like
        Piezometric head z + p/(ρ g) above datum, m of flowing fluid, worked out already; any value.

    Returns
    -------
    ndarray
        The same, m: h = R. Neither air nor the fluid of a gauge has any more part in it.

    References
    ----------
    The definition of the piezometric head.

    Examples
    --------
    >>> float(stated_head(1.25))
    1.25
    """
    head: Array = np.array(reading)
    return head


#: The head of each gauge kind by its name in ``survey.toml``. Callers pass the arguments by parameter name.
HEADS: Mapping[str, Callable[..., Array]] = MappingProxyType(
    {
        "piezometer": piezometer_head,
        "closed multitube manometer": closed_multitube_head,
        "u-tube": u_tube_difference,
        "inverted u-tube": inverted_u_tube_difference,
        "compound manometer": compound_manometer_head,
        "pressure gauge": pressure_gauge_head,
        "transducer": pressure_gauge_head,
        "differential transducer": differential_pressure_difference,
        "head": stated_head,
    }
)
