"""The temperatures of the runs: one a run, or one at its start and one at its end."""

from __future__ import annotations

import numpy as np
import pandas as pd

from gradeline.loader.columns import Columns, Known
from gradeline.loader.fluids import TemperatureRule
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import Rows

__all__ = ["TEMPERATURE_COLUMNS", "check_temperatures", "temperature_of_rows", "with_temperature_u"]

_ENDS = ("temperature start", "temperature end")
_REMEDY = "give the temperature of the fluid"
#: The columns that a table of runs may have.
TEMPERATURE_COLUMNS = {name: Known(("temperature",), remedy=_REMEDY) for name in ("temperature", *_ENDS)}
_ZERO_CELSIUS, _BOILING = 273.15, 373.15


def temperature_of_rows(ledger: Ledger, columns: Columns) -> np.ndarray:
    """Return the temperature of each row, K: as given, or the mean of start and end."""
    ends = [name for name in _ENDS if name in columns]
    if not ends:
        return columns.values("temperature")
    cells = columns.cells
    if "temperature" in columns:
        heading = next(heading.text for heading in cells.headings if heading.name == ends[0])
        ledger.problem(
            cells.file,
            cells.heading_line,
            heading,
            "a column 'temperature' is there as well; keep either it or 'temperature start' and 'temperature end'",
        )
    elif len(ends) == 1:
        missing = next(name for name in _ENDS if name not in ends)
        ledger.problem(
            cells.file,
            cells.heading_line,
            None,
            f"the column '{missing} [degC]' is missing beside '{ends[0]}'; add it, or head that column 'temperature'",
        )
    return np.asarray(0.5 * (columns.values(_ENDS[0]) + columns.values(_ENDS[1])))


def check_temperatures(
    ledger: Ledger, rows: Rows, *, is_water: bool | None, rule: TemperatureRule | None
) -> None:
    """Note temperatures that are missing, or at which the properties of the fluid are not known."""
    columns = rows.columns
    present = [name for name in TEMPERATURE_COLUMNS if name in columns]
    why = "water has its density and viscosity from" if is_water else None
    if not present:
        missing = not set(columns.misnamed) & set(TEMPERATURE_COLUMNS)
        if missing and (why is not None or rule is not None):
            because = f"{why} it" if why is not None else rule.why if rule is not None else ""
            ledger.problem(
                columns.cells.file,
                columns.cells.heading_line,
                None,
                f"the column 'temperature [degC]' is missing; {because}",
            )
        return
    for name in present:
        raw, values, unit = columns.raw(name), columns.values(name), columns.units[name]
        if why is not None or rule is not None:
            because = f"{why} the temperature" if why is not None else rule.why if rule is not None else ""
            for row in [row for row, cell in enumerate(raw) if not cell]:
                columns.problem(row, name, f"the cell is empty; {because}")
        if is_water:
            outside = (values <= _ZERO_CELSIUS) | (values > _BOILING)
            where = "does not lie above 0 degC and up to 100 degC, where water is a liquid; mend the value or the unit"
        elif rule is not None:
            outside, where = (values < rule.low) | (values > rule.high), rule.where
        else:
            outside, where = values <= 0, "lies below absolute zero; mend the value or the unit"
        for row in np.flatnonzero(outside).tolist():
            columns.problem(row, name, f"{raw[row]} {unit.text if unit else ''} {where}")


def with_temperature_u(ledger: Ledger, runs: pd.DataFrame, rows: Rows) -> pd.DataFrame:
    """Add ``temperature_u`` (K) where a run has two temperatures: between them it may have been any (JCGM 100, 4.3.7)."""
    if not all(name in rows.columns for name in _ENDS):
        return runs
    change = rows.columns.values(_ENDS[1]) - rows.columns.values(_ENDS[0])
    half = 0.5 * np.abs(change)
    code = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    mean = np.bincount(code, weights=np.nan_to_num(half), minlength=len(runs)) / np.bincount(
        code, minlength=len(runs)
    )
    if len(mean):
        largest = int(mean.argmax())
        ledger.assumptions.append(
            "The temperature of a run is the mean of those at its start and its end. Half their difference (at most "
            f"{mean[largest]:.2g} K, in run {runs['run'].iloc[largest]}) over √3, as of a rectangular distribution, is in the "
            "uncertainty of the run's own temperature."
        )
    return runs.assign(temperature_u=mean / np.sqrt(3.0))
