"""The trend of ln f against the fitted law over the decades of Re, the roughness profiled out."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.wall.covariance import LogSlopeCovariance, SlopeScatter, log_slope_covariance
from gradeline.fitting.wall.data import ROUGHEST, WallData, law_gradient, log_residual

__all__ = ["trend_against_law", "trend_by_its_own_scatter"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_ROUNDS = 12


def trend_against_law(
    data: WallData, used: Mask, covariance: LogSlopeCovariance, roughness: float, residual: Array
) -> tuple[float, float]:
    """Return the slope of ln f against the law over log10 Re, ε profiled out where it is inside its range.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use.
    covariance : LogSlopeCovariance
        Of these.
    roughness : float
        Fitted ε, m.
    residual : (R, K) array
        ln S less that of the law, dimensionless; 0 where not used.

    Returns
    -------
    trend, u : float
        Per decade of Re, dimensionless; NaN where there is no trend to tell.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> used = np.isfinite(data.slope)
    >>> covariance = log_slope_covariance(data, 1e-4, used, SlopeScatter(np.nan))
    >>> decades = np.log10(data.reynolds)
    >>> trend, u = trend_against_law(data, used, covariance, 1e-4, 0.05 * (decades - decades.mean()))
    >>> round(trend, 2)
    0.05
    """
    columns = _trend_columns(data, used, covariance, roughness)
    if columns is None:
        return float("nan"), float("nan")
    fit = _regress(covariance, columns, residual)
    return (float("nan"), float("nan")) if fit is None else (float(fit[0][0]), float(np.sqrt(fit[1][0, 0])))


def _trend_columns(
    data: WallData, used: Mask, covariance: LogSlopeCovariance, roughness: float, *, about_runs: bool = False
) -> list[Array] | None:
    """log10 Re about its mean, and ε where it is inside its range; None where there is no trend to tell.

    The mean that is independent of the level, or `about_runs` that by the runs' own scatter: where a shared error
    leaves the level loose, the former may lie far outside the runs, and a trend about there is a level as well.
    """
    if used.sum() < 3:
        return None
    decades = np.where(used, np.log10(np.where(used, data.reynolds, 1.0)), 0.0)
    if np.ptp(decades[used]) < 1e-6:
        return None
    ones = used.astype(float)
    solved = np.where(used, 1.0 / covariance.variance, 0.0) if about_runs else covariance.solve(ones)
    centred = np.where(used, decades - float((solved * decades).sum()) / float((solved * ones).sum()), 0.0)
    if roughness > 0:
        return [centred, law_gradient(data, used, roughness) * roughness]
    return [centred]


def _regress(
    covariance: LogSlopeCovariance, columns: list[Array], residual: Array
) -> tuple[Array, Array] | None:
    """Generalised least squares of the residual on columns: (coefficients, their covariance)."""
    turned = [covariance.solve(column) for column in columns]
    normal = np.array([[float((a * b).sum()) for b in turned] for a in columns])
    right = np.array([float((residual * b).sum()) for b in turned])
    if np.linalg.cond(normal) > 1e12:
        return None
    inverse = np.linalg.inv(normal)
    return inverse @ right, inverse


def trend_by_its_own_scatter(
    data: WallData, used: Mask, covariance: LogSlopeCovariance, roughness: float, scatter: SlopeScatter
) -> tuple[float, float, float]:
    """Return the trend, the scatter off the law judged anew with the trend taken out.

    What a trend does to the runs is no scatter: left in, it would make its own uncertainty too wide. ε moves with it.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use, all above 0.
    covariance : LogSlopeCovariance
        Of these.
    roughness : float
        Fitted ε, m.
    scatter : SlopeScatter
        As judged with the trend in it.

    Returns
    -------
    trend, u : float
        Per decade of Re, dimensionless; NaN where there is no trend to tell.
    dof : float
        Degrees of freedom of u, dimensionless.

    Examples
    --------
    S over the law as Re to the power 0.02: 0.046 per decade.

    >>> from dataclasses import replace
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> data = replace(data, slope=data.slope * (data.reynolds / 1e5) ** 0.02)
    >>> used = np.isfinite(data.slope)
    >>> scatter = SlopeScatter(0.01)
    >>> covariance = log_slope_covariance(data, 1e-4, used, scatter)
    >>> trend, u, dof = trend_by_its_own_scatter(data, used, covariance, 1e-4, scatter)
    >>> round(trend, 2), dof
    (0.05, 6.0)
    """
    own = log_slope_covariance(data, roughness, used, SlopeScatter(1e-9)).variance
    nan, freedom = float("nan"), max(float(used.sum()) - 2.0, 1.0)
    found, loose = (nan, nan, freedom), scatter
    for _ in range(_ROUNDS):
        residual = log_residual(data, used, roughness)
        columns = _trend_columns(data, used, covariance, roughness, about_runs=True)
        fit = None if columns is None else _regress(covariance, columns, residual)
        if fit is None or columns is None:
            return nan, nan, freedom
        found = float(fit[0][0]), float(np.sqrt(fit[1][0, 0])), freedom
        rest = residual - np.tensordot(fit[0], np.array(columns), 1)
        rest = rest - np.einsum("rkq,q->rk", covariance.effect, covariance.shared(rest))
        # Relative to what each slope scatters by, beyond the runs' own errors.
        part = np.maximum((covariance.variance - own)[used], 1e-18)
        excess = ((rest[used] ** 2 - own[used] * freedom / used.sum()) / part).sum() / freedom
        factor = float(np.sqrt(max(excess, 1e-6)))
        loose = loose.times(factor)
        step = float(np.clip(fit[0][1], -1.0, 1.0)) if len(fit[0]) > 1 else 0.0
        roughness = min(roughness * float(np.exp(step)), ROUGHEST * float(data.diameter.min()))
        covariance = log_slope_covariance(data, roughness, used, loose)
        if abs(factor - 1.0) < 1e-4 and abs(step) < 1e-3:
            break
    return found
