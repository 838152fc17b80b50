"""Static runs: at rest every tap has the same head, so what differs is the tap's and its gauge's own offset."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.reduction.heads import Heads

__all__ = ["Corrections", "static_corrections"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class Corrections:
    """Offsets of the observations and what they do to the flowing runs.

    Parameters
    ----------
    offset : (n,) array
        Observation less the common level, mean of the static runs, m; NaN where no static run read it.
    spread : (n, n) array
        Offset of observation i for an error of one in the mean static reading of observation j, dimensionless.
    times : (n,) array
        Static readings behind each offset (repeats counted), dimensionless; 0 where there is none.
    applied : bool
        Whether they were taken off the flowing runs.
    heads : Heads
        All runs, corrected where `applied`; the shared inputs too, so that what cancels, cancels.
    """

    offset: Array
    spread: Array
    times: Array
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
    The level of each static run is the least-squares level of its own readings; a differential gauge sees none, so
    its whole reading is its offset.
    """
    n = heads.observed.shape[1]
    sees_level = heads.taps.sum(axis=1)
    read = static[:, None] & np.isfinite(heads.observed) & ~excluded
    weight = read / np.maximum(read.sum(axis=0), 1)
    # Mean over the static runs of (I − level) y, a linear operation M (n from R × n observations).
    operation = np.zeros((n, *heads.observed.shape))
    for run in np.flatnonzero(static):
        mine = read[run]
        level = np.where(mine, sees_level, 0.0)
        total = float(level @ level)
        own = np.eye(n) - (np.outer(sees_level, level) / total if total > 0 else 0.0)
        operation[:, run] = weight[run][:, None] * own * mine
    known = read.any(axis=0)

    def offset_of(values: Array) -> Array:
        return np.asarray(np.einsum("inm,nm->i", operation, np.where(read, values, 0.0)))

    offset = np.where(known, offset_of(heads.observed), np.nan)
    times = np.where(read, repeats, 0).sum(axis=0).astype(float)
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
    return Corrections(offset, operation.sum(axis=1), times, applied, corrected)
