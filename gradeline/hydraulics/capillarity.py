"""The rise of a liquid in a narrow tube."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["capillary_rise"]

Array = npt.NDArray[Any]


def capillary_rise(
    *,
    bore: npt.ArrayLike,
    density: npt.ArrayLike,
    gravity: npt.ArrayLike,
    surface_tension: npt.ArrayLike,
    contact_angle: npt.ArrayLike = 0.0,
) -> Array:
    """Return how far a liquid stands too high in a narrow open tube (Jurin).

    Parameters
    ----------
    bore : array_like
        Bore of the tube, m, above 0; the formula is meant for bores below about 5 mm.
    density : array_like
        Density of the liquid, kg/m³.
    gravity : array_like
        Local gravity, m/s².
    surface_tension : array_like
        Of the liquid against air, N/m.
    contact_angle : array_like
        Between liquid and wall, rad; 0 for water on clean glass. Beyond π/2 the liquid stands too low.

    Returns
    -------
    ndarray
        Rise 4 σ cos θ/(ρ g d), m; negative where the liquid does not wet the wall.

    References
    ----------
    Jurin's law, in any text on fluid mechanics. In wider tubes it overstates the rise: the meniscus is no
    longer a part of a sphere.

    Examples
    --------
    >>> rise = capillary_rise(bore=0.004, density=998.2, gravity=9.80665, surface_tension=0.0727)
    >>> print(f"{1000 * rise:.2f} mm")
    7.43 mm
    """
    tension = np.asarray(surface_tension) * np.cos(np.asarray(contact_angle))
    rise: Array = 4.0 * tension / (np.asarray(density) * np.asarray(gravity) * np.asarray(bore))
    return rise
