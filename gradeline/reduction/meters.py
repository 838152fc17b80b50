"""The flow of each method of `gradeline.flow_methods`: from its readings, and what its standard says of them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from gradeline.flow_methods import FlowSetup
from gradeline.hydraulics.differential_meters import (
    differential_meter_flow,
    discharge_coefficient_u,
    expansibility,
    meter_limits,
)
from gradeline.hydraulics.flowmeters import interpolated_flow, pitot_flow, volumetric_flow, weighed_flow
from gradeline.hydraulics.weirs import (
    kindsvater_carter_flow,
    kindsvater_shen_flow,
    rectangular_weir_limits,
    rehbock_flow,
    v_notch_limits,
)
from gradeline.quantities import Measured
from gradeline.reduction.media import fluid_density
from gradeline.reduction.tappings import Tappings

__all__ = ["FLOWS", "Meter", "MeterReadings"]

Array = NDArray[np.float64]

#: Readings beyond a table that are told one by one.
_TOLD = 6


@dataclass(frozen=True)
class MeterReadings:
    """What a method's flow is worked out from: N flowing rows.

    Parameters
    ----------
    columns : mapping of str to (N,) array
        SI, by their headings.
    values, words : mapping
        The settings in SI and in text; those of an outlet have its name behind (``bore north``).
    setup : FlowSetup
        As the survey has it.
    density, kinematic_viscosity, temperature : (N,) array
        Of the flowing fluid: kg/m³, m²/s; K.
    gravity, air : float
        m/s²; density of the air beside the meter, kg/m³.
    line_pressure : float or None
        Absolute pressure of flowing air, Pa.
    length : bool
        Whether a differential reading is a deflection.
    runs : tuple of str
        The run of each row.
    tappings : Tappings or None
        Where gauges read the differential: then the column ``differential`` is their difference of heads, m.
    """

    columns: Mapping[str, Array]
    values: Mapping[str, float]
    words: Mapping[str, str]
    setup: FlowSetup
    density: Array
    kinematic_viscosity: Array
    temperature: Array
    gravity: float
    air: float
    line_pressure: float | None = None
    length: bool = False
    runs: tuple[str, ...] = ()
    tappings: Tappings | None = None


@dataclass(frozen=True)
class Meter:
    """A method's physics.

    Parameters
    ----------
    flow : callable
        Flow of each row, m³/s.
    said : callable
        One sentence on how it was worked out.
    coefficient_u : callable or None
        Relative standard uncertainty of the standard's own coefficient at the flow of each row, 0 where the survey gives
        its own.
    limits : callable or None
        The limits of the standard that the meter or its flows lie outside of.
    standard : str
        Whose limits they are.
    """

    flow: Callable[[MeterReadings], Array]
    said: Callable[[MeterReadings], str]
    coefficient_u: Callable[[MeterReadings, Array], Array | float] | None = None
    limits: Callable[[MeterReadings, Array], list[str]] | None = None
    standard: str = ""


def _weighed(given: MeterReadings) -> Array:
    return weighed_flow(
        given.columns["mass"],
        given.columns["time"],
        given.density,
        given.values.get("air_density", given.air),
        given.values.get("weight_density", 8000.0),
    )


def _weighed_said(given: MeterReadings) -> str:
    air = given.values.get("air_density", given.air)
    weights = given.values.get("weight_density", 8000.0)
    return (
        f"Weighed flows carry the buoyancy of the air (ISO 4185): air {air:.3f} kg/m³, the balance adjusted with weights of "
        f"{weights:g} kg/m³."
    )


def _meter_type(given: MeterReadings) -> str:
    make = {"orifice plate": "tappings", "nozzle": "shape", "venturi": "convergent"}[given.setup.method]
    default = {"tappings": "corner", "shape": "ISA 1932", "convergent": "machined"}[make]
    return f"{given.setup.method}, {given.words.get(make, default)}"


def _pressure(given: MeterReadings) -> Array:
    """The differential pressure at one level, Pa: a deflection stands in the fluid of the line."""
    reading = given.columns["differential"]
    if given.tappings is not None:
        return np.asarray(given.density * given.gravity * reading)
    if not given.length:
        return reading
    fluid = given.words.get("gauge_fluid")
    gauge = (
        fluid_density(fluid, given.temperature) if fluid is not None else given.values["gauge_fluid_density"]
    )
    return np.asarray(np.abs(gauge - given.density) * given.gravity * reading)


def _differential(given: MeterReadings) -> Array:
    meter, pressure = _meter_type(given), _pressure(given)
    pipe, throat = given.values["pipe_bore"], given.values["throat_bore"]
    gas: Array | float = 1.0
    if given.line_pressure is not None:
        gas = expansibility(meter, pipe, throat, given.line_pressure, pressure)
    return differential_meter_flow(
        pressure,
        given.density,
        given.kinematic_viscosity,
        pipe,
        throat,
        meter,
        coefficient=given.values.get("discharge_coefficient"),
        expansibility_factor=gas,
    )


def _differential_said(given: MeterReadings) -> str:
    meter = _meter_type(given)
    if "discharge_coefficient" in given.values:
        return f"Flow by the {given.setup.method} with the given discharge coefficient {given.values['discharge_coefficient']:g}."
    size = float(discharge_coefficient_u(meter, given.values["pipe_bore"], given.values["throat_bore"]))
    at_low = _differential_u(given, _differential(given))
    more = float(np.max(at_low, initial=size))
    slow = f" ({100 * more:.2g} % where Re is below 10 000)" if more > size * (1 + 1e-9) else ""
    return (
        f"Flow by ISO 5167 ({meter}), the discharge coefficient iterated on Re; its standard uncertainty is taken as "
        f"{100 * size:.2g} %{slow}, half of what the standard states."
    )


def _reynolds(given: MeterReadings, flow: Array) -> Array:
    return np.asarray(4.0 * flow / (np.pi * given.values["pipe_bore"] * given.kinematic_viscosity))


def _differential_u(given: MeterReadings, flow: Array) -> Array | float:
    if "discharge_coefficient" in given.values:
        return 0.0
    pipe, throat = given.values["pipe_bore"], given.values["throat_bore"]
    return discharge_coefficient_u(_meter_type(given), pipe, throat, _reynolds(given, flow))


def _differential_limits(given: MeterReadings, flow: Array) -> list[str]:
    pipe, throat = given.values["pipe_bore"], given.values["throat_bore"]
    return meter_limits(_meter_type(given), pipe, throat, _reynolds(given, flow))


def _v_notch(given: MeterReadings) -> Array:
    return kindsvater_shen_flow(given.columns["weir head"], given.values["notch_angle"], given.gravity)


def _v_notch_limits(given: MeterReadings, _: Array) -> list[str]:
    return v_notch_limits(
        given.columns["weir head"],
        given.values["notch_angle"],
        given.values.get("crest_height"),
        given.values.get("channel_width"),
    )


def _channel(given: MeterReadings) -> tuple[float, float, float]:
    width = given.values["notch_width"]
    channel = given.values.get("channel_width", width)
    stated = [given.setup.settings.get(key) for key in ("notch_width", "channel_width")]
    sizes = [one.value for one in stated if isinstance(one, Measured)]
    if len(sizes) == 2 and sizes[0] >= sizes[1] * (1 - 1e-9):
        # A notch that fills its channel is one width: an error of the notch is one of the channel too.
        channel = width
    return given.values["crest_height"], width, channel


def _rectangular(given: MeterReadings) -> Array:
    crest, width, channel = _channel(given)
    head = given.columns["weir head"]
    if given.words.get("equation") == "rehbock":
        return rehbock_flow(head, crest, width, given.gravity)
    return kindsvater_carter_flow(head, crest, width, channel, given.gravity)


def _rectangular_limits(given: MeterReadings, _: Array) -> list[str]:
    equation = given.words.get("equation", "kindsvater-carter")
    return rectangular_weir_limits(equation, given.columns["weir head"], *_channel(given))


def _rectangular_said(given: MeterReadings) -> str:
    name = "Rehbock" if given.words.get("equation") == "rehbock" else "Kindsvater and Carter"
    return f"Flow over the rectangular thin-plate weir by {name} (ISO 1438)."


def _weir_u(default: float) -> Callable[[MeterReadings, Array], float]:
    return lambda given, _: given.values.get("u_coefficient", default)


def _pitots(given: MeterReadings) -> Array:
    parts = [
        pitot_flow(
            given.columns[f"pitot {outlet.name}"],
            given.density,
            given.values[f"bore {outlet.name}"],
            given.values[f"discharge_coefficient {outlet.name}"],
        )
        for outlet in given.setup.outlets
    ]
    return np.asarray(np.sum(parts, axis=0))


def _pitots_said(given: MeterReadings) -> str:
    names = [outlet.name for outlet in given.setup.outlets]
    if len(names) == 1:
        return f"Flow from the pitot at outlet {names[0]}: Q = c A √(2 p/ρ)."
    return f"Flow from the pitots at the outlets {', '.join(names)}, added: Q = Σ c A √(2 p/ρ)."


def _tabled(given: MeterReadings) -> Array:
    table = given.setup.table
    assert table is not None
    return interpolated_flow(given.columns["meter reading"], table.reading, table.flow)


def _tabled_limits(given: MeterReadings, _: Array) -> list[str]:
    table, at = given.setup.table, given.columns["meter reading"]
    assert table is not None
    low, high = table.reading[0], table.reading[-1]
    slack = 1e-9 * max(abs(low), abs(high))
    beyond = np.flatnonzero((at < low - slack) | (at > high + slack))
    if not len(beyond):
        return []
    unit = table.unit

    def shown(value: float) -> str:
        return f"{unit.from_si(value):.4g}"

    told = [f"{given.runs[row]!r} reads {shown(float(at[row]))} {unit.label}" for row in beyond[:_TOLD]]
    more = f" and {len(beyond) - _TOLD} more" if len(beyond) > _TOLD else ""
    return [
        f"run {', run '.join(told)}{more}, where {table.file} holds from {shown(low)} to {shown(high)} {unit.label}"
    ]


def _tabled_said(given: MeterReadings) -> str:
    table = given.setup.table
    assert table is not None
    return f"Flow from the meter's readings by {table.file}, straight between its points."


_ISO_5167 = Meter(_differential, _differential_said, _differential_u, _differential_limits, "ISO 5167")

#: Every method that `gradeline.flow_methods.FLOW_METHODS` names, but for the flow given itself.
FLOWS: Mapping[str, Meter] = MappingProxyType(
    {
        "volumetric tank": Meter(
            lambda given: volumetric_flow(given.columns["volume"], given.columns["time"]),
            lambda _: "Flow by the volumetric tank: volume over time.",
        ),
        "weighing tank": Meter(_weighed, _weighed_said),
        "orifice plate": _ISO_5167,
        "nozzle": _ISO_5167,
        "venturi": _ISO_5167,
        "v-notch weir": Meter(
            _v_notch,
            lambda _: "Flow over the V-notch by Kindsvater and Shen (ISO 1438), full contraction.",
            _weir_u(0.005),
            _v_notch_limits,
            "ISO 1438",
        ),
        "rectangular weir": Meter(
            _rectangular, _rectangular_said, _weir_u(0.0075), _rectangular_limits, "ISO 1438"
        ),
        "hydrant pitot": Meter(_pitots, _pitots_said),
        "calibrated meter": Meter(_tabled, _tabled_said, None, _tabled_limits, "its table"),
    }
)
