"""The line from ``survey.toml``: fluid, site, reaches, fittings, gauges and stated uncertainties."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from typing import Any, Literal, cast

from gradeline.fitting_kinds import CHANGES_OF_BORE
from gradeline.loader.bore import Bore, BoreFaultError, bore_of
from gradeline.loader.document import (
    LINE_FLUIDS,
    NAME,
    Document,
    FittingTable,
    GaugeTable,
    LegTable,
    ReachTable,
)
from gradeline.loader.gauge_keys import Elevation
from gradeline.loader.ledger import Ledger
from gradeline.quantities import Measured
from gradeline.survey import GAUGE_KINDS, Fitting, Fluid, Gauge, Leg, Reach, Site, Stated, StatedUncertainties

__all__ = [
    "build_fittings",
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
#: The key that a bore out of bounds is told at, where it was not stated itself.
_WAYS_IN = ("nominal", "fill_volume", "area", "width", "outer")


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
        bore = _bore(ledger, document, table, path)
        if any(table.name == other.name for other in reaches):
            sound = False
            ledger.problem(
                NAME, None, f"{path}.name", f"another reach is called {table.name!r}; give each its own name"
            )
        if bore is None:
            continue
        reaches.append(
            Reach(table.name, table.start, table.end, bore.diameter, table.wall, table.inlet, bore.section)
        )
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


def _bore(ledger: Ledger, document: Document, table: ReachTable, path: str) -> Bore | None:
    """The bore of a reach with what is said of it, None where its keys are at fault."""
    try:
        bore = bore_of(table)
    except BoreFaultError as fault:
        ledger.problem(NAME, None, f"{path}.{fault.key}", fault.message)
        return None
    key = "diameter"
    if table.diameter is None:
        key = next(name for name in _WAYS_IN if getattr(table, name) is not None)
    _check_bore(ledger, document, table, bore.diameter.value, f"{path}.{key}")
    if bore.said is not None:
        ledger.assumptions.append(f"The bore of reach {table.name!r} {bore.said}.")
    if bore.unstated:
        what = " and the ".join(bore.unstated)
        verb = "is" if len(bore.unstated) == 1 else "are"
        ledger.cautions.append(
            f"The uncertainty of the {what} of reach {table.name!r} {verb} not stated: it contributes nothing to that of the "
            "bore."
        )
    return bore


def _check_bore(ledger: Ledger, document: Document, table: ReachTable, bore: float, key: str) -> None:
    """Note a bore that no pipe has, most often one in the wrong unit."""
    length = table.end - table.start
    on_plan = document.survey is not None and document.survey.chainage_is == "plan"  # a steep pipe is longer
    if bore > _LARGEST_BORE:
        fault = f"a bore of {bore:g} m is above {_LARGEST_BORE:g} m"
    elif bore < _SMALLEST_BORE:
        fault = f"a bore of {1000 * bore:g} mm is below {1000 * _SMALLEST_BORE:g} mm"
    elif bore > length > 0 and not on_plan:
        fault = f"a bore of {bore:g} m is larger than the reach's length of {length:g} m"
    else:
        return
    ledger.problem(NAME, None, key, f"{fault}; is the unit right? Mend the value or the unit")


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
            if table.kind in CHANGES_OF_BORE:
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
                table.kind in CHANGES_OF_BORE,
                table.approach,
                table.recovery,
                table.kind,
                _fitting_length(ledger, table, path, reaches, at),
            )
        )
    return tuple(fittings)


def _fitting_length(
    ledger: Ledger, table: FittingTable, path: str, reaches: Sequence[Reach] | None, at: float
) -> float:
    """The length of a fitting along the axis, 0 where none is given; notes one that means nothing."""
    if not table.length:
        return 0.0
    if table.loss_coefficient is not None:
        ledger.problem(
            NAME,
            None,
            f"{path}.length",
            "the length counts only for a loss coefficient that is fitted; take it away, or write "
            'loss_coefficient = "fit"',
        )
    elif reaches is not None and not (
        reaches[0].start <= at - table.length / 2 and at + table.length / 2 <= reaches[-1].end
    ):
        ledger.problem(
            NAME,
            None,
            f"{path}.length",
            f"{table.length:g} m with its middle at {at:g} m goes beyond the line ({reaches[0].start:g} m to "
            f"{reaches[-1].end:g} m); is the unit right? Mend the length, the chainage or the reach",
        )
    return table.length


def _change_of_bore(
    ledger: Ledger, table: FittingTable, path: str, reaches: Sequence[Reach], others: Sequence[Fitting]
) -> float | None:
    """The chainage of the boundary that a change of bore stands for, None where there is none or it is taken."""
    boundaries = [
        after.start
        for before, after in itertools.pairwise(reaches)
        if before.diameter.value != after.diameter.value or before.section != after.section
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
    elif _other_way(table, reaches, at):
        widens = CHANGES_OF_BORE[table.kind or ""] < 0
        ledger.problem(
            NAME,
            None,
            f"{path}.kind",
            f"the bore {'widens' if widens else 'narrows'} at {table.at:g} m, where {table.kind!r} is stated; write "
            f"{'sudden expansion' if widens else 'sudden contraction'!r}, or mend the bores",
        )
        return None
    elif any(other.change_of_bore and other.at == at for other in others):
        ledger.problem(
            NAME,
            None,
            f"{path}.at",
            f"two fittings stand for the change of bore at {at:g} m; keep one of them",
        )
        return None
    return at


def _other_way(table: FittingTable, reaches: Sequence[Reach], at: float) -> bool:
    """Whether the bore changes the other way than the kind says; of sections that are no circle nothing is said."""
    before, after = next(pair for pair in itertools.pairwise(reaches) if pair[1].start == at)
    if before.section is not None or after.section is not None:
        return False
    return CHANGES_OF_BORE[table.kind or ""] * (after.diameter.value - before.diameter.value) < 0


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
        reading_u=_value(values["uncertainty"]),
        resolution=_value(values["resolution"]),
        zero_u=_value(values["u_zero"]),
        scale_u=_value(values["u_scale"]),
        span=values["range"],
        legs=tuple(_leg(leg) for leg in table.legs if leg is not None),
    )


def _leg(table: LegTable) -> Leg:
    (start, start_u), (end, end_u) = (
        (float(each), each.u) if isinstance(each, Elevation) else (each, None)
        for each in (table.start, table.end)
    )
    return Leg(table.fluid, table.density, start, end, start_u, end_u)


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
        flowing = "water" if fluid.is_water else None
        for key, name in (
            ("column_temperature", flowing),
            ("line_temperature", values.get("line_fluid") or flowing),
        ):
            stated = values.get(key)
            if name is None and stated is not None and fluid.follows_temperature:
                _check_own_span(ledger, f"gauge.{gauge.name}.{key}", fluid, stated.value)
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


def _check_own_span(ledger: Ledger, key: str, fluid: Fluid, temperature: float) -> None:
    """Note a column or line of the flowing fluid where the properties of that are not known."""
    low, high = fluid.span or (0.0, math.inf)
    if not low <= temperature <= high:
        ledger.problem(
            NAME,
            None,
            key,
            f"the temperature does not lie from {low - 273.15:g} to {high - 273.15:g} degC, where the density of {fluid.name} is "
            "known; mend the value or the unit",
        )


def check_given_fluid(ledger: Ledger, document: Document, fluid: Fluid) -> None:
    """Note the temperatures of columns and lines that change nothing, since the fluid's density is given."""
    if fluid.density is None or fluid.expansion is not None:
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
