"""``taps.csv`` to taps, with the gauge that reads each."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from gradeline.loader.cells import nearest, parse_heading
from gradeline.loader.columns import Columns, Known
from gradeline.loader.document import GaugeTable
from gradeline.loader.gauge_keys import Span
from gradeline.loader.grouped import TOLD_SINGLY, rows_phrase
from gradeline.loader.ledger import Ledger
from gradeline.loader.line import within_line
from gradeline.loader.tables import read_table
from gradeline.survey import GAUGE_KINDS, Reach, Tap

__all__ = ["RESERVED", "TapTable", "read_taps"]

#: Names that columns of the readings have, so that no tap can be called so.
RESERVED = ("run", "flow", "temperature", "tap", "reading", "unit", "reference")

_COLUMNS: Mapping[str, Known] = {
    "tap": Known(required=True),
    "chainage": Known(("length",), required=True, remedy="give the tap's chainage"),
    "elevation": Known(("length",), remedy="give the elevation of the pipe's axis"),
    "gauge elevation": Known(
        ("length",), remedy="leave the cell empty where the gauge is at the pipe's axis"
    ),
    "gauge": Known(),
    "reading uncertainty": Known(("length", "pressure"), difference=True),
    "chainage uncertainty": Known(("length",), difference=True),
    "elevation uncertainty": Known(("length",), difference=True),
}


@dataclass(frozen=True)
class TapTable:
    """The taps as read.

    Parameters
    ----------
    names : tuple of str
        Every label in the file, also of taps at fault: the readings are checked against it.
    reads : mapping of str to str or None
        What the gauge of each tap reads, ``"length"`` or ``"pressure"``; None where its gauge is at fault.
    taps : tuple of Tap
        The taps, of use only where no problem was noted.
    units : mapping of str to str
        The unit found in each heading.
    columns : frozenset of str
        The columns that the file has.
    rows : mapping of str to int
        The line of each tap in the file.
    file : str
        What messages call the table.
    optional : frozenset of str
        Columns of readings that need not be there: a differential gauge may be read in more than one way.
    bare : frozenset of str
        Taps without a gauge of their own.
    gauge_of : mapping of str to str or None
        The gauge of each column of readings.
    spans : mapping of str to Span
        Lowest and highest reading of a column, SI.
    """

    names: tuple[str, ...]
    reads: Mapping[str, str | None]
    taps: tuple[Tap, ...]
    units: Mapping[str, str]
    columns: frozenset[str]
    rows: Mapping[str, int]
    file: str = "taps.csv"
    optional: frozenset[str] = frozenset()
    bare: frozenset[str] = frozenset()
    gauge_of: Mapping[str, str | None] = field(default_factory=dict)
    spans: Mapping[str, Span] = field(default_factory=dict)

    @property
    def distinct(self) -> list[str]:
        """The labels, each once."""
        return list(dict.fromkeys(self.names))


def read_taps(
    ledger: Ledger,
    gauges: Mapping[str, GaugeTable],
    reaches: Sequence[Reach] | None,
) -> TapTable | None:
    """Return ``taps.csv`` as taps, None where the file is missing or no table."""
    cells = read_table(ledger, "taps")
    if cells is None:
        return None
    columns = Columns(ledger, cells, _COLUMNS)
    names = columns.labels("tap")
    _check_names(columns, names)
    reads = _gauges_of(columns, gauges)
    _check_chainages(columns, names, reaches)
    for name in ("elevation", "gauge elevation"):
        columns.values(name)
    if "elevation" in columns:
        for row, cell in enumerate(columns.raw("elevation")):
            if not cell:
                columns.problem(row, "elevation", "the cell is empty; give the elevation of the pipe's axis")
    for name in ("reading uncertainty", "chainage uncertainty", "elevation uncertainty"):
        for row in np.flatnonzero(columns.values(name) < 0).tolist():
            columns.problem(row, name, f"{columns.raw(name)[row]!r} is negative; state it above zero")
    _check_reading_uncertainty(columns, reads, gauges)
    units = {name: unit.text for name, unit in columns.units.items() if unit is not None}
    return TapTable(
        names=tuple(name for name in names if name),
        reads={name: _read_by(gauge, gauges) for name, gauge in zip(names, reads, strict=True)},
        taps=tuple(_tap(columns, row, names[row], reads[row], reaches) for row in range(len(cells))),
        units=units,
        columns=frozenset(columns.units),
        rows=dict(zip(names, cells.lines, strict=True)),
        file=cells.file,
    )


def _read_by(gauge: str | None, gauges: Mapping[str, GaugeTable]) -> str | None:
    """What a gauge reads, None where it or its kind is not known."""
    kind = gauges[gauge].kind if gauge is not None else None
    return None if kind is None else GAUGE_KINDS[kind].reading


def _tap(columns: Columns, row: int, name: str, gauge: str | None, reaches: Sequence[Reach] | None) -> Tap:
    def optional(column: str) -> float | None:
        value = float(columns.values(column)[row])
        return None if np.isnan(value) else value

    chainage = float(columns.values("chainage")[row])
    on_line = within_line(chainage, reaches) if reaches is not None else None
    return Tap(
        name=name,
        chainage=chainage if on_line is None else on_line,
        elevation=optional("elevation") or 0.0,
        gauge=gauge,
        gauge_elevation=optional("gauge elevation"),
        reading_u=optional("reading uncertainty"),
        chainage_u=optional("chainage uncertainty"),
        elevation_u=optional("elevation uncertainty"),
    )


def _check_names(columns: Columns, names: Sequence[str]) -> None:
    first: dict[str, int] = {}
    for row, name in enumerate(names):
        if not name:
            continue
        if name in first:
            columns.problem(
                row,
                "tap",
                f"the tap {name!r} stands in row {first[name]} already; give each tap its own label",
            )
        first.setdefault(name, columns.cells.lines[row])
        heading = parse_heading(name)
        if heading.unit is not None or name != heading.text:
            columns.problem(
                row,
                "tap",
                f"{name!r} cannot be the heading of a column; take away brackets and double spaces",
            )
        elif name in RESERVED or name.casefold().startswith("note"):
            columns.problem(
                row, "tap", f"a tap cannot be called {name!r}, which names another column; call it otherwise"
            )


def _gauges_of(columns: Columns, gauges: Mapping[str, GaugeTable]) -> list[str | None]:
    """The gauge of each tap: as written, or the only one."""
    differential = {
        name: gauge.values or {}
        for name, gauge in gauges.items()
        if gauge.kind is not None and GAUGE_KINDS[gauge.kind].differential
    }
    # Only these read a tap each; the others name their taps themselves.
    single = [name for name in gauges if name not in differential]
    seen = {values.get(key) for values in differential.values() for key in ("upstream", "downstream")}
    labels = columns.raw("tap")
    # Where a gauge or its taps are at fault themselves, a tap that nobody names says nothing new.
    unclaimed_is_told = all(values for values in differential.values()) and seen <= {None, *labels}
    only = single[0] if len(single) == 1 else None
    found: list[str | None] = []
    for row, name in enumerate(columns.raw("gauge")):
        if name in differential:
            columns.problem(
                row,
                "gauge",
                f"the gauge {name!r} reads a difference between two taps, which it names itself as upstream and "
                "downstream; leave the cell empty",
            )
            found.append(None)
        elif name in gauges:
            found.append(name)
        elif not name and labels[row] in seen and (only is None or differential):
            found.append(None)
        elif name and not gauges:
            found.append(None)  # that there is no gauge, or no survey.toml, is told already
        elif name:
            columns.problem(row, "gauge", f"unknown gauge {name!r}; {nearest(name, gauges)}")
            found.append(None)
        else:
            if gauges and not single and unclaimed_is_told:
                columns.problem(
                    row, "tap", f"no gauge reads the tap {labels[row]!r}; take it away, or add its gauge"
                )
            elif only is None and single and "gauge" in columns:
                columns.problem(
                    row, "gauge", f"the cell is empty; say which gauge reads the tap ({', '.join(single)})"
                )
            found.append(only)
    if "gauge" not in columns and len(single) > 1:
        columns.ledger.problem(
            columns.cells.file,
            columns.cells.heading_line,
            None,
            f"the column 'gauge' is missing; with {len(single)} gauges it says which one reads each tap",
        )
    return found


def _check_chainages(columns: Columns, names: Sequence[str], reaches: Sequence[Reach] | None) -> None:
    if columns.units.get("chainage") is None:
        return
    chainages, raw = columns.values("chainage"), columns.raw("chainage")
    unit = columns.units["chainage"]
    assert unit is not None
    previous: int | None = None
    outside: list[int] = []
    unsorted: list[tuple[int, int]] = []
    for row, chainage in enumerate(chainages):
        if not raw[row]:
            columns.problem(row, "chainage", "the cell is empty; give the tap's chainage")
        if np.isnan(chainage):
            continue
        if reaches is not None and within_line(chainage, reaches) is None:
            outside.append(row)
        if previous is not None and chainage <= chainages[previous]:
            unsorted.append((row, previous))
        previous = row
    lines = columns.cells.lines
    if outside and reaches is not None:
        many = len(outside) > TOLD_SINGLY
        others = rows_phrase(lines[row] for row in outside[1:]) if many else ""
        for row in outside[: 1 if many else None]:
            also = f", and so do {len(outside) - 1} more taps ({others})" if many else ""
            mend = "mend the chainages or their unit" if many else "mend the chainage"
            columns.problem(
                row,
                "chainage",
                f"{raw[row]} {unit.text} lies outside every reach ({reaches[0].start:g} m to "
                f"{reaches[-1].end:g} m){also}; {mend} or extend a reach",
            )
    if unsorted:
        row, before = unsorted[0]
        others = rows_phrase(lines[row] for row, _ in unsorted[1:]) if len(unsorted) > 1 else ""
        also = f", and {len(unsorted) - 1} more not after the tap above ({others})" if others else ""
        columns.problem(
            row,
            "chainage",
            f"{raw[row]} {unit.text} does not come after {raw[before]} {unit.text} of tap "
            f"{names[before]!r}{also}; list the taps in order of chainage, each at its own",
        )


def _check_reading_uncertainty(
    columns: Columns, reads: Sequence[str | None], gauges: Mapping[str, GaugeTable]
) -> None:
    """The one column serves gauges of both kinds; each tap's value has to suit its gauge."""
    unit = columns.units.get("reading uncertainty")
    if unit is None:
        return
    for row, value in enumerate(columns.values("reading uncertainty")):
        read = _read_by(reads[row], gauges)
        if np.isnan(value) or read is None or read == unit.dimension:
            continue
        columns.problem(
            row,
            "reading uncertainty",
            f"{unit.text!r} is a {unit.dimension}, but the gauge {reads[row]!r} reads a {read}; "
            "leave the cell empty and state the uncertainty with the gauge",
        )
