"""What a survey's readings would be written down in: the columns of ``readings.csv``, before there are any readings."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from gradeline.errors import SurveyError, UsageError
from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.loader.cells import Cells, column_index, parse_heading
from gradeline.loader.columns import Known
from gradeline.loader.document import Document, GaugeTable, read_document
from gradeline.loader.flow_keys import FlowTable
from gradeline.loader.flow_rows import flow_columns
from gradeline.loader.fluids import build_fluid
from gradeline.loader.gas_pressures import gas_columns, known_gas
from gradeline.loader.gauge_columns import with_gauge_columns
from gradeline.loader.heads import TableOfHeads
from gradeline.loader.ledger import Ledger
from gradeline.loader.line import build_reaches
from gradeline.loader.offtakes import branch_columns, build_branches
from gradeline.loader.tables import place_of, read_table, source_of
from gradeline.loader.taps import TapTable, read_taps
from gradeline.quantities import Unit, parse_unit
from gradeline.survey import Tap

__all__ = ["Recorded", "Recording", "read_recording"]

#: The unit of a column that nobody has chosen yet, by what it measures.
_UNITS: Mapping[str, str] = {
    "flow": "L/s",
    "length": "mm",
    "pressure": "kPa",
    "temperature": "degC",
    "volume": "L",
    "mass": "kg",
    "time": "s",
    "velocity": "m/s",
    "frequency": "Hz",
    "rotational speed": "rpm",
    "electric current": "mA",
    "voltage": "V",
    "dimensionless": "1",
}


@dataclass(frozen=True)
class Recorded:
    """A column to be filled in.

    Parameters
    ----------
    heading : str
        As ``readings.csv`` has it: ``T1 [mm]``.
    under : str
        Where its tap lies, or between which taps its gauge reads; empty for the others.
    static : str
        What stands in it in a static run; empty where that has to be written down.
    """

    heading: str
    under: str = ""
    static: str = ""


@dataclass(frozen=True)
class Recording:
    """What a recording sheet is made of.

    Parameters
    ----------
    title : str
        Of the survey.
    columns : tuple of Recorded
        Those of ``readings.csv``, in its order, unless `listed` says otherwise.
    gauges : tuple of (str, str)
        Each gauge with its kind.
    taken_from : str or None
        The file whose headings they are; None where there is none yet.
    listed : tuple of str
        The columns of ``readings.csv`` where it lists its readings one a row; `columns` are then those of ``runs.csv``, or
        the run alone. Empty where a run has a row.
    read : tuple of Recorded
        What each row of such a list is of, in order of chainage: the tap, and in which unit it is read.
    """

    title: str
    columns: tuple[Recorded, ...]
    gauges: tuple[tuple[str, str], ...]
    taken_from: str | None = None
    listed: tuple[str, ...] = ()
    read: tuple[Recorded, ...] = ()


def read_recording(path: str | os.PathLike[str]) -> Recording:
    """Return the columns in which the readings of a survey are to be written down.

    Parameters
    ----------
    path : str or path
        A survey as `gradeline.read_survey` takes it; its readings may be missing.

    Returns
    -------
    Recording
        With the headings of the survey's own readings where it has them, otherwise those that would be read: run, time,
        what the method of the flow needs, temperature, gas pressures, then each tap and each gauge between two taps.

    Raises
    ------
    SurveyError
        With every problem of the line, its gauges and its taps.
    UsageError
        For one table of heads, which has neither.
    """
    path = Path(path)
    if path.is_file() and path.suffix.lower() != ".xlsx":
        raise UsageError(
            "one table of heads has no gauges to read; give a survey that describes them in survey.toml"
        )
    ledger = Ledger(path.parent if path.is_file() else path)
    ledger.source = source_of(ledger, path, {"diameter": None, "flow": None, "temperature": None})
    if ledger.source is None or isinstance(ledger.source, TableOfHeads):
        ledger.raise_problems()
    document = read_document(ledger)
    described: Mapping[str, GaugeTable] = {}
    reaches = fluid = None
    if document is not None:
        described = document.gauges
        fluid = build_fluid(ledger, document.fluid)
        reaches = build_reaches(ledger, document)
    taps = read_taps(ledger, described, reaches)
    branches = () if document is None else build_branches(ledger, document, reaches)
    ledger.raise_problems()
    if document is None or taps is None or fluid is None:
        raise SurveyError(ledger.problems)  # a fault that nobody noted would be a slip of this program
    known = {
        **_flow_columns(document.flow),
        **({} if not fluid.follows_temperature else _ends_of("temperature")),
        **branch_columns(branches),
        **known_gas(gas_columns(described)),
    }
    columns = with_gauge_columns(taps, described)
    places = _places(columns, described)
    header = document.survey
    title = (header.title if header is not None else None) or (
        path.stem if path.is_file() else path.resolve().name
    )
    headings, taken_from, listed = _written(ledger)
    read = _rows_listed(ledger, columns, places) if listed else ()
    if not headings:
        headings = _new_headings(document, columns, known)
    primary = _primary(document.flow)
    return Recording(
        title=title,
        columns=tuple(
            Recorded(text, places.get(name, ""), static="0" if name in primary else "")
            for text, name in ((text, parse_heading(text).name) for text in headings)
        ),
        gauges=tuple((gauge.name, gauge.kind or "") for gauge in described.values()),
        taken_from=taken_from,
        listed=listed,
        read=read,
    )


def _flow_columns(table: FlowTable | None) -> dict[str, Known]:
    """The columns of the flow, without those that tell how it drifts or which way it was changed."""
    found = flow_columns(table)
    for name in ("flow start", "flow end", "direction"):
        found.pop(name, None)
    return found


def _ends_of(name: str) -> dict[str, Known]:
    return {f"{name} {end}": Known((name,)) for end in ("start", "end")}


def _primary(table: FlowTable | None) -> frozenset[str]:
    """The columns that are 0 in a static run."""
    if table is None or table.gauges is not None:
        return frozenset({"flow"})
    meter = table.setup.table
    if meter is not None and meter.flow[0] == 0 and meter.reading[0] != 0:
        return frozenset()  # a meter that does not show 0 without flow
    return frozenset(name for name, of in table.column_names.items() if of == table.method.primary)


def _written(ledger: Ledger) -> tuple[list[str], str | None, tuple[str, ...]]:
    """The headings of the readings that are there already, and those of a list of readings; none where there are none."""
    quiet = Ledger(ledger.folder, source=ledger.source)
    place = place_of(quiet, "readings")
    if place is None:
        return [], None, ()
    cells = read_table(quiet, "readings", required=False)
    headings = _headings(quiet, place)
    if cells is None or column_index(cells, "tap") is None:
        return headings, place if headings else None, ()
    runs = place_of(quiet, "runs")
    read_table(quiet, "runs", required=False)
    return ["run"] if runs is None else _headings(quiet, runs), place, tuple(headings)


def _rows_listed(ledger: Ledger, taps: TapTable, places: Mapping[str, str]) -> tuple[Recorded, ...]:
    """The taps that a list of readings names, with their units, in order of chainage."""
    cells = read_table(Ledger(ledger.folder, source=ledger.source), "readings", required=False)
    if cells is None:
        return ()
    found = []
    for text in _listed(cells, taps):
        name = parse_heading(text).name
        unit = text.removeprefix(name).strip(" []")
        found.append(Recorded(name, f"{places[name]}, {unit}" if name in places else unit))
    return tuple(found)


def _headings(ledger: Ledger, file: str) -> list[str]:
    """The headings of a table that was read, notes among them, also of one without rows."""
    return [key.removeprefix(f"{file}: ") for key in ledger.order if key.startswith(f"{file}: ")]


def _listed(cells: Cells, taps: TapTable) -> list[str]:
    """A heading for each tap of readings that are listed one a row."""
    names, reading, unit = (column_index(cells, name) for name in ("tap", "reading", "unit"))
    labels = [] if names is None else cells.columns[names]
    own = None if reading is None else cells.headings[reading].unit
    units = {} if unit is None else dict(zip(labels, cells.columns[unit], strict=True))
    return [f"{name} [{own or units.get(name, '')}]" for name in taps.distinct if name in set(labels)]


def _new_headings(document: Document, taps: TapTable, known: Mapping[str, Known]) -> list[str]:
    found = ["run", "note time"]
    meter = None if document.flow is None else document.flow.setup.table
    deflection = {"gauge_fluid", "gauge_fluid_density"} & set(
        document.flow.setup.settings if document.flow is not None else ()
    )
    for name, column in known.items():
        if name == "differential" and deflection:
            found.append(f"{name} [{_UNITS['length']}]")
            continue
        unit = meter.unit.text if meter is not None and name == "meter reading" else _unit(column.dimensions)
        found.append(f"{name} [{unit}]" if unit else name)
    for name in _one_way(taps, document.gauges):
        reads = taps.reads.get(name) or "length"
        gauge = taps.gauge_of.get(name)
        found.append(f"{name} [{_own_unit(document, gauge, reads)}]")
    return found


def _one_way(taps: TapTable, gauges: Mapping[str, GaugeTable]) -> list[str]:
    """The columns to read, each gauge in one way: by its limbs or levels where it has them."""
    parted = {
        gauge.name
        for gauge in gauges.values()
        if gauge.kind is not None
        and GAUGE_KINDS[gauge.kind].limbs
        and (gauge.values or {}).get("area_ratio") is None
    }
    one_limb = {
        f"{gauge.name} {limb}"
        for gauge in gauges.values()
        if gauge.kind is not None and gauge.name not in parted
        for limb in GAUGE_KINDS[gauge.kind].limbs
    }
    # the left limb first, as they stand on the board
    names = [name for name in taps.distinct if name not in parted and name not in one_limb]
    return [_swapped(name, names) for name in names]


def _swapped(name: str, names: list[str]) -> str:
    for ending, other in (("right", "left"), ("left", "right")):
        stem = name.removesuffix(f" {ending}")
        if stem != name and f"{stem} {other}" in names:
            first = min(names.index(name), names.index(f"{stem} {other}"))
            return f"{stem} left" if names.index(name) == first else f"{stem} right"
    return name


def _own_unit(document: Document, gauge: str | None, reads: str) -> str:
    """The unit in which something was stated of a gauge's readings, else the usual one."""
    for key in ("resolution", "uncertainty", "range"):
        text = document.units.get(f"gauge.{gauge}.{key}")
        if text is not None and (unit := _of(text, reads)) is not None:
            return unit.text
    return _UNITS[reads]


def _of(text: str, dimension: str) -> Unit | None:
    try:
        return parse_unit(text, dimension)
    except ValueError:
        return None


def _unit(dimensions: tuple[str, ...]) -> str:
    return _UNITS[dimensions[0]] if dimensions else ""


def _places(taps: TapTable, gauges: Mapping[str, GaugeTable]) -> dict[str, str]:
    """Where each column of readings reads, in words."""
    of = {tap.name: tap for tap in taps.taps}
    unit = parse_unit(taps.units.get("chainage", "m"), "length")

    def at(tap: Tap) -> str:
        return f"{unit.from_si(tap.chainage):.6g} {unit.text}"

    found = {name: at(tap) for name, tap in of.items()}
    for gauge in gauges.values():
        values = gauge.values or {}
        ends = [of[end] for key in ("upstream", "downstream") if (end := values.get(key)) in of]
        if not ends:
            continue
        between = " to ".join(f"{tap.name} {at(tap)}" for tap in ends)
        found |= {
            name: between for name, own in taps.gauge_of.items() if own == gauge.name and name not in of
        }
    return found
