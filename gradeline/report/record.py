"""The record for machines: ``reduction.json`` and one csv file a table, in SI units."""

from __future__ import annotations

import csv
import io
import json
import math
import re
from typing import Any

import pandas as pd

from gradeline.reduction.tables import RESULT_TABLES, Column, Reduction
from gradeline.report.printed import records

__all__ = ["as_csv", "as_json", "carried_json", "guarded", "table_rows"]

#: Numbers that count something are written without a decimal point.
_COUNTS = frozenset({"slope_dof", "observations_used", "runs_used"})
_PLAIN_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


def as_json(reduction: Reduction, version: str) -> bytes:
    """Return ``reduction.json``: survey, assumptions, cautions and the result tables, one row a line.

    Parameters
    ----------
    reduction : Reduction
        What is written; SI units.
    version : str
        Of the program.

    Returns
    -------
    bytes
        UTF-8. A missing value is null; NaN and Infinity never occur.
    """
    parts: dict[str, str] = {
        "gradeline": _dump(version),
        "survey": _dump(_jsonable(dict(reduction.survey))),
        "assumptions": _dump(list(reduction.assumptions)),
        "cautions": _dump(list(reduction.cautions)),
    }
    for table in RESULT_TABLES:
        rows = [_dump(row) for row in table_rows(table, getattr(reduction, table))]
        parts[table] = "[\n  " + ",\n  ".join(rows) + "\n ]" if rows else "[]"
    text = "{\n " + ",\n ".join(f'"{key}": {value}' for key, value in parts.items()) + "\n}\n"
    # a file name that was not UTF-8 holds surrogates, which JSON may carry as \udcXX
    return text.encode("utf-8", errors="backslashreplace")


def carried_json(reduction: Reduction) -> bytes:
    """Return ``carried.json``: what a prediction needs beside the tables, keys in alphabetical order, a list a line.

    Parameters
    ----------
    reduction : Reduction
        What is written; SI units.

    Returns
    -------
    bytes
        UTF-8. A missing value is null; NaN and Infinity never occur.
    """
    parts = []
    for key, value in sorted(reduction.carried.items()):
        if isinstance(value, list) and value:
            rows = ",\n  ".join(
                json.dumps(one, ensure_ascii=False, allow_nan=False, sort_keys=True) for one in value
            )
            parts.append(f"{_dump(key)}: [\n  {rows}\n ]")
        else:
            parts.append(
                f"{_dump(key)}: {json.dumps(value, ensure_ascii=False, allow_nan=False, sort_keys=True)}"
            )
    text = "{\n " + ",\n ".join(parts) + "\n}\n"
    return text.encode("utf-8", errors="backslashreplace")


def as_csv(reduction: Reduction, table: str) -> bytes:
    r"""Return a result table as csv: a heading row of the keys, SI units, empty cells for missing values.

    Parameters
    ----------
    reduction : Reduction
        What is written.
    table : str
        A key of ``RESULT_TABLES``.

    Returns
    -------
    bytes
        UTF-8 with ``\n`` line ends. A text cell that a spreadsheet could take for a formula (it begins with
        ``= + - @`` and is no number) gets a leading apostrophe.
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    columns = RESULT_TABLES[table]
    writer.writerow(columns)
    for row in table_rows(table, getattr(reduction, table)):
        writer.writerow([_cell(row[name], column) for name, column in columns.items()])
    return out.getvalue().encode("utf-8", errors="backslashreplace")


def _dump(value: object) -> str:
    return json.dumps(value, ensure_ascii=False, allow_nan=False)


def table_rows(table: str, data: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a result table with exactly its keys, values of plain Python types, None where missing."""
    columns = RESULT_TABLES[table]
    return [
        {name: _value(row[name], column, count=name in _COUNTS) for name, column in columns.items()}
        for row in records(data[list(columns)])
    ]


def _value(value: Any, column: Column, *, count: bool) -> Any:
    if value is None:
        return None
    if column.kind == "truth":
        return bool(value)
    if column.kind == "text":
        return str(value)
    number = float(value)
    if not math.isfinite(number):
        return None
    return int(number) if count and number.is_integer() else number


def _jsonable(value: Any) -> Any:
    """A value of the survey's description as JSON can hold it."""
    if isinstance(value, dict) or hasattr(value, "items"):
        return {str(key): _jsonable(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_jsonable(item) for item in value]
    if value is None or isinstance(value, (bool, int, str)):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    return str(value)


def _cell(value: Any, column: Column) -> str:
    if value is None:
        return ""
    if column.kind == "truth":
        return "true" if value else "false"
    if column.kind == "number":
        return repr(value)
    # a bare carriage return would end the row
    return guarded(str(value).replace("\r\n", "\n").replace("\r", "\n"))


def guarded(text: str) -> str:
    """Return a text that no spreadsheet takes for a formula: a leading apostrophe where it could, but for numbers.

    Examples
    --------
    >>> guarded("=2+3"), guarded("-5"), guarded("wall")
    ("'=2+3", '-5', 'wall')
    """
    # tab and line end count too: spreadsheets skip them and see what follows
    if text[:1] in ("=", "+", "-", "@", "\t", "\n") and not _PLAIN_NUMBER.fullmatch(text):
        return "'" + text
    return text
