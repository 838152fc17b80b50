"""What `gradeline check` understood of a survey, as text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from gradeline.cli.flow_lines import flow_text
from gradeline.quantities import Measured, Unit, parse_unit
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


def understood(survey: Survey) -> str:
    """Return what a survey says: SI units but for the bore (mm) and the flow (L/s), what is stated as stated."""
    survey = metered_flow(survey).survey
    flows = survey.runs["flow"].to_numpy(float)
    parts = [
        f"{survey.title}" + (f" ({survey.date})" if survey.date else ""),
        f"Fluid: {_fluid(survey.fluid)}",
        flow_text(survey.flow),
        _table(
            "Reaches",
            ("reach", "from, m", "to, m", "bore, mm", "wall"),
            [
                (
                    reach.name + (" (inlet)" if reach.inlet else ""),
                    f"{reach.start:g}",
                    f"{reach.end:g}",
                    _measured(reach.diameter, 1000) + _shape(reach),
                    reach.wall,
                )
                for reach in survey.reaches
            ],
        ),
        _table(
            "Known of the walls",
            ("wall", "published, mm", "source", "earlier, mm", "source"),
            [
                (
                    one.wall,
                    "" if one.published is None else _measured(one.published, 1000),
                    one.published_source or "",
                    "" if one.earlier is None else _measured(one.earlier, 1000),
                    one.earlier_source or "",
                )
                for one in survey.wall_histories
            ],
        ),
        _table(
            "Off-takes",
            ("off-take", "at, m", "takes, L/s"),
            [
                (one.name, f"{one.at:g}", _range(1000 * survey.runs[one.column].to_numpy(float)))
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
            ("fitting", "at, m", "loss coefficient", "velocity head"),
            [
                (
                    fitting.name + (f" ({fitting.kind})" if fitting.kind else ""),
                    f"{fitting.at:g}",
                    "to be fitted"
                    if fitting.loss_coefficient is None
                    else _measured(fitting.loss_coefficient),
                    f"{fitting.velocity} bore" if fitting.velocity == "smaller" else fitting.velocity,
                )
                for fitting in survey.fittings
            ],
        ),
        _table(
            "Gauges",
            ("gauge", "kind", "settings", "stated"),
            [
                (gauge.name, gauge.kind, _settings(survey, gauge), _gauge_uncertainties(survey, gauge))
                for gauge in (*survey.gauges, *survey.flow_gauges)
            ],
        ),
        _taps(survey),
        _runs(survey, flows),
        f"Units as found: {_units(survey)}",
        "Stated uncertainties: " + (_stated(survey) or "none in [uncertainty]"),
        _bullets("Assumptions", survey.assumptions),
        _bullets("Cautions", survey.cautions),
    ]
    return "\n\n".join(part for part in parts if part)


def _measured(value: Measured, factor: float = 1.0) -> str:
    """A value with its uncertainty, as stated."""
    text = f"{value.value * factor:.6g}"
    return text if value.u is None else f"{text} ± {value.u * factor:.2g}"


def _shape(reach: Reach) -> str:
    """Where the section is no circle, what it is; the bore is then its hydraulic diameter."""
    if reach.section is None:
        return ""
    first, second = (side.value for side in reach.section.sides)
    if reach.section.shape == "given":
        return f" (hydraulic; {first:.6g} m², perimeter {second:.6g} m)"
    sign = "×" if reach.section.shape == "rectangle" else "/"
    return f" (hydraulic; {reach.section.shape} {1000 * first:.6g} {sign} {1000 * second:.6g})"


def _range(values: NDArray[np.float64]) -> str:
    """The least and the largest of the flows that are taken, one where they are equal."""
    flowing = values[values > 0]
    low, high = (float(flowing.min()), float(flowing.max())) if len(flowing) else (0.0, 0.0)
    return f"{low:.6g}" if low == high else f"{low:.6g} to {high:.6g}"


def _fluid(fluid: Fluid) -> str:
    if fluid.table is not None:
        return f"{fluid.name}, density and viscosity from each run's temperature by {fluid.table.file}"
    if fluid.line_pressure is not None:
        return f"{fluid.name} at {_measured(fluid.line_pressure, 1e-3)} kPa absolute, from each run's temperature"
    if fluid.density is None:
        return f"{fluid.name}, density and viscosity from each run's temperature"
    given = [f"density {_measured(fluid.density)} kg/m³"]
    if fluid.expansion is not None and fluid.density_temperature is not None:
        at = f"{fluid.density_temperature - 273.15:g} °C"
        given[0] += f" at {at}, expansion {_measured(fluid.expansion)} 1/K"
    given += [
        f"kinematic viscosity {_measured(value, 1e6)} mm²/s at {kelvin - 273.15:g} °C"
        for kelvin, value in fluid.viscosity_at
    ]
    if fluid.viscosity is not None:
        given.append(f"viscosity {_measured(fluid.viscosity, 1000)} mPa s")
    if fluid.kinematic_viscosity is not None:
        given.append(f"kinematic viscosity {_measured(fluid.kinematic_viscosity, 1e6)} mm²/s")
    return f"{fluid.name}, {', '.join(given)}"


def _settings(survey: Survey, gauge: Gauge) -> str:
    dimensions = {
        name: key.dimension.removeprefix("gas ") for name, key in GAUGE_KINDS[gauge.kind].keys.items()
    }
    found: list[str] = []
    for name, value in gauge.settings.items():
        if isinstance(value, str):
            found.append(f"{name} {value}")
            continue
        unit = _unit(survey, f"survey.toml gauge.{gauge.name}.{name}", dimensions[name], _SETTINGS)
        u = None if value.u is None else unit.difference_from_si(value.u)
        absolute = " abs" if isinstance(value, Pressure) and value.absolute else ""
        found.append(f"{name} {_measured(Measured(unit.from_si(value.value), u))} {unit.text}{absolute}")
    if gauge.span is not None:
        reading = GAUGE_KINDS[gauge.kind].reading
        unit = _unit(survey, f"survey.toml gauge.{gauge.name}.range", reading, _SETTINGS)
        found.append(
            f"range {unit.from_si(gauge.span[0]):.6g} to {unit.from_si(gauge.span[1]):.6g} {unit.text}"
        )
    if gauge.calibration is not None:
        found.append(f"calibration {gauge.calibration.file} ({len(gauge.calibration.reading)} points)")
    found += [
        f"leg of {leg.fluid} from {_end(leg.start, leg.start_u)} to {_end(leg.end, leg.end_u)}"
        for leg in gauge.legs
    ]
    return ", ".join(found)


def _end(end: float | str, u: float | None) -> str:
    return end if isinstance(end, str) else f"{end:g} m" + (f" ± {1000 * u:.2g} mm" if u else "")


def _unit(survey: Survey, place: str, dimension: str, usual: Mapping[str, str]) -> Unit:
    """The unit in which a value was stated, the usual one where a survey was not read from files."""
    return parse_unit(survey.units.get(place, usual[dimension]), dimension)


def _uncertainty(survey: Survey, place: str, dimension: str, value: float) -> str:
    """A stated uncertainty in the unit in which it was stated."""
    unit = _unit(survey, place, dimension, _UNCERTAINTIES)
    return f"{unit.difference_from_si(value):.6g} {unit.text}"


def _gauge_uncertainties(survey: Survey, gauge: Gauge) -> str:
    reading = GAUGE_KINDS[gauge.kind].reading
    named = (
        ("uncertainty", gauge.reading_u, reading),
        ("resolution", gauge.resolution, reading),
        ("u_zero", gauge.zero_u, reading),
        ("u_scale", gauge.scale_u, "dimensionless"),
    )
    return ", ".join(
        f"{name} {_uncertainty(survey, f'survey.toml gauge.{gauge.name}.{name}', dimension, value)}"
        for name, value, dimension in named
        if value is not None
    )


def _taps(survey: Survey) -> str:
    own = [
        name
        for name in ("gauge_elevation", "reading_u", "chainage_u", "elevation_u")
        if any(getattr(tap, name) is not None for tap in survey.taps)
    ]
    units = {name: _tap_unit(survey, name) for name in own}
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
            f"{tap.chainage:g}",
            f"{tap.elevation:g}",
            tap.gauge or "",
            f"{taken[tap.name]} of {len(survey.runs)}" if tap.name in taken else "",
            *(
                ""
                if (value := getattr(tap, name)) is None
                else f"{units[name].difference_from_si(value):.6g}"
                for name in own
            ),
        )
        for tap in survey.taps
    ]
    headings = (
        "tap",
        "chainage, m",
        "elevation, m",
        "gauge",
        "runs read",
        *(f"{titles[name]}, {units[name].text}" for name in own),
    )
    return _table("Taps", headings, rows)


def _tap_unit(survey: Survey, name: str) -> Unit:
    """The unit of a column of taps."""
    column = name.removesuffix("_u").replace("_", " ") + (" uncertainty" if name.endswith("_u") else "")
    place = f"taps.csv {column}"
    if name == "gauge_elevation":
        return _unit(survey, place, "length", _SETTINGS)
    if name != "reading_u":
        return _unit(survey, place, "length", _UNCERTAINTIES)
    kinds = {gauge.name: GAUGE_KINDS[gauge.kind].reading for gauge in survey.gauges}
    reads = next(kinds[tap.gauge] for tap in survey.taps if tap.reading_u is not None and tap.gauge in kinds)
    return _unit(survey, place, reads, _UNCERTAINTIES)


def _runs(survey: Survey, flows: np.ndarray) -> str:
    static = int((flows == 0).sum())
    counted = f"{len(flows)} run{'s' * (len(flows) != 1)}, {static} of them static"
    read = survey.readings.notna().sum(axis=1).to_numpy()
    celsius = survey.runs["temperature"].to_numpy(float) - 273.15
    rows = [
        (
            run,
            f"{1000 * flow:.5g}" if flow > 0 else "static",
            f"{temperature:.5g}" if np.isfinite(temperature) else "",
            f"{taken} of {len(survey.observations)}",
            str(repeats),
        )
        for run, flow, temperature, taken, repeats in zip(
            survey.runs["run"], flows, celsius, read, survey.runs["repeats"], strict=True
        )
    ]
    left = len(rows) - _RUNS_SHOWN
    more = f"\n  and {left} more" if left > 0 else ""
    return (
        _table(
            f"Runs ({counted})",
            ("run", "flow, L/s", "temperature, °C", "taps read", "rows"),
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


def _stated(survey: Survey) -> str:
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
    for name, value in vars(survey.stated).items():
        if value is None:
            continue
        number, dimension = (
            (value.value, "flow") if isinstance(value, Stated) else (value, dimensions.get(name))
        )
        if dimension is None or (isinstance(value, Stated) and value.relative):
            dimension = "dimensionless"
        label = "reading" if name == "reading_pressure" else name
        found.append(f"{label} {_uncertainty(survey, f'survey.toml uncertainty.{label}', dimension, number)}")
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
