"""The time column of a logger's file, and times written in the same form."""

from __future__ import annotations

import datetime
import math

from gradeline.errors import QuantityError
from gradeline.loader.cells import Heading
from gradeline.quantities import Unit, parse_unit
from gradeline.survey import Clock

__all__ = ["TIME", "TimeForm", "clock_from", "time_form"]

#: The column's name.
TIME = "time"
_EPOCH = datetime.datetime(1970, 1, 1, tzinfo=datetime.UTC)


class TimeForm:
    """How a time is written: a number of some unit, or a timestamp.

    Parameters
    ----------
    unit : Unit or None
        Of a number; None for timestamps of ISO 8601.
    comma : bool
        Whether decimals are set off by a comma.
    """

    def __init__(self, unit: Unit | None, *, comma: bool = False) -> None:
        self.unit, self.comma = unit, comma

    def seconds(self, text: str) -> float:
        """Return a time in s: from the file's zero, or since 1970; NaN where the text is none."""
        stripped = text.strip()
        try:
            if self.unit is not None:
                value = float(stripped.replace(",", ".") if self.comma else stripped)
                return self.unit.to_si(value) if math.isfinite(value) else math.nan
            stamp = datetime.datetime.fromisoformat(stripped)
        except ValueError:
            return math.nan
        if stamp.tzinfo is None:
            stamp = stamp.replace(tzinfo=datetime.UTC)
        return (stamp - _EPOCH).total_seconds()

    def zone(self, text: str) -> float | None:
        """Return the offset of a timestamp from UTC, s; None where it has none."""
        if self.unit is not None:
            return None
        try:
            offset = datetime.datetime.fromisoformat(text.strip()).utcoffset()
        except ValueError:
            return None
        return None if offset is None else offset.total_seconds()

    @property
    def example(self) -> str:
        """A time in this form, for messages."""
        return f"12.5 (in {self.unit.text})" if self.unit is not None else "2026-05-06T09:30:00"


def time_form(heading: Heading, *, comma: bool = False) -> TimeForm:
    """Return how the column of a heading tells time.

    Raises
    ------
    QuantityError
        Where its unit measures no time.

    Examples
    --------
    >>> from gradeline.loader.cells import parse_heading
    >>> time_form(parse_heading("time [min]")).seconds("1.5")
    90.0
    >>> time_form(parse_heading("time")).seconds("1970-01-01T01:00:00+01:00")
    0.0
    """
    if heading.unit is None:
        return TimeForm(None)
    try:
        return TimeForm(parse_unit(heading.unit, "time"), comma=comma)
    except QuantityError as error:
        raise QuantityError(f"{error}; without a unit the column holds timestamps of ISO 8601") from None


def clock_from(form: TimeForm, first: str) -> Clock:
    """Return the clock of a file whose first time is as given."""
    if form.unit is not None:
        return Clock(form.seconds(first), form.unit.text, form.unit.factor / form.unit.divisor)
    return Clock(form.seconds(first), zone=form.zone(first))
