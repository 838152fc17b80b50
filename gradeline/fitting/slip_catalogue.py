"""The catalogue of slips of the pen: each a function from written values to what they may have been meant for."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

__all__ = ["SLIPS", "Candidates", "Slip", "decimals_of"]

Array = NDArray[np.float64]

#: More significant digits than this are worked out, not written down.
_MOST_DIGITS = 7
#: How common points are that are one, two and three places off, by common practice.
_ONE_PLACE = (0.7, 0.2, 0.1)


@dataclass(frozen=True)
class Candidates:
    """What values may have been meant for.

    Parameters
    ----------
    values : (m, c) array
        c candidates for each of m written values, in the unit of the file; NaN where there is none.
    rate : (c,) array
        Change of each for one unit of the written value, dimensionless.
    details : tuple of str
        c texts: the unit, the factor.
    share : (c,) array or None
        How common each is against the others, dimensionless; None: all alike.
    """

    values: Array
    rate: Array
    details: tuple[str, ...]
    share: Array | None = None


@dataclass(frozen=True)
class Slip:
    """A kind of slip.

    Parameters
    ----------
    candidates : callable
        From written values, their decimals, the digits that they should have and the other units to `Candidates`.
    prior : float
        Share of all slips that are of this kind, dimensionless.
    digits : bool
        Whether it needs the digits as they were written.
    """

    candidates: Callable[[Array, int, int, Mapping[str, float]], Candidates]
    prior: float
    digits: bool = False


def decimals_of(value: float) -> int | None:
    """Return the digits behind the point that a value was written with.

    Parameters
    ----------
    value : float
        A plain number, in whatever unit it was written: dimensionless here.

    Returns
    -------
    int or None
        Dimensionless; None where it has more significant digits than anybody writes.

    Examples
    --------
    >>> decimals_of(94.1), decimals_of(0.0832 * 1000.0), decimals_of(2 / 3)
    (1, 1, None)
    """
    for decimals in range(_MOST_DIGITS + 2):
        tidy = round(value, decimals)
        if math.isclose(tidy, value, rel_tol=1e-11, abs_tol=1e-14):
            whole = round(abs(tidy) * 10**decimals)
            return decimals if len(str(whole).rstrip("0")) <= _MOST_DIGITS else None
    return None


def _digits(
    values: Array, decimals: int, places: int
) -> tuple[NDArray[np.int64], NDArray[np.int64], Array, int]:
    """Values as whole numbers of their last place: (them, how many digits each has, signs, most digits)."""
    whole = np.rint(np.minimum(np.abs(values) * 10.0**decimals, 1e17)).astype(np.int64)
    count = np.ones(whole.shape, dtype=np.int64)
    most = len(str(int(whole.max(initial=0))))
    for place in range(1, most):
        count += whole >= 10**place
    # 0.94 has three digits: the zero before the point is written. And 12 may be 012, where 102 was to be written.
    least = max(decimals + 1, places)
    return whole, np.maximum(count, least), np.where(values < 0, -1.0, 1.0), max(most, least)


def _of_digits(columns: list[Array], details: list[str], decimals: int, rows: int) -> Candidates:
    values = np.stack(columns, axis=1) / 10.0**decimals if columns else np.empty((rows, 0))
    return Candidates(values, np.ones(values.shape[1]), tuple(details))


def _transposed(values: Array, decimals: int, places: int, factors: Mapping[str, float]) -> Candidates:  # noqa: ARG001 (all slips are called alike)
    """Two neighbouring digits in each other's place."""
    whole, count, sign, most = _digits(values, decimals, places)
    columns = []
    for place in range(most - 1):
        low, high = whole // 10**place % 10, whole // 10 ** (place + 1) % 10
        changed = sign * (whole + (high - low) * 10**place + (low - high) * 10 ** (place + 1))
        # Nobody writes a leading zero, but before the point.
        none = (low == high) | (place + 1 >= count)
        none |= (low == 0) & (place + 2 == count) & (place + 1 > decimals)
        columns.append(np.where(none, np.nan, changed))
    return _of_digits(columns, [""] * len(columns), decimals, len(values))


def _one_digit(values: Array, decimals: int, places: int, factors: Mapping[str, float]) -> Candidates:  # noqa: ARG001 (all slips are called alike)
    """One digit another."""
    whole, count, sign, most = _digits(values, decimals, places)
    columns = []
    for place in range(most):
        now = whole // 10**place % 10
        for step in range(1, 10):
            other = (now + step) % 10
            none = (place >= count) | ((other == 0) & (place + 1 == count) & (place > decimals))
            columns.append(np.where(none, np.nan, sign * (whole + (other - now) * 10**place)))
    return _of_digits(columns, [""] * len(columns), decimals, len(values))


def _decimal(values: Array, decimals: int, places: int, factors: Mapping[str, float]) -> Candidates:  # noqa: ARG001 (all slips are called alike)
    """The decimal point one to three places off."""
    shifts = (-3, -2, -1, 1, 2, 3)
    rate = 10.0 ** np.array(shifts)
    details = tuple(f"1/{10**-shift}" if shift < 0 else f"{10**shift}" for shift in shifts)
    share = np.array([_ONE_PLACE[abs(shift) - 1] for shift in shifts])
    return Candidates(values[:, None] * rate, rate, details, share)


def _unit(values: Array, decimals: int, places: int, factors: Mapping[str, float]) -> Candidates:  # noqa: ARG001 (all slips are called alike)
    """Read in another unit than that of its column."""
    ratio = np.array(list(factors.values()), dtype=float)
    return Candidates(values[:, None] * ratio, ratio, tuple(factors))


def _sign(values: Array, decimals: int, places: int, factors: Mapping[str, float]) -> Candidates:  # noqa: ARG001 (all slips are called alike)
    """The other sign."""
    return Candidates(np.where(values == 0, np.nan, -values)[:, None], np.ones(1), ("",))


#: Every slip that one number alone can show. Shares: single wrong digits to neighbouring ones transposed about as
#: found by J. Verhoeff, *Error Detecting Decimal Codes*, 1969 (79 and 10 of 100 errors of writing; from memory); decimal
#: points, units and signs by common practice.
SLIPS: Mapping[str, Slip] = MappingProxyType(
    {
        "transposed": Slip(_transposed, 0.08, digits=True),
        "one digit": Slip(_one_digit, 0.44, digits=True),
        "decimal point": Slip(_decimal, 0.2),
        "unit": Slip(_unit, 0.08),
        "sign": Slip(_sign, 0.05),
    }
)
