"""Local gravity from latitude and altitude."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

__all__ = ["STANDARD_GRAVITY", "normal_gravity"]

#: Standard gravity, m/s², exact by definition (3rd CGPM, 1901).
STANDARD_GRAVITY = 9.80665

# WGS 84, NIMA TR8350.2: semi-major axis m, flattening, GM m³/s², rotation rad/s
_A = 6378137.0
_F = 1.0 / 298.257223563
_GM = 3.986004418e14
_OMEGA = 7.292115e-5

_B = _A * (1.0 - _F)
_E2 = _A**2 - _B**2
_E = math.sqrt(_E2)
_Q0 = 0.5 * ((1.0 + 3.0 * _B**2 / _E2) * math.atan2(_E, _B) - 3.0 * _B / _E)


def normal_gravity(latitude_rad: npt.ArrayLike, altitude: npt.ArrayLike = 0.0) -> npt.NDArray[np.float64]:
    """Return normal gravity of the WGS 84 ellipsoid at a latitude and an altitude.

    Parameters
    ----------
    latitude_rad : array_like
        Geodetic latitude, rad, from −π/2 to π/2.
    altitude : array_like
        Height above the ellipsoid, m, from −500 to 10 000; height above sea level is within 110 m of it, which
        is 3.4e-5 of gravity.

    Returns
    -------
    ndarray
        m/s². True gravity differs from it by some 1e-5 to 1e-4 relative.

    Raises
    ------
    ValueError
        Where a latitude is beyond ±π/2 (degrees given for radians) or an altitude out of range.

    Notes
    -----
    The closed form at any height, in ellipsoidal harmonic coordinates; on the ellipsoid it is Somigliana's
    formula. The usual series to second order in the height is off by 5e-9 relative at 1000 m.

    References
    ----------
    X. Li and H.-J. Götze, Ellipsoid, geoid, gravity, geodesy, and geophysics, Geophysics 66 (2001) 1660–1668,
    doi:10.1190/1.1487109. Constants: NIMA TR8350.2.

    Examples
    --------
    >>> import math
    >>> print(f"{normal_gravity(math.radians(53.4), 38.0):.5f}")
    9.81358
    """
    phi, height = np.asarray(latitude_rad, dtype=np.float64), np.asarray(altitude, dtype=np.float64)
    if (np.abs(phi) > math.pi / 2 + 1e-12).any():
        raise ValueError(f"latitude lies outside -pi/2..pi/2 rad: {phi[np.abs(phi) > math.pi / 2].flat[0]}")
    if ((height < -500.0) | (height > 10_000.0)).any():
        wrong = height[(height < -500.0) | (height > 10_000.0)].flat[0]
        raise ValueError(f"altitude lies outside -500..10000 m: {wrong}")
    reduced = np.arctan2(_B * np.sin(phi), _A * np.cos(phi))
    axial = _B * np.sin(reduced) + height * np.sin(phi)
    radial = _A * np.cos(reduced) + height * np.cos(phi)
    square = radial**2 + axial**2
    ratio, skew = square / _E2, (radial**2 - axial**2) / _E2
    # cos² and sin² of the reduced latitude on the confocal ellipsoid through the point, and its minor axis
    cos2 = 0.5 + 0.5 * ratio - np.sqrt(0.25 + 0.25 * ratio**2 - 0.5 * skew)
    sin2 = 1.0 - cos2
    minor = np.sqrt(square - _E2 * cos2)
    q = 3.0 * (1.0 + minor**2 / _E2) * (1.0 - minor / _E * np.arctan2(_E, minor)) - 1.0
    major2 = minor**2 + _E2
    pull = (
        _GM / major2
        + _OMEGA**2 * _A**2 * _E * q / (major2 * _Q0) * (0.5 * sin2 - 1.0 / 6.0)
        - _OMEGA**2 * minor * cos2
    )
    return np.asarray(pull * np.sqrt(major2 / (minor**2 + _E2 * sin2)))
