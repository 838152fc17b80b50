"""A logger's file beside ``survey.toml`` and ``taps.csv``: its record in blocks, and plain means for the checks of the runs."""

from __future__ import annotations

import re
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import ExitStack
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import Problem, QuantityError
from gradeline.loader.cells import Cells, cells_of
from gradeline.loader.delimited import without_marks
from gradeline.loader.document import Document
from gradeline.loader.ledger import Ledger
from gradeline.loader.logger.blocks import Blocks, Table, read_blocks
from gradeline.loader.logger.channels import Kept, kept_columns, number_of
from gradeline.loader.logger.clock import TIME, clock_from, time_form
from gradeline.loader.logger.digest import digest_of
from gradeline.loader.logger.engine import engine, plain_path
from gradeline.loader.logger.faults import gaps_of, state_record, tell_bad_cells
from gradeline.loader.logger.grid import Segment, grid, key_query
from gradeline.loader.logger.head import Head, csv_head, parquet_head
from gradeline.loader.logger.order import check_order, time_reader
from gradeline.loader.logger.settings import LoggerTable
from gradeline.loader.logger.windows import GivenRuns, read_windows
from gradeline.loader.offtakes import Branch
from gradeline.loader.tables import Folder, Source, place_of
from gradeline.loader.taps import TapTable
from gradeline.survey import Clock, Record, SourceFile, Window, still

__all__ = ["FILES", "Logged", "read_logger"]

Array = NDArray[np.float64]

#: Names of a logger's file.
FILES = ("logger.csv", "logger.parquet")
#: Methods whose reading is timed by hand: a record has nothing of them.
_TIMED = frozenset({"volumetric tank", "weighing tank"})
#: Label of the provisional run of a record whose windows are still to be found.
_WHOLE = "1"


@dataclass
class Logged:
    """What a logger's file gave: the source that the runs are read from, and the record, None where it is at fault.

    It stands in the place of the survey's own source: its table of readings has the plain mean of each window.
    """

    inner: Source
    file: str
    cells: Cells | None = None
    record: Record | None = None

    def data(self, ledger: Ledger) -> dict[str, Any] | None:
        """Return what ``survey.toml`` says."""
        return self.inner.data(ledger)

    def table(self, ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
        """Return a table; of the readings that of the means, None where what kept them is told already."""
        return self.cells if name == "readings" else self.inner.table(ledger, name, required=required)

    def place_of(self, ledger: Ledger, name: str) -> str | None:
        """Return what messages call a table; the runs stand in that of the readings."""
        if name == "readings":
            return self.file
        return None if name == "runs" else self.inner.place_of(ledger, name)

    def placed(self, problem: Problem) -> Problem:
        """Return a problem, one of a mean at its run."""
        cells = self.cells
        if cells is None or problem.file != self.file or problem.row not in cells.lines:
            return self.inner.placed(problem)
        labels = cells.columns[0]
        run = labels[cells.lines.index(problem.row)]
        message = re.sub(
            rf"{re.escape(self.file)} row (\d+)",
            lambda found: f"run {labels[cells.lines.index(int(found[1]))]!r}",
            problem.message,
        )
        whole = problem.column in (None, "run")
        column = f"run {run!r}" if whole else f"mean of {problem.column} in run {run!r}"
        return replace(problem, row=None, column=column, message=message)


def read_logger(
    ledger: Ledger,
    document: Document | None,
    taps: TapTable | None,
    branches: Sequence[Branch] = (),
) -> Logged | None:
    """Read the logger's file of a folder, None where there is none.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems; its `progress` is told the share of the file that was read, its `threads` are used.
    document : Document or None
        The line's description.
    taps : TapTable or None
        The taps with the columns of differential gauges.
    branches : sequence of Branch
        The off-takes.

    Returns
    -------
    Logged or None
        With the problems noted.
    """
    inner = ledger.source if ledger.source is not None else Folder()
    if not isinstance(inner, Folder) or ledger.planned:
        return None
    there = [name for name in FILES if (ledger.folder / name).is_file()]
    if not there:
        return None
    logged = Logged(inner, there[0])
    by_hand = place_of(ledger, "readings")
    if by_hand is not None:
        ledger.problem(
            there[0],
            None,
            None,
            f"{by_hand} is there as well; keep the record of the logger or the readings taken by hand, and move the other "
            "to a folder of its own",
        )
    if len(there) > 1:
        ledger.problem(there[1], None, None, f"{there[0]} holds a record as well; keep one of the two files")
    if by_hand is not None or len(there) > 1:
        return logged
    if document is not None and document.flow is not None and document.flow.setup.method in _TIMED:
        ledger.problem(
            "survey.toml",
            None,
            "flow.method",
            f"a {document.flow.setup.method} is read once a run, {there[0]} at every moment; give the method of the meter that "
            "was logged, or the readings in readings.csv",
        )
        return logged
    with ExitStack() as held:
        connection = held.enter_context(engine(ledger.threads))
        path = held.enter_context(plain_path(ledger.folder / there[0]))
        parquet = there[0].endswith(".parquet")
        head = parquet_head(ledger, there[0], connection, path) if parquet else csv_head(ledger, there[0])
        if head is None:
            return logged
        table = _table(ledger, head, path)
        if table is None:
            return logged
        settings = document.logger if document is not None else None
        if document is None or taps is None or settings is None:
            return logged
        import duckdb  # noqa: PLC0415 (loaded when asked for: start-up time)

        try:
            _read(ledger, connection, table, document, settings, taps, branches, logged)
        except duckdb.Error as error:
            logged.cells = None
            said = (str(error).splitlines() or ["damaged"])[0][:160]
            kind = "parquet" if parquet else "csv"
            ledger.problem(
                head.file, None, None, f"the file cannot be read as {kind} ({said}); write it again"
            )
    return logged


def _table(ledger: Ledger, head: Head, path: str) -> Table | None:
    """The file with its time column, None (with a problem noted) where that cannot be read."""
    names = [heading.name for heading in head.headings]
    line = head.heading_line or None
    if TIME not in names:
        ledger.problem(
            head.file,
            line,
            None,
            "the column 'time [s]' is missing; head it so (or [min], [h]), or 'time' where it holds "
            "timestamps of ISO 8601",
        )
        return None
    place = names.index(TIME)
    heading = head.headings[place]
    try:
        form = time_form(heading, comma=head.comma)
    except QuantityError as error:
        ledger.problem(head.file, line, heading.text, str(error))
        return None
    first = next((row[place] for row in head.rows if np.isfinite(form.seconds(row[place]))), None)
    if first is None:
        said = head.rows[0][place]
        ledger.problem(
            head.file,
            head.heading_line + 1 if line else 1,
            heading.text,
            f"{said!r} is not a time; write {'a number, or' if form.unit is not None else 'timestamps of ISO 8601 such as'} "
            f"{form.example}" + ("" if form.unit is not None else ", or head the column 'time [s]'"),
        )
        return None
    return Table(head, path, place, form, form.seconds(first), form.zone(first) is not None)


def _read(
    ledger: Ledger,
    connection: Any,
    table: Table,
    document: Document,
    settings: LoggerTable,
    taps: TapTable,
    branches: Sequence[Branch],
    logged: Logged,
) -> None:
    head, form = table.head, table.form
    kept = kept_columns(head, table.time, document, taps, branches)
    times = np.array([form.seconds(row[table.time]) for row in (*head.rows, *head.between)]) - table.begin
    length = float(np.nanmax(times))
    if not length > 0:
        ledger.problem(
            head.file,
            head.heading_line + 1,
            head.headings[table.time].text,
            "the time does not go on from the first row to the last; write a time for each row",
        )
        return
    interval = _interval(np.array([form.seconds(row[table.time]) for row in head.rows]), length)
    first = next(row[table.time] for row in head.rows if np.isfinite(form.seconds(row[table.time])))
    clock = clock_from(form, first)
    given: GivenRuns | None = GivenRuns((), ())
    if logged.inner.place_of(ledger, "runs") is not None:
        given = read_windows(ledger, form, clock, length, head.file)
    if given is None or ledger.problems or any(unit is None for unit in kept.units):
        # What is wrong already would be told as well after an hour of reading.
        logged.cells = _cells(
            ledger, head, kept, given or GivenRuns((), ()), _first_values(head, kept), [_WHOLE]
        )
        return
    order = sorted(range(len(given.windows)), key=lambda k: given.windows[k].start)
    windows = [given.windows[k] for k in order]
    segments, most = grid(windows, length, interval, settings.least_length)
    with ThreadPoolExecutor(1) as beside:
        time_of = None if head.parquet else time_reader(table)
        digest = beside.submit(digest_of, head.path, time_of)
        blocks = read_blocks(
            connection, table, kept.channels, key_query(segments, most, interval), ledger.progress
        )
        sha, rising = digest.result()
    ledger.files.append(SourceFile(head.file, sha))
    if head.comma:
        ledger.assumptions.append(
            f"The decimals of {head.file} are set off by a comma: 1,234 is a little more than one."
        )
    tell_bad_cells(ledger, table, kept, blocks)
    check_order(ledger, connection, table, blocks, interval, rising=rising)
    if not blocks.count.size or not blocks.count.any():
        ledger.problem(head.file, None, None, "no row has a time and a number; write a row for each time")
        return
    window = _windows_of(blocks, segments)
    means, scatter, samples = _means(blocks, window, len(windows)) if windows else _whole_means(blocks)
    back = np.argsort(order) if windows else [0]
    if not samples.any(axis=1).all():
        _note_empty_windows(ledger, windows, samples, clock, head.file)
        return
    means = _stilled(ledger, head, kept, means, scatter, [one.run for one in windows] or None)
    labels = [one.run for one in given.windows] or [_WHOLE]
    logged.cells = _cells(ledger, head, kept, given, means[back], labels)
    logged.record = _record(head, kept, blocks, window, windows, clock, interval, settings)
    state_record(ledger, logged.record, kept, document.logger or LoggerTable())


def _interval(times: Array, length: float) -> float:
    """The usual time between two samples, s."""
    known = times[np.isfinite(times)]
    steps = np.diff(known)
    usual = float(np.median(steps)) if len(steps) else 0.0
    if usual <= 0 and len(steps):
        usual = float((known[-1] - known[0]) / len(steps))
    return usual if usual > 0 else max(length, 1.0)


def _windows_of(blocks: Blocks, segments: Sequence[Segment]) -> NDArray[np.intp]:
    bases = np.array([one.base for one in segments])
    of = np.array([one.window for one in segments], dtype=np.intp)
    return np.asarray(of[np.maximum(np.searchsorted(bases, blocks.key, side="right") - 1, 0)])


def _means(blocks: Blocks, window: NDArray[np.intp], count: int) -> tuple[Array, Array, Array]:
    """Mean, standard deviation and number of the samples of each window and channel."""
    inside = window >= 0
    at = window[inside]
    shape = (count, blocks.count.shape[1])
    n, total, squares = np.zeros(shape), np.zeros(shape), np.zeros(shape)
    np.add.at(n, at, blocks.count[inside])
    np.add.at(total, at, blocks.count[inside] * np.nan_to_num(blocks.mean[inside]))
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = total / n
        away = np.where(blocks.count[inside] > 0, blocks.mean[inside] - mean[at], 0.0)
        np.add.at(squares, at, blocks.squares[inside] + blocks.count[inside] * away**2)
        return mean, np.sqrt(squares / n), n


def _whole_means(blocks: Blocks) -> tuple[Array, Array, Array]:
    return _means(blocks, np.zeros(len(blocks.key), dtype=np.intp), 1)


def _note_empty_windows(
    ledger: Ledger, windows: Sequence[Window], samples: Array, clock: Clock, file: str
) -> None:
    """Note the windows that hold no samples."""
    for one, count in zip(windows, samples, strict=True):
        if not count.any():
            ledger.problem(
                "runs.csv",
                None,
                None,
                f"{file} has no samples in the window of run {one.run!r}, from {clock.told(one.start)} to "
                f"{clock.told(one.end)}; mend its times or take the run away",
            )


def _stilled(
    ledger: Ledger, head: Head, kept: Kept, means: Array, scatter: Array, runs: Sequence[str] | None
) -> Array:
    """The means with 0 for what a meter shows while nothing flows."""
    means = means.copy()
    for k, place in enumerate(kept.places):
        heading = head.headings[place]
        if heading.name not in kept.primary or runs is None:
            continue
        nought = still(means[:, k], scatter[:, k]) & (means[:, k] != 0)
        if nought.any():
            named = ", ".join(
                f"{runs[row]!r} ({means[row, k]:.3g} {heading.unit or ''})".replace(" )", ")")
                for row in np.flatnonzero(nought)[:8]
            )
            ledger.assumptions.append(
                f"Nothing flows where {heading.text} of {head.file} is within 1 % of its greatest mean and within the scatter of "
                f"its samples of 0, or within 0.1 % of the greatest: run {named} is static."
            )
            means[nought, k] = 0.0
    return means


def _first_values(head: Head, kept: Kept) -> Array:
    """The first row's numbers: for the checks of the headings alone."""
    row = [abs(number_of(head.rows[0][place], comma=head.comma)) for place in kept.places]
    return np.array([row])


def _cells(
    ledger: Ledger, head: Head, kept: Kept, given: GivenRuns, means: Array, labels: Sequence[str]
) -> Cells | None:
    """The means as a table of runs, a row for each window."""
    others = [
        (heading.text, without_marks(column) if heading.unit is not None else column)
        for heading, column in given.others
        if len(column) == len(labels)
    ]
    headings = ["run", *(head.headings[place].text for place in kept.places), *(text for text, _ in others)]
    rows = [
        [
            label,
            *("" if np.isnan(value) else f"{value:.12g}" for value in means[row, : len(kept.places)]),
            *(column[row] for _, column in others),
        ]
        for row, label in enumerate(labels)
    ]
    # Their lines lie beyond every line of the file: so a mean is told from a row.
    beyond = 10**12
    line = head.heading_line or None
    return cells_of(ledger, head.file, [headings, *rows], [line, *range(beyond, beyond + len(rows))])


def _record(
    head: Head,
    kept: Kept,
    blocks: Blocks,
    window: NDArray[np.intp],
    windows: Sequence[Window],
    clock: Clock,
    interval: float,
    settings: LoggerTable,
) -> Record:
    """The blocks in SI, a column for each use."""
    several = blocks.rows > 1
    with np.errstate(invalid="ignore", divide="ignore"):
        steps = (blocks.last - blocks.first)[several] / (blocks.rows[several] - 1)
    usual = float(np.median(steps)) if several.any() else interval
    usual = usual if usual > 0 else interval
    at = [channel for channel, _, _ in kept.targets]
    units = [kept.units[channel] for channel in at]

    def scaled(values: Array) -> Array:
        if not at:
            return np.zeros((len(values), 0))
        return np.column_stack(
            [values[:, k] if u is None else u.to_si(values[:, k]) for k, u in zip(at, units, strict=True)]
        )

    factors = np.array([1.0 if u is None else u.difference_to_si(1.0) for u in units])
    ending = np.minimum(blocks.last + usual, np.append(blocks.first[1:], np.inf))
    return Record(
        file=head.file,
        clock=clock,
        names=tuple(name for _, name, _ in kept.targets),
        units=tuple("" if u is None else u.text for u in units),
        targets=tuple(target for _, _, target in kept.targets),
        time_start=blocks.first,
        time_end=np.maximum(ending, blocks.first),
        count=blocks.count[:, at],
        mean=scaled(blocks.mean),
        low=scaled(blocks.low),
        high=scaled(blocks.high),
        squares=blocks.squares[:, at] * factors**2,
        window=window,
        windows=tuple(windows),
        interval=usual,
        gaps=gaps_of(blocks, usual),
        drift=settings.drift,
        least_length=settings.least_length,
        settle=settings.settle,
        rows=int(blocks.rows.sum()) + blocks.timeless,
    )
