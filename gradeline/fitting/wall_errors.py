"""What each input does to a wall's roughness, and what half of it would do."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.wall.covariance import log_slope_covariance, log_slope_errors, scatter_of
from gradeline.fitting.wall.data import WallData, WallFit, law_gradient, law_log_slope
from gradeline.fitting.wall.likelihood import likelihood_interval
from gradeline.fitting.wall.minimum import roughness_grid

__all__ = ["WallErrors", "expected_interval", "halved", "wall_errors"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class WallErrors:
    """What each error does to the roughness of a wall.

    Parameters
    ----------
    shared : (q,) array
        Change of ε with each shared input, m.
    static : float
        Standard uncertainty of ε from static readings that scatter as the slopes do about the law, m; 0 where their
        scatter is an input.
    own_flow, own_viscosity, scatter : float
        Standard uncertainty of ε from the runs' own flows, their own viscosities and the scatter, m.
    """

    shared: Array
    static: float
    own_flow: float
    own_viscosity: float
    scatter: float

    @property
    def u(self) -> float:
        """Root sum of squares of all, m."""
        parts = (self.static, self.own_flow, self.own_viscosity, self.scatter)
        return float(np.sqrt((self.shared**2).sum() + sum(part**2 for part in parts)))


def wall_errors(data: WallData, fit: WallFit, at: float | None = None) -> WallErrors:
    """Return what each input adds to the uncertainty of the roughness, linearised about its estimate.

    Parameters
    ----------
    data : WallData
        What was fitted.
    fit : WallFit
        The outcome.
    at : float or None
        Roughness about which the law is taken as linear, m; None: the estimate. Where ε is not told from zero this is
        its upper bound.

    Returns
    -------
    WallErrors
        In m. Their root sum of squares is (g' C⁻¹ g)^(-1/2).

    Notes
    -----
    The estimate moves by a' δ with the gain a = C⁻¹ g / (g' C⁻¹ g) where ln S moves by δ against the law; g is
    ∂ ln S_law/∂ε. C⁻¹ by Woodbury's identity. So C = B + J J' splits a' C a = 1/(g' C⁻¹ g) into (a' J_q)² of each shared
    input and what B adds.

    Examples
    --------
    The bore of the example is uncertain by 0.1 %, the flow's calibration by 0.3 %, each flow by 0.4 %.

    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> errors = wall_errors(data, fit)
    >>> (np.abs(errors.shared) / fit.roughness).round(3).tolist(), round(errors.own_flow / fit.roughness, 3)
    ([0.024, 0.027], 0.017)
    """
    scatter = scatter_of(fit)
    errors = log_slope_errors(data, fit.roughness, scatter)
    covariance = log_slope_covariance(data, fit.roughness, fit.used, scatter)
    direction = law_gradient(data, fit.used, fit.roughness if at is None else at)
    turned = covariance.solve(direction)
    gain = turned / float((direction * turned).sum())
    moved = np.einsum("rk,rkq->q", gain, errors.effect)
    inputs = data.slope_effect.shape[2]

    def of_runs(change: Array) -> float:
        return float(np.sqrt(((gain * np.where(fit.used, change, 0.0)).sum(axis=1) ** 2).sum()))

    random = np.where(fit.used[:, :, None] & fit.used[:, None, :], errors.random, 0.0)
    return WallErrors(
        shared=moved[:inputs],
        static=float(np.sqrt((moved[inputs:] ** 2).sum())),
        own_flow=of_runs(errors.own),
        own_viscosity=of_runs(errors.thin),
        scatter=float(np.sqrt(max(np.einsum("rk,rkl,rl->", gain, random, gain), 0.0))),
    )


def halved(data: WallData, fit: WallFit, what: Mask | str) -> tuple[WallData, WallFit]:
    """Return the same slopes with half the uncertainty of an input.

    Parameters
    ----------
    data : WallData
        What was fitted.
    fit : WallFit
        The outcome, which holds the scatter of slopes about the law.
    what : (q,) bool array or {"static", "own_flow", "own_viscosity", "scatter"}
        Which shared inputs, or which of the other parts of `WallErrors`.

    Returns
    -------
    data, fit
        To be handed to `wall_errors` or `expected_interval`; the estimate in `fit` is the original one.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> half = halved(data, fit, np.array([True, False]))[0]
    >>> half.diameter_effect.tolist(), half.flow_effect.tolist()
    ([[0.0005, 0.0]], [0.0, 0.003])
    """
    if isinstance(what, str):
        if what == "static":
            static = None if data.static_effect is None else data.static_effect / 2.0
            return replace(data, static_effect=static), fit
        if what == "own_flow":
            return replace(data, flow_u=data.flow_u / 2.0, own_slope_effect=data.own_slope_effect / 2.0), fit
        if what == "own_viscosity":
            return replace(data, viscosity_u=data.viscosity_u / 2.0), fit
        loose = replace(
            fit, relative_scatter=fit.relative_scatter / 2.0, reading_scatter=fit.reading_scatter / 2.0
        )
        return replace(data, slope_covariance=data.slope_covariance / 4.0), loose
    share = np.where(what, 0.5, 1.0)
    return (
        replace(
            data,
            slope_effect=data.slope_effect * share,
            diameter_effect=data.diameter_effect * share,
            flow_effect=data.flow_effect * share,
            viscosity_effect=data.viscosity_effect * share,
            gravity_effect=data.gravity_effect * share,
        ),
        fit,
    )


def expected_interval(data: WallData, fit: WallFit) -> tuple[float, float, float]:
    """Return the interval and upper bound that are to be expected where the law at the fitted roughness is the truth.

    Parameters
    ----------
    data : WallData
        What was fitted, or the same with other uncertainties.
    fit : WallFit
        The outcome; the slopes in use, their scatter and the degrees of freedom are kept.

    Returns
    -------
    tuple of float
        Low, high and one-sided 95 % upper bound, m: those of slopes that lie on the law, so that two sets of
        uncertainties can be compared without the luck of the readings. NaN where the slopes set no bound.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> bool(np.allclose(expected_interval(data, fit), (fit.low, fit.high, fit.upper95), rtol=1e-6))
    True
    """
    ideal = replace(data, slope=np.exp(law_log_slope(data, fit.roughness)))
    covariance = log_slope_covariance(ideal, fit.roughness, fit.used, scatter_of(fit))
    return likelihood_interval(
        ideal, fit.used, covariance, fit.roughness, roughness_grid(ideal), fit.dof, fit.level
    )
