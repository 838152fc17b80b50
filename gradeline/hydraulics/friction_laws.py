"""The laws of turbulent friction that measured runs are held against, each under its name."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gradeline.hydraulics.friction import colebrook_white, colebrook_white_sensitivities
from gradeline.hydraulics.sand_grain import sand_grain, sand_grain_sensitivities

__all__ = ["COLEBROOK_WHITE", "SAND_GRAIN", "SMOOTH", "FrictionLaw"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class FrictionLaw:
    """A law f(Re, ε/D) of turbulent flow.

    Parameters
    ----------
    name : str
        As tables and sentences call it.
    factor : callable
        f from Re and ε/D.
    sensitivities : callable
        f, ∂ ln f/∂ ln Re and ∂ ln f/∂(ε/D) from Re and ε/D.
    rough : bool
        Whether it depends on ε.
    """

    name: str
    factor: Callable[[npt.ArrayLike, npt.ArrayLike], Array]
    sensitivities: Callable[[npt.ArrayLike, npt.ArrayLike], tuple[Array, Array, Array]]
    rough: bool = True


def _smooth(reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike) -> Array:
    return colebrook_white(reynolds, 0.0 * np.asarray(relative_roughness))


def _smooth_sensitivities(
    reynolds: npt.ArrayLike, relative_roughness: npt.ArrayLike
) -> tuple[Array, Array, Array]:
    f, by_reynolds, by_roughness = colebrook_white_sensitivities(
        reynolds, 0.0 * np.asarray(relative_roughness)
    )
    return f, by_reynolds, 0.0 * by_roughness


#: Commercial walls: roughness of many sizes.
COLEBROOK_WHITE = FrictionLaw("Colebrook–White", colebrook_white, colebrook_white_sensitivities)
#: Walls of uniform sand.
SAND_GRAIN = FrictionLaw("sand-grain", sand_grain, sand_grain_sensitivities)
#: Prandtl's law of the smooth wall, whatever ε.
SMOOTH = FrictionLaw("smooth", _smooth, _smooth_sensitivities, rough=False)
