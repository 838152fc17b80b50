"""``runs.csv`` beside a logger's file: the window of each run, and what else it tells of the runs."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np

from gradeline.errors import QuantityError
from gradeline.loader.cells import Cells, Heading, column_index
from gradeline.loader.ledger import Ledger
from gradeline.loader.logger.clock import TimeForm, time_form
from gradeline.loader.tables import read_table
from gradeline.survey import Clock, Window

__all__ = ["GivenRuns", "read_windows"]

_ENDS = ("start", "end")


@dataclass(frozen=True)
class GivenRuns:
    """The windows in the order of the file, with the other columns of it, a cell for each window."""

    windows: tuple[Window, ...]
    others: tuple[tuple[Heading, list[str]], ...]


def read_windows(
    ledger: Ledger, form: TimeForm, clock: Clock, length: float, logger: str
) -> GivenRuns | None:
    """Return the windows that ``runs.csv`` gives, None (with the problems noted) where any is at fault.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    form : TimeForm
        How the logger tells time.
    clock : Clock
        The logger's.
    length : float
        Of the record, s.
    logger : str
        Name of the logger's file.
    """
    cells = read_table(ledger, "runs")
    if cells is None:
        return None
    before = len(ledger.problems)
    found = [column_index(cells, name) for name in ("run", *_ENDS)]
    for name, index in zip(("run", *_ENDS), found, strict=True):
        if index is None:
            unit = f" [{form.unit.text}]" if form.unit is not None and name != "run" else ""
            ledger.problem(
                cells.file,
                cells.heading_line,
                None,
                f"the column '{name}{unit}' is missing; beside {logger} each run has its start and its end, or take the file "
                "away to have steady windows found",
            )
    if None in found:
        return None
    run, start, end = (index for index in found if index is not None)
    ends = [_times(ledger, cells, index, form, clock, logger) for index in (start, end)]
    labels = cells.columns[run]
    for row, label in enumerate(labels):
        if not label:
            ledger.problem(cells.file, cells.lines[row], "run", "the run has no label; name it")
        elif label in labels[:row]:
            ledger.problem(
                cells.file,
                cells.lines[row],
                "run",
                f"there are two windows of run {label!r}; give each its own label",
            )
    if len(ledger.problems) > before:
        return None
    windows = tuple(Window(label, *both) for label, *both in zip(labels, *ends, strict=True))
    _check(ledger, cells, windows, clock, length, logger, end)
    if len(ledger.problems) > before:
        return None
    kept = [
        (heading, column)
        for k, (heading, column) in enumerate(zip(cells.headings, cells.columns, strict=True))
        if k not in (run, start, end)
    ]
    return GivenRuns(windows, tuple(kept))


def _times(
    ledger: Ledger, cells: Cells, index: int, form: TimeForm, clock: Clock, logger: str
) -> list[float]:
    """A column of times, s from the beginning of the record; NaN with a problem noted."""
    heading = cells.headings[index]
    try:
        own = time_form(heading, comma=cells.decimal_comma)
    except QuantityError as error:
        ledger.problem(cells.file, cells.heading_line, heading.text, str(error))
        return [math.nan] * len(cells)
    if (own.unit is None) != (form.unit is None):
        unit = f" [{form.unit.text}]" if form.unit is not None else ""
        ledger.problem(
            cells.file,
            cells.heading_line,
            heading.text,
            f"{logger} tells time in {'timestamps' if form.unit is None else form.unit.text}; head the column "
            f"{heading.name + unit!r} and give its times in the same form",
        )
        return [math.nan] * len(cells)
    found = []
    for row, cell in enumerate(cells.columns[index]):
        at = own.seconds(cell)
        zone = own.zone(cell)
        if not math.isfinite(at):
            ledger.problem(
                cells.file,
                cells.lines[row],
                heading.text,
                f"{cell!r} is not a time; write it as {logger} does, such as {form.example}",
            )
        elif (zone is None) != (clock.zone is None):
            has = (
                "has no offset from UTC, and the times of {} have one"
                if zone is None
                else "has an offset from UTC, and the times of {} have none"
            )
            ledger.problem(
                cells.file, cells.lines[row], heading.text, f"{cell!r} {has.format(logger)}; write both alike"
            )
        found.append(at - clock.begin)
    return found


def _check(
    ledger: Ledger,
    cells: Cells,
    windows: tuple[Window, ...],
    clock: Clock,
    length: float,
    logger: str,
    end_column: int,
) -> None:
    heading = cells.headings[end_column].text
    for row, one in enumerate(windows):
        if not one.end > one.start:
            ledger.problem(
                cells.file,
                cells.lines[row],
                heading,
                f"{cells.columns[end_column][row]!r} is not after the start; a window has a length",
            )
        elif one.start > length or one.end <= 0:
            ledger.problem(
                cells.file,
                cells.lines[row],
                heading,
                f"the window of run {one.run!r} lies outside the record, which {logger} has from {clock.told(0.0)} to "
                f"{clock.told(length)}; mend start and end",
            )
    order = np.argsort([one.start for one in windows], kind="stable").tolist()
    for one, other in itertools.pairwise(order):
        if windows[other].start < windows[one].end:
            ledger.problem(
                cells.file,
                cells.lines[max(one, other)],
                None,
                f"the windows of runs {windows[one].run!r} and {windows[other].run!r} overlap; a sample belongs to one run",
            )
