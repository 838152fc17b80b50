"""What moves a fitted loss coefficient: the errors of its runs and of the shared inputs, for its budget and its draws."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from gradeline.fitting.monte_carlo import propagate
from gradeline.reduction.budget import (
    READING_SCATTER,
    RUN_DIFFERENCES,
    RUN_FLOW,
    Budget,
    grouped,
    half_of_largest,
)
from gradeline.reduction.line import Line
from gradeline.reduction.losses import Loss
from gradeline.reduction.media import Media
from gradeline.reduction.monte_carlo import SHARE, Checked, differs, is_bounded
from gradeline.reduction.published_losses import compare
from gradeline.reduction.run_losses import per_run
from gradeline.reduction.runs import Flowing

__all__ = ["checked_losses", "loss_budgets"]

Array = NDArray[np.float64]

#: Runs of the largest weight whose own flow error is drawn one by one; those of the others enter together.
_DRAWN_RUNS = 32
_FEW_DOF = 5.0


@dataclass(frozen=True)
class _LossErrors:
    """The N runs that entered the mean K, by their weight.

    Parameters
    ----------
    coefficient : float
        K.
    weight, value : (N,) array
        Share of each run in the mean, and its own K.
    scatter, own, own_head : (N,) array
        Standard uncertainty of each K from its readings; the effect of the run's own flow error on the loss per V²/2g,
        and relatively on the flow.
    excess, dof : float
        Standard deviation of K from run to run that nothing of this accounts for, 0 where there is none; degrees of
        freedom of the scatter, of the runs where they differ.
    effect : (N, q) array
        Effect of the shared inputs on the loss per V²/2g.
    bore, flow, gravity : (q,), (N, q), (q,) array
        Relative effect of the shared inputs on what K is referred to.
    rectangular : (q,) bool array
        Inputs that are.
    """

    coefficient: float
    weight: Array
    value: Array
    scatter: Array
    own: Array
    own_head: Array
    excess: float
    dof: float
    effect: Array
    bore: Array
    flow: Array
    gravity: Array
    rectangular: NDArray[np.bool_]

    def shared(self) -> Array:
        """Effect of each shared input on K (q,)."""
        head = 4.0 * self.bore - 2.0 * self.flow + self.gravity
        return np.asarray(self.weight @ (self.effect + self.coefficient * head))

    def is_bounded(self) -> bool:
        """Whether limits of error make a twentieth of the variance that the inputs add, or more."""
        return is_bounded(self.shared(), self.rectangular)

    def own_flow(self) -> Array:
        """Effect of each run's own flow error on K (N,)."""
        return np.asarray(self.weight * (self.own - 2.0 * self.coefficient * self.own_head))


def _errors_of(line: Line, media: Media, flowing: Flowing, loss: Loss) -> _LossErrors:
    run = per_run(line, media, flowing, loss.place)
    weight = loss.fit.weight
    mine = np.flatnonzero(weight > 0)
    mine = mine[np.argsort(-weight[mine], kind="stable")]
    k, pooled = int(line.reference[loss.place]), flowing.fits.pooled_dof or np.inf
    inputs, shape = flowing.inputs, flowing.velocity.shape
    flows = [np.broadcast_to(one.flow, shape)[mine, k] for one in inputs]
    return _LossErrors(
        coefficient=loss.fit.coefficient,
        weight=weight[mine],
        value=run.value[mine],
        scatter=np.sqrt(run.scatter[mine]),
        own=run.own[mine],
        own_head=run.own_head[mine],
        excess=float(np.sqrt(loss.trend.excess)),
        dof=min(pooled, loss.trend.spread_dof),
        effect=run.effect[mine],
        bore=np.array([0.0 if one.diameter is None else one.diameter[k] for one in inputs]),
        flow=np.stack(flows, axis=1) if flows else np.zeros((len(mine), 0)),
        gravity=np.array([one.gravity for one in inputs]),
        rectangular=np.array([one.rectangular for one in inputs], dtype=bool),
    )


def loss_budgets(line: Line, media: Media, flowing: Flowing, losses: tuple[Loss, ...]) -> list[Budget]:
    """Return the budget of every fitted K.

    Parameters
    ----------
    line, media, flowing, losses
        The line and what its runs say.

    Returns
    -------
    list of Budget
        Their root sums of squares are the uncertainties in the table of fittings.

    Notes
    -----
    ∂ ln K of the velocity head: 4 of the bore, −2 of the flow, 1 of gravity.
    """
    found = []
    for loss in losses:
        if not loss.fit.runs:
            continue
        errors = _errors_of(line, media, flowing, loss)
        parts = grouped(
            flowing.inputs,
            errors.shared(),
            {
                READING_SCATTER: float(np.sqrt(((errors.weight * errors.scatter) ** 2).sum())),
                RUN_FLOW: float(np.sqrt((errors.own_flow() ** 2).sum())),
                RUN_DIFFERENCES: float(errors.excess * np.sqrt((errors.weight**2).sum())),
            },
        )
        name = line.fittings[loss.place].name
        found.append(Budget("loss_coefficient", name, loss.fit.coefficient, parts, half_of_largest(parts)))
    return found


def checked_losses(
    line: Line,
    media: Media,
    flowing: Flowing,
    losses: tuple[Loss, ...],
    *,
    level: float,
    seed: int,
) -> tuple[tuple[Loss, ...], Checked]:
    """Hold the interval of every fitted K against Monte Carlo.

    Parameters
    ----------
    line, media, flowing, losses
        The line and what its runs say, the intervals to first order.
    level : float
        Coverage of the intervals.
    seed : int
        Of the generator.

    Returns
    -------
    losses : tuple of Loss
        Where the limits of the draws differ by more than the numerical tolerance, they stand.
    checked : Checked
        How many did.

    Notes
    -----
    K = Σ w h_L 2g (π D²/4)²/Q² over the runs, with the losses h_L linear in the heads and the weights as they are.
    """
    seeds = np.random.SeedSequence([seed, 1])
    found: list[Loss] = []
    tally, trials = [0, 0, 0], 0
    for loss in losses:
        if not loss.fit.runs or not loss.fit.u > 0:
            found.append(loss)
            continue
        errors = _errors_of(line, media, flowing, loss)
        drawn = propagate(
            partial(_drawn, errors),
            1,
            level=level,
            seed=seeds.spawn(1)[0],
            # What is mostly rectangular goes its own way: the normal counterpart would only add its noise.
            control=None
            if errors.is_bounded()
            else (np.array([loss.fit.coefficient]), np.array([loss.fit.u])),
            size=np.array([loss.fit.u]) if errors.dof < _FEW_DOF else None,
            share=SHARE,
        )
        apart = bool(differs(drawn, np.array([loss.fit.low]), np.array([loss.fit.high]))[0])
        if apart:
            low, high = float(drawn.low[0]), float(drawn.high[0])
            verdict = None if loss.published is None else compare(low, high, loss.published)
            found.append(replace(loss, fit=replace(loss.fit, low=low, high=high), verdict=verdict))
        else:
            found.append(loss)
        tally = [tally[0] + 1, tally[1] + apart, tally[2] + int(not drawn.settled[0])]
        trials = max(trials, int(drawn.trials[0]))
    return tuple(found), Checked("K", tally[0], tally[1], 0, tally[2], trials)


def _drawn(
    errors: _LossErrors, generator: np.random.Generator, count: int, _outputs: NDArray[np.intp]
) -> tuple[Array, Array]:
    """Draws of K and their first-order counterparts (1, count)."""
    normal = generator.standard_normal((errors.effect.shape[1], count))
    shared = normal
    if errors.rectangular.any():
        shared = normal.copy()
        shared[errors.rectangular] = np.sqrt(3.0) * (2.0 * ndtr(normal[errors.rectangular]) - 1.0)
    each = errors.weight * np.hypot(errors.scatter, errors.excess)
    scatter = np.sqrt((each**2).sum()) * generator.standard_normal(count)
    dof = errors.dof
    stretch = np.sqrt(dof / generator.chisquare(dof, count)) if np.isfinite(dof) else 1.0
    some = slice(0, _DRAWN_RUNS)
    flow_error = generator.standard_normal((len(errors.weight[some]), count))
    late = errors.own_flow()[_DRAWN_RUNS:]
    others = np.sqrt((late**2).sum()) * generator.standard_normal(count)
    lead = (1.0 + errors.bore @ shared) ** 4 * (1.0 + errors.gravity @ shared)
    flow = 1.0 + errors.flow[some] @ shared + errors.own_head[some, None] * flow_error
    loss = errors.value[some, None] + errors.effect[some] @ shared + errors.own[some, None] * flow_error
    values = errors.weight[some] @ (loss / flow**2)
    if len(late):
        # The others as one run: their shared errors are all but the same.
        weight = errors.weight[_DRAWN_RUNS:]
        mean = [
            weight @ part[_DRAWN_RUNS:] / weight.sum() for part in (errors.value, errors.effect, errors.flow)
        ]
        values = values + weight.sum() * (mean[0] + mean[1] @ shared) / (1.0 + mean[2] @ shared) ** 2 + others
    values = (values + scatter * stretch) * lead
    plain = (
        errors.coefficient
        + errors.shared() @ normal
        + errors.own_flow()[some] @ flow_error
        + scatter
        + others
    )
    return values[None], plain[None]
