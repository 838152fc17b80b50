"""What a flow's method reads in each run: its columns, the flow of each row, and what cannot be."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Any

import numpy as np
import pandas as pd

from gradeline.flow_methods import FLOW_METHODS
from gradeline.loader.cells import nearest
from gradeline.loader.columns import Columns, Known
from gradeline.loader.flow_gauges import check_gauge_rows, gauge_columns, static_rows
from gradeline.loader.flow_keys import FlowTable
from gradeline.loader.grouped import by_name
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import Rows
from gradeline.quantities import DIMENSIONS

__all__ = ["check_flows", "flow_columns", "flow_of_rows", "flow_readings", "with_flow_columns"]

_NAME = "survey.toml"
_DIRECTIONS = ("rising", "falling")


def flow_columns(table: FlowTable | None, headings: Iterable[str] = ()) -> dict[str, Known]:
    """Return the columns of the runs that the flow is read from.

    Where the table of the flow is at fault (None) they are those of `headings` that any method reads.
    """
    if table is None:
        columns = [(name, one) for method in FLOW_METHODS.values() for name, one in method.columns.items()]
        read = {"flow", "flow start", "flow end", *(name for name, _ in columns)}
        prefixes = tuple(f"{name} " for name, one in columns if one.each_outlet)
        names = [_without_brackets(name) for name in headings]
        own = [name for name in names if name in read or name.startswith(prefixes)]
        # What they measure only tells that they have a unit: which one is not looked into.
        return {**{name: Known(("flow",), own_unit=False) for name in own}, "direction": Known()}
    if table.setup.method == "direct":
        remedy = "give the flow, 0 for a static run"
        found = {
            "flow": Known(("flow",), remedy=remedy),
            "flow start": Known(("flow",), remedy=remedy),
            "flow end": Known(("flow",), remedy=remedy),
        }
    elif table.gauges is not None:
        found = gauge_columns(table.gauges, headings)
    else:
        found = {
            name: Known(
                table.method.columns[column].dimensions,
                required=True,
                remedy=f"give {table.method.columns[column].meaning}",
            )
            for name, column in table.column_names.items()
        }
    return {**found, "direction": Known()}


def _without_brackets(name: str) -> str:
    """The name of a heading whose unit stands in round brackets, by mistake, perhaps."""
    return re.sub(r"\s*\([^()]*\)$", "", name)


def flow_of_rows(ledger: Ledger, columns: Columns, table: FlowTable | None) -> np.ndarray:
    """Return the flow of each row, m³/s; NaN where it is still to be worked out from the method's readings.

    A row is static where all its primary readings are 0, or what the meter's table has at no flow. Nothing is known where the table of the flow is at fault.
    """
    if table is None:
        return np.full(len(columns.cells), np.nan)
    if table.gauges is not None:
        return static_rows(columns, table.gauges)
    if table.setup.method != "direct":
        primary = [name for name, column in table.column_names.items() if column == table.method.primary]
        read = np.stack([columns.values(name) for name in primary], axis=1)
        still = (read == 0).all(axis=1)
        meter = table.setup.table
        if meter is not None and meter.flow[0] == 0:
            # A meter need not read 0 without flow: a current loop shows 4 mA.
            still |= np.isclose(read[:, 0], meter.reading[0], rtol=1e-9, atol=0.0)
        return np.where(still, 0.0, np.nan)
    flow, start, end = (columns.values(name) for name in ("flow", "flow start", "flow end"))
    both = "flow start" in columns and "flow end" in columns
    if "flow" not in columns and not both and "flow" not in columns.misnamed:
        ledger.problem(
            columns.cells.file, columns.cells.heading_line, None, "the column 'flow [L/s]' is missing; add it"
        )
    return np.where(np.isnan(flow), (start + end) / 2.0, flow) if both else flow


def check_flows(rows: Rows, table: FlowTable | None) -> None:
    """Note every reading of the flow that is missing or that cannot be, and every unknown direction."""
    columns = rows.columns
    if "direction" in columns:
        for row, cell in enumerate(columns.raw("direction")):
            if cell and cell not in _DIRECTIONS:
                columns.problem(row, "direction", f"unknown {cell!r}; {nearest(cell, _DIRECTIONS)}")
    if table is None:
        return
    if table.setup.method == "direct":
        _check_direct(rows)
        return
    for key, dimension in table.measured.items():
        column = key.removeprefix("u_").replace("_", " ")
        name = table.method.primary if column in {"zero", "table"} else column
        for heading, of in table.column_names.items():
            unit = columns.units.get(heading)
            if of == name and unit is not None and unit.dimension != dimension:
                columns.ledger.problem(
                    _NAME,
                    None,
                    f"flow.{key}",
                    f"it is {DIMENSIONS[dimension].noun}, but {heading!r} in {columns.cells.file} is read as "
                    f"{DIMENSIONS[unit.dimension].noun}; give both alike",
                )
    still = rows.flow == 0
    if table.gauges is not None:
        check_gauge_rows(columns, table.gauges, still)
    for name, of in table.column_names.items():
        if name not in columns:
            continue
        raw, values = columns.raw(name), columns.values(name)
        primary = of == table.method.primary
        for row, cell in enumerate(raw):
            if not cell and (primary or not still[row]):
                zero = ", 0 for a static run" if primary else ""
                columns.problem(
                    row, name, f"the cell is empty; give {table.method.columns[of].meaning}{zero}"
                )
            elif values[row] < 0:
                columns.problem(row, name, f"{cell} is negative; give {table.method.columns[of].meaning}")
            elif values[row] == 0 and not primary and not still[row]:
                columns.problem(row, name, f"{cell} is not above 0; give {table.method.columns[of].meaning}")
    unit = columns.units.get("differential")
    fluids = [key for key in ("gauge_fluid", "gauge_fluid_density") if key in table.setup.settings]
    if unit is not None and unit.dimension == "pressure" and fluids:
        columns.ledger.problem(
            _NAME,
            None,
            f"flow.{fluids[0]}",
            f"it goes with a deflection, but {_heading(columns, 'differential')!r} in {columns.cells.file} is a pressure; take "
            "it away, or give the deflection",
        )
    if (
        unit is not None
        and unit.dimension == "length"
        and not {"gauge_fluid", "gauge_fluid_density"} & set(table.setup.settings)
    ):
        columns.ledger.problem(
            columns.cells.file,
            columns.cells.heading_line,
            _heading(columns, "differential"),
            "a deflection needs the fluid in the gauge; add gauge_fluid or gauge_fluid_density to [flow], or give a pressure",
        )
    if "gauge_fluid" in table.setup.settings:
        cold = np.flatnonzero(np.isnan(rows.temperature) & ~still)
        if len(cold):
            columns.ledger.problem(
                columns.cells.file,
                columns.cells.lines[int(cold[0])],
                None,
                f"the density of the {table.setup.settings['gauge_fluid']} in the flow's gauge goes with the temperature; give "
                "'temperature [degC]', or gauge_fluid_density in place of gauge_fluid in [flow]",
            )
    for label, places in by_name(rows.labels).items():
        if label and len(set(still[places].tolist())) > 1:
            columns.problem(
                places[-1],
                "run",
                f"run {label!r} is static in one row and flows in another; give each its own label",
            )


def _heading(columns: Columns, name: str) -> str:
    """The heading of a column as written."""
    return next(heading.text for heading in columns.cells.headings if heading.name == name)


def _check_direct(rows: Rows) -> None:
    """Flows at or above zero, given in each row."""
    columns = rows.columns
    names = [name for name in ("flow", "flow start", "flow end") if name in columns]
    if len(names) == 2 and "flow" in names:
        lone = names[1]
        columns.ledger.problem(
            columns.cells.file,
            columns.cells.heading_line,
            _heading(columns, lone),
            f"'flow {'end' if lone == 'flow start' else 'start'}' is missing; a drift needs both",
        )
    for name in names:
        raw, values = columns.raw(name), columns.values(name)
        if name == "flow":
            for row in [row for row, cell in enumerate(raw) if not cell and np.isnan(rows.flow[row])]:
                columns.problem(row, "flow", "the cell is empty; give the flow, 0 for a static run")
        for row in np.flatnonzero(values < 0).tolist():
            columns.problem(
                row, name, f"{raw[row]} is negative; chainage increases downstream, so turn the line round"
            )
    if "flow start" in names and "flow end" in names:
        start, end = columns.values("flow start"), columns.values("flow end")
        raw = columns.raw("flow end")
        for row in np.flatnonzero(((start == 0) != (end == 0)) & np.isfinite(start + end)).tolist():
            columns.problem(
                row, "flow end", f"{raw[row]}: a run flows from its start to its end or is static"
            )
        if "flow" not in names:
            for row in np.flatnonzero(np.isnan(start + end)).tolist():
                columns.problem(
                    row, "flow end", "the flow at start or end is missing; give both, 0 for a static run"
                )


def flow_readings(rows: Rows, table: FlowTable | None) -> pd.DataFrame:
    """Return what the method reads, one row for each row of the ``file``, with its ``line``."""
    if table is None or table.setup.method == "direct":
        return pd.DataFrame()
    return pd.DataFrame(
        {
            "run": pd.Series(rows.labels, dtype=object),
            "file": rows.columns.cells.file,
            "line": rows.lines,
            **{name: rows.columns.values(name) for name in table.column_names},
            **{
                name: rows.columns.values(name)
                for name in (table.gauges.columns if table.gauges is not None else ())
                if name in rows.columns
            },
        }
    )


def with_flow_columns(runs: pd.DataFrame, rows: Rows) -> pd.DataFrame:
    """Add ``flow_start``, ``flow_end`` (m³/s, means of the repeats) and ``direction`` where the file has them."""
    code = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    added: dict[str, Any] = {}
    if "flow start" in rows.columns and "flow end" in rows.columns:
        for name in ("flow start", "flow end"):
            values = rows.columns.values(name)
            taken = np.isfinite(values)
            count = np.bincount(code[taken], minlength=len(runs))
            total = np.bincount(code[taken], weights=values[taken], minlength=len(runs))
            with np.errstate(invalid="ignore", divide="ignore"):
                added[name.replace(" ", "_")] = total / count
    if "direction" in rows.columns:
        said: list[str | None] = [None] * len(runs)
        for run, cell in zip(code.tolist(), rows.columns.raw("direction"), strict=True):
            said[run] = cell or said[run]
        added["direction"] = pd.Series(said, dtype=object)
    return runs.assign(**added) if added else runs
