"""Whether the times of a logger's file ever run backwards, and where."""

from __future__ import annotations

import csv
import math
from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np

from gradeline.loader.ledger import Ledger
from gradeline.loader.logger.blocks import Blocks, Table
from gradeline.loader.logger.digest import first_backwards

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

__all__ = ["check_order", "time_reader"]

#: A file up to this size is looked through row by row, bytes; of a larger one a block of rows at a time.
_SMALL = 64_000_000
_REMEDY = "time must not run backwards: mend the clock's change (summer time, a restart), or make a survey of each part"


def time_reader(table: Table) -> Callable[[bytes], float]:
    """Return what gives the time in a line of a csv file, s; NaN where it has none."""
    mark = table.head.separator
    place, form = table.time, table.form

    def time_of(line: bytes) -> float:
        text = line.decode("utf-8", "replace").strip("\r\n")
        plain = '"' not in text
        cells = text.split(mark, place + 1) if plain else next(csv.reader([text], delimiter=mark), [])
        return form.seconds(cells[place]) if len(cells) > place else math.nan

    return time_of


def check_order(
    ledger: Ledger,
    connection: DuckDBPyConnection,
    table: Table,
    blocks: Blocks,
    interval: float,
    *,
    rising: bool,
) -> None:
    """Note the first row whose time is before that of the row above.

    A csv file above 64 MB is looked through row by row where anything speaks for it: a block with more rows than its
    span has room for, rows 1 MB apart out of order, a first time that is not the first. Rows changed about within one
    block leave its mean as it is.

    Parameters
    ----------
    ledger : Ledger
        Takes the problem.
    connection : DuckDBPyConnection
        The engine.
    table : Table
        The file.
    blocks : Blocks
        What was read of it.
    interval : float
        Between two samples, s.
    rising : bool
        Whether rows taken here and there are in order.
    """
    head = table.head
    room = (blocks.last - blocks.first) / interval + 2.5
    crowded = bool((blocks.rows > 1.02 * room).any())
    early = bool(len(blocks.first) and blocks.first.min() < 0)
    if not head.parquet and head.size > _SMALL and rising and not crowded and not early:
        return
    source = table.source([table.time], careful=not head.parquet, name="order_faults")
    number = ", file_row_number AS r" if head.parquet else ""
    order = " ORDER BY r LIMIT 1" if head.parquet else ""
    chosen = "r, t, p" if head.parquet else "count(*)"
    where = "OVER (ORDER BY file_row_number)" if head.parquet else "OVER ()"
    rows = connection.execute(
        f"SELECT {chosen} FROM (SELECT t{', r' if head.parquet else ''}, lag(t) {where.replace('file_row_number', 'r')} AS p "
        f"FROM (SELECT {table.seconds(careful=True)} AS t{number} FROM {source}) WHERE t IS NOT NULL) WHERE t < p{order}"
    ).fetchall()
    if head.parquet:
        if rows:
            _note(ledger, table, int(rows[0][0]) + 1, float(rows[0][1]), float(rows[0][2]), int(rows[0][0]))
        return
    if not rows[0][0]:
        return
    time_of = time_reader(table)
    found = first_backwards(head.path, head.heading_line, time_of)
    if found is None:
        return
    line, before = found
    texts = _lines(table, (before, line))
    at, earlier = (time_of(texts[one]) - table.begin for one in (line, before))
    _note(ledger, table, line, at, earlier, before)


def _lines(table: Table, wanted: tuple[int, int]) -> dict[int, bytes]:
    with table.head.path.open("rb") as stream:
        return {
            line: text
            for line, text in zip(range(1, max(wanted) + 1), stream, strict=False)
            if line in wanted
        }


def _note(ledger: Ledger, table: Table, line: int, at: float, earlier: float, before: int) -> None:
    from gradeline.loader.logger.clock import clock_from  # noqa: PLC0415 (only for a problem)

    first = next(
        row[table.time] for row in table.head.rows if np.isfinite(table.form.seconds(row[table.time]))
    )
    clock = clock_from(table.form, first)
    ledger.problem(
        table.head.file,
        line,
        table.head.headings[table.time].text,
        f"{clock.told(at)} comes after {clock.told(earlier)} in row {before}; {_REMEDY}",
    )
