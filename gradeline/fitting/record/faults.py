"""What is wrong with a logger's record: drift and steps within windows, stuck transducers, spikes, gaps."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gradeline.fitting.record.mean_uncertainty import FEWEST_BLOCKS
from gradeline.fitting.record.spikes import without_spikes
from gradeline.fitting.record.trend import PLACES, Step, Trend, chance_of, step_of, trend_of

__all__ = ["Fault", "faults_of"]

Array = NDArray[np.float64]
Kind = Literal["drift", "step", "stuck", "spike", "gap"]

#: Chance that a drift or a step is told in any window of a sound column.
_CHANCE = 0.003
#: Degrees of freedom below which the scatter is too little known to judge by.
_LEAST_DOF = 3.0
#: What the median of the windows' variances is worth of their mean.
_MEDIAN_WORTH = 0.64
#: Samples of a stuck stretch at least; times as long as the longest other stretch without change; changes it passes over.
_STUCK_SAMPLES, _STUCK_TIMES, _STUCK_CHANGES = 50.0, 5.0, 30.0
#: Samples missing in a row that make a gap, and the share of a block's.
_GAP_SAMPLES, _GAP_SHARE = 5.0, 0.01
#: Spikes of a column told one by one; more are told together.
_SPIKES_TOLD = 20


@dataclass(frozen=True)
class Fault:
    """A fault of the record.

    Parameters
    ----------
    column : int
        Its column; -1 for all of them.
    kind : {"drift", "step", "stuck", "spike", "gap"}
        What it is.
    start : float
        Where it begins, s.
    end : float
        Where it ends, s.
    size : float
        Drift or step: the change, in units of the column; spike: how far off, likewise; stuck: the value, likewise; gap: the time
        that is missing, s.
    number : int
        Samples (spikes; samples of a stuck stretch; samples missing), 1 otherwise.
    window : int
        Index of the window that it lies in; -1 outside.
    """

    column: int
    kind: Kind
    start: float
    end: float
    size: float
    number: int
    window: int


@dataclass(frozen=True)
class _Blocks:
    start: Array
    end: Array
    count: Array
    window: NDArray[np.intp]

    def fault(
        self, column: int, kind: Kind, first: int, last: int, size: float, number: float = 1.0
    ) -> Fault:
        """A fault from the first to the last block."""
        inside = np.unique(self.window[first : last + 1])
        inside = inside[inside >= 0]
        window = int(inside[0]) if len(inside) == 1 else -1
        return Fault(
            column, kind, float(self.start[first]), float(self.end[last]), float(size), round(number), window
        )


def faults_of(
    time_start: ArrayLike,
    time_end: ArrayLike,
    count: ArrayLike,
    mean: ArrayLike,
    low: ArrayLike,
    high: ArrayLike,
    squares: ArrayLike,
    interval: float,
    window: ArrayLike,
    *,
    slow: ArrayLike | None = None,
    zero_is_rest: ArrayLike | None = None,
) -> tuple[Fault, ...]:
    """Tell drift and steps within windows, stuck transducers, spikes and gaps, each with its times.

    Parameters
    ----------
    time_start : (B,) array_like
        Beginning of each block, s, in order.
    time_end : (B,) array_like
        End of each block, s.
    count : (B,) or (B, C) array_like
        Samples of each block, dimensionless.
    mean : (B, C) array_like
        Block means, in SI units of each column.
    low : (B, C) array_like
        Least sample of each block, in SI units of each column.
    high : (B, C) array_like
        Greatest sample of each block, in SI units of each column.
    squares : (B, C) array_like
        Sums of squared deviations from the block's mean, in squared units of the column.
    interval : float
        Usual time between samples, s.
    window : (B,) array_like of int
        Index of the window that holds the block; -1 outside.
    slow : (C,) array_like of bool, optional
        Columns that may drift or stand still without a fault: temperatures. None if not given.
    zero_is_rest : (C,) array_like of bool, optional
        Columns that may stand still at exactly nought: a flowmeter below its least flow. None if not given.

    Returns
    -------
    tuple of Fault
        Sorted by column and time.

    Notes
    -----
    Spikes: `without_spikes`; the blocks without them are judged further. Drift and steps: `trend_of` and `step_of` over
    the blocks of each window, told where the probability by chance is below 0.3 % over a column's windows, as what
    leaves the lesser sum of squares; where the record holds too few independent samples (fewer than 3 degrees of
    freedom) neither is told. Stuck: no change at all over at least 50 samples, five times as long as the longest other
    stretch without change, during which as many changes as elsewhere would have been thirty (so that the steps of a
    coarse resolution are none); a column that never changes is stuck if others do. Gaps: five samples in a row or
    more missing, of one column or of all.

    Examples
    --------
    >>> rng = np.random.default_rng(12)
    >>> x = rng.standard_normal((60, 50))
    >>> x[30:, :] = x[29, -1]
    >>> z, square = x.mean(axis=1), x.var(axis=1) * 50
    >>> t = np.arange(60.0)
    >>> (only,) = faults_of(t, t + 1, np.full(60, 50), *(v[:, None] for v in (z, x.min(axis=1), x.max(axis=1), square)),
    ...     0.02, np.full(60, -1))
    >>> only.kind, only.start, only.end
    ('stuck', 30.0, 60.0)
    """
    start, end = np.asarray(time_start, dtype=np.float64), np.asarray(time_end, dtype=np.float64)
    z, least, greatest, inner = (np.asarray(v, dtype=np.float64) for v in (mean, low, high, squares))
    n = np.asarray(count, dtype=np.float64)
    n = np.broadcast_to(n[:, None], z.shape) if n.ndim == 1 else n
    n = np.where(np.isfinite(z), n, 0.0)
    columns = z.shape[1]
    if not len(z):
        return ()
    blocks = _Blocks(start, end, n, np.asarray(window, dtype=np.intp))
    calm = np.zeros(columns, dtype=np.bool_) if slow is None else np.asarray(slow, dtype=np.bool_)
    rest = (
        np.zeros(columns, dtype=np.bool_)
        if zero_is_rest is None
        else np.asarray(zero_is_rest, dtype=np.bool_)
    )
    clean = without_spikes(n, z, inner, least, greatest)
    stuck = _stuck(blocks, z, least, greatest, calm, rest)
    found = [*_gaps(blocks, interval), *_spikes(blocks, clean.taken, clean.size), *stuck]
    found += _drifts(blocks, clean.count, clean.mean, calm, stuck)
    return tuple(sorted(found, key=lambda fault: (fault.column, fault.start, fault.kind)))


def _spikes(blocks: _Blocks, taken: Array, size: Array) -> list[Fault]:
    """Every spike, or all of a column together where there are many."""
    found = []
    for c in range(taken.shape[1]):
        where = np.flatnonzero(taken[:, c])
        if len(where) > _SPIKES_TOLD:
            farthest = where[np.argmax(np.abs(size[where, c]))]
            number = float(taken[where, c].sum())
            found.append(blocks.fault(c, "spike", int(where[0]), int(where[-1]), size[farthest, c], number))
        else:
            found += [blocks.fault(c, "spike", int(i), int(i), size[i, c], taken[i, c]) for i in where]
    return found


def _stuck(
    blocks: _Blocks, mean: Array, low: Array, high: Array, slow: NDArray[np.bool_], rest: NDArray[np.bool_]
) -> list[Fault]:
    """Stretches without any change that are longer than chance."""
    found = []
    moves = np.array(
        [np.ptp(low[:, c][n > 0]) > 0 if (n > 0).any() else False for c, n in enumerate(blocks.count.T)]
    )
    for c in np.flatnonzero(~slow):
        held = np.flatnonzero(blocks.count[:, c] > 0)
        if len(held) < 2:
            continue
        flat = low[held, c] == high[held, c]
        # blocks i and i + 1 hold one value throughout
        same = flat[1:] & flat[:-1] & (mean[held[1:], c] == mean[held[:-1], c])
        edge = np.diff(np.r_[0, same.astype(np.int8), 0])
        firsts, lasts = np.flatnonzero(edge > 0), np.flatnonzero(edge < 0)
        if not len(firsts):
            continue
        if rest[c]:
            moving = mean[held[firsts], c] != 0.0
            firsts, lasts = firsts[moving], lasts[moving]
            if not len(firsts):
                continue
        length = lasts - firsts
        order = np.argsort(length)[::-1]
        for rank, k in enumerate(order):
            samples = float(blocks.count[held[firsts[k] : lasts[k] + 1], c].sum())
            others = length[order[rank + 1]] if rank + 1 < len(order) else 0
            elsewhere = len(same) - length[order[: rank + 1]].sum()
            changed = (~same).sum() / max(elsewhere, 1)
            whole = lasts[k] - firsts[k] == len(same)
            longer = length[k] + 1 >= _STUCK_TIMES * max(others, 1 if not whole else 0)
            unlikely = changed * length[k] >= _STUCK_CHANGES or (
                # few but long blocks: the samples within them changed as well
                changed > 0.9 and changed * length[k] >= 2 and samples >= 10 * _STUCK_SAMPLES
            )
            if samples < _STUCK_SAMPLES or not longer or not (unlikely or (whole and moves.any())):
                break
            value = mean[held[firsts[k]], c]
            found.append(
                blocks.fault(int(c), "stuck", int(held[firsts[k]]), int(held[lasts[k]]), value, samples)
            )
    return found


def _gaps(blocks: _Blocks, interval: float) -> list[Fault]:
    """Samples missing in a row, of all columns or of one."""
    if not interval > 0:
        return []
    span = np.r_[np.diff(blocks.start), blocks.end[-1] - blocks.start[-1]]
    most = blocks.count.max(axis=1)
    expected = np.maximum(span / interval, most)
    # the last block may end with its last sample, one interval before the next would have begun
    expected[-1] = max(most[-1], expected[-1])
    found = []
    for c, held in ((-1, most), *enumerate(blocks.count.T)):
        due = expected if c < 0 else most
        missing = due - held
        where = np.flatnonzero(
            (missing > _GAP_SAMPLES) & (missing > _GAP_SHARE * np.minimum(due, _usual(most)))
        )
        for run in np.split(where, 1 + np.flatnonzero(np.diff(where) > 1)) if len(where) else []:
            first, last = int(run[0]), int(run[-1])
            lost = float(missing[run].sum())
            begin, finish = blocks.start[first], blocks.start[first] + span[first : last + 1].sum()
            if c < 0 and len(run) == 1 and last + 1 < len(most):
                begin, finish = _between(blocks, last, interval)
            whole = blocks.fault(c, "gap", first, last, lost * interval, lost)
            found.append(Fault(c, "gap", float(begin), float(finish), whole.size, whole.number, whole.window))
    return found


def _usual(most: Array) -> float:
    """Usual number of samples in a block."""
    held = most[most > 0]
    return float(np.median(held)) if len(held) else 0.0


def _between(blocks: _Blocks, block: int, interval: float) -> tuple[float, float]:
    """Where the gap lies: between two blocks where their times leave it, within the block otherwise."""
    begin, finish = float(blocks.end[block]), float(blocks.start[block + 1])
    if finish - begin > _GAP_SAMPLES * interval:
        return begin, finish
    return float(blocks.start[block]), float(blocks.start[block + 1])


def _drifts(
    blocks: _Blocks, count: Array, mean: Array, slow: NDArray[np.bool_], stuck: list[Fault]
) -> list[Fault]:
    """Trends and steps within the windows, whichever leaves less."""
    still = np.zeros(mean.shape, dtype=np.bool_)
    for fault in stuck:
        still[:, fault.column] |= (blocks.start >= fault.start) & (blocks.end <= fault.end)
    windows = [np.flatnonzero(blocks.window == w) for w in np.unique(blocks.window[blocks.window >= 0])]
    bar = _CHANCE / max(len(windows), 1)
    windows = [rows for rows in windows if len(rows) >= FEWEST_BLOCKS]
    if not windows:
        return []
    lines, steps = [], []
    for rows in windows:
        middle = 0.5 * (blocks.start[rows] + blocks.end[rows])
        lines.append(
            trend_of(middle, float(blocks.end[rows[-1]] - blocks.start[rows[0]]), count[rows], mean[rows])
        )
        steps.append(step_of(count[rows], mean[rows]))
    sizes = np.array([len(rows) for rows in windows], dtype=np.float64)[:, None]
    drift_p = _chance(lines, np.array([line.change for line in lines]), sizes)
    step_p = PLACES * _chance(steps, np.array([step.size for step in steps]), sizes)
    found: list[Fault] = []
    for k, (rows, line, step) in enumerate(zip(windows, lines, steps, strict=True)):
        judged = ~slow & ~still[rows].any(axis=0)
        drifting, stepping = judged & (drift_p[k] < bar), judged & (step_p[k] < bar)
        for c in np.flatnonzero(drifting | stepping):
            if stepping[c] and (not drifting[c] or step.left[c] < line.left[c]):
                at = int(rows[min(step.at[c], len(rows) - 1)])
                found.append(blocks.fault(int(c), "step", at, at, step.size[c]))
            else:
                found.append(blocks.fault(int(c), "drift", int(rows[0]), int(rows[-1]), line.change[c]))
    return found


def _chance(fits: Sequence[Trend | Step], change: Array, blocks: Array) -> Array:
    """Probabilities of the changes, the noise's correlation taken from all windows of a column together.

    A column's noise is as much correlated in one window as in the others, nearly: the variance of a fit over the mean
    square that it leaves is lifted to its median over the windows, which is the better known.
    """
    u, dof, left = (np.array([getattr(fit, name) for fit in fits]) for name in ("u", "dof", "left"))
    known = np.isfinite(u) & np.isfinite(dof) & (left > 0)
    ratio = np.where(known, u**2 * blocks / np.where(known, left, 1.0), np.nan)
    out = np.ones(change.shape)
    for c in range(change.shape[1]):
        own = known[:, c]
        if not own.any():
            continue
        together = np.median(ratio[own, c]) * left[:, c] / blocks[:, 0]
        variance = np.maximum(u[:, c] ** 2, together)
        freedom = np.maximum(dof[:, c], _MEDIAN_WORTH * dof[own, c].sum() if own.sum() > 2 else 0.0)
        p = chance_of(change[:, c], np.sqrt(variance), freedom)
        out[:, c] = np.where(own & (freedom >= _LEAST_DOF), p, 1.0)
    return out
