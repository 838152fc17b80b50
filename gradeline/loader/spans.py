"""Readings beyond the scale of their gauge."""

from __future__ import annotations

import numpy as np

from gradeline.loader.grouped import TOLD_SINGLY
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import Rows
from gradeline.loader.taps import TapTable

__all__ = ["check_spans"]


def check_spans(ledger: Ledger, file: str, rows: Rows, taps: TapTable) -> None:
    """Note every reading that the scale of its gauge cannot show, many of one column as one.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    file : str
        Name of the table of readings.
    rows : Rows
        The readings.
    taps : TapTable
        The columns of readings and the ranges of their gauges.
    """
    for code, name in enumerate(taps.distinct):
        span = taps.spans.get(name)
        if span is None:
            continue
        low, high = span
        slack = 1e-9 * max(abs(low), abs(high))
        mine = rows.reading_taps == code
        with np.errstate(invalid="ignore"):
            beyond = np.flatnonzero(mine & ((rows.values < low - slack) | (rows.values > high + slack)))
        unit = span.unit
        shown = " to ".join(f"{unit.from_si(end):g}" for end in span)
        for place in beyond[: 1 if len(beyond) > TOLD_SINGLY else None].tolist():
            more = f", and so do {len(beyond) - 1} more readings" if len(beyond) > TOLD_SINGLY else ""
            text, line, heading = rows.placed(place)
            whose = "" if heading is None or heading.startswith(name) else f" of {name!r}"
            ledger.problem(
                file,
                line,
                heading or name,
                f"{text}{whose} lies beyond the scale of gauge {taps.gauge_of.get(name)!r}, {shown} {unit.text}"
                f"{more}; mend the reading or the gauge's range",
            )
