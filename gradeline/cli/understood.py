"""What `gradeline check` understood of a survey, as text."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from gradeline.cli.flow_lines import flow_text
from gradeline.cli.shown_units import ShownUnit, ShownUnits, plain_number
from gradeline.quantities import Measured
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.flow import metered_flow
from gradeline.survey import GAUGE_KINDS, Fluid, Gauge, Pressure, Reach, Stated, Survey

__all__ = ["understood"]

_RUNS_SHOWN = 40

# Units of values and of uncertainties where nobody wrote one.
_SETTINGS = {
    "length": "m",
    "pressure": "kPa",
    "angle": "deg",
    "temperature": "degC",
    "density": "kg/m^3",
    "surface tension": "N/m",
    "thermal expansion": "1/K",
    "dimensionless": "%",
}
_UNCERTAINTIES = {
    "length": "mm",
    "pressure": "kPa",
    "flow": "L/s",
    "temperature difference": "K",
    "dimensionless": "%",
}


def understood(survey: Survey, display: Display = SI_DISPLAY) -> str:
    """Return what a survey says.

    Parameters
    ----------
    survey : Survey
        Valid, with or without a flow of its own.
    display : Display
        Units of the reader. In SI what is stated of gauges and uncertainties stands in the unit in which it was stated; in US
        customary units all values are converted, and "Units as found" tells the others.

    Returns
    -------
    str
        The same words in both.
    """
    survey = metered_flow(survey).survey
    flows = survey.runs["flow"].to_numpy(float)
    units = ShownUnits(survey, display)
    along, bore, rough, flow = (units.of(one) for one in ("chainage", "diameter", "roughness", "flow"))
    parts = [
        f"{survey.title}" + (f" ({survey.date})" if survey.date else ""),
        f"Fluid: {_fluid(units, survey.fluid)}",
        flow_text(survey.flow, display),
        _table(
            "Reaches",
            ("reach", f"from, {along.text}", f"to, {along.text}", f"bore, {bore.text}", "wall"),
            [
                (
                    reach.name + (" (inlet)" if reach.inlet else ""),
                    along.value(reach.start),
                    along.value(reach.end),
                    bore.measured(reach.diameter) + _shape(units, reach),
                    reach.wall,
                )
                for reach in survey.reaches
            ],
        ),
        _table(
            "Known of the walls",
            ("wall", f"published, {rough.text}", "source", f"earlier, {rough.text}", "source"),
            [
                (
                    one.wall,
                    "" if one.published is None else rough.measured(one.published),
                    one.published_source or "",
                    "" if one.earlier is None else rough.measured(one.earlier),
                    one.earlier_source or "",
                )
                for one in survey.wall_histories
            ],
        ),
        _table(
            "Off-takes",
            ("off-take", f"at, {along.text}", f"takes, {flow.text}"),
            [
                (one.name, along.value(one.at), _range(flow, survey.runs[one.column].to_numpy(float)))
                for one in survey.offtakes
            ],
        ),
        _table(
            "Side valves",
            ("side valve", "where", "state"),
            [(valve.name, valve.where, valve.state) for valve in survey.side_valves],
        ),
        _table(
            "Fittings",
            ("fitting", f"at, {along.text}", "loss coefficient", "velocity head"),
            [
                (
                    fitting.name + (f" ({fitting.kind})" if fitting.kind else ""),
                    along.value(fitting.at),
                    "to be fitted"
                    if fitting.loss_coefficient is None
                    else units.of("number").measured(fitting.loss_coefficient),
                    f"{fitting.velocity} bore" if fitting.velocity == "smaller" else fitting.velocity,
                )
                for fitting in survey.fittings
            ],
        ),
        _table(
            "Gauges",
            ("gauge", "kind", "settings", "stated"),
            [
                (gauge.name, gauge.kind, _settings(units, gauge), _gauge_uncertainties(units, gauge))
                for gauge in (*survey.gauges, *survey.flow_gauges)
            ],
        ),
        _taps(units),
        _runs(units, flows),
        f"Units as found: {_units(survey)}",
        "Stated uncertainties: " + (_stated(units) or "none in [uncertainty]"),
        _bullets("Assumptions", units.sentences(survey.assumptions)),
        _bullets("Cautions", units.sentences(survey.cautions)),
    ]
    return "\n\n".join(part for part in parts if part)


def _shape(units: ShownUnits, reach: Reach) -> str:
    """Where the section is no circle, what it is; the bore is then its hydraulic diameter."""
    if reach.section is None:
        return ""
    first, second = (side.value for side in reach.section.sides)
    if reach.section.shape == "given":
        length = units.of("length")
        area = ShownUnit(f"{length.text}²", length.factor**2).value(first)
        return f" (hydraulic; {area} {length.text}², perimeter {length.value(second)} {length.text})"
    sign, bore = "×" if reach.section.shape == "rectangle" else "/", units.of("diameter")
    return f" (hydraulic; {reach.section.shape} {bore.value(first)} {sign} {bore.value(second)})"


def _range(unit: ShownUnit, values: NDArray[np.float64]) -> str:
    """The least and the largest of the flows that are taken, one where they are equal."""
    flowing = values[values > 0]
    low, high = (float(flowing.min()), float(flowing.max())) if len(flowing) else (0.0, 0.0)
    return unit.value(low) if low == high else f"{unit.value(low)} to {unit.value(high)}"


def _fluid(units: ShownUnits, fluid: Fluid) -> str:
    if fluid.table is not None:
        return f"{fluid.name}, density and viscosity from each run's temperature by {fluid.table.file}"
    if fluid.line_pressure is not None:
        pressure = units.told("pressure", fluid.line_pressure)
        return f"{fluid.name} at {pressure} absolute, from each run's temperature"
    if fluid.density is None:
        return f"{fluid.name}, density and viscosity from each run's temperature"
    given = [f"density {units.told('density', fluid.density)}"]
    if fluid.expansion is not None and fluid.density_temperature is not None:
        at = _at(units, fluid.density_temperature)
        given[0] += f" at {at}, expansion {units.per_kelvin(fluid.expansion)}"
    given += [
        f"kinematic viscosity {units.told('kinematic viscosity', value)} at {_at(units, kelvin)}"
        for kelvin, value in fluid.viscosity_at
    ]
    if fluid.viscosity is not None:
        given.append(f"viscosity {units.told('viscosity', fluid.viscosity)}")
    if fluid.kinematic_viscosity is not None:
        given.append(f"kinematic viscosity {units.told('kinematic viscosity', fluid.kinematic_viscosity)}")
    return f"{fluid.name}, {', '.join(given)}"


def _at(units: ShownUnits, kelvin: float) -> str:
    return units.told("temperature", Measured(kelvin))


def _settings(units: ShownUnits, gauge: Gauge) -> str:
    dimensions = {
        name: key.dimension.removeprefix("gas ") for name, key in GAUGE_KINDS[gauge.kind].keys.items()
    }
    found: list[str] = []
    for name, value in gauge.settings.items():
        if isinstance(value, str):
            found.append(f"{name} {value}")
            continue
        unit = units.stated(f"survey.toml gauge.{gauge.name}.{name}", dimensions[name], _SETTINGS)
        absolute = " abs" if isinstance(value, Pressure) and value.absolute else ""
        found.append(f"{name} {unit.measured(value)} {unit.text}{absolute}")
    if gauge.span is not None:
        reading = GAUGE_KINDS[gauge.kind].reading
        unit = units.stated(f"survey.toml gauge.{gauge.name}.range", reading, _SETTINGS)
        found.append(f"range {unit.value(gauge.span[0])} to {unit.value(gauge.span[1])} {unit.text}")
    if gauge.calibration is not None:
        found.append(f"calibration {gauge.calibration.file} ({len(gauge.calibration.reading)} points)")
    found += [
        f"leg of {leg.fluid} from {_end(units, leg.start, leg.start_u)} to {_end(units, leg.end, leg.end_u)}"
        for leg in gauge.legs
    ]
    return ", ".join(found)


def _end(units: ShownUnits, end: float | str, u: float | None) -> str:
    if isinstance(end, str):
        return end
    small = units.of("small head")
    spread = f" ± {small.difference(u, 2)} {small.text}" if u else ""
    return units.told("elevation", Measured(end)) + spread


def _uncertainty(units: ShownUnits, place: str, dimension: str, value: float) -> str:
    """A stated uncertainty."""
    unit = units.stated(place, dimension, _UNCERTAINTIES)
    return f"{unit.difference(value)} {unit.text}"


def _gauge_uncertainties(units: ShownUnits, gauge: Gauge) -> str:
    reading = GAUGE_KINDS[gauge.kind].reading
    named = (
        ("uncertainty", gauge.reading_u, reading),
        ("resolution", gauge.resolution, reading),
        ("u_zero", gauge.zero_u, reading),
        ("u_scale", gauge.scale_u, "dimensionless"),
    )
    return ", ".join(
        f"{name} {_uncertainty(units, f'survey.toml gauge.{gauge.name}.{name}', dimension, value)}"
        for name, value, dimension in named
        if value is not None
    )


def _taps(units: ShownUnits) -> str:
    survey = units.survey
    own = [
        name
        for name in ("gauge_elevation", "reading_u", "chainage_u", "elevation_u")
        if any(getattr(tap, name) is not None for tap in survey.taps)
    ]
    in_units = {name: _tap_unit(units, name) for name in own}
    along, level = units.of("chainage"), units.of("elevation")
    titles = {
        "gauge_elevation": "gauge elevation",
        "reading_u": "u(reading)",
        "chainage_u": "u(chainage)",
        "elevation_u": "u(elevation)",
    }
    taken = survey.readings.notna().sum()
    rows = [
        (
            tap.name,
            along.value(tap.chainage),
            level.value(tap.elevation),
            tap.gauge or "",
            f"{taken[tap.name]} of {len(survey.runs)}" if tap.name in taken else "",
            *(
                "" if (value := getattr(tap, name)) is None else in_units[name].difference(value)
                for name in own
            ),
        )
        for tap in survey.taps
    ]
    headings = (
        "tap",
        f"chainage, {along.text}",
        f"elevation, {level.text}",
        "gauge",
        "runs read",
        *(f"{titles[name]}, {in_units[name].text}" for name in own),
    )
    return _table("Taps", headings, rows)


def _tap_unit(units: ShownUnits, name: str) -> ShownUnit:
    """The unit of a column of taps."""
    column = name.removesuffix("_u").replace("_", " ") + (" uncertainty" if name.endswith("_u") else "")
    place = f"taps.csv {column}"
    if name == "gauge_elevation":
        return units.stated(place, "length", _SETTINGS)
    if name != "reading_u":
        return units.stated(place, "length", _UNCERTAINTIES)
    survey = units.survey
    kinds = {gauge.name: GAUGE_KINDS[gauge.kind].reading for gauge in survey.gauges}
    reads = next(kinds[tap.gauge] for tap in survey.taps if tap.reading_u is not None and tap.gauge in kinds)
    return units.stated(place, reads, _UNCERTAINTIES)


def _runs(units: ShownUnits, flows: np.ndarray) -> str:
    survey, flow_unit, degree = units.survey, units.of("flow"), units.of("temperature")
    static = int((flows == 0).sum())
    counted = f"{len(flows)} run{'s' * (len(flows) != 1)}, {static} of them static"
    read = survey.readings.notna().sum(axis=1).to_numpy()
    kelvin = survey.runs["temperature"].to_numpy(float)
    rows = [
        (
            run,
            plain_number(flow * flow_unit.factor, 5) if flow > 0 else "static",
            plain_number(temperature * degree.factor + degree.offset, 5) if np.isfinite(temperature) else "",
            f"{taken} of {len(survey.observations)}",
            str(repeats),
        )
        for run, flow, temperature, taken, repeats in zip(
            survey.runs["run"], flows, kelvin, read, survey.runs["repeats"], strict=True
        )
    ]
    left = len(rows) - _RUNS_SHOWN
    more = f"\n  and {left} more" if left > 0 else ""
    return (
        _table(
            f"Runs ({counted})",
            ("run", f"flow, {flow_unit.text}", f"temperature, {degree.text}", "taps read", "rows"),
            rows[:_RUNS_SHOWN],
        )
        + more
    )


def _units(survey: Survey) -> str:
    """Every unit with the columns that have it; taps of one unit as a span."""
    columns: dict[str, list[str]] = {}
    for name, unit in survey.units.items():
        if name.startswith("survey.toml "):
            continue  # shown with its value
        columns.setdefault(unit, []).append(name)
    taps = {tap.name for tap in survey.taps}
    found: list[str] = []
    for unit, names in columns.items():
        read = [name for name in names if name in taps]
        named = [name for name in names if name not in taps]
        if len(read) > 3:
            read = [f"{len(read)} taps from {read[0]} to {read[-1]}"]
        found.append(f"{unit} ({', '.join(named + read)})")
    return ", ".join(found)


def _stated(units: ShownUnits) -> str:
    dimensions = {
        "reading": "length",
        "reading_pressure": "pressure",
        "chainage": "length",
        "elevation": "length",
        "flow": "flow",
        "temperature": "temperature difference",
        "temperature_run": "temperature difference",
    }
    found: list[str] = []
    for name, value in vars(units.survey.stated).items():
        if value is None:
            continue
        number, dimension = (
            (value.value, "flow") if isinstance(value, Stated) else (value, dimensions.get(name))
        )
        if dimension is None or (isinstance(value, Stated) and value.relative):
            dimension = "dimensionless"
        label = "reading" if name == "reading_pressure" else name
        found.append(f"{label} {_uncertainty(units, f'survey.toml uncertainty.{label}', dimension, number)}")
    return ", ".join(found)


def _table(title: str, headings: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Rows under headings in columns as wide as they need; nothing where there are no rows."""
    if not rows:
        return ""
    shown = [headings, *rows]
    widths = [max(len(row[place]) for row in shown) for place in range(len(headings))]
    lines = [
        "  " + "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)) for row in shown
    ]
    return "\n".join([title, *(line.rstrip() for line in lines)])


def _bullets(title: str, sentences: Sequence[str]) -> str:
    return "\n".join([title, *(f"  - {sentence}" for sentence in sentences)]) if sentences else ""
