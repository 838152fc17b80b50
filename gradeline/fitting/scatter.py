"""How the readings scatter: σ² = σ₀² + (c V²/2g)², since columns and needles surge with the flow.

The scale is robust (each run is trimmed of its worst readings first, and no single run counts for more than its
share), pooled over all runs, and held up by what was stated.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri, fdtrc

__all__ = ["Scatter", "estimate_scatter", "runs_that_tell", "scatter_variance"]

Array = NDArray[np.float64]

#: Smallest scatter that is believed, m.
_ROUNDING = 1e-6
#: A surge is taken up only where it improves twice the log-likelihood by this much (5 %, one-sided).
_SURGE_EVIDENCE = 2.71
#: The same where one run may be the only witness (1 %).
_LONE_EVIDENCE = 6.63
#: No run's scatter counts for more than this many times what the model expects.
_MOST_RATIO = 6.0
#: At most one run in so many is left out of the scatter, where so many others stay, at this chance in a sound survey.
_LONE_SHARE, _FEWEST_OTHERS, _LONE_ALARM = 5, 3, 1e-3


@dataclass(frozen=True)
class Scatter:
    """The scatter of one gauge kind.

    Parameters
    ----------
    base : float
        σ₀, m; NaN where there is nothing to judge by.
    surge : float
        c, dimensionless: the part of the velocity head that a reading swings by.
    pooled : float
        σ₀ from the readings alone, before a stated floor, m; NaN where the readings leave no freedom.
    dof : float
        Degrees of freedom of the pooled scatter, dimensionless; 0 where there are none.
    stands : bool
        Whether a stated uncertainty holds that the readings do not contradict: the scatter then counts as known.
    """

    base: float
    surge: float
    pooled: float
    dof: float
    stands: bool = False

    @property
    def is_known(self) -> bool:
        """Whether there is a scatter to judge by at all."""
        return self.stands or self.dof > 0


def estimate_scatter(
    squares: Array,
    expected: Array,
    shape: Array,
    velocity_head: Array,
    *,
    stated: float = 0.0,
    resolution: float = 0.0,
    trimmed: bool = False,
) -> Scatter:
    """Fit σ₀ and c to the runs' sums of squares.

    Parameters
    ----------
    squares : (R,) array
        (Trimmed) sum of squared residuals of each run, m².
    expected : (R,) array
        Its mean for unit variance, dimensionless; runs with 0 are left out.
    shape : (R,) array
        Degrees of freedom of the chi-square of the same relative spread, dimensionless.
    velocity_head : (R,) array
        V²/2g of each run, m.
    stated : float
        Stated uncertainty of one reading, m; 0 where none was stated. A floor under the base.
    resolution : float
        What the resolution of a reading adds to it, d/√12, m.
    trimmed : bool
        Whether the sums are trimmed of each run's worst readings. A single run's is then evidence for a surge; else
        the surge must show without it, or an outlying reading in the fastest run would pass for one.

    Returns
    -------
    Scatter
        With `base` at least `stated` and `resolution` together, and at least a micrometre: below that, what is left of
        the readings is rounding.

    Notes
    -----
    The variances s² = squares / expected are taken as gamma distributed about σ₀² + c² (V²/2g)², and σ₀², c²
    are found by iterated weighted least squares, which is the maximum likelihood of that model (P. McCullagh and
    J. A. Nelder, *Generalized Linear Models*, 2nd ed. 1989, ch. 8). c is kept only where the likelihood asks for it.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> heads = np.linspace(0.0, 0.5, 40)
    >>> true = 0.001**2 + (0.01 * heads) ** 2
    >>> scatter = estimate_scatter(true * rng.chisquare(8, 40), np.full(40, 8.0), np.full(40, 8.0), heads)
    >>> round(scatter.base, 4), round(scatter.surge, 2)
    (0.001, 0.01)
    """
    sound = np.isfinite(squares) & (expected > 1e-6)
    dof = float(shape[sound].sum())
    floor = float(np.hypot(stated, resolution))
    if not sound.any():
        base = floor if stated > 0 else np.nan
        return Scatter(base=base, surge=0.0, pooled=np.nan, dof=0.0, stands=stated > 0)
    variance = squares[sound] / expected[sound]
    freedom, head = shape[sound], velocity_head[sound]
    kept = runs_that_tell(variance, freedom, head)
    variance, freedom, head = variance[kept], freedom[kept], head[kept]
    dof = float(freedom.sum())
    flat = _fit(variance, freedom, np.zeros((len(head), 0)))
    base2, surge2 = float(flat[0]), 0.0
    if len(variance) >= 4 and np.ptp(head) > 0:
        steep = _fit(variance, freedom, (head**2)[:, None])
        gains = _gains(variance, freedom, steep[0] + steep[1] * head**2, np.full_like(head, base2))
        rest = np.arange(len(variance)) != int(gains.argmax())
        witnessed = trimmed and 2 * gains.sum() > _LONE_EVIDENCE
        shown = 2 * gains.sum() > _SURGE_EVIDENCE and _surges(variance, freedom, head, rest)
        if steep[1] > 0 and (witnessed or shown):
            base2, surge2 = float(steep[0]), float(steep[1])
    pooled = float(np.sqrt(base2))
    # No contradiction: the pooled variance lies below the 95 % point of its chi-square about the stated one.
    stands = stated > 0 and dof * base2 <= float(chdtri(dof, 0.05)) * floor**2
    return Scatter(max(pooled, floor, _ROUNDING), float(np.sqrt(surge2)), pooled, dof, stands)


def runs_that_tell(variance: Array, freedom: Array, head: Array) -> NDArray[np.bool_]:
    """Return which runs tell the scatter of all.

    A few runs that scatter beyond all that the others do have wrong readings, more than were trimmed. The worst run is
    held against the scatter and the surge of the others, whichever makes it larger, by the F test (0.1 % over all runs;
    at most one run in five).

    Parameters
    ----------
    variance : (R,) array
        Of each run, m² or any other unit.
    freedom : (R,) array
        Its degrees of freedom, dimensionless.
    head : (R,) array
        V²/2g of each run, m.

    Returns
    -------
    (R,) bool array
        False for those that stand apart.

    Examples
    --------
    >>> runs_that_tell(np.array([1.1, 0.8, 90.0, 0.7, 1.3]), np.full(5, 3.0), np.linspace(0.1, 1.0, 5)).tolist()
    [True, True, False, True, True]
    """
    kept = np.ones(len(variance), dtype=bool)
    for _ in range(len(variance) // _LONE_SHARE):
        worst = int(np.where(kept, variance, -1.0).argmax())
        rest = kept.copy()
        rest[worst] = False
        if variance[worst] <= _MOST_RATIO * float(np.median(variance[kept])) or rest.sum() < _FEWEST_OTHERS:
            break
        flat = float(_fit(variance[rest], freedom[rest], np.zeros((int(rest.sum()), 0)))[0])
        steep = _fit(variance[rest], freedom[rest], (head[rest] ** 2)[:, None])
        model = max(flat, float(steep[0] + steep[1] * head[worst] ** 2))
        chance = float(fdtrc(freedom[worst], freedom[rest].sum(), variance[worst] / model))
        if chance * len(variance) > _LONE_ALARM:
            break
        kept = rest
    return kept


def _fit(variance: Array, freedom: Array, extra: Array) -> Array:
    """Non-negative weighted least squares of the variances, weights renewed until they settle."""
    columns = np.column_stack([np.ones(len(variance)), extra])
    tiny = max(float(np.median(variance)), 1e-30) * 1e-9
    estimate = np.zeros(columns.shape[1])
    estimate[0] = max(float(np.median(variance)), tiny)
    for _ in range(30):
        model = columns @ estimate
        bounded = np.minimum(variance, _MOST_RATIO * model)
        weight = freedom / model**2
        new = _non_negative(columns, bounded, weight)
        new[0] = max(float(new[0]), tiny)
        done = bool(np.all(np.abs(new - estimate) <= 1e-10 * np.abs(estimate) + 1e-300))
        estimate = new
        if done:
            break
    return estimate


def _non_negative(columns: Array, values: Array, weight: Array) -> Array:
    """Weighted least squares in one or two parameters, none below zero."""
    normal = columns.T @ (weight[:, None] * columns)
    right = columns.T @ (weight * values)
    alone = np.maximum(right / np.diagonal(normal), 0.0)
    if len(right) == 1:
        return np.asarray(alone)
    if np.linalg.det(normal) > 1e-12 * normal[0, 0] * normal[1, 1]:
        both = np.linalg.solve(normal, right)
        if (both >= 0).all():
            return np.asarray(both)
    # The minimum lies on an edge: the one that explains more.
    falls = alone * right
    best = int(np.argmax(falls))
    edge = np.zeros(2)
    edge[best] = alone[best]
    return edge


def _surges(variance: Array, freedom: Array, head: Array, runs: NDArray[np.bool_]) -> bool:
    """Whether the likelihood of these runs asks for a surge."""
    part = [values[runs] for values in (variance, freedom, head)]
    flat = _fit(part[0], part[1], np.zeros((len(part[0]), 0)))
    steep = _fit(part[0], part[1], (part[2] ** 2)[:, None])
    gains = _gains(part[0], part[1], steep[0] + steep[1] * part[2] ** 2, np.full_like(part[0], flat[0]))
    return bool(steep[1] > 0 and 2 * gains.sum() > _SURGE_EVIDENCE)


def _gains(variance: Array, freedom: Array, model: Array, rival: Array) -> Array:
    """How much each run's log-likelihood prefers the model to its rival."""

    def likelihood(of: Array) -> Array:
        return np.asarray(-0.5 * freedom * (np.log(of) + np.minimum(variance / of, _MOST_RATIO)))

    return likelihood(model) - likelihood(rival)


def scatter_variance(scatter: Scatter, velocity_head: Array) -> Array:
    """Return σ² at each velocity head.

    Parameters
    ----------
    scatter : Scatter
        Of the gauge kind.
    velocity_head : array
        V²/2g, m.

    Returns
    -------
    array
        σ₀² + (c V²/2g)², m².

    Examples
    --------
    >>> scatter_variance(Scatter(0.001, 0.01, 0.001, 80.0), np.array([0.0, 0.1])).tolist()
    [1e-06, 2e-06]
    """
    return np.asarray(scatter.base**2 + (scatter.surge * velocity_head) ** 2)
