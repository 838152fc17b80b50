"""A survey before anybody has read a tap: the same files, with no readings needed and flows from wherever they are."""

from __future__ import annotations

import os
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from gradeline.errors import Problem, QuantityError, UsageError
from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.loader.cells import Cells, Heading, parse_heading
from gradeline.loader.document import Document, read_document
from gradeline.loader.gauge_columns import with_gauge_columns
from gradeline.loader.gauges import level_labels
from gradeline.loader.heads import TableOfHeads
from gradeline.loader.ledger import Ledger
from gradeline.loader.line import build_reaches
from gradeline.loader.read import read_from
from gradeline.loader.tables import Source, source_of
from gradeline.loader.taps import TapTable, read_taps
from gradeline.loader.temperatures import TEMPERATURE_COLUMNS
from gradeline.quantities import parse_quantity, parse_unit
from gradeline.quantities.parsing import unit_of
from gradeline.survey import Survey

__all__ = ["flows_between", "read_plan"]

#: Temperature of the runs where nobody gives one, as written in a table.
_TEMPERATURE = "15 degC"
_RUNS = 10
_MOST_RUNS = 1000
_STATIC = "static"
_RANGE = re.compile(r"(.+?)\s+to\s+(.+)")


def flows_between(text: str, runs: int = _RUNS) -> tuple[list[float], str]:
    """Return the flows that a text names.

    Parameters
    ----------
    text : str
        A range such as ``"0.2 to 1.5 L/s"``, or flows set apart by commas such as ``"0, 0.2, 0.8, 1.5 L/s"``; 0 makes a
        static run.
    runs : int
        How many flows a range is made of, even on a log axis.

    Returns
    -------
    list of float, str
        The flows in the unit of the last one, and that unit.

    Raises
    ------
    UsageError
        Where it names none.

    Examples
    --------
    >>> flows_between("1 to 4 L/s", 3)
    ([1.0, 2.0, 4.0], 'L/s')
    >>> flows_between("0, 0.5, 1 L/s")
    ([0.0, 0.5, 1.0], 'L/s')
    """
    whole = text.strip()
    found = _RANGE.fullmatch(whole)
    parts = [found[1], found[2]] if found else [part.strip() for part in whole.split(",")]
    try:
        unit_text = unit_of(parts[-1])
        unit = parse_unit(unit_text, "flow")
        values = [_flow(part, unit_text) for part in parts]
    except QuantityError as error:
        raise UsageError(f"--flows {whole!r}: {error}") from None
    if any(value < 0 for value in values):
        raise UsageError(f"--flows {whole!r}: a flow is below zero; chainage increases downstream")
    if not any(value > 0 for value in values):
        raise UsageError(f"--flows {whole!r}: nothing flows; give at least one flow above 0")
    if found is None:
        return [round(unit.from_si(value), 12) for value in values], unit_text
    low, high = values
    if not 0 < low < high:
        raise UsageError(
            f'--flows {whole!r}: a range goes from a smaller flow above 0 to a greater one, such as "0.2 to 1.5 L/s"'
        )
    if not 2 <= runs <= _MOST_RUNS:
        raise UsageError(f"--runs {runs}: a range takes 2 to {_MOST_RUNS} runs")
    ends = [unit.from_si(value) for value in (low, high)]
    return [float(f"{value:.3g}") for value in np.geomspace(ends[0], ends[1], runs)], unit_text


def _flow(text: str, unit: str) -> float:
    plain = text.strip()
    bare = re.fullmatch(r"[-+0-9.eE ]+", plain)
    value = parse_quantity(f"{plain} {unit}" if bare else plain, "flow")
    if value.u is not None:
        raise QuantityError(
            f"{plain!r} has an uncertainty; state it for all runs as flow and flow_scale in [uncertainty] of survey.toml"
        )
    return value.value


@dataclass
class Planned:
    """The tables of a survey with a column for every reading and nothing in it.

    Parameters
    ----------
    inner : Source
        Where the survey is.
    flows : tuple of float, str or None
        Flows to plan for and their unit; None: those of the survey's own runs.
    temperature : str or None
        Of all runs, as written.
    columns : tuple of Heading
        The columns of readings.
    """

    inner: Source
    flows: tuple[list[float], str] | None
    temperature: str | None
    columns: tuple[Heading, ...] = ()
    said: list[str] = field(default_factory=list)

    def data(self, ledger: Ledger) -> dict[str, Any] | None:
        """Return what ``survey.toml`` says, without how flows are measured where they are given."""
        found = self.inner.data(ledger)
        if found is not None and self.flows is not None and found.pop("flow", None) is not None:
            self.said.append(
                "The flows are given, so [flow] is left aside: how well they are known is what [uncertainty] says."
            )
        return found

    def table(self, ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
        """Return a table; of the readings one with a row for each planned run."""
        if name != "readings":
            return self.inner.table(ledger, name, required=required)
        cells = self._given() if self.flows is not None else self._own(ledger)
        return None if cells is None else self._whole(cells)

    def place_of(self, ledger: Ledger, name: str) -> str | None:
        """Return what messages call a table; the runs stand in that of the readings."""
        return None if name == "runs" else self.inner.place_of(ledger, name)

    def placed(self, problem: Problem) -> Problem:
        """Return a problem as the survey itself places it."""
        return self.inner.placed(problem)

    def _given(self) -> Cells:
        assert self.flows is not None
        values, unit = self.flows
        still = sum(value == 0 for value in values)
        labels: list[str] = []
        turn = 0
        for value in values:
            turn += value > 0
            labels.append(
                str(turn) if value > 0 else _STATIC if still == 1 else f"{_STATIC} {len(labels) + 1}"
            )
        headings = (parse_heading("run"), parse_heading(f"flow [{unit}]"))
        return Cells(
            "--flows",
            headings,
            (labels, [f"{value:.12g}" for value in values]),
            list(range(1, len(values) + 1)),
            None,
        )

    def _own(self, ledger: Ledger) -> Cells | None:
        """The survey's own table of runs."""
        base = next(
            (name for name in ("runs", "readings") if self.inner.place_of(ledger, name) is not None), None
        )
        if base is None:
            raise UsageError(
                'there are no flows to plan for; give --flows "0.2 to 1.5 L/s", or a readings.csv with the columns run and flow'
            )
        cells = self.inner.table(ledger, base)
        if cells is not None and not len(cells):
            raise UsageError(
                f'{cells.file} has no rows to plan for; give --flows "0.2 to 1.5 L/s", or a flow for each run'
            )
        return cells

    def _whole(self, cells: Cells) -> Cells:
        count = len(cells)
        table = {heading: list(column) for heading, column in zip(cells.headings, cells.columns, strict=True)}
        ends = [heading for heading in table if heading.name in TEMPERATURE_COLUMNS]
        if self.temperature is not None or not ends:
            for heading in ends:
                del table[heading]
            text = self.temperature or _TEMPERATURE
            number, unit = _temperature(text)
            table[Heading(f"temperature [{unit}]", "temperature", unit)] = [number] * count
            if self.temperature is None:
                self.said.append(f"The temperature is not given: it is taken as {_TEMPERATURE} in all runs.")
        else:
            self._fill(table, ends)
        there = {heading.name for heading in table}
        for heading in self.columns:
            if heading.name not in there:
                table[heading] = [""] * count
        # A gas pressure that is still to be read is not known.
        blank = [h for h, column in table.items() if h.name.startswith("gas_pressure") and not any(column)]
        for heading in blank:
            del table[heading]
        return replace(cells, headings=tuple(table), columns=tuple(table.values()))

    def _fill(self, table: dict[Heading, list[str]], ends: Sequence[Heading]) -> None:
        number, unit = _temperature(_TEMPERATURE)
        filled = False
        for heading in ends:
            if heading.unit != unit or all(table[heading]):
                continue
            table[heading] = [cell or number for cell in table[heading]]
            filled = True
        if filled:
            self.said.append(f"Where the temperature is not given it is taken as {_TEMPERATURE}.")


def _temperature(text: str) -> tuple[str, str]:
    try:
        parse_quantity(text, "temperature")
        unit = unit_of(text)
    except QuantityError as error:
        raise UsageError(f"--temperature {text!r}: {error}") from None
    return text.strip().removesuffix(unit).strip(), unit


def read_plan(
    path: str | os.PathLike[str],
    *,
    flows: str | None = None,
    runs: int = _RUNS,
    temperature: str | None = None,
) -> Survey:
    """Return a survey whose readings are still to be taken.

    Parameters
    ----------
    path : str or path
        A folder or a workbook as `read_survey` takes it. ``readings.csv`` may be absent, or have empty cells; readings that
        are there are not looked at.
    flows : str or None
        Flows to plan for, such as ``"0.2 to 1.5 L/s"`` or ``"0, 0.2, 0.8, 1.5 L/s"`` (0 makes a static run); None: those of
        ``runs.csv`` or ``readings.csv``.
    runs : int
        How many runs a range of flows is made of, 2 to 1000.
    temperature : str or None
        Of all runs, such as ``"18 degC"``; None: as in the files, else 15 °C.

    Returns
    -------
    Survey
        In SI units, without readings.

    Raises
    ------
    SurveyError
        With every problem of every file at once.
    UsageError
        Where there are no flows, or an argument cannot be read.

    Examples
    --------
    >>> survey = read_plan("data_demo/copper_bench", flows="0.1 to 1 L/s", runs=3)
    >>> survey.runs["flow"].round(6).tolist(), bool(survey.readings.isna().all(axis=None))
    ([0.0001, 0.000316, 0.001], True)
    """
    path = Path(path)
    given = None if flows is None else flows_between(flows, runs)
    ledger = Ledger(path.parent if path.is_file() else path)
    try:
        inner = source_of(ledger, path, {})
    except UsageError:
        inner = None
        if path.is_dir() or not path.is_file():
            raise
    if (inner is None and not ledger.problems) or isinstance(inner, TableOfHeads):
        raise UsageError(
            "one table of heads has no gauges to plan with; give a survey that describes them in survey.toml"
        )
    if inner is None:
        ledger.raise_problems()
        raise UsageError(
            f"{path}: there is no survey"
        )  # a fault that nobody noted would be a slip of this program
    source = Planned(inner, given, temperature, _columns(ledger.folder, inner))
    ledger.source, ledger.planned = source, True
    survey = read_from(ledger, path)
    blank = survey.readings * np.nan
    return replace(
        survey,
        readings=blank,
        spreads=blank.copy(),
        written=survey.written.iloc[:0],
        assumptions=(*survey.assumptions, *source.said),
    )


def _columns(folder: Path, inner: Source) -> tuple[Heading, ...]:
    """The columns that the readings of a survey would have; none where its description is at fault, which is told later."""
    scratch = Ledger(folder)
    scratch.source = inner
    document = read_document(scratch)
    if document is None:
        return ()
    taps = read_taps(scratch, document.gauges, build_reaches(scratch, document))
    if taps is None:
        return ()
    place = inner.place_of(scratch, "readings")
    there = inner.table(scratch, "readings", required=False) if place is not None else None
    own = {heading.name: heading for heading in there.headings} if there is not None else {}
    return tuple(own.get(one.name, one) for one in _wanted(document, taps, frozenset(own)))


def _wanted(document: Document, taps: TapTable, there: frozenset[str]) -> list[Heading]:
    whole = with_gauge_columns(taps, document.gauges)
    known: Mapping[str, object] = {tap.name: tap for tap in taps.taps}
    names = [name for name in whole.distinct if name not in whole.optional]
    for gauge in document.gauges.values():
        kind = GAUGE_KINDS.get(gauge.kind or "")
        if kind is None or not kind.differential:
            continue
        if kind.legs:
            names += [f"{gauge.name} {part}" for part in level_labels(gauge, known)]  # type: ignore[arg-type]  # as above: names alone
            continue
        limbs = [f"{gauge.name} {part}" for part in kind.limbs]
        # A well-type manometer is read at one limb, and so is a column that the survey has already.
        lone = (gauge.values or {}).get("area_ratio") is not None or gauge.name in there or not limbs
        names += [gauge.name] if lone else limbs
    unit = {"length": "mm", "pressure": "kPa"}
    found = []
    for name in dict.fromkeys(names):
        text = unit.get(whole.reads.get(name) or "", "mm")
        found.append(Heading(f"{name} [{text}]", name, text))
    return found
