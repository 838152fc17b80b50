"""Which law of friction the slopes of a wall follow, and how they depart from it: a trend over Re, or an intercept of S."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar
from scipy.special import chdtrc, fdtrc, stdtrit

from gradeline.fitting.standing import critical_score
from gradeline.fitting.wall import WallData, WallFit, fit_wall, inverse_covariance, law_log_slope
from gradeline.hydraulics.friction_laws import COLEBROOK_WHITE, SAND_GRAIN, SMOOTH

__all__ = [
    "NONE",
    "NOT_TOLD",
    "Departure",
    "Departures",
    "LawComparison",
    "LawFit",
    "compare_laws",
    "likelihood_rise",
    "measure_departures",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Verdicts beside the names of the laws.
NONE, NOT_TOLD = "none", "not told apart"
#: Laws are told apart from this difference of χ² on, and further apart where the scatter was judged from few values.
_TOLD_APART = 3.84
#: A law is rejected, and a departure from it is no chance, beyond this probability.
_FALSE_ALARM = 0.01
_FEWEST = 3
_SAME = 1e-3
_ROUGHEST, _GRID_STEPS = 0.1, 81
#: An intercept may take this much of the law's S and no more.
_LEAST = 0.1
#: A change of ln ε that moves χ² by less than the square of this is none; columns this much alike are one.
_TELLS_NOTHING, _ALIKE = 1e-6, 1e10
_ROUNDS = 8


@dataclass(frozen=True)
class LawFit:
    """A law at the roughness that suits it best.

    Parameters
    ----------
    law : str
        Its name.
    roughness : float
        ε, m; 0 for the smooth law.
    chi_square : float
        Weighted sum of squares of ln S about it, dimensionless; where nothing but the runs tells the scatter, counted in
        that about the best law.
    """

    law: str
    roughness: float
    chi_square: float


@dataclass(frozen=True)
class LawComparison:
    """The laws against the slopes of a wall, all with one covariance and on the same slopes.

    Parameters
    ----------
    fits : tuple of LawFit
        Colebrook–White, sand-grain and smooth, in this order.
    verdict : str
        Name of the law that describes the slopes better than the others; ``"smooth"`` too where no roughness improves on
        it; else ``"not told apart"`` or ``"none"``.
    best : str
        Name of the law with the least χ².
    needed : float
        Difference of χ² from which on two laws are told apart, dimensionless.
    fit_p : float
        Probability of a χ² as large about the best law by chance, dimensionless; NaN where nothing but the runs tells
        their scatter.
    trend, trend_u : float
        Change of ln f against the best law per decade of Re and its standard uncertainty, dimensionless; NaN where
        the runs tell none.
    used : (R, K) bool array
        The slopes compared.
    """

    fits: tuple[LawFit, ...]
    verdict: str
    best: str
    needed: float
    fit_p: float
    trend: float
    trend_u: float
    used: Mask


@dataclass(frozen=True)
class Departure:
    """One way in which the slopes depart from the law, the roughness fitted anew beside it.

    Parameters
    ----------
    value, u : float
        Its size and standard uncertainty: a change of ln f per decade of Re, or of S, dimensionless; NaN where the runs
        tell none.
    rise : float
        By how much χ² falls for it, dimensionless.
    beyond_chance : bool
        Whether that is more than chance does in one of a hundred surveys.
    """

    value: float
    u: float
    rise: float
    beyond_chance: bool


@dataclass(frozen=True)
class Departures:
    """The departures that are looked for.

    Parameters
    ----------
    trend : Departure
        Of ln f over log₁₀ Re.
    intercept : Departure
        Of S, the same in all runs: what an error of the heads in proportion to the chainage leaves.
    offset : Departure
        Of ln f, the same in all runs: what an error of the bore or of the flow's scale leaves, beyond what was stated of
        them.
    """

    trend: Departure
    intercept: Departure
    offset: Departure

    @property
    def by_intercept(self) -> bool:
        """Whether an intercept of S is beyond chance, and accounts for the slopes better than the others do."""
        return self.intercept.beyond_chance and self.intercept.rise > max(self.trend.rise, self.offset.rise)


@dataclass(frozen=True)
class _Fixed:
    """Slopes in use with one covariance, so that laws and columns are compared on equal terms.

    `shift` is an intercept that the law has beside its own S.
    """

    data: WallData
    used: Mask
    solve: Callable[[Array], Array]
    grid: Array
    shift: float = 0.0

    def slope(self, roughness: float | Array) -> Array:
        """S of the law and the intercept, kept above zero."""
        law = np.exp(law_log_slope(self.data, roughness))
        return np.maximum(law + self.shift, _LEAST * law)

    def residual(self, roughness: float | Array) -> Array:
        safe = np.log(np.where(self.used, self.data.slope, 1.0))
        return np.where(self.used, safe - np.log(self.slope(roughness)), 0.0)

    def product(self, left: Array, solved: Array) -> Array:
        return np.asarray((left * solved).sum(axis=(-2, -1)))

    def squares(
        self, roughness: float | Array, column: Callable[[float | Array], Array] | None = None
    ) -> Array:
        """χ² at one roughness or at several (G, 1, 1), a column's best multiple taken out."""
        residual = self.residual(roughness)
        solved = self.solve(residual)
        squares = self.product(residual, solved)
        if column is None:
            return squares
        along = column(roughness)
        size = self.product(along, self.solve(along))
        return np.asarray(squares - self.product(along, solved) ** 2 / np.maximum(size, 1e-300))

    def best(self, column: Callable[[float | Array], Array] | None = None) -> tuple[float, float]:
        """(roughness, χ²) of the minimum over ε >= 0."""
        at_grid = self.squares(self.grid[:, None, None], column)
        if not self.data.law.rough:
            return 0.0, float(at_grid[0])
        place = int(np.argmin(at_grid))
        ends = self.grid[max(place - 1, 0)], self.grid[min(place + 1, len(self.grid) - 1)]
        found = minimize_scalar(
            lambda value: float(self.squares(float(value), column)),
            bounds=(float(ends[0]), float(ends[1])),
            method="bounded",
            options={"xatol": 1e-9 * float(ends[1])},
        )
        if float(found.fun) < float(at_grid[place]):
            return float(found.x), float(found.fun)
        return float(self.grid[place]), float(at_grid[place])

    def gradient(self, roughness: float) -> Array:
        """∂ ln S / ∂ ln ε of the law."""
        relative = roughness / self.data.diameter
        _, _, by_roughness = self.data.law.sensitivities(self.data.reynolds, relative)
        return np.where(self.used, by_roughness * relative, 0.0)

    def coefficient(self, column: Callable[[float | Array], Array], roughness: float) -> tuple[float, float]:
        """The column's multiple and its standard uncertainty, ε beside it where it is inside its range."""
        columns = [column(roughness)]
        if roughness > 0:
            columns.append(self.gradient(roughness))
        turned = [self.solve(one) for one in columns]
        normal = np.array([[float(self.product(a, b)) for b in turned] for a in columns])
        size = np.sqrt(np.diagonal(normal))
        if not np.isfinite(normal).all() or not size[0] > 0:
            return float("nan"), float("nan")
        if len(size) > 1 and not size[1] > _TELLS_NOTHING:
            normal, size, turned = normal[:1, :1], size[:1], turned[:1]
        if np.linalg.cond(normal / np.outer(size, size)) > _ALIKE:
            return float("nan"), float("nan")
        inverse = np.linalg.inv(normal / np.outer(size, size)) / np.outer(size, size)
        right = np.array([float(self.product(self.residual(roughness), one)) for one in turned])
        return float((inverse @ right)[0]), float(np.sqrt(inverse[0, 0]))

    def ones(self) -> Callable[[float | Array], Array]:
        """The same change of ln S in all runs: what an error of the bore or of the flow's scale does."""
        column = self.used.astype(float)
        return lambda roughness: np.broadcast_to(column, np.shape(roughness)[:1] + column.shape)

    def decades(self) -> Callable[[float | Array], Array]:
        """log₁₀ Re about its weighted mean."""
        ones = self.used.astype(float)
        decades = np.where(self.used, np.log10(np.where(self.used, self.data.reynolds, 1.0)), 0.0)
        solved = self.solve(ones)
        mean = float(self.product(solved, decades) / self.product(solved, ones))
        centred = np.where(self.used, decades - mean, 0.0)
        return lambda roughness: np.broadcast_to(centred, np.shape(roughness)[:1] + centred.shape)

    def inverse_slope(self) -> Callable[[float | Array], Array]:
        """1/S: what a constant error of S does to ln S."""
        return lambda roughness: np.where(self.used, 1.0 / self.slope(roughness), 0.0)


def _fixed(data: WallData, fit: WallFit, used: Mask) -> _Fixed:
    roughness = float(data.diameter.max()) * np.geomspace(1e-9, _ROUGHEST, _GRID_STEPS)
    return _Fixed(data, used, inverse_covariance(data, fit, used), np.concatenate([[0.0], roughness]))


def _is_told_by_runs(fit: WallFit) -> bool:
    """Whether nothing but the runs themselves tells how they scatter."""
    return bool(np.isfinite(fit.relative_scatter))


def _stands(fit: WallFit, count: int) -> bool:
    critical = critical_score(count, fit.dof, alone=_is_told_by_runs(fit))
    return bool(np.abs(fit.score[fit.used]).max() <= critical)


def _quantile(dof: float, probability: float) -> float:
    return float(stdtrit(dof if np.isfinite(dof) else 1e9, probability))


def compare_laws(data: WallData, fit: WallFit) -> LawComparison | None:
    """Hold the slopes of a wall against Colebrook–White, the sand-grain transition and the smooth law.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    fit : WallFit
        Of that data, by Colebrook–White.

    Returns
    -------
    LawComparison or None
        None with fewer than three slopes.

    Notes
    -----
    Both rough laws have one parameter, ε >= 0, and hold the smooth law at ε = 0. All are fitted to the same slopes with
    one covariance, that of the fit. Slopes off the law stay out, unless the sand-grain law holds more of them, each within
    its uncertainty. A law is
    better where the other has a χ² larger by 3.84 or more (t²(0.975, ν) where the scatter is known by ν degrees of
    freedom); the smooth law is enough where no rough one is better by that. No law describes the slopes where the best
    leaves a χ², or a trend over Re, that chance gives once in a hundred surveys.

    Examples
    --------
    >>> from gradeline.fitting.wall import _example
    >>> data = _example()
    >>> found = compare_laws(data, fit_wall(data, np.isfinite(data.slope)))
    >>> found.verdict, [one.law for one in found.fits]
    ('Colebrook–White', ['Colebrook–White', 'sand-grain', 'smooth'])
    """
    candidates = fit.used | fit.off_law
    if candidates.sum() < _FEWEST or fit.used.sum() < _FEWEST:
        return None
    keeper, basis = fit, data
    if fit.off_law.any():
        sand = replace(data, law=SAND_GRAIN)
        other = fit_wall(sand, candidates, level=fit.level, dof=fit.dof)
        # Where the sand-grain law holds none of them either, its fit leaves nothing out: that explains nothing.
        if other.used.sum() > fit.used.sum() and _stands(other, int(candidates.sum())):
            keeper, basis = other, sand
    used = keeper.used
    fixed = _fixed(basis, keeper, used)
    of_law = {
        law.name: replace(fixed, data=replace(data, law=law)) for law in (COLEBROOK_WHITE, SAND_GRAIN, SMOOTH)
    }
    raw = {name: one.best() for name, one in of_law.items()}
    best = min(raw, key=lambda name: raw[name][1])
    if raw[SMOOTH.name][1] - raw[best][1] < _SAME:
        best = SMOOTH.name  # all of them without roughness: one law
    count = float(used.sum())
    freedom, scale, fit_p = keeper.dof, 1.0, float("nan")
    if _is_told_by_runs(keeper):
        freedom = max(count - 1.0, 1.0)
        scale = freedom / max(raw[best][1], 1e-300)
    else:
        least, left = raw[best][1], count - 1.0
        fit_p = float(chdtrc(left, least) if np.isinf(freedom) else fdtrc(left, freedom, least / left))
    fits = tuple(LawFit(name, raw[name][0], scale * raw[name][1]) for name in of_law)
    needed = max(_TOLD_APART, _quantile(freedom, 0.975) ** 2)
    trend, trend_u = of_law[best].coefficient(of_law[best].decades(), raw[best][0])
    trend_u /= np.sqrt(scale)
    chance = _quantile(max(freedom - 1.0, 1.0), 1.0 - _FALSE_ALARM / 2.0)
    off = (np.isfinite(fit_p) and fit_p < _FALSE_ALARM) or (
        np.isfinite(trend) and trend_u > 0 and abs(trend) > chance * trend_u
    )
    return LawComparison(
        fits, NONE if off else _verdict(fits, needed), best, needed, fit_p, trend, float(trend_u), used
    )


def _verdict(fits: tuple[LawFit, ...], needed: float) -> str:
    least = min(one.chi_square for one in fits)
    standing = [one.law for one in fits if one.chi_square - least < needed]
    if SMOOTH.name in standing:
        return SMOOTH.name
    return standing[0] if len(standing) == 1 else NOT_TOLD


def measure_departures(data: WallData, fit: WallFit) -> Departures:
    """Measure a trend of f over Re against the fitted law, and an intercept of S.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    fit : WallFit
        Of that data.

    Returns
    -------
    Departures
        NaN with fewer than four slopes.

    Notes
    -----
    Each is a column added to ln S = ln S_law(ε): log₁₀ Re, or c/S_law for S = S_law + c, with ε >= 0 fitted anew. Heads
    whose errors grow in proportion to the chainage (a tilted scale, elevations levelled from a wrong benchmark) tilt
    every run's line by the same c; one error common to all taps tilts none and cannot be seen.

    Examples
    --------
    >>> from gradeline.fitting.wall import _example
    >>> data = _example()
    >>> shifted = replace(data, slope=data.slope + 1e-3)
    >>> found = measure_departures(shifted, fit_wall(shifted, np.isfinite(data.slope)))
    >>> round(found.intercept.value, 4), found.intercept.beyond_chance
    (0.001, True)
    """
    nothing = Departure(float("nan"), float("nan"), 0.0, False)
    if fit.used.sum() <= _FEWEST or np.ptp(np.log(data.reynolds[fit.used])) < 1e-6:
        return Departures(nothing, nothing, nothing)
    fixed = _fixed(data, fit, fit.used)
    _, least = fixed.best()
    by_runs, freedom = _is_told_by_runs(fit), fit.dof
    if by_runs:
        freedom = max(float(fit.used.sum()) - 2.0, 1.0)
    found = []
    for value, u, with_it in (_along(fixed, fixed.decades()), _intercept(fixed), _along(fixed, fixed.ones())):
        # What the column explains is no scatter: where the runs tell that, it is counted without.
        scale = freedom / max(with_it, 1e-9) if by_runs else 1.0
        rise = scale * max(least - with_it, 0.0)
        limit = _quantile(freedom, 1.0 - _FALSE_ALARM / 2.0) ** 2
        size = u / np.sqrt(scale)
        beyond = np.isfinite(value) and rise > limit and abs(value) > np.sqrt(limit) * size
        found.append(Departure(value, float(size), float(rise), bool(beyond)))
    return Departures(*found)


def _along(fixed: _Fixed, column: Callable[[float | Array], Array]) -> tuple[float, float, float]:
    """(multiple of a column, standard uncertainty, χ² with it)."""
    roughness, with_it = fixed.best(column)
    return (*fixed.coefficient(column, roughness), with_it)


def _intercept(fixed: _Fixed) -> tuple[float, float, float]:
    """(value, standard uncertainty, χ² with it), by Gauss–Newton steps: it may be as large as the slopes of slow runs."""
    now, u, with_it = fixed, float("nan"), float("nan")
    for _ in range(_ROUNDS):
        roughness, with_it = now.best(now.inverse_slope())
        step, u = now.coefficient(now.inverse_slope(), roughness)
        if not np.isfinite(step):
            return float("nan"), float("nan"), with_it
        now = replace(now, shift=now.shift + step)
        if abs(step) < 0.01 * u:
            break
    return now.shift, u, with_it


def likelihood_rise(data: WallData, fit: WallFit, roughness: Array) -> Array:
    """Return by how much χ² rises from the fitted roughness to others.

    Parameters
    ----------
    data : WallData
        What was fitted.
    fit : WallFit
        Its outcome.
    roughness : (G,) array
        ε, m, at least 0.

    Returns
    -------
    (G,) array
        Δχ², dimensionless; the interval of the fit ends where it is t²(ν).

    Examples
    --------
    >>> from gradeline.fitting.wall import _example
    >>> data = _example()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> print(likelihood_rise(data, fit, np.array([fit.roughness, fit.low])).round(2))
    [0.   3.84]
    """
    fixed = _fixed(data, fit, fit.used)
    here = float(fixed.squares(fit.roughness))
    return np.asarray(fixed.squares(np.asarray(roughness, float)[:, None, None]) - here)
