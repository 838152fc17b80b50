"""Many runs of one straight bore, arrays in and arrays out: what a monitoring record or a simulation needs.

No tables, no texts, no shared inputs: S, f and ε of each run with the uncertainty that its readings' scatter gives.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gradeline.errors import ReductionError
from gradeline.fitting.runs import Model, fit_runs
from gradeline.hydraulics.friction import (
    TURBULENT_LIMIT,
    darcy_friction_factor,
    relative_roughness,
    velocity_head,
)

__all__ = ["BatchResult", "reduce_arrays"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class BatchResult:
    """R runs of one bore, n taps.

    Parameters
    ----------
    slope, slope_u : (R,) array
        Friction slope S and its standard uncertainty from scatter, dimensionless; NaN where a run's readings do not
        determine it, or the scatter is not known.
    friction_factor, friction_factor_u : (R,) array
        Darcy friction factor f and its standard uncertainty from scatter, dimensionless; NaN where S is not above 0.
    roughness : (R,) array
        Equivalent sand roughness that the Colebrook–White law gives, m, signed: negative below the smooth law;
        NaN unless the run is turbulent.
    flagged : (R, n) bool array
        Outlying readings, left out of their run's line.
    scatter : (R,) array
        Standard deviation of one reading, m; NaN where there is nothing to judge by.
    """

    slope: Array
    slope_u: Array
    friction_factor: Array
    friction_factor_u: Array
    roughness: Array
    flagged: NDArray[np.bool_]
    scatter: Array


def reduce_arrays(
    heads: ArrayLike,
    chainage: ArrayLike,
    flow: ArrayLike,
    *,
    diameter: float,
    kinematic_viscosity: ArrayLike,
    gravity: float = 9.80665,
    reading_u: float | None = None,
    search: bool = True,
) -> BatchResult:
    """Reduce runs of one straight bore.

    Parameters
    ----------
    heads : (R, n) array_like
        Piezometric heads, m; NaN where not read.
    chainage : (n,) array_like
        Of the taps, m, increasing downstream.
    flow : (R,) array_like
        m³/s, above 0.
    diameter : float
        Bore, m, above 0.
    kinematic_viscosity : float or (R,) array_like
        m²/s, above 0.
    gravity : float
        m/s².
    reading_u : float, optional
        Stated standard uncertainty of one reading, m: a floor under the scatter.
    search : bool
        Whether to look for outlying readings.

    Returns
    -------
    BatchResult
        One value a run.

    Raises
    ------
    ReductionError
        Where the shapes do not go together, or a bore, viscosity or flow is not above 0.

    Notes
    -----
    The bore is constant, so the velocity head is the same at all taps and the piezometric heads have the slope of the
    energy heads. f = 2 g D S/V²; ε/D = 3.7 (10^(−1/(2√f)) − 2.51/(Re √f)).

    Examples
    --------
    >>> x = np.linspace(0.0, 5.0, 8)
    >>> heads = 2.0 - np.array([[0.05], [0.19]]) * x + 0.0005 * np.cos(9.0 * x)
    >>> result = reduce_arrays(heads, x, [4.9e-4, 9.8e-4], diameter=0.025, kinematic_viscosity=1.0e-6)
    >>> result.friction_factor.round(4).tolist(), result.flagged.any().item()
    ([0.0246, 0.0234], False)
    """
    y, x, q = (np.asarray(value, dtype=np.float64) for value in (heads, chainage, flow))
    viscosity = np.asarray(kinematic_viscosity, dtype=np.float64)
    _check(y, x, q, viscosity, diameter)
    velocity = q / (np.pi * diameter**2 / 4.0)
    # The origin amid the taps keeps level and slope apart.
    design = np.column_stack([np.ones(len(x)), x.mean() - x])
    model = Model(
        design=design,
        velocity_head=velocity_head(velocity, gravity),
        kind=np.zeros(len(x), dtype=np.intp),
        floor=np.full(len(x), 0.0 if reading_u is None else reading_u),
    )
    fits = fit_runs(y, np.isfinite(y), model, search=search, details=False)
    slope = fits.lines.parameters[:, 1]
    shared = fits.lines.projectors
    known = fits.pooled_dof > 0 or bool(reading_u)
    scatter = np.sqrt(fits.variance[:, 0]) if known else np.full(len(y), np.nan)
    # Equal weights: the covariance of a pattern times the run's variance.
    slope_u = np.sqrt(shared.covariance[:, 1, 1])[shared.index] * scatter
    slope_u[np.isnan(slope)] = np.nan
    rising = np.where(slope > 0, slope, np.nan)
    factor = darcy_friction_factor(rising, diameter, velocity, gravity)
    reynolds = velocity * diameter / viscosity
    rough = relative_roughness(factor, np.where(reynolds > TURBULENT_LIMIT, reynolds, np.nan)) * diameter
    return BatchResult(
        slope=slope,
        slope_u=slope_u,
        friction_factor=factor,
        friction_factor_u=factor * (slope_u / rising),
        roughness=rough,
        flagged=fits.flagged,
        scatter=scatter,
    )


def _check(heads: Array, chainage: Array, flow: Array, viscosity: Array, diameter: float) -> None:
    if heads.ndim != 2 or chainage.shape != heads.shape[1:] or flow.shape != heads.shape[:1]:
        raise ReductionError(
            "heads are runs × taps, chainage one a tap, flow one a run; "
            f"found heads {heads.shape}, chainage {chainage.shape}, flow {flow.shape}"
        )
    if viscosity.shape not in ((), flow.shape):
        raise ReductionError(f"the viscosity is one for all runs or one a run; found {viscosity.shape}")
    for name, value in (
        ("flow", flow),
        ("kinematic viscosity", viscosity),
        ("diameter", np.asarray(diameter)),
    ):
        if not (value > 0).all():
            raise ReductionError(f"every {name} must be above 0; found {float(np.min(value)):g}")
