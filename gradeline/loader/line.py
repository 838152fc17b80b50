"""The line from ``survey.toml``: fluid, site, reaches, fittings, gauges and stated uncertainties."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import Any, Literal, cast

from gradeline.loader.document import LINE_FLUIDS, NAME, Document, FittingTable, GaugeTable, ReachTable
from gradeline.loader.ledger import Ledger
from gradeline.quantities import Measured
from gradeline.survey import GAUGE_KINDS, Fitting, Fluid, Gauge, Reach, Site, Stated, StatedUncertainties

__all__ = [
    "build_fittings",
    "build_fluid",
    "build_gauge",
    "build_reaches",
    "build_site",
    "build_stated",
    "check_gauge_temperatures",
    "check_given_fluid",
    "within_line",
]

_SAME_PLACE = 1e-6
_ROUNDING = 1e-9
_SMALLEST_BORE, _LARGEST_BORE = 1e-4, 20.0


def within_line(chainage: float, reaches: Sequence[Reach]) -> float | None:
    """Return a chainage that lies on the line, None where it does not.

    What the conversion of two units leaves beyond an end is taken away.

    Examples
    --------
    >>> within_line(5.5000000000000009, [Reach("main", 0.0, 5.5, Measured(0.1), "steel")])
    5.5
    """
    start, end = reaches[0].start, reaches[-1].end
    return min(max(chainage, start), end) if start - _ROUNDING <= chainage <= end + _ROUNDING else None


def build_fluid(ledger: Ledger, document: Document) -> Fluid | None:
    """Return the flowing fluid, None where its table is at fault."""
    table = document.fluid
    if table is None:
        return None
    given = {
        "density": table.density,
        "viscosity": table.viscosity,
        "kinematic_viscosity": table.kinematic_viscosity,
    }
    stated = [key for key, value in given.items() if value is not None]
    if table.name == "water":
        for key in stated:
            ledger.problem(
                NAME,
                None,
                f"fluid.{key}",
                "water has its properties from the temperature; leave the key out, or give the fluid another name",
            )
        return None if stated else Fluid("water")
    if not stated:
        hint = " (did you mean 'water'?)" if _near_water(table.name) else ""
        ledger.problem(
            NAME,
            None,
            "fluid.name",
            f"unknown fluid {table.name!r}{hint}; known is water, any other fluid needs density and viscosity",
        )
        return None
    if table.density is None:
        ledger.problem(
            NAME, None, "fluid.density", 'the key is missing; add it, such as density = "868 kg/m^3"'
        )
    if table.viscosity is None and table.kinematic_viscosity is None:
        ledger.problem(
            NAME, None, "fluid.viscosity", 'the key is missing; add it, such as viscosity = "31 mPa s"'
        )
    if table.viscosity is not None and table.kinematic_viscosity is not None:
        ledger.problem(
            NAME, None, "fluid.kinematic_viscosity", "viscosity is given as well; keep one of the two"
        )
    return Fluid(table.name, table.density, table.viscosity, table.kinematic_viscosity)


def _near_water(name: str) -> bool:
    import difflib  # noqa: PLC0415

    return bool(difflib.get_close_matches(name.casefold(), ["water"], cutoff=0.6))


def build_site(document: Document) -> Site:
    """Return where the line lies."""
    table = document.site
    return Site() if table is None else Site(table.latitude, table.altitude, table.gravity)


def build_reaches(ledger: Ledger, document: Document) -> tuple[Reach, ...] | None:
    """Return the reaches in flow order, None where any of them or their order is at fault."""
    reaches: list[Reach] = []
    sound = True
    for place, table in enumerate(document.reaches, start=1):
        if table is None:
            sound = False
            continue
        path = f"reach[{place}]"
        if not table.end > table.start:
            sound = False
            ledger.problem(
                NAME,
                None,
                f"{path}.to",
                f"the reach ends at {table.end:g} m, not after its start at {table.start:g} m; "
                "chainage increases downstream",
            )
        _check_bore(ledger, document, table, path)
        if any(table.name == other.name for other in reaches):
            sound = False
            ledger.problem(
                NAME, None, f"{path}.name", f"another reach is called {table.name!r}; give each its own name"
            )
        reaches.append(Reach(table.name, table.start, table.end, table.diameter, table.wall, table.inlet))
    if len(reaches) < len(document.reaches):
        return None
    for place, (before, after) in enumerate(itertools.pairwise(reaches), start=2):
        if abs(before.end - after.start) > 1e-9:
            sound = False
            ledger.problem(
                NAME,
                None,
                f"reach[{place}].from",
                f"the reach starts at {after.start:g} m, but {before.name!r} ends at {before.end:g} m; "
                "reaches follow each other without a gap or overlap",
            )
    return tuple(reaches) if sound and reaches else None


def _check_bore(ledger: Ledger, document: Document, table: ReachTable, path: str) -> None:
    """Note a bore that no pipe has, most often one in the wrong unit."""
    bore, length = table.diameter.value, table.end - table.start
    on_plan = document.survey is not None and document.survey.chainage_is == "plan"  # a steep pipe is longer
    if bore > _LARGEST_BORE:
        fault = f"a bore of {bore:g} m is above {_LARGEST_BORE:g} m"
    elif bore < _SMALLEST_BORE:
        fault = f"a bore of {1000 * bore:g} mm is below {1000 * _SMALLEST_BORE:g} mm"
    elif bore > length > 0 and not on_plan:
        fault = f"a bore of {bore:g} m is larger than the reach's length of {length:g} m"
    else:
        return
    ledger.problem(NAME, None, f"{path}.diameter", f"{fault}; is the unit right? Mend the value or the unit")


def build_fittings(
    ledger: Ledger, document: Document, reaches: Sequence[Reach] | None
) -> tuple[Fitting, ...]:
    """Return the fittings in the order of the file; those at fault are left out and noted."""
    fittings: list[Fitting] = []
    for place, table in enumerate(document.fittings, start=1):
        if table is None:
            continue
        path = f"fitting[{place}]"
        if any(table.name == other.name for other in fittings):
            ledger.problem(
                NAME,
                None,
                f"{path}.name",
                f"another fitting is called {table.name!r}; give each its own name",
            )
            continue
        at = table.at
        if reaches is not None:
            on_line = within_line(at, reaches)
            if on_line is None:
                ledger.problem(
                    NAME,
                    None,
                    f"{path}.at",
                    f"{at:g} m lies outside every reach ({reaches[0].start:g} m to {reaches[-1].end:g} m); "
                    "mend the chainage or extend a reach",
                )
                continue
            at = on_line
            if table.kind is not None:
                found = _change_of_bore(ledger, table, path, reaches, fittings)
                if found is None:
                    continue
                at = found
        fittings.append(
            Fitting(
                table.name,
                at,
                table.loss_coefficient,
                cast(Literal["smaller", "upstream", "downstream"], table.velocity),
                table.kind is not None,
                table.approach,
                table.recovery,
            )
        )
    return tuple(fittings)


def _change_of_bore(
    ledger: Ledger, table: FittingTable, path: str, reaches: Sequence[Reach], others: Sequence[Fitting]
) -> float | None:
    """The chainage of the boundary that a change of bore stands for, None where there is none or it is taken."""
    boundaries = [
        after.start
        for before, after in itertools.pairwise(reaches)
        if before.diameter.value != after.diameter.value
    ]
    at = next((boundary for boundary in boundaries if abs(boundary - table.at) <= _SAME_PLACE), None)
    if at is None:
        known = ", ".join(f"{boundary:g} m" for boundary in boundaries)
        ledger.problem(
            NAME,
            None,
            f"{path}.at",
            f"the bore does not change at {table.at:g} m; "
            + (f"it changes at {known}" if known else "all reaches have one bore, so leave out the kind"),
        )
    elif any(other.change_of_bore and other.at == at for other in others):
        ledger.problem(
            NAME,
            None,
            f"{path}.at",
            f"two fittings stand for the change of bore at {at:g} m; keep one of them",
        )
        return None
    return at


def build_gauge(table: GaugeTable) -> Gauge | None:
    """Return the gauge that a table describes, None where the table is at fault."""
    if table.kind is None or table.values is None:
        return None
    values = table.values
    settings = {key: values[key] for key in GAUGE_KINDS[table.kind].keys if values[key] is not None}
    return Gauge(
        table.name,
        table.kind,
        cast("dict[str, Measured | str]", settings),
        *(_value(values[key]) for key in ("uncertainty", "resolution", "u_zero", "u_scale")),
    )


def check_gauge_temperatures(
    ledger: Ledger, document: Document, fluid: Fluid, temperatures: Sequence[float]
) -> None:
    """Note every column or connecting line whose fluid has no known density at its temperature.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    document : Document
        The gauges.
    fluid : Fluid
        The flowing fluid, which fills lines and columns unless they say otherwise.
    temperatures : sequence of float
        Of the runs, K, NaN where not given; they count where a gauge states none.
    """
    for gauge in document.gauges.values():
        values = gauge.values or {}
        flowing = "water" if fluid.density is None else None
        for key, name in (
            ("column_temperature", flowing),
            ("line_temperature", values.get("line_fluid") or flowing),
        ):
            stated = values.get(key)
            if name is None or (stated is None and (name == flowing or key == "column_temperature")):
                continue
            low, high = LINE_FLUIDS[name]
            used = [stated.value] if stated is not None else list(temperatures)
            if all(low < value <= high for value in used):
                continue
            whose = (
                "its temperature" if stated is not None else "a run's temperature, as the line states none,"
            )
            ledger.problem(
                NAME,
                None,
                f"gauge.{gauge.name}.{key}",
                f"{whose} is missing or does not lie above {low - 273.15:g} degC and up to {high - 273.15:g} degC, "
                f"where the density of {name} is known; "
                + ("mend the value or the unit" if stated is not None else f"add {key}"),
            )


def check_given_fluid(ledger: Ledger, document: Document, fluid: Fluid) -> None:
    """Note the temperatures of columns and lines that change nothing, since the fluid's density is given."""
    if fluid.density is None:
        return
    for gauge in document.gauges.values():
        values = gauge.values or {}
        idle = ["column_temperature"] + ([] if values.get("line_fluid") else ["line_temperature"])
        for key in idle:
            if values.get(key) is not None:
                ledger.problem(
                    NAME,
                    None,
                    f"gauge.{gauge.name}.{key}",
                    f"the key has no effect, as [fluid] gives one density of {fluid.name} for all temperatures; "
                    "take it away",
                )


def _value(stated: Stated | None) -> Any:
    return None if stated is None else stated.value


def build_stated(ledger: Ledger, document: Document) -> StatedUncertainties:
    """Return the stated uncertainties of the whole survey."""
    table = document.uncertainty
    if table is None:
        return StatedUncertainties()
    dimension, reading = table.reading or ("length", None)
    kinds = [gauge.kind for gauge in document.gauges.values()]
    if table.reading and None not in kinds and kinds:
        read = sorted({GAUGE_KINDS[kind].reading for kind in kinds if kind is not None})
        if dimension not in read:
            ledger.problem(
                NAME,
                None,
                "uncertainty.reading",
                f"the value is a {dimension}, but every gauge reads a {read[0]}; give a {read[0]}",
            )
    return StatedUncertainties(
        reading=reading if dimension == "length" else None,
        reading_pressure=reading if dimension == "pressure" else None,
        chainage=_value(table.chainage),
        elevation=_value(table.elevation),
        flow=table.flow,
        flow_scale=_value(table.flow_scale),
        temperature=_value(table.temperature),
        temperature_run=_value(table.temperature_run),
        friction_law=_value(table.friction_law),
    )
