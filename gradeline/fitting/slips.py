"""Slips of the pen: which plausible slip would have turned the expected value into the one that was written.

A catalogue of slips, each a function from written values to what they may have been meant for. With so many slips to
try, some candidate lies near the expected value of almost any wrong number: a repair is worth a word only where that
would be a strange coincidence, so each is weighed against an error that no slip made.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.slip_catalogue import SLIPS

__all__ = ["Repair", "Swap", "Written", "rank_repairs"]

Array = NDArray[np.float64]

#: A repair is named where the chance that it is none is below this (`tests/calibration/slips.py` measures what it does).
_MOST_CHANCE = 0.3
#: A repair fits within this many standard deviations.
_FITS = 3.0
#: Wrong values are taken as spread evenly in the logarithm of their error, over a range of this ratio.
_LOG_RANGE = math.log(50.0)
#: Digits that a value has in common with one above it before a glance into the wrong row is thought of.
_FEWEST_COMMON = 2


@dataclass(frozen=True)
class Swap:
    """A neighbour that a value may have changed places with.

    Parameters
    ----------
    name : str
        Its label.
    value : float
        What was written there, in the unit of the file.
    expected, u : float
        What is expected there, and its standard uncertainty, in the unit of the file.
    """

    name: str
    value: float
    expected: float
    u: float


@dataclass(frozen=True)
class Written:
    """A number in a file that does not fit.

    Parameters
    ----------
    name : str
        What it is: the label of a tap or of a gauge, or the flow.
    value : float
        As written, in the unit of the file.
    decimals : int or None
        Digits behind its point, dimensionless; None where it was worked out and not written.
    expected : float
        What the other values make it, in the unit of the file.
    u : float
        Standard uncertainty of that, the scatter of the value itself included, in the unit of the file.
    factors : mapping of str to float
        Other units that it may have been read in: units of the file for each of theirs, dimensionless.
    above : tuple of float
        What stands one and two rows above it in the file, in the unit of the file; NaN where nothing does.
    swaps : tuple of Swap
        Neighbours that it may have changed places with.
    signed : str
        What a wrong sign is called: ``"sign"``, ``"limbs swapped"`` or ``"swapped"``; empty where there is no sign.
    step : float
        What all values of its column are multiples of, in the unit of the file; 0 where that is not known.
    only : str
        The one kind of `SLIPS` to be tried; empty: all of them.
    """

    name: str
    value: float
    decimals: int | None
    expected: float
    u: float
    factors: Mapping[str, float] = field(default_factory=dict)
    above: tuple[float, ...] = ()
    swaps: tuple[Swap, ...] = ()
    signed: str = "sign"
    step: float = 0.0
    only: str = ""


@dataclass(frozen=True)
class Repair:
    """A slip that would explain a number.

    Parameters
    ----------
    name : str
        Which number.
    kind : str
        A key of `SLIPS`, ``"limbs swapped"``, ``"swapped"``, ``"copied"`` or ``"copied in part"``.
    value : float
        What was meant, in the unit of the file; NaN where the slip left nothing of it.
    detail : str
        The unit, the factor, the neighbour; for what was copied the number of rows above.
    score : float
        How far the value lies from the expected one, in standard deviations, dimensionless; NaN where there is none.
    odds : float
        How much likelier the slip makes what was written than an error that no slip made, dimensionless.
    chance : float
        Probability that it was another slip or none, dimensionless.
    named : bool
        Whether the chance is small enough for a word.
    """

    name: str
    kind: str
    value: float
    detail: str
    score: float
    odds: float
    chance: float
    named: bool


#: The same of slips that need more than one number, by common practice.
_SWAPPED, _COPIED = 0.1, 0.05


def rank_repairs(
    written: Sequence[Written], *, fits: float = _FITS, most_chance: float = _MOST_CHANCE
) -> tuple[Repair, ...]:
    """Rank the slips that would explain why one of some numbers does not fit.

    Parameters
    ----------
    written : sequence of Written
        The numbers, one of which may hold the slip: a reading, or the flow and the readings of a run.
    fits : float
        A repair fits within this many standard deviations, dimensionless.
    most_chance : float
        A repair is named where its chance is below this, dimensionless.

    Returns
    -------
    tuple of Repair
        All that fit, those that deserve a word first, then the likeliest first.

    Notes
    -----
    A number w is written where e ± u is expected. A slip of kind k, with a share p_k of all slips and n_k candidates
    tried, makes it with the density (p_k/n_k) r φ(z)/u, z = (c − e)/u the misfit of the candidate c; r is |dc/dw|, or 1
    where both stand on the steps of the column, or how many times finer w is written than its column. An error
    that no slip made has a size even in its logarithm over a range of 50, so the density 1/(2 |w − e| ln 50). Their
    quotient is `odds`; with slips and other errors alike common beforehand, and over N numbers,
    chance = 1 − (odds/N) / (1 + Σ odds/N). Many candidates, a loose expectation or a small error make it large.

    Examples
    --------
    >>> best = rank_repairs([Written("T4", 941.0, 0, 491.4, 0.9)])[0]
    >>> best.kind, best.value, best.named
    ('transposed', 491.0, True)
    >>> rank_repairs([Written("T4", 944.0, 0, 497.4, 0.9)])
    ()
    """
    sound = [
        one
        for one in written
        if np.isfinite([one.value, one.expected, one.u]).all() and one.u > 0 and one.value != one.expected
    ]
    found = [
        repair
        for one in sound
        for repair in _distinct([*_alone(one, fits), *_swaps(one, fits), *_copied(one)])
    ]
    found += [repair for one in sound for repair in _in_part(one, fits)]
    total = 1.0 + sum(repair.odds for repair in found) / max(len(sound), 1)
    weighed = []
    for repair in found:
        chance = 1.0 - repair.odds / len(sound) / total
        weighed.append(replace(repair, chance=chance, named=chance < most_chance))
    return tuple(sorted(weighed, key=lambda repair: (not repair.named, -repair.odds)))


def _errors_per_unit(value: float, expected: float) -> float:
    """Density of values with an error that no slip made, at `value`."""
    return 1.0 / (2.0 * abs(value - expected) * _LOG_RANGE)


def _normal_density(misfit: float) -> float:
    return math.exp(-(misfit**2) / 2.0) / math.sqrt(2.0 * math.pi)


def _repair(one: Written, kind: str, value: float, detail: str, misfit: float, odds: float) -> Repair:
    return Repair(one.name, kind, value, detail, misfit, odds, 1.0, named=False)


def _alone(one: Written, fits: float) -> list[Repair]:
    """The slips of the catalogue that fit."""
    found = []
    other = _errors_per_unit(one.value, one.expected)
    step = 0.0 if one.decimals is None else 10.0**-one.decimals
    places = 1 if one.decimals is None else len(_text(min(abs(one.expected), 1e9), one.decimals))
    for kind, slip in SLIPS.items():
        if (slip.digits and one.decimals is None) or (kind == "sign" and not one.signed):
            continue
        if one.only and kind != one.only:
            continue
        tried = slip.candidates(np.array([one.value]), one.decimals or 0, places, one.factors)
        share = np.where(np.isfinite(tried.values[0]), 1.0 if tried.share is None else tried.share, 0.0)
        share = slip.prior * share / max(float(share.sum()), 1e-12)
        values, rate, u = tried.values[0], np.abs(tried.rate), np.full(tried.rate.shape, one.u)
        if kind == "unit":
            # What was read in a coarser unit is known no better than its last digit there.
            u = np.hypot(u, np.where(rate > 1.0, step * rate / math.sqrt(12.0), 0.0))
        elif one.step > 0:
            # A slip moves digits and makes none: a scale read to half millimetres has no 513.7 on it. And a number with
            # more places than its column has is hardly one that was read.
            values = np.where(_is_multiple(values, one.step), values, np.nan)
            rate = np.full(rate.shape, 1.0 if _is_multiple(one.value, one.step) else one.step / step)
        misfit = (values - one.expected) / u
        for at in np.flatnonzero(np.abs(np.nan_to_num(misfit, nan=np.inf)) <= fits):
            density = share[at] * rate[at] * _normal_density(misfit[at]) / u[at]
            found.append(
                _repair(
                    one,
                    one.signed if kind == "sign" else kind,
                    float(values[at]),
                    tried.details[at],
                    float(misfit[at]),
                    float(density / other),
                )
            )
    return found


def _is_multiple(values: Array | float, step: float) -> NDArray[np.bool_]:
    steps = np.asarray(values) / step
    with np.errstate(invalid="ignore"):
        return np.asarray(np.abs(steps - np.rint(steps)) < 1e-6)


def _swaps(one: Written, fits: float) -> list[Repair]:
    """Neighbours with which a change of places would bring both to where they are expected."""
    found = []
    for swap in one.swaps:
        here, there = (swap.value - one.expected) / one.u, (one.value - swap.expected) / swap.u
        if max(abs(here), abs(there)) > fits or swap.value == swap.expected:
            continue
        density = _SWAPPED / len(one.swaps) * _normal_density(here) / one.u * _normal_density(there) / swap.u
        other = _errors_per_unit(one.value, one.expected) * _errors_per_unit(swap.value, swap.expected)
        worse = here if abs(here) > abs(there) else there
        found.append(_repair(one, "swapped", swap.value, swap.name, worse, density / other))
    return found


def _distinct(found: Sequence[Repair]) -> list[Repair]:
    """Of slips that make the same value the likelier one; a unit that is a decimal point off stays in the detail."""
    kept: dict[float, Repair] = {}
    for repair in sorted(found, key=lambda repair: -repair.odds):
        key = float(f"{repair.value:.9g}")
        if key not in kept:
            kept[key] = repair
            continue
        first = kept[key]
        detail = first.detail
        if (first.kind, repair.kind) == ("decimal point", "unit") and " or " not in detail:
            detail = f"{detail} or {repair.detail}"
        elif (first.kind, repair.kind) == ("unit", "decimal point"):
            first, detail = replace(first, kind="decimal point"), f"{repair.detail} or {detail}"
        kept[key] = replace(first, detail=detail, odds=first.odds + repair.odds)
    return list(kept.values())


def _copied(one: Written) -> list[Repair]:
    """What stands in the row above as well: nothing of the true value is left."""
    if not one.above or one.value == 0 or not math.isclose(one.above[0], one.value, rel_tol=1e-9):
        return []
    step = 10.0 ** -(9 if one.decimals is None else one.decimals)
    odds = _COPIED / (step * _errors_per_unit(one.value, one.expected))
    return [_repair(one, "copied", float("nan"), "1", float("nan"), odds)]


def _in_part(one: Written, fits: float) -> list[Repair]:
    """What begins as a value one or two rows above does: a glance into the wrong row, the last digits its own."""
    if one.decimals is None or any(math.isclose(above, one.value, rel_tol=1e-9) for above in one.above[:1]):
        return []
    step, text = 10.0**-one.decimals, _text(one.value, one.decimals)
    for rows, above in enumerate(one.above, 1):
        other = _text(above, one.decimals) if math.isfinite(above) else ""
        common = _common(text, other)
        if len(other) != len(text) or common < max(_FEWEST_COMMON, len(text) - 1):
            continue
        # As few digits as possible come from the other row: what is left is the value's own.
        for foreign in range(2, common + 1):
            spacing = step * 10.0 ** (len(text) - foreign)
            value = round(one.value + spacing * round((one.expected - one.value) / spacing), one.decimals)
            misfit = (value - one.expected) / one.u
            if value == one.value or abs(misfit) > fits:
                continue
            # Of the rows above, this one; then every value that begins so is alike likely.
            block = step * 10.0 ** (len(text) - common)
            odds = _COPIED / len(one.above) / (block * _errors_per_unit(one.value, one.expected))
            return [_repair(one, "copied in part", value, str(rows), misfit, odds)]
    return []


def _text(value: float, decimals: int) -> str:
    """The digits of a value as written, without sign and point."""
    return f"{abs(value):.{decimals}f}".replace(".", "")


def _common(one: str, other: str) -> int:
    """How many leading digits two numbers have in common."""
    pairs = zip(one, other, strict=False)
    return next((n for n, (a, b) in enumerate(pairs) if a != b), min(len(one), len(other)))
