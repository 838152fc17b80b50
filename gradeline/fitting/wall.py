"""One roughness for a wall from all its turbulent runs: generalised least squares on ln S.

The runs share errors (bore, flow calibration, tap positions, temperature …); leaving them out makes intervals that
hold the truth half as often as they claim. They enter as one low-rank part of the covariance, never formed dense.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq, minimize_scalar
from scipy.special import stdtrit

from gradeline.fitting.off_law import OffLaw, likely_scatter, prediction_scores
from gradeline.fitting.standing import Standing, critical_score
from gradeline.hydraulics.friction_laws import COLEBROOK_WHITE, FrictionLaw

__all__ = [
    "WallData",
    "WallFit",
    "best_roughness",
    "fit_wall",
    "inverse_covariance",
    "law_log_slope",
    "scatter_is_known",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Largest relative roughness that is looked at; the law itself is not claimed beyond it.
_ROUGHEST = 0.1
_SETTLED = 12
_NEAR = 1e-4  # a step beyond this share of ε is no polish
#: Slopes from which on each is judged by the scatter of the others, where nothing else tells it.
_JUDGED_BY_OTHERS = 4
#: A slope this many scatters from the others stays out of the first fit.
_FAR = 5.0
#: Stands for the scatter of a single slope that nothing tells: ε is the same by any, and this one is well conditioned.
_ANY_SCATTER = 0.01


@dataclass(frozen=True)
class WallData:
    """Friction slopes of a wall, R runs by K reaches.

    Every effect is the change for one standard uncertainty of its input, so that U of the covariance is the identity.

    Parameters
    ----------
    slope : (R, K) array
        S, dimensionless; NaN where there is none.
    slope_covariance : (R, K, K) array
        Random covariance of the slopes of a run, dimensionless; NaN where the scatter is not known.
    velocity : (R, K) array
        Mean velocity, m/s.
    diameter : (K,) array
        Bore, m.
    kinematic_viscosity : (R,) array
        m²/s.
    gravity : float
        m/s².
    flow_u : (R,) or (R, K) array
        Relative standard uncertainty of each run's own flow, dimensionless; 0 where none was stated. It is one error
        in all reaches of the run.
    own_slope_effect : (R, K) array
        Change of S with the run's own flow error, dimensionless; 0 where the bore does not change.
    viscosity_u : (R,) array
        Relative standard uncertainty of each run's own viscosity, dimensionless.
    slope_effect : (R, K, q) array
        Change of S with each shared input, dimensionless.
    diameter_effect : (K, q) array
        Relative change of the bore, dimensionless.
    flow_effect : (q,) or (R, K, q) array
        Relative change of the flow, dimensionless.
    viscosity_effect : (R, q) array
        Relative change of the kinematic viscosity, dimensionless.
    gravity_effect : (q,) array
        Relative change of gravity, dimensionless.
    slope_spread : (R, K) array or None
        Change of S for readings that scatter by one metre, 1/m: what tells the scatter of readings that nobody stated
        from that of the flows. None: as if all were relative.
    static_effect : (R, K, s) array or None
        Change of S with the errors of static readings that scatter by one metre, 1/m.
    law : FrictionLaw
        That the slopes are held against.
    """

    slope: Array
    slope_covariance: Array
    velocity: Array
    diameter: Array
    kinematic_viscosity: Array
    gravity: float
    flow_u: Array
    own_slope_effect: Array
    viscosity_u: Array
    slope_effect: Array
    diameter_effect: Array
    flow_effect: Array
    viscosity_effect: Array
    gravity_effect: Array
    slope_spread: Array | None = None
    static_effect: Array | None = None
    law: FrictionLaw = COLEBROOK_WHITE

    @property
    def reynolds(self) -> Array:
        """Re of each run and reach, (R, K), dimensionless."""
        return np.asarray(self.velocity * self.diameter / self.kinematic_viscosity[:, None])


@dataclass(frozen=True)
class WallFit:
    """The roughness of a wall.

    Parameters
    ----------
    roughness, low, high, upper95 : float
        ε, its interval and its one-sided 95 % upper bound, m; NaN where it could not be had. A single slope of unknown
        scatter gives ε alone.
    level : float
        Coverage of the interval, dimensionless.
    used : (R, K) bool array
        Slopes that entered.
    off_law : (R, K) bool array
        Slopes off the fitted law beyond their uncertainty, left out.
    score : (R, K) array
        Signed studentised deletion residual of ln S, dimensionless; NaN where there is no slope.
    expected_slope : (R, K) array
        S by the fitted law, the shared errors as the other runs show them, dimensionless.
    relative_scatter : float
        Scatter of S from run to run off the law beyond the runs' own stated flow and temperature errors,
        dimensionless, where the readings of a run leave none; else NaN.
    reading_scatter : float
        The part of that scatter that is the same in all readings, m; 0 where the runs do not ask for it.
    dof : float
        Degrees of freedom of the interval, dimensionless; infinite where the scatter is known.
    trend, trend_u : float
        Change of ln f against the law per decade of Re, and its standard uncertainty, dimensionless.
    trend_dof : float
        Degrees of freedom of that uncertainty, dimensionless.
    offset, offset_u : float
        Mean of ln f against the fitted law, and its standard uncertainty with the shared errors, dimensionless.
    chi_square : float
        Weighted sum of squares at the minimum, dimensionless.
    """

    roughness: float
    low: float
    high: float
    upper95: float
    level: float
    used: Mask
    off_law: Mask
    score: Array
    expected_slope: Array
    relative_scatter: float
    reading_scatter: float
    dof: float
    trend: float
    trend_u: float
    trend_dof: float
    offset: float
    offset_u: float
    chi_square: float


def law_log_slope(data: WallData, roughness: float | Array) -> Array:
    """Return ln S by the friction law.

    Parameters
    ----------
    data : WallData
        Velocities, bores, viscosities.
    roughness : float or (G, 1, 1) array
        ε, m, at least 0.

    Returns
    -------
    array
        ln(f V² / 2 g D), (R, K) or (G, R, K), dimensionless.

    Examples
    --------
    >>> data = _example()
    >>> bool(np.allclose(law_log_slope(data, 1e-4), np.log(data.slope)))
    True
    """
    factor = data.law.factor(data.reynolds, roughness / data.diameter)
    return np.asarray(np.log(factor * data.velocity**2 / (2 * data.gravity * data.diameter)))


@dataclass(frozen=True)
class _Covariance:
    """C = B + J J' over the slopes in use, ready to be applied by Woodbury's identity."""

    inverse: Array  # B⁻¹ (R, K, K), zero rows where not used
    variance: Array  # diagonal of B (R, K)
    effect: Array  # J (R, K, q)
    core: Array  # (I + J' B⁻¹ J)⁻¹ (q, q)

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


@dataclass(frozen=True)
class _Loose:
    """Scatter of the slopes about the law: relative, and that of a reading, m. NaN: that of `slope_covariance`."""

    relative: float
    reading: float = 0.0

    def times(self, factor: float) -> _Loose:
        return _Loose(self.relative * factor, self.reading * factor)


@dataclass(frozen=True)
class _Errors:
    """What moves ln S against the law, at the fitted slopes."""

    effect: Array  # shared inputs, then static readings where their scatter is that about the law (R, K, q)
    own: Array  # the run's own flow (R, K)
    thin: Array  # the run's own viscosity (R, K)
    random: Array  # covariance of the scatter (R, K, K)


def _errors(data: WallData, roughness: float, scatter: _Loose) -> _Errors:
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
    return _Errors(np.where(np.isfinite(effect), effect, 0.0), own, thin, random)


def _covariance(data: WallData, roughness: float, used: Mask, scatter: _Loose) -> _Covariance:
    """C at the fitted slopes, never at the measured: a low reading must not weigh more for being low."""
    errors = _errors(data, roughness, scatter)
    effect, own, thin = errors.effect, errors.own, errors.thin
    block = own[:, :, None] * own[:, None, :] + thin[:, :, None] * thin[:, None, :] + errors.random
    both = used[:, :, None] & used[:, None, :]
    variance = np.einsum("rkk->rk", block).copy()
    block = np.where(both, block, np.eye(len(data.diameter)))
    inverse = np.where(both, np.linalg.inv(block), 0.0)
    turned = np.einsum("rkl,rlq->rkq", inverse, effect)
    return _Covariance(inverse, variance, effect, _core(effect, turned))


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


def _squares(covariance: _Covariance, residual: Array) -> Array:
    return np.asarray(np.einsum("...rk,...rk->...", residual, covariance.solve(residual)))


def _residual(data: WallData, used: Mask, roughness: float | Array) -> Array:
    safe = np.log(np.where(used, data.slope, 1.0))
    return np.where(used, safe - law_log_slope(data, roughness), 0.0)


@dataclass(frozen=True)
class _Grid:
    """Roughnesses from 0 to the roughest, and ln S of the law at each, worked out once."""

    roughness: Array  # (G,)
    log_slope: Array  # (G, R, K)

    def residual(self, data: WallData, used: Mask) -> Array:
        return np.where(used, np.log(np.where(used, data.slope, 1.0)) - self.log_slope, 0.0)


def _grid(data: WallData, steps: int = 81) -> _Grid:
    roughness = np.concatenate([[0.0], float(data.diameter.max()) * np.geomspace(1e-9, _ROUGHEST, steps)])
    return _Grid(roughness, law_log_slope(data, roughness[:, None, None]))


def _minimum(squares: Callable[[float], float], at_grid: Array, grid: Array) -> float:
    """Minimise over ε >= 0, from a grid that cannot miss the basin."""
    best = int(np.argmin(at_grid))
    if best == 0:
        # Between 0 and the first step the slope decides.
        inside = minimize_scalar(
            squares, bounds=(0.0, float(grid[1])), method="bounded", options={"xatol": 1e-16}
        )
        return float(inside.x) if inside.fun < at_grid[0] - 1e-12 else 0.0
    low, high = float(grid[best - 1]), float(grid[min(best + 1, len(grid) - 1)])
    found = minimize_scalar(squares, bounds=(low, high), method="bounded", options={"xatol": 1e-9 * high})
    return float(found.x)


def _robust_start(data: WallData, used: Mask, grid: _Grid) -> float:
    """ε of the least sum of absolute deviations of ln S: a slip of a decade counts once, not a hundred times."""
    residual = grid.residual(data, used)
    return float(grid.roughness[int(np.abs(residual).sum(axis=(1, 2)).argmin())])


def fit_wall(data: WallData, usable: Mask, *, level: float = 0.95, dof: float = np.inf) -> WallFit:
    """Fit one roughness to all slopes of a wall.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    usable : (R, K) bool array
        Turbulent slopes that exceed twice their standard uncertainty.
    level : float
        Coverage of the interval, 0 to 1, dimensionless.
    dof : float
        Degrees of freedom of the pooled scatter, dimensionless. Where `data.slope_covariance` is NaN the scatter is
        that of the slopes off the law, with runs − 1 degrees of freedom.

    Returns
    -------
    WallFit
        NaN in `roughness` where fewer than one slope is usable.

    Notes
    -----
    Minimises r' C⁻¹ r over ε >= 0 with r = ln S − ln S_law(ε) and C = B + J J'. Interval: the likelihood,
    Δχ² <= t²(ν); it is not symmetric and bounded below by 0. A slope is off the law where its deletion residual
    (C⁻¹r)_i / sqrt((C⁻¹)_ii), the fitted ε profiled out, is beyond the Bonferroni point of Student's t; slopes leave
    and come back until the set stands (`gradeline.fitting.standing`), from a start by least absolute deviations. Where the scatter is that off the
    law, the score is that of `gradeline.fitting.off_law.prediction_scores`, and the trend has its own estimate of it.

    Examples
    --------
    >>> data = _example()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> round(fit.roughness, 8), fit.low < fit.roughness < fit.high
    (0.0001, True)
    """
    grid = _grid(data)
    used = usable & (data.slope > 0)
    if not used.any():
        nothing = np.full(data.slope.shape, np.nan)
        gone = np.zeros(data.slope.shape, dtype=bool)
        nan = float("nan")
        none = (nan, nan, nan, nan, level, gone, gone, nothing, nothing, nan, nan, dof)
        return WallFit(*none, nan, nan, nan, nan, nan, nan)
    candidates = used
    unknown = not np.isfinite(data.slope_covariance[candidates]).all()
    roughness = _robust_start(data, used, grid)
    lone = unknown and used.sum() < 2
    scatter = _Loose(_first_scatter(_residual(data, used, roughness), used) if unknown else float("nan"))
    if lone:
        scatter = _Loose(_ANY_SCATTER)
    alone = unknown and data.slope_spread is not None and candidates.sum() >= _JUDGED_BY_OTHERS
    if used.sum() >= 4:
        used = _without_gross(data, used, roughness, scatter)
    standing = Standing(candidates)
    while True:
        roughness, covariance = _settle(data, used, grid, roughness, scatter)
        if unknown and not lone:
            scatter = _scatter_off_law(data, used, covariance, roughness)
            roughness, covariance = _settle(data, used, grid, roughness, scatter)
            loose = _with_readings(data, used, roughness, scatter)
            if loose != scatter:
                scatter = loose
                roughness, covariance = _settle(data, used, grid, roughness, scatter)
        score, shift = _scores(data, candidates, used, covariance, roughness)
        if alone:
            off = _off_law(data, candidates, roughness)
            score[candidates] = prediction_scores(off, used[candidates], _freedom(dof, used, unknown))
        critical = critical_score(int(candidates.sum()), _freedom(dof, used, unknown), alone=alone)
        now = standing.after(used, score, critical)
        if (now == used).all():
            break
        used = now
    freedom = _freedom(dof, used, unknown)
    low = high = upper = float("nan")
    if lone:
        # A single slope of unknown scatter: a value, and nothing to say how sure it is.
        scatter = _Loose(float("nan"))
    else:
        low, high, upper = _interval(data, used, covariance, roughness, grid, freedom, level)
    residual = _residual(data, used, roughness)
    trend, trend_u, trend_dof = (
        _trend_by_its_own_scatter(data, used, covariance, roughness, scatter)
        if unknown and not lone
        else (*_trend(data, used, covariance, roughness, residual), float(freedom))
    )
    ones = used.astype(float)
    weight = float((ones * covariance.solve(ones)).sum())
    return WallFit(
        roughness=roughness,
        low=low,
        high=high,
        upper95=upper,
        level=level,
        used=used,
        off_law=candidates & ~used,
        score=score,
        expected_slope=np.where(candidates, np.exp(law_log_slope(data, roughness) + shift), np.nan),
        relative_scatter=scatter.relative,
        reading_scatter=scatter.reading,
        dof=float(freedom),
        trend=trend,
        trend_u=trend_u,
        trend_dof=trend_dof,
        offset=float((ones * covariance.solve(residual)).sum()) / weight,
        offset_u=float("nan") if lone else float(weight**-0.5),
        chi_square=float(_squares(covariance, residual)),
    )


def best_roughness(data: WallData, fit: WallFit) -> float:
    """Return the roughness that fits changed data, the slopes in use and the scatter left as they were.

    Parameters
    ----------
    data : WallData
        Such as with another bore.
    fit : WallFit
        Of the original data.

    Returns
    -------
    float
        ε, m; NaN where the original has none.

    Examples
    --------
    >>> data = _example()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> abs(best_roughness(data, fit) - fit.roughness) < 1e-9
    True
    """
    if not fit.used.any():
        return float("nan")
    # A single slope of unknown scatter: any weight gives the same value.
    loose = _loose_of(fit) if scatter_is_known(data, fit, fit.used) else _Loose(_ANY_SCATTER)
    return _settle(data, fit.used, _grid(data, 41), fit.roughness, loose)[0]


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
    >>> data = _example()
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
    >>> data = _example()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> solve = inverse_covariance(data, fit, fit.used)
    >>> residual = np.log(data.slope) - law_log_slope(data, 2e-4)
    >>> bool((residual * solve(residual)).sum() > fit.chi_square)
    True
    """
    if not scatter_is_known(data, fit, used):
        return lambda values: np.full(np.broadcast_shapes(np.shape(values), used.shape), np.nan)
    return _covariance(data, fit.roughness, used, _loose_of(fit)).solve


def _without_gross(data: WallData, used: Mask, roughness: float, scatter: _Loose) -> Mask:
    """Leave gross slips out of the first fit; shared errors move all alike, which the median takes up."""
    away = _residual(data, used, roughness)
    unknown = bool(np.isfinite(scatter.relative))
    if not unknown:
        away = away / np.sqrt(np.where(used, _covariance(data, roughness, used, scatter).variance, 1.0))
    away = away - np.median(away[used])
    room = _FAR * max(_first_scatter(away, used), 0.0 if unknown else 1.0) * np.ones(away.shape)
    if unknown and data.slope_spread is not None:
        # What the readings may do to a slow run is not far.
        spread = np.where(used, data.slope_spread / np.where(used, data.slope, 1.0), np.nan)
        room = np.fmax(room, _FAR * _first_scatter(away / spread, used) * spread)
    return np.asarray(used & (np.abs(away) < room))


def _loose_of(fit: WallFit) -> _Loose:
    return _Loose(fit.relative_scatter, 0.0 if np.isnan(fit.reading_scatter) else fit.reading_scatter)


def _freedom(dof: float, used: Mask, unknown: bool) -> float:
    return max(float(used.sum()) - 1.0, 1.0) if unknown else max(dof, 1.0) if np.isfinite(dof) else np.inf


def _first_scatter(residual: Array, used: Mask) -> float:
    """Scale by the median absolute deviation, with its usual factor for the normal distribution."""
    values = residual[used]
    return max(float(1.4826 * np.median(np.abs(values - np.median(values)))), 1e-6)


def _scatter_off_law(data: WallData, used: Mask, covariance: _Covariance, roughness: float) -> _Loose:
    """Scale of the slopes off the law once ε and the shared errors are taken out, beyond the runs' own errors."""
    residual = _residual(data, used, roughness)
    rest = residual - np.einsum("rkq,q->rk", covariance.effect, covariance.shared(residual))
    own = _covariance(data, roughness, used, _Loose(1e-6)).variance
    excess = (rest[used] ** 2).sum() / max(used.sum() - 1, 1) - own[used].mean()
    return _Loose(float(np.sqrt(max(excess, 1e-12))))


def _off_law(data: WallData, pick: Mask, roughness: float) -> OffLaw:
    """The picked slopes against the law, for the likelihood of their scatter."""
    bare = _covariance(data, roughness, pick, _Loose(1e-6))
    law = np.exp(law_log_slope(data, roughness))[pick]
    spread = np.zeros(len(law)) if data.slope_spread is None else data.slope_spread[pick] / law
    static = (
        np.zeros((len(law), 0)) if data.static_effect is None else data.static_effect[pick] / law[:, None]
    )
    return OffLaw(
        residual=_residual(data, pick, roughness)[pick],
        # At 0 the roughness can only grow: nothing is profiled out.
        gradient=_law_gradient(data, pick, roughness)[pick] * roughness,
        own=bare.variance[pick],
        spread=np.nan_to_num(spread),
        shared=bare.effect[pick],
        static=np.nan_to_num(static),
    )


def _with_readings(data: WallData, used: Mask, roughness: float, plain: _Loose) -> _Loose:
    """The scatter with a part that is the same in all readings, where the runs ask for it."""
    if data.slope_spread is None or used.sum() < _JUDGED_BY_OTHERS:
        return plain
    relative, reading = likely_scatter(_off_law(data, used, roughness))
    return _Loose(relative, reading) if reading > 0 else plain


def _settle(
    data: WallData, used: Mask, grid: _Grid, roughness: float, scatter: _Loose
) -> tuple[float, _Covariance]:
    """Minimise with the covariance at the fitted slopes, renewed until ε stands."""
    covariance = _covariance(data, roughness, used, scatter)
    residual = grid.residual(data, used)
    for _ in range(_SETTLED):
        at_grid = _squares(covariance, residual)
        fixed = covariance

        def squares(value: float, fixed: _Covariance = fixed) -> float:
            return float(_squares(fixed, _residual(data, used, value)))

        new = _minimum(squares, at_grid, grid.roughness)
        covariance = _covariance(data, new, used, scatter)
        done = abs(new - roughness) <= 1e-6 * max(new, roughness)
        roughness = new
        if done:
            break
    return _polished(data, used, roughness, scatter, covariance)


def _polished(
    data: WallData, used: Mask, roughness: float, scatter: _Loose, covariance: _Covariance
) -> tuple[float, _Covariance]:
    """Take ε from eight digits, all that a search for a minimum can give, to rounding, by Gauss–Newton steps."""
    for _ in range(_SETTLED):
        if not roughness > 0:
            break
        gradient = _law_gradient(data, used, roughness)
        turned = covariance.solve(gradient)
        information = float((gradient * turned).sum())
        step = (
            float((turned * _residual(data, used, roughness)).sum()) / information if information > 0 else 0.0
        )
        if not abs(step) <= _NEAR * roughness:
            break  # the minimum is an edge, or a flat one: the search stands
        roughness += step
        covariance = _covariance(data, roughness, used, scatter)
        if abs(step) <= 1e-15 * roughness:
            break
    return roughness, covariance


def _law_gradient(data: WallData, used: Mask, roughness: float) -> Array:
    """Return ∂ ln S_law / ∂ε (R, K), 1/m."""
    _, _, by_roughness = data.law.sensitivities(data.reynolds, roughness / data.diameter)
    return np.where(used, by_roughness / data.diameter, 0.0)


def _scores(
    data: WallData, candidates: Mask, used: Mask, covariance: _Covariance, roughness: float
) -> tuple[Array, Array]:
    """Deletion residuals of the slopes in use, prediction residuals of the others; and the shared shift of ln S."""
    residual = _residual(data, used, roughness)
    solved = covariance.solve(residual)
    diagonal = covariance.inverse_diagonal()
    gradient = _law_gradient(data, used, roughness)
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
        ahead = _residual(data, candidates, roughness) - shift
        variance = covariance.variance + np.einsum(
            "rkp,pq,rkq->rk", covariance.effect, covariance.core, covariance.effect
        )
        if information > 0:
            whole = _law_gradient(data, candidates, roughness)
            rest = whole - np.einsum("rkq,q->rk", covariance.effect, covariance.shared(gradient))
            variance = variance + rest**2 / information
        score = np.where(outside, ahead / np.sqrt(variance), score)
    return score, shift


def _interval(
    data: WallData,
    used: Mask,
    covariance: _Covariance,
    roughness: float,
    grid: _Grid,
    dof: float,
    level: float,
) -> tuple[float, float, float]:
    """Likelihood interval at `level` and the one-sided 95 % upper bound; NaN where the data set no bound."""

    def above(value: float) -> float:
        return float(_squares(covariance, _residual(data, used, value))) - least

    least = float(_squares(covariance, _residual(data, used, roughness)))
    two_sided = (
        float(stdtrit(dof, 0.5 + level / 2.0)) ** 2 if np.isfinite(dof) else _normal(0.5 + level / 2.0) ** 2
    )
    one_sided = float(stdtrit(dof, 0.95)) ** 2 if np.isfinite(dof) else _normal(0.95) ** 2
    low = 0.0
    if roughness > 0 and above(0.0) > two_sided:
        low = float(brentq(lambda value: above(value) - two_sided, 0.0, roughness, xtol=1e-20))
    highs = []
    rougher = grid.roughness > roughness
    beyond = grid.roughness[rougher]
    climb = _squares(covariance, grid.residual(data, used)[rougher]) - least
    for rise in (two_sided, one_sided):
        over = np.flatnonzero(climb > rise)
        if not len(over):
            highs.append(float("nan"))
            continue
        start = roughness if over[0] == 0 else float(beyond[over[0] - 1])
        highs.append(
            float(
                brentq(
                    lambda value, rise=rise: above(value) - rise, start, float(beyond[over[0]]), xtol=1e-20
                )
            )
        )
    return low, highs[0], highs[1]


def _normal(probability: float) -> float:
    return float(stdtrit(1e9, probability))


def _trend(
    data: WallData, used: Mask, covariance: _Covariance, roughness: float, residual: Array
) -> tuple[float, float]:
    """Slope of ln f against the law over log10 Re, ε profiled out where it is inside its range."""
    columns = _trend_columns(data, used, covariance, roughness)
    if columns is None:
        return float("nan"), float("nan")
    fit = _regress(covariance, columns, residual)
    return (float("nan"), float("nan")) if fit is None else (float(fit[0][0]), float(np.sqrt(fit[1][0, 0])))


def _trend_columns(
    data: WallData, used: Mask, covariance: _Covariance, roughness: float, *, about_runs: bool = False
) -> list[Array] | None:
    """log10 Re about its mean, and ε where it is inside its range; None where there is no trend to tell.

    The mean that is independent of the level, or `about_runs` that by the runs' own scatter: where a shared error
    leaves the level loose, the former may lie far outside the runs, and a trend about there is a level as well.
    """
    if used.sum() < 3:
        return None
    decades = np.where(used, np.log10(np.where(used, data.reynolds, 1.0)), 0.0)
    if np.ptp(decades[used]) < 1e-6:
        return None
    ones = used.astype(float)
    solved = np.where(used, 1.0 / covariance.variance, 0.0) if about_runs else covariance.solve(ones)
    centred = np.where(used, decades - float((solved * decades).sum()) / float((solved * ones).sum()), 0.0)
    if roughness > 0:
        return [centred, _law_gradient(data, used, roughness) * roughness]
    return [centred]


def _regress(covariance: _Covariance, columns: list[Array], residual: Array) -> tuple[Array, Array] | None:
    """Generalised least squares of the residual on columns: (coefficients, their covariance)."""
    turned = [covariance.solve(column) for column in columns]
    normal = np.array([[float((a * b).sum()) for b in turned] for a in columns])
    right = np.array([float((residual * b).sum()) for b in turned])
    if np.linalg.cond(normal) > 1e12:
        return None
    inverse = np.linalg.inv(normal)
    return inverse @ right, inverse


def _trend_by_its_own_scatter(
    data: WallData, used: Mask, covariance: _Covariance, roughness: float, scatter: _Loose
) -> tuple[float, float, float]:
    """The trend, the scatter off the law judged anew with the trend taken out, and its degrees of freedom.

    What a trend does to the runs is no scatter: left in, it would make its own uncertainty too wide. ε moves with it.
    """
    own = _covariance(data, roughness, used, _Loose(1e-9)).variance
    nan, freedom = float("nan"), max(float(used.sum()) - 2.0, 1.0)
    found, loose = (nan, nan, freedom), scatter
    for _ in range(_SETTLED):
        residual = _residual(data, used, roughness)
        columns = _trend_columns(data, used, covariance, roughness, about_runs=True)
        fit = None if columns is None else _regress(covariance, columns, residual)
        if fit is None or columns is None:
            return nan, nan, freedom
        found = float(fit[0][0]), float(np.sqrt(fit[1][0, 0])), freedom
        rest = residual - np.tensordot(fit[0], np.array(columns), 1)
        rest = rest - np.einsum("rkq,q->rk", covariance.effect, covariance.shared(rest))
        # Relative to what each slope scatters by, beyond the runs' own errors.
        part = np.maximum((covariance.variance - own)[used], 1e-18)
        excess = ((rest[used] ** 2 - own[used] * freedom / used.sum()) / part).sum() / freedom
        factor = float(np.sqrt(max(excess, 1e-6)))
        loose = loose.times(factor)
        step = float(np.clip(fit[0][1], -1.0, 1.0)) if len(fit[0]) > 1 else 0.0
        roughness = min(roughness * float(np.exp(step)), _ROUGHEST * float(data.diameter.min()))
        covariance = _covariance(data, roughness, used, loose)
        if abs(factor - 1.0) < 1e-4 and abs(step) < 1e-3:
            break
    return found


def _example() -> WallData:
    """Eight exact runs of a rough pipe, for the examples."""
    velocity = np.linspace(0.8, 3.0, 8)[:, None]
    data = WallData(
        slope=np.full((8, 1), np.nan),
        slope_covariance=np.full((8, 1, 1), 1e-10),
        velocity=velocity,
        diameter=np.array([0.05]),
        kinematic_viscosity=np.full(8, 1.0e-6),
        gravity=9.81,
        flow_u=np.full(8, 0.004),
        own_slope_effect=np.zeros((8, 1)),
        viscosity_u=np.zeros(8),
        slope_effect=np.zeros((8, 1, 2)),
        diameter_effect=np.array([[0.001, 0.0]]),
        flow_effect=np.array([0.0, 0.003]),
        viscosity_effect=np.zeros((8, 2)),
        gravity_effect=np.zeros(2),
    )
    return replace(data, slope=np.exp(law_log_slope(data, 1e-4)))
