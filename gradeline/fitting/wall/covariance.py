"""The covariance of the log slopes: the runs' own errors in blocks, all that they share as one low-rank part.

Never formed dense: C = B + J J' is applied by Woodbury's identity.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.wall.data import WallData, WallFit, law_log_slope

__all__ = [
    "LogSlopeCovariance",
    "LogSlopeErrors",
    "SlopeScatter",
    "inverse_covariance",
    "log_slope_covariance",
    "log_slope_errors",
    "scatter_is_known",
    "scatter_of",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class SlopeScatter:
    """Scatter of the slopes about the law.

    Parameters
    ----------
    relative : float
        Of ln S, dimensionless; NaN: that of `WallData.slope_covariance` stands.
    reading : float
        The part that is the same in all readings, m.
    """

    relative: float
    reading: float = 0.0

    def times(self, factor: float) -> SlopeScatter:
        """Return both parts multiplied by a factor."""
        return SlopeScatter(self.relative * factor, self.reading * factor)


@dataclass(frozen=True)
class LogSlopeErrors:
    """What moves ln S against the law, for one standard uncertainty each.

    Parameters
    ----------
    effect : (R, K, q) array
        Of the shared inputs, then of static readings where their scatter is that about the law, dimensionless.
    own : (R, K) array
        Of the run's own flow, dimensionless.
    thin : (R, K) array
        Of the run's own viscosity, dimensionless.
    random : (R, K, K) array
        Covariance of the scatter, dimensionless.
    """

    effect: Array
    own: Array
    thin: Array
    random: Array


@dataclass(frozen=True)
class LogSlopeCovariance:
    """C = B + J J' over the slopes in use, ready to be applied by Woodbury's identity.

    Parameters
    ----------
    inverse : (R, K, K) array
        B⁻¹, dimensionless; zero rows where not used.
    variance : (R, K) array
        Diagonal of B, dimensionless.
    effect : (R, K, q) array
        J, dimensionless.
    core : (q, q) array
        (I + J' B⁻¹ J)⁻¹, dimensionless.
    """

    inverse: Array
    variance: Array
    effect: Array
    core: Array

    def shared(self, values: Array) -> Array:
        """Return the shared errors that best explain `values` (..., R, K): (..., q)."""
        turned = np.einsum("rkl,...rl->...rk", self.inverse, values)
        return np.asarray(np.einsum("rkq,...rk->...q", self.effect, turned) @ self.core)

    def solve(self, values: Array) -> Array:
        """Return C⁻¹ values, zero where not used."""
        rest = values - np.einsum("rkq,...q->...rk", self.effect, self.shared(values))
        return np.asarray(np.einsum("rkl,...rl->...rk", self.inverse, rest))

    def inverse_diagonal(self) -> Array:
        """Diagonal of C⁻¹ (R, K)."""
        turned = np.einsum("rkl,rlq->rkq", self.inverse, self.effect)
        return np.asarray(
            np.einsum("rkk->rk", self.inverse) - np.einsum("rkp,pq,rkq->rk", turned, self.core, turned)
        )

    def squares(self, residual: Array) -> Array:
        """Return r' C⁻¹ r of residuals (..., R, K)."""
        return np.asarray(np.einsum("...rk,...rk->...", residual, self.solve(residual)))


def log_slope_errors(data: WallData, roughness: float | Array, scatter: SlopeScatter) -> LogSlopeErrors:
    """Return what moves ln S against the law.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    roughness : float or (K,) array
        ε at which the law is taken as linear, m, at least 0.
    scatter : SlopeScatter
        Of the slopes about the law.

    Returns
    -------
    LogSlopeErrors
        At the fitted slopes, never at the measured: a low reading must not weigh more for being low.

    Examples
    --------
    With a bore 0.1 % larger the law gives 0.5 % less at the same flow, so that S stands as much above it; with a flow
    0.3 % larger it gives 0.57 % more.

    >>> from gradeline.fitting.wall import example_wall
    >>> errors = log_slope_errors(example_wall(), 1e-4, SlopeScatter(0.01))
    >>> errors.effect[0, 0].round(5).tolist(), errors.random[0, 0].round(5).tolist()
    ([0.00505, -0.00566], [0.0001])
    """
    _, by_reynolds, by_roughness = data.law.sensitivities(data.reynolds, roughness / data.diameter)
    relative = by_roughness * roughness / data.diameter
    law = np.exp(law_log_slope(data, roughness))
    flow = 2.0 + by_reynolds
    bore = by_reynolds - relative - 1.0
    effect = (
        data.slope_effect / law[:, :, None]
        - flow[:, :, None] * data.flow_effect
        # V falls with the square of the bore at a given flow.
        - (bore - 2.0 * flow)[:, :, None] * data.diameter_effect
        + by_reynolds[:, :, None] * data.viscosity_effect[:, None, :]
        + data.gravity_effect
    )
    own = data.own_slope_effect / law - flow * data.flow_u.reshape(len(flow), -1)
    thin = by_reynolds * data.viscosity_u[:, None]
    if np.isfinite(scatter.relative):
        loose = np.full(law.shape, scatter.relative**2)
        if scatter.reading > 0 and data.slope_spread is not None:
            loose += (scatter.reading * data.slope_spread / law) ** 2
            if data.static_effect is not None:
                static = scatter.reading * data.static_effect / law[:, :, None]
                effect = np.concatenate([effect, static], axis=2)
        random = loose[:, :, None] * np.eye(len(data.diameter))
    else:
        random = data.slope_covariance / (law[:, :, None] * law[:, None, :])
    return LogSlopeErrors(np.where(np.isfinite(effect), effect, 0.0), own, thin, random)


def log_slope_covariance(
    data: WallData, roughness: float, used: Mask, scatter: SlopeScatter
) -> LogSlopeCovariance:
    """Return the covariance of ln S of the slopes in use.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    roughness : float
        ε at which the law is taken as linear, m, at least 0.
    used : (R, K) bool array
        Slopes in use.
    scatter : SlopeScatter
        Of the slopes about the law.

    Returns
    -------
    LogSlopeCovariance
        C = B + J J'.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
    >>> used = np.isfinite(data.slope)
    >>> covariance = log_slope_covariance(data, 1e-4, used, SlopeScatter(0.01))
    >>> shared = covariance.effect[:, 0]
    >>> dense = np.diag(covariance.variance[:, 0]) + shared @ shared.T
    >>> ones = np.ones((8, 1))
    >>> bool(np.allclose(dense @ covariance.solve(ones), ones))
    True
    """
    errors = log_slope_errors(data, roughness, scatter)
    effect, own, thin = errors.effect, errors.own, errors.thin
    block = own[:, :, None] * own[:, None, :] + thin[:, :, None] * thin[:, None, :] + errors.random
    both = used[:, :, None] & used[:, None, :]
    variance = np.einsum("rkk->rk", block).copy()
    block = np.where(both, block, np.eye(len(data.diameter)))
    inverse = np.where(both, np.linalg.inv(block), 0.0)
    turned = np.einsum("rkl,rlq->rkq", inverse, effect)
    return LogSlopeCovariance(inverse, variance, effect, _core(effect, turned))


def _core(effect: Array, turned: Array) -> Array:
    """(I + J' B⁻¹ J)⁻¹ from J and B⁻¹ J; with more inputs than slopes, in the few directions that these see."""
    # Their count is given: of no inputs at all it could not be told from the size.
    flat, solved = (
        part.reshape(effect.shape[0] * effect.shape[1], effect.shape[2]) for part in (effect, turned)
    )
    slopes, inputs = flat.shape
    if inputs <= slopes:
        return np.asarray(np.linalg.inv(np.eye(inputs) + flat.T @ solved))
    seen, _ = np.linalg.qr(flat.T)
    inner = np.linalg.inv(np.eye(slopes) + (flat @ seen).T @ (solved @ seen))
    return np.asarray(np.eye(inputs) + seen @ (inner - np.eye(slopes)) @ seen.T)


def scatter_of(fit: WallFit) -> SlopeScatter:
    """Return the scatter of the slopes about the law, as a fit left it.

    Parameters
    ----------
    fit : WallFit
        The outcome.

    Returns
    -------
    SlopeScatter
        NaN where the readings of the runs tell it.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> scatter_of(fit_wall(data, np.isfinite(data.slope)))
    SlopeScatter(relative=nan, reading=0.0)
    """
    return SlopeScatter(fit.relative_scatter, 0.0 if np.isnan(fit.reading_scatter) else fit.reading_scatter)


def scatter_is_known(data: WallData, fit: WallFit, used: Mask) -> bool:
    """Whether the readings of the runs, a statement or the runs together tell how far slopes scatter.

    Parameters
    ----------
    data : WallData
        What was fitted.
    fit : WallFit
        Its outcome.
    used : (R, K) bool array
        Slopes in use.

    Returns
    -------
    bool
        False for a single slope through as many readings as its line has parameters, where nothing was stated: it has
        a value and no weight, and nothing can be said of what other values are likely.

    Examples
    --------
    >>> from dataclasses import replace
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> lone = replace(data, slope_covariance=np.full((8, 1, 1), np.nan))
    >>> fit = fit_wall(lone, np.arange(8)[:, None] == 3)
    >>> scatter_is_known(lone, fit, fit.used), round(fit.roughness, 8), fit.low
    (False, 0.0001, nan)
    """
    if np.isfinite(fit.relative_scatter):
        return True
    both = used[:, :, None] & used[:, None, :]
    return bool(np.isfinite(data.slope_covariance[both]).all())


def inverse_covariance(data: WallData, fit: WallFit, used: Mask) -> Callable[[Array], Array]:
    """Return what applies the inverse covariance of ln S, as the fit has it, to slopes in use.

    Parameters
    ----------
    data : WallData
        What was fitted.
    fit : WallFit
        Its outcome: roughness and scatter.
    used : (R, K) bool array
        Slopes in use.

    Returns
    -------
    callable
        From (..., R, K) to the same, zero where not used; values there have to be 0. NaN where the scatter of a slope
        is not known.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> solve = inverse_covariance(data, fit, fit.used)
    >>> residual = np.log(data.slope) - law_log_slope(data, 2e-4)
    >>> bool((residual * solve(residual)).sum() > fit.chi_square)
    True
    """
    if not scatter_is_known(data, fit, used):
        return lambda values: np.full(np.broadcast_shapes(np.shape(values), used.shape), np.nan)
    return log_slope_covariance(data, fit.roughness, used, scatter_of(fit)).solve
