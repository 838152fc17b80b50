"""Energy and hydraulic grade lines along reaches, fittings and changes of bore.

A step in a grade line has two values at one chainage. `side` tells them apart: −1 is just upstream, the loss
there not yet taken and the upstream reach's velocity head; +1 is just downstream.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["GradeLines", "grade_lines", "passed", "path_lengths", "stations"]

Array = npt.NDArray[np.float64]

# a chainage may miss the line's end by rounding, as of a plan distance turned into a true length, m
_ROUNDING = 1e-6


@dataclass(frozen=True)
class GradeLines:
    """The grade lines of one or many runs at the same stations.

    Parameters
    ----------
    chainage : ndarray, shape (m,)
        m.
    side : ndarray, shape (m,)
        −1 just upstream, +1 just downstream of that chainage, dimensionless.
    energy_head : ndarray, shape (..., m)
        Energy grade line, m of flowing fluid above datum.
    velocity_head : ndarray, shape (..., m)
        α V²/2g, m.
    piezometric_head : ndarray, shape (..., m)
        Hydraulic grade line, energy head less velocity head, m.
    """

    chainage: Array
    side: npt.NDArray[np.int_]
    energy_head: Array
    velocity_head: Array
    piezometric_head: Array


def _bounds(reach_bounds: npt.ArrayLike) -> Array:
    bounds = np.asarray(reach_bounds, dtype=np.float64)
    if bounds.ndim != 1 or len(bounds) < 2 or not (np.diff(bounds) > 0).all():
        raise ValueError(f"reach_bounds must be at least two increasing chainages: {bounds.tolist()}")
    return bounds


def _on_line(chainage: npt.ArrayLike, bounds: Array) -> Array:
    x = np.asarray(chainage, dtype=np.float64)
    inside = (x >= bounds[0] - _ROUNDING) & (x <= bounds[-1] + _ROUNDING)
    if not inside.all():
        raise ValueError(
            f"chainage lies outside the line, {bounds[0]} to {bounds[-1]} m: {x[~inside].flat[0]}"
        )
    return x


def path_lengths(chainage: npt.ArrayLike, reach_bounds: npt.ArrayLike) -> Array:
    """Return how much of each reach lies between the line's start and each chainage.

    Parameters
    ----------
    chainage : array_like, shape (n,)
        m, within the line.
    reach_bounds : array_like, shape (k + 1,)
        Chainages of the reaches' ends in flow order, m, increasing.

    Returns
    -------
    ndarray, shape (n, k)
        Length of reach k passed on the way, m. A row's sum is the way from the line's start.

    Raises
    ------
    ValueError
        Where a chainage lies outside the line or the bounds do not increase.

    Examples
    --------
    >>> print(path_lengths([1.0, 5.0], [0.0, 2.0, 6.0]))
    [[1. 0.]
     [2. 3.]]
    """
    bounds = _bounds(reach_bounds)
    x = _on_line(chainage, bounds)
    return np.asarray(np.clip(x[:, None], bounds[:-1], bounds[1:]) - bounds[:-1])


def passed(chainage: npt.ArrayLike, loss_chainages: npt.ArrayLike) -> Array:
    """Return which local losses lie upstream of each chainage.

    Parameters
    ----------
    chainage : array_like, shape (n,)
        m.
    loss_chainages : array_like, shape (j,)
        Where the local losses are, m.

    Returns
    -------
    ndarray, shape (n, j)
        Dimensionless: 1 where the loss lies upstream, 0 where it lies downstream or at the very chainage.

    Examples
    --------
    >>> print(passed([1.0, 3.0, 4.0], [3.0]).ravel())
    [0. 0. 1.]
    """
    x, at = np.asarray(chainage, dtype=np.float64), np.asarray(loss_chainages, dtype=np.float64)
    return (x[:, None] > at).astype(np.float64)


def stations(
    reach_bounds: npt.ArrayLike, loss_chainages: npt.ArrayLike, extra: npt.ArrayLike = ()
) -> tuple[Array, npt.NDArray[np.int_]]:
    """Return every place where a grade line can bend or step, each step with both its sides.

    Parameters
    ----------
    reach_bounds : array_like, shape (k + 1,)
        Chainages of the reaches' ends in flow order, m, increasing.
    loss_chainages : array_like, shape (j,)
        Where the local losses are, m, within the line.
    extra : array_like
        Further chainages wanted, such as the taps', m, within the line.

    Returns
    -------
    chainage : ndarray, shape (m,)
        m, not decreasing; inner bounds and losses stand twice.
    side : ndarray of int, shape (m,)
        −1 just upstream, +1 just downstream.

    Raises
    ------
    ValueError
        Where a chainage lies outside the line or the bounds do not increase.

    Examples
    --------
    >>> chainage, side = stations([0.0, 2.0, 6.0], [3.0], [1.0])
    >>> print(chainage)
    [0. 1. 2. 2. 3. 3. 6.]
    >>> print(side)
    [ 1  1 -1  1 -1  1 -1]
    """
    bounds = _bounds(reach_bounds)
    losses, more = (np.asarray(x, dtype=np.float64).ravel() for x in (loss_chainages, extra))
    steps = np.concatenate([bounds[1:-1], losses])
    x = np.unique(_on_line(np.concatenate([bounds, losses, more]), bounds))
    both = np.isin(x, steps)
    upstream = both | (x == x[-1])
    downstream = both | (x != x[-1])
    chainage = np.concatenate([x[upstream], x[downstream]])
    side = np.repeat([-1, 1], [upstream.sum(), downstream.sum()])
    order = np.lexsort((side, chainage))
    return chainage[order], side[order]


def grade_lines(
    chainage: npt.ArrayLike,
    side: npt.ArrayLike,
    *,
    start_energy: npt.ArrayLike,
    reach_bounds: npt.ArrayLike,
    slopes: npt.ArrayLike,
    velocity_heads: npt.ArrayLike,
    loss_chainages: npt.ArrayLike = (),
    loss_heads: npt.ArrayLike = (),
) -> GradeLines:
    """Return the energy and the hydraulic grade line at given stations, for one run or many.

    Parameters
    ----------
    chainage : array_like, shape (m,)
        m, within the line, as `stations` gives them.
    side : array_like, shape (m,)
        −1 just upstream, +1 just downstream of each chainage, dimensionless.
    start_energy : array_like, shape (...)
        Energy head just upstream of the line's start, m above datum.
    reach_bounds : array_like, shape (k + 1,)
        Chainages of the reaches' ends in flow order, m, increasing.
    slopes : array_like, shape (..., k)
        Friction slope of each reach, dimensionless.
    velocity_heads : array_like, shape (..., k)
        α V²/2g in each reach, m.
    loss_chainages : array_like, shape (j,)
        Where the local losses are, m; a change of bore stands here at its reach bound.
    loss_heads : array_like, shape (..., j)
        Loss of energy head at each of them, m.

    Returns
    -------
    GradeLines
        Heads in m. An unknown (NaN) slope or loss makes only what lies downstream of it NaN.

    Raises
    ------
    ValueError
        Where a chainage lies outside the line, a side is neither −1 nor 1 or the bounds do not increase.

    Notes
    -----
    e(x) = E₀ − Σ_k S_k ℓ_k(x) − Σ_m h_m [x past x_m]; h(x) = e(x) − α V²/2g of the reach at x.

    References
    ----------
    The energy equation of steady pipe flow, in any text on hydraulics.

    Examples
    --------
    >>> line = grade_lines([0.0, 4.0, 4.0, 10.0], [1, -1, 1, -1], start_energy=12.0, reach_bounds=[0.0, 10.0],
    ...                    slopes=[0.25], velocity_heads=[0.2], loss_chainages=[4.0], loss_heads=[3.0])
    >>> print(line.energy_head)
    [12.  11.   8.   6.5]
    >>> print(line.piezometric_head)
    [11.8 10.8  7.8  6.3]
    """
    bounds = _bounds(reach_bounds)
    x, sides = _on_line(chainage, bounds), np.asarray(side, dtype=np.int_)
    if not np.isin(sides, (-1, 1)).all():
        raise ValueError(f"side must be -1 or 1 at every station: {sides.tolist()}")
    slope, head, loss = (np.asarray(v, dtype=np.float64) for v in (slopes, velocity_heads, loss_heads))
    lengths = path_lengths(x, bounds)
    taken = passed(x, loss_chainages).astype(bool) | (
        (sides[:, None] > 0) & (x[:, None] == np.asarray(loss_chainages, dtype=np.float64))
    )
    # masked, not multiplied by zero: what is unknown downstream leaves the line upstream of it known
    friction = np.where(lengths > 0, slope[..., None, :] * lengths, 0.0).sum(axis=-1)
    local = np.where(taken, loss[..., None, :], 0.0).sum(axis=-1)
    energy = np.asarray(start_energy, dtype=np.float64)[..., None] - friction - local
    reach = np.where(
        sides < 0, np.searchsorted(bounds, x, side="left"), np.searchsorted(bounds, x, side="right")
    )
    at_station = np.broadcast_to(head[..., np.clip(reach - 1, 0, len(bounds) - 2)], energy.shape)
    return GradeLines(x, sides, energy, at_station, energy - at_station)
