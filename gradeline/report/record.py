"""The record for machines: ``reduction.json`` and one csv file a table, in SI units."""

from __future__ import annotations

import csv
import io
import json
import math
import re
from collections.abc import Collection, Iterable, Mapping
from typing import Any

import pandas as pd

from gradeline.reduction.tables import RECORD_TABLES, RESULT_TABLES, Column, Reduction
from gradeline.report.printed import columns_of

__all__ = [
    "as_csv",
    "as_json",
    "carried_json",
    "csv_of",
    "guarded",
    "json_of",
    "jsonable",
    "result_rows",
    "rows_of",
    "table_rows",
    "tables_of",
]

#: Numbers that count something are written without a decimal point.
_COUNTS = frozenset({"slope_dof", "observations_used", "runs_used", "samples"})
_ENCODER = json.JSONEncoder(ensure_ascii=False, allow_nan=False)
_PLAIN_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


_Rows = Mapping[str, list[dict[str, Any]]]


def as_json(reduction: Reduction, version: str, *, rows: _Rows | None = None) -> bytes:
    """Return ``reduction.json``: survey, assumptions, cautions and the result tables, one row a line.

    Parameters
    ----------
    reduction : Reduction
        What is written; SI units.
    version : str
        Of the program.
    rows : mapping, optional
        Its `result_rows`, where they are there already.

    Returns
    -------
    bytes
        UTF-8. A missing value is null; NaN and Infinity never occur.
    """
    parts: dict[str, str] = {
        "gradeline": _dump(version),
        "survey": _dump(jsonable(dict(reduction.survey))),
        "assumptions": _dump(list(reduction.assumptions)),
        "cautions": _dump(list(reduction.cautions)),
    }
    for table, found in (result_rows(reduction) if rows is None else rows).items():
        lines = [_dump(row) for row in found]
        parts[table] = "[\n  " + ",\n  ".join(lines) + "\n ]" if lines else "[]"
    text = "{\n " + ",\n ".join(f'"{key}": {value}' for key, value in parts.items()) + "\n}\n"
    # a file name that was not UTF-8 holds surrogates, which JSON may carry as \udcXX
    return text.encode("utf-8", errors="backslashreplace")


def tables_of(reduction: Reduction) -> Mapping[str, Mapping[str, Column]]:
    """Return the tables that are written of a reduction: those of a logger's record only where there is one.

    Parameters
    ----------
    reduction : Reduction
        What is written.
    """
    return {**RESULT_TABLES, **RECORD_TABLES} if reduction.survey.get("record") else RESULT_TABLES


def result_rows(reduction: Reduction) -> _Rows:
    """Return the rows of every table that is written of a reduction, by the table's name, for `as_json` and `as_csv`."""
    return {table: table_rows(table, getattr(reduction, table)) for table in tables_of(reduction)}


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


def as_csv(reduction: Reduction, table: str, *, rows: _Rows | None = None) -> bytes:
    r"""Return a result table as csv: a heading row of the keys, SI units, empty cells for missing values.

    Parameters
    ----------
    reduction : Reduction
        What is written.
    table : str
        A key of ``tables_of``.
    rows : mapping, optional
        The reduction's `result_rows`, where they are there already.

    Returns
    -------
    bytes
        UTF-8 with ``\n`` line ends. A text cell that a spreadsheet could take for a formula (it begins with
        ``= + - @`` and is no number) gets a leading apostrophe.
    """
    found = table_rows(table, getattr(reduction, table)) if rows is None else rows[table]
    return csv_of(tables_of(reduction)[table], found)


def csv_of(columns: Mapping[str, Column], rows: Iterable[Mapping[str, Any]]) -> bytes:
    r"""Return rows as csv: a heading row of the columns' names, empty cells for missing values, UTF-8, ``\n`` line ends.

    Parameters
    ----------
    columns : mapping of str to Column
        In order.
    rows : iterable of mapping
        As `rows_of` has them.

    Examples
    --------
    >>> csv_of({"wall": Column("text"), "roughness": Column("number", "m")}, [{"wall": "=a", "roughness": None}])
    b"wall,roughness\n'=a,\n"
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    for row in rows:
        writer.writerow([_cell(row[name], column) for name, column in columns.items()])
    return out.getvalue().encode("utf-8", errors="backslashreplace")


def json_of(record: Mapping[str, Any]) -> bytes:
    """Return a record as JSON, one value a line, a line end after the last; NaN and Infinity never occur."""
    text = json.dumps(record, ensure_ascii=False, allow_nan=False, indent=1)
    return (text + "\n").encode("utf-8", errors="backslashreplace")


def _dump(value: object) -> str:
    return _ENCODER.encode(value)


def table_rows(table: str, data: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a result table with exactly its keys, values of plain Python types, None where missing."""
    columns = RESULT_TABLES.get(table) or RECORD_TABLES[table]
    return rows_of(columns, data, counts=_COUNTS)


def rows_of(
    columns: Mapping[str, Column], data: pd.DataFrame, *, counts: Collection[str] = ()
) -> list[dict[str, Any]]:
    """Return the rows of a table with exactly these columns, values of plain Python types, None where missing.

    Parameters
    ----------
    columns : mapping of str to Column
        In order.
    data : DataFrame
        With at least those columns.
    counts : collection of str
        Columns whose numbers count something: whole numbers there are of type int.
    """
    found = columns_of(data)
    plain = [_plain(found[name], column, count=name in counts) for name, column in columns.items()]
    return [dict(zip(columns, row, strict=True)) for row in zip(*plain, strict=True)]


def _plain(values: list[Any], column: Column, *, count: bool) -> list[Any]:
    """The values of a column as plain Python types of its kind."""
    if column.kind == "truth":
        return [None if value is None else bool(value) for value in values]
    if column.kind == "text":
        return [None if value is None else str(value) for value in values]
    numbers = [None if value is None or not math.isfinite(value) else float(value) for value in values]
    if count:
        return [int(one) if one is not None and one.is_integer() else one for one in numbers]
    return numbers


def jsonable(value: Any) -> Any:
    """Return a value that stands in no table (a word, a number, several of them) as JSON can hold it."""
    if isinstance(value, dict) or hasattr(value, "items"):
        return {str(key): jsonable(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [jsonable(item) for item in value]
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
