"""Friction of walls covered with uniform sand: between smooth and rough it dips, where Colebrook–White glides.

A wall with grains of one size sheds its smooth skin all at once; a commercial pipe, with roughness of many sizes, bit by
bit. The two laws agree at both ends and lie up to a quarter apart between.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

__all__ = ["roughness_function", "sand_grain", "sand_grain_sensitivities"]

Array = npt.NDArray[np.float64]

_LN_10 = math.log(10.0)
#: 1/√f + 2 log₁₀(ε/3.7 D) of the smooth law of Prandtl, less 2 log₁₀ ε⁺.
_SMOOTH = 2.0 * math.log10(math.sqrt(8.0) / (2.51 * 3.7))
#: From 1/√f − 2 log₁₀(r/ε), as the sand was measured, to the same with the rough limit taken off.
_ROUGH = 2.0 * math.log10(7.4)
#: Slopes and heights of the five straight pieces over log₁₀ ε⁺.
_SLOPES = np.array([2.0, 1.13, 0.0, -0.588, 0.0])
_HEIGHTS = np.array([_SMOOTH, 1.18 - _ROUGH, 2.14 - _ROUGH, 2.81 - _ROUGH, 0.0])
#: Where each piece meets the next, so that there is no jump: 3.5, 7.1, 13.8 and 66 (published: 3.5, 7.1, 14.1, 67.6).
_JOINTS = (_HEIGHTS[1:] - _HEIGHTS[:-1]) / (_SLOPES[:-1] - _SLOPES[1:])
_SMALLEST = 1e-12
_STEPS = 40
_CLOSE = 1e-14


def roughness_function(roughness_reynolds: npt.ArrayLike) -> Array:
    """Return by how much 1/√f of a sand wall exceeds its fully rough value at the same relative roughness.

    Parameters
    ----------
    roughness_reynolds : array_like
        ε⁺ = ε u*/ν, dimensionless, above 0.

    Returns
    -------
    ndarray
        1/√f − 2 log₁₀(3.7 D/ε), dimensionless: 0 when fully rough, and 2 log₁₀ ε⁺ − 1.033 when smooth.

    Notes
    -----
    With L = log₁₀ ε⁺ and r the radius, sand walls have 1/√f − 2 log₁₀(r/ε) = 1.18 + 1.13 L (ε⁺ from 3.5), 2.14 (from
    7.1), 2.81 − 0.588 L (from 14.1) and 1.74 (above 67.6), below that the smooth law. The pieces are joined where they
    cross. Its ends are those of `gradeline.hydraulics.friction.colebrook_white`: Prandtl's law with 2.51, von Kármán's
    with 3.7.

    References
    ----------
    J. Nikuradse, VDI-Forschungsheft 361 (1933), in English as NACA TM 1292 (1950); the constants are from memory. That
    the five pieces meet within 0.01 of each other in log₁₀ ε⁺ where the paper ends them is a check on all of them.

    Examples
    --------
    >>> print(roughness_function([1.0, 10.0, 100.0]).round(3))
    [-1.033  0.402  0.   ]
    """
    level = np.log10(np.asarray(roughness_reynolds, dtype=np.float64))
    piece = np.searchsorted(_JOINTS, level)
    return np.asarray(_HEIGHTS[piece] + _SLOPES[piece] * level)


def _root(reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike) -> tuple[Array, Array, Array]:
    """1/√f, the slope of the roughness function there, and the relative roughness, at least next to nothing."""
    re, rel = np.broadcast_arrays(
        np.asarray(reynolds, dtype=np.float64), np.asarray(relative_roughness, dtype=np.float64)
    )
    rel = np.maximum(rel, _SMALLEST)
    rough = 2.0 * np.log10(3.7 / rel)
    level = np.log10(rel * np.where(re > 0, re, np.nan) / math.sqrt(8.0))
    root = np.full(re.shape, 7.0)
    slope = np.zeros(re.shape)
    # The left side rises with 1/√f everywhere, so that Newton's steps settle after they crossed the joints.
    for _ in range(_STEPS):
        along = level - np.log10(root)
        piece = np.searchsorted(_JOINTS, along)
        slope = _SLOPES[piece]
        step = (root - rough - _HEIGHTS[piece] - slope * along) / (1.0 + slope / (_LN_10 * root))
        root = np.maximum(root - step, 0.3)
        if not (np.abs(step) > _CLOSE * root).any():
            break
    return root, slope, rel


def sand_grain(reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike) -> Array:
    """Return the Darcy friction factor of turbulent flow in a pipe lined with uniform sand.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number on the bore, dimensionless, above 0 (the law is meant for turbulent flow, above 4000).
    relative_roughness : array_like
        Size of the grains over bore, dimensionless; 0 is the hydraulically smooth law, and so is a grain that does not
        reach through the sublayer (ε⁺ below 3.5).

    Returns
    -------
    ndarray
        Darcy friction factor, dimensionless; NaN where the Reynolds number is not above 0.

    Notes
    -----
    1/√f = 2 log₁₀(3.7 D/ε) + `roughness_function` (ε⁺) with ε⁺ = (ε/D) Re √(f/8), solved by Newton's method.

    References
    ----------
    As `roughness_function`.

    Examples
    --------
    >>> print(sand_grain(1e5, [0.0, 1e-3, 1e-2]).round(5))
    [0.01799 0.01852 0.0379 ]
    """
    return np.asarray(_root(reynolds, relative_roughness)[0] ** -2.0)


def sand_grain_sensitivities(
    reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike
) -> tuple[Array, Array, Array]:
    """Return the friction factor of a sand wall with its two derivatives.

    Parameters
    ----------
    reynolds : array_like
        Reynolds number on the bore, dimensionless, above 0.
    relative_roughness : array_like
        Size of the grains over bore, dimensionless.

    Returns
    -------
    f : ndarray
        Darcy friction factor, dimensionless.
    dlnf_dlnre : ndarray
        ∂ ln f/∂ ln Re at fixed relative roughness, dimensionless; above 0 where f rises to its rough value.
    dlnf_drel : ndarray
        ∂ ln f per unit of relative roughness, dimensionless; 0 on a smooth wall.

    Notes
    -----
    With m the slope of the roughness function over log₁₀ ε⁺ and x = 1/√f: ∂ ln f/∂ ln Re = −2m/(x ln 10 + m) and
    ∂ ln f/∂(ε/D) = 2 (2 − m)/((ε/D)(x ln 10 + m)).

    References
    ----------
    Derived from `roughness_function`.

    Examples
    --------
    >>> f, by_reynolds, by_roughness = sand_grain_sensitivities(1e5, 0.0)
    >>> print(f"{f:.5f} {by_reynolds:.4f} {by_roughness:.1f}")
    0.01799 -0.2087 0.0
    """
    root, slope, rel = _root(reynolds, relative_roughness)
    below = root * _LN_10 + slope
    return (
        np.asarray(root**-2.0),
        np.asarray(-2.0 * slope / below),
        np.asarray(2.0 * (2.0 - slope) / (rel * below)),
    )
