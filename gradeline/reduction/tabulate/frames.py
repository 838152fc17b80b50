"""Tables with exactly the columns that their specification names."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.reduction.tables import DRAWING_TABLES, RECORD_TABLES, RESULT_TABLES, Column

__all__ = ["frame"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Values = Sequence[Any] | NDArray[Any]


def frame(table: str, columns: Mapping[str, Values]) -> pd.DataFrame:
    """Make a table with exactly the columns that its specification names, each of its kind.

    Parameters
    ----------
    table : str
        Name of a table in `RESULT_TABLES`, `RECORD_TABLES` or `DRAWING_TABLES`.
    columns : mapping of str to values
        One sequence a column, all of one length.

    Returns
    -------
    DataFrame
        Numbers as float with NaN, text as object with None, booleans nullable.

    Examples
    --------
    >>> frame("flags", {name: [] for name in RESULT_TABLES["flags"]}).shape
    (0, 7)
    """
    specification = RESULT_TABLES.get(table) or RECORD_TABLES.get(table) or DRAWING_TABLES[table]
    index = pd.RangeIndex(len(columns[next(iter(specification))]))
    return pd.DataFrame(
        {name: _column(columns[name], kind, index) for name, kind in specification.items()}, index=index
    )


def _column(
    values: Values, column: Column, index: pd.RangeIndex
) -> Array | pd.api.extensions.ExtensionArray | pd.Series[Any]:
    # Arrays rather than a Series each: a reduction has some three hundred columns.
    if column.kind == "number":
        return np.asarray(values, dtype=float)
    if column.kind == "truth":
        if isinstance(values, np.ndarray) and values.dtype == bool:
            return pd.arrays.BooleanArray(values, np.zeros(values.shape, dtype=bool))
        return pd.array(list(values), dtype="boolean")
    # A Series, since of an array of objects pandas would make texts of its own kind.
    return pd.Series(
        [None if value is None or value == "" else str(value) for value in values], index, dtype=object
    )
