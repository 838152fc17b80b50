"""``readings.csv`` (and ``runs.csv``) to runs and their readings, repeats averaged."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from types import MappingProxyType

import numpy as np
import pandas as pd

from gradeline.errors import QuantityError
from gradeline.loader.cells import Cells, Hints, column_index, nearest, numbers, round_brackets
from gradeline.loader.columns import Columns, Known, read_unit
from gradeline.loader.document import GaugeTable
from gradeline.loader.flow_keys import FlowTable
from gradeline.loader.flow_rows import (
    check_flows,
    flow_columns,
    flow_of_rows,
    flow_readings,
    with_flow_columns,
)
from gradeline.loader.fluids import TemperatureRule
from gradeline.loader.gas_pressures import check_gas, gas_columns, known_gas, with_gas
from gradeline.loader.grouped import TOLD_SINGLY, by_name, quoted, rows_phrase
from gradeline.loader.ledger import Ledger
from gradeline.loader.offtakes import Branch, branch_columns, check_branches, with_branches
from gradeline.loader.reference import reference_change
from gradeline.loader.repeats import Rows, RunTable, averaged, check_repeated_flows
from gradeline.loader.spans import check_spans
from gradeline.loader.tables import place_of, read_table
from gradeline.loader.taps import TapTable
from gradeline.loader.temperatures import (
    TEMPERATURE_COLUMNS,
    check_temperatures,
    temperature_of_rows,
    with_temperature_u,
)
from gradeline.quantities import Unit, parse_unit
from gradeline.survey import Stated

__all__ = ["RunTable", "read_runs"]

_RUN_COLUMNS: Mapping[str, Known] = {
    "run": Known(required=True),
    **TEMPERATURE_COLUMNS,
}
_LONG_COLUMNS: Mapping[str, Known] = {
    "run": Known(required=True),
    "tap": Known(required=True),
    "reading": Known(("length", "pressure"), required=True, own_unit=False),
    "unit": Known(),
    "reference": Known(("length", "pressure"), remedy="read the reference gauge beside every reading"),
}
_NOT_READ = "leave the cell empty if the tap was not read"
_EMPTY_SINGLY = 10


def read_runs(
    ledger: Ledger,
    taps: TapTable | None,
    *,
    is_water: bool | None,
    flow_u: Stated | None,
    flow: FlowTable | None,
    rule: TemperatureRule | None = None,
    branches: Sequence[Branch] = (),
    gauges: Mapping[str, GaugeTable] = MappingProxyType({}),
) -> RunTable | None:
    """Return the runs of the survey, None where their tables cannot be read.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    taps : TapTable or None
        The taps; None where ``taps.csv`` could not be read, which leaves the readings unchecked against it.
    is_water : bool or None
        Whether each run needs a temperature; None where the fluid is not known.
    flow_u : Stated or None
        Stated uncertainty of one flow, against which repeats are held.
    flow : FlowTable or None
        How the flow was measured; None where that is at fault, which leaves its columns unchecked.
    rule : TemperatureRule or None
        What the temperatures are held to where the fluid is neither water nor constant.
    branches : sequence of Branch
        The off-takes.
    gauges : mapping of str to GaugeTable
        The gauges, for the gas pressures that are read beside them.

    Returns
    -------
    RunTable or None
        Means over the repeats of each run, SI.
    """
    cells = read_table(ledger, "readings")
    if cells is None:
        return None
    long = column_index(cells, "tap") is not None
    gas = gas_columns(gauges)
    if long:
        run_cells = read_table(ledger, "runs")
        rows = None if run_cells is None else _run_rows(ledger, run_cells, flow, branches, gas, others=False)
        units = _long_readings(ledger, cells, rows, taps)
    else:
        runs_place = place_of(ledger, "runs")
        if runs_place is not None:
            ledger.problem(
                runs_place,
                None,
                None,
                f"{cells.file} has a column for each tap and holds the runs itself; take {runs_place} away, "
                "or list the readings by 'run', 'tap' and 'reading'",
            )
        rows = _run_rows(ledger, cells, flow, branches, gas, others=True)
        units = _wide_readings(ledger, cells, rows, taps)
    if rows is None:
        return None
    check_temperatures(ledger, rows, is_water=is_water, rule=rule)
    check_flows(rows, flow)
    check_branches(ledger, rows, branches)
    check_gas(ledger, rows, gas, gauges)
    check_repeated_flows(rows, flow_u)
    if taps is None:
        return None
    if not ledger.planned:
        _check_taken(rows)
    table_units = {name: unit.text for name, unit in rows.columns.units.items() if unit is not None}
    gauge_of = {**{tap.name: tap.gauge for tap in taps.taps}, **taps.gauge_of}
    check_spans(ledger, cells.file, rows, taps)

    def with_line_columns(runs: pd.DataFrame) -> pd.DataFrame:
        return with_gas(with_branches(with_temperature_u(ledger, runs, rows), rows, branches), rows, gas)

    table = averaged(
        rows, taps.distinct, [gauge_of.get(name) for name in taps.distinct], table_units | units, listed=long
    )
    return replace(
        table,
        runs=with_line_columns(with_flow_columns(table.runs, rows)),
        flow_readings=flow_readings(rows, flow),
    )


def _run_rows(
    ledger: Ledger,
    cells: Cells,
    flow: FlowTable | None,
    branches: Sequence[Branch],
    gas: Mapping[str, str],
    *,
    others: bool,
) -> Rows:
    known = {
        **_RUN_COLUMNS,
        **flow_columns(flow, [heading.name for heading in cells.headings]),
        **branch_columns(branches),
        **known_gas(gas),
    }
    columns = Columns(ledger, cells, known, others=others)
    labels = columns.labels("run")
    return Rows(
        labels=labels,
        lines=cells.lines,
        flow=flow_of_rows(ledger, columns, flow),
        temperature=temperature_of_rows(ledger, columns),
        columns=columns,
        run_codes={label: code for code, label in enumerate(dict.fromkeys(labels))},
    )


def _wide_readings(
    ledger: Ledger,
    cells: Cells,
    rows: Rows,
    taps: TapTable | None,
) -> dict[str, str]:
    """Add a column for each tap to `rows`; return the units."""
    if taps is None:
        return {}
    names = taps.distinct
    units: dict[str, str] = {}
    codes = {name: code for code, name in enumerate(names)}
    blocks: list[tuple[int, np.ndarray, np.ndarray]] = []
    read = set()
    misnamed: list[tuple[str, str, str]] = []
    places: list[int] = []
    hints = Hints([*rows.columns.known, *names])
    for index, heading in enumerate(cells.headings):
        if heading.name in rows.columns.known or heading in rows.columns.misnamed.values():
            continue
        bracketed = round_brackets(heading, codes)
        if bracketed is not None:
            misnamed.append((heading.text, *bracketed))
            read.add(bracketed[0])
            given = np.array([bool(cell) for cell in cells.columns[index]])
            blocks.append((codes[bracketed[0]], np.full(len(cells), np.nan), given))
            continue
        if heading.name in taps.bare and heading.name not in codes:
            ledger.problem(
                cells.file,
                cells.heading_line,
                heading.text,
                f"the tap {heading.name!r} has no gauge in {taps.file}, where only differential gauges read it; name its gauge "
                "there, or take the column away",
            )
            continue
        if heading.name not in codes:
            hint = hints(heading.name)
            ledger.problem(
                cells.file,
                cells.heading_line,
                heading.text,
                f"there is no tap {heading.name!r} in {taps.file} and no such column; {hint}",
            )
            continue
        read.add(heading.name)
        dimension = taps.reads.get(heading.name)
        unit = read_unit(ledger, cells, index, (dimension,) if dimension else ("length", "pressure"))
        if unit is None:
            values = np.full(len(cells), np.nan)
        else:
            units[heading.name] = unit.text
            values = numbers(ledger, cells, index, unit, remedy=_NOT_READ)
        blocks.append((codes[heading.name], values, np.array([bool(cell) for cell in cells.columns[index]])))
        places.append(index)
    for heading_text, name, unit_text in misnamed[: 1 if len(misnamed) > TOLD_SINGLY else None]:
        others = f", and so on for {len(misnamed) - 1} more taps" if len(misnamed) > TOLD_SINGLY else ""
        ledger.problem(
            cells.file,
            cells.heading_line,
            heading_text,
            f"units stand in square brackets; write {f'{name} [{unit_text}]'!r}{others}",
        )
    rows.present = frozenset(read)
    for name in names:
        if name not in read and name not in taps.optional:
            _unread(ledger, taps, name, f"has no column in {cells.file}; add one headed '{name} [unit]'")
    run_of_row = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    rows.reading_runs = np.tile(run_of_row, len(blocks))
    rows.reading_taps = np.repeat(np.array([code for code, _, _ in blocks], dtype=int), len(cells))
    rows.values = np.concatenate([values for _, values, _ in blocks]) if blocks else np.empty(0)
    rows.given = np.concatenate([given for _, _, given in blocks]) if blocks else np.empty(0, bool)

    def placed(reading: int) -> tuple[str, int, str]:
        block, row = divmod(reading, len(cells))
        column, heading = cells.columns[places[block]], cells.headings[places[block]]
        return f"{column[row]} {heading.unit}", cells.lines[row], heading.text

    _place(rows, cells, placed)
    return units


def _unread(ledger: Ledger, taps: TapTable, name: str, message: str) -> None:
    ledger.problem(taps.file, taps.rows[name], "tap", f"the tap {name!r} {message}, or take the tap away")


def _long_readings(
    ledger: Ledger,
    cells: Cells,
    rows: Rows | None,
    taps: TapTable | None,
) -> dict[str, str]:
    """Add readings listed by run and tap to `rows`; return the units."""
    columns = Columns(ledger, cells, _LONG_COLUMNS)
    run_labels, tap_labels = columns.labels("run"), columns.labels("tap")
    known_runs = rows.run_codes if rows is not None else None
    known_taps = {name: code for code, name in enumerate(taps.distinct)} if taps is not None else None
    if known_runs is not None:
        _unknown_labels(columns, "run", run_labels, known_runs, place_of(ledger, "runs") or "runs.csv")
    if taps is not None and known_taps is not None:
        _unknown_labels(columns, "tap", tap_labels, known_taps, taps.file)
    if "reading" not in columns or "reading" in cells.doubled or taps is None or known_taps is None:
        return {}
    given = np.array([bool(cell) for cell in columns.raw("reading")])
    values, units = _long_values(ledger, columns, tap_labels, given, taps)
    read = set(tap_labels)
    for name in known_taps:
        if name not in read and name not in taps.optional:
            _unread(ledger, taps, name, f"has no reading in {cells.file}; add its rows")
    kinds = {taps.reads.get(name) for name in read & set(known_taps)}
    values = values - reference_change(columns, run_labels, given, kinds.pop() if len(kinds) == 1 else None)
    if rows is None or known_runs is None:
        return units
    rows.present, rows.referenced = frozenset(read), "reference" in columns
    runs = np.array([known_runs.get(label, -1) for label in run_labels], dtype=int)
    of_taps = np.array([known_taps.get(label, -1) for label in tap_labels], dtype=int)
    sound = (runs >= 0) & (of_taps >= 0)
    rows.reading_runs, rows.reading_taps = runs[sound], of_taps[sound]
    rows.values, rows.given = values[sound], given[sound]
    places = np.flatnonzero(sound)
    unit_texts = columns.raw("unit") if "unit" in columns else None
    heading = cells.headings[column_index(cells, "reading") or 0]

    def placed(reading: int) -> tuple[str, int, str]:
        row = int(places[reading])
        unit = unit_texts[row] if unit_texts is not None else heading.unit
        return f"{columns.raw('reading')[row]} {unit}", cells.lines[row], heading.text

    _place(rows, cells, placed)
    return units


def _place(rows: Rows, cells: Cells, placed: Callable[[int], tuple[str, int, str]]) -> None:
    """Let `rows` say how each reading stands in its file."""

    def told(reading: int) -> str:
        text, line, _ = placed(reading)
        return f"{text} ({cells.file} row {line})"

    rows.placed, rows.told = placed, told


def _unknown_labels(
    columns: Columns, name: str, labels: Sequence[str], known: Mapping[str, int], file: str
) -> None:
    """Note the labels that another file does not have: each once, many as one."""
    unknown = {label: places for label, places in by_name(labels).items() if label and label not in known}
    lines = columns.cells.lines
    if len(unknown) > TOLD_SINGLY:
        rows = [place for places in unknown.values() for place in places]
        first = next(iter(unknown))
        columns.problem(
            rows[0],
            name,
            f"there are {len(unknown)} {name}s that are not in {file}: {quoted(unknown)}, in "
            f"{rows_phrase(lines[row] for row in rows)}; {nearest(first, known)}",
        )
        return
    for label, places in unknown.items():
        also = f" (nor for {rows_phrase(lines[row] for row in places[1:])})" if len(places) > 1 else ""
        columns.problem(
            places[0], name, f"there is no {name} {label!r} in {file}{also}; {nearest(label, known)}"
        )


def _long_values(
    ledger: Ledger,
    columns: Columns,
    tap_labels: Sequence[str],
    given: np.ndarray,
    taps: TapTable,
) -> tuple[np.ndarray, dict[str, str]]:
    """The readings in SI, each by the unit of its row or of the column, and the units by tap."""
    cells = columns.cells
    index = column_index(cells, "reading")
    assert index is not None
    heading = cells.headings[index]
    raw = _raw_numbers(ledger, cells, index)
    values = np.full(len(cells), np.nan)
    if "unit" in columns and heading.unit is not None:
        ledger.problem(
            cells.file,
            cells.heading_line,
            heading.text,
            "a column 'unit' is there as well; keep one of the two",
        )
        return values, {}
    texts = columns.raw("unit") if "unit" in columns else [heading.unit or ""] * len(cells)
    if "unit" not in columns and heading.unit is None:
        ledger.problem(
            cells.file,
            cells.heading_line,
            heading.text,
            "a unit is missing; write 'reading [mm]' or add a column 'unit'",
        )
        return values, {}
    converters: dict[tuple[str, str], Unit | None] = {}
    groups: dict[tuple[str, str], list[int]] = {}
    units: dict[str, str] = {}
    by_tap = {name: taps.reads.get(name) for name in set(tap_labels)}
    for row, (text, tap) in enumerate(zip(texts, tap_labels, strict=True)):
        dimension = by_tap[tap]
        if not given[row] or dimension is None:
            continue
        key = (text, dimension)
        if key not in converters:
            converters[key] = _long_unit(columns, row, text, dimension)
        elif converters[key] is None and "unit" in columns:
            _long_unit(columns, row, text, dimension)
        groups.setdefault(key, []).append(row)
        units.setdefault(tap, text)
    for key, members in groups.items():
        unit = converters[key]
        if unit is not None:
            values[members] = unit.to_si(raw[members])
    return values, units


def _long_unit(columns: Columns, row: int, text: str, dimension: str) -> Unit | None:
    try:
        return parse_unit(text, dimension)
    except QuantityError as error:
        if "unit" in columns:
            columns.problem(row, "unit", str(error))
        else:
            columns.problem(row, "reading", f"tap {columns.raw('tap')[row]!r}: {error}")
        return None


def _raw_numbers(ledger: Ledger, cells: Cells, index: int) -> np.ndarray:
    return numbers(ledger, cells, index, Unit("", "dimensionless", 1.0), remedy=_NOT_READ)


def _check_taken(rows: Rows) -> None:
    """Every run has at least one reading."""
    taken = np.bincount(rows.reading_runs, weights=rows.given, minlength=len(rows.run_codes)) > 0
    if not len(rows.values):
        return
    first = {label: places[0] for label, places in by_name(rows.labels).items()}
    empty = [label for label, code in rows.run_codes.items() if label and not taken[code]]
    if len(empty) > _EMPTY_SINGLY:
        shown = empty[:_EMPTY_SINGLY]
        more = [rows.lines[first[label]] for label in empty[_EMPTY_SINGLY:]]
        rows.columns.problem(
            first[empty[0]],
            "run",
            f"all readings are empty of the {len(empty)} runs {', '.join(map(repr, shown))} and {len(more)} more in "
            f"{rows_phrase(more)}; enter them or take the runs away",
        )
        return
    for label in empty:
        rows.columns.problem(
            first[label], "run", f"all readings of run {label!r} are empty; enter them or take the run away"
        )
