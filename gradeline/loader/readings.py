"""``readings.csv`` (and ``runs.csv``) to runs and their readings, repeats averaged."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from gradeline.errors import QuantityError
from gradeline.loader.cells import Cells, Hints, column_index, numbers, read_cells
from gradeline.loader.columns import Columns, Known, read_unit
from gradeline.loader.ledger import Ledger
from gradeline.loader.taps import TapTable
from gradeline.quantities import Unit, parse_unit
from gradeline.survey import Stated

__all__ = ["RunTable", "read_runs"]

_RUN_COLUMNS: Mapping[str, Known] = {
    "run": Known(required=True),
    "flow": Known(("flow",), required=True, remedy="give the flow, 0 for a static run"),
    "temperature": Known(("temperature",), remedy="give the temperature of the fluid"),
}
_LONG_COLUMNS: Mapping[str, Known] = {
    "run": Known(required=True),
    "tap": Known(required=True),
    "reading": Known(("length", "pressure"), required=True, own_unit=False),
    "unit": Known(),
}
_NOT_READ = "leave the cell empty if the tap was not read"
_ZERO_CELSIUS, _BOILING = 273.15, 373.15
_FLOWS_APART = 0.02


@dataclass(frozen=True)
class RunTable:
    """Runs and readings as `gradeline.survey.Survey` holds them, with the units they came in."""

    runs: pd.DataFrame
    readings: pd.DataFrame
    repeats: pd.DataFrame
    spreads: pd.DataFrame
    units: Mapping[str, str]


@dataclass
class _Rows:
    """Rows of runs and single readings, before they are averaged: one reading is (run, tap, value, given)."""

    labels: list[str]
    lines: list[int]
    flow: np.ndarray
    temperature: np.ndarray
    columns: Columns
    run_codes: dict[str, int] = field(default_factory=dict)
    reading_runs: np.ndarray = field(default_factory=lambda: np.empty(0, int))
    reading_taps: np.ndarray = field(default_factory=lambda: np.empty(0, int))
    values: np.ndarray = field(default_factory=lambda: np.empty(0))
    given: np.ndarray = field(default_factory=lambda: np.empty(0, bool))


def read_runs(
    ledger: Ledger,
    taps: TapTable | None,
    *,
    is_water: bool | None,
    flow_u: Stated | None,
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

    Returns
    -------
    RunTable or None
        Means over the repeats of each run, SI.
    """
    cells = read_cells(ledger, "readings.csv")
    if cells is None:
        return None
    long = column_index(cells, "tap") is not None
    if long:
        run_cells = read_cells(ledger, "runs.csv")
        rows = None if run_cells is None else _run_rows(ledger, run_cells, others=False)
        units = _long_readings(ledger, cells, rows, taps)
    else:
        if (ledger.folder / "runs.csv").exists():
            ledger.problem(
                "runs.csv",
                None,
                None,
                "readings.csv has a column for each tap and holds the runs itself; take runs.csv away, "
                "or list the readings by 'run', 'tap' and 'reading'",
            )
        rows = _run_rows(ledger, cells, others=True)
        units = _wide_readings(ledger, cells, rows, taps)
    if rows is None:
        return None
    _check_runs(ledger, rows, is_water=is_water)
    _check_repeated_flows(rows, flow_u)
    if taps is None:
        return None
    _check_taken(rows)
    table_units = {name: unit.text for name, unit in rows.columns.units.items() if unit is not None}
    return _averaged(rows, taps.distinct, table_units | units)


def _run_rows(ledger: Ledger, cells: Cells, *, others: bool) -> _Rows:
    columns = Columns(ledger, cells, _RUN_COLUMNS, others=others)
    labels = columns.labels("run")
    return _Rows(
        labels=labels,
        lines=cells.lines,
        flow=columns.values("flow"),
        temperature=columns.values("temperature"),
        columns=columns,
        run_codes={label: code for code, label in enumerate(dict.fromkeys(labels))},
    )


def _wide_readings(
    ledger: Ledger,
    cells: Cells,
    rows: _Rows,
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
    hints = Hints([*_RUN_COLUMNS, *names])
    for index, heading in enumerate(cells.headings):
        if heading.name in _RUN_COLUMNS:
            continue
        if heading.name not in codes:
            hint = hints(heading.name)
            ledger.problem(
                cells.file,
                cells.heading_line,
                heading.text,
                f"there is no tap {heading.name!r} in taps.csv and no such column; {hint}",
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
    for name in names:
        if name not in read:
            _unread(ledger, taps, name, f"has no column in {cells.file}; add one headed '{name} [unit]'")
    run_of_row = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    rows.reading_runs = np.tile(run_of_row, len(blocks))
    rows.reading_taps = np.repeat(np.array([code for code, _, _ in blocks], dtype=int), len(cells))
    rows.values = np.concatenate([values for _, values, _ in blocks]) if blocks else np.empty(0)
    rows.given = np.concatenate([given for _, _, given in blocks]) if blocks else np.empty(0, bool)
    return units


def _unread(ledger: Ledger, taps: TapTable, name: str, message: str) -> None:
    ledger.problem(taps.file, taps.rows[name], "tap", f"the tap {name!r} {message}, or take the tap away")


def _long_readings(
    ledger: Ledger,
    cells: Cells,
    rows: _Rows | None,
    taps: TapTable | None,
) -> dict[str, str]:
    """Add readings listed by run and tap to `rows`; return the units."""
    columns = Columns(ledger, cells, _LONG_COLUMNS)
    run_labels, tap_labels = columns.labels("run"), columns.labels("tap")
    known_runs = rows.run_codes if rows is not None else None
    known_taps = {name: code for code, name in enumerate(taps.distinct)} if taps is not None else None
    run_hints, tap_hints = Hints(known_runs or ()), Hints(known_taps or ())
    for row, (run, tap) in enumerate(zip(run_labels, tap_labels, strict=True)):
        if known_runs is not None and run and run not in known_runs:
            columns.problem(row, "run", f"there is no run {run!r} in runs.csv; {run_hints(run)}")
        if known_taps is not None and tap and tap not in known_taps:
            columns.problem(row, "tap", f"there is no tap {tap!r} in taps.csv; {tap_hints(tap)}")
    if "reading" not in columns or taps is None or known_taps is None:
        return {}
    given = np.array([bool(cell) for cell in columns.raw("reading")])
    values, units = _long_values(ledger, columns, tap_labels, given, taps)
    read = set(tap_labels)
    for name in known_taps:
        if name not in read:
            _unread(ledger, taps, name, f"has no reading in {cells.file}; add its rows")
    if rows is None or known_runs is None:
        return units
    runs = np.array([known_runs.get(label, -1) for label in run_labels], dtype=int)
    of_taps = np.array([known_taps.get(label, -1) for label in tap_labels], dtype=int)
    sound = (runs >= 0) & (of_taps >= 0)
    rows.reading_runs, rows.reading_taps = runs[sound], of_taps[sound]
    rows.values, rows.given = values[sound], given[sound]
    return units


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


def _check_runs(ledger: Ledger, rows: _Rows, *, is_water: bool | None) -> None:
    """Flows at or above zero, and temperatures at which the fluid flows."""
    columns = rows.columns
    if "flow" in columns:
        raw = columns.raw("flow")
        for row in [row for row, cell in enumerate(raw) if not cell]:
            columns.problem(row, "flow", "the cell is empty; give the flow, 0 for a static run")
        for row in np.flatnonzero(rows.flow < 0).tolist():
            columns.problem(
                row, "flow", f"{raw[row]} is negative; chainage increases downstream, so turn the line round"
            )
    if "temperature" not in columns:
        if is_water:
            ledger.problem(
                columns.cells.file,
                columns.cells.heading_line,
                None,
                "the column 'temperature [degC]' is missing; water has its density and viscosity from it",
            )
        return
    raw = columns.raw("temperature")
    if is_water:
        for row in [row for row, cell in enumerate(raw) if not cell]:
            columns.problem(
                row,
                "temperature",
                "the cell is empty; water has its density and viscosity from the temperature",
            )
        outside = (rows.temperature <= _ZERO_CELSIUS) | (rows.temperature > _BOILING)
        rule = "lies outside 0 to 100 degC, where water is a liquid; mend the value or the unit"
    else:
        outside = rows.temperature <= 0
        rule = "lies below absolute zero; mend the value or the unit"
    unit = columns.units["temperature"]
    for row in np.flatnonzero(outside).tolist():
        columns.problem(row, "temperature", f"{raw[row]} {unit.text if unit else ''} {rule}")


def _check_repeated_flows(rows: _Rows, flow_u: Stated | None) -> None:
    """Repeats of a run are one flow: apart by no more than 2 % or three stated uncertainties."""
    if len(rows.run_codes) == len(rows.labels) or "flow" not in rows.columns:
        return
    members: dict[str, list[int]] = {}
    for row, label in enumerate(rows.labels):
        members.setdefault(label, []).append(row)
    for label, places in members.items():
        flows = rows.flow[places]
        if len(places) < 2 or not label or np.isnan(flows).any():
            continue
        mean = float(flows.mean())
        allowed = max(_FLOWS_APART * mean, 3 * flow_u.of(mean) if flow_u is not None else 0.0)
        if np.ptp(flows) > allowed:
            raw = rows.columns.raw("flow")
            listed = ", ".join(f"{raw[row]} (row {rows.lines[row]})" for row in places[:6])
            rows.columns.problem(
                places[-1],
                "flow",
                f"the repeats of run {label!r} have the flows {listed}, further apart than 2 % or three times "
                "the stated uncertainty; give runs at different flows their own labels",
            )


def _check_taken(rows: _Rows) -> None:
    """Every run has at least one reading."""
    taken = np.bincount(rows.reading_runs, weights=rows.given, minlength=len(rows.run_codes)) > 0
    if not len(rows.values):
        return
    for label, code in rows.run_codes.items():
        if label and not taken[code]:
            row = rows.labels.index(label)
            rows.columns.problem(
                row, "run", f"all readings of run {label!r} are empty; enter them or take the run away"
            )


def _averaged(rows: _Rows, names: Sequence[str], units: Mapping[str, str]) -> RunTable:
    """Means, counts and spreads over the repeats of each run."""
    run_of_row = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    n_runs, n_taps = len(rows.run_codes), len(names)
    flow, flow_count, flow_spread = _statistics(run_of_row, rows.flow, n_runs)
    temperature, _, _ = _statistics(run_of_row, rows.temperature, n_runs)
    runs = pd.DataFrame(
        {
            "run": pd.Series(list(rows.run_codes), dtype=object),
            "flow": flow + 0.0,
            "flow_u": flow_spread / np.sqrt(np.maximum(flow_count, 1)),
            "temperature": temperature,
            "repeats": np.bincount(run_of_row, minlength=n_runs),
        }
    )
    place = rows.reading_runs * n_taps + rows.reading_taps
    tables = _statistics(place, rows.values, n_runs * n_taps)
    index = pd.Index(list(rows.run_codes), dtype=object, name="run")
    readings, repeats, spreads = (
        pd.DataFrame(table.reshape(n_runs, n_taps), index=index, columns=list(names)) for table in tables
    )
    return RunTable(runs, readings, repeats, spreads, units)


def _statistics(
    groups: np.ndarray, values: np.ndarray, size: int
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Mean, count and standard deviation (n − 1; NaN below two) of the values of each group, NaN left out."""
    taken = ~np.isnan(values)
    groups, values = groups[taken], values[taken]
    count = np.bincount(groups, minlength=size)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.bincount(groups, weights=values, minlength=size) / count
        squares = np.bincount(groups, weights=(values - mean[groups]) ** 2, minlength=size)
        spread = np.where(count > 1, np.sqrt(squares / (count - 1)), np.nan)
    return mean, count, spread
