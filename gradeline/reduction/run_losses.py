"""The loss coefficient of a fitting in each run, and what moves it there."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing

__all__ = ["PerRun", "per_run"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class PerRun:
    """K of each of F runs as the line gives it, and all that moves it; dimensionless but for the head.

    Parameters
    ----------
    value : (F,) array
        K.
    head : (F,) array
        The velocity head V²/2g that it is counted in, m.
    scatter : (F,) array
        Its variance from the readings.
    with_slope : (F,) array
        Its covariance with S of the reach that it refers to, from the readings.
    own : (F,) array
        Change of the loss with the run's own flow, per V²/2g; the velocity head's share is still to be added.
    effect : (F, q) array
        The same with the shared inputs.
    by_head : (F, q) array
        Relative change of K by the velocity head.
    own_head : (F,) array
        Relative standard uncertainty of the flow at the velocity head, the run's own.
    """

    value: Array
    head: Array
    scatter: Array
    with_slope: Array
    own: Array
    effect: Array
    by_head: Array
    own_head: Array

    def moved(self, coefficient: float | Array) -> tuple[Array, Array]:
        """Variance of each run's own errors and the effect of the shared ones, at a given K."""
        whole = np.broadcast_to(coefficient, self.value.shape)
        own = self.own - 2.0 * whole * self.own_head
        return self.scatter + own**2, self.effect + whole[:, None] * self.by_head


def per_run(line: Line, media: Media, flowing: Flowing, m: int) -> PerRun:
    """Return K of each run: the fitted step, and the friction of a straight pipe over the fitting's own length.

    Parameters
    ----------
    line, media, flowing
        The line and what its runs say.
    m : int
        Place of the fitting.

    Returns
    -------
    PerRun
        A row for each flowing run.
    """
    fitting, k = line.fittings[m], int(line.reference[m])
    ends = fitting.at - fitting.length / 2, fitting.at + fitting.length / 2
    inside = np.clip(np.minimum(ends[1], line.bounds[1:]) - np.maximum(ends[0], line.bounds[:-1]), 0.0, None)
    through = np.flatnonzero(inside > 0)
    columns = np.concatenate([line.column[[m]], 1 + through])
    share = np.concatenate([[1.0], inside[through]])
    head = flowing.velocity[:, k] ** 2 / (2 * media.gravity)
    block = flowing.random[:, columns[:, None], columns]
    return PerRun(
        value=flowing.fits.lines.parameters[:, columns] @ share / head,
        head=head,
        scatter=np.einsum("p,fpq,q->f", share, block, share) / head**2,
        with_slope=flowing.random[:, columns, 1 + k] @ share / head,
        own=flowing.own[:, columns] @ share / head,
        effect=np.einsum("p,fpq->fq", share, flowing.effect[:, columns]) / head[:, None],
        by_head=_head_effects(flowing, k),
        own_head=flowing.reach_flow_u[:, k],
    )


def _head_effects(flowing: Flowing, k: int) -> Array:
    """Relative change of K by the velocity head it is counted in, for each run and shared input."""
    shape = flowing.velocity.shape
    found = [
        (0.0 if one.diameter is None else 4.0 * float(one.diameter[k]))
        - 2.0 * np.broadcast_to(one.flow, shape)[:, k]
        + one.gravity
        for one in flowing.inputs
    ]
    return np.stack(found, axis=1) if found else np.zeros((shape[0], 0))
