"""Cross-sections that are not circles: hydraulic diameter and the f·Re of their laminar flow."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = [
    "CIRCLE",
    "annulus_laminar_constant",
    "hydraulic_diameter",
    "rectangle_laminar_constant",
]

Array = npt.NDArray[np.float64]

#: f·Re of laminar flow in a circle (Hagen–Poiseuille), dimensionless.
CIRCLE = 64.0

#: Odd terms of the series of a rectangle that are summed; the rest falls as the fifth power: below 1e-12.
_TERMS = 200
#: Below this ratio of diameters the closed form of an annulus loses digits.
_SMALLEST_RATIO = 1e-12


def hydraulic_diameter(area: npt.ArrayLike, perimeter: npt.ArrayLike) -> Array:
    """Return the hydraulic diameter of a section that flows full.

    Parameters
    ----------
    area : array_like
        Cross-section, m², above 0.
    perimeter : array_like
        Wetted perimeter, m, no less than that of a circle of the same area.

    Returns
    -------
    ndarray
        4 A/P, m; the bore where the section is a circle.

    Raises
    ------
    ValueError
        Where an area is not above 0 or a perimeter is shorter than that of the circle of the same area.

    References
    ----------
    By definition; of all sections of one area the circle has the shortest perimeter.

    Examples
    --------
    A square has its side.

    >>> print(hydraulic_diameter(0.09, 1.2).round(12))
    0.3
    """
    section, wetted = np.asarray(area, dtype=np.float64), np.asarray(perimeter, dtype=np.float64)
    if (section <= 0).any():
        raise ValueError(f"the area must be above 0 m2: {section[section <= 0].flat[0]:.6g}")
    if (wetted < 2.0 * np.sqrt(np.pi * section) * (1.0 - 1e-9)).any():
        raise ValueError("the perimeter is shorter than that of a circle of the same area")
    return np.asarray(4.0 * section / wetted)


def rectangle_laminar_constant(aspect: npt.ArrayLike) -> Array:
    """Return f·Re of laminar flow in a rectangular duct, f the Darcy friction factor.

    Parameters
    ----------
    aspect : array_like
        Shorter side over longer side (or the other way round), dimensionless, above 0; 0 stands for parallel
        plates.

    Returns
    -------
    ndarray
        f·Re on the hydraulic diameter, dimensionless: 56.91 for a square, 96 for parallel plates.

    Raises
    ------
    ValueError
        Where an aspect is below 0 or not finite.

    Notes
    -----
    The Fourier series of the velocity, integrated over the section: with a the shorter side over the longer,

    f·Re = 96 / ((1 + a)² (1 − (192 a/π⁵) Σ tanh(n π/2a)/n⁵)), n = 1, 3, 5 …

    References
    ----------
    R. K. Shah, A. L. London, Laminar Flow Forced Convection in Ducts, Academic Press 1978, ch. VII (from memory;
    the tests solve the equation of motion on a grid and compare).

    Examples
    --------
    >>> print(rectangle_laminar_constant([1.0, 0.5, 0.0]).round(3))
    [56.908 62.192 96.   ]
    """
    given = np.asarray(aspect, dtype=np.float64)
    if not (np.isfinite(given) & (given >= 0)).all():
        raise ValueError("the ratio of the sides of a rectangle must be 0 or more")
    with np.errstate(divide="ignore"):
        ratio = np.where(given > 1.0, 1.0 / given, given)
        n = np.arange(1.0, 2.0 * _TERMS, 2.0)
        series = (np.tanh(n * np.pi / (2.0 * ratio[..., None])) / n**5).sum(axis=-1)
    return np.asarray(96.0 / ((1.0 + ratio) ** 2 * (1.0 - 192.0 * ratio / np.pi**5 * series)))


def annulus_laminar_constant(ratio: npt.ArrayLike) -> Array:
    """Return f·Re of laminar flow in a concentric annulus, f the Darcy friction factor.

    Parameters
    ----------
    ratio : array_like
        Inner over outer diameter, dimensionless, from 0 (a circle without a core) to below 1.

    Returns
    -------
    ndarray
        f·Re on the hydraulic diameter (outer less inner), dimensionless: towards 96 for a narrow gap. The thinnest
        wire along the axis already moves it off 64.

    Raises
    ------
    ValueError
        Where a ratio lies outside 0 to 1, or is 1.

    Notes
    -----
    f·Re = 64 (1 − r)² / (1 + r² + (1 − r²)/ln r), r the ratio.

    References
    ----------
    H. Lamb, Hydrodynamics, the flow between coaxial tubes; Shah and London 1978, ch. XII (from memory; the tests
    integrate the velocity and compare).

    Examples
    --------
    >>> print(annulus_laminar_constant([0.0, 0.5, 0.999]).round(3))
    [64.    95.25  96.   ]
    """
    r = np.asarray(ratio, dtype=np.float64)
    if not ((r >= 0) & (r < 1)).all():
        raise ValueError("the inner diameter over the outer one must be from 0 to below 1")
    safe = np.clip(r, _SMALLEST_RATIO, None)
    near = safe > 0.99  # the closed form loses digits there: the gap is two plates, bent
    plain = np.where(near, 0.5, safe)
    closed = CIRCLE * (1.0 - plain) ** 2 / (1.0 + plain**2 + (1.0 - plain**2) / np.log(plain))
    bent = 96.0 / (1.0 + (1.0 - safe) ** 2 / 60.0)
    return np.asarray(np.where(r < _SMALLEST_RATIO, CIRCLE, np.where(near, bent, closed)))
