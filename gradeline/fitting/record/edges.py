"""Where a record changes its level or trend, flow and heads together: the edges of its steady stretches."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtrc

from gradeline.fitting.record.autocorrelation import variance_of_mean
from gradeline.fitting.record.changes import changes, local_noise
from gradeline.fitting.record.trend import trend_of

__all__ = ["Searched", "cut_at_changes", "limits_of"]

Array = NDArray[np.float64]

#: Bins in the least length, and at most so many in all.
_BINS, _MOST = 12, 6_000
#: Heads that vote on a change, spread over all: more tell no more.
_VOTERS = 5
#: A flow below this share of the greatest is judged against the share: a drift of nought has no per cent.
_SMALL = 0.05
#: Two stretches are one where the gain of two lines over one is as likely as this by chance.
_SAME_LINE = 1e-4
#: What the bins' noise may exceed its local judgement by, correlated over some four bins: what wanders more is no noise.
_WANDER = 15.0


@dataclass(frozen=True)
class Searched:
    """The blocks of a record with what their judging needs of the whole.

    Parameters
    ----------
    start : (B,) array
        Beginning of each block, s.
    end : (B,) array
        End of each block, s.
    count : (B, C) array
        Samples, dimensionless.
    mean : (B, C) array
        Block means, in units of the column; 0 without samples.
    squares : (B, C) array
        Sums of squared deviations from the block's mean, in squared units of the column.
    is_flow : (C,) bool array
        Flows; the others are heads.
    drift : float
        Limit of the change of a flow over a window, relative to its mean, dimensionless.
    least_length : float
        Of a window, s.
    greatest : (C,) array
        Greatest size of each column, in units of the column.
    head_scale : (C,) array
        What a change of a head is compared with, in units of the column.
    """

    start: Array
    end: Array
    count: Array
    mean: Array
    squares: Array
    is_flow: NDArray[np.bool_]
    drift: float
    least_length: float
    greatest: Array
    head_scale: Array


def cut_at_changes(record: Searched, first: int, stop: int) -> tuple[list[int], float]:
    """Cut a part of a record at its changes.

    Parameters
    ----------
    record : Searched
        The record.
    first : int
        The part's first block.
    stop : int
        The block after its last.

    Returns
    -------
    (list of int, float)
        The first block of each stretch and `stop` at the end; the length of a bin, s.

    Notes
    -----
    Steps 1 to 3 of `gradeline.fitting.record.stretches`.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> flow = (np.repeat([1e-3, 3e-3], 100) + 1e-6 * rng.standard_normal(200))[:, None]
    >>> t = np.arange(200.0)
    >>> record = Searched(t, t + 1, np.ones((200, 1)), flow, np.zeros((200, 1)), np.array([True]), 0.01, 20.0,
    ...     np.array([3e-3]), np.array([2e-3]))
    >>> cut_at_changes(record, 0, 200)
    ([0, 100, 200], 1.6666666666666667)
    """
    length = record.end[stop - 1] - record.start[first]
    blocks = stop - first
    bins = int(min(blocks, _MOST, max(8.0, np.ceil(_BINS * length / record.least_length))))
    middle = 0.5 * (record.start[first:stop] + record.end[first:stop]) - record.start[first]
    place = np.minimum((middle / length * bins).astype(np.intp), bins - 1)
    starts = np.flatnonzero(np.r_[True, np.diff(place) > 0])
    count = np.add.reduceat(record.count[first:stop], starts, axis=0)
    total = np.add.reduceat((record.count * record.mean)[first:stop], starts, axis=0)
    values = _without_lone(np.where(count > 0, total / np.maximum(count, 1e-300), 0.0), count)
    within = np.add.reduceat(record.squares[first:stop], starts, axis=0) / np.maximum(count, 1.0) ** 2
    weight, density = _weights(record, values, count, within)
    columns = record.is_flow if record.is_flow.any() else np.ones(len(record.is_flow), dtype=np.bool_)
    penalty = 6.0 * np.log(max(len(starts), 10))
    edges = changes(values[:, columns], weight[:, columns], penalty * columns.sum() ** 0.5, 3)
    if record.is_flow.any() and not record.is_flow.all():
        edges = _head_changes(values[:, ~record.is_flow], weight[:, ~record.is_flow], edges, penalty)
    edges = _joined(record, values, count, density, edges)
    return [first + int(starts[k]) for k in edges[:-1]] + [stop], float(length / bins)


def _without_lone(values: Array, count: Array) -> Array:
    """Bins with those that stand alone, far off the five around, replaced by their median."""
    from scipy.ndimage import median_filter  # noqa: PLC0415 (loaded when asked for: start-up time)

    if len(values) < 5:
        return values
    centre = median_filter(values, size=(5, 1), mode="nearest")
    away = np.where(count > 0, np.abs(values - centre), 0.0)
    spread = 1.4826 * median_filter(away, size=(min(41, len(values)), 1), mode="nearest")
    return np.asarray(np.where((away > 6.0 * spread) & (spread > 0), centre, values))


def _weights(record: Searched, values: Array, count: Array, within: Array) -> tuple[Array, Array]:
    """One over the local spectral density of the noise, of each bin, and that density; `within`: of single samples."""
    weight, density = np.zeros_like(values), np.zeros_like(values)
    for c in range(values.shape[1]):
        noise = local_noise(values[:, c], count[:, c])
        # steps of half the limit need no finding, and a zero held by the instrument has no noise
        if record.is_flow[c]:
            floor = record.drift * np.maximum(np.abs(values[:, c]), _SMALL * record.greatest[c]) / 4
        else:
            floor = np.full(len(values), 2.0 * record.drift * record.head_scale[c] / 4)
        density[:, c] = np.maximum(noise, within[:, c]) + floor**2
        weight[:, c] = np.where(
            (count[:, c] > 0) & (density[:, c] > 0), 1.0 / np.maximum(density[:, c], 1e-300), 0.0
        )
    return weight, density


def _head_changes(values: Array, weight: Array, edges: list[int], penalty: float) -> list[int]:
    """Add the changes within a stretch of the flow that at least half of the heads share."""
    chosen = np.unique(np.linspace(0, values.shape[1] - 1, _VOTERS).round().astype(np.intp))
    values, weight, heads = values[:, chosen], weight[:, chosen], len(chosen)
    out = [0]
    for a, b in pairwise(edges):
        if b - a >= 2 * _BINS:
            scaled = values[a:b] * np.sqrt(weight[a:b])
            # each head's own votes: a change is the line's where half of them have one within two bins
            votes = np.zeros(b - a)
            for c in range(heads):
                own = changes(
                    scaled[:, c : c + 1], (weight[a:b, c : c + 1] > 0).astype(np.float64), penalty, 3
                )
                near = np.zeros(b - a, dtype=np.bool_)
                for k in own[1:-1]:
                    near[max(0, k - 2) : k + 3] = True
                votes += near
            shared = np.flatnonzero(votes >= max(heads / 2, 1))
            if len(shared):
                for run in np.split(shared, 1 + np.flatnonzero(np.diff(shared) > 1)):
                    middle = a + int(run[len(run) // 2])
                    if middle - out[-1] >= 3 and b - middle >= 3:
                        out.append(middle)
        out.append(b)
    return sorted(set(out))


def _joined(record: Searched, values: Array, count: Array, density: Array, edges: list[int]) -> list[int]:
    """Searchedes that one line, or one level within the limit, describes joined, the most alike first."""
    edges = list(edges)
    alike = [_alike(record, values, count, density, *edges[k : k + 3]) for k in range(len(edges) - 2)]
    while alike and max(alike) > 0:
        k = int(np.argmax(alike))
        del edges[k + 1], alike[k]
        for j in (k - 1, k):
            if 0 <= j < len(alike):
                alike[j] = _alike(record, values, count, density, *edges[j : j + 3])
    return edges


def _alike(record: Searched, values: Array, count: Array, density: Array, a: int, m: int, b: int) -> float:
    """How little tells the stretches a … m and m … b apart, dimensionless; 0 where the flow or half of the heads do."""
    n = np.where(count[a:b] > 0, 1.0, 0.0)
    z = values[a:b]
    place = np.arange(b - a, dtype=np.float64)
    after = np.where(place >= m - a, 1.0, 0.0)[:, None]
    one, two = _left(place, n, z), _left(place, n * (1 - after), z) + _left(place, n * after, z)
    gain = (one**2).sum(axis=0) - (two**2).sum(axis=0)
    about = variance_of_mean(two, n, np.broadcast_to(2.0 * after - 1.0, n.shape))
    noise = np.nan_to_num(about.variance * n.sum(axis=0))
    base = np.median(density[a:b], axis=0)
    noise = np.clip(noise, base, _WANDER * base)
    noise = np.where(noise > 0, noise, np.inf)
    # the noise lies between two bounds that the two stretches do not move: better known than from themselves alone
    p = fdtrc(3.0, 30.0, np.maximum(gain, 0.0) / (3.0 * noise))
    # levels within the limit are one run whatever can be told, unless the line through both is too steep
    line = trend_of(place, float(b - a), n, z)
    limit = limits_of(record, _mean(z, count[a:b]))
    away = np.abs(_mean(z[: m - a], count[a:m]) - _mean(z[m - a :], count[m:b]))
    near = (away <= limit) & (np.abs(line.change) <= limit)
    likeness = np.where(near, 1.0, np.where(p > _SAME_LINE, p, 0.0))
    flows, heads = likeness[record.is_flow], np.sort(likeness[~record.is_flow])
    # fewer than half of the heads may tell them apart
    shared = float(heads[(len(heads) - 1) // 2]) if len(heads) else 1.0
    return float(min(flows.min(initial=1.0), shared))


def _left(place: Array, weight: Array, values: Array) -> Array:
    """What the best line leaves of the bins that have a weight; 0 of the others."""
    total = np.maximum(weight.sum(axis=0), 1e-300)
    time = place[:, None] - (weight * place[:, None]).sum(axis=0) / total
    away = values - (weight * values).sum(axis=0) / total
    square = (weight * time**2).sum(axis=0)
    slope = (weight * time * away).sum(axis=0) / np.where(square > 0, square, 1.0)
    return np.asarray(np.where(weight > 0, away - slope * time, 0.0))


def _mean(values: Array, count: Array) -> Array:
    return np.asarray((values * count).sum(axis=0) / np.maximum(count.sum(axis=0), 1e-300))


def limits_of(record: Searched, level: Array) -> Array:
    """Return what each column may change by over a window.

    Parameters
    ----------
    record : Searched
        The record.
    level : (C,) array
        Mean of each column over the window, in units of the column.

    Returns
    -------
    (C,) array
        In units of the column.

    Examples
    --------
    >>> none = np.zeros((0, 2))
    >>> record = Searched(none[:, 0], none[:, 0], none, none, none, np.array([True, False]), 0.01, 60.0,
    ...     np.array([4e-3, 2.0]), np.array([4e-3, 1.5]))
    >>> limits_of(record, np.array([2e-3, 1.2])).round(9).tolist()
    [2e-05, 0.03]
    """
    flow = record.drift * np.maximum(np.abs(level), _SMALL * record.greatest)
    return np.where(record.is_flow, flow, 2.0 * record.drift * record.head_scale)
