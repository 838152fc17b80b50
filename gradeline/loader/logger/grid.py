"""The blocks that a record is cut into: even ones along it, and even ones within each given window."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from gradeline.survey import Window

__all__ = ["Segment", "grid", "key_query"]

#: Blocks of a whole record where windows are found in it, where they are given, and of a window at least.
_BLOCKS, _FEWER_BLOCKS, _WINDOW_BLOCKS = 20_000, 6_000, 100
#: Samples in a block where there are enough of them: a single one far off is told by the others.
_SAMPLES = 10


@dataclass(frozen=True)
class Segment:
    """A stretch of the record with blocks of one length.

    Parameters
    ----------
    start : float
        Where it begins, s.
    width : float
        Length of its blocks, s.
    base : int
        Key of its first block.
    window : int
        Index of the window that it is, -1 between windows.
    """

    start: float
    width: float
    base: int
    window: int


def grid(
    windows: Sequence[Window], length: float, interval: float, least: float
) -> tuple[tuple[Segment, ...], int]:
    """Return the segments of a record and the greatest key of a block.

    Parameters
    ----------
    windows : sequence of Window
        Those given, in the order of time, apart from each other.
    length : float
        Of the record, s.
    interval : float
        Between two samples, s.
    least : float
        The least length of a window that is to be found, s.

    Returns
    -------
    tuple
        One segment for each window and one for each stretch between. A block holds whole samples: its length is a multiple
        of the interval, and its bounds lie half-way between samples.

    Examples
    --------
    >>> segments, most = grid([Window("1", 10.0, 20.0)], 30.0, 0.1, 60.0)
    >>> [(one.start, round(one.width, 3), one.window) for one in segments]
    [(0.0, 0.1, -1), (10.0, 0.1, 0), (20.0, 0.1, -1)]
    """
    shortest = min((one.end - one.start for one in windows), default=least)
    blocks = _FEWER_BLOCKS if windows else _BLOCKS
    usual = _multiple(max(length / blocks, min(shortest / _WINDOW_BLOCKS, _SAMPLES * interval)), interval)
    bounds: list[tuple[float, float, int]] = []
    at = 0.0
    for place, window in enumerate(windows):
        if window.start > at or not bounds:
            bounds.append((at, max(window.start, at), -1))
        bounds.append((window.start, window.end, place))
        at = window.end
    if at < length + interval or not bounds:
        bounds.append((at, max(length + interval, at), -1))
    found: list[Segment] = []
    base = 0
    for start, end, place in bounds:
        width = usual if place < 0 else min(usual, _multiple((end - start) / _WINDOW_BLOCKS, interval))
        found.append(Segment(start, width, base, place))
        # One key stays free between segments: a sample on a bound never falls into a block of the other side.
        base += int((end - start + interval) / width) + 3
    return tuple(found), base


def _multiple(length: float, interval: float) -> float:
    """The length as a whole number of intervals, one at least."""
    return max(int(length / interval), 1) * interval


def key_query(segments: Sequence[Segment], most: int, interval: float) -> str:
    """Return what gives the key of a sample's block from its time ``t``, in the engine's words.

    Examples
    --------
    >>> key_query((Segment(0.0, 2.0, 0, -1),), 9, 1.0)
    'CAST(greatest(-1, least(9, floor(t * 0.5 + 0.25))) AS INTEGER)'
    """
    bounds = [one.start for one in segments[1:]]
    rates = [1.0 / one.width for one in segments]
    shifts = [
        one.base + (interval / 2.0 - one.start) * rate for one, rate in zip(segments, rates, strict=True)
    ]
    rate = _case(bounds, rates) if len(set(rates)) > 1 else repr(rates[0])
    return f"CAST(greatest(-1, least({most}, floor(t * {rate} + {_case(bounds, shifts)}))) AS INTEGER)"


def _case(bounds: Sequence[float], values: Sequence[float]) -> str:
    """A balanced choice among values by the bounds between them."""
    if len(values) == 1:
        return repr(float(values[0]))
    middle = len(values) // 2
    below = _case(bounds[: middle - 1], values[:middle])
    above = _case(bounds[middle:], values[middle:])
    return f"CASE WHEN t < {bounds[middle - 1]!r}::DOUBLE THEN {below} ELSE {above} END"
