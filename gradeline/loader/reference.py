"""A reference gauge read beside every reading: its change during a run is taken out of the others."""

from __future__ import annotations

import numpy as np

from gradeline.loader.columns import Columns

__all__ = ["reference_change"]


def reference_change(
    columns: Columns, run_labels: list[str], given: np.ndarray, dimension: str | None
) -> np.ndarray:
    """Return what the reference gauge read above its mean of the run beside each reading, SI.

    Parameters
    ----------
    columns : Columns
        The table of readings, with a column ``reference`` or without.
    run_labels : list of str
        The run of each row.
    given : (n,) bool array
        Rows with a reading.
    dimension : str or None
        What the readings are, ``"length"`` or ``"pressure"``; None where they are not all of one kind.

    Returns
    -------
    (n,) array
        Zeros where there is no such column; NaN where a row has none, with a problem noted.
    """
    unit = columns.units.get("reference")
    if unit is None:
        return np.zeros(len(run_labels))
    values, raw = columns.values("reference"), columns.raw("reference")
    for row in np.flatnonzero(given).tolist():
        if not raw[row]:
            columns.problem(
                row, "reference", "the cell is empty; read the reference gauge beside every reading"
            )
    if dimension != unit.dimension:
        heading = "reference"
        columns.problem(
            0,
            heading,
            f"the reference gauge reads a {unit.dimension}, and not all the others do; its change can be taken out of readings "
            "of its own kind only",
        )
        return np.zeros(len(run_labels))
    runs = np.array(run_labels, dtype=object)
    change = np.full(len(runs), np.nan)
    for run in dict.fromkeys(run_labels):
        mine = (runs == run) & given & np.isfinite(values)
        if mine.any():
            change[mine] = values[mine] - values[mine].mean()
    return change
