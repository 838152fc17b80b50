"""What `gradeline check` understood of a survey, as text."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gradeline.quantities import Measured
from gradeline.survey import GAUGE_KINDS, Fluid, Gauge, Stated, StatedUncertainties, Survey

__all__ = ["understood"]

_RUNS_SHOWN = 40


def understood(survey: Survey) -> str:
    """Return what a survey says, in SI units but for the bore (mm) and the flow (L/s)."""
    flows = survey.runs["flow"].to_numpy(float)
    parts = [
        f"{survey.title}" + (f" ({survey.date})" if survey.date else ""),
        f"Fluid: {_fluid(survey.fluid)}",
        _table(
            "Reaches",
            ("reach", "from, m", "to, m", "bore, mm", "wall"),
            [
                (
                    reach.name + (" (inlet)" if reach.inlet else ""),
                    f"{reach.start:g}",
                    f"{reach.end:g}",
                    _measured(reach.diameter, 1000),
                    reach.wall,
                )
                for reach in survey.reaches
            ],
        ),
        _table(
            "Fittings",
            ("fitting", "at, m", "loss coefficient", "velocity head"),
            [
                (
                    fitting.name + (" (change of bore)" if fitting.change_of_bore else ""),
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
                (gauge.name, gauge.kind, _settings(gauge), _gauge_uncertainties(gauge))
                for gauge in survey.gauges
            ],
        ),
        _taps(survey),
        _runs(survey, flows),
        f"Units as found: {_units(survey)}",
        "Stated uncertainties: " + (_stated(survey.stated) or "none in [uncertainty]"),
        _bullets("Assumptions", survey.assumptions),
        _bullets("Cautions", survey.cautions),
    ]
    return "\n\n".join(part for part in parts if part)


def _measured(value: Measured, factor: float = 1.0) -> str:
    """A value with its uncertainty, as stated."""
    text = f"{value.value * factor:.6g}"
    return text if value.u is None else f"{text} ± {value.u * factor:.2g}"


def _fluid(fluid: Fluid) -> str:
    if fluid.density is None:
        return f"{fluid.name}, density and viscosity from each run's temperature"
    given = [f"density {_measured(fluid.density)} kg/m³"]
    if fluid.viscosity is not None:
        given.append(f"viscosity {_measured(fluid.viscosity, 1000)} mPa s")
    if fluid.kinematic_viscosity is not None:
        given.append(f"kinematic viscosity {_measured(fluid.kinematic_viscosity, 1e6)} mm²/s")
    return f"{fluid.name}, {', '.join(given)}"


def _settings(gauge: Gauge) -> str:
    dimensions = {name: key.dimension for name, key in GAUGE_KINDS[gauge.kind].keys.items()}
    units = {"length": " m", "angle": " rad", "temperature": " K"}
    return ", ".join(
        f"{name} {value if isinstance(value, str) else _measured(value) + units.get(dimensions[name], '')}"
        for name, value in gauge.settings.items()
    )


def _gauge_uncertainties(gauge: Gauge) -> str:
    unit = "m" if GAUGE_KINDS[gauge.kind].reading == "length" else "Pa"
    named = (
        ("uncertainty", gauge.reading_u, unit),
        ("resolution", gauge.resolution, unit),
        ("u_zero", gauge.zero_u, unit),
        ("u_scale", None if gauge.scale_u is None else 100 * gauge.scale_u, "%"),
    )
    return ", ".join(f"{name} {value:g} {unit}" for name, value, unit in named if value is not None)


def _taps(survey: Survey) -> str:
    own = [
        name
        for name in ("gauge_elevation", "reading_u", "chainage_u", "elevation_u")
        if any(getattr(tap, name) is not None for tap in survey.taps)
    ]
    titles = {
        "gauge_elevation": "gauge elevation, m",
        "reading_u": "u(reading), m or Pa",
        "chainage_u": "u(chainage), m",
        "elevation_u": "u(elevation), m",
    }
    taken = survey.readings.notna().sum()
    rows = [
        (
            tap.name,
            f"{tap.chainage:g}",
            f"{tap.elevation:g}",
            tap.gauge or "",
            f"{taken[tap.name]} of {len(survey.runs)}",
            *("" if (value := getattr(tap, name)) is None else f"{value:g}" for name in own),
        )
        for tap in survey.taps
    ]
    headings = ("tap", "chainage, m", "elevation, m", "gauge", "runs read", *(titles[name] for name in own))
    return _table("Taps", headings, rows)


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


def _stated(stated: StatedUncertainties) -> str:
    units = {
        "reading": "m",
        "reading_pressure": "Pa",
        "chainage": "m",
        "elevation": "m",
        "flow": "m³/s",
        "temperature": "K",
        "temperature_run": "K",
    }
    found: list[str] = []
    for name, value in vars(stated).items():
        if value is None:
            continue
        label = "reading" if name == "reading_pressure" else name
        if name in {"flow_scale", "friction_law"}:
            found.append(f"{label} {100 * value:g} %")
        elif isinstance(value, Stated):
            number = f"{100 * value.value:g} %" if value.relative else f"{value.value:g} {units[name]}"
            found.append(f"{label} {number}")
        else:
            found.append(f"{label} {value:g} {units[name]}")
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
