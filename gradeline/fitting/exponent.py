"""The exponent of S proportional to V^n."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

__all__ = ["ExponentFit", "fit_exponent"]

Array = NDArray[np.float64]

_ROUNDS = 4
_FAR = 0.5


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


def fit_exponent(
    velocity: Array,
    slope: Array,
    relative_u: Array,
    *,
    level: float = 0.95,
    flow_u: Array | None = None,
    shared: Array | None = None,
) -> ExponentFit:
    """Fit ln S = a + n ln V by weighted least squares.

    Parameters
    ----------
    velocity : (N,) array
        m/s, above 0. Where the viscosity differs from run to run, V times the ratio of a common viscosity to the run's own.
    slope : (N,) array
        S, dimensionless; runs with S <= 0 are left out. Then times the square of that ratio.
    relative_u : (N,) array
        Standard uncertainty of S relative to it, dimensionless, random alone; NaN where it is not known.
    level : float
        Coverage of the interval, 0 to 1, dimensionless.
    flow_u : (N,) array or None
        Relative standard uncertainty of each run's own flow, dimensionless; it moves ln S off the line by n times as much.
    shared : (N, q) array or None
        Relative change of S, at the flow as it was read, with one standard uncertainty of each shared input, dimensionless:
        an offset of a tap changes n; what is the same share of S or Q in all runs does not.

    Returns
    -------
    ExponentFit
        NaN with fewer than two runs or a single velocity; with two runs the uncertainty is that of the readings, with
        more the larger of that and the runs' scatter about the line (Student's t with N − 2 degrees of freedom).

    Notes
    -----
    The weights are those at the fitted slopes: at the measured ones a run that reads high would count for more.
    S ∝ Vⁿ at one viscosity means f ∝ Re^(n−2), so that S/ν² ∝ (V/ν)ⁿ at any: n = 1 in laminar flow, 2 when fully rough.

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
    x, y = np.log(velocity[known]), np.log(slope[known])
    own = np.zeros(len(x)) if flow_u is None else flow_u[known]
    size = relative_u[known]
    stated = np.isfinite(size).all() and (np.hypot(size, own) > 0).all()
    exponent, fitted = 2.0, y
    for _ in range(_ROUNDS):
        variance = (size * np.exp(y - fitted)) ** 2 + (exponent * own) ** 2
        weight = 1.0 / variance if stated else np.ones(len(x))
        mean = (weight @ x) / weight.sum()
        spread = float(weight @ (x - mean) ** 2)
        exponent = float(weight @ ((x - mean) * y) / spread)
        rest = y - (weight @ y) / weight.sum() - exponent * (x - mean)
        # A run far off the line keeps a weight of its own size: half a line is no fit of it.
        fitted = y - np.clip(rest, -_FAR, _FAR)
    freedom = len(x) - 2
    from_readings = float(spread**-0.5) if stated else nan
    from_runs = float(np.sqrt(weight @ rest**2 / freedom / spread)) if freedom > 0 else nan
    random = (
        float(np.nanmax([from_readings, from_runs])) if np.isfinite([from_readings, from_runs]).any() else nan
    )
    common = 0.0
    if shared is not None and shared.shape[1]:
        common = float(np.sqrt((((weight * (x - mean)) @ shared[known] / spread) ** 2).sum()))
    u = float(np.hypot(random, common))
    # Judged by the runs' own scatter, the interval is Student's; by the readings', the normal one.
    by_runs = freedom > 0 and not from_readings > from_runs
    dof = freedom * (u / random) ** 4 if by_runs and random > 0 else 1e9
    half = float(stdtrit(min(dof, 1e9), 0.5 + level / 2.0)) * u
    return ExponentFit(exponent, u, exponent - half, exponent + half, len(x))
