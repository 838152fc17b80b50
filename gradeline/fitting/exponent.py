"""The exponent of S proportional to V^n."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

__all__ = ["ExponentFit", "fit_exponent"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class ExponentFit:
    """The exponent n of S proportional to V^n.

    Parameters
    ----------
    exponent, u, low, high : float
        n, its standard uncertainty and its interval, dimensionless; NaN where the runs do not tell it.
    runs : int
        Runs that entered.
    """

    exponent: float
    u: float
    low: float
    high: float
    runs: int


def fit_exponent(velocity: Array, slope: Array, relative_u: Array, *, level: float = 0.95) -> ExponentFit:
    """Fit ln S = a + n ln V by weighted least squares.

    Parameters
    ----------
    velocity : (N,) array
        m/s, above 0.
    slope : (N,) array
        S, dimensionless; runs with S <= 0 are left out.
    relative_u : (N,) array
        Standard uncertainty of S relative to it, dimensionless, random alone; NaN where it is not known.
    level : float
        Coverage of the interval, dimensionless.

    Returns
    -------
    ExponentFit
        NaN for fewer than two runs or a single velocity; with two runs the uncertainty is that of the readings, with
        more the larger of that and the runs' scatter about the line (Student's t with N − 2 degrees of freedom).

    Examples
    --------
    >>> v = np.array([0.5, 1.0, 2.0])
    >>> round(fit_exponent(v, 0.02 * v**1.75, np.full(3, 0.01)).exponent, 6)
    1.75
    """
    nan = float("nan")
    known = (slope > 0) & (velocity > 0)
    if known.sum() < 2 or np.ptp(np.log(velocity[known])) < 1e-9:
        return ExponentFit(nan, nan, nan, nan, int(known.sum()))
    stated = np.isfinite(relative_u[known]).all() and (relative_u[known] > 0).all()
    # At the fitted slopes the weights would not favour low readings; one round of that suffices here.
    x, y = np.log(velocity[known]), np.log(slope[known])
    weight = 1.0 / relative_u[known] ** 2 if stated else np.ones(len(x))
    mean = (weight @ x) / weight.sum()
    spread = float(weight @ (x - mean) ** 2)
    exponent = float(weight @ ((x - mean) * y) / spread)
    rest = y - (weight @ y) / weight.sum() - exponent * (x - mean)
    freedom = len(x) - 2
    from_readings = float(spread**-0.5) if stated else nan
    from_runs = float(np.sqrt(weight @ rest**2 / freedom / spread)) if freedom > 0 else nan
    u = float(np.nanmax([from_readings, from_runs])) if np.isfinite([from_readings, from_runs]).any() else nan
    # Judged by the runs' own scatter, the interval is Student's; by the readings', the normal one.
    by_runs = freedom > 0 and not from_readings > from_runs
    half = float(stdtrit(freedom if by_runs else 1e9, 0.5 + level / 2.0)) * u
    return ExponentFit(exponent, u, exponent - half, exponent + half, len(x))
