"""Loss coefficients over all runs, and whether they depend on the Reynolds number."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import fdtri, stdtr, stdtrit

__all__ = ["LossFit", "LossTrend", "fit_loss_coefficient", "fit_loss_trend"]

Array = NDArray[np.float64]

#: Probability that sound runs are said to scatter more than their uncertainties allow.
_SPREAD_FALSE_ALARM = 0.05
#: Probability of a trend by chance below which there is one.
_TREND_FALSE_ALARM = 0.01
#: Decades of Re below which nothing is said of a trend.
_NARROW = 0.05


@dataclass(frozen=True)
class LossFit:
    """A loss coefficient over all runs.

    Parameters
    ----------
    coefficient, u, low, high : float
        K, its standard uncertainty and its interval, dimensionless; NaN where no run gives one.
    runs : int
        Runs that entered.
    weight : (R,) array
        Share of each run in the mean, dimensionless; 0 where it did not enter.
    spread : float
        Factor by which differences between the runs raise the random standard uncertainty of the mean, dimensionless:
        1 where there are none beyond what was stated.
    """

    coefficient: float
    u: float
    low: float
    high: float
    runs: int
    weight: Array
    spread: float = 1.0


@dataclass(frozen=True)
class LossTrend:
    """How a loss coefficient goes with the Reynolds number.

    Parameters
    ----------
    slope, slope_u : float
        Change of K per decade of Re and its standard uncertainty, dimensionless; NaN where fewer than three runs or
        a twentieth of a decade tell nothing.
    p : float
        Two-sided probability of such a slope by chance, dimensionless.
    spread : float
        By how much the runs scatter beyond what their uncertainties allow, dimensionless: 1 where they do not, at 5 %.
        About the trend where their own scatter tells that there is one, else about their mean.
    excess : float
        Variance of K from run to run that their uncertainties do not account for, dimensionless; 0 where the spread is 1.
    spread_dof : float
        Degrees of freedom behind it, dimensionless.
    """

    slope: float
    slope_u: float
    p: float
    spread: float
    excess: float = 0.0
    spread_dof: float = np.inf


def fit_loss_coefficient(
    values: Array,
    variance: Array,
    effect: Array,
    *,
    level: float = 0.95,
    dof: float = np.inf,
    excess: float = 0.0,
    excess_dof: float = np.inf,
) -> LossFit:
    """Average the loss coefficients of the runs, each by its weight, the shared errors carried along.

    Parameters
    ----------
    values : (R,) array
        K of each run, dimensionless; NaN where there is none.
    variance : (R,) array
        Random variance of each, dimensionless.
    effect : (R, q) array
        Change of K for one standard uncertainty of each shared input, dimensionless.
    level : float
        Coverage of the interval, dimensionless.
    dof : float
        Degrees of freedom of the scatter behind `variance`, dimensionless.
    excess : float
        Variance from run to run that `variance` does not account for, dimensionless.
    excess_dof : float
        Degrees of freedom behind it, dimensionless: those of the runs that showed it, not of their readings.

    Returns
    -------
    LossFit
        The weighted mean, its uncertainty with the shared errors, and Student's interval with the effective degrees
        of freedom of Welch and Satterthwaite (JCGM 100:2008, G.4).

    Notes
    -----
    The weights are the inverse random variances: shared errors move all runs alike and cannot be averaged out, so
    they enter the uncertainty alone and cannot pull the mean.

    Examples
    --------
    >>> fit = fit_loss_coefficient(np.array([4.1, 3.9]), np.array([0.01, 0.01]), np.full((2, 1), 0.05))
    >>> round(fit.coefficient, 3), round(fit.u, 3)
    (4.0, 0.087)
    """
    known = np.isfinite(values) & np.isfinite(variance) & (variance > 0)
    if not known.any():
        nan = float("nan")
        return LossFit(nan, nan, nan, nan, 0, np.zeros(len(values)))
    weight = np.where(known, 1.0 / np.where(known, variance + excess, 1.0), 0.0)
    weight /= weight.sum()
    coefficient = float(weight @ np.where(known, values, 0.0))
    told = float((weight**2) @ np.where(known, variance, 0.0))
    random = told + excess * float(weight @ weight)
    along = weight @ np.where(known[:, None], effect, 0.0)
    shared = float(along @ along)
    u = float(np.sqrt(random + shared))
    if excess > 0:
        dof = min(dof, excess_dof)
    freedom = (
        1e9 if not np.isfinite(dof) or random == 0 else min(dof * ((random + shared) / random) ** 2, 1e9)
    )
    half = float(stdtrit(max(freedom, 1.0), 0.5 + level / 2.0)) * u
    spread = float(np.sqrt(random / told))
    return LossFit(coefficient, u, coefficient - half, coefficient + half, int(known.sum()), weight, spread)


def fit_loss_trend(
    values: Array, variance: Array, effect: Array, reynolds: Array, *, dof: float = np.inf
) -> LossTrend:
    """Fit the change of the loss coefficient per decade of the Reynolds number.

    Parameters
    ----------
    values, variance, effect
        As for `fit_loss_coefficient`.
    reynolds : (R,) array
        Re of each run, dimensionless, above 0.
    dof : float
        Degrees of freedom of the scatter behind `variance`, dimensionless.

    Returns
    -------
    LossTrend
        By generalised least squares with one covariance C = diag(variance) + J J', J = `effect`: an error that all
        runs share but that weighs more in the slow ones (a zero, say) looks like a trend, and is allowed for. Where
        the runs scatter more about the line than C says, the standard uncertainty grows with them.

    Notes
    -----
    The excess is the variance that, added to each run's, brings the weighted sum of squares to its degrees of freedom
    (R. C. Paule and J. Mandel, "Consensus values and weighting factors", *J. Res. Natl. Bur. Stand.* 87, 1982, 377): what
    nobody stated, such as the scatter of the flows, is the same in all runs, and does not follow the weights of the
    readings as a common factor on their uncertainties would. Its degrees of freedom are those of the runs, R − 1 about the
    mean.

    Examples
    --------
    >>> reynolds = np.array([1e4, 3e4, 1e5])
    >>> trend = fit_loss_trend(5 - 0.5 * np.log10(reynolds), np.full(3, 1e-4), np.zeros((3, 0)), reynolds)
    >>> round(trend.slope, 6), trend.p < 0.01
    (-0.5, True)
    """
    nan = float("nan")
    known = np.isfinite(values) & np.isfinite(variance) & (variance > 0)
    if known.sum() < 2:
        return LossTrend(nan, nan, nan, 1.0)
    runs = _Runs(values[known], variance[known], effect[known], dof)
    ones = np.ones((len(runs.values), 1))
    decades = np.log10(reynolds[known])
    if len(decades) < 3 or np.ptp(decades) < _NARROW:
        return LossTrend(nan, nan, nan, *runs.beyond(ones))
    # Centred, so that the two columns are all but orthogonal.
    line = np.column_stack([ones, decades - np.average(decades, weights=1 / runs.variance)])
    found, inverse, reduced = runs.fit(line)
    spread, excess, left = runs.beyond(line)
    slope, slope_u = float(found[1]), float(np.sqrt(inverse[1, 1] * max(reduced, 1.0)))
    freedom = left if excess > 0 else (dof if np.isfinite(dof) else 1e9)
    p = 2 * float(stdtr(max(freedom, 1.0), -abs(slope) / slope_u))
    # The runs alone, whatever was stated: a line through three of them is no trend yet.
    alone = float(np.sqrt(inverse[1, 1] * reduced))
    left = len(decades) - 2.0
    if not (
        p < _TREND_FALSE_ALARM
        and 2 * float(stdtr(left, -abs(slope) / max(alone, 1e-300))) < _TREND_FALSE_ALARM
    ):
        spread, excess, left = runs.beyond(ones)
    return LossTrend(slope, slope_u, p, spread, excess, left)


@dataclass(frozen=True)
class _Runs:
    """K of the runs that enter, their random variances, what the shared inputs do to them, and the freedom of these."""

    values: Array
    variance: Array
    effect: Array
    dof: float

    def fit(self, design: Array, excess: float = 0.0) -> tuple[Array, Array, float]:
        """Return (coefficients, their covariance, sum of squares per degree of freedom) by generalised least squares."""
        total = self.variance + excess
        scaled = self.effect / total[:, None]
        core = np.linalg.inv(np.eye(self.effect.shape[1]) + self.effect.T @ scaled)

        def solve(columns: Array) -> Array:
            return columns / total[:, None] - scaled @ (core @ (scaled.T @ columns))

        turned = solve(design)
        inverse = np.linalg.inv(design.T @ turned)
        found = inverse @ (turned.T @ self.values)
        rest = (self.values - design @ found)[:, None]
        squares = float((rest * solve(rest)).sum())
        return found, np.asarray(inverse, float), squares / (len(total) - design.shape[1])

    def beyond(self, design: Array) -> tuple[float, float, float]:
        """Return (spread, excess, its degrees of freedom): 1, 0 and infinite where the uncertainties account for it."""
        left = len(self.values) - design.shape[1]
        reduced = self.fit(design)[2]
        known = self.dof if np.isfinite(self.dof) else 1e9
        if not reduced > float(fdtri(left, max(known, 1.0), 1 - _SPREAD_FALSE_ALARM)):
            return 1.0, 0.0, float("inf")
        top = float(np.ptp(self.values)) ** 2 * len(self.values)
        excess = brentq(lambda more: self.fit(design, more)[2] - 1.0, 0.0, top, xtol=1e-9 * top)
        return float(np.sqrt(reduced)), float(excess), float(left)
