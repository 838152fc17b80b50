"""Numbers as they stand in the files: in their own unit, with the digits that were written."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.slip_catalogue import decimals_of
from gradeline.quantities import Unit, parse_unit
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = ["FileColumn", "column_of", "flow_column", "limb_columns"]

Array = NDArray[np.float64]

#: Units of the trade that readings and flows are taken in, and so taken for one another.
_TRADE: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "length": ("mm", "cm", "m", "in", "ft"),
        "pressure": ("Pa", "kPa", "mbar", "bar", "psi", "mH2O", "mmH2O", "inH2O", "mmHg", "inHg", "kgf/cm^2"),
        "flow": (
            "L/s",
            "L/min",
            "L/h",
            "m^3/s",
            "m^3/h",
            "US_gal/min",
            "imp_gal/min",
            "ft^3/s",
            "ft^3/min",
        ),
    }
)
#: A factor beyond this, or nearer to 1, is no slip that could pass.
_LARGEST, _NEAREST = 1.1e4, 0.02
#: Values of a column that are looked at for their digits.
_LOOKED_AT = 500
#: Values from which on a column tells that all are multiples of something.
_FEWEST_FOR_STEP = 8
#: Of neighbouring values so many may be alike for a copied one to be told.
_MOST_ALIKE = 0.1
#: What a column without any range may still move by, in roundings.
_FEW_STEPS = 20.0
_SI = {"length": "m", "pressure": "Pa", "flow": "m^3/s"}


@dataclass(frozen=True)
class FileColumn:
    """A column of a file.

    Parameters
    ----------
    name : str
        Its label.
    unit : Unit
        That it was written in.
    values : (R,) array
        One a run in the order of the file, in its unit; the mean where there are repeats; NaN where empty.
    repeats : mapping of int to array
        The single values of the runs that have more than one.
    decimals : int or None
        Digits behind the point that most of its values have; None where they were worked out.
    step : float
        What nearly all of its values are multiples of, in its unit: 1, 2 or 5 of its last place; 0 where they were
        worked out.
    """

    name: str
    unit: Unit
    values: Array
    repeats: Mapping[int, Array]
    decimals: int | None
    step: float = 0.0

    @property
    def factors(self) -> dict[str, float]:
        """Other units of the trade, each in units of the column."""
        own = self.unit.difference_to_si(1.0)
        found: dict[str, float] = {}
        for text in _TRADE[self.unit.dimension]:
            ratio = parse_unit(text, self.unit.dimension).difference_to_si(1.0) / own
            if 1 / _LARGEST < ratio < _LARGEST and abs(ratio - 1) > _NEAREST:
                found[text] = ratio
        return found

    @property
    def rounding(self) -> float:
        """Standard uncertainty of a value from its last digit, in the unit of the column."""
        return 0.0 if self.decimals is None else 10.0**-self.decimals / np.sqrt(12.0)

    def varies(self, run: int) -> bool:
        """Whether a value like that in the row above means anything: not in a column where many are alike."""
        others = np.delete(self.values, run)
        return bool(len(others) < 2 or (np.diff(others) == 0).mean() <= _MOST_ALIKE)

    def usual(self, run: int, value: float) -> bool:
        """Whether a value is like those of the other runs: no further outside their range than that is wide."""
        others = np.delete(self.values, run)
        others = others[np.isfinite(others)]
        if len(others) < 2:
            return True
        low, high = float(np.quantile(others, 0.1)), float(np.quantile(others, 0.9))
        wide = max(2.0 * (high - low), _FEW_STEPS * self.rounding)
        return low - wide <= value <= high + wide

    def digits(self, value: float) -> int | None:
        """Return the digits behind the point that a value has as written; None where it was worked out."""
        own = decimals_of(value)
        if own is None or self.decimals is None:
            return None
        return max(own, self.decimals)

    def shown(self, value: float) -> str:
        """Return a value as it would stand in the column."""
        digits = None if self.digits(value) is None else decimals_of(value)
        return (f"{value:.6g}" if digits is None else f"{value:.{digits}f}").replace("-", "−")


def _tidy(values: Array) -> Array:
    """Values to twelve digits: without the noise that the way to SI and back leaves."""
    with np.errstate(divide="ignore"):
        place = 11.0 - np.floor(np.log10(np.abs(values)))
    scale = 10.0 ** np.where(np.isfinite(place), np.clip(place, 0.0, 300.0), 0.0)
    return np.asarray(np.rint(values * scale) / scale)


def _column(survey: Survey, name: str, dimension: str, values: Array) -> FileColumn:
    unit = parse_unit(survey.units.get(name, _SI[dimension]), dimension)
    tidy = _tidy(values * unit.divisor / unit.factor)
    repeats: dict[int, Array] = {}
    written = survey.written
    if len(written):
        mine = written[written["column"] == name]
        place = {run: row for row, run in enumerate(survey.runs["run"])}
        for run, group in mine.groupby("run", sort=False):
            single = _tidy(group["reading"].to_numpy(float) * unit.divisor / unit.factor)
            if len(single) > 1:
                repeats[place[run]] = single
    single = np.concatenate(
        [tidy[[row for row in range(len(tidy)) if row not in repeats]], *repeats.values()]
    )
    single = single[np.isfinite(single)]
    single = single[:: max(len(single) // _LOOKED_AT, 1)]
    digits = [decimals_of(float(value)) for value in single]
    short = sorted(each for each in digits if each is not None)
    # Numbers that nobody could have read: worked out.
    worked_out = 2 * len(short) <= len(digits)
    if worked_out:
        return FileColumn(name, unit, tidy, repeats, None)
    # The most digits that more than a few have: one that holds a slip has more.
    decimals = short[len(short) * 9 // 10]
    return FileColumn(name, unit, tidy, repeats, decimals, _step(single, decimals))


def _step(values: Array, decimals: int) -> float:
    """What at least nine of ten values are multiples of; of few, or else, the last place."""
    if len(values) < _FEWEST_FOR_STEP:
        return float(10.0**-decimals)
    for five_or_two in (5.0, 2.0):
        step = five_or_two * 10.0**-decimals
        away = values / step - np.rint(values / step)
        if (np.abs(away) < 1e-6).mean() >= 0.9:
            return step
    return 10.0**-decimals


def column_of(survey: Survey, i: int) -> FileColumn:
    """Return the column of an observation."""
    one = survey.observations[i]
    dimension = GAUGE_KINDS[survey.gauge(one.gauge).kind].reading
    return _column(survey, one.label, dimension, survey.readings.iloc[:, i].to_numpy(float))


def limb_columns(survey: Survey, i: int) -> tuple[FileColumn, FileColumn] | None:
    """Return the columns of the two limbs whose difference an observation is; None where it was read as one."""
    one = survey.observations[i]
    kind = GAUGE_KINDS[survey.gauge(one.gauge).kind]
    if one.tap_2 is None or not one.read_twice or not len(survey.written):
        return None
    found = []
    for limb in kind.limbs:
        name = f"{one.gauge} {limb}"
        mine = survey.written[survey.written["column"] == name]
        values = mine.groupby("run")["reading"].mean().reindex(survey.runs["run"]).to_numpy(float)
        found.append(_column(survey, name, kind.reading, values))
    return (found[0], found[1]) if len(found) == 2 else None


def flow_column(survey: Survey) -> FileColumn | None:
    """Return the column of the flows; None where they were worked out from what a method reads."""
    if survey.flow.method != "direct" or "flow_start" in survey.runs.columns:
        return None
    return _column(survey, "flow", "flow", survey.runs["flow"].to_numpy(float))
