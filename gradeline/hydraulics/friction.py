"""Pipe friction: the Darcy friction factor, forward and inverse, and what follows from it.

Every function broadcasts over its arguments and returns float64.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gradeline.hydraulics.colebrook_white import (
    colebrook_white,
    colebrook_white_sensitivities,
    relative_roughness,
)
from gradeline.hydraulics.positive import positive

__all__ = [
    "LAMINAR_LIMIT",
    "TURBULENT_LIMIT",
    "colebrook_white",
    "colebrook_white_sensitivities",
    "darcy_friction_factor",
    "entrance_length",
    "friction_factor",
    "kinetic_energy_coefficient",
    "laminar",
    "regime",
    "relative_roughness",
    "roughness_reynolds",
    "velocity_head",
]

Array = npt.NDArray[np.float64]

#: Below this Reynolds number the flow counts as laminar.
LAMINAR_LIMIT = 2000.0
#: Above this Reynolds number the flow counts as turbulent; between the two limits it is critical.
TURBULENT_LIMIT = 4000.0


def _float(value: npt.ArrayLike) -> Array:
    return np.asarray(value, dtype=np.float64)


def laminar(reynolds: npt.ArrayLike) -> Array:
    """Return the Darcy friction factor of laminar pipe flow, 64/Re.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number, dimensionless, above 0 (the law holds below 2000).

    Returns
    -------
    ndarray
        Darcy friction factor, dimensionless; NaN where the Reynolds number is not above 0.

    References
    ----------
    Hagen–Poiseuille flow in the form of the Darcy friction factor: any text on fluid mechanics.

    Examples
    --------
    >>> print(laminar(128.0))
    0.5
    """
    return np.asarray(64.0 / positive(reynolds))


def friction_factor(reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike) -> Array:
    """Return the Darcy friction factor by the law of the regime: 64/Re or Colebrook–White.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number, dimensionless.
    relative_roughness : array_like
        Equivalent sand roughness over bore, dimensionless.

    Returns
    -------
    ndarray
        Darcy friction factor, dimensionless; NaN at rest and in the critical zone (Re 2000 to 4000), where
        no law holds.

    References
    ----------
    `laminar` and `colebrook_white`.

    Examples
    --------
    >>> print(friction_factor([1000.0, 3000.0, 1e5], 1e-4).round(5))
    [0.064      nan 0.01851]
    """
    re, rel = np.broadcast_arrays(_float(reynolds), _float(relative_roughness))
    return np.select(
        [re < LAMINAR_LIMIT, re > TURBULENT_LIMIT], [laminar(re), colebrook_white(re, rel)], default=np.nan
    )


def regime(reynolds: npt.ArrayLike) -> npt.NDArray[np.str_]:
    """Return the name of the flow regime.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number, dimensionless, not negative.

    Returns
    -------
    ndarray of str
        ``"static"`` (Re = 0), ``"laminar"`` (below 2000), ``"critical"`` (2000 to 4000, both ends included),
        ``"turbulent"`` (above 4000); empty where the Reynolds number is NaN or negative.

    Examples
    --------
    >>> print(regime([0.0, 1999.0, 2000.0, 4000.0, 4001.0]))
    ['static' 'laminar' 'critical' 'critical' 'turbulent']
    """
    re = _float(reynolds)
    return np.select(
        [re == 0.0, re > TURBULENT_LIMIT, re >= LAMINAR_LIMIT, re > 0.0],
        ["static", "turbulent", "critical", "laminar"],
        default="",
    )


def kinetic_energy_coefficient(reynolds: npt.ArrayLike, friction_factor: npt.ArrayLike) -> Array:
    """Return the kinetic energy coefficient α of the velocity head α V²/2g.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number, dimensionless.
    friction_factor : array_like
        Darcy friction factor of the turbulent law at that Reynolds number, dimensionless; not used, and free
        to be NaN, below Re 2000.

    Returns
    -------
    ndarray
        2 in laminar flow (and at rest), 1 + 2.7 f in turbulent flow, in the critical zone the two mixed in
        proportion to Re, so that α is continuous.

    Notes
    -----
    1 + 2.7 f is the rounded integral of a logarithmic profile with κ = 0.4: α = 1 + (15/32)(f/κ²)
    − (9/4)(f/8)^1.5/κ³, which is 1 + 2.7 f within 0.005 for f from 0.008 to 0.04.

    References
    ----------
    F. M. White, Fluid Mechanics, ch. 3 and 6, gives 2 for laminar flow and the logarithmic profile (from
    memory); the integral of the profile is done again in the tests.

    Examples
    --------
    >>> print(kinetic_energy_coefficient([1000.0, 3000.0, 1e5], 0.02))
    [2.    1.527 1.054]
    """
    re, f = np.broadcast_arrays(_float(reynolds), _float(friction_factor))
    turbulent = 1.0 + 2.7 * f
    share = (re - LAMINAR_LIMIT) / (TURBULENT_LIMIT - LAMINAR_LIMIT)
    return np.select(
        [re < LAMINAR_LIMIT, re > TURBULENT_LIMIT, re >= LAMINAR_LIMIT],
        [np.full(re.shape, 2.0), turbulent, 2.0 + share * (turbulent - 2.0)],
        default=np.nan,
    )


def velocity_head(velocity: npt.ArrayLike, gravity: npt.ArrayLike) -> Array:
    """Return the velocity head V²/2g, without the kinetic energy coefficient.

    Parameters
    ----------
    velocity : array_like
        Mean velocity over the bore, m/s.
    gravity : array_like
        Local gravity, m/s².

    Returns
    -------
    ndarray
        Velocity head, m of flowing fluid.

    Examples
    --------
    >>> print(f"{velocity_head(2.0, 9.80665):.4f}")
    0.2039
    """
    return np.asarray(_float(velocity) ** 2 / (2.0 * _float(gravity)))


def entrance_length(reynolds: npt.ArrayLike, diameter: npt.ArrayLike) -> Array:
    """Return the length from an inlet in which the flow is not yet developed.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number, dimensionless, not negative.
    diameter : array_like
        Bore, m.

    Returns
    -------
    ndarray
        Entrance length, m: 0.06 Re D up to Re 4000, 4.4 Re^(1/6) D above.

    References
    ----------
    Both formulas stand in B. R. Munson, D. F. Young, T. H. Okiishi, Fundamentals of Fluid Mechanics, ch. 8
    (from memory). Printed laminar factors run from 0.05 to 0.065.

    Examples
    --------
    >>> print(entrance_length([1000.0, 1e6], 0.02).round(2))
    [1.2  0.88]
    """
    re = _float(reynolds)
    ratio = np.where(re > TURBULENT_LIMIT, 4.4 * np.maximum(re, 0.0) ** (1.0 / 6.0), 0.06 * re)
    return np.asarray(ratio * _float(diameter))


def roughness_reynolds(
    roughness: npt.ArrayLike,
    velocity: npt.ArrayLike,
    friction_factor: npt.ArrayLike,
    kinematic_viscosity: npt.ArrayLike,
) -> Array:
    """Return the roughness Reynolds number ε u*/ν; below 5 the wall is hydraulically smooth.

    Parameters
    ----------
    roughness : array_like
        Equivalent sand roughness, m.
    velocity : array_like
        Mean velocity, m/s.
    friction_factor : array_like
        Darcy friction factor, dimensionless, not negative.
    kinematic_viscosity : array_like
        m²/s, above 0.

    Returns
    -------
    ndarray
        ε u*/ν, dimensionless, with the friction velocity u* = V √(f/8).

    References
    ----------
    J. Nikuradse, VDI-Forschungsheft 361 (1933), in English as NACA TM 1292 (1950).

    Examples
    --------
    >>> print(f"{roughness_reynolds(1e-5, 2.0, 0.02, 1e-6):.2f}")
    1.00
    """
    friction_velocity = _float(velocity) * np.sqrt(_float(friction_factor) / 8.0)
    return np.asarray(_float(roughness) * friction_velocity / _float(kinematic_viscosity))


def darcy_friction_factor(
    slope: npt.ArrayLike, diameter: npt.ArrayLike, velocity: npt.ArrayLike, gravity: npt.ArrayLike
) -> Array:
    """Return the Darcy friction factor from a measured friction slope.

    Parameters
    ----------
    slope : array_like
        Friction slope, the fall of the energy grade line per metre of pipe, dimensionless.
    diameter : array_like
        Bore, m.
    velocity : array_like
        Mean velocity, m/s.
    gravity : array_like
        Local gravity, m/s².

    Returns
    -------
    ndarray
        f = 2 g D S/V², dimensionless, of the sign of the slope; NaN at rest.

    References
    ----------
    The Darcy–Weisbach equation, in any text on hydraulics. The Fanning factor is a quarter of this one.

    Examples
    --------
    >>> print(f"{darcy_friction_factor(0.1, 0.025, 2.0, 9.80665):.5f}")
    0.01226
    """
    squared = positive(_float(velocity) ** 2)
    return np.asarray(2.0 * _float(gravity) * _float(diameter) * _float(slope) / squared)
