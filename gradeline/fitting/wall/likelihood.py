"""The likelihood of the roughness: how far χ² rises away from its minimum, and the interval that this gives."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import stdtrit

from gradeline.fitting.wall.covariance import (
    LogSlopeCovariance,
    log_slope_covariance,
    scatter_is_known,
    scatter_of,
)
from gradeline.fitting.wall.data import WallData, WallFit, log_residual
from gradeline.fitting.wall.minimum import RoughnessGrid

__all__ = ["likelihood_interval", "likelihood_rise"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def likelihood_interval(
    data: WallData,
    used: Mask,
    covariance: LogSlopeCovariance,
    roughness: float,
    grid: RoughnessGrid,
    dof: float,
    level: float,
) -> tuple[float, float, float]:
    """Return the likelihood interval of ε and its one-sided upper bound.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use, all above 0.
    covariance : LogSlopeCovariance
        Of these, held fixed.
    roughness : float
        ε of the minimum, m.
    grid : RoughnessGrid
        Of that data.
    dof : float
        Degrees of freedom of the scatter, dimensionless; infinite where it is known.
    level : float
        Coverage of the interval, 0 to 1, dimensionless.

    Returns
    -------
    tuple of float
        Low, high and the one-sided 95 % upper bound, m; NaN where the data set no bound.

    Notes
    -----
    Δχ² <= t²(ν): not symmetric, and bounded below by 0.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> from gradeline.fitting.wall.minimum import roughness_grid
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> covariance = log_slope_covariance(data, fit.roughness, fit.used, scatter_of(fit))
    >>> found = likelihood_interval(data, fit.used, covariance, fit.roughness, roughness_grid(data), np.inf, 0.95)
    >>> found == (fit.low, fit.high, fit.upper95)
    True
    """

    def above(value: float) -> float:
        return float(covariance.squares(log_residual(data, used, value))) - least

    least = float(covariance.squares(log_residual(data, used, roughness)))
    two_sided = (
        float(stdtrit(dof, 0.5 + level / 2.0)) ** 2 if np.isfinite(dof) else _normal(0.5 + level / 2.0) ** 2
    )
    one_sided = float(stdtrit(dof, 0.95)) ** 2 if np.isfinite(dof) else _normal(0.95) ** 2
    low = 0.0
    if roughness > 0 and above(0.0) > two_sided:
        low = float(brentq(lambda value: above(value) - two_sided, 0.0, roughness, xtol=1e-20))
    highs = []
    rougher = grid.roughness > roughness
    beyond = grid.roughness[rougher]
    climb = covariance.squares(grid.residual(data, used)[rougher]) - least
    for rise in (two_sided, one_sided):
        over = np.flatnonzero(climb > rise)
        if not len(over):
            highs.append(float("nan"))
            continue
        start = roughness if over[0] == 0 else float(beyond[over[0] - 1])
        highs.append(
            float(
                brentq(
                    lambda value, rise=rise: above(value) - rise, start, float(beyond[over[0]]), xtol=1e-20
                )
            )
        )
    return low, highs[0], highs[1]


def _normal(probability: float) -> float:
    return float(stdtrit(1e9, probability))


def likelihood_rise(data: WallData, fit: WallFit, roughness: Array) -> Array:
    """Return how far each roughness lies above the best one in the sum of squares.

    Parameters
    ----------
    data : WallData
        What was fitted.
    fit : WallFit
        The outcome.
    roughness : (G,) array
        ε, m, at least 0.

    Returns
    -------
    (G,) array
        Δχ² = r' C⁻¹ r less its minimum, with C as the fit left it, dimensionless; the interval is where it is at most
        t²(ν). exp(−Δχ²/2) is the likelihood relative to its greatest where the scatter is known. NaN for a single slope
        of unknown scatter.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> likelihood_rise(data, fit, np.array([fit.low, fit.roughness, fit.high])).round(2).tolist()
    [3.84, 0.0, 3.84]
    """
    if not scatter_is_known(data, fit, fit.used):
        return np.full(len(roughness), np.nan)
    covariance = log_slope_covariance(data, fit.roughness, fit.used, scatter_of(fit))
    residual = log_residual(data, fit.used, roughness[:, None, None])
    least = float(covariance.squares(log_residual(data, fit.used, fit.roughness)))
    return np.asarray(covariance.squares(residual) - least)
