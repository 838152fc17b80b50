"""What a survey may say of each kind of gauge: one table, on which loader, reduction and report dispatch.

The physics of each kind is the entry of the same name in `gradeline.hydraulics.manometry.HEADS`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

from gradeline.quantities import Measured

__all__ = ["GAUGE_KINDS", "Calibration", "GaugeKey", "GaugeKind", "Leg", "Pressure"]


@dataclass(frozen=True)
class GaugeKey:
    """One key that a gauge of some kind takes in ``survey.toml``.

    Parameters
    ----------
    dimension : str
        A dimension that `gradeline.quantities` knows, ``"text"``, or ``"gas pressure"`` (a pressure that may say
        ``abs``).
    meaning : str
        One line for messages and for the written survey.
    required : bool
        Whether the key must be given.
    positive : bool
        Whether the value must be above zero.
    example : str
        A value for messages and for the written survey; empty: the usual one of its dimension.
    high : float or None
        The largest value, SI; None: no limit, but π/2 for an angle.
    of_head : bool
        Whether the kind's head takes it as an argument of this name.
    """

    dimension: str
    meaning: str
    required: bool = False
    positive: bool = False
    example: str = ""
    high: float | None = None
    of_head: bool = True


@dataclass(frozen=True)
class GaugeKind:
    """What a survey may say of one kind of gauge; its physics is in `gradeline.hydraulics.manometry`.

    Parameters
    ----------
    reading : str
        Dimension of a reading: ``"length"`` or ``"pressure"``.
    keys : mapping of str to GaugeKey
        The keys of this kind beside those that every gauge takes.
    differential : bool
        Whether one reading is a difference between two taps, which the gauge names itself.
    limbs : tuple of str
        The two limbs that may be read one by one, the first less the second being the deflection; empty where there
        are none.
    fluid_side : str or None
        Whether its gauge fluid has to be ``"heavier"`` or ``"lighter"`` than the flowing one.
    legs : bool
        Whether it is described by legs, ``[[gauge.NAME.leg]]``.
    level_key : str or None
        The key without which the level of its columns is not known: then it is free in each run.
    together : tuple of tuple of str
        Keys that need others: (key, needed, …).
    assumption : str
        What is assumed of its readings, told in every report, with the place ``{gauge}`` for its name; empty: nothing.
    """

    reading: Literal["length", "pressure"]
    keys: Mapping[str, GaugeKey]
    differential: bool = False
    limbs: tuple[str, ...] = ()
    fluid_side: Literal["heavier", "lighter"] | None = None
    legs: bool = False
    level_key: str | None = None
    together: tuple[tuple[str, ...], ...] = ()
    assumption: str = ""


@dataclass(frozen=True)
class Pressure(Measured):
    """A pressure in Pa that says whether it is absolute.

    Examples
    --------
    >>> Pressure(50e3, absolute=True).absolute
    True
    """

    absolute: bool = False


@dataclass(frozen=True)
class Leg:
    """One leg of a compound manometer.

    Parameters
    ----------
    fluid : str
        Name of its fluid.
    density : Measured or None
        kg/m³; None where the fluid's name tells it, or where it is the flowing fluid.
    start, end : float or str
        Elevation above datum, m; a tap; or the name of a level that is read.
    start_u, end_u : float or None
        Standard uncertainty of such an elevation, m, the same in all runs.
    """

    fluid: str
    density: Measured | None
    start: float | str
    end: float | str
    start_u: float | None = None
    end_u: float | None = None


@dataclass(frozen=True)
class Calibration:
    """What a gauge showed at known values.

    Parameters
    ----------
    file : str
        The file in the survey's folder.
    reading, true : tuple of float
        What it showed and what was true, in the unit of its readings (m or Pa).
    """

    file: str
    reading: tuple[float, ...]
    true: tuple[float, ...]


_ANY_ANGLE = 3.1416
_LINE_KEYS = {
    "line_fluid": GaugeKey("text", "fluid in the connecting line, where it is not the flowing one"),
    "line_temperature": GaugeKey(
        "temperature", "temperature of the connecting line, where it is not the run's"
    ),
}
_TAPS = {
    "upstream": GaugeKey("text", "the tap upstream, joined to the left limb", required=True, example="T1"),
    "downstream": GaugeKey("text", "the tap downstream", required=True, example="T2"),
}
_COLUMN_KEYS = {
    "zero": GaugeKey("length", "elevation of the scale's zero above datum"),
    "inclination": GaugeKey("angle", "of the scale from the horizontal; 90 deg when left out", positive=True),
    "bore": GaugeKey("length", "of the tube, for its capillary rise", positive=True, example="4 mm"),
    "contact_angle": GaugeKey(
        "angle", "of the column on the tube; 0 when left out", high=_ANY_ANGLE, example="20 deg"
    ),
    "surface_tension": GaugeKey(
        "surface tension", "of the column; known for water alone", positive=True, example="0.072 N/m"
    ),
    "column_temperature": GaugeKey("temperature", "of the column, where it is not the run's"),
}
_LIMB_KEYS = {
    "gauge_fluid_density": GaugeKey(
        "density",
        "of a gauge fluid of another name, at 20 degC",
        positive=True,
        example="1594 kg/m^3",
        of_head=False,
    ),
    "gauge_fluid_expansion": GaugeKey(
        "thermal expansion", "by volume, of that fluid", example="0.0012 1/K", of_head=False
    ),
    "gauge_temperature": GaugeKey("temperature", "of the gauge fluid, where it is not the run's"),
    "inclination": GaugeKey("angle", "of the limbs from the horizontal; 90 deg when left out", positive=True),
    "left_bore": GaugeKey(
        "length", "of the left limb, where the bores differ", positive=True, example="4 mm"
    ),
    "right_bore": GaugeKey("length", "of the right limb", positive=True, example="6 mm"),
    "contact_angle": GaugeKey(
        "angle", "in the heavier fluid, for capillary rise", high=_ANY_ANGLE, example="140 deg"
    ),
    "surface_tension": GaugeKey(
        "surface tension", "between the two fluids", positive=True, example="0.4 N/m"
    ),
    **_LINE_KEYS,
}
_GAS = GaugeKey(
    "gas pressure", "of the trapped gas against the atmosphere, or with abs", example="150 kPa abs"
)
_PRESSURE_KEYS = {
    "zero_reading": GaugeKey(
        "pressure", "what it shows without pressure; taken off every reading", example="0.2 kPa"
    ),
    "full_scale": GaugeKey("pressure", "of its scale", positive=True, example="600 kPa", of_head=False),
    "accuracy_of_full_scale": GaugeKey(
        "dimensionless",
        "accuracy class: limit of error over full scale",
        positive=True,
        example="0.6 %",
        of_head=False,
    ),
    "accuracy_of_reading": GaugeKey(
        "dimensionless", "limit of error over the reading", positive=True, example="0.1 %", of_head=False
    ),
    **_LINE_KEYS,
}
_ACCURACY = (("accuracy_of_full_scale", "full_scale"),)
_BORES = (
    ("left_bore", "right_bore", "surface_tension"),
    ("right_bore", "left_bore"),
    ("gauge_fluid_expansion", "gauge_fluid_density"),
)

#: Every gauge kind by its name in ``survey.toml``. The loader dispatches on this table; the head of each kind is
#: the entry of the same name in `gradeline.hydraulics.manometry.HEADS`.
GAUGE_KINDS: Mapping[str, GaugeKind] = MappingProxyType(
    {
        "piezometer": GaugeKind(reading="length", keys=_COLUMN_KEYS),
        "closed multitube manometer": GaugeKind(
            reading="length",
            keys={
                **_COLUMN_KEYS,
                "gas_pressure": _GAS,
                "u_gas_pressure": GaugeKey(
                    "pressure",
                    "of a column 'gas_pressure [kPa]' in the runs, the same in all",
                    positive=True,
                    example="0.2 kPa",
                    of_head=False,
                ),
            },
            level_key="gas_pressure",
        ),
        "u-tube": GaugeKind(
            reading="length",
            keys={
                **_TAPS,
                "gauge_fluid": GaugeKey(
                    "text", "heavier than the flowing one", required=True, example="mercury"
                ),
                **_LIMB_KEYS,
                "area_ratio": GaugeKey(
                    "dimensionless",
                    "well-type: limb over well; its one limb is read",
                    positive=True,
                    example="0.02",
                    high=1.0,
                ),
            },
            differential=True,
            limbs=("right", "left"),
            fluid_side="heavier",
            together=_BORES,
        ),
        "inverted u-tube": GaugeKind(
            reading="length",
            keys={
                **_TAPS,
                "gauge_fluid": GaugeKey(
                    "text", "lighter than the flowing one; air when left out", example="air"
                ),
                **_LIMB_KEYS,
                "gas_pressure": GaugeKey(
                    "gas pressure",
                    "of a gas above, for its density; the atmosphere's when left out",
                    example="150 kPa abs",
                    of_head=False,
                ),
            },
            differential=True,
            limbs=("left", "right"),
            fluid_side="lighter",
            together=_BORES[1:],
        ),
        "compound manometer": GaugeKind(
            reading="length",
            keys={
                "upstream": _TAPS["upstream"],
                "downstream": GaugeKey(
                    "text", "the tap where its legs end; left out where they end open", example="T2"
                ),
            },
            differential=True,
            legs=True,
        ),
        "pressure gauge": GaugeKind(reading="pressure", keys=_PRESSURE_KEYS, together=_ACCURACY),
        "transducer": GaugeKind(reading="pressure", keys=_PRESSURE_KEYS, together=_ACCURACY),
        "differential transducer": GaugeKind(
            reading="pressure", keys={**_TAPS, **_PRESSURE_KEYS}, differential=True, together=_ACCURACY
        ),
        # No instrument: piezometric heads above datum that somebody worked out already.
        "head": GaugeKind(
            reading="length",
            keys={},
            assumption="The readings of {gauge!r} are piezometric heads z + p/(ρ g) above datum, worked out already: they "
            "are taken as they are, with no part for the air beside them.",
        ),
    }
)
