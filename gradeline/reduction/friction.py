"""Friction factor and roughness of every run and reach, each with its interval."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.hydraulics.friction import (
    colebrook_white_sensitivities,
    darcy_friction_factor,
    regime,
    relative_roughness,
)
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall, slope_uncertainty

__all__ = ["LAMINAR_FAR", "Friction", "factor_effects", "friction_of"]

Array = NDArray[np.float64]

#: Logarithm of the widest interval of f, beyond which no wall lies: e⁵⁰ times and more.
_WIDEST = 50.0

#: f Re of laminar flow this many times its value, or this part of it, is a wrong unit: no bore is off by the fourth root.
LAMINAR_FAR = 10.0


@dataclass(frozen=True)
class Friction:
    """Arrays (F, K) over flowing runs and reaches; NaN where there is no value.

    Parameters
    ----------
    slope, slope_u, slope_u_random, slope_dof, slope_low, slope_high : array
        S and its uncertainty, dimensionless.
    factor, factor_u, factor_low, factor_high : array
        f, dimensionless.
    roughness_signed, roughness_low, roughness_high : array
        ε of the run alone, m; turbulent runs only. The signed value may be negative.
    laminar_ratio, laminar_ratio_u : array
        f Re / 64 of laminar runs (in place of 64 that of the shape), dimensionless: 1 for the true bore (its
        fourth power) and flow.
    regime : array of str
        Of each run and reach.
    """

    slope: Array
    slope_u: Array
    slope_u_random: Array
    slope_dof: Array
    slope_low: Array
    slope_high: Array
    factor: Array
    factor_u: Array
    factor_low: Array
    factor_high: Array
    roughness_signed: Array
    roughness_low: Array
    roughness_high: Array
    laminar_ratio: Array
    laminar_ratio_u: Array
    regime: NDArray[np.str_]


def friction_of(
    line: Line,
    media: Media,
    flowing: Flowing,
    walls: tuple[Wall, ...],
    *,
    level: float,
    temperature_run: Array | None = None,
) -> Friction:
    """Work out friction factor and roughness of every run and reach.

    Parameters
    ----------
    line, media, flowing, walls
        The line, its fluids and what the fits say.
    level : float
        Coverage of the intervals.
    temperature_run : (F,) array or None
        Standard uncertainty of each run's own temperature, K; None: 0.

    Returns
    -------
    Friction
        Intervals by Student's t with the effective degrees of freedom of Welch and Satterthwaite.
    """
    slope = flowing.slopes()
    total, random = slope_uncertainty(flowing, len(line.diameter))
    pooled = flowing.fits.pooled_dof
    # Infinite where a statement stands: then only the number has no place, in the table as in the JSON.
    base = np.full(slope.shape, pooled if 0 < pooled < np.inf else np.nan)
    for wall in walls:
        if np.isfinite(wall.fit.relative_scatter):
            # No scatter within a run: that of the slopes about the law stands for it.
            part = wall.scatter_of_slopes(slope[:, wall.reaches])
            random[:, wall.reaches] = part
            shared = np.einsum("fpq,fpq->fp", flowing.effect, flowing.effect)[:, 1 + wall.reaches]
            total[:, wall.reaches] = np.sqrt(part**2 + shared)
            base[:, wall.reaches] = wall.fit.dof
    # Scatter that nobody stated and nothing shows contributes nothing: what was stated is then all there is to say.
    unknown = ~np.isfinite(random)
    stated = np.einsum("fpq,fpq->fp", flowing.effect, flowing.effect) + flowing.own**2
    stated = np.sqrt(stated[:, 1 : 1 + len(line.diameter)])
    total = np.where(unknown, np.where(stated > 0, stated, np.nan), total)
    total, random = (np.where(np.isfinite(slope), values, np.nan) for values in (total, random))
    effective = _effective_dof(total, random, base)
    times = stdtrit(np.where(np.isfinite(effective), effective, 1e9), 0.5 + level / 2.0)
    positive = slope > 0
    factor = np.where(
        positive,
        darcy_friction_factor(np.where(positive, slope, 1.0), line.diameter, flowing.velocity, media.gravity),
        np.nan,
    )
    safe = np.where(positive, slope, np.nan)
    effect = factor_effects(flowing, safe)
    own = flowing.own[:, 1 : 1 + len(line.diameter)] / safe - 2.0 * flowing.reach_flow_u
    scatter = np.where(unknown, 0.0, _scatter_variance(random, flowing, line))
    relative = np.sqrt(scatter / safe**2 + own**2 + _squared(effect))
    relative = np.where(relative > 0, relative, np.nan)
    factor_dof = _effective_dof(relative, np.sqrt(scatter) / np.abs(safe), base)
    factor_times = np.asarray(
        stdtrit(np.where(np.isfinite(factor_dof), factor_dof, 1e9), 0.5 + level / 2.0), float
    )
    reynolds = flowing.reynolds
    own_temperature = np.zeros(len(flowing.rows)) if temperature_run is None else temperature_run
    thin = (media.viscosity_by_temperature[flowing.rows] * own_temperature)[:, None]
    kind = regime(reynolds)
    turbulent = (kind == "turbulent") & positive
    signed = np.where(
        turbulent, relative_roughness(np.where(positive, factor, 1.0), reynolds) * line.diameter, np.nan
    )
    low, high = _roughness_interval(
        line, flowing, factor, signed, scatter / safe**2, effect, own, thin, factor_times, turbulent
    )
    ratio = np.where(kind == "laminar", factor * reynolds / line.laminar_constant, np.nan)
    # f Re goes as D⁴ g S / (Q ν).
    drag = effect + _reynolds_effects(flowing, line) - _constant_effects(flowing, line)
    drag_u = np.sqrt(scatter / safe**2 + (own + flowing.reach_flow_u) ** 2 + thin**2 + _squared(drag))
    return Friction(
        slope=slope,
        slope_u=total,
        slope_u_random=random,
        slope_dof=base,
        slope_low=slope - times * total,
        slope_high=slope + times * total,
        factor=factor,
        factor_u=factor * relative,
        factor_low=factor * (1.0 - factor_times * relative),
        factor_high=factor * (1.0 + factor_times * relative),
        roughness_signed=signed,
        roughness_low=low,
        roughness_high=high,
        laminar_ratio=ratio,
        laminar_ratio_u=ratio * np.where(drag_u > 0, drag_u, np.nan),
        regime=kind,
    )


def _effective_dof(total: Array, random: Array, base: Array) -> Array:
    """Welch–Satterthwaite: only the scatter was judged from few values."""
    with np.errstate(invalid="ignore", divide="ignore"):
        dof = base * (total / random) ** 4
    return np.where(np.isfinite(dof), np.minimum(dof, 1e9), np.nan)


def _scatter_variance(random: Array, flowing: Flowing, line: Line) -> Array:
    """Variance of S from scatter alone, the run's own flow taken out again."""
    own = flowing.own[:, 1 : 1 + len(line.diameter)]
    return np.maximum(random**2 - own**2, 0.0)


def _squared(effect: Array) -> Array:
    return np.asarray(np.einsum("fkq,fkq->fk", effect, effect))


def factor_effects(flowing: Flowing, slope: Array) -> Array:
    """Change of ln f with each shared input (F, K, q): f goes as D⁵ g S / Q²."""
    reaches = slope.shape[1]
    effect = flowing.effect[:, 1 : 1 + reaches] / slope[:, :, None]
    for q, one in enumerate(flowing.inputs):
        bore = 0.0 if one.diameter is None else 5.0 * one.diameter
        effect[:, :, q] += bore - 2.0 * one.flow + one.gravity
    return np.asarray(effect)


def _reynolds_effects(flowing: Flowing, line: Line) -> Array:
    """Change of ln Re with each shared input (F, K, q): Re goes as Q / (D ν)."""
    effect = np.zeros((*flowing.reynolds.shape, len(flowing.inputs)))
    for q, one in enumerate(flowing.inputs):
        effect[:, :, q] += one.flow - (np.zeros(len(line.diameter)) if one.diameter is None else one.diameter)
        if one.viscosity is not None:
            effect[:, :, q] -= one.viscosity[:, None]
    return effect


def _constant_effects(flowing: Flowing, line: Line) -> Array:
    """Change of ln(f Re) of laminar flow with each shared input (K, q): it goes with the shape alone."""
    none = np.zeros(len(line.diameter))
    found = [none if one.laminar_constant is None else one.laminar_constant for one in flowing.inputs]
    return np.stack(found, axis=1) if found else np.zeros((len(none), 0))


def _roughness_interval(
    line: Line,
    flowing: Flowing,
    factor: Array,
    signed: Array,
    scatter: Array,
    effect: Array,
    own: Array,
    thin: Array,
    times: Array,
    turbulent: NDArray[np.bool_],
) -> tuple[Array, Array]:
    """ε whose law lies within the run's uncertainty, Re moving along with bore, flow and viscosity."""
    reynolds = np.maximum(flowing.reynolds, 1.0)
    at = np.where(turbulent, np.maximum(np.nan_to_num(signed), 0.0), 0.0) / line.diameter
    _, by_reynolds, by_roughness = colebrook_white_sensitivities(reynolds, np.clip(at, 0.0, 0.1))
    relative = by_roughness * at
    if flowing.inputs:
        # At a given flow Re falls with the bore; ε/D does too.
        bore = [
            np.zeros(len(line.diameter)) if one.diameter is None else one.diameter for one in flowing.inputs
        ]
        along = by_reynolds[:, :, None] * _reynolds_effects(flowing, line)
        effect = effect - along + relative[:, :, None] * np.stack(bore, axis=1)
    rest = own - by_reynolds * flowing.reach_flow_u
    u = np.sqrt(scatter + rest**2 + (by_reynolds * thin) ** 2 + _squared(effect))
    wide = np.minimum(times * u, _WIDEST)
    low = relative_roughness(np.where(turbulent, factor * np.exp(-wide), 1.0), reynolds) * line.diameter
    high = relative_roughness(np.where(turbulent, factor * np.exp(wide), 1.0), reynolds) * line.diameter
    known = turbulent & np.isfinite(u)
    return np.where(known, np.maximum(low, 0.0), np.nan), np.where(known, np.maximum(high, 0.0), np.nan)
