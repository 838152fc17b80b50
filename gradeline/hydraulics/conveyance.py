"""The older measures of a pipe's friction: the coefficient C of Hazen and Williams, and Manning's n."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gradeline.hydraulics.positive import positive

__all__ = ["hazen_williams_c", "manning_n"]

Array = npt.NDArray[np.float64]

#: 1.318 of the formula in feet, in metres.
_HAZEN_WILLIAMS = 0.8492
RADIUS_POWER, SLOPE_POWER = 0.63, 0.54


def hazen_williams_c(velocity: npt.ArrayLike, diameter: npt.ArrayLike, slope: npt.ArrayLike) -> Array:
    """Return the coefficient C of the Hazen–Williams formula.

    Parameters
    ----------
    velocity : array_like
        Mean velocity, m/s.
    diameter : array_like
        Bore, m.
    slope : array_like
        Friction slope, dimensionless, above 0.

    Returns
    -------
    ndarray
        C = V / (0.8492 R^0.63 S^0.54) with the hydraulic radius R = D/4, in the customary unit m^0.37/s; NaN where an
        argument is not above 0.

    Notes
    -----
    Meant for water near 15 °C in bores above 50 mm at moderate velocities: it knows neither viscosity nor roughness, so
    that C of one pipe changes with the flow.

    References
    ----------
    J. K. Vennard, Elementary Fluid Mechanics: V = 1.318 C R^0.63 S^0.54 in feet and seconds (from memory).

    Examples
    --------
    >>> print(hazen_williams_c(2.0, 0.3, 0.01).round(1))
    144.8
    """
    radius = positive(diameter) / 4.0
    return np.asarray(
        positive(velocity) / (_HAZEN_WILLIAMS * radius**RADIUS_POWER * positive(slope) ** SLOPE_POWER)
    )


def manning_n(velocity: npt.ArrayLike, diameter: npt.ArrayLike, slope: npt.ArrayLike) -> Array:
    """Return Manning's n.

    Parameters
    ----------
    velocity : array_like
        Mean velocity, m/s.
    diameter : array_like
        Bore, m.
    slope : array_like
        Friction slope, dimensionless, above 0.

    Returns
    -------
    ndarray
        n = R^(2/3) √S / V with the hydraulic radius R = D/4, in the customary unit s/m^(1/3); NaN where an argument is not
        above 0.

    Notes
    -----
    Meant for fully rough flow, where f does not depend on Re.

    References
    ----------
    Any text on open channels.

    Examples
    --------
    >>> print(manning_n(2.0, 0.3, 0.01).round(5))
    0.00889
    """
    radius = positive(diameter) / 4.0
    return np.asarray(radius ** (2.0 / 3.0) * np.sqrt(positive(slope)) / positive(velocity))
