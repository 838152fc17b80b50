"""The sets of up to three readings of a run whose removal lowers the sum of squares most, in closed form.

Up to fourteen observations every set is examined, as one product of matrices; above that the search goes forward and
backward.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "MOST_OUTLIERS",
    "SINGULAR",
    "Falls",
    "subset_falls",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Most readings that are ever taken from one run.
MOST_OUTLIERS = 3
#: Up to this many observations every set is examined; above it the search goes forward and backward.
_EVERY_SET = 14
#: Readings of the largest fall alone that are paired with all others first.
_LIKELY = 12
#: A set whose removal leaves the line undetermined has a determinant this small.
SINGULAR = 1e-9
_CHUNK = 2048


@dataclass(frozen=True)
class Falls:
    """The best sets of one, two and three readings of each run.

    Parameters
    ----------
    fall : (R, 3) array
        Fall of the weighted sum of squares when the best set of k readings is removed, dimensionless; NaN where so
        many cannot be removed.
    members : (R, 3, 3) int array
        Its observations, row k − 1 for the set of k, −1 where there is none.
    """

    fall: Array
    members: NDArray[np.intp]


@lru_cache(maxsize=256)
def _sets(n: int, k: int) -> NDArray[np.intp]:
    return np.array(list(itertools.combinations(range(n), k)), dtype=np.intp).reshape(-1, k)


@lru_cache(maxsize=64)
def _pairs(n: int) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    return np.triu_indices(n)


def _set_coefficients(weight: Array, sets: NDArray[np.intp]) -> tuple[Array, Mask]:
    """Inverse of Q over each set: ((S, k, k) inverse, (S,) whether the line is still determined without the set)."""
    k = sets.shape[1]
    block = weight[sets[:, :, None], sets[:, None, :]]
    diagonal = np.maximum(np.einsum("skk->sk", block), 1e-300)
    unit = 1.0 / np.sqrt(diagonal)
    scaled = block * unit[:, :, None] * unit[:, None, :]
    sound = (np.linalg.det(scaled) > SINGULAR) & (np.einsum("skk->sk", block) > 0).all(axis=1)
    scaled[~sound] = np.eye(k)
    return np.linalg.inv(scaled) * unit[:, :, None] * unit[:, None, :], sound


def subset_falls(weighted: Array, weight: Array, used: Mask, most: int) -> Falls:
    """Find the best sets of one to `most` readings for runs of one pattern.

    Parameters
    ----------
    weighted : (R, n) array
        q = Q y, in units in which Q y has covariance Q (dimensionless when divided by the standard deviation).
    weight : (n, n) array
        Q of `gradeline.fitting.slope.project`, dimensionless.
    used : (n,) bool array
        Which observations may be removed.
    most : int
        Largest set, dimensionless count, 1 to 3.

    Returns
    -------
    Falls
        For each run.

    Notes
    -----
    Removing set J lowers the weighted sum of squares by q_J' (Q_JJ)⁻¹ q_J (R. D. Cook and S. Weisberg, *Residuals
    and Influence in Regression*, 1982, sec. 2.2 and 2.6): a quadratic form in q, the same for all runs, so all sets
    of all runs are one product of the matrix of products q_a q_b with a matrix of coefficients.

    Examples
    --------
    >>> from gradeline.fitting.slope import fit_lines, project
    >>> x = np.arange(8.0)
    >>> design = np.column_stack([np.ones(8), -x])
    >>> y = np.array([[0.0, 0, 0, 0, 0, 0, 9, 9]])
    >>> shared = project(design, np.ones((1, 8)), np.ones((1, 8), dtype=bool))
    >>> fits = fit_lines(y, design, shared)
    >>> best = subset_falls(fits.weighted_residuals, shared.weight[0], shared.used[0], 2)
    >>> best.members[0, 1].tolist()
    [6, 7, -1]
    """
    count = len(weighted)
    falls = Falls(np.full((count, MOST_OUTLIERS), np.nan), np.full((count, MOST_OUTLIERS, MOST_OUTLIERS), -1))
    candidates = np.flatnonzero(used)
    if most < 1 or len(candidates) == 0 or count == 0:
        return falls
    if len(candidates) > _EVERY_SET:
        _forward_backward(weighted, weight, candidates, most, falls)
        return falls
    q, block = weighted[:, candidates], weight[np.ix_(candidates, candidates)]
    size = len(candidates)
    first, second = _pairs(size)
    position = np.zeros((size, size), dtype=np.intp)
    position[first, second] = position[second, first] = np.arange(len(first))
    for k in range(1, most + 1):
        sets = _sets(size, k)
        inverse, sound = _set_coefficients(block, sets)
        inverse[~sound] = 0.0
        coefficients = np.zeros((len(first), len(sets)))
        for a in range(k):
            for b in range(k):
                np.add.at(
                    coefficients, (position[sets[:, a], sets[:, b]], np.arange(len(sets))), inverse[:, a, b]
                )
        for start in range(0, count, _CHUNK):
            part = slice(start, start + _CHUNK)
            fall = (q[part][:, first] * q[part][:, second]) @ coefficients
            best = fall.argmax(axis=1)
            falls.fall[part, k - 1] = np.take_along_axis(fall, best[:, None], axis=1)[:, 0]
            falls.members[part, k - 1, :k] = candidates[sets[best]]
    return falls


def _forward_backward(q: Array, weight: Array, candidates: NDArray[np.intp], most: int, falls: Falls) -> None:
    """Best single and best pair of all, then the best third; each member is put back and searched for again."""
    size = len(candidates)
    block = weight[np.ix_(candidates, candidates)]
    chunk = max(1, 400_000 // (size * min(size, _LIKELY)))
    for start in range(0, len(q), chunk):
        part = slice(start, start + chunk)
        values = q[part][:, candidates]
        rows = np.arange(len(values))
        alone = values**2 / np.diagonal(block)
        best = alone.argmax(axis=1)
        falls.fall[part, 0] = alone[rows, best]
        falls.members[part, 0, 0] = candidates[best]
        if most < 2:
            continue
        chosen, fall = _best_pair(values, alone, block)
        falls.fall[part, 1] = fall
        falls.members[part, 1, :2] = candidates[chosen]
        if most < 3:
            continue
        third, fall = _best_addition(values, block, chosen)
        chosen = np.column_stack([chosen, third])
        for turn in range(2 * MOST_OUTLIERS):
            kept = np.delete(chosen, turn % MOST_OUTLIERS, axis=1)
            again, better = _best_addition(values, block, kept)
            improved = better > fall + 1e-12
            chosen = np.where(improved[:, None], np.column_stack([kept, again]), chosen)
            fall = np.where(improved, better, fall)
        falls.fall[part, 2] = fall
        falls.members[part, 2] = candidates[np.sort(chosen, axis=1)]


def _best_pair(q: Array, alone: Array, weight: Array) -> tuple[NDArray[np.intp], Array]:
    """Return the best pair of each run, in order, and its fall.

    Pairs with one of the readings that stand out alone are looked at first. Of readings whose own fall is at most t no
    pair falls by more than 2 t / (1 − |ρ|), ρ their greatest correlation: where the best pair is beyond that, it is the
    best of all, and only where it is not are all the others looked at as well.
    """
    size = q.shape[1]
    if size <= 2 * _LIKELY:
        return _pairs_with(q, weight, np.broadcast_to(np.arange(size), q.shape))
    order = np.argpartition(-alone, _LIKELY, axis=1)
    chosen, fall = _pairs_with(q, weight, order[:, :_LIKELY])
    unit = 1.0 / np.sqrt(np.maximum(np.diagonal(weight), 1e-300))
    correlation = np.abs(weight * unit[:, None] * unit)
    np.fill_diagonal(correlation, 0.0)
    rest = np.take_along_axis(alone, order[:, _LIKELY:], axis=1).max(axis=1)
    unsure = np.flatnonzero(fall * (1.0 - min(float(correlation.max()), 1.0)) < 2.0 * rest)
    step = max(1, 400_000 // size**2)
    for start in range(0, len(unsure), step):
        some = unsure[start : start + step]
        every = np.broadcast_to(np.arange(size), (len(some), size))
        chosen[some], fall[some] = _pairs_with(q[some], weight, every)
    return chosen, fall


def _pairs_with(q: Array, weight: Array, first: NDArray[np.intp]) -> tuple[NDArray[np.intp], Array]:
    """Return the best pair of each run with one of `first` (R, m) in it, in order, and its fall."""
    rows, size = np.arange(len(q)), q.shape[1]
    diagonal, lead = np.diagonal(weight), np.take_along_axis(q, first, axis=1)
    across, own = weight[first], diagonal[first]
    product = own[:, :, None] * diagonal
    determinant = product - across**2
    sound = determinant > SINGULAR * product
    pair = (
        lead[:, :, None] ** 2 * diagonal
        - 2 * lead[:, :, None] * q[:, None, :] * across
        + q[:, None, :] ** 2 * own[:, :, None]
    )
    pair = np.where(sound, pair / np.where(sound, determinant, 1.0), 0.0).reshape(len(q), -1)
    at = pair.argmax(axis=1)
    chosen = np.column_stack([first[rows, at // size], at % size])
    return np.sort(chosen, axis=1), pair[rows, at]


def _best_addition(q: Array, weight: Array, chosen: NDArray[np.intp]) -> tuple[NDArray[np.intp], Array]:
    """Return the reading that adds most to the removal of the two in `chosen`: (its index, total fall of the three)."""
    rows = np.arange(len(q))
    inverse = np.linalg.inv(weight[chosen[:, :, None], chosen[:, None, :]])
    taken = np.take_along_axis(q, chosen, axis=1)
    solved = np.einsum("rij,rj->ri", inverse, taken)
    base = np.einsum("ri,ri->r", taken, solved)
    across = weight[chosen]  # (R, 2, n)
    rest = q - np.einsum("ri,rin->rn", solved, across)
    left = np.diagonal(weight) - np.einsum("rin,rij,rjn->rn", across, inverse, across)
    sound = left > SINGULAR * np.diagonal(weight)
    sound[rows[:, None], chosen] = False
    added = np.where(sound, rest**2 / np.where(sound, left, 1.0), 0.0)
    best = added.argmax(axis=1)
    return best, base + added[rows, best]
