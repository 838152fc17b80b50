"""What was put in, as tables: the line, the gauges, the stated uncertainties, the readings as they were read."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import Any

from gradeline.quantities import parse_unit
from gradeline.quantities.printing import MISSING, SI_DISPLAY, Display, format_number
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import (
    PrintedTable,
    Row,
    TableColumn,
    known,
    lay_out,
    name_column,
    records,
)
from gradeline.report.tables import reading_units

__all__ = [
    "fitting_input_table",
    "gauge_table",
    "raw_reading_tables",
    "side_valve_table",
    "stated_reach_table",
    "stated_tap_table",
    "stated_words",
    "statements",
    "uncertainty_table",
]

NOT_STATED = "not stated"
_DEGREES = {"degC": "°C", "degF": "°F"}
#: Readings side by side in one table, so that it fits on paper.
_WIDEST = 12
#: What is stated of gauges and valves in words, set to the left.
_IN_WORDS = {"kind", "upstream", "downstream", "gauge fluid", "line fluid", "where", "state"}


def _stated(display: Display, quantity: str, value: float | None, u: float | None) -> str:
    """A value to six digits at most, or rounded to its ± where one was stated; in other units than SI to what it had."""
    if value is None or not math.isfinite(value):
        return NOT_STATED
    if known(u):
        return display.text(quantity, value, u)
    digits = _digits(display, quantity, value)
    shown = f"{display.value(quantity, value):.{digits}g}"
    return format_number(display.value(quantity, value), digits) if "e" in shown else shown.replace("-", "−")


def _digits(display: Display, quantity: str, value: float) -> int:
    """How many digits of a stated value are shown: six, in other units than SI hardly more than it has in those."""
    if display is SI_DISPLAY:
        return 6
    written = f"{abs(SI_DISPLAY.value(quantity, value)):.6g}".partition("e")[0].replace(".", "").strip("0")
    return min(max(len(written) + 2, 3), 6)


def _with_unit(display: Display, quantity: str, text: str) -> str:
    unit = display.unit(quantity)
    if not unit or text == NOT_STATED:
        return text
    space = "" if unit == "°" else " "
    return f"({text}){space}{unit}" if " ± " in text else f"{text}{space}{unit}"


def stated_words(display: Display, row: Row) -> str:
    """Return the value of a row of ``inputs`` with its unit, or its words."""
    if row["quantity"] is None:
        return MISSING if row["text"] is None else str(row["text"])
    quantity = str(row["quantity"])
    return _with_unit(display, quantity, _stated(display, quantity, row["value"], row["value_u"]))


def _group(reduction: Reduction, group: str) -> list[dict[str, Any]]:
    return [row for row in records(reduction.inputs) if row["group"] == group]


def stated_reach_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the reaches as stated: ends, bore with its standard uncertainty, wall."""
    return lay_out(
        "Reaches as stated. ± is one standard uncertainty.",
        records(reduction.stated_reaches),
        [
            name_column("reach"),
            TableColumn(
                display.head("from", "chainage"),
                lambda row: _stated(display, "chainage", row["start"], None),
            ),
            TableColumn(
                display.head("to", "chainage"), lambda row: _stated(display, "chainage", row["end"], None)
            ),
            TableColumn(
                display.head("bore", "diameter"),
                lambda row: (
                    _stated(display, "diameter", row["diameter"], row["diameter_u"])
                    + ("" if known(row["diameter_u"]) else " (± not stated)")
                ),
            ),
            name_column("wall"),
        ],
        note=None,
    )


def stated_tap_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the taps as stated: chainage, elevation, gauge, and uncertainties of their own."""
    rows = records(reduction.stated_taps)
    pressure = {
        gauge
        for gauge, dimension in zip(
            reduction.reading_units["gauge"], reduction.reading_units["dimension"], strict=True
        )
        if dimension == "pressure"
    }

    def of(quantity: str, key: str) -> Callable[[Row], str]:
        values = [display.value(quantity, row[key]) for row in rows if known(row[key])]
        digits = max((_digits(display, quantity, row[key]) for row in rows if known(row[key])), default=6)
        places = max((_places(value, digits) for value in values), default=0)
        return lambda row: (
            MISSING if not known(row[key]) else _fixed(display.value(quantity, row[key]), places)
        )

    def reading_u(row: Row) -> str:
        quantity = "pressure" if row["gauge"] in pressure else "small head"
        shown = of(quantity, "reading_u")(row)
        return shown if shown == MISSING else _with_unit(display, quantity, shown)

    return lay_out(
        "Taps as stated.",
        rows,
        [
            name_column("tap"),
            TableColumn(display.head("chainage", "chainage"), of("chainage", "chainage")),
            TableColumn(display.head("elevation", "elevation"), of("elevation", "elevation")),
            name_column("gauge", always=False),
            TableColumn(
                display.head("gauge elevation", "elevation"), of("elevation", "gauge_elevation"), always=False
            ),
            TableColumn("u of its reading", reading_u, always=False),
            TableColumn(
                display.head("u of its chainage", "small head"), of("small head", "chainage_u"), always=False
            ),
            TableColumn(
                display.head("u of its elevation", "small head"),
                of("small head", "elevation_u"),
                always=False,
            ),
        ],
        note=None,
    )


def _crossed(rows: Sequence[Row], display: Display, caption: str, first: str) -> PrintedTable:
    """Rows of ``inputs`` with one line a name and one column for each thing stated of it."""
    heads = list(dict.fromkeys(str(row["what"]) for row in rows))
    lines: dict[str, dict[str, Any]] = {}
    for row in rows:
        lines.setdefault(str(row["name"]), {"name": row["name"]})[str(row["what"])] = stated_words(
            display, row
        )

    def column(what: str) -> TableColumn:
        return TableColumn(what, lambda line: str(line.get(what, MISSING)), text=what in _IN_WORDS)

    return lay_out(
        caption,
        list(lines.values()),
        [name_column("name", first), *(column(what) for what in heads)],
        note=None,
    )


def gauge_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the gauges with their kind, settings and stated uncertainties."""
    caption = "Gauges as stated; u is a standard uncertainty."
    return _crossed(_group(reduction, "gauge"), display, caption, "gauge")


def fitting_input_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the fittings as stated."""
    return _crossed(_group(reduction, "fitting"), display, "Fittings as stated.", "fitting")


def side_valve_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the isolation checklist: each side valve, where flow can leave by it, and whether it was shut."""
    rows = _group(reduction, "side valve")
    shut = sum(row["what"] == "state" and row["text"] == "shut" for row in rows)
    count = sum(row["what"] == "state" for row in rows)
    found = "all are stated shut" if shut == count else f"{shut} of {count} are stated shut"
    return _crossed(
        rows, display, f"Isolation checklist: were all side valves shut? Here {found}.", "side valve"
    )


def uncertainty_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the standard uncertainties that the survey states for all of its parts."""
    return lay_out(
        "Standard uncertainties stated for the whole survey. One that is not stated contributes nothing, unless a gauge "
        "or a tap states its own.",
        _group(reduction, "stated"),
        [name_column("what", "of"), TableColumn("u", lambda row: stated_words(display, row))],
        note=None,
    )


def statements(reduction: Reduction, display: Display = SI_DISPLAY) -> tuple[tuple[str, str], ...]:
    """Return fluid, site, flow and options as pairs of words."""
    found = []
    for group, head in (("fluid", "Fluid"), ("site", "Site"), ("flow", "Flow")):
        rows = _group(reduction, group)
        if rows:
            parts = [
                stated_words(display, row)
                if row["what"] == "name"
                else f"{row['what']} {stated_words(display, row)}"
                for row in rows
            ]
            found.append((head, ", ".join(parts)))
    for row in _group(reduction, "options"):
        what = str(row["what"])
        found.append((what[:1].upper() + what[1:], stated_words(display, row)))
    return tuple(found)


def raw_reading_tables(
    reduction: Reduction, display: Display = SI_DISPLAY, *, limit: int | None = None
) -> tuple[PrintedTable, ...]:
    """Return the readings as they were read, one line a run; several tables where there are many taps."""
    raw = reduction.raw_readings
    labels = list(dict.fromkeys(raw["tap"]))
    names = list(dict.fromkeys(raw["run"]))[:limit]
    units = reading_units(reduction)
    flows: dict[Any, dict[str, Any]] = {}
    for row in records(reduction.runs[["run", "flow", "temperature"]]):
        flows.setdefault(row["run"], row)
    kept = raw[raw["run"].isin(names)] if limit is not None else raw
    shown = _as_read(kept["tap"].tolist(), kept["reading"].tolist(), units)
    cells = {(run, tap): text for run, tap, text in zip(kept["run"], kept["tap"], shown, strict=True)}
    means = " Each is the mean of its repeats." if (raw["repeats"] > 1).any() else ""

    def column(label: str) -> TableColumn:
        unit = units.get(label, ("", 1.0))[0]
        head = f"{label} ({unit})" if unit else label
        return TableColumn(head, lambda row: cells.get((row["run"], label), MISSING))

    rows = [{"flow": None, "temperature": None, **flows.get(run, {}), "run": run} for run in names]
    return tuple(
        lay_out(
            f"Readings as read, in the unit of the record; an en dash was not read.{means}",
            rows,
            [
                name_column("run"),
                _as_written(reduction, display, "flow", "flow"),
                _as_written(reduction, display, "temperature", "t"),
                *(column(label) for label in labels[at : at + _WIDEST]),
            ],
            note=None,
        )
        for at in range(0, len(labels), _WIDEST)
    )


def _as_written(reduction: Reduction, display: Display, name: str, words: str) -> TableColumn:
    """The column of flow or temperature in the unit that it was read in; in those of the reader where it was worked out."""
    text = (reduction.survey.get("units") or {}).get(name)
    if text is None:
        return TableColumn(
            display.head(words, name),
            lambda row: _stated_or_dash(display, name, row[name]),
            always=name == "flow",
        )
    unit = parse_unit(text, name)
    label = _DEGREES.get(unit.text, unit.label)
    values = [unit.from_si(value) for value in reduction.runs[name].drop_duplicates() if known(value)]
    places = max((_places(value) for value in values), default=0)

    def cell(row: Row) -> str:
        if not known(row[name]):
            return MISSING
        return _fixed(unit.from_si(row[name]), places)

    return TableColumn(f"{words} ({label})", cell, always=name == "flow")


def _stated_or_dash(display: Display, quantity: str, value: float | None) -> str:
    return MISSING if not known(value) else _stated(display, quantity, value, None)


def _places(value: float, digits: int = 6) -> int:
    """How many decimals a value needs for some digits, none after the last that is not zero."""
    return len(f"{value:.{digits}g}".partition(".")[2]) if _plain(value) else 0


def _plain(value: float) -> bool:
    return value == 0 or 1e-4 <= abs(value) < 1e6


def _fixed(value: float, places: int) -> str:
    return f"{value:.{places}f}".replace("-", "−") if _plain(value) else format_number(value, 6)


def _as_read(
    taps: Sequence[str], readings: Sequence[float], units: dict[str, tuple[str, float]]
) -> list[str]:
    """Readings in their units, six digits at most, all of a unit with the same number of decimals."""
    of = [units.get(tap, ("", 1.0)) for tap in taps]
    values = [reading / scale for reading, (_, scale) in zip(readings, of, strict=True)]
    places: dict[str, int] = {}
    for value, (unit, _) in zip(values, of, strict=True):
        if math.isfinite(value):
            places[unit] = max(places.get(unit, 0), _places(value))
    return [
        _fixed(value, places[unit]) if math.isfinite(value) else MISSING
        for value, (unit, _) in zip(values, of, strict=True)
    ]
