"""Several static runs: what a tap reads more in one than in the one before is zero drift."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.quantities.printing import rounded
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.survey import Survey

__all__ = ["ZeroDrift", "zero_drift_of"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Probability, over all taps and pairs of static runs of a sound survey, that any drift is called one.
_FALSE_ALARM = 0.01
#: Taps from which on the static runs themselves tell the scatter, by the median of their differences.
_FEWEST = 5
_MAD = 1.4826


@dataclass(frozen=True)
class ZeroDrift:
    """Drifts between static runs that follow each other.

    Parameters
    ----------
    taps : tuple of str
        Labels of the observations.
    pairs : tuple of (str, str)
        The two static runs of each row.
    drift, drift_u : (pairs, n) array
        What an observation's head rose by more than the others', and its standard uncertainty, m; NaN where it was not read
        in both, or nothing tells the scatter.
    beyond : (pairs, n) bool array
        Drifts that are no chance.
    applied : bool
        Whether the offsets in the static runs are taken off the others.
    """

    taps: tuple[str, ...]
    pairs: tuple[tuple[str, str], ...]
    drift: Array
    drift_u: Array
    beyond: Mask
    applied: bool

    def table(self) -> pd.DataFrame:
        """Return the table ``zero_drift``."""
        rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["zero_drift"]}
        for p, (first, second) in enumerate(self.pairs):
            for i, tap in enumerate(self.taps):
                if not np.isfinite(self.drift[p, i]):
                    continue
                known = bool(np.isfinite(self.drift_u[p, i]))
                told = bool(self.beyond[p, i]) if known else None
                values = (tap, first, second, self.drift[p, i], self.drift_u[p, i], told)
                for name, entry in zip(rows, values, strict=True):
                    rows[name].append(entry)
        return frame("zero_drift", rows)

    def flags(self) -> list[tuple[str, float, str]]:
        """Return (tap, score, suggestion) of each tap that drifted, by its largest drift."""
        found = []
        score = np.where(self.beyond, self.drift / self.drift_u, 0.0)
        for i in np.flatnonzero(self.beyond.any(axis=0)):
            p = int(np.abs(score[:, i]).argmax())
            first, second = self.pairs[p]
            change = rounded(1000 * abs(self.drift[p, i]), 1000 * self.drift_u[p, i])
            found.append(
                (
                    self.taps[i],
                    float(score[p, i]),
                    f"its zero drifted: in static run {second} it reads ({change}) mm "
                    f"{'more' if self.drift[p, i] > 0 else 'less'} than in static run {first}, against the other taps: look for "
                    "air in its line and at its gauge"
                    + (
                        "; the offset taken off its readings is the mean of the static runs"
                        if self.applied
                        else ""
                    ),
                )
            )
        return found


def zero_drift_of(
    survey: Survey, corrections: Corrections, base: Array, dof: float, excluded: Mask
) -> ZeroDrift | None:
    """Compare static runs that follow each other.

    Parameters
    ----------
    survey, corrections
        The survey and its heads.
    base : (n,) array
        Standard deviation of one reading of each observation, m; 0 or NaN where it is not known.
    dof : float
        Degrees of freedom of that scatter; infinite where it is stated.
    excluded : (R, n) bool array
        Readings left out by hand.

    Returns
    -------
    ZeroDrift or None
        None with fewer than two static runs.

    Notes
    -----
    The level of the line may differ between the runs, so the median of the differences of all taps on one level is taken
    off; a drift that all of them share cannot be seen. A drift is none by chance beyond the Bonferroni point of Student's t
    over all taps and pairs, at 1 %.
    """
    static = np.flatnonzero(survey.runs["flow"].to_numpy(float) == 0)
    if len(static) < 2:
        return None
    heads = np.where(excluded, np.nan, corrections.heads.observed)[static]
    repeats = survey.repeats.to_numpy(float)[static]
    names = survey.runs["run"].to_numpy(object)[static]
    levels = corrections.heads.levels
    change, weight = np.diff(heads, axis=0), 1.0 / np.maximum(repeats, 1.0)
    part = weight[1:] + weight[:-1]
    known = np.isfinite(change)
    drift, variance = np.where(known, change, np.nan), np.where(known, part, np.nan)
    patterns, group = np.unique(levels != 0, axis=0, return_inverse=True)
    for g, pattern in enumerate(patterns):
        mine = np.flatnonzero(group.ravel() == g)
        if not pattern.any():
            continue  # a differential gauge sees no level
        for p in range(len(change)):
            there = mine[known[p, mine]]
            if len(there) < 3:
                drift[p, mine] = np.nan  # of two that part, either may have drifted
                continue
            drift[p, there] -= np.median(change[p, there])
            variance[p, there] += np.pi / 2 * part[p, there].mean() / len(there)
    scatter = np.where(np.nan_to_num(base) > 0, base, np.nan)
    freedom = dof if dof and np.isfinite(dof) else np.inf
    if not np.isfinite(scatter).any() and np.isfinite(drift).sum() >= _FEWEST:
        scaled = (drift / np.sqrt(variance))[np.isfinite(drift)]
        scatter = np.full(len(base), _MAD * float(np.median(np.abs(scaled))))
        # A median of absolute values tells about a third as much as a standard deviation.
        freedom = max(0.37 * (len(scaled) - len(change)), 1.0)
    # Static runs that agree to the last digit tell no scatter.
    drift_u = np.where(scatter > 0, scatter, np.nan) * np.sqrt(variance)
    count = max(int(np.isfinite(drift).sum()), 1)
    critical = float(stdtrit(freedom if np.isfinite(freedom) else 1e9, 1 - _FALSE_ALARM / (2 * count)))
    with np.errstate(invalid="ignore"):
        beyond = np.abs(drift) > critical * drift_u
    return ZeroDrift(
        tuple(one.label for one in survey.observations),
        tuple((str(a), str(b)) for a, b in itertools.pairwise(names)),
        drift,
        drift_u,
        np.asarray(beyond),
        corrections.applied,
    )
