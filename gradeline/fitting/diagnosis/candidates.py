"""The suspicions as columns over runs and observations, and what a gain in χ² must exceed."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri, fdtri

from gradeline.fitting.diagnosis.evidence import Evidence
from gradeline.fitting.diagnosis.suspects import Suspects

__all__ = ["Candidate", "Places", "State", "alike", "alone", "beyond", "columns_of", "of_runs"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class Candidate:
    """A suspicion with what it would explain.

    Parameters
    ----------
    kind : {"readings", "tap", "free tap", "step", "kink", "curve", "free step", "free kink", "free curve"}
        What it is; ``free``: with a size of its own in each run.
    place : int
        Subject, gap or curve, or the flat index of a reading.
    columns : tuple of int
        Its patterns among the columns; empty where it is free.
    gain, price : float
        What it explains in χ², and what chance would: dimensionless.
    pattern : str
        How the error of a tap goes over the runs.
    second : int or None
        Flat index of another reading of the same run that is wrong beside the first.
    """

    kind: str
    place: int
    columns: tuple[int, ...]
    gain: float
    price: float
    pattern: str = ""
    second: int | None = None


@dataclass
class State:
    """How far the search has come.

    Parameters
    ----------
    used : (F, n) bool array
        Readings that still enter.
    found : list of Candidate
        What was taken up.
    barred : set of (str, int)
        Suspicions that rest on one run alone.
    together : set of int
        Flat indices of readings that are wrong two in a run, and no other two would do.
    """

    used: Mask
    found: list[Candidate]
    barred: set[tuple[str, int]]
    together: set[int] = field(default_factory=set)


@dataclass(frozen=True)
class Places:
    """Where the columns of each suspicion stand.

    Parameters
    ----------
    offset, edge, chainage : (s,) int array
        Of each subject; −1 where its error cannot grow.
    step, kink : (g,) int array
        Of each gap.
    curve : (c,) int array
        Of each curve.
    """

    offset: NDArray[np.intp]
    edge: NDArray[np.intp]
    chainage: NDArray[np.intp]
    step: NDArray[np.intp]
    kink: NDArray[np.intp]
    curve: NDArray[np.intp]


def columns_of(suspects: Suspects) -> tuple[Array, Places]:
    """Lay out the patterns of all suspicions as columns.

    Parameters
    ----------
    suspects : Suspects
        Subjects, gaps and curves.

    Returns
    -------
    columns : (F, n, c) array
        Change of the observations for a size of 1, m per size.
    places : Places
        Where each stands.

    Examples
    --------
    >>> from gradeline.fitting.diagnosis.suspects import Suspects
    >>> ones, none = np.ones((3, 2)), np.zeros((3, 0))
    >>> suspects = Suspects(np.eye(2), np.array([True, False]), ones, 2 * ones, (), none, none, (), none)
    >>> columns, places = columns_of(suspects)
    >>> columns.shape, places.edge.tolist()
    ((3, 2, 4), [1, -1])
    """
    found: list[Array] = []

    def put(values: Array) -> int:
        found.append(values)
        return len(found) - 1

    offset, edge, chainage = ([-1] * suspects.sight.shape[1] for _ in range(3))
    flat = np.ones(len(suspects.slope))
    for s, sees in enumerate(suspects.sight.T):
        offset[s] = put(flat[:, None] * sees)
        if suspects.grows[s]:
            edge[s] = put(suspects.velocity_head[:, s, None] * sees)
            # A tap further downstream than stated reads lower.
            chainage[s] = put(-suspects.slope[:, s, None] * sees)
    step, kink = [], []
    for g, gap in enumerate(suspects.gaps):
        step.append(put(-suspects.gap_velocity_head[:, g, None] * gap.step))
        kink.append(put(-suspects.gap_slope[:, g, None] * gap.kink))
    curve = [put(-suspects.curve_slope[:, c, None] * one.fall) for c, one in enumerate(suspects.curves)]
    return np.stack(found, axis=2), Places(
        *(np.array(one, dtype=np.intp) for one in (offset, edge, chainage, step, kink, curve))
    )


def alone(evidence: Evidence, places: Places, subjects: int) -> tuple[Array, Array, Array, Array]:
    """Return offset and edge coefficient of each subject, the two fitted together, all else as the evidence has it.

    Parameters
    ----------
    evidence : Evidence
        Of what is accepted.
    places : Places
        Where the columns stand.
    subjects : int
        How many there are, a count.

    Returns
    -------
    offset, offset_u, edge, edge_u : (s,) array
        m; dimensionless; NaN where not to be had.

    Examples
    --------
    >>> from gradeline.fitting.diagnosis.suspects import Suspects
    >>> ones, none = np.ones((3, 2)), np.zeros((3, 0))
    >>> suspects = Suspects(np.eye(2), np.array([True, False]), ones, 2 * ones, (), none, none, (), none)
    >>> from gradeline.fitting.diagnosis.evidence import gather
    >>> columns, places = columns_of(suspects)
    >>> heads = np.array([[0.1, 0.0], [0.1, 0.0], [0.1, 0.0]])
    >>> nothing = np.zeros((3, 2, 0))
    >>> evidence = gather(heads, np.repeat(np.eye(2)[None], 3, axis=0), columns, nothing, nothing)
    >>> alone(evidence, places, 2)[0].round(3).tolist()
    [0.1, 0.0]
    """
    table = np.full((4, subjects), np.nan)
    for s in range(subjects):
        for pick in ((places.offset[s], places.edge[s]), (places.offset[s],)):
            if min(pick) < 0:
                continue
            size, covariance, _ = evidence.sizes(tuple(int(one) for one in pick))
            if not np.isfinite(covariance).all():
                continue
            table[:2, s] = size[0], covariance[0, 0] ** 0.5
            if len(pick) == 2:
                table[2:, s] = size[1], covariance[1, 1] ** 0.5
            break
    return table[0], table[1], table[2], table[3]


def of_runs(suspects: Suspects, runs: NDArray[np.intp]) -> Suspects:
    """Return the suspects as some of the runs show them.

    Parameters
    ----------
    suspects : Suspects
        As all runs do.
    runs : (k,) int array
        Which, indices.

    Returns
    -------
    Suspects
        Of these runs.

    Examples
    --------
    >>> from gradeline.fitting.diagnosis.suspects import Suspects
    >>> ones, none = np.ones((3, 2)), np.zeros((3, 0))
    >>> suspects = Suspects(np.eye(2), np.array([True, False]), ones, 2 * ones, (), none, none, (), none)
    >>> of_runs(suspects, np.array([0, 2])).slope.shape
    (2, 2)
    """
    return replace(
        suspects,
        slope=suspects.slope[runs],
        velocity_head=suspects.velocity_head[runs],
        gap_slope=suspects.gap_slope[runs],
        gap_velocity_head=suspects.gap_velocity_head[runs],
        curve_slope=suspects.curve_slope[runs],
    )


def alike(one: Candidate, other: Candidate) -> bool:
    """Tell whether two are errors of one tap, or both breaks of the line.

    Parameters
    ----------
    one, other : Candidate
        What is compared.

    Returns
    -------
    bool
        True where they are forms of one finding.

    Examples
    --------
    >>> alike(Candidate("tap", 3, (0,), 9.0, 1.0), Candidate("free tap", 3, (), 9.0, 1.0))
    True
    """
    at_tap = "tap" in one.kind
    return at_tap == ("tap" in other.kind) and (not at_tap or one.place == other.place)


def beyond(probability: float, unknowns: int, dof: float) -> float:
    """Return the gain in χ² that chance exceeds with a given probability.

    Parameters
    ----------
    probability : float
        Between 0 and 1, dimensionless.
    unknowns : int
        Sizes that are fitted, a count.
    dof : float
        Degrees of freedom of the scatter, dimensionless; infinite where it is known.

    Returns
    -------
    float
        Dimensionless: a point of χ², or of F times the unknowns.

    Examples
    --------
    >>> round(beyond(0.05, 1, float("inf")), 2)
    3.84
    """
    if np.isfinite(dof):
        return float(unknowns * fdtri(unknowns, dof, 1.0 - probability))
    return float(chdtri(unknowns, probability))
