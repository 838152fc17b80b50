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
_NEAR = 1e-2  # a step beyond this share of ε is no polish
_ROUNDING = 1e-13  # what the last step is at most, as a share of ε
# Share of ε that a search leaves: where steps take it from there, and where they do not.
_COARSE, _FINE = 1e-4, 1e-9


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


def _minimum(squares: Callable[[float], float], at_grid: Array, grid: Array, within: float) -> float:
    """Minimise over ε >= 0, from a grid that cannot miss the basin, to within a share of ε."""
    best = int(np.argmin(at_grid))
    if best == 0:
        # Between 0 and the first step the slope decides.
        inside = minimize_scalar(
            squares, bounds=(0.0, float(grid[1])), method="bounded", options={"xatol": 1e-7 * float(grid[1])}
        )
        return float(inside.x) if inside.fun < at_grid[0] - 1e-12 else 0.0
    low, high = float(grid[best - 1]), float(grid[min(best + 1, len(grid) - 1)])
    found = minimize_scalar(squares, bounds=(low, high), method="bounded", options={"xatol": within * high})
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
    residual = grid.residual(data, used)
    found, covariance, stands = _polished(
        data, used, *_searched(data, used, grid, residual, roughness, scatter, _COARSE), scatter
    )
    if stands:
        return found, covariance
    # The minimum is an edge, or a flat one: the search alone has to find it.
    searched = _searched(data, used, grid, residual, found, scatter, _FINE)
    return _polished(data, used, *searched, scatter)[:2]


def _searched(
    data: WallData,
    used: Mask,
    grid: RoughnessGrid,
    residual: Array,
    roughness: float,
    scatter: SlopeScatter,
    within: float,
) -> tuple[float, LogSlopeCovariance]:
    """Search for the minimum to within a share of ε, the covariance renewed until ε stands."""
    covariance = log_slope_covariance(data, roughness, used, scatter)
    for _ in range(_ROUNDS):
        at_grid = covariance.squares(residual)
        fixed = covariance

        def squares(value: float, fixed: LogSlopeCovariance = fixed) -> float:
            return float(fixed.squares(log_residual(data, used, value)))

        new = _minimum(squares, at_grid, grid.roughness, within)
        covariance = log_slope_covariance(data, new, used, scatter)
        done = abs(new - roughness) <= max(10 * within, 1e-6) * max(new, roughness)
        roughness = new
        if done:
            break
    return roughness, covariance


def _polished(
    data: WallData, used: Mask, roughness: float, covariance: LogSlopeCovariance, scatter: SlopeScatter
) -> tuple[float, LogSlopeCovariance, bool]:
    """Take ε from the digits that a search for a minimum gives to rounding, by Gauss–Newton steps; say whether they stand."""
    if roughness == 0:
        return roughness, covariance, True
    for _ in range(_ROUNDS):
        gradient = law_gradient(data, used, roughness)
        turned = covariance.solve(gradient)
        information = float((gradient * turned).sum())
        step = (
            float((turned * log_residual(data, used, roughness)).sum()) / information
            if information > 0
            else float("inf")
        )
        if not abs(step) <= _NEAR * roughness:
            return roughness, covariance, False
        roughness += step
        covariance = log_slope_covariance(data, roughness, used, scatter)
        if abs(step) <= _ROUNDING * roughness:
            return roughness, covariance, True
    return roughness, covariance, False
