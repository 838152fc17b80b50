"""One pass over a logger's file: counts, sums and extremes of every block."""

from __future__ import annotations

import csv
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gradeline.loader.logger.clock import TimeForm
from gradeline.loader.logger.engine import Progress, fetched, quoted
from gradeline.loader.logger.head import LONGEST_LINE, Head

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

__all__ = ["Blocks", "Channel", "Reject", "Table", "read_blocks"]

Array = NDArray[np.float64]

#: Texts that stand for a value that was not taken; in the quick pass an empty cell alone, as a list of them costs a fifth.
MISSING = ("", "NaN", "nan", "NAN", "NA", "N/A", "n/a", "null", "NULL", "-")
#: A number beyond this is none.
_TOO_LARGE = 1e100
#: Rows at fault that are kept, to tell the first ones.
_KEPT = 1000
#: Rows that fail in a column by itself; the others fail as a whole.
_OF_A_CELL = "CAST"
_GRID_BITS = 40


@dataclass(frozen=True)
class Channel:
    """A column to be read, or the difference of two.

    Parameters
    ----------
    parts : tuple of (int, float)
        Places of the columns in the file with the factor of each; a difference in SI, a single column as it is.
    origin : float
        A usual value, which sums of squares are taken about.
    size : float
        A usual size of departures and values, above 0.
    """

    parts: tuple[tuple[int, float], ...]
    origin: float
    size: float


@dataclass(frozen=True)
class Reject:
    """A row, or a cell of it, that could not be read."""

    line: int
    column: int
    cell: str
    whole_row: bool


@dataclass(frozen=True)
class Blocks:
    """B blocks of C channels, in the units of the channels.

    Parameters
    ----------
    key : (B,) int array
        Rising.
    rows : (B,) array
        Rows of the file, whatever they hold.
    first, last : (B,) array
        Time of the first and the last sample, s.
    count, mean, low, high, squares : (B, C) array
        As in `gradeline.survey.Record`.
    bad : (C,) array
        Cells that are no numbers.
    timeless : int
        Rows whose time cannot be read.
    rejects : tuple of Reject
        The first rows at fault.
    """

    key: NDArray[np.intp]
    rows: Array
    first: Array
    last: Array
    count: Array
    mean: Array
    low: Array
    high: Array
    squares: Array
    bad: Array
    timeless: int
    rejects: tuple[Reject, ...]


@dataclass(frozen=True)
class Table:
    """A file as the engine reads it.

    Parameters
    ----------
    head : Head
        What the file looks like.
    path : str
        Where the engine finds it.
    time : int
        Place of the time column.
    form : TimeForm
        How it tells time.
    begin : float
        The first time, s.
    zoned : bool
        Whether timestamps have an offset from UTC.
    """

    head: Head
    path: str
    time: int
    form: TimeForm
    begin: float
    zoned: bool = False

    def source(self, columns: Sequence[int], *, careful: bool = False, name: str = "faults") -> str:
        """Return what stands for the file in a query; `careful`: cells come as text."""
        if self.head.parquet:
            return f"read_parquet({quoted(self.path)}, file_row_number = true)"
        wanted = set(columns)
        kinds = ", ".join(
            f"'c{place}': '{'DOUBLE' if place in wanted and not careful else 'VARCHAR'}'"
            for place in range(len(self.head.headings))
        )
        if self.form.unit is None and not careful:
            kinds = kinds.replace(f"'c{self.time}': 'DOUBLE'", f"'c{self.time}': '{self.stamp}'")
        comma = ", decimal_separator = ','" if self.head.comma and not careful else ""
        return (
            f"read_csv({quoted(self.path)}, columns = {{{kinds}}}, auto_detect = false, header = false, "
            f"skip = {self.head.heading_line}, delim = {quoted(self.head.separator)}, "
            f"nullstr = '', max_line_size = {LONGEST_LINE}, ignore_errors = true, store_rejects = true, "
            f"rejects_table = '{name}', rejects_scan = '{name}_scan', rejects_limit = {_KEPT}{comma})"
        )

    @property
    def stamp(self) -> str:
        """The engine's type of a timestamp; the one without a zone takes no notice of an offset."""
        return "TIMESTAMPTZ" if self.zoned else "TIMESTAMP"

    def raw(self, place: int) -> str:
        """Return the name of a column in a query."""
        return quoted(self.head.headings[place].text, '"') if self.head.parquet else f"c{place}"

    def number(self, place: int, *, careful: bool) -> str:
        """Return a column as a number; `careful`: what is none, or none to be meant, is missing."""
        name = self.raw(place)
        if not careful:
            return name
        text = f"trim(CAST({name} AS VARCHAR))" if self._is_text(place) else name
        if self.head.comma:
            text = f"replace({text}, ',', '.')"
        value = f"TRY_CAST({text} AS DOUBLE)"
        return f"CASE WHEN abs({value}) < {_TOO_LARGE!r} THEN {value} END"

    def is_bad(self, place: int) -> str:
        """Return whether a cell holds something that is no number, from its raw and its careful value."""
        name = self.raw(place)
        empty = ", ".join(quoted(one) for one in MISSING)
        if not self._is_text(place):
            return f"({name} IS NOT NULL AND NOT isnan(CAST({name} AS DOUBLE)) AND ({self.number(place, careful=True)}) IS NULL)"
        return f"({name} IS NOT NULL AND trim({name}) NOT IN ({empty}) AND ({self.number(place, careful=True)}) IS NULL)"

    def seconds(self, *, careful: bool) -> str:
        """Return the time of a row, s from the beginning of the record."""
        name = self.raw(self.time)
        if self.form.unit is None:
            # ISO 8601 sets decimals of a second off by a comma or a point; the engine knows the point alone
            text = f"replace({name}, ',', '.')" if self._is_text(self.time) else name
            stamp = f"TRY_CAST({text} AS {self.stamp})" if careful else name
            return f"epoch_us({stamp}) / 1e6 - {self.begin!r}::DOUBLE"
        unit = self.form.unit
        return (
            f"({self.number(self.time, careful=careful)}) * {unit.factor / unit.divisor!r}::DOUBLE - "
            f"{self.begin!r}::DOUBLE"
        )

    def _is_text(self, place: int) -> bool:
        return not self.head.parquet or self.head.types[place] == "VARCHAR"


def read_blocks(
    connection: DuckDBPyConnection,
    table: Table,
    channels: Sequence[Channel],
    key: str,
    progress: Progress | None = None,
) -> Blocks:
    """Read a file once; once more, cell by cell, where any cell of it is no number.

    Parameters
    ----------
    connection : DuckDBPyConnection
        The engine.
    table : Table
        The file.
    channels : sequence of Channel
        What to read.
    key : str
        What gives a sample's block (`gradeline.loader.logger.grid.key_query`).
    progress : callable or None
        Is told the share of the file that was read.

    Returns
    -------
    Blocks
        The same numbers to the last digit whatever the number of cores: single departures are rounded to a grid so fine
        that it does not show (2⁻⁴⁰ of the channel's size), and sums on a grid are exact in any order.
    """
    if table.head.parquet:
        return _pass(connection, table, channels, key, careful=True, rejects=(), progress=progress)
    found = _pass(connection, table, channels, key, careful=False, rejects=(), progress=progress)
    rejects = _rejects(connection, "faults", table.head)
    strange = any(not one.whole_row for one in rejects) or not all(
        np.isfinite(values[found.count > 0]).all() for values in (found.mean, found.low, found.high)
    )
    if not strange:
        return _with(found, rejects)
    again = _pass(connection, table, channels, key, careful=True, rejects=(), progress=progress)
    whole = _rejects(connection, "faults_again", table.head)
    return _with(again, (*(one for one in rejects if not one.whole_row), *whole))


def _with(found: Blocks, rejects: tuple[Reject, ...]) -> Blocks:
    return replace(found, rejects=rejects)


def _pass(
    connection: DuckDBPyConnection,
    table: Table,
    channels: Sequence[Channel],
    key: str,
    *,
    careful: bool,
    rejects: tuple[Reject, ...],
    progress: Progress | None,
) -> Blocks:
    places = sorted({place for channel in channels for place, _ in channel.parts})
    values = [
        " + ".join(
            f"({table.number(place, careful=careful)})"
            + ("" if len(one.parts) == 1 else f" * {factor!r}::DOUBLE")
            for place, factor in one.parts
        )
        for one in channels
    ]
    inner = [f"{table.seconds(careful=careful)} AS t"]
    inner += [f"{value} AS v{k}" for k, value in enumerate(values)]
    if careful:  # the least of nothing and a number is the number, to the engine
        key = f"CASE WHEN t IS NOT NULL THEN {key} END"
    outer = [f"{key} AS k", "count(*) AS rows", "min(t) AS first", "max(t) AS last"]
    if careful:
        for k, one in enumerate(channels):
            bad = " OR ".join(table.is_bad(place) for place, _ in one.parts)
            inner.append(f"{bad} AS bad{k}")
            outer.append(f"count_if(bad{k}) AS bad{k}")
    for k, one in enumerate(channels):
        away = f"(v{k} - {one.origin!r}::DOUBLE)"
        outer += [
            f"count(v{k}) AS n{k}",
            f"sum({_on_grid(away, one.size)}) AS s{k}",
            f"sum({_on_grid(f'{away} * {away}', one.size**2)}) AS q{k}",
            f"min(v{k}) AS low{k}",
            f"max(v{k}) AS high{k}",
        ]
    source = table.source(
        [*places, table.time], careful=careful, name="faults_again" if careful else "faults"
    )
    query = f"SELECT {', '.join(outer)} FROM (SELECT {', '.join(inner)} FROM {source}) GROUP BY k"
    return _blocks(fetched(connection, query, progress), channels, careful=careful, rejects=rejects)


def _on_grid(value: str, size: float) -> str:
    """A value rounded to a multiple of a power of 2, by adding and taking off a number that has no finer digits."""
    step = 2.0 ** (math.frexp(size)[1] - _GRID_BITS)
    shift = 1.5 * 2.0**52 * step
    return f"({value} + {shift!r}::DOUBLE) - {shift!r}::DOUBLE"


def _blocks(
    found: Mapping[str, Any], channels: Sequence[Channel], *, careful: bool, rejects: tuple[Reject, ...]
) -> Blocks:
    key = np.ma.asarray(found["k"])
    known = ~np.ma.getmaskarray(key)
    order = np.flatnonzero(known)[np.argsort(np.ma.getdata(key)[known], kind="stable")]
    n = len(channels)

    def plain(name: str) -> Array:
        return np.ma.filled(np.ma.asarray(found[name]).astype(np.float64), np.nan)

    def all_of(letter: str) -> Array:
        if not n:
            return np.zeros((len(order), 0))
        return np.column_stack([plain(f"{letter}{k}") for k in range(n)])[order]

    count = np.nan_to_num(all_of("n"))
    origin = np.array([one.origin for one in channels])
    sums, squares = all_of("s"), all_of("q")
    with np.errstate(invalid="ignore", divide="ignore"):
        away = np.where(count > 0, sums / count, np.nan)
        around = np.where(count > 0, np.maximum(squares - count * away**2, 0.0), 0.0)
    low, high = all_of("low"), all_of("high")
    same = (low == high) & (count > 0)
    return Blocks(
        key=np.ma.getdata(key)[order].astype(np.intp),
        rows=plain("rows")[order],
        first=plain("first")[order],
        last=plain("last")[order],
        count=count,
        mean=np.where(same, low, origin + away),
        low=low,
        high=high,
        squares=np.where(same, 0.0, around),
        bad=np.array([np.nansum(plain(f"bad{k}")) for k in range(n)]) if careful else np.zeros(n),
        timeless=int(plain("rows")[~known].sum()),
        rejects=rejects,
    )


def _rejects(connection: DuckDBPyConnection, name: str, head: Head) -> tuple[Reject, ...]:
    rows = connection.execute(
        f"SELECT line, column_idx, csv_line, CAST(error_type AS VARCHAR) FROM {name} ORDER BY line, column_idx"
    ).fetchall()
    found: list[Reject] = []
    for line, column, text, kind in rows:
        cells = next(csv.reader([str(text or "").strip("\r\n")], delimiter=head.separator), [])
        place = int(column or 0) - 1
        cell = cells[place].strip() if 0 <= place < len(cells) else ""
        found.append(Reject(int(line), place, cell, kind != _OF_A_CELL))
    return tuple(found)
