"""Where taps tell the most: D-optimal chainages under a spacing limit and outside the disturbed lengths."""

from __future__ import annotations

from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.friction import entrance_length
from gradeline.hydraulics.gradelines import passed, path_lengths
from gradeline.planning.expected import Expected
from gradeline.reduction.heads import heads_of
from gradeline.reduction.line import CAUTIOUS_RECOVERY, Line, disturbed_taps
from gradeline.survey import Survey

__all__ = [
    "Layout",
    "Zones",
    "bores_downstream",
    "d_optimal_places",
    "recommended_layout",
    "undisturbed",
    "with_places",
]

Array = NDArray[np.float64]
Zones = tuple[tuple[float, float], ...]

#: Rounds of exchange from each start; a round that changes nothing ends them.
_ROUNDS = 30
#: Steps of the grid over the whole line.
_GRID = 400
#: Taps on each side of a fitted loss, as the reduction wants them.
_BESIDE = 2
#: Spacing where none is given, in bores (common practice: a tapping is not to disturb the next; two taps that stand close
#: together at an end also tell little of whether the line between the ends is straight).
_BORES_APART = 10.0
_NEGLIGIBLE = 1e-9
#: How far inside an undisturbed length a tap lies at least, m: its end may belong to the disturbance.
_INSIDE = 1e-7


@dataclass(frozen=True)
class Layout:
    """Chainages now and as recommended.

    Parameters
    ----------
    places, recommended : (T,) array
        Chainages of the taps, m.
    disturbed : (T,) bool array
        Taps that lie in a disturbed length in any of the planned runs.
    zones : tuple of (float, float)
        Undisturbed lengths, m.
    spacing : float
        Least distance between two taps, m.
    efficiency : float
        D-efficiency of the present layout, dimensionless: (det now / det recommended)^(1/p); 0 where the taps do not tell
        all p parameters.
    reason : str or None
        Why nothing is recommended.
    """

    places: Array
    recommended: Array
    disturbed: NDArray[np.bool_]
    zones: Zones
    spacing: float
    efficiency: float
    reason: str | None


def d_optimal_places(
    start: Sequence[float],
    zones: Zones,
    value: Callable[[Array], Array],
    *,
    spacing: float,
    step: float,
    fixed: Collection[int] = (),
) -> Array:
    """Exchange chainages one by one until no single move raises the determinant.

    Parameters
    ----------
    start : sequence of float
        T chainages to begin with, m, in rising order.
    zones : tuple of (float, float)
        Where taps may lie, m.
    value : callable
        From chainages (C, T) to ln det(XᵀX) of each (C,); −inf where the design is singular or not allowed.
    spacing : float
        Least distance between two taps, m; 0 allows taps at one place.
    step : float
        Chainages are multiples of it, m.
    fixed : collection of int
        Places among the taps that stay.

    Returns
    -------
    (T,) array
        Chainages in rising order, m.

    Notes
    -----
    Coordinate exchange (Meyer and Nachtsheim, Technometrics 37, 1995), from the present layout, one spread over the
    zones and one with half the taps at either end; the best of the three. For a straight line over an interval half
    the taps at either end are D-optimal (Atkinson, Donev and Tobias, Optimum Experimental Designs, 2007).

    Examples
    --------
    >>> def line(x):
    ...     model = np.stack([np.ones_like(x), x], axis=2)
    ...     return np.linalg.slogdet(np.swapaxes(model, 1, 2) @ model)[1]
    >>> d_optimal_places([0.0, 0.2, 0.5, 0.9], ((0.0, 1.0),), line, spacing=0.1, step=0.01).round(2).tolist()
    [0.0, 0.1, 0.9, 1.0]
    """
    held = sorted(fixed)
    count = len(start)
    apart = np.ceil(spacing / step - _NEGLIGIBLE) * step
    candidates = _candidates(zones, count, apart, step, [start[n] for n in held])
    best, found = -np.inf, np.array(start, dtype=float)
    for first in _starts(np.array(start, dtype=float), candidates, held, apart):
        places, reached = _exchanged(first, candidates, value, held, apart)
        if reached > best + _NEGLIGIBLE:
            best, found = reached, places
    return found


def _candidates(zones: Zones, count: int, apart: float, step: float, held: Sequence[float]) -> Array:
    """Multiples of the step: a grid over the zones, and their ends and fixed taps with whole spacings from them."""
    found: list[float] = []
    length = sum(end - start for start, end in zones)
    for start, end in zones:
        first, last = np.ceil(start / step - _NEGLIGIBLE) * step, np.floor(end / step + _NEGLIGIBLE) * step
        if last < first - _NEGLIGIBLE:
            continue
        points = max(int(_GRID * (end - start) / length), 2)
        whole = np.round(np.linspace(first, last, points) / step) * step
        ladder = np.arange(count) * apart
        near = [
            first + ladder,
            last - ladder,
            *(place + ladder for place in held),
            *(place - ladder for place in held),
        ]
        mine = np.concatenate([whole, *near])
        found += mine[(mine >= first - _NEGLIGIBLE) & (mine <= last + _NEGLIGIBLE)].tolist()
    return np.unique(np.round(found, 9))


def _free(candidates: Array, others: Array, apart: float) -> Array:
    if not len(others):
        return candidates
    near = np.abs(candidates[:, None] - others).min(axis=1)
    return np.asarray(candidates[near >= apart - _NEGLIGIBLE])


def _starts(start: Array, candidates: Array, held: list[int], apart: float) -> list[Array]:
    """Layouts to begin with: taps as near as may be to the present ones, spread evenly, and at both ends by turns."""
    if not len(candidates):
        return []
    count = len(start)
    even = np.linspace(candidates[0], candidates[-1], count)
    ends = np.where(np.arange(count) < count // 2, candidates[0], candidates[-1])
    found = []
    for aims in (start, even, ends):
        placed = [start[n] for n in held]
        for aim in (aims[n] for n in range(count) if n not in held):
            free = _free(candidates, np.array(placed), apart)
            if not len(free):
                break
            placed.append(float(free[np.argmin(np.abs(free - aim))]))
        if len(placed) == count:
            found.append(np.sort(placed))
    return found


def _exchanged(
    places: Array, candidates: Array, value: Callable[[Array], Array], held: list[int], apart: float
) -> tuple[Array, float]:
    stay = [float(places[n]) for n in held] if held else []
    best = float(value(places[None, :])[0])
    for _ in range(_ROUNDS):
        before = best
        for n in range(len(places)):
            if any(abs(places[n] - one) < _NEGLIGIBLE for one in stay):
                continue
            others = np.delete(places, n)
            free = _free(candidates, others, apart)
            if not len(free):
                continue
            tried = np.sort(
                np.hstack([np.broadcast_to(others, (len(free), len(others))), free[:, None]]), axis=1
            )
            values = value(tried)
            most = int(np.argmax(values))
            if values[most] > best + _NEGLIGIBLE:
                best, places = float(values[most]), tried[most]
        if best <= before + _NEGLIGIBLE:
            break
    return places, best


def undisturbed(survey: Survey, line: Line, reynolds: Array, *, recovery: float = 0.0) -> Zones:
    """Return the lengths in which a tap is disturbed in none of the runs, m.

    Parameters
    ----------
    survey : Survey
        Its reaches.
    line : Line
        Its fittings, changes of bore among them.
    reynolds : (R, K) array
        Re of the flowing runs, dimensionless: the longest entrance length counts.
    recovery : float
        Bores downstream of every fitting that are left out at least, whatever shorter recovery it states.
    """
    last = len(line.diameter) - 1
    out: list[tuple[float, float]] = []
    for k, reach in enumerate(survey.reaches):
        if reach.inlet and len(reynolds):
            longest = float(np.max(entrance_length(reynolds[:, k], line.diameter[k])))
            out.append((reach.start, min(reach.start + longest, reach.end)))
    for fitting in line.fittings:
        upstream = int(np.clip(np.searchsorted(line.bounds, fitting.at, side="left") - 1, 0, last))
        downstream = int(np.clip(np.searchsorted(line.bounds, fitting.at, side="right") - 1, 0, last))
        half = fitting.length / 2
        out.append(
            (
                fitting.at - half - fitting.approach * line.diameter[upstream],
                fitting.at + half + max(fitting.recovery, recovery) * line.diameter[downstream],
            )
        )
    zones, at = [], float(line.bounds[0])
    for start, end in sorted(out):
        if start - _INSIDE > at:
            zones.append((at, start - _INSIDE))
        at = max(at, end + _INSIDE)
    if at < line.bounds[-1]:
        zones.append((at, float(line.bounds[-1])))
    return tuple(zones)


def bores_downstream(line: Line, places: Array) -> Array:
    """Return how many bores each place (T,), m, lies downstream of the nearest fitting, its end counted; NaN where of none."""
    last = len(line.diameter) - 1
    found = np.full(len(places), np.nan)
    for fitting in line.fittings:
        downstream = int(np.clip(np.searchsorted(line.bounds, fitting.at, side="right") - 1, 0, last))
        after = (places - fitting.at - fitting.length / 2) / line.diameter[downstream]
        found = np.fmin(found, np.where(after > 0, after, np.nan))
    return found


def with_places(survey: Survey, places: Array) -> Survey:
    """Return a survey with its taps at other chainages, in the same order.

    Parameters
    ----------
    survey : Survey
        The plan.
    places : (T,) array
        Chainages in rising order, m.

    Returns
    -------
    Survey
        The pipe's axis is taken as straight between the present taps, and level beyond them. Gauges stay where they are.
    """
    now = [tap.chainage for tap in survey.taps]
    height = np.interp(places, now, [tap.elevation for tap in survey.taps])
    taps = tuple(
        replace(tap, chainage=float(at), elevation=float(z))
        for tap, at, z in zip(survey.taps, places, height, strict=True)
    )
    return replace(survey, taps=taps)


def _broken(places: Array, before: Array, zones: Zones, apart: float, held: Sequence[int]) -> bool:
    """Whether a tap that may move lies outside every zone, or two taps are too near to each other."""
    stay = before[list(held)]
    inside = [
        any(start - _INSIDE <= x <= end + _INSIDE for start, end in zones) or bool(np.isclose(x, stay).any())
        for x in places
    ]
    moved = np.array([not np.isclose(x, stay).any() for x in places])
    gaps = np.diff(places) < apart - _INSIDE
    return not all(inside) or bool((gaps & (moved[:-1] | moved[1:])).any())


def recommended_layout(
    survey: Survey, expected: Expected, *, spacing: float | None = None, fixed: Collection[str] = ()
) -> Layout:
    """Return the tap layout that tells (E₀, S of each reach, fitted K) best.

    Parameters
    ----------
    survey : Survey
        The plan; the number of its taps is kept, and what reads them.
    expected : Expected
        What it is expected to bring home.
    spacing : float or None
        Least distance between two taps, m; None: ten bores of the widest reach.
    fixed : collection of str
        Taps that stay.

    Returns
    -------
    Layout
        All readings of equal weight. Two taps at least stay on each side of a fitted loss.
    """
    line = expected.line
    heads = heads_of(expected.survey, expected.media)
    flowing = expected.flow.reynolds[:, 0] > 0
    reynolds = expected.flow.reynolds[flowing]
    places = line.chainage
    disturbed = np.asarray(disturbed_taps(survey, line, reynolds)[0].any(axis=0))
    apart = _BORES_APART * float(line.diameter.max()) if spacing is None else spacing
    step = 10.0 ** np.floor(np.log10((line.bounds[-1] - line.bounds[0]) / 1000.0))
    at = np.array([fitting.at for fitting in line.fittings])
    lost = at[line.fitted]

    def design(x: Array) -> Array:
        flat = x.ravel()
        rows = [np.ones(flat.shape)[:, None], -path_lengths(flat, line.bounds)]
        if len(at):
            rows.append(-passed(flat, at).reshape(len(flat), len(at))[:, line.fitted])
        taps = np.hstack(rows).reshape(*x.shape, -1)
        seen = heads.taps @ taps
        levels = np.broadcast_to(heads.levels[:, 1:], (len(x), *heads.levels[:, 1:].shape))
        whole = np.concatenate([seen, levels], axis=2)
        return np.asarray(whole[:, :, np.abs(whole).max(axis=(0, 1)) > 0])

    def value(x: Array) -> Array:
        model = design(x)
        sign, size = np.linalg.slogdet(np.swapaxes(model, 1, 2) @ model)
        found = np.where((sign > 0) & (size > -200), size, -np.inf)
        if len(lost) and x.shape[1] >= _BESIDE * (len(lost) + 1):
            part = (x[:, :, None] > lost).sum(axis=2)
            counts = np.stack([(part == n).sum(axis=1) for n in range(len(lost) + 1)], axis=1)
            found = np.where((counts >= _BESIDE).all(axis=1), found, -np.inf)
        return np.asarray(found)

    held = [n for n, tap in enumerate(survey.taps) if tap.name in set(fixed)]
    # Where the flow has surely recovered, if there is room; else from the recovery that each fitting states.
    for recovery in (CAUTIOUS_RECOVERY, 0.0):
        zones = undisturbed(survey, line, reynolds, recovery=recovery)
        best = d_optimal_places(places.tolist(), zones, value, spacing=apart, step=float(step), fixed=held)
        reached = float(value(best[None, :])[0])
        allowed = np.isfinite(reached) and not _broken(best, places, zones, apart, held)
        if allowed:
            break
    if not allowed:
        why = (
            "no layout with this many taps, this far apart, tells all that is to be fitted outside the disturbed lengths; "
            "allow a smaller spacing or add taps"
        )
        return Layout(places, places, disturbed, zones, apart, float("nan"), why)
    sound = ~(disturbed @ (heads.taps != 0).T.astype(float) > 0)
    model = design(places[None, :])[0][sound]
    sign, size = np.linalg.slogdet(model.T @ model)
    parameters = model.shape[1]
    efficiency = float(np.exp((size - reached) / parameters)) if sign > 0 and size > -200 else 0.0
    return Layout(places, best, disturbed, zones, apart, efficiency, None)
