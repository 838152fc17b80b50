"""Many surveys in one table: a row for each survey and wall."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from types import MappingProxyType
from typing import Any

from gradeline.errors import UsageError
from gradeline.reduction.columns import METRES, NUMBER, TEXT, TRUTH, Column, number
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import records
from gradeline.report.record import csv_of

__all__ = ["SUMMARY_COLUMNS", "failed_row", "summary_csv", "summary_parquet", "summary_rows"]

#: The columns of the summary, in order, SI units; a missing value is an empty cell in csv and null in parquet.
SUMMARY_COLUMNS: Mapping[str, Column] = MappingProxyType(
    {
        "survey": TEXT,
        "title": TEXT,
        "date": TEXT,
        "wall": TEXT,
        "diameter": METRES,
        "runs": NUMBER,
        "runs_used": NUMBER,
        "slope_least": NUMBER,
        "slope_greatest": NUMBER,
        "reynolds": NUMBER,
        "velocity": number("m/s"),
        "friction_factor": NUMBER,
        "friction_factor_u": NUMBER,
        "roughness": METRES,
        "roughness_low": METRES,
        "roughness_high": METRES,
        "roughness_upper95": METRES,
        "roughness_resolved": TRUTH,
        "flags": NUMBER,
        "cautions": NUMBER,
        "exit_code": NUMBER,
        "reason": TEXT,
        "problem": TEXT,
    }
)
#: Numbers that count something.
_COUNTS = frozenset({"runs", "runs_used", "flags", "cautions", "exit_code"})


def summary_rows(reduction: Reduction, survey: str) -> tuple[Mapping[str, Any], ...]:
    """Return what the summary says of a survey: a row for each wall, one without a wall where there is none.

    Parameters
    ----------
    reduction : Reduction
        What was reduced.
    survey : str
        What the survey is called.

    Returns
    -------
    tuple of mapping
        Keys of `SUMMARY_COLUMNS`; plain values, None where missing. S is the least and the greatest of the flowing runs on
        the wall's reaches; Re, V, f, u(f) and the bore are those of the run of the highest Re among those that have f;
        runs, flags and cautions are counted over the whole survey.
    """
    of_walls = dict(zip(*_lists(reduction.reaches, "reach", "wall"), strict=True))
    bores = dict(zip(*_lists(reduction.reaches, "reach", "diameter"), strict=True))
    flowing = [row for row in records(reduction.runs) if row["regime"] != "static"]
    common = {
        "survey": survey,
        "title": _text(reduction.survey.get("title")),
        "date": _text(reduction.survey.get("date")),
        "runs": len({row["run"] for row in flowing}),
        "flags": len(reduction.flags),
        "cautions": len(reduction.cautions),
        "exit_code": 0,
    }
    rows = []
    for wall in records(reduction.walls):
        mine = [row for row in flowing if of_walls.get(row["reach"]) == wall["wall"]]
        slopes = [row["slope"] for row in mine if row["slope"] is not None]
        told = [row for row in mine if row["friction_factor"] is not None]
        fastest = max(told, key=lambda row: row["reynolds"] or 0.0, default={})
        reaches = [reach for reach, name in of_walls.items() if name == wall["wall"]]
        rows.append(
            _row(
                {name: wall[name] for name in wall if name in SUMMARY_COLUMNS},
                common,
                {name: fastest.get(name) for name in _OF_FASTEST},
                {
                    "diameter": bores.get(fastest.get("reach", reaches[0] if reaches else None)),
                    "slope_least": min(slopes, default=None),
                    "slope_greatest": max(slopes, default=None),
                },
            )
        )
    return tuple(rows) or (_row(common),)


_OF_FASTEST = ("reynolds", "velocity", "friction_factor", "friction_factor_u")


def failed_row(survey: str, code: int, problem: str) -> Mapping[str, Any]:
    """Return what the summary says of a survey that was not reduced.

    Parameters
    ----------
    survey : str
        What it is called.
    code : int
        Its exit code.
    problem : str
        Why.

    Examples
    --------
    >>> row = failed_row("bench_4", 3, "taps.csv: the file is missing; add it")
    >>> {name: value for name, value in row.items() if value is not None}
    {'survey': 'bench_4', 'exit_code': 3, 'problem': 'taps.csv: the file is missing; add it'}
    """
    return _row({"survey": survey, "exit_code": code, "problem": problem})


def summary_csv(rows: Iterable[Mapping[str, Any]]) -> bytes:
    r"""Return the summary as csv.

    Parameters
    ----------
    rows : iterable of mapping
        As `summary_rows` and `failed_row` give them.

    Returns
    -------
    bytes
        UTF-8, ``\n`` line ends. A text that a spreadsheet could take for a formula (it begins with ``= + - @`` and is no
        number) gets a leading apostrophe.
    """
    return csv_of(SUMMARY_COLUMNS, rows)


def summary_parquet(rows: Sequence[Mapping[str, Any]]) -> bytes:
    """Return the summary as parquet; texts stand as they are, each field's metadata names its unit.

    Parameters
    ----------
    rows : sequence of mapping
        As `summary_rows` and `failed_row` give them.

    Raises
    ------
    UsageError
        Where pyarrow is not installed.
    """
    try:
        import pyarrow as pa  # noqa: PLC0415 (an extra)
        from pyarrow import parquet  # noqa: PLC0415 (an extra)
    except ImportError:
        raise UsageError(
            "--summary: a parquet file needs pyarrow, which is not installed; run pip install 'gradeline[parquet]', or name "
            "a .csv file"
        ) from None
    kinds = {"text": pa.string(), "truth": pa.bool_(), "number": pa.float64()}
    schema = pa.schema(
        [
            pa.field(
                name,
                pa.int64() if name in _COUNTS else kinds[column.kind],
                metadata={"unit": column.unit} if column.unit else None,
            )
            for name, column in SUMMARY_COLUMNS.items()
        ]
    )
    plain = [{name: _sound(value) for name, value in row.items()} for row in rows]
    sink = pa.BufferOutputStream()
    parquet.write_table(pa.Table.from_pylist(plain, schema=schema), sink)
    return bytes(sink.getvalue())


def _row(*parts: Mapping[str, Any]) -> dict[str, Any]:
    """A row with exactly the columns of the summary."""
    values = {name: value for part in parts for name, value in part.items()}
    return {name: _plain(name, values.get(name)) for name in SUMMARY_COLUMNS}


def _plain(name: str, value: Any) -> Any:
    kind = SUMMARY_COLUMNS[name].kind
    if value is None or (kind == "number" and not math.isfinite(value)):
        return None
    if kind == "text":
        return str(value)
    return bool(value) if kind == "truth" else int(value) if name in _COUNTS else float(value)


def _sound(value: Any) -> Any:
    """A file name that was not UTF-8 holds surrogates, which parquet cannot carry."""
    return value.encode("utf-8", "backslashreplace").decode() if isinstance(value, str) else value


def _text(value: object) -> str | None:
    return None if value in (None, "") else str(value)


def _lists(table: Any, *names: str) -> tuple[list[Any], ...]:
    return tuple(table[name].tolist() for name in names)
