"""Which law of friction the slopes of a wall follow."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc, fdtrc

from gradeline.fitting.held_slopes import held_slopes, student_point, told_by_runs
from gradeline.fitting.standing import critical_score
from gradeline.fitting.wall import WallData, WallFit, fit_wall
from gradeline.hydraulics.friction_laws import COLEBROOK_WHITE, SAND_GRAIN, SMOOTH

__all__ = ["NONE", "NOT_TOLD", "LawComparison", "LawFit", "compare_laws"]

Mask = NDArray[np.bool_]

#: Verdicts beside the names of the laws.
NONE, NOT_TOLD = "none", "not told apart"
#: Laws are told apart from this difference of χ² on, and further apart where the scatter was judged from few values.
_TOLD_APART = 3.84
#: A law is rejected beyond this probability.
_FALSE_ALARM = 0.01
_FEWEST = 3
_SAME = 1e-3


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
    >>> from gradeline.fitting.wall import example_wall
    >>> data = example_wall()
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
    fixed = held_slopes(basis, keeper, used)
    of_law = {
        law.name: replace(fixed, data=replace(data, law=law)) for law in (COLEBROOK_WHITE, SAND_GRAIN, SMOOTH)
    }
    raw = {name: one.best() for name, one in of_law.items()}
    best = min(raw, key=lambda name: raw[name][1])
    if raw[SMOOTH.name][1] - raw[best][1] < _SAME:
        best = SMOOTH.name  # all of them without roughness: one law
    count = float(used.sum())
    freedom, scale, fit_p = keeper.dof, 1.0, float("nan")
    if told_by_runs(keeper):
        freedom = max(count - 1.0, 1.0)
        scale = freedom / max(raw[best][1], 1e-300)
    else:
        least, left = raw[best][1], count - 1.0
        fit_p = float(chdtrc(left, least) if np.isinf(freedom) else fdtrc(left, freedom, least / left))
    fits = tuple(LawFit(name, raw[name][0], scale * raw[name][1]) for name in of_law)
    needed = max(_TOLD_APART, student_point(freedom, 0.975) ** 2)
    trend, trend_u = of_law[best].coefficient(of_law[best].decades(), raw[best][0])
    trend_u /= np.sqrt(scale)
    chance = student_point(max(freedom - 1.0, 1.0), 1.0 - _FALSE_ALARM / 2.0)
    off = (np.isfinite(fit_p) and fit_p < _FALSE_ALARM) or (
        np.isfinite(trend) and trend_u > 0 and abs(trend) > chance * trend_u
    )
    return LawComparison(
        fits, NONE if off else _verdict(fits, needed), best, needed, fit_p, trend, float(trend_u), used
    )


def _stands(fit: WallFit, count: int) -> bool:
    critical = critical_score(count, fit.dof, alone=told_by_runs(fit))
    return bool(np.abs(fit.score[fit.used]).max() <= critical)


def _verdict(fits: tuple[LawFit, ...], needed: float) -> str:
    least = min(one.chi_square for one in fits)
    standing = [one.law for one in fits if one.chi_square - least < needed]
    if SMOOTH.name in standing:
        return SMOOTH.name
    return standing[0] if len(standing) == 1 else NOT_TOLD
