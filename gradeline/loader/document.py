"""`survey.toml` to checked tables: its syntax, its keys and the value of each key."""

from __future__ import annotations

import functools
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, ValidationError, create_model

from gradeline.fitting_kinds import fitting_kinds
from gradeline.loader.bore import Diameter, MeasuredArea, Number, Shape, Thickness, Volume
from gradeline.loader.cells import nearest
from gradeline.loader.flow_gauges import TAPPINGS, FlowGauge, flow_gauges_of, joined, named_gauges
from gradeline.loader.flow_keys import FlowTable, read_flow_table
from gradeline.loader.fluids import Expansion, Humidity, LinePressure, Temperature, TwoViscosities
from gradeline.loader.gauge_keys import (
    EXAMPLES,
    Elevation,
    gauge_key_reader,
    plain_value,
    range_reader,
    read_file_name,
    read_leg_end,
)
from gradeline.loader.keys import (
    Bores,
    Chainage,
    KelvinUncertainty,
    LengthUncertainty,
    RelativeUncertainty,
    Text,
    Truth,
    choice_reader,
    exact_reader,
    measured_reader,
    read_date,
    read_loss_coefficient,
    read_reading_uncertainty,
    uncertainty_reader,
    written,
)
from gradeline.loader.ledger import PLACEHOLDER, Ledger
from gradeline.loader.logger.settings import LoggerTable
from gradeline.loader.tables import read_data
from gradeline.loader.toml import DOCUMENT
from gradeline.loader.walls import WallTable, read_walls
from gradeline.quantities import Measured
from gradeline.quantities.parsing import unit_of
from gradeline.survey import GAUGE_KINDS, Stated

__all__ = [
    "LINE_FLUIDS",
    "NAME",
    "Document",
    "FittingTable",
    "GaugeTable",
    "LegTable",
    "OfftakeTable",
    "ReachTable",
    "SideValveTable",
    "read_document",
]

#: The file's name in the folder.
NAME = DOCUMENT

#: Fluids whose density is known from their temperature, for the connecting line of a gauge, and where, K.
LINE_FLUIDS = {"air": (223.15, 373.15), "mercury": (253.15, 373.15), "water": (273.15, 373.15)}

_SHOWN_DEPTH = 12


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, arbitrary_types_allowed=True)


class SurveyTable(_Table):
    """``[survey]``."""

    title: Text | None = None
    date: Annotated[str, BeforeValidator(read_date)] | None = None
    chainage_is: Annotated[str, BeforeValidator(choice_reader("axis", "plan"))] = "axis"


class FluidTable(_Table):
    """``[fluid]``."""

    name: Text
    density: (
        Annotated[Measured, BeforeValidator(measured_reader("density", "868 kg/m^3", 0, strict=True))] | None
    ) = None
    viscosity: (
        Annotated[Measured, BeforeValidator(measured_reader("dynamic viscosity", "31 mPa s", 0, strict=True))]
        | None
    ) = None
    kinematic_viscosity: (
        Annotated[
            Measured, BeforeValidator(measured_reader("kinematic viscosity", "35 mm^2/s", 0, strict=True))
        ]
        | None
    ) = None
    viscosity_at: TwoViscosities | None = None
    density_temperature: Temperature | None = None
    expansion: Expansion | None = None
    properties: Text | None = None
    u_density: RelativeUncertainty | None = None
    u_viscosity: RelativeUncertainty | None = None
    line_pressure: LinePressure | None = None
    relative_humidity: Humidity | None = None


class SiteTable(_Table):
    """``[site]``."""

    latitude: Annotated[float, BeforeValidator(exact_reader("angle", "53.4 deg", -1.5708, 1.5708))] | None = (
        None
    )
    altitude: Annotated[float, BeforeValidator(exact_reader("length", "38 m", -500, 9000))] | None = None
    gravity: (
        Annotated[Measured, BeforeValidator(measured_reader("acceleration", "9.8137 m/s^2", 9.7, 9.9))] | None
    ) = None


class ReachTable(_Table):
    """One ``[[reach]]``."""

    name: Text = Field(examples=["test length"])
    start: Chainage = Field(alias="from", examples=["0 m"])
    end: Chainage = Field(alias="to", examples=["5.5 m"])
    diameter: Diameter | None = None
    nominal: Diameter | None = None
    wall_thickness: Thickness | None = None
    lining: Thickness | None = None
    fill_volume: Volume | None = None
    fill_length: Diameter | None = None
    shape: Shape | None = None
    width: Diameter | None = None
    height: Diameter | None = None
    outer: Diameter | None = None
    inner: Diameter | None = None
    area: MeasuredArea | None = None
    perimeter: Diameter | None = None
    laminar_constant: Number | None = None
    wall: Text = Field(examples=["copper"])
    inlet: Truth = False


class FittingTable(_Table):
    """One ``[[fitting]]``."""

    name: Text = Field(examples=["gate valve"])
    at: Chainage = Field(examples=["3.1 m"])
    loss_coefficient: Annotated[Measured | None, BeforeValidator(read_loss_coefficient)] = Field(
        examples=["fit"]
    )
    kind: Annotated[str, BeforeValidator(choice_reader(*fitting_kinds()))] | None = None
    length: Annotated[float, BeforeValidator(exact_reader("length", "0.15 m", 0.0))] | None = None
    velocity: Annotated[str, BeforeValidator(choice_reader("smaller", "upstream", "downstream"))] = "smaller"
    approach: Bores = 2.0
    recovery: Bores = 10.0


class OfftakeTable(_Table):
    """One ``[[offtake]]``."""

    name: Text = Field(examples=["hydrant 4"])
    at: Chainage = Field(examples=["310 m"])
    flow: (
        Annotated[Measured, BeforeValidator(measured_reader("flow", "2 L/s +/- 0.1 L/s", 0, strict=True))]
        | None
    ) = None
    u_flow: Annotated[Stated, BeforeValidator(uncertainty_reader("flow", "2 %", kind="either"))] | None = None


class SideValveTable(_Table):
    """One ``[[side_valve]]``."""

    name: Text = Field(examples=["lane valve"])
    state: Annotated[str, BeforeValidator(choice_reader("shut", "open", "unknown"))] = Field(
        examples=["shut"]
    )
    at: Chainage | None = None


class UncertaintyTable(_Table):
    """``[uncertainty]``."""

    reading: Annotated[tuple[str, float], BeforeValidator(read_reading_uncertainty)] | None = None
    chainage: LengthUncertainty | None = None
    elevation: LengthUncertainty | None = None
    flow: Annotated[Stated, BeforeValidator(uncertainty_reader("flow", "0.4 %", kind="either"))] | None = None
    flow_scale: RelativeUncertainty | None = None
    temperature: KelvinUncertainty | None = None
    temperature_run: KelvinUncertainty | None = None
    friction_law: RelativeUncertainty | None = None


class LegTable(_Table):
    """One ``[[gauge.NAME.leg]]``."""

    fluid: Text = Field(examples=["mercury"])
    density: (
        Annotated[Measured, BeforeValidator(measured_reader("density", "868 kg/m^3", 0, strict=True))] | None
    ) = None
    start: Annotated[Elevation | str, BeforeValidator(read_leg_end)] = Field(alias="from", examples=["T1"])
    end: Annotated[Elevation | str, BeforeValidator(read_leg_end)] = Field(alias="to", examples=["1.2 m"])


@dataclass(frozen=True)
class GaugeTable:
    """One ``[gauge.NAME]``: its kind, None where that is unknown, and its values, None where any is at fault."""

    name: str
    kind: str | None
    values: Mapping[str, Any] | None
    legs: tuple[LegTable | None, ...] = ()


@dataclass(frozen=True)
class Document:
    """What ``survey.toml`` says, table by table; None stands for a table at fault.

    `units` has the unit of each value of the gauges and of ``[uncertainty]`` as written, by its key. `flow_gauges` are those
    that ``[flow]`` names; all others are the line's.
    """

    survey: SurveyTable | None
    fluid: FluidTable | None
    site: SiteTable | None
    uncertainty: UncertaintyTable | None
    reaches: tuple[ReachTable | None, ...]
    fittings: tuple[FittingTable | None, ...]
    offtakes: tuple[OfftakeTable | None, ...] = ()
    side_valves: tuple[SideValveTable | None, ...] = ()
    gauges: Mapping[str, GaugeTable] = field(default_factory=dict)
    units: Mapping[str, str] = field(default_factory=dict)
    flow: FlowTable | None = field(default_factory=FlowTable)
    flow_gauges: Mapping[str, GaugeTable] = field(default_factory=dict)
    walls: Mapping[str, WallTable] = field(default_factory=dict)
    logger: LoggerTable | None = None


@functools.cache
def _gauge_model(kind: str) -> type[_Table]:
    """The model of one gauge kind, from `GAUGE_KINDS` and the keys that every gauge takes."""
    known = GAUGE_KINDS[kind]
    example = "0.5 mm" if known.reading == "length" else "0.1 kPa"
    reading = Annotated[Stated, BeforeValidator(uncertainty_reader(known.reading, example, kind="absolute"))]
    fields: dict[str, Any] = {
        "uncertainty": (reading | None, None),
        "resolution": (reading | None, None),
        "u_zero": (reading | None, None),
        "u_scale": (RelativeUncertainty | None, None),
    }
    span = range_reader(known.reading, "0 to 1.2 m" if known.reading == "length" else "0 to 600 kPa")
    fields["range"] = (Annotated[Any, BeforeValidator(span)], None)
    if not known.legs:
        fields["calibration"] = (Annotated[str | None, BeforeValidator(read_file_name)], None)
    for name, key in known.keys.items():
        annotated = Annotated[Any, BeforeValidator(gauge_key_reader(name, key, tuple(LINE_FLUIDS)))]
        example = key.example or EXAMPLES.get(key.dimension, "1")
        fields[name] = (annotated, Field(examples=[example])) if key.required else (annotated, None)
    return create_model("Gauge", __base__=_Table, kind=(Text, ...), **fields)


_SINGLE: Mapping[str, type[BaseModel]] = {
    "survey": SurveyTable,
    "fluid": FluidTable,
    "site": SiteTable,
    "uncertainty": UncertaintyTable,
    "logger": LoggerTable,
}
_LISTS: Mapping[str, type[_Table]] = {
    "reach": ReachTable,
    "fitting": FittingTable,
    "offtake": OfftakeTable,
    "side_valve": SideValveTable,
}
_TOP_LEVEL = (*_SINGLE, *_LISTS, "gauge", "flow", "wall")


def read_document(ledger: Ledger) -> Document | None:
    """Return ``survey.toml`` checked key by key, None where there is none or its syntax is at fault.

    Every fault is noted in `ledger` under its key, such as ``reach[1].diameter`` (the first reach is 1).
    """
    data = read_data(ledger)
    if data is None:
        return None
    ledger.order.update({path: place for place, path in enumerate(_paths(data))})
    for key in data:
        if key not in _TOP_LEVEL:
            ledger.problem(NAME, None, key, f"unknown table or key {key!r}; {nearest(key, _TOP_LEVEL)}")
    single = {
        name: _validate(ledger, model, data[name], name) if name in data else None
        for name, model in _SINGLE.items()
    }
    lists = {name: _list(ledger, model, data.get(name, []), name) for name, model in _LISTS.items()}
    if not lists["reach"] and "reach" not in data:
        ledger.problem(NAME, None, "reach", "there is no [[reach]]; describe at least one length of pipe")
    flow = read_flow_table(ledger, data.get("flow"), _validate)
    described = data.get("gauge")
    at_meter: dict[str, Any] = {}
    if isinstance(described, dict):
        named = named_gauges(data.get("flow"))
        at_meter = {key: table for key, table in described.items() if key.strip() in named}
        described = {key: table for key, table in described.items() if key not in at_meter}
    gauges = _gauges(ledger, described)
    flow_gauges = _flow_gauges(ledger, at_meter)
    return Document(
        survey=single["survey"] if "survey" in data else SurveyTable(),  # type: ignore[arg-type]  # validated by key
        fluid=single["fluid"] if "fluid" in data else FluidTable(name="water"),  # type: ignore[arg-type]  # validated by key
        site=single["site"] if "site" in data else SiteTable(),  # type: ignore[arg-type]  # validated by key
        uncertainty=single["uncertainty"] if "uncertainty" in data else UncertaintyTable(),  # type: ignore[arg-type]  # validated by key
        reaches=lists["reach"],  # type: ignore[arg-type]  # each list holds its own table
        fittings=lists["fitting"],  # type: ignore[arg-type]  # each list holds its own table
        offtakes=lists["offtake"],  # type: ignore[arg-type]  # each list holds its own table
        side_valves=lists["side_valve"],  # type: ignore[arg-type]  # each list holds its own table
        gauges=gauges,
        units=_units(data),
        flow=_with_gauges(ledger, flow, flow_gauges, gauges),
        flow_gauges=flow_gauges,
        walls=read_walls(ledger, data.get("wall"), _validate),
        logger=single["logger"] if "logger" in data else LoggerTable(),  # type: ignore[arg-type]  # validated by key
    )


def _flow_gauges(ledger: Ledger, data: Mapping[str, Any]) -> dict[str, GaugeTable]:
    """The gauges that ``[flow]`` names, joined to the tappings of its meter."""
    if not data:
        return {}
    return _gauges(ledger, {key: joined(ledger, key.strip(), table) for key, table in data.items()})


def _with_gauges(
    ledger: Ledger,
    flow: FlowTable | None,
    tables: Mapping[str, GaugeTable],
    others: Mapping[str, GaugeTable],
) -> FlowTable | None:
    """``[flow]`` with the gauges that it names; None where they are at fault."""
    if flow is None or not named_gauges(flow.setup.settings):
        return flow
    found = {
        table.name: FlowGauge(
            table.name,
            None if table.kind is None else GAUGE_KINDS[table.kind],
            tuple(
                end
                for end in dict.fromkeys(
                    end for leg in table.legs if leg is not None for end in (leg.start, leg.end)
                )
                if isinstance(end, str) and end not in TAPPINGS
            ),
            (table.values or {}).get("range"),
        )
        for table in tables.values()
    }
    gauges = flow_gauges_of(ledger, flow.setup.settings, found, others)
    return None if gauges is None else replace(flow, gauges=gauges)


def _units(data: Mapping[str, Any]) -> dict[str, str]:
    """The unit of every value of the gauges and of ``[uncertainty]``."""
    gauges = data.get("gauge")
    tables = {"uncertainty": data.get("uncertainty")}
    tables |= (
        {f"gauge.{name.strip()}": table for name, table in gauges.items()} if isinstance(gauges, dict) else {}
    )
    return {
        f"{path}.{key}": unit
        for path, table in tables.items()
        if isinstance(table, dict)
        for key, value in table.items()
        if isinstance(value, str) and (unit := unit_of(plain_value(value)))
    }


def _paths(value: object, path: str = "", depth: int = 0) -> Iterator[str]:
    """Every key path of the file in its order."""
    if path:
        yield path
    if depth > _SHOWN_DEPTH:
        return
    if isinstance(value, dict):
        for key, inner in value.items():
            yield from _paths(inner, f"{path}.{key}" if path else str(key), depth + 1)
    elif isinstance(value, list):
        for place, inner in enumerate(value, start=1):
            yield from _paths(inner, f"{path}[{place}]", depth + 1)


def _list(ledger: Ledger, model: type[_Table], data: object, name: str) -> tuple[_Table | None, ...]:
    if not isinstance(data, list):
        header = f"[[{name}]], alone on its line (in a workbook: alone in column A of its own row)"
        ledger.problem(NAME, None, name, f"{written(data)} stands here; begin each one with {header}")
        return (None,)
    return tuple(
        _validate(ledger, model, each, f"{name}[{place}]")  # type: ignore[misc]  # a list holds its own table
        for place, each in enumerate(data, start=1)
    )


def _gauges(ledger: Ledger, data: object) -> dict[str, GaugeTable]:
    if data is None or data == {}:
        ledger.problem(NAME, None, "gauge", "there is no [gauge.NAME]; describe at least one gauge")
        return {}
    if not isinstance(data, dict):
        ledger.problem(
            NAME, None, "gauge", f"{written(data)} stands here; begin each gauge with [gauge.NAME]"
        )
        return {}
    gauges: dict[str, GaugeTable] = {}
    for key, table in data.items():
        name, path = key.strip(), f"gauge.{key}"
        kind = table.get("kind") if isinstance(table, dict) else None
        if not isinstance(table, dict):
            ledger.problem(NAME, None, path, f"{written(table)} stands here; begin the gauge with [{path}]")
        elif kind is None:
            ledger.problem(NAME, None, f"{path}.kind", f"the key is missing; {nearest('', GAUGE_KINDS)}")
        elif not isinstance(kind, str) or kind.strip() not in GAUGE_KINDS:
            said = f"unknown kind {written(kind)}; {nearest(str(kind) if isinstance(kind, str) else '', GAUGE_KINDS)}"
            if isinstance(kind, str) and kind.strip().startswith(PLACEHOLDER):
                said = f"the value is still to be filled in; {nearest('', GAUGE_KINDS)}"
            ledger.problem(NAME, None, f"{path}.kind", said)
            kind = None
        else:
            kind = kind.strip()
            legs, keys = _legs(ledger, kind, table, path)
            model = _validate(ledger, _gauge_model(kind), keys, path)
            values = (
                None if model is None else {each: getattr(model, each) for each in type(model).model_fields}
            )
            gauges[name] = GaugeTable(name, kind, values, legs)
            continue
        gauges[name] = GaugeTable(name, None, None)
    return gauges


def _legs(
    ledger: Ledger, kind: str, table: dict[str, Any], path: str
) -> tuple[tuple[LegTable | None, ...], dict[str, Any]]:
    """The legs of a gauge that is described by them, and its other keys."""
    if not GAUGE_KINDS[kind].legs:
        return (), table
    rest = {key: value for key, value in table.items() if key != "leg"}
    if "leg" not in table:
        ledger.problem(NAME, None, path, f"the gauge has no legs; describe each one with [[{path}.leg]]")
        return (), rest
    return _list(ledger, LegTable, table["leg"], f"{path}.leg"), rest  # type: ignore[return-value]  # a list of that model


def _validate(ledger: Ledger, model: type[BaseModel], data: object, path: str) -> BaseModel | None:
    """One table through its model; its faults are noted under their key paths."""
    if not isinstance(data, dict):
        ledger.problem(
            NAME, None, path, f"{written(data)} stands here; write the table [{path}] with its keys"
        )
        return None
    try:
        return model.model_validate(data)
    except ValidationError as error:
        for fault in error.errors(include_url=False):
            key = ".".join(str(part) for part in fault["loc"] if isinstance(part, str)) or path
            ledger.problem(NAME, None, f"{path}.{key}", _told(model, fault, key))
        return None


def _told(model: type[BaseModel], fault: Any, key: str) -> str:
    """A fault as pydantic tells it, in the words of this program."""
    fields = {known.alias or name: known for name, known in model.model_fields.items()}
    if fault["type"] == "missing":
        example = (fields[key].examples or [""])[0]
        return f'the key is missing; add it, such as {key} = "{example}"'
    if fault["type"] == "extra_forbidden":
        return f"unknown key {key!r}; {nearest(key, fields)}"
    if fault["type"] == "value_error":
        return str(fault["ctx"]["error"])
    return f"{written(fault['input'])} cannot be read ({fault['msg']})"
