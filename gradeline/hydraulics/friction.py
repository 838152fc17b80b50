"""Pipe friction: the Darcy friction factor, forward and inverse, and what follows from it.

Every function broadcasts over its arguments and returns float64.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from scipy.special import wrightomega

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

_LN_10 = math.log(10.0)


def _float(value: npt.ArrayLike) -> Array:
    return np.asarray(value, dtype=np.float64)


def _positive(value: npt.ArrayLike) -> Array:
    """Return float64 with NaN in place of what is not above zero, so that no later step warns."""
    array = _float(value)
    return np.where(array > 0, array, np.nan)


def _law(reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike) -> tuple[Array, Array, Array]:
    """Return b = 2.51/Re, the Wright omega number of the law and 1/sqrt(f)."""
    a = _float(relative_roughness) / 3.7
    b = 2.51 / _positive(reynolds)
    c = 2.0 * b / _LN_10
    omega = np.asarray(wrightomega(a / c - np.log(c)))
    # ln c + ln omega as one logarithm: the two nearly cancel where the wall is rough
    return b, omega, (-2.0 / _LN_10) * np.log(c * omega)


def colebrook_white(reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike) -> Array:
    """Return the Darcy friction factor of turbulent pipe flow by the Colebrook–White law, exactly.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number on the bore, dimensionless, above 0 (the law is meant for turbulent flow, above 4000).
    relative_roughness : array_like
        Equivalent sand roughness over bore, dimensionless; 0 is the hydraulically smooth law. A slightly
        negative value continues the law analytically, which the fit of a signed roughness uses.

    Returns
    -------
    ndarray
        Darcy friction factor, dimensionless; NaN where the Reynolds number is not above 0.

    Notes
    -----
    With a = ε/(3.7 D), b = 2.51/Re and c = 2b/ln 10 the law 1/√f = −2 log₁₀(a + b/√f) has the closed form
    1/√f = −(2/ln 10) ln(c ω(a/c − ln c)), where ω is the Wright omega function, ω + ln ω = z. Within 1e-14
    relative of 40-digit arithmetic for Re 4e3 to 1e8 and ε/D 0 to 0.05.

    References
    ----------
    C. F. Colebrook, J. Inst. Civ. Eng. 11 (1939) 133–156, doi:10.1680/ijoti.1939.13150.
    R. M. Corless and D. J. Jeffrey, The Wright ω function, LNCS 2385 (2002) 76–89, doi:10.1007/3-540-45470-5_10.

    Examples
    --------
    >>> print(colebrook_white(1e5, [0.0, 1e-4]).round(6))
    [0.01799  0.018514]
    """
    _, _, root = _law(reynolds, relative_roughness)
    return np.asarray(root**-2.0)


def colebrook_white_sensitivities(
    reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike
) -> tuple[Array, Array, Array]:
    """Return the Colebrook–White friction factor with its two derivatives, all in closed form.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number on the bore, dimensionless, above 0.
    relative_roughness : array_like
        Equivalent sand roughness over bore, dimensionless.

    Returns
    -------
    f : ndarray
        Darcy friction factor, dimensionless.
    dlnf_dlnre : ndarray
        ∂ ln f/∂ ln Re at fixed relative roughness, dimensionless; between −1 and 0.
    dlnf_drel : ndarray
        ∂ ln f per unit of relative roughness, dimensionless; finite at 0.

    Notes
    -----
    Differentiating the law implicitly, with ω as in `colebrook_white`: ∂ ln f/∂ ln Re = −2/(1 + ω) and
    ∂ ln f/∂(ε/D) = 2 √f/(3.7 b (1 + ω)).

    References
    ----------
    Derived from the law of C. F. Colebrook, J. Inst. Civ. Eng. 11 (1939) 133–156.

    Examples
    --------
    >>> f, by_reynolds, by_roughness = colebrook_white_sensitivities(1e5, 0.0)
    >>> print(f"{f:.5f} {by_reynolds:.4f} {by_roughness:.1f}")
    0.01799 -0.2087 301.4
    """
    b, omega, root = _law(reynolds, relative_roughness)
    return (
        np.asarray(root**-2.0),
        np.asarray(-2.0 / (1.0 + omega)),
        np.asarray(2.0 / (3.7 * root * b * (1.0 + omega))),
    )


def relative_roughness(friction_factor: npt.ArrayLike, reynolds: npt.ArrayLike) -> Array:
    """Return the relative roughness that gives a friction factor by the Colebrook–White law.

    Parameters
    ----------
    friction_factor : array_like
        Darcy friction factor, dimensionless, above 0.
    reynolds : array_like
        Reynolds number, dimensionless, above 0.

    Returns
    -------
    ndarray
        Equivalent sand roughness over bore, dimensionless and signed: negative where the friction factor lies
        below the smooth law. NaN where an argument is not above 0.

    Notes
    -----
    ε/D = 3.7 (10^(−1/(2√f)) − 2.51/(Re √f)). Near the smooth law the two terms nearly cancel, so the result
    is good to about 1e-16 absolute, not relative.

    References
    ----------
    C. F. Colebrook, J. Inst. Civ. Eng. 11 (1939) 133–156, solved for ε/D.

    Examples
    --------
    >>> print(f"{relative_roughness(0.0185138660774716, 1e5):.6e}")
    1.000000e-04
    """
    root = 1.0 / np.sqrt(_positive(friction_factor))
    return np.asarray(3.7 * (10.0 ** (-0.5 * root) - 2.51 * root / _positive(reynolds)))


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
    return np.asarray(64.0 / _positive(reynolds))


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
    squared = _positive(_float(velocity) ** 2)
    return np.asarray(2.0 * _float(gravity) * _float(diameter) * _float(slope) / squared)
