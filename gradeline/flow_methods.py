"""What a survey may say of each way to measure the flow: one table, on which loader and reduction dispatch.

The flow of each method is the entry of the same name in `gradeline.reduction.flow.FLOWS`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from gradeline.quantities import Measured, Unit

__all__ = ["FLOW_METHODS", "FlowColumn", "FlowKey", "FlowMethod", "FlowSetup", "MeterTable", "Outlet"]


@dataclass(frozen=True)
class FlowColumn:
    """A column of the runs that a method reads.

    Parameters
    ----------
    dimensions : tuple of str
        What its unit may measure.
    meaning : str
        One line for messages.
    primary : bool
        Whether it is the one that is 0 in a static run; the others may then be empty.
    each_outlet : bool
        Whether there is one for each outlet, its name behind: ``pitot north``.
    """

    dimensions: tuple[str, ...]
    meaning: str
    primary: bool = False
    each_outlet: bool = False


@dataclass(frozen=True)
class FlowKey:
    """A key of ``[flow]`` or of ``[[flow.outlet]]``.

    Parameters
    ----------
    dimension : str
        A dimension that `gradeline.quantities` knows, ``"text"``, ``"file"`` or ``"uncertainty of COLUMN"``.
    meaning : str
        One line for messages and for the written survey.
    example : str
        A value as it is written.
    required : bool
        Whether the method needs it.
    choices : tuple of str
        The texts that are known, the first one by default.
    high : float or None
        Largest value, SI.
    low : float or None
        What the value lies above, SI; None: no limit.
    """

    dimension: str
    meaning: str
    example: str
    required: bool = False
    choices: tuple[str, ...] = ()
    high: float | None = None
    low: float | None = 0.0


@dataclass(frozen=True)
class FlowMethod:
    """A way to measure the flow.

    Parameters
    ----------
    columns : mapping of str to FlowColumn
        What is read in each run.
    keys : mapping of str to FlowKey
        What ``[flow]`` takes beside ``method``, ``read`` and ``constant_head_at``.
    outlet_keys : mapping of str to FlowKey
        What each ``[[flow.outlet]]`` takes; empty where the method has no outlets.
    smaller : tuple of (str, str)
        Keys of which the first is to be smaller than the second: a throat in its pipe.
    """

    columns: Mapping[str, FlowColumn]
    keys: Mapping[str, FlowKey] = field(default_factory=dict)
    outlet_keys: Mapping[str, FlowKey] = field(default_factory=dict)
    smaller: tuple[str, str] | None = None

    @property
    def primary(self) -> str:
        """The column that is 0 in a static run."""
        return next(name for name, column in self.columns.items() if column.primary)


@dataclass(frozen=True)
class Outlet:
    """One ``[[flow.outlet]]``: its name and its keys in SI."""

    name: str
    settings: Mapping[str, Measured | str]


@dataclass(frozen=True)
class MeterTable:
    """The calibration of a meter.

    Parameters
    ----------
    file : str
        Its name.
    reading : tuple of float
        Strictly rising, SI of the reading's dimension.
    flow : tuple of float
        m³/s, strictly rising.
    flow_u : tuple of float
        Standard uncertainty of each, m³/s; NaN where nobody stated one.
    unit : Unit
        Of the readings as the file has them.
    """

    file: str
    reading: tuple[float, ...]
    flow: tuple[float, ...]
    flow_u: tuple[float, ...]
    unit: Unit


@dataclass(frozen=True)
class FlowSetup:
    """How the flow was measured and how the taps were read meanwhile.

    Parameters
    ----------
    method : str
        A key of `FLOW_METHODS`.
    settings : mapping
        The method's keys that were given, SI values as `Measured` or text.
    outlets : tuple of Outlet
        In the order of the file.
    table : MeterTable or None
        Of a calibrated meter.
    read : {"together", "in order"} or None
        How the taps were read; None where nobody said.
    constant_head_at : float or None
        Chainage at which the head did not change while the flow drifted, m.
    relative : frozenset of str
        Uncertainties of a meter's readings that are in parts of the reading, of the zero in parts of the table's last one.
    """

    method: str = "direct"
    settings: Mapping[str, Measured | str] = field(default_factory=dict)
    outlets: tuple[Outlet, ...] = ()
    table: MeterTable | None = None
    read: str | None = None
    constant_head_at: float | None = None
    relative: frozenset[str] = frozenset()


def _random(column: str, example: str, meaning: str) -> dict[str, FlowKey]:
    """The random uncertainty of one reading of a column."""
    return {f"u_{column}": FlowKey(f"uncertainty of {column}", meaning, example)}


def _calibration(example: str, more: str = "") -> dict[str, FlowKey]:
    """What the primary reading's instrument may be off by in all runs alike."""
    return {
        "u_scale": FlowKey("relative", "calibration of the reading, the same in all runs", "0.2 %"),
        "u_zero": FlowKey("uncertainty of zero", f"zero of the reading, the same in all runs{more}", example),
    }


#: What a meter may show; a plain number, headed [1], serves for divisions of a scale.
METER_DIMENSIONS = (
    "flow",
    "length",
    "pressure",
    "velocity",
    "frequency",
    "rotational speed",
    "electric current",
    "voltage",
    "dimensionless",
)

_DIFFERENTIAL = FlowColumn(
    ("pressure", "length"), "differential pressure, or the deflection of a gauge fluid", primary=True
)

#: A differential read by gauges of the survey instead of the column.
_TAPPING_GAUGES = {
    "differential_gauge": FlowKey(
        "text", "a [gauge.NAME] between the meter's tappings, read in place of 'differential'", "m2"
    ),
    "upstream_gauge": FlowKey(
        "text", "or a gauge at each: columns 'upstream tapping' and 'downstream tapping'", "p1"
    ),
    "downstream_gauge": FlowKey("text", "the other one, or the same one carried", "p2"),
    "tapping_rise": FlowKey(
        "length",
        "how much higher the downstream tapping lies, for such gauges",
        "0.20 m +/- 2 mm",
        low=None,
    ),
}


def _differential(coefficient: str, **kinds: FlowKey) -> FlowMethod:
    return FlowMethod(
        columns={"differential": _DIFFERENTIAL},
        keys={
            "pipe_bore": FlowKey("length", "bore of the pipe at the meter, D", "52.5 mm", required=True),
            "throat_bore": FlowKey("length", "bore of the plate or the throat, d", "30.0 mm", required=True),
            **kinds,
            "discharge_coefficient": FlowKey(
                "dimensionless", "where the meter was calibrated; ISO 5167 otherwise", coefficient, high=1.5
            ),
            "gauge_fluid": FlowKey(
                "text",
                "of a deflection: its density stands against the flowing fluid's",
                "mercury",
                choices=("mercury", "air", "water"),
            ),
            "gauge_fluid_density": FlowKey("density", "of a deflection, for another fluid", "1600 kg/m^3"),
            **_TAPPING_GAUGES,
            **_random("differential", "0.1 kPa", "one reading, random"),
            **_calibration("0.1 kPa"),
        },
        smaller=("throat_bore", "pipe_bore"),
    )


_HEAD = FlowColumn(("length",), "head above the vertex or the crest", primary=True)

#: Every method by its name in ``survey.toml``.
FLOW_METHODS: Mapping[str, FlowMethod] = MappingProxyType(
    {
        "direct": FlowMethod(
            columns={"flow": FlowColumn(("flow",), "the flow itself", primary=True)},
        ),
        "volumetric tank": FlowMethod(
            columns={
                "volume": FlowColumn(("volume",), "what ran into the tank", primary=True),
                "time": FlowColumn(("time",), "how long it ran"),
            },
            keys={
                **_random("volume", "0.1 L", "one reading, random"),
                **_random("time", "0.2 s", "one timing, random: reaction at start and stop"),
                **_calibration("0.1 L"),
            },
        ),
        "weighing tank": FlowMethod(
            columns={
                "mass": FlowColumn(
                    ("mass",), "what ran into the tank, as the balance shows it", primary=True
                ),
                "time": FlowColumn(("time",), "how long it ran"),
            },
            keys={
                "air_density": FlowKey("density", "of the air; that of the site otherwise", "1.2 kg/m^3"),
                "weight_density": FlowKey(
                    "density", "of the weights that the balance was adjusted with", "8000 kg/m^3"
                ),
                **_random("mass", "0.02 kg", "one reading, random"),
                **_random("time", "0.2 s", "one timing, random: reaction at start and stop"),
                **_calibration("0.02 kg"),
            },
        ),
        "orifice plate": _differential(
            "0.61 +/- 0.005",
            tappings=FlowKey(
                "text", "where the tappings lie", "corner", choices=("corner", "flange", "D and D/2")
            ),
        ),
        "nozzle": _differential(
            "0.98 +/- 0.005",
            shape=FlowKey("text", "which nozzle", "ISA 1932", choices=("ISA 1932", "long radius", "venturi")),
        ),
        "venturi": _differential(
            "0.985 +/- 0.005",
            convergent=FlowKey(
                "text", "how it was made", "machined", choices=("machined", "as cast", "rough welded")
            ),
        ),
        "v-notch weir": FlowMethod(
            columns={"weir head": _HEAD},
            keys={
                "notch_angle": FlowKey("angle", "of the notch", "90 deg", required=True, high=3.1),
                "crest_height": FlowKey("length", "of the vertex above the bed", "0.5 m"),
                "channel_width": FlowKey("length", "of the approach", "1.2 m"),
                "u_coefficient": FlowKey(
                    "relative", "of the discharge coefficient; 0.5 % otherwise", "0.5 %"
                ),
                **_random("weir_head", "0.2 mm", "one reading, random"),
                **_calibration("0.3 mm"),
            },
        ),
        "rectangular weir": FlowMethod(
            columns={"weir head": _HEAD},
            keys={
                "notch_width": FlowKey("length", "of the notch", "0.30 m", required=True),
                "crest_height": FlowKey("length", "of the crest above the bed", "0.25 m", required=True),
                "channel_width": FlowKey("length", "of the approach; the notch's otherwise", "0.60 m"),
                "equation": FlowKey(
                    "text",
                    "of the discharge",
                    "kindsvater-carter",
                    choices=("kindsvater-carter", "rehbock"),
                ),
                "u_coefficient": FlowKey(
                    "relative", "of the discharge coefficient; 0.75 % otherwise", "0.75 %"
                ),
                **_random("weir_head", "0.2 mm", "one reading, random"),
                **_calibration("0.3 mm"),
            },
        ),
        "hydrant pitot": FlowMethod(
            columns={
                "pitot": FlowColumn(
                    ("pressure",), "pitot pressure in the jet of one outlet", primary=True, each_outlet=True
                )
            },
            keys={
                **_random("pitot", "2 kPa", "one reading, random"),
                **_calibration("2 kPa"),
            },
            outlet_keys={
                "bore": FlowKey("length", "of the outlet", "63.5 mm +/- 0.3 mm", required=True),
                "discharge_coefficient": FlowKey(
                    "dimensionless", "of the outlet", "0.9 +/- 0.02", required=True, high=1.0
                ),
            },
        ),
        "calibrated meter": FlowMethod(
            columns={
                "meter reading": FlowColumn(
                    METER_DIMENSIONS,
                    "what the meter shows",
                    primary=True,
                )
            },
            keys={
                "table": FlowKey(
                    "file",
                    "csv with 'reading', 'flow' and perhaps 'flow uncertainty'",
                    "meter.csv",
                    required=True,
                ),
                **_random("meter_reading", "1 mm", "one reading, random; or in % of it"),
                **_calibration("1 mm", "; or in % of the table's last reading"),
            },
        ),
    }
)
