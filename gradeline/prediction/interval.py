"""Intervals of what depends on the roughnesses and, linearly, on errors that are normal for given roughnesses."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.prediction.carried import Carried, CarriedWall

__all__ = ["Sets", "profile_interval", "sets_of"]

Array = NDArray[np.float64]

#: Sets of roughnesses that are looked at where a line has several walls.
_MOST_SETS = 16000
_FEWEST = 5


@dataclass(frozen=True)
class Sets:
    """C sets of roughnesses of the W walls that the runs leave room for; the best one first.

    Parameters
    ----------
    roughness : (C, W) array
        ε, m; NaN where a wall has none.
    rise : (C,) array
        Rise of χ² over the least, dimensionless.
    mean : (C, z) array
        Errors that the runs then show, dimensionless.
    limit : float
        Rise that the interval allows, t²(ν), dimensionless; NaN where nothing tells how sure the walls are.
    """

    roughness: Array
    rise: Array
    mean: Array
    limit: float


def sets_of(carried: Carried) -> Sets:
    """Return the sets of roughnesses within the interval of all walls together."""
    t = float(stdtrit(carried.dof if np.isfinite(carried.dof) else 1e9, 0.5 + carried.level / 2.0))
    errors = len(carried.covariance)
    known = [w for w, wall in enumerate(carried.walls) if len(wall.grid)]
    if not known:
        nothing = np.full((1, len(carried.walls)), np.nan)
        return Sets(nothing, np.zeros(1), np.zeros((1, errors)), t**2)
    sure = all(carried.walls[w].interval for w in known)
    picks = [np.arange(len(carried.walls[w].grid)) for w in known]
    if len(known) > 1:
        picks = [_narrowed(carried.walls[w], len(known)) for w in known]
    places = np.stack([one.ravel() for one in np.meshgrid(*picks, indexing="ij")], axis=1)
    score = np.sum([carried.walls[w].score[places[:, n]] for n, w in enumerate(known)], axis=0)
    squares = np.einsum("cd,cd->c", score, score)
    rise = squares - squares.min()
    inside = np.flatnonzero(rise <= t**2)
    inside = inside[np.argsort(rise[inside], kind="stable")]
    if not sure:
        inside = inside[:1]
    places, rise = places[inside], rise[inside]
    roughness = np.full((len(places), len(carried.walls)), np.nan)
    for n, w in enumerate(known):
        roughness[:, w] = carried.walls[w].grid[places[:, n]]
    mean = np.sum([carried.walls[w].mean[places[:, n]] for n, w in enumerate(known)], axis=0)
    return Sets(roughness, rise, mean, t**2 if sure else float("nan"))


def _narrowed(wall: CarriedWall, walls: int) -> NDArray[np.intp]:
    """Places on a wall's grid that may matter: few enough for all walls together, the best one among them."""
    count = max(_FEWEST, int(_MOST_SETS ** (1.0 / walls)))
    if count >= len(wall.grid):
        return np.arange(len(wall.grid))
    low, high = np.searchsorted(wall.grid, [np.nan_to_num(wall.low), np.nan_to_num(wall.high, nan=np.inf)])
    high = min(int(high), len(wall.grid) - 1)
    beyond = 1 + (high - int(low)) // 6
    first, last = max(int(low) - beyond, 0), min(high + beyond, len(wall.grid) - 1)
    spread = np.linspace(first, last, count - 1).round().astype(np.intp)
    return np.unique(np.append(spread, np.abs(wall.grid - wall.roughness).argmin()))


def profile_interval(
    head: Array, gradient: Array, sets: Sets, covariance: Array, extra: Array | float = 0.0
) -> tuple[Array, Array, Array]:
    """Return the best value and the interval of heads, by their profile likelihood.

    Parameters
    ----------
    head : (C, N) array
        Of each set of roughnesses, m.
    gradient : (C, N, z) array
        Change with each error, m.
    sets : Sets
        The sets.
    covariance : (z, z) array
        Of the errors for given roughnesses, dimensionless.
    extra : (C, N) array or float
        Further variance that the runs say nothing of, m².

    Returns
    -------
    value, low, high : (N,) array
        m.

    Notes
    -----
    For given ε a head is normal with mean m and variance v, and its least rise of χ² is Δχ²(ε) + (y − m)²/v. The interval
    is every y for which some ε >= 0 keeps that at or below t²: from the least m − √(v c) to the largest m + √(v c), with
    c = t² − Δχ²(ε). It is that of the walls' own roughness, where nothing else matters.
    """
    variance = np.einsum("cnz,zy,cny->cn", gradient, covariance, gradient) + extra
    room = np.sqrt(np.maximum(variance, 0.0) * (sets.limit - sets.rise)[:, None])
    return head[0], (head - room).min(axis=0), (head + room).max(axis=0)
