"""Monte Carlo beside the first order, for S, f and K: whose limits stand, and what is said of it."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from gradeline.fitting.monte_carlo import Propagation, propagate
from gradeline.reduction.friction import Friction, factor_effects
from gradeline.reduction.heads import Input
from gradeline.reduction.runs import Flowing

__all__ = ["SEED", "SHARE", "Checked", "RunDraws", "check_sentence", "checked_friction"]

Array = NDArray[np.float64]
Indices = NDArray[np.intp]

#: Of the generator, unless the caller gives another.
SEED = 101
#: The draws settle to this share of the tolerance by which they may differ from first order.
SHARE = 0.5
#: Runs and reaches drawn at once: what fits into the memory next to the processor.
_CHUNK = 16
#: At most so many are drawn, those of the largest relative uncertainty first.
_MOST = 400
#: With fewer degrees of freedom the standard deviation of Student's t settles slowly or never.
_FEW_DOF = 5.0
#: Draws at once: so many numbers of a few runs stay in the fast memory.
_AT_ONCE = 2_000


@dataclass(frozen=True)
class Checked:
    """How many intervals of a quantity were held against Monte Carlo, and in how many its limits stand.

    Parameters
    ----------
    quantity : str
        As a sentence calls it.
    drawn, replaced, left, unsettled : int
        Intervals drawn, intervals whose limits are those of the draws, intervals beyond the most that are drawn,
        intervals whose draws did not settle.
    trials : int
        Most draws that any took.
    """

    quantity: str
    drawn: int
    replaced: int
    left: int
    unsettled: int
    trials: int


class RunDraws:
    """Draws of S and f of some runs and reaches, P of them, through the equations as they are.

    f = (π²/8) g D⁵ S/Q², and S is linear in the heads. An error of the chainages divides S: S/(1 − r), with r its relative
    effect on S, so that its product with every other error is there. The scatter of all runs was judged at once, so one
    draw of Student's t has one scatter for all. Inputs are normal, or rectangular where a limit of error was stated.

    Parameters
    ----------
    flowing, friction
        What the fits say.
    runs, reaches : (P,) int array
        Which of them.
    """

    def __init__(self, flowing: Flowing, friction: Friction, runs: Indices, reaches: Indices) -> None:
        inputs = flowing.inputs
        self.pairs = len(runs)
        slope = friction.slope[runs, reaches]
        known = np.nan_to_num(friction.slope_u_random[runs, reaches])
        own = flowing.own[runs, 1 + reaches]
        self.slope, self.factor = slope, friction.factor[runs, reaches]
        self.scatter = np.sqrt(np.maximum(known**2 - own**2, 0.0))
        self.own, self.flow_u = own, flowing.reach_flow_u[runs, reaches]
        self.dof = friction.slope_dof[runs, reaches]
        self.effect = flowing.effect[runs, 1 + reaches]
        rising = np.where(friction.slope > 0, friction.slope, np.nan)
        self.factor_effect = factor_effects(flowing, rising)[runs, reaches]
        place = np.array([one.name == "tap chainage" for one in inputs], dtype=bool)
        safe = np.where(slope == 0, np.nan, slope)[:, None]
        stretch = np.nan_to_num(self.effect * place / safe)
        rest = self.effect - stretch * slope[:, None]
        self.acts = np.abs(rest).max(axis=0, initial=0.0) > 0
        self.rest = rest[:, self.acts]
        shape = flowing.velocity.shape
        bore = np.array([np.zeros(shape[1]) if one.diameter is None else one.diameter for one in inputs])
        bore = bore.reshape(len(inputs), shape[1])[:, reaches].T
        flows = [np.broadcast_to(one.flow, shape)[runs, reaches] for one in inputs]
        flow = np.stack(flows, axis=1) if flows else np.zeros((self.pairs, 0))
        # What the runs have in common is worked out once: how chainages, bores and flows go with the inputs.
        common, self.alike = _distinct(np.round(np.concatenate([stretch, bore, flow], axis=1), 15))
        self.stretch, self.bore, self.flow = np.split(common, 3, axis=1)
        self.gravity = np.array([one.gravity for one in inputs])
        self.rectangular = np.array([one.rectangular for one in inputs], dtype=bool)
        # What is mostly rectangular goes its own way: the normal counterpart would only add its noise.
        self.bounded = is_bounded(self.effect, self.rectangular)
        self.small = bool((self.dof < _FEW_DOF).any())

    def control(self) -> tuple[Array, Array]:
        """Mean and standard deviation of S and f to first order with normal inputs, (2P,)."""
        u = np.sqrt(self.scatter**2 + self.own**2 + (self.effect**2).sum(axis=1))
        slope = np.where(self.slope == 0, np.nan, self.slope)
        own = self.own / slope - 2.0 * self.flow_u
        relative = np.sqrt((self.scatter / slope) ** 2 + own**2 + (self.factor_effect**2).sum(axis=1))
        return np.concatenate([self.slope, self.factor]), np.concatenate([u, self.factor * relative])

    def __call__(self, generator: np.random.Generator, count: int, outputs: Indices) -> tuple[Array, Array]:
        """Draw: values (a, count) and their first-order counterparts; outputs 0 … P − 1 are S, P … 2P − 1 are f."""
        found, counterparts = np.empty((len(outputs), count)), np.empty((len(outputs), count))
        for start in range(0, count, _AT_ONCE):
            part = slice(start, min(start + _AT_ONCE, count))
            self._draw(generator, outputs, found[:, part], counterparts[:, part])
        return found, counterparts

    def _draw(
        self, generator: np.random.Generator, outputs: Indices, found: Array, counterparts: Array
    ) -> None:
        chosen, place = np.unique(outputs % self.pairs, return_inverse=True)
        is_slope, size = outputs < self.pairs, found.shape[1]
        alike: Indices | slice = self.alike[chosen] if len(self.stretch) > 1 else slice(0, 1)
        slope, own, flow_u = (one[chosen, None] for one in (self.slope, self.own, self.flow_u))
        normal = generator.standard_normal((self.effect.shape[1], size))
        shared = self._shaped(normal)
        plain = generator.standard_normal((len(chosen), size))
        plain *= self.scatter[chosen, None]
        loose = _as_student(plain, self.dof[chosen], generator)
        error = None
        if own.any() or flow_u.any():
            error = generator.standard_normal((len(chosen), size))
            plain += own * error
            loose += own * error
        rest = self.rest[chosen]
        loose += rest @ shared[self.acts]
        plain += rest @ normal[self.acts]
        loose += slope
        stretched = 1.0 - self.stretch @ shared
        if is_slope.any():
            rows = place[is_slope]
            found[is_slope] = (loose / stretched[alike])[rows]
            counterparts[is_slope] = (plain + slope * (1.0 + self.stretch @ normal)[alike])[rows]
        if is_slope.all():
            return
        # f = (π²/8) g D⁵ S/Q²
        bore, flow = 1.0 + self.bore @ shared, 1.0 + self.flow @ shared
        square = bore * bore
        lead = square * square * bore * (1.0 + self.gravity @ shared) / stretched
        linear = 1.0 + (5.0 * self.bore - 2.0 * self.flow + self.stretch + self.gravity) @ normal
        factor = self.factor[chosen, None]
        per_slope = factor / slope
        loose *= per_slope
        loose *= lead[alike]
        plain *= per_slope
        plain += factor * linear[alike]
        if error is None:
            loose /= (flow * flow)[alike]
        else:
            error *= flow_u
            plain -= 2.0 * factor * error
            error += flow[alike]
            error *= error
            loose /= error
        rows = place[~is_slope]
        found[~is_slope] = loose[rows]
        counterparts[~is_slope] = plain[rows]

    def _shaped(self, normal: Array) -> Array:
        """The inputs from normal numbers: those with a limit of error are rectangular."""
        if not self.rectangular.any():
            return normal
        shared = normal.copy()
        shared[self.rectangular] = np.sqrt(3.0) * (2.0 * ndtr(normal[self.rectangular]) - 1.0)
        return shared

    def propagated(
        self, outputs: Indices, size: Array, *, level: float, seed: np.random.SeedSequence
    ) -> Propagation:
        """Propagate some outputs; `size` (2P,) are their standard uncertainties to first order."""
        mean, u = self.control()

        def draw(generator: np.random.Generator, count: int, active: Indices) -> tuple[Array, Array | None]:
            return self(generator, count, outputs[active])

        return propagate(
            draw,
            len(outputs),
            level=level,
            seed=seed,
            control=None if self.bounded else (mean[outputs], u[outputs]),
            size=size[outputs] if self.small else None,
            share=SHARE,
        )


def _as_student(plain: Array, dof: Array, generator: np.random.Generator) -> Array:
    """The same scatter as Student's t, its size drawn once for all runs of one number of degrees of freedom."""
    loose = plain.copy()
    for one in np.unique(dof[np.isfinite(dof)]):
        loose[dof == one] *= np.sqrt(one / generator.chisquare(one, plain.shape[1]))
    return loose


def _distinct(rows: Array) -> tuple[Array, Indices]:
    """Distinct rows, and which of them each row is."""
    if not rows.size:
        return rows[:1], np.zeros(len(rows), dtype=np.intp)
    distinct, index = np.unique(rows, axis=0, return_inverse=True)
    return distinct, index.reshape(-1)


def _is_linear(inputs: tuple[Input, ...]) -> bool:
    """Whether S is a sum of normal errors, so that draws could only say what is known."""
    return not any(one.rectangular or one.name == "tap chainage" for one in inputs)


def checked_friction(
    flowing: Flowing, friction: Friction, *, level: float, seed: int = SEED
) -> tuple[Friction, tuple[Checked, ...]]:
    """Hold the intervals of S and f against Monte Carlo.

    Parameters
    ----------
    flowing, friction
        What the fits say, the intervals to first order.
    level : float
        Coverage of the intervals.
    seed : int
        Of the generator.

    Returns
    -------
    friction : Friction
        Where the limits of the draws differ from those of first order by more than the numerical tolerance, they stand.
    checked : tuple of Checked
        Of S and f.
    """
    known = np.isfinite(friction.slope) & (friction.slope_u > 0)
    has_factor = known & np.isfinite(friction.factor) & (friction.factor_u > 0)
    plain = _is_linear(flowing.inputs) & ~np.isfinite(friction.slope_dof)
    runs, reaches = np.nonzero(known)
    with np.errstate(invalid="ignore"):
        relative = (friction.factor_u / friction.factor)[runs, reaches]
    order = np.argsort(-np.nan_to_num(relative, nan=np.inf), kind="stable")
    limits = {
        name: getattr(friction, name).copy()
        for name in ("slope_low", "slope_high", "factor_low", "factor_high")
    }
    seeds = np.random.SeedSequence(seed)
    tallies = {"S": [0, 0, 0, 0], "f": [0, 0, 0, 0]}
    for start in range(0, min(len(order), _MOST), _CHUNK):
        mine = order[start : min(start + _CHUNK, _MOST)]
        run, reach = runs[mine], reaches[mine]
        draws = RunDraws(flowing, friction, run, reach)
        outputs = np.concatenate(
            [np.flatnonzero(~plain[run, reach]), len(mine) + np.flatnonzero(has_factor[run, reach])]
        )
        if not len(outputs):
            continue
        first = {
            end: np.concatenate([limits[f"slope_{end}"][run, reach], limits[f"factor_{end}"][run, reach]])[
                outputs
            ]
            for end in ("low", "high")
        }
        size = np.concatenate([friction.slope_u[run, reach], friction.factor_u[run, reach]])
        found = draws.propagated(outputs, size, level=level, seed=seeds.spawn(1)[0])
        apart = differs(found, first["low"], first["high"])
        for name, offset in (("slope", 0), ("factor", len(mine))):
            own = (outputs >= offset) & (outputs < offset + len(mine))
            at = outputs[own & apart] - offset
            limits[f"{name}_low"][run[at], reach[at]] = found.low[own & apart]
            limits[f"{name}_high"][run[at], reach[at]] = found.high[own & apart]
            tally = tallies["S" if name == "slope" else "f"]
            tally[0] += int(own.sum())
            tally[1] += int((own & apart).sum())
            tally[2] += int((own & ~found.settled).sum())
            tally[3] = max(tally[3], int(found.trials[own].max(initial=0)))
    left = {
        "S": int((known & ~plain).sum()) - tallies["S"][0],
        "f": int(has_factor.sum()) - tallies["f"][0],
    }
    return replace(friction, **limits), tuple(
        Checked(name, drawn, replaced, left[name], unsettled, trials)
        for name, (drawn, replaced, unsettled, trials) in tallies.items()
    )


def is_bounded(effect: Array, rectangular: NDArray[np.bool_]) -> bool:
    """Tell whether limits of error make a twentieth of the variance that the inputs add, or more, anywhere."""
    squares = np.atleast_2d(effect) ** 2
    return bool((squares[:, rectangular].sum(axis=1) > 0.05 * squares.sum(axis=1)).any())


def differs(found: Propagation, low: Array, high: Array) -> NDArray[np.bool_]:
    """Tell where settled limits of the draws are further from those of first order than the tolerance."""
    away = np.fmax(np.abs(found.low - low), np.abs(found.high - high))
    return np.asarray(found.settled & (away > found.tolerance))


def check_sentence(checked: tuple[Checked, ...], seed: int) -> str:
    """Say what Monte Carlo was done and whose limits stand."""
    done = [one for one in checked if one.drawn]
    if not done:
        return (
            "No interval was held against Monte Carlo: S is a sum of normal errors here, and there is no f or K with "
            "an uncertainty."
        )
    counts = ", ".join(f"{one.drawn} of {one.quantity}" for one in done)
    moved = [f"{one.replaced} of {one.quantity}" for one in done if one.replaced]
    words = (
        f"Intervals were held against Monte Carlo (JCGM 101, adaptive, at most {max(one.trials for one in done):,} draws, "
        f"seed {seed}): {counts}. "
    )
    if moved:
        words += (
            f"The limits of {' and '.join(moved)} differ from those of first order by more than the numerical tolerance "
            "(half a unit in the second digit of u), and are those of the draws; the others are of first order."
        )
    else:
        words += (
            "All agree with first order within half a unit in the second digit of u; so first order stands."
        )
    unsettled = sum(one.unsettled for one in done)
    if unsettled:
        words += f" {unsettled} did not settle and stay as first order has them."
    left = sum(one.left for one in done)
    if left:
        words += (
            f" The {left} intervals of the smallest relative uncertainty of f were not drawn: the larger that is, the "
            "more the two differ."
        )
    return words
