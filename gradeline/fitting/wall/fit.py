"""One roughness for a wall from all its turbulent runs: generalised least squares on ln S.

The runs share errors (bore, flow calibration, tap positions, temperature …); leaving them out makes intervals that
hold the truth half as often as they claim. They enter as one low-rank part of the covariance, never formed dense.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.off_law import prediction_scores
from gradeline.fitting.standing import Standing, critical_score
from gradeline.fitting.wall.covariance import SlopeScatter, scatter_is_known, scatter_of
from gradeline.fitting.wall.data import WallData, WallFit, law_log_slope, log_residual
from gradeline.fitting.wall.likelihood import likelihood_interval
from gradeline.fitting.wall.minimum import robust_start, roughness_grid, settle
from gradeline.fitting.wall.scatter import (
    JUDGED_BY_OTHERS,
    deletion_scores,
    first_scatter,
    scatter_off_law,
    slopes_against_law,
    with_readings,
    without_gross,
)
from gradeline.fitting.wall.trend import trend_against_law, trend_by_its_own_scatter

__all__ = ["best_roughness", "fit_wall"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Stands for the scatter of a single slope that nothing tells: ε is the same by any, and this one is well conditioned.
_ANY_SCATTER = 0.01


def fit_wall(data: WallData, usable: Mask, *, level: float = 0.95, dof: float = np.inf) -> WallFit:
    """Fit one roughness to all slopes of a wall.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    usable : (R, K) bool array
        Turbulent slopes that exceed twice their standard uncertainty.
    level : float
        Coverage of the interval, 0 to 1, dimensionless.
    dof : float
        Degrees of freedom of the pooled scatter, dimensionless. Where `data.slope_covariance` is NaN the scatter is
        that of the slopes off the law, with runs − 1 degrees of freedom.

    Returns
    -------
    WallFit
        NaN in `roughness` where fewer than one slope is usable.

    Notes
    -----
    Minimises r' C⁻¹ r over ε >= 0 with r = ln S − ln S_law(ε) and C = B + J J'. Interval: the likelihood,
    Δχ² <= t²(ν); it is not symmetric and bounded below by 0. A slope is off the law where its deletion residual
    (C⁻¹r)_i / sqrt((C⁻¹)_ii), the fitted ε profiled out, is beyond the Bonferroni point of Student's t; slopes leave
    and come back until the set stands (`gradeline.fitting.standing`), from a start by least absolute
    deviations. Where the scatter is that off the law, the score is that of
    `gradeline.fitting.off_law.prediction_scores`, and the trend has its own estimate of it.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> round(fit.roughness, 8), fit.low < fit.roughness < fit.high
    (0.0001, True)
    """
    grid = roughness_grid(data)
    used = usable & (data.slope > 0)
    if not used.any():
        nothing = np.full(data.slope.shape, np.nan)
        gone = np.zeros(data.slope.shape, dtype=bool)
        nan = float("nan")
        none = (nan, nan, nan, nan, level, gone, gone, nothing, nothing, nan, nan, dof)
        return WallFit(*none, nan, nan, nan, nan, nan, nan)
    candidates = used
    unknown = not np.isfinite(data.slope_covariance[candidates]).all()
    roughness = robust_start(data, used, grid)
    lone = unknown and used.sum() < 2
    scatter = SlopeScatter(
        first_scatter(log_residual(data, used, roughness), used) if unknown else float("nan")
    )
    if lone:
        scatter = SlopeScatter(_ANY_SCATTER)
    alone = unknown and data.slope_spread is not None and candidates.sum() >= JUDGED_BY_OTHERS
    if used.sum() >= 4:
        used = without_gross(data, used, roughness, scatter)
    standing = Standing(candidates)
    while True:
        roughness, covariance = settle(data, used, grid, roughness, scatter)
        if unknown and not lone:
            scatter = scatter_off_law(data, used, covariance, roughness)
            roughness, covariance = settle(data, used, grid, roughness, scatter)
            loose = with_readings(data, used, roughness, scatter)
            if loose != scatter:
                scatter = loose
                roughness, covariance = settle(data, used, grid, roughness, scatter)
        score, shift = deletion_scores(data, candidates, used, covariance, roughness)
        if alone:
            off = slopes_against_law(data, candidates, roughness)
            score[candidates] = prediction_scores(off, used[candidates], freedom_of(dof, used, unknown))
        critical = critical_score(int(candidates.sum()), freedom_of(dof, used, unknown), alone=alone)
        now = standing.after(used, score, critical)
        if (now == used).all():
            break
        used = now
    freedom = freedom_of(dof, used, unknown)
    low = high = upper = float("nan")
    if lone:
        # A single slope of unknown scatter: a value, and nothing to say how sure it is.
        scatter = SlopeScatter(float("nan"))
    else:
        low, high, upper = likelihood_interval(data, used, covariance, roughness, grid, freedom, level)
    residual = log_residual(data, used, roughness)
    trend, trend_u, trend_dof = (
        trend_by_its_own_scatter(data, used, covariance, roughness, scatter)
        if unknown and not lone
        else (*trend_against_law(data, used, covariance, roughness, residual), float(freedom))
    )
    ones = used.astype(float)
    weight = float((ones * covariance.solve(ones)).sum())
    with np.errstate(over="ignore"):  # of a run that is off by more than numbers reach nothing is expected
        expected = np.exp(law_log_slope(data, roughness) + shift)
    return WallFit(
        roughness=roughness,
        low=low,
        high=high,
        upper95=upper,
        level=level,
        used=used,
        off_law=candidates & ~used,
        score=score,
        expected_slope=np.where(candidates & np.isfinite(expected), expected, np.nan),
        relative_scatter=scatter.relative,
        reading_scatter=scatter.reading,
        dof=float(freedom),
        trend=trend,
        trend_u=trend_u,
        trend_dof=trend_dof,
        # No weight: errors that differ by more than numbers can hold leave a covariance that is singular to rounding.
        offset=float((ones * covariance.solve(residual)).sum()) / weight if weight > 0 else float("nan"),
        offset_u=weight**-0.5 if weight > 0 and not lone else float("nan"),
        chi_square=float(covariance.squares(residual)),
    )


def best_roughness(data: WallData, fit: WallFit) -> float:
    """Return the roughness that fits changed data, the slopes in use and the scatter left as they were.

    Parameters
    ----------
    data : WallData
        Such as with another bore.
    fit : WallFit
        Of the original data.

    Returns
    -------
    float
        ε, m; NaN where the original has none.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> abs(best_roughness(data, fit) - fit.roughness) < 1e-9
    True
    """
    if not fit.used.any():
        return float("nan")
    # A single slope of unknown scatter: any weight gives the same value.
    loose = scatter_of(fit) if scatter_is_known(data, fit, fit.used) else SlopeScatter(_ANY_SCATTER)
    return settle(data, fit.used, roughness_grid(data, 41), fit.roughness, loose)[0]


def freedom_of(dof: float, used: Mask, unknown: bool) -> float:
    return max(float(used.sum()) - 1.0, 1.0) if unknown else max(dof, 1.0) if np.isfinite(dof) else np.inf
