"""The roughness of the least weighted sum of squares: a grid that cannot miss the basin, then steps to rounding."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from gradeline.fitting.wall.covariance import LogSlopeCovariance, SlopeScatter, log_slope_covariance
from gradeline.fitting.wall.data import ROUGHEST, WallData, law_gradient, law_log_slope, log_residual

__all__ = [
    "RoughnessGrid",
    "robust_start",
    "roughness_grid",
    "roughness_steps",
    "settle",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_ROUNDS = 12
_NEAR = 1e-4  # a step beyond this share of ε is no polish


@dataclass(frozen=True)
class RoughnessGrid:
    """Roughnesses from 0 to the roughest, and ln S of the law at each, worked out once.

    Parameters
    ----------
    roughness : (G,) array
        ε, m, rising from 0.
    log_slope : (G, R, K) array
        ln S by the law, dimensionless.
    """

    roughness: Array
    log_slope: Array

    def residual(self, data: WallData, used: Mask) -> Array:
        """Return ln S less that of the law at each roughness (G, R, K), 0 where not used."""
        return np.where(used, np.log(np.where(used, data.slope, 1.0)) - self.log_slope, 0.0)


def roughness_steps(data: WallData, steps: int = 81) -> Array:
    """Return the roughnesses at which a wall is looked at.

    Parameters
    ----------
    data : WallData
        For its bores.
    steps : int
        How many above 0.

    Returns
    -------
    (steps + 1,) array
        0, then ε in even steps of its logarithm up to a tenth of the largest bore, m.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> roughness_steps(example_wall(), 3).round(13).tolist()
    [0.0, 5e-11, 5e-07, 0.005]
    """
    return np.concatenate([[0.0], float(data.diameter.max()) * np.geomspace(1e-9, ROUGHEST, steps)])


def roughness_grid(data: WallData, steps: int = 81) -> RoughnessGrid:
    """Return the law over all roughnesses at which a wall is looked at.

    Parameters
    ----------
    data : WallData
        Velocities, bores, viscosities.
    steps : int
        How many roughnesses above 0.

    Returns
    -------
    RoughnessGrid
        From 0 up.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> roughness_grid(example_wall(), 41).log_slope.shape
    (42, 8, 1)
    """
    roughness = roughness_steps(data, steps)
    return RoughnessGrid(roughness, law_log_slope(data, roughness[:, None, None]))


def robust_start(data: WallData, used: Mask, grid: RoughnessGrid) -> float:
    """Return ε of the least sum of absolute deviations of ln S: a slip of a decade counts once, not a hundred times.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use, all above 0.
    grid : RoughnessGrid
        Of that data.

    Returns
    -------
    float
        ε, one of the grid's, m.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> data.slope[0] *= 10
    >>> round(robust_start(data, np.isfinite(data.slope), roughness_grid(data)), 5)
    0.0001
    """
    residual = grid.residual(data, used)
    return float(grid.roughness[int(np.abs(residual).sum(axis=(1, 2)).argmin())])


def _minimum(squares: Callable[[float], float], at_grid: Array, grid: Array) -> float:
    """Minimise over ε >= 0, from a grid that cannot miss the basin."""
    best = int(np.argmin(at_grid))
    if best == 0:
        # Between 0 and the first step the slope decides.
        inside = minimize_scalar(
            squares, bounds=(0.0, float(grid[1])), method="bounded", options={"xatol": 1e-16}
        )
        return float(inside.x) if inside.fun < at_grid[0] - 1e-12 else 0.0
    low, high = float(grid[best - 1]), float(grid[min(best + 1, len(grid) - 1)])
    found = minimize_scalar(squares, bounds=(low, high), method="bounded", options={"xatol": 1e-9 * high})
    return float(found.x)


def settle(
    data: WallData, used: Mask, grid: RoughnessGrid, roughness: float, scatter: SlopeScatter
) -> tuple[float, LogSlopeCovariance]:
    """Minimise with the covariance at the fitted slopes, renewed until ε stands.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use, all above 0.
    grid : RoughnessGrid
        Of that data.
    roughness : float
        ε to start from, m, at least 0.
    scatter : SlopeScatter
        Of the slopes about the law.

    Returns
    -------
    roughness : float
        ε, m, at least 0.
    covariance : LogSlopeCovariance
        At that roughness.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> found, _ = settle(data, np.isfinite(data.slope), roughness_grid(data), 2e-4, SlopeScatter(0.01))
    >>> round(found, 9)
    0.0001
    """
    covariance = log_slope_covariance(data, roughness, used, scatter)
    residual = grid.residual(data, used)
    for _ in range(_ROUNDS):
        at_grid = covariance.squares(residual)
        fixed = covariance

        def squares(value: float, fixed: LogSlopeCovariance = fixed) -> float:
            return float(fixed.squares(log_residual(data, used, value)))

        new = _minimum(squares, at_grid, grid.roughness)
        covariance = log_slope_covariance(data, new, used, scatter)
        done = abs(new - roughness) <= 1e-6 * max(new, roughness)
        roughness = new
        if done:
            break
    return _polished(data, used, roughness, scatter, covariance)


def _polished(
    data: WallData, used: Mask, roughness: float, scatter: SlopeScatter, covariance: LogSlopeCovariance
) -> tuple[float, LogSlopeCovariance]:
    """Take ε from eight digits, all that a search for a minimum can give, to rounding, by Gauss–Newton steps."""
    for _ in range(_ROUNDS):
        if not roughness > 0:
            break
        gradient = law_gradient(data, used, roughness)
        turned = covariance.solve(gradient)
        information = float((gradient * turned).sum())
        step = (
            float((turned * log_residual(data, used, roughness)).sum()) / information
            if information > 0
            else 0.0
        )
        if not abs(step) <= _NEAR * roughness:
            break  # the minimum is an edge, or a flat one: the search stands
        roughness += step
        covariance = log_slope_covariance(data, roughness, used, scatter)
        if abs(step) <= 1e-15 * roughness:
            break
    return roughness, covariance
