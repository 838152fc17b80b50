"""Outlying readings: the set of up to three readings of a run whose removal explains most.

One bad reading at a time is not enough: two bad neighbours pull the line to themselves and hide each other. So all
sets of up to three readings are compared at once, in closed form, and the number of bad readings is decided by how
much each further one explains.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "MOST_OUTLIERS",
    "Outliers",
    "deletion_residuals",
    "most_removable",
    "search_outliers",
    "subset_falls",
    "trimming",
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
_SINGULAR = 1e-9
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


@dataclass(frozen=True)
class Outliers:
    """What the search found.

    Parameters
    ----------
    flagged : (R, n) bool array
        Outlying readings.
    falls : Falls
        The best sets of each run that was searched; NaN for quiet runs.
    """

    flagged: Mask
    falls: Falls


def most_removable(
    observations: int | NDArray[np.intp], parameters: int | NDArray[np.intp]
) -> NDArray[np.intp]:
    """How many readings may be taken from a run: never fewer than p + 2 left, nor half removed.

    Parameters
    ----------
    observations : int or int array
        Readings of the run, dimensionless count.
    parameters : int or int array
        Free parameters p, dimensionless count.

    Returns
    -------
    int array
        0 to 3.

    Examples
    --------
    >>> most_removable(np.array([4, 5, 6, 7, 10]), 2)
    array([0, 1, 2, 3, 3])
    """
    left = np.asarray(observations) - np.asarray(parameters) - 2
    half = (np.asarray(observations) - 1) // 2
    return np.asarray(np.clip(np.minimum(left, half), 0, MOST_OUTLIERS))


def trimming(most: int | NDArray[np.intp]) -> NDArray[np.intp]:
    """How many readings a run loses before its scatter is judged.

    One fewer than may be removed, at least one where any may, at most two: enough that a pair of bad readings does
    not pass for scatter, few enough that some readings are left to judge by.

    Parameters
    ----------
    most : int or int array
        Readings that may be removed, dimensionless count.

    Returns
    -------
    int array
        0 to 2.

    Examples
    --------
    >>> trimming(np.array([0, 1, 2, 3]))
    array([0, 1, 1, 2])
    """
    most = np.asarray(most)
    return np.asarray(np.clip(most - 1, np.minimum(most, 1), 2))


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
    sound = (np.linalg.det(scaled) > _SINGULAR) & (np.einsum("skk->sk", block) > 0).all(axis=1)
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
    sound = determinant > _SINGULAR * product
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
    sound = left > _SINGULAR * np.diagonal(weight)
    sound[rows[:, None], chosen] = False
    added = np.where(sound, rest**2 / np.where(sound, left, 1.0), 0.0)
    best = added.argmax(axis=1)
    return best, base + added[rows, best]


def search_outliers(
    weighted: Array,
    weights: Array,
    index: NDArray[np.intp],
    used: Mask,
    most: NDArray[np.intp],
    critical: Array,
    sum_of_squares: Array,
) -> Outliers:
    """Find the outlying readings of all runs.

    For k = 3, 2, 1 the best set of k is compared with the best set of k − 1; the largest k is accepted whose added
    fall exceeds its critical value.

    Parameters
    ----------
    weighted : (R, n) array
        q = Q y divided by the run's standard deviation, dimensionless.
    weights : (U, n, n) array
        Q of each pattern, dimensionless.
    index : (R,) int array
        Pattern of each run.
    used : (U, n) bool array
        Observations of each pattern.
    most : (U,) int array
        Largest set for each pattern, dimensionless count.
    critical : (U, 3) array
        Critical value of the added fall for k = 1, 2, 3, dimensionless.
    sum_of_squares : (R,) array
        Weighted sum of squares of each run, dimensionless; a run whose whole sum is below every critical value is
        quiet and not searched.

    Returns
    -------
    Outliers
        Flags and the best sets.

    Examples
    --------
    >>> from gradeline.fitting.slope import fit_lines, project
    >>> design = np.column_stack([np.ones(9), -np.arange(9.0)])
    >>> y = np.zeros((2, 9))
    >>> y[1, 4] = 20.0
    >>> shared = project(design, np.ones((2, 9)), np.ones((2, 9), dtype=bool))
    >>> fits = fit_lines(y, design, shared)
    >>> found = search_outliers(fits.weighted_residuals, shared.weight, shared.index, shared.used,
    ...     np.array([3]), np.full((1, 3), 11.0), fits.sum_of_squares)
    >>> np.argwhere(found.flagged).tolist()
    [[1, 4]]
    """
    count, n = weighted.shape
    falls = Falls(np.full((count, MOST_OUTLIERS), np.nan), np.full((count, MOST_OUTLIERS, MOST_OUTLIERS), -1))
    flagged = np.zeros((count, n), dtype=bool)
    lowest = np.where(most > 0, critical.min(axis=1), np.inf)
    lively = np.flatnonzero(sum_of_squares > lowest[index])
    for pattern in np.unique(index[lively]):
        runs = lively[index[lively] == pattern]
        found = subset_falls(weighted[runs], weights[pattern], used[pattern], int(most[pattern]))
        falls.fall[runs], falls.members[runs] = found.fall, found.members
        added = np.diff(found.fall, axis=1, prepend=0.0)
        beyond = added > critical[pattern]  # NaN where so many cannot be removed: never beyond
        accepted = np.where(beyond, np.arange(1, MOST_OUTLIERS + 1), 0).max(axis=1)
        hit = accepted > 0
        members = found.members[hit, accepted[hit] - 1]
        row = np.repeat(runs[hit], MOST_OUTLIERS).reshape(members.shape)
        flagged[row[members >= 0], members[members >= 0]] = True
    return Outliers(flagged, falls)


def deletion_residuals(
    weighted: Array, weights: Array, index: NDArray[np.intp], flagged: Mask
) -> tuple[Array, Array]:
    """How far each reading lies from the line through the others, and that in its standard deviations.

    Flagged readings of a run are taken out together with the one looked at.

    Parameters
    ----------
    weighted : (R, n) array
        q = Q y of the fit to all observations (flagged ones too), divided by the run's variance scale, 1/m.
    weights : (U, n, n) array
        Q of each pattern; times 1/scale it is the inverse covariance of q, so give it for unit scale, dimensionless.
    index : (R,) int array
        Pattern of each run.
    flagged : (R, n) bool array
        Readings taken out of each run.

    Returns
    -------
    error : (R, n) array
        Reading minus the value that the others predict, in the unit of y, for a `weighted` of unit scale; NaN where
        the others do not determine it.
    score : (R, n) array
        The same divided by its standard deviation, dimensionless (signed studentised deletion residual).

    Notes
    -----
    With D = J ∪ {i}: δ_D = (Q_DD)⁻¹ q_D has covariance (Q_DD)⁻¹ (Cook and Weisberg 1982, sec. 2.2).

    Examples
    --------
    >>> from gradeline.fitting.slope import fit_lines, project
    >>> design = np.column_stack([np.ones(6), -np.arange(6.0)])
    >>> y = np.array([[0.0, 0, 5.0, 0, 0, 0]])
    >>> shared = project(design, np.ones((1, 6)), np.ones((1, 6), dtype=bool))
    >>> fits = fit_lines(y, design, shared)
    >>> error, score = deletion_residuals(fits.weighted_residuals, shared.weight, shared.index, y > 1)
    >>> round(float(error[0, 2]), 9)
    5.0
    """
    error, score = np.full(weighted.shape, np.nan), np.full(weighted.shape, np.nan)
    diagonal = np.einsum("unn->un", weights)
    plain = ~flagged.any(axis=1)
    if plain.any():
        own = (
            diagonal[index[plain]] if len(diagonal) > 1 else np.broadcast_to(diagonal, weighted[plain].shape)
        )
        sound = own > _SINGULAR
        safe = np.where(sound, own, 1.0)
        error[plain] = np.where(sound, weighted[plain] / safe, np.nan)
        score[plain] = np.where(sound, weighted[plain] / np.sqrt(safe), np.nan)
    for run in np.flatnonzero(~plain):  # only runs with flags
        weight, q = weights[index[run]], weighted[run]
        out = np.flatnonzero(flagged[run])
        for i in np.flatnonzero(np.diagonal(weight) > _SINGULAR):
            taken = np.union1d(out, [i])
            block = weight[np.ix_(taken, taken)]
            if np.linalg.eigvalsh(block)[0] <= _SINGULAR:
                continue
            inverse = np.linalg.inv(block)
            at = int(np.searchsorted(taken, i))
            delta = float(inverse[at] @ q[taken])
            error[run, i], score[run, i] = delta, delta / np.sqrt(inverse[at, at])
    return error, score
