"""What the runs say jointly of the walls, of the shared errors that stay with the pipe, and of the fitted losses.

A prediction needs more than ε and its interval: an error of the bore that made ε too large acts on the prediction again,
and all but cancels. So the likelihood of the walls' roughnesses is kept on a grid, and with it what the runs then say of
those errors.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.fitting.wall.covariance import (
    LogSlopeCovariance,
    SlopeScatter,
    log_slope_errors,
    scatter_of,
)
from gradeline.fitting.wall.data import ROUGHEST, WallData, WallFit, law_log_slope
from gradeline.fitting.wall.likelihood import likelihood_rise

__all__ = ["LossErrors", "Posterior", "WallPart", "joint_posterior"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Roughnesses that are carried of each wall; of very long surveys fewer.
_POINTS, _FEWER, _MANY_RUNS = 121, 41, 20000
#: The likelihood is carried as far as its rise is below this, or this many times that of the interval.
_WIDEST, _WIDER = 25.0, 1.5
#: Parts of the likelihood smaller than this share of the largest are rounding.
_ROUNDING = 1e-13
_SMOOTHEST = 1e-9


@dataclass(frozen=True)
class WallPart:
    """A wall among all.

    Parameters
    ----------
    reaches : (k,) int array
        Its reaches among all.
    data : WallData
        Of its own reaches.
    fit : WallFit
        What came of it.
    """

    reaches: NDArray[np.intp]
    data: WallData
    fit: WallFit


@dataclass(frozen=True)
class LossErrors:
    """Errors of M fitted loss coefficients.

    Parameters
    ----------
    scatter : (M, M) array
        Covariance from readings and the runs' own flows, dimensionless.
    effect : (M, q) array
        Change of K with each shared input, dimensionless.
    with_slope : (R, K, M) array
        Covariance of each S from readings with each K, dimensionless.
    own : (R, M) array
        Change of K with each run's own flow error, dimensionless.
    """

    scatter: Array
    effect: Array
    with_slope: Array
    own: Array


@dataclass(frozen=True)
class Posterior:
    """The likelihood of W roughnesses, and z errors given them.

    The rise of χ² is |Σ_w score_w[i_w]|² less its minimum; the errors have the mean Σ_w mean_w[i_w] and `covariance`.

    Parameters
    ----------
    roughness : tuple of (G,) array
        ε of each wall, m; empty where nothing is known of it.
    score : tuple of (G, d) array
        Dimensionless.
    mean : tuple of (G, z) array
        In standard uncertainties of the shared inputs that were kept, then of K, dimensionless.
    covariance : (z, z) array
        Dimensionless.
    """

    roughness: tuple[Array, ...]
    score: tuple[Array, ...]
    mean: tuple[Array, ...]
    covariance: Array


def joint_posterior(
    data: WallData, walls: Sequence[WallPart], kept: NDArray[np.intp], losses: LossErrors
) -> Posterior:
    """Work out the joint likelihood of all walls and what it says of the errors that a prediction feels.

    Parameters
    ----------
    data : WallData
        Of all reaches.
    walls : sequence of WallPart
        What was fitted.
    kept : (p,) int array
        Shared inputs that act in a prediction.
    losses : LossErrors
        Of the fitted K.

    Returns
    -------
    Posterior
        z = p + M.

    Notes
    -----
    r = ln S − ln S_law(ε) = −E u + e with u ~ N(0, I), e ~ N(0, B), so that C = B + E E'. An error K − K_found is
    E_K u − e_K. All is normal for given ε: z has the mean Z C⁻¹ r and the covariance Cov(z) − Z C⁻¹ Z', Z = Cov(z, r).

    Examples
    --------
    Exact runs say nothing of the shared errors at the true roughness, and less than before of how large they may be.

    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> part = WallPart(np.array([0]), data, fit_wall(data, np.isfinite(data.slope)))
    >>> none = LossErrors(np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((8, 1, 0)), np.zeros((8, 0)))
    >>> found = joint_posterior(data, [part], np.array([0]), none)
    >>> at = int(np.argmin((found.score[0] ** 2).sum(axis=1)))
    >>> bool(abs(found.roughness[0][at] - 1e-4) < 1e-8), bool(abs(found.mean[0][at, 0]) < 1e-4)
    (True, True)
    >>> bool(0 < found.covariance[0, 0] < 1)
    True
    """
    known = [bool(part.fit.used.any()) for part in walls]
    grids = tuple(
        _grid(part, len(data.slope)) if there else np.zeros(0)
        for part, there in zip(walls, known, strict=True)
    )
    count = len(kept) + len(losses.effect)
    prior = _prior(kept, losses)
    if not any(known):
        none = tuple(np.zeros((0, 1)) for _ in walls), tuple(np.zeros((0, count)) for _ in walls)
        return Posterior(grids, *none, prior)
    covariance, effect, own = _covariance(data, walls)
    used = _used(data, walls)
    rows = []
    for part, grid in zip(walls, grids, strict=True):
        mine = np.zeros(data.slope.shape, dtype=bool)
        mine[:, part.reaches] = used[:, part.reaches]
        log_slope = np.log(np.where(mine, data.slope, 1.0))
        rows.append(
            np.where(mine, log_slope - law_log_slope(data, grid[:, None, None]), 0.0)
            if len(grid)
            else np.zeros((0, *data.slope.shape))
        )
    stacked = np.concatenate(rows)
    solved = covariance.solve(stacked)
    squares = np.einsum("irk,jrk->ij", stacked, solved)
    score = _root(squares)
    inputs = data.slope_effect.shape[2]
    with_errors = -np.moveaxis(effect[:, :, kept], 2, 0)
    # The scatter of a K goes with that of the slopes in the same run, and so does the run's own flow.
    law = np.exp(law_log_slope(data, _each(data, walls)))
    cross = losses.with_slope / law[:, :, None] + own[:, :, None] * losses.own[:, None, :]
    shared = np.einsum("mq,rkq->mrk", losses.effect, effect[:, :, :inputs])
    with_losses = -(shared + np.where(np.isfinite(cross), cross, 0.0).transpose(2, 0, 1))
    with_all = np.where(used, np.concatenate([with_errors, with_losses]), 0.0)
    turned = covariance.solve(with_all)
    mean = np.einsum("zrk,irk->iz", with_all, solved)
    after = prior - np.einsum("zrk,yrk->zy", with_all, turned)
    ends = np.cumsum([len(grid) for grid in grids])[:-1]
    return Posterior(grids, tuple(np.split(score, ends)), tuple(np.split(mean, ends)), (after + after.T) / 2)


def _root(squares: Array) -> Array:
    """A matrix of few columns whose product with its transpose this is: Cholesky's, the largest pivot first.

    The laws over a wall's roughnesses are so alike that five or six columns hold them to rounding.
    """
    left = squares.diagonal().copy()
    floor = _ROUNDING * max(float(left.max()), 1e-300)
    found = np.zeros((len(squares), 0))
    while found.shape[1] < len(squares):
        pivot = int(left.argmax())
        if not left[pivot] > floor:
            break
        column = (squares[:, pivot] - found @ found[pivot]) / np.sqrt(left[pivot])
        found = np.column_stack([found, column])
        left = left - column**2
    return found


def _prior(kept: NDArray[np.intp], losses: LossErrors) -> Array:
    p = len(kept)
    prior = np.eye(p + len(losses.effect))
    prior[p:, p:] = losses.effect @ losses.effect.T + losses.scatter
    prior[p:, :p] = losses.effect[:, kept]
    prior[:p, p:] = prior[p:, :p].T
    return prior


def _grid(part: WallPart, runs: int) -> Array:
    """Roughnesses at even steps of ln S, over all that the likelihood leaves room for; the best one among them."""
    fit, data = part.fit, part.data
    if not np.isfinite(fit.upper95) and not np.isfinite(fit.low):
        return np.array([fit.roughness])
    bore = float(data.diameter.max())
    coarse = np.concatenate([[0.0], bore * np.geomspace(_SMOOTHEST, ROUGHEST, 161)])
    t = float(stdtrit(fit.dof if np.isfinite(fit.dof) else 1e9, 0.5 + fit.level / 2))
    inside = likelihood_rise(data, fit, coarse) <= max(_WIDEST, _WIDER * t**2)
    inside |= coarse == coarse[np.abs(coarse - fit.roughness).argmin()]
    places = np.flatnonzero(inside)
    low, high = coarse[max(places[0] - 1, 0)], coarse[min(places[-1] + 1, len(coarse) - 1)]
    fine = np.unique(
        np.concatenate([[low], np.geomspace(max(low, 1e-3 * _SMOOTHEST * bore), high, 4000), [high]])
    )
    typical = np.exp(np.log(data.reynolds[fit.used]).mean())
    even = np.log(data.law.factor(np.full(fine.shape, typical), fine / bore))
    count = _POINTS if runs <= _MANY_RUNS else _FEWER
    grid = np.interp(np.linspace(even[0], even[-1], count), even, fine)
    grid[0] = low
    return np.unique(np.append(grid, fit.roughness))


def _each(data: WallData, walls: Sequence[WallPart]) -> Array:
    """Fitted roughness of each reach (K,), 0 where there is none."""
    found = np.zeros(len(data.diameter))
    for part in walls:
        found[part.reaches] = part.fit.roughness if part.fit.used.any() else 0.0
    return found


def _used(data: WallData, walls: Sequence[WallPart]) -> Mask:
    used = np.zeros(data.slope.shape, dtype=bool)
    for part in walls:
        used[:, part.reaches] = part.fit.used
    return used


def _covariance(data: WallData, walls: Sequence[WallPart]) -> tuple[LogSlopeCovariance, Array, Array]:
    """C over all reaches, the effects of the shared inputs (R, K, q and static readings) and of the runs' own flows."""
    used, rough = _used(data, walls), _each(data, walls)
    known = replace(
        data, slope_covariance=np.where(np.isfinite(data.slope_covariance), data.slope_covariance, 0.0)
    )
    # The law takes a roughness for each reach as well as one for all.
    whole = log_slope_errors(known, rough, SlopeScatter(float("nan")))
    random, effect = whole.random, whole.effect
    static = np.zeros((*used.shape, 0))
    for part in walls:
        if not np.isfinite(part.fit.relative_scatter):
            continue
        own = log_slope_errors(part.data, part.fit.roughness, scatter_of(part.fit))
        at = part.reaches
        random[:, at, :] = 0.0
        random[:, :, at] = 0.0
        random[:, at[:, None], at] = own.random
        extra = own.effect[:, :, data.slope_effect.shape[2] :]
        if extra.shape[2]:
            static = np.zeros((*used.shape, extra.shape[2])) if not static.shape[2] else static
            static[:, at] = extra
    effect = np.concatenate([effect, static], axis=2)
    block = (
        whole.own[:, :, None] * whole.own[:, None, :]
        + whole.thin[:, :, None] * whole.thin[:, None, :]
        + random
    )
    both = used[:, :, None] & used[:, None, :]
    variance = np.einsum("rkk->rk", block).copy()
    # A single slope of unknown scatter: any will do, since nothing but the best value is carried.
    tiny = 1e-12 * np.eye(used.shape[1])
    inverse = np.where(both, np.linalg.inv(np.where(both, block + tiny, np.eye(used.shape[1]))), 0.0)
    effect = np.where(used[:, :, None], effect, 0.0)
    turned = np.einsum("rkl,rlq->rkq", inverse, effect)
    core = np.linalg.pinv(np.eye(effect.shape[2]) + np.einsum("rkp,rkq->pq", effect, turned), hermitian=True)
    return LogSlopeCovariance(inverse, variance, effect, core), effect, whole.own
