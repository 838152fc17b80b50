"""The velocity heads that the slopes show: what a run's flow error does to the stated ones, taken out."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["shown_velocity_heads"]

Array = NDArray[np.float64]

#: With fewer runs nothing tells a flow error from the curve that S follows.
_FEWEST = 6
_PASSES = 8
#: Residuals count fully up to this many of their scales (Huber's usual choice).
_HUBER = 1.345


def shown_velocity_heads(velocity_head: Array, slope: Array, slope_u: Array) -> Array:
    """Move each run's velocity head to the curve of S against it that the runs draw together.

    Parameters
    ----------
    velocity_head : (F,) array
        V²/2g from the stated flow, m.
    slope : (F,) array
        S, dimensionless.
    slope_u : (F,) array
        Its random standard uncertainty, dimensionless; NaN where it is not known.

    Returns
    -------
    (F,) array
        m; as given for fewer than six runs with S above zero.

    Notes
    -----
    ln V² is a smooth curve of ln S, taken as a parabola by least absolute deviations and then by weighted least squares
    with Huber's weights: a slip of the flow stands in V² alone. A run off it has a flow off by half as much. The part
    that the slope's own uncertainty explains stays (shrinkage by the ratio of the variances).

    Examples
    --------
    >>> true = np.geomspace(0.01, 1.0, 9)
    >>> slope = 0.5 * true**0.93
    >>> stated = true * (1 + 0.02 * (np.arange(9) == 4))
    >>> found = shown_velocity_heads(stated, slope, np.full(9, 1e-6))
    >>> bool(abs(found[4] / found[3] / (true[4] / true[3]) - 1) < 0.01)
    True
    """
    sound = (slope > 0) & (velocity_head > 0) & np.isfinite(slope)
    if sound.sum() < _FEWEST or np.ptp(np.log(velocity_head[sound])) < 0.5:
        return velocity_head
    x, y = np.log(slope[sound]), np.log(velocity_head[sound])
    # V² goes as S^(1/b) with b near 1: an error of S is one of V² of about that size.
    noise = np.nan_to_num(slope_u[sound], nan=0.0) / slope[sound]
    middle = x.mean()
    columns = np.column_stack([np.ones(len(x)), x - middle, (x - middle) ** 2])
    robust = np.ones(len(x))
    for _ in range(_PASSES):
        half = np.sqrt(robust)[:, None]
        size = np.linalg.lstsq(half * columns, half[:, 0] * y, rcond=None)[0]
        robust = 1.0 / np.maximum(np.abs(y - columns @ size), 1e-6)
    rest = y - columns @ size
    spread = float(np.clip(1.4826 * np.median(np.abs(rest)), 1e-4, 0.05))
    for _ in range(_PASSES):
        scale = np.sqrt(noise**2 + spread**2)
        far = np.abs(rest) / (_HUBER * scale)
        # Huber's weights, and none for what is no error of a meter.
        robust = np.where(far > 10, 0.0, np.where(far > 1, 1 / np.maximum(far, 1), 1.0))
        half = np.sqrt(robust / scale**2)[:, None]
        size = np.linalg.lstsq(half * columns, half[:, 0] * y, rcond=None)[0]
        rest = y - columns @ size
        freedom = max(float(robust.sum()) - 3.0, 1.0)
        excess = float((robust * (rest**2 - noise**2)).sum()) / freedom
        spread = float(np.sqrt(np.clip(excess, 1e-8, 0.05**2)))
    share = np.where(robust == 0, 1.0, spread**2 / (spread**2 + noise**2))
    found = velocity_head.copy()
    found[sound] *= np.exp(-share * rest)
    return found
