"""The pressure of the gas over the columns of a closed multitube manometer, where it is read in each run."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import pandas as pd

from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.loader.columns import Known
from gradeline.loader.document import NAME, GaugeTable
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import Rows
from gradeline.quantities.phrases import told_once
from gradeline.survey import Gauge

__all__ = ["check_gas", "gas_columns", "known_gas", "unstated_gas", "with_gas", "with_gas_read"]

_REMEDY = "give the pressure of the gas over the columns, or take the column away"
#: A gauge pressure below this is no pressure at all, Pa: the atmosphere is nowhere above 108 kPa.
_BELOW_VACUUM = -108e3


def gas_columns(gauges: Mapping[str, GaugeTable]) -> dict[str, str]:
    """Return the columns of gas pressures that the runs may have, and the gauge of each.

    The only gauge with trapped gas needs no name behind: ``gas_pressure``; of several each has ``gas_pressure NAME``.
    """
    names = [
        gauge.name
        for gauge in gauges.values()
        if gauge.kind is not None and GAUGE_KINDS[gauge.kind].level_key is not None
    ]
    return {"gas_pressure": names[0]} if len(names) == 1 else {f"gas_pressure {name}": name for name in names}


def known_gas(columns: Mapping[str, str]) -> dict[str, Known]:
    """Return what the columns hold."""
    return {name: Known(("pressure",), remedy=_REMEDY) for name in columns}


def check_gas(ledger: Ledger, rows: Rows, gas: Mapping[str, str], gauges: Mapping[str, GaugeTable]) -> None:
    """Note gas pressures that are missing, that cannot be, or that the gauge states as well."""
    for column, name in gas.items():
        if column not in rows.columns:
            continue
        raw, values = rows.columns.raw(column), rows.columns.values(column)
        empty = [row for row, cell in enumerate(raw) if not cell]
        if empty:
            more = f" (and so are {len(empty) - 1} more)" if len(empty) > 1 else ""
            rows.columns.problem(empty[0], column, f"the cell is empty{more}; {_REMEDY}")
        for row in np.flatnonzero(values <= _BELOW_VACUUM).tolist():
            rows.columns.problem(
                row,
                column,
                f"{raw[row]} lies below a vacuum; give the pressure against the local atmosphere, or mend the unit",
            )
        if (gauges[name].values or {}).get("gas_pressure") is not None:
            ledger.problem(
                NAME,
                None,
                f"gauge.{name}.gas_pressure",
                f"{rows.columns.cells.file} has the column {column!r} as well; keep one of the two",
            )


def with_gas(runs: pd.DataFrame, rows: Rows, gas: Mapping[str, str]) -> pd.DataFrame:
    """Add ``gas pressure NAME`` for each gauge whose gas was read, Pa, the mean over the repeats of a run."""
    code = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    count = np.bincount(code, minlength=len(runs))
    added = {
        Gauge.gas_column_of(name): np.bincount(code, weights=rows.columns.values(column), minlength=len(runs))
        / count
        for column, name in gas.items()
        if column in rows.columns
    }
    return runs.assign(**added) if added else runs


def with_gas_read(gauge: Gauge, runs: pd.DataFrame) -> Gauge:
    """Return a gauge that knows whether the gas over its columns was read in each run."""
    return replace(gauge, gas_read=True) if Gauge.gas_column_of(gauge.name) in runs.columns else gauge


def unstated_gas(gauges: tuple[Gauge, ...]) -> list[str]:
    """Return the cautions on gas pressures that were read and whose uncertainty nobody stated."""
    return told_once(
        (
            gauge.name,
            "The uncertainty of the gas pressure of {gauge} (u_gas_pressure) is not stated: it contributes nothing to the "
            "results.",
        )
        for gauge in gauges
        if gauge.gas_read and "u_gas_pressure" not in gauge.settings
    )
