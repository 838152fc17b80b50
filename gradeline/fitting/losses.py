"""Loss coefficients over all runs."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

__all__ = ["LossFit", "fit_loss_coefficient"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class LossFit:
    """A loss coefficient over all runs.

    Parameters
    ----------
    coefficient, u, low, high : float
        K, its standard uncertainty and its interval, dimensionless; NaN where no run gives one.
    runs : int
        Runs that entered.
    """

    coefficient: float
    u: float
    low: float
    high: float
    runs: int


def fit_loss_coefficient(
    values: Array, variance: Array, effect: Array, *, level: float = 0.95, dof: float = np.inf
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
        return LossFit(nan, nan, nan, nan, 0)
    weight = np.where(known, 1.0 / np.where(known, variance, 1.0), 0.0)
    weight /= weight.sum()
    coefficient = float(weight @ np.where(known, values, 0.0))
    random = float((weight**2) @ np.where(known, variance, 0.0))
    shared = float(
        (weight @ np.where(known[:, None], effect, 0.0)) @ (weight @ np.where(known[:, None], effect, 0.0))
    )
    u = float(np.sqrt(random + shared))
    freedom = (
        1e9 if not np.isfinite(dof) or random == 0 else min(dof * ((random + shared) / random) ** 2, 1e9)
    )
    half = float(stdtrit(max(freedom, 1.0), 0.5 + level / 2.0)) * u
    return LossFit(coefficient, u, coefficient - half, coefficient + half, int(known.sum()))
