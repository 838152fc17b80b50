"""Windows of a record in which flow and heads are steady, found and told with what refused the others."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gradeline.fitting.record.edges import Searched, cut_at_changes, limits_of
from gradeline.fitting.record.trend import trend_of

__all__ = ["FoundWindow", "steady_windows", "stretches"]

Array = NDArray[np.float64]

#: Chance of refusing a steady window for its trend.
_CHANCE = 0.05
#: Times the limit that a change may have even where chance can bring it about.
_UNSTEADY = 4.0


@dataclass(frozen=True)
class FoundWindow:
    """A stretch of a record between two changes.

    Parameters
    ----------
    first_block : int
        Its first block.
    last_block : int
        Its last block, included.
    start : float
        Where it begins, s.
    end : float
        Where it ends, s.
    drift : float
        Change of the flow over it, over its mean (over a twentieth of the greatest flow where that is more),
        dimensionless; of the first flow column, or of the heads where there is none.
    drift_p : float
        Probability of as large a change by chance, dimensionless.
    head_drift : float
        Median over the heads of their change over their limit, dimensionless.
    flow : float
        Mean of the first flow column, m³/s; NaN without.
    static : bool
        The flow is nought within a hundredth of the greatest.
    reason : str
        Why it is not steady; empty where it is.
    """

    first_block: int
    last_block: int
    start: float
    end: float
    drift: float
    drift_p: float
    head_drift: float
    flow: float
    static: bool
    reason: str


def steady_windows(
    time_start: ArrayLike,
    time_end: ArrayLike,
    count: ArrayLike,
    mean: ArrayLike,
    squares: ArrayLike,
    is_flow: ArrayLike,
    *,
    drift: float,
    least_length: float,
    settle: float,
    head_scale: ArrayLike | None = None,
) -> tuple[FoundWindow, ...]:
    """Find the windows of a record in which flow and heads are steady.

    Parameters
    ----------
    time_start : (B,) array_like
        Beginning of each block, s.
    time_end : (B,) array_like
        End of each block, s.
    count : (B,) or (B, C) array_like
        Samples of each block, dimensionless.
    mean : (B, C) array_like
        Block means of flows and heads (no temperature), each in SI units of its own; spikes taken out.
    squares : (B, C) array_like
        Sums of squared deviations from the block's mean, in squared units of the column.
    is_flow : (C,) array_like of bool
        The columns that are flows; the others are heads.
    drift : float
        Limit of the change over a window, relative to the mean flow, dimensionless.
    least_length : float
        The shortest window, s.
    settle : float
        Left out after each change, s.
    head_scale : (C,) array_like, optional
        What a change of a head is compared with, in units of the column; the range of the column over the record if
        not given. Its limit is twice the drift limit, as a head loss goes with the square of the flow.

    Returns
    -------
    tuple of FoundWindow
        In the order of time; those of `stretches` without a reason.

    Examples
    --------
    >>> rng = np.random.default_rng(10)
    >>> flow = np.repeat([0.0, 2e-3, 4e-3], 200) + 1e-5 * rng.standard_normal(600)
    >>> head = 1.0 - 4e4 * flow**2 + 1e-3 * rng.standard_normal(600)
    >>> t = np.arange(600.0)
    >>> found = steady_windows(t, t + 1, np.full(600, 10), np.column_stack([flow, head]),
    ...     np.zeros((600, 2)), [True, False], drift=0.01, least_length=60.0, settle=20.0)
    >>> [(w.start, w.end > w.start + 150, w.static) for w in found]
    [(0.0, True, True), (220.0, True, False), (420.0, True, False)]
    """
    return tuple(
        window
        for window in stretches(
            time_start,
            time_end,
            count,
            mean,
            squares,
            is_flow,
            drift=drift,
            least_length=least_length,
            settle=settle,
            head_scale=head_scale,
        )
        if not window.reason
    )


def stretches(
    time_start: ArrayLike,
    time_end: ArrayLike,
    count: ArrayLike,
    mean: ArrayLike,
    squares: ArrayLike,
    is_flow: ArrayLike,
    *,
    drift: float,
    least_length: float,
    settle: float,
    head_scale: ArrayLike | None = None,
) -> tuple[FoundWindow, ...]:
    """Cut a record at its changes and judge each stretch that is long enough.

    Parameters
    ----------
    time_start : (B,) array_like
        Beginning of each block, s.
    time_end : (B,) array_like
        End of each block, s.
    count : (B,) or (B, C) array_like
        Samples of each block, dimensionless.
    mean : (B, C) array_like
        Block means of flows and heads, each in SI units of its own; spikes taken out.
    squares : (B, C) array_like
        Sums of squared deviations from the block's mean, in squared units of the column.
    is_flow : (C,) array_like of bool
        The columns that are flows.
    drift : float
        Limit of the change over a window, relative to the mean flow, dimensionless.
    least_length : float
        The shortest window, s.
    settle : float
        Left out after each change, s.
    head_scale : (C,) array_like, optional
        What a change of a head is compared with, in units of the column.

    Returns
    -------
    tuple of FoundWindow
        In the order of time, the refused ones with their reason; shorter stretches are not told.

    Notes
    -----
    1. Bins of a twelfth of the least length; a lone bin far off its neighbours is replaced by their median.
    2. Changes of level or trend of the flow by the best piecewise lines (`changes`), the squares weighted by the local
       spectral density of the noise so that its correlation is allowed for, a line costing 6 ln(bins). Within each, changes that at least
       half of five heads share. A gap in the record longer than the settling (than a tenth of the least length) cuts too.
    3. Neighbours whose levels agree within the drift limit, or within what is not told apart, are one.
    4. After a change `settle` is left out, before one a bin.
    5. A stretch is refused where the straight line through it changes by more than the limit and by more than chance
       (5 %, Student's t, the correlation allowed for): the flow, or at least half of the heads. A single head that
       drifts alone is its transducer's fault, not the flow's. A flow whose line changes by four times the limit is refused
       even where chance may do so.

    Examples
    --------
    >>> rng = np.random.default_rng(11)
    >>> flow = (2e-3 * (1 + np.linspace(0, 0.05, 600)) + 1e-6 * rng.standard_normal(600))[:, None]
    >>> t = np.arange(600.0)
    >>> (only,) = stretches(t, t + 1, np.full(600, 10), flow, np.zeros((600, 1)), [True],
    ...     drift=0.01, least_length=60.0, settle=20.0)
    >>> only.reason
    'the flow changes by 4.9 % of its mean over it, more than 1 %'
    """
    start, end = np.asarray(time_start, dtype=np.float64), np.asarray(time_end, dtype=np.float64)
    z = np.asarray(mean, dtype=np.float64)
    n = np.asarray(count, dtype=np.float64)
    n = np.broadcast_to(n[:, None], z.shape) if n.ndim == 1 else n
    n = np.where(np.isfinite(z), n, 0.0)
    z = np.where(n > 0, z, 0.0)
    inner = np.where(n > 0, np.asarray(squares, dtype=np.float64), 0.0)
    flows = np.asarray(is_flow, dtype=np.bool_)
    if not len(z) or not z.shape[1]:
        return ()
    low, high = _ends(z, n)
    scale = high - low if head_scale is None else np.asarray(head_scale, dtype=np.float64)
    record = Searched(
        start, end, n, z, inner, flows, drift, least_length, np.maximum(np.abs(low), np.abs(high)), scale
    )
    pause = max(settle, 0.1 * least_length)
    gap = np.asarray(start[1:] - end[:-1] > pause)
    held = np.asarray((n > 0).any(axis=1))
    pieces = [
        (int(part[0]), int(part[-1]) + 1) for part in np.split(np.arange(len(z)), 1 + np.flatnonzero(gap))
    ]
    found: list[FoundWindow] = []
    for first, stop in pieces:
        if not held[first:stop].any():
            continue
        edges, guard = cut_at_changes(record, first, stop)
        for k, (a, b) in enumerate(pairwise(edges)):
            begin = start[a] + (settle if k else 0.0)
            finish = end[b - 1] - (guard if k < len(edges) - 2 else 0.0)
            inside = (
                np.flatnonzero((start[a:b] >= begin - 1e-9 * guard) & (end[a:b] <= finish + 1e-9 * guard)) + a
            )
            if len(inside) and end[inside[-1]] - start[inside[0]] >= least_length * (1 - 1e-9):
                found.append(_judged(record, int(inside[0]), int(inside[-1])))
    return tuple(found)


def _ends(mean: Array, count: Array) -> tuple[Array, Array]:
    """The half-percent points of each column: its range without a few odd blocks."""
    values = np.where(count > 0, mean, np.nan)
    ends = np.zeros((2, mean.shape[1]))
    for c, column in enumerate(values.T):
        known = column[np.isfinite(column)]
        if len(known):
            ends[:, c] = np.percentile(known, (0.5, 99.5))
    return ends[0], ends[1]


def _judged(record: Searched, first: int, last: int) -> FoundWindow:
    """The stretch with its drift, and why it is refused."""
    part = slice(first, last + 1)
    begin, finish = float(record.start[first]), float(record.end[last])
    middle = 0.5 * (record.start[part] + record.end[part])
    line = trend_of(middle, finish - begin, record.count[part], record.mean[part])
    limit = limits_of(record, np.nan_to_num(line.mean))
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(limit > 0, np.abs(line.change) / limit, 0.0)
    over = (share > 1.0) & (line.p < _CHANCE)
    flows, heads = np.flatnonzero(record.is_flow), np.flatnonzero(~record.is_flow)
    named = int(flows[0]) if len(flows) else int(heads[0])
    drift = float(line.change[named] / limit[named] * record.drift) if limit[named] > 0 else 0.0
    flow = float(line.mean[named]) if len(flows) else float("nan")
    head_share = np.abs(share[heads])
    window = FoundWindow(
        first,
        last,
        begin,
        finish,
        drift,
        float(line.p[named]),
        float(np.nanmedian(head_share)) if len(heads) and np.isfinite(head_share).any() else float("nan"),
        flow,
        bool(len(flows)) and abs(flow) <= 0.01 * float(record.greatest[named]),
        "",
    )
    if over[flows].any():
        worst = int(flows[np.argmax(np.where(over[flows], share[flows], 0.0))])
        size = float(share[worst]) * record.drift
        return replace(
            window,
            reason=f"the flow changes by {100 * size:.2g} % of its mean over it, more than {100 * record.drift:.2g} %",
        )
    if len(flows) and not window.static and (share[flows] > _UNSTEADY).any():
        size = float(share[flows].max()) * record.drift
        return replace(
            window,
            reason=f"the flow wanders: a line through it changes by {100 * size:.2g} % of its mean, though chance may do so",
        )
    if len(heads) and over[heads].sum() >= len(heads) / 2:
        return replace(
            window,
            reason=f"{int(over[heads].sum())} of {len(heads)} heads change over it by more than {200 * record.drift:.2g} % of their range",
        )
    return window
