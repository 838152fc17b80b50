"""Static runs: at rest every tap has the same head, so what differs is the tap's and its gauge's own offset."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.reduction.heads import Heads

__all__ = ["Corrections", "static_corrections"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def _of_levels(weight: Array, levels: Array) -> Array:
    """What the levels of a run take out of the weights of its observations."""
    along = weight[:, None] * levels
    if levels.shape[1] == 1:
        total = float(along[:, 0] @ levels[:, 0])
        return np.outer(along[:, 0], along[:, 0]) / total if total > 0 else np.zeros((len(weight),) * 2)
    return np.asarray(along @ np.linalg.pinv(along.T @ levels, rcond=1e-10, hermitian=True) @ along.T)


@dataclass(frozen=True)
class Corrections:
    """Offsets of the observations and what they do to the flowing runs.

    Parameters
    ----------
    offset : (n,) array
        Observation less the common level, mean of the static runs, m; NaN where no static run read it.
    covariance : (n, n) array
        Covariance of the offsets for readings of unit variance, dimensionless.
    known : (n,) bool array
        Observations that a static run read.
    applied : bool
        Whether they were taken off the flowing runs.
    heads : Heads
        All runs, corrected where `applied`; the shared inputs too, so that what cancels, cancels.
    """

    offset: Array
    covariance: Array
    known: Mask
    applied: bool
    heads: Heads


def static_corrections(
    heads: Heads, static: Mask, repeats: Array, *, apply: bool, excluded: Mask
) -> Corrections:
    """Work out the offsets from the static runs and take them off.

    Parameters
    ----------
    heads : Heads
        Observed heads of all runs.
    static : (R,) bool array
        Which runs are static.
    repeats : (R, n) array
        Readings behind each observation, dimensionless.
    apply : bool
        Whether to correct.
    excluded : (R, n) bool array
        Readings left out by hand.

    Returns
    -------
    Corrections
        With NaN offsets where there is no static run.

    Notes
    -----
    Least squares for the levels of the static runs and the offsets of the observations together, weighted by the
    repeats: y = level + offset. What the offsets have in common cannot be told from the level and is none of theirs. A
    differential gauge sees no level, so its whole reading is its offset.
    """
    n = heads.observed.shape[1]
    levels = heads.levels
    read = static[:, None] & np.isfinite(heads.observed) & ~excluded
    weight = np.where(read, repeats, 0.0)
    # The levels taken out, what is left determines the offsets: N offset = sum over the runs of P_r y_r.
    part = np.zeros((len(weight), n, n))
    for run in np.flatnonzero(read.any(axis=1)):
        part[run] = np.diag(weight[run]) - _of_levels(weight[run], levels)
    covariance = np.linalg.pinv(part.sum(axis=0), rcond=1e-10, hermitian=True)
    operation = covariance @ part
    known = np.asarray(read.any(axis=0))

    def offset_of(values: Array) -> Array:
        return np.asarray(np.einsum("rnm,rm->n", operation, np.where(read, values, 0.0)))

    offset = np.where(known, offset_of(heads.observed), np.nan)
    corrected = heads
    applied = bool(apply and known.any())
    if applied:
        corrected = replace(
            heads,
            observed=heads.observed - np.where(known, offset, 0.0),
            inputs=tuple(
                one
                if one.heads is None
                else replace(one, heads=one.heads - np.where(known, offset_of(one.heads), 0.0))
                for one in heads.inputs
            ),
        )
    return Corrections(offset, covariance, known, applied, corrected)
