"""How far the slopes of a wall scatter about the law where nothing but the runs tells it, and how far each stands off."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.off_law import OffLaw, likely_scatter
from gradeline.fitting.wall.covariance import LogSlopeCovariance, SlopeScatter, log_slope_covariance
from gradeline.fitting.wall.data import WallData, law_gradient, law_log_slope, log_residual

__all__ = [
    "JUDGED_BY_OTHERS",
    "deletion_scores",
    "first_scatter",
    "scatter_off_law",
    "slopes_against_law",
    "with_readings",
    "without_gross",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Slopes from which on each is judged by the scatter of the others, where nothing else tells it.
JUDGED_BY_OTHERS = 4
#: A slope this many scatters from the others stays out of the first fit.
_FAR = 5.0


def first_scatter(residual: Array, used: Mask) -> float:
    """Return a scale by the median absolute deviation, with its usual factor for the normal distribution.

    Parameters
    ----------
    residual : (R, K) array
        ln S less that of the law, dimensionless.
    used : (R, K) bool array
        Slopes in use, one at least.

    Returns
    -------
    float
        Of the kind of a standard deviation, in the unit of the residuals, above 0.

    Examples
    --------
    >>> round(first_scatter(np.array([[-0.01, 0.0, 0.01, 9.0]]), np.ones((1, 4), dtype=bool)), 4)
    0.0148
    """
    values = residual[used]
    return max(float(1.4826 * np.median(np.abs(values - np.median(values)))), 1e-6)


def without_gross(data: WallData, used: Mask, roughness: float, scatter: SlopeScatter) -> Mask:
    """Leave gross slips out of the first fit; shared errors move all alike, which the median takes up.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use, all above 0.
    roughness : float
        ε of a start that slips do not move, m.
    scatter : SlopeScatter
        Of the slopes about the law.

    Returns
    -------
    (R, K) bool array
        Those left.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> data.slope[2] *= 10
    >>> without_gross(data, np.isfinite(data.slope), 1e-4, SlopeScatter(np.nan))[:, 0].tolist()
    [True, True, False, True, True, True, True, True]
    """
    away = log_residual(data, used, roughness)
    unknown = bool(np.isfinite(scatter.relative))
    if not unknown:
        away = away / np.sqrt(
            np.where(used, log_slope_covariance(data, roughness, used, scatter).variance, 1.0)
        )
    away = away - np.median(away[used])
    room = _FAR * max(first_scatter(away, used), 0.0 if unknown else 1.0) * np.ones(away.shape)
    if unknown and data.slope_spread is not None:
        # What the readings may do to a slow run is not far.
        spread = np.where(used, data.slope_spread / np.where(used, data.slope, 1.0), np.nan)
        room = np.fmax(room, _FAR * first_scatter(away / spread, used) * spread)
    return np.asarray(used & (np.abs(away) < room))


def scatter_off_law(
    data: WallData, used: Mask, covariance: LogSlopeCovariance, roughness: float
) -> SlopeScatter:
    """Return the scale of the slopes off the law once ε and the shared errors are taken out.

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

    Returns
    -------
    SlopeScatter
        Beyond the runs' own errors.

    Examples
    --------
    Slopes 2 % to either side of the law, the flows uncertain by 0.4 % each:

    >>> from dataclasses import replace
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> data = replace(data, slope=data.slope * np.exp(0.02 * np.array([1, -1, -1, 1, -1, 1, 1, -1]))[:, None])
    >>> used = np.isfinite(data.slope)
    >>> covariance = log_slope_covariance(data, 1e-4, used, SlopeScatter(0.02))
    >>> round(scatter_off_law(data, used, covariance, 1e-4).relative, 3)
    0.02
    """
    residual = log_residual(data, used, roughness)
    rest = residual - np.einsum("rkq,q->rk", covariance.effect, covariance.shared(residual))
    own = log_slope_covariance(data, roughness, used, SlopeScatter(1e-6)).variance
    excess = (rest[used] ** 2).sum() / max(used.sum() - 1, 1) - own[used].mean()
    return SlopeScatter(float(np.sqrt(max(excess, 1e-12))))


def slopes_against_law(data: WallData, pick: Mask, roughness: float) -> OffLaw:
    """Return the picked slopes against the law, for the likelihood of their scatter.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    pick : (R, K) bool array
        Those picked, all above 0.
    roughness : float
        Fitted ε, m.

    Returns
    -------
    OffLaw
        As `gradeline.fitting.off_law` takes it.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> slopes_against_law(data, np.isfinite(data.slope), 1e-4).residual.round(9).any()
    np.False_
    """
    bare = log_slope_covariance(data, roughness, pick, SlopeScatter(1e-6))
    law = np.exp(law_log_slope(data, roughness))[pick]
    spread = np.zeros(len(law)) if data.slope_spread is None else data.slope_spread[pick] / law
    static = (
        np.zeros((len(law), 0)) if data.static_effect is None else data.static_effect[pick] / law[:, None]
    )
    return OffLaw(
        residual=log_residual(data, pick, roughness)[pick],
        # At 0 the roughness can only grow: nothing is profiled out.
        gradient=law_gradient(data, pick, roughness)[pick] * roughness,
        own=bare.variance[pick],
        spread=np.nan_to_num(spread),
        shared=bare.effect[pick],
        static=np.nan_to_num(static),
    )


def with_readings(data: WallData, used: Mask, roughness: float, plain: SlopeScatter) -> SlopeScatter:
    """Return the scatter with a part that is the same in all readings, where the runs ask for it.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use, all above 0.
    roughness : float
        Fitted ε, m.
    plain : SlopeScatter
        All of it relative.

    Returns
    -------
    SlopeScatter
        `plain` where the runs do not ask for it, or are too few to tell.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> with_readings(data, np.isfinite(data.slope), 1e-4, SlopeScatter(0.01))
    SlopeScatter(relative=0.01, reading=0.0)
    """
    if data.slope_spread is None or used.sum() < JUDGED_BY_OTHERS:
        return plain
    relative, reading = likely_scatter(slopes_against_law(data, used, roughness))
    return SlopeScatter(relative, reading) if reading > 0 else plain


def deletion_scores(
    data: WallData, candidates: Mask, used: Mask, covariance: LogSlopeCovariance, roughness: float
) -> tuple[Array, Array]:
    """Return how far each slope stands off the law.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    candidates : (R, K) bool array
        Slopes that may be used, all above 0.
    used : (R, K) bool array
        Those in use.
    covariance : LogSlopeCovariance
        Of those in use.
    roughness : float
        Fitted ε, m.

    Returns
    -------
    score : (R, K) array
        Deletion residuals of the slopes in use, (C⁻¹r)_i / sqrt((C⁻¹)_ii) with ε profiled out, and prediction residuals
        of the other candidates, over their standard uncertainty; NaN elsewhere.
    shift : (R, K) array
        By how much the shared errors move ln S, as the runs show them.

    Examples
    --------
    A run's own flow is uncertain by 0.4 %, so its S by about 0.7 %; all runs but one lie on the law.

    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> data.slope[3] *= 1.05
    >>> sound = np.isfinite(data.slope)
    >>> used = sound & (np.arange(8) != 3)[:, None]
    >>> covariance = log_slope_covariance(data, 1e-4, used, SlopeScatter(np.nan))
    >>> score, _ = deletion_scores(data, sound, used, covariance, 1e-4)
    >>> score[:, 0].round(1).tolist()
    [0.0, 0.0, 0.0, 5.9, 0.0, 0.0, 0.0, 0.0]
    """
    residual = log_residual(data, used, roughness)
    solved = covariance.solve(residual)
    diagonal = covariance.inverse_diagonal()
    gradient = law_gradient(data, used, roughness)
    information = 0.0
    if roughness > 0:
        turned = covariance.solve(gradient)
        information = float((gradient * turned).sum())
        if information > 0:
            solved = solved - turned * float((gradient * solved).sum()) / information
            diagonal = diagonal - turned**2 / information
    score = np.where(used & (diagonal > 0), solved / np.sqrt(np.where(diagonal > 0, diagonal, 1.0)), np.nan)
    shared = covariance.shared(residual)
    shift = np.einsum("rkq,q->rk", covariance.effect, shared)
    outside = candidates & ~used
    if outside.any():
        ahead = log_residual(data, candidates, roughness) - shift
        variance = covariance.variance + np.einsum(
            "rkp,pq,rkq->rk", covariance.effect, covariance.core, covariance.effect
        )
        if information > 0:
            whole = law_gradient(data, candidates, roughness)
            rest = whole - np.einsum("rkq,q->rk", covariance.effect, covariance.shared(gradient))
            variance = variance + rest**2 / information
        known = outside & (variance > 0)
        ahead = np.where(known, ahead, np.nan) / np.sqrt(np.where(known, variance, 1.0))
        score = np.where(outside, ahead, score)
    return score, shift
