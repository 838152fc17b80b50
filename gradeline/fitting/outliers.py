"""Outlying readings: the set of up to three readings of a run whose removal explains most.

One bad reading at a time is not enough: two bad neighbours pull the line to themselves and hide each other. So all
sets of up to three readings are compared at once, in closed form, and the number of bad readings is decided by how
much each further one explains.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.subsets import MOST_OUTLIERS, SINGULAR, Falls, subset_falls

__all__ = [
    "Outliers",
    "deletion_residuals",
    "most_removable",
    "search_outliers",
    "trimming",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


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
        sound = own > SINGULAR
        safe = np.where(sound, own, 1.0)
        error[plain] = np.where(sound, weighted[plain] / safe, np.nan)
        score[plain] = np.where(sound, weighted[plain] / np.sqrt(safe), np.nan)
    for run in np.flatnonzero(~plain):  # only runs with flags
        weight, q = weights[index[run]], weighted[run]
        out = np.flatnonzero(flagged[run])
        for i in np.flatnonzero(np.diagonal(weight) > SINGULAR):
            taken = np.union1d(out, [i])
            block = weight[np.ix_(taken, taken)]
            if np.linalg.eigvalsh(block)[0] <= SINGULAR:
                continue
            inverse = np.linalg.inv(block)
            at = int(np.searchsorted(taken, i))
            delta = float(inverse[at] @ q[taken])
            error[run, i], score[run, i] = delta, delta / np.sqrt(inverse[at, at])
    return error, score
