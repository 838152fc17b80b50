"""What is told of a logger's file: cells that are no numbers, missing samples, columns of no use, how it was read."""

from __future__ import annotations

import numpy as np

from gradeline.loader.cells import Hints
from gradeline.loader.grouped import quoted
from gradeline.loader.ledger import Ledger
from gradeline.loader.logger.blocks import Blocks, Table
from gradeline.loader.logger.channels import Kept
from gradeline.loader.logger.settings import LoggerTable
from gradeline.survey import Record

__all__ = ["gaps_of", "state_record", "tell_bad_cells"]

#: Intervals without a sample that make a gap, and the part of a block's samples that may be missing.
_GAP, _MISSING = 3.0, 0.1
#: The part of a column that may be no numbers before it is refused.
_MOST_BAD = 0.2
#: Blocks that a window takes to be found.
_BINS = 12
_TOLD = 8


def tell_bad_cells(ledger: Ledger, table: Table, kept: Kept, blocks: Blocks) -> None:
    """Tell the cells and rows that could not be read, with the first row of each column.

    A column with more than a fifth of such cells is a problem, fewer are a caution: they are left out of the means.
    """
    head = table.head
    for k, place in enumerate(kept.places):
        bad = int(blocks.bad[k])
        if not bad:
            continue
        heading = head.headings[place].text
        first = next((one for one in blocks.rejects if one.column == place and not one.whole_row), None)
        found = (
            f"the first is {first.cell!r} in row {first.line}"
            if first is not None
            else "too large to be meant, or not finite"
        )
        many = f"{bad} cell{'s are' if bad > 1 else ' is'} not a number; {found}"
        if bad > _MOST_BAD * max(bad + blocks.count[:, k].sum(), 1):
            ledger.problem(
                head.file,
                first.line if first is not None else None,
                heading,
                f"{many}; leave such cells empty, or mend the unit of the column",
            )
        else:
            ledger.cautions.append(
                f"{head.file}, {heading}: {many}. {'They are' if bad > 1 else 'It is'} left out of the means."
            )
    lines = sorted({one.line for one in blocks.rejects if one.whole_row})
    if lines:
        least = "at least " if len(lines) >= 1000 else ""
        ledger.cautions.append(
            f"{head.file}: {least}{len(lines)} row{'s have' if len(lines) > 1 else ' has'} not the {len(head.headings)} cells of the "
            f"heading, the first in row {lines[0]}. {'They are' if len(lines) > 1 else 'It is'} left out."
        )
    timeless = blocks.timeless
    first_time = next((one for one in blocks.rejects if one.column == table.time and not one.whole_row), None)
    if timeless:
        where = (
            f", the first ({first_time.cell!r}) in row {first_time.line}" if first_time is not None else ""
        )
        ledger.cautions.append(
            f"{head.file}: {timeless} row{'s have' if timeless > 1 else ' has'} no time that can be read{where}. "
            f"{'They are' if timeless > 1 else 'It is'} left out."
        )


def gaps_of(blocks: Blocks, interval: float) -> tuple[tuple[float, float], ...]:
    """Return where samples are missing: (last moment before, first moment after), s.

    Within a block that holds less than nine tenths of its samples the gap is told as the block.

    Parameters
    ----------
    blocks : Blocks
        Of the record.
    interval : float
        Usual time between two samples, s.
    """
    between = blocks.first[1:] - blocks.last[:-1]
    found = [
        (float(blocks.last[k]), float(blocks.first[k + 1]))
        for k in np.flatnonzero(between > _GAP * interval).tolist()
    ]
    room = (blocks.last - blocks.first) / interval + 1.0
    thin = (blocks.rows < (1.0 - _MISSING) * room) & (room - blocks.rows >= _GAP)
    found += [(float(blocks.first[k]), float(blocks.last[k])) for k in np.flatnonzero(thin).tolist()]
    return tuple(sorted(found))


def state_record(ledger: Ledger, record: Record, kept: Kept, settings: LoggerTable) -> None:
    """Tell how the record was read, and what of it was not."""
    clock = record.clock
    span = f"{clock.told(float(record.time_start[0]))} to {clock.told(float(record.time_end[-1]))}"
    ledger.assumptions.append(
        f"{record.file} holds {record.rows} rows from {span}, usually {record.interval:.3g} s apart, read in "
        f"{len(record.time_start)} blocks."
    )
    if record.windows:
        ledger.assumptions.append(
            f"Each run of runs.csv is the mean of {record.file} from its start up to, and without, its end."
        )
    else:
        ledger.assumptions.append(
            f"No runs.csv gives the runs: they are windows of {record.file} in which flow and heads are steady, at least "
            f"{settings.least_length:g} s long, {settings.settle:g} s after a change, with a drift of the flow of at most "
            f"{100 * settings.drift:.3g} % ([logger] least_length, settle and drift)."
        )
        width = float(np.median(record.time_end - record.time_start))
        if settings.least_length < _BINS * width:
            ledger.cautions.append(
                f"{record.file} is so long that its blocks are {width:.3g} s: steady windows shorter than about "
                f"{_BINS * width:.3g} s are not found. Give them in runs.csv, or make a survey of each part of the record."
            )
    if kept.left:
        hints = Hints(record.names)
        named = (
            quoted(dict.fromkeys(kept.left))
            if len(kept.left) > _TOLD
            else ", ".join(
                f"{one} ({hints(one.split(' [')[0])})" if hints(one.split(" [")[0]).startswith("did") else one
                for one in kept.left
            )
        )
        ledger.assumptions.append(
            f"Columns of {record.file} that no tap, gauge or meter of the survey has are not read: {named}."
        )
    empty = [
        f"{name} ({int(lost)})"
        for name, lost in zip(
            record.names, record.count.max(axis=1).sum() - record.count.sum(axis=0), strict=True
        )
        if lost > 0
    ]
    if empty:
        ledger.assumptions.append(
            f"Samples of {record.file} that are empty, or no numbers, are left out of the means: {', '.join(empty[:_TOLD])}"
            f"{f' and {len(empty) - _TOLD} more columns' if len(empty) > _TOLD else ''}."
        )
    if record.gaps:
        told = [f"{clock.told(start)} to {clock.told(end)}" for start, end in record.gaps[:_TOLD]]
        more = f" and {len(record.gaps) - _TOLD} more" if len(record.gaps) > _TOLD else ""
        ledger.cautions.append(f"{record.file} has no samples from {', '.join(told)}{more}.")
