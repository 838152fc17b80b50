"""The domain model: a survey is a line (reaches, fittings, taps, gauges), its runs and their readings.

Everything here is in SI units (metres, seconds, kelvin, pascals, radians) and valid once made. An uncertainty
that nobody stated is None, never zero.
"""

from __future__ import annotations

import itertools
from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import pandas as pd

from gradeline.errors import Problem, SurveyError
from gradeline.flow_methods import FlowSetup
from gradeline.gauge_kinds import GAUGE_KINDS, Calibration, GaugeKey, GaugeKind, Leg, Pressure
from gradeline.quantities import Measured
from gradeline.quantities.shown import Shown, counted, shown

__all__ = [
    "GAUGE_KINDS",
    "Calibration",
    "Fitting",
    "Fluid",
    "Gauge",
    "GaugeKey",
    "GaugeKind",
    "Leg",
    "Observation",
    "Offtake",
    "Pressure",
    "PropertyTable",
    "Reach",
    "Section",
    "SideValve",
    "Site",
    "SourceFile",
    "Stated",
    "StatedUncertainties",
    "Survey",
    "Tap",
    "WallHistory",
]


@dataclass(frozen=True)
class Stated:
    """A stated standard uncertainty, absolute (SI) or relative to the value.

    Examples
    --------
    >>> Stated(0.004, relative=True).of(0.5)
    0.002
    """

    value: float
    relative: bool = False

    def of(self, value: float) -> float:
        """Return the standard uncertainty of `value`, in the unit of `value`."""
        return abs(value) * self.value if self.relative else self.value


@dataclass(frozen=True)
class StatedUncertainties:
    """The table ``[uncertainty]``: standard uncertainties, None where nobody stated one.

    ``reading`` (m or Pa by the gauge; one reading, random), ``chainage`` and ``elevation`` (m; one tap, the same in
    all runs), ``flow`` (one run, random), ``flow_scale`` (relative; all runs alike), ``temperature`` (K; all runs
    alike), ``temperature_run`` (K; random), ``friction_law`` (relative, of f). A reading uncertainty has a length
    and a pressure, since one survey may hold gauges of both kinds; the table states one of them.
    """

    reading: float | None = None
    reading_pressure: float | None = None
    chainage: float | None = None
    elevation: float | None = None
    flow: Stated | None = None
    flow_scale: float | None = None
    temperature: float | None = None
    temperature_run: float | None = None
    friction_law: float | None = None


#: How far beyond two given viscosities their law is followed, K.
BEYOND = 40.0


@dataclass(frozen=True)
class PropertyTable:
    """Properties of a fluid against temperature, as a file of the survey gives them.

    Parameters
    ----------
    file : str
        Its name.
    temperature, density, kinematic_viscosity : tuple of float
        K, strictly rising, two at least; kg/m³; m²/s.
    density_u, viscosity_u : float or None
        Relative standard uncertainties, the same error at all temperatures.
    """

    file: str
    temperature: tuple[float, ...]
    density: tuple[float, ...]
    kinematic_viscosity: tuple[float, ...]
    density_u: float | None = None
    viscosity_u: float | None = None


@dataclass(frozen=True)
class Fluid:
    """The flowing fluid: water or air by name, any other by its density and viscosity or by a table of them.

    Parameters
    ----------
    name : str
        ``"water"``, ``"air"`` with a line pressure, or any name where the properties are given.
    density : Measured or None
        kg/m³; at `density_temperature` where there is an expansion.
    viscosity : Measured or None
        Dynamic, Pa s.
    kinematic_viscosity : Measured or None
        m²/s.
    table : PropertyTable or None
        Density and kinematic viscosity against temperature.
    viscosity_at : tuple of (float, Measured)
        Two temperatures (K) in rising order, each with its kinematic viscosity (m²/s); empty where not given so.
    density_temperature : float or None
        K, at which `density` is given.
    expansion : Measured or None
        Coefficient of thermal (cubic) expansion, 1/K.
    line_pressure : Measured or None
        Absolute pressure in the line, Pa: the fluid is air.
    humidity : float
        Relative humidity of flowing air, dimensionless.
    """

    name: str = "water"
    density: Measured | None = None
    viscosity: Measured | None = None
    kinematic_viscosity: Measured | None = None
    table: PropertyTable | None = None
    viscosity_at: tuple[tuple[float, Measured], ...] = ()
    density_temperature: float | None = None
    expansion: Measured | None = None
    line_pressure: Measured | None = None
    humidity: float = 0.5

    @property
    def is_water(self) -> bool:
        """Whether its properties are those of water."""
        return self.name == "water" and self.density is None and self.table is None

    @property
    def is_air(self) -> bool:
        """Whether its properties are those of air at the line pressure."""
        return self.line_pressure is not None

    @property
    def follows_temperature(self) -> bool:
        """Whether density or viscosity are worked out at each run's temperature."""
        return bool(self.density is None or self.viscosity_at or self.expansion is not None)

    @property
    def span(self) -> tuple[float, float] | None:
        """Temperatures (K) between which the properties are known, None where they are constant."""
        if self.table is not None:
            return self.table.temperature[0], self.table.temperature[-1]
        if self.is_air:
            return 223.15, 373.15
        if self.viscosity_at:
            return self.viscosity_at[0][0] - BEYOND, self.viscosity_at[-1][0] + BEYOND
        return (273.15, 373.15) if self.is_water else None


@dataclass(frozen=True)
class Site:
    """Where the line lies: gravity (m/s²) as stated, or latitude (rad) and altitude (m)."""

    latitude: float | None = None
    altitude: float | None = None
    gravity: Measured | None = None


@dataclass(frozen=True)
class Section:
    """A cross-section that is not a circle.

    Parameters
    ----------
    shape : {"rectangle", "annulus", "given"}
        What `sides` are: width and height, outer and inner diameter, or area and wetted perimeter.
    sides : tuple of Measured
        Two of them, m (an area in m²).
    laminar_constant : float or None
        f·Re of laminar flow on the hydraulic diameter, dimensionless, where the survey gives it.
    """

    shape: Literal["rectangle", "annulus", "given"]
    sides: tuple[Measured, Measured]
    laminar_constant: float | None = None


@dataclass(frozen=True)
class Offtake:
    """A branch that takes a part of the flow away, at a boundary between two reaches.

    Parameters
    ----------
    name : str
        Its label.
    at : float
        Chainage, m.
    flow_u : Stated or None
        Standard uncertainty of the flow it takes, the same error in all runs. What it takes in each run (m³/s) is
        the column ``offtake NAME`` of `Survey.runs`.
    """

    name: str
    at: float
    flow_u: Stated | None = None

    @property
    def column(self) -> str:
        """Its column in `Survey.runs`."""
        return f"offtake {self.name}"


@dataclass(frozen=True)
class SideValve:
    """A valve on a branch of the line, and whether it was shut during the survey.

    Parameters
    ----------
    name : str
        Its label.
    state : {"shut", "open", "unknown"}
        As stated.
    where : str
        Where flow can leave by it, as a phrase with the taps beside it.
    """

    name: str
    state: Literal["shut", "open", "unknown"]
    where: str = ""


@dataclass(frozen=True)
class Reach:
    """A length of one bore and one wall, from chainage `start` to `end` (m), in flow order.

    `inlet` says that the flow enters here undeveloped, so that the entrance length counts from `start`. Where there
    is a `section`, `diameter` is its hydraulic diameter.
    """

    name: str
    start: float
    end: float
    diameter: Measured
    wall: str
    inlet: bool = False
    section: Section | None = None

    @property
    def length(self) -> float:
        """Length of the reach, m."""
        return self.end - self.start


@dataclass(frozen=True)
class WallHistory:
    """What was known of a wall beforehand.

    Parameters
    ----------
    wall : str
        Its label.
    published : Measured or None
        A published roughness of such a surface, m.
    published_source : str or None
        Where it stands.
    earlier : Measured or None
        What was found of this wall earlier, m.
    earlier_source : str or None
        When or by whom.
    """

    wall: str
    published: Measured | None = None
    published_source: str | None = None
    earlier: Measured | None = None
    earlier_source: str | None = None


@dataclass(frozen=True)
class Fitting:
    """A local loss at one chainage.

    Parameters
    ----------
    name : str
        Its label.
    at : float
        Chainage, m.
    loss_coefficient : Measured or None
        K, or None where it is to be fitted.
    velocity : {"smaller", "upstream", "downstream"}
        The bore whose velocity head K refers to.
    change_of_bore : bool
        Whether it stands for the change of bore at a boundary between reaches.
    approach, recovery : float
        Taps nearer than this many bores upstream and downstream of its ends are disturbed.
    kind : str or None
        What it is, a name of `gradeline.fitting_kinds.fitting_kinds`; None where nobody said.
    length : float
        Between its ends along the axis, m, `at` in the middle. The friction of a straight pipe of this length is part
        of a K that is fitted; with 0, K is what the fitting loses beyond the straight pipe that runs through.
    """

    name: str
    at: float
    loss_coefficient: Measured | None
    velocity: Literal["smaller", "upstream", "downstream"] = "smaller"
    change_of_bore: bool = False
    approach: float = 2.0
    recovery: float = 10.0
    kind: str | None = None
    length: float = 0.0


@dataclass(frozen=True)
class Gauge:
    """An instrument that reads one or more taps.

    Parameters
    ----------
    name : str
        Its label, as in ``[gauge.NAME]``.
    kind : str
        A key of `GAUGE_KINDS`.
    settings : mapping
        The kind's own keys that were given, SI values as `Measured` or text.
    reading_u : float or None
        Standard uncertainty of one reading, random, in the unit of the reading (m or Pa).
    resolution : float or None
        Smallest step that can be read, in the unit of the reading.
    zero_u : float or None
        Standard uncertainty of the zero, the same in all runs, in the unit of the reading.
    scale_u : float or None
        Relative standard uncertainty of the scale, the same in all runs.
    span : tuple of float or None
        Lowest and highest reading of its scale, in the unit of the reading.
    legs : tuple of Leg
        Of a compound manometer, from the upstream tap on.
    calibration : Calibration or None
        What it showed at known values.
    gas_read : bool
        Whether the pressure of the gas over its columns was read in each run.
    """

    name: str
    kind: str
    settings: Mapping[str, Measured | str] = field(default_factory=dict)
    reading_u: float | None = None
    resolution: float | None = None
    zero_u: float | None = None
    scale_u: float | None = None
    span: tuple[float, float] | None = None
    legs: tuple[Leg, ...] = ()
    calibration: Calibration | None = None
    gas_read: bool = False

    @property
    def floats(self) -> bool:
        """Whether the level of its columns is not known, so that only their differences count."""
        key = GAUGE_KINDS[self.kind].level_key
        return key is not None and key not in self.settings and not self.gas_read

    @staticmethod
    def gas_column_of(name: str) -> str:
        """Return the column of `Survey.runs` with the gas pressure of the gauge called `name`."""
        return f"gas pressure {name}"


@dataclass(frozen=True)
class Tap:
    """A pressure tap.

    Parameters
    ----------
    name : str
        Its label.
    chainage : float
        True length along the pipe's axis, m.
    elevation : float
        Of the pipe's axis above datum, m.
    gauge : str or None
        The gauge that reads it; None where only differential gauges do.
    gauge_elevation : float or None
        Elevation of its gauge, m; None: at the pipe's axis.
    reading_u, chainage_u, elevation_u : float or None
        This tap's own standard uncertainties, which go before those of the gauge and the survey.
    """

    name: str
    chainage: float
    elevation: float = 0.0
    gauge: str | None = None
    gauge_elevation: float | None = None
    reading_u: float | None = None
    chainage_u: float | None = None
    elevation_u: float | None = None


@dataclass(frozen=True)
class Observation:
    """One column of readings: a gauge at a tap, or between `tap` (upstream) and `tap_2` (downstream).

    `read_twice` says that each reading is the difference of two that were read from the scale one by one.
    """

    gauge: str
    tap: str
    tap_2: str | None = None
    read_twice: bool = False

    @property
    def label(self) -> str:
        """The tap, or the gauge of a differential reading: the name of its column of readings."""
        return self.tap if self.tap_2 is None else self.gauge


@dataclass(frozen=True)
class SourceFile:
    """An input file and the SHA-256 of its bytes."""

    name: str
    sha256: str


@dataclass(frozen=True)
class Survey:
    """A line, its runs and their readings, valid once made.

    Parameters
    ----------
    title : str
        What the survey calls itself.
    source : str
        The folder or file it was read from.
    reaches : tuple of Reach
        In flow order, contiguous.
    fittings, taps, gauges : tuples
        Taps in order of chainage.
    observations : tuple of Observation
        One for each column of `readings`, in the same order.
    runs : DataFrame
        One row a run, in the order of the file: ``run`` (text), ``flow`` (m³/s, mean of the repeats),
        ``flow_u`` (standard uncertainty of that mean from the spread of repeats, NaN without repeats),
        ``temperature`` (K, NaN where it was not given), ``repeats`` (int); where the files have them,
        ``temperature_u`` (K, of the run's own temperature, from its change during the run) and for each off-take
        ``offtake NAME`` (m³/s), ``gas pressure NAME`` (Pa, of a gauge), ``flow_start`` and ``flow_end`` (m³/s), ``direction`` (``rising``, ``falling`` or None).
        Where the flow is to be worked out from `flow_readings`, ``flow`` is NaN but in static runs.
    readings : DataFrame
        Indexed by run, one column an observation (its label), SI (m or Pa), mean of the repeats, NaN where not taken.
    repeats : DataFrame
        Like `readings`: how many values each mean has (int).
    spreads : DataFrame
        Like `readings`: standard deviation of one reading among the repeats, NaN where there are fewer than two; of one
        level, pooled over them, for a compound manometer.
    stated : StatedUncertainties
        What ``[uncertainty]`` says.
    files : tuple of SourceFile
        The input files.
    assumptions, cautions : tuple of str
        What the loader took for granted, and what a reader should know.
    date : str or None
        As in the file (ISO 8601).
    levels : DataFrame or None
        The levels that compound manometers are read at, m, indexed by run: a column ``gauge level`` each.
    units : mapping of str to str
        The unit of each column as the files gave it; columns of ``taps.csv`` begin with the file's name.
    offtakes : tuple of Offtake
        The branches that take flow away.
    side_valves : tuple of SideValve
        The valves on branches, shut or not.
    flow : FlowSetup
        How the flow was measured, and how the taps were read meanwhile.
    flow_readings : DataFrame
        What the method reads, SI: a row for each row of the file (``run``, ``file``, ``line``, the method's columns or those
        of `flow_gauges`); empty where the flow itself is given.
    written : DataFrame
        Numbers of the file that `readings` does not hold one by one: ``run``, ``column`` and ``reading`` (SI) of each
        repeat, and of each limb that was read. Empty where there are none.
    flow_gauges : tuple of Gauge
        The gauges at the tappings of the flow's meter that ``[flow]`` names; empty where its differential is a column.
    wall_histories : tuple of WallHistory
        What was known of the walls beforehand.

    Raises
    ------
    SurveyError
        Where the parts do not fit together.
    """

    title: str
    source: str
    reaches: tuple[Reach, ...]
    taps: tuple[Tap, ...]
    gauges: tuple[Gauge, ...]
    observations: tuple[Observation, ...]
    runs: pd.DataFrame
    readings: pd.DataFrame
    repeats: pd.DataFrame
    spreads: pd.DataFrame
    fittings: tuple[Fitting, ...] = ()
    fluid: Fluid = Fluid()
    site: Site = Site()
    stated: StatedUncertainties = StatedUncertainties()
    files: tuple[SourceFile, ...] = ()
    assumptions: tuple[str, ...] = ()
    cautions: tuple[str, ...] = ()
    date: str | None = None
    units: Mapping[str, str] = field(default_factory=dict)
    levels: pd.DataFrame | None = None
    offtakes: tuple[Offtake, ...] = ()
    side_valves: tuple[SideValve, ...] = ()
    flow: FlowSetup = field(default_factory=FlowSetup)
    flow_readings: pd.DataFrame = field(default_factory=pd.DataFrame)
    written: pd.DataFrame = field(default_factory=pd.DataFrame)
    flow_gauges: tuple[Gauge, ...] = ()
    wall_histories: tuple[WallHistory, ...] = ()

    def __post_init__(self) -> None:
        problems = [Problem(self.source or "survey", None, None, text) for text in _faults(self)]
        if problems:
            raise SurveyError(problems)

    def _repr_html_(self) -> str:
        """Show the runs and their readings, for notebooks."""
        kinds = {gauge.name: gauge.kind for gauge in self.gauges}
        sizes = {"length": "small head", "pressure": "pressure"}
        readings = self.readings.set_axis(
            [f"reading {one.label}" for one in self.observations], axis="columns"
        )
        return shown(
            f"{self.title}{f', {self.date}' if self.date else ''}",
            [
                counted((len(self.runs), "run"), (len(self.taps), "tap"), (len(self.cautions), "caution")),
            ],
            self.runs.reset_index(drop=True).join(readings.reset_index(drop=True)),
            (
                Shown("run", "run"),
                Shown("flow", "flow", "flow"),
                Shown("t", "temperature", "temperature"),
                *(
                    Shown(one.label, f"reading {one.label}", sizes[GAUGE_KINDS[kinds[one.gauge]].reading])
                    for one in self.observations
                ),
            ),
        )

    def tap(self, name: str) -> Tap:
        """Return the tap called `name`; KeyError where there is none."""
        return {tap.name: tap for tap in self.taps}[name]

    def gauge(self, name: str) -> Gauge:
        """Return the gauge called `name`; KeyError where there is none."""
        return {gauge.name: gauge for gauge in self.gauges}[name]


def _faults(survey: Survey) -> list[str]:
    """What keeps the parts of a survey from fitting together."""
    found: list[str] = []
    found += [
        f"two {plural} are called {name!r}; give each its own name"
        for plural, names in (
            ("reaches", [reach.name for reach in survey.reaches]),
            ("fittings", [fitting.name for fitting in survey.fittings]),
            ("taps", [tap.name for tap in survey.taps]),
            ("gauges", [gauge.name for gauge in survey.gauges]),
            ("runs", list(survey.runs["run"])),
        )
        for name, count in sorted(Counter(names).items())
        if count > 1
    ]
    if not survey.reaches:
        return [*found, "there is no reach; give at least one"]
    for reach in survey.reaches:
        if not reach.end > reach.start:
            found.append(
                f"reach {reach.name!r} ends at {reach.end} m, not after its start at {reach.start} m"
            )
        if not reach.diameter.value > 0:
            found.append(f"reach {reach.name!r} has a bore of {reach.diameter.value} m; it must be above 0")
    for before, after in itertools.pairwise(survey.reaches):
        if not np.isclose(before.end, after.start, rtol=0, atol=1e-9):
            found.append(
                f"reach {after.name!r} starts at {after.start} m but {before.name!r} ends at {before.end} m; "
                "reaches follow each other without a gap"
            )
    first, last = survey.reaches[0].start, survey.reaches[-1].end
    for what, name, at in [("tap", tap.name, tap.chainage) for tap in survey.taps] + [
        ("fitting", fitting.name, fitting.at) for fitting in survey.fittings
    ]:
        if not first <= at <= last:
            found.append(f"{what} {name!r} at {at} m lies outside every reach ({first} m to {last} m)")
    found += _offtake_faults(survey)
    chainages = [tap.chainage for tap in survey.taps]
    if any(after <= before for before, after in itertools.pairwise(chainages)):
        found.append("the chainages of the taps do not increase")
    known = {tap.name for tap in survey.taps}
    kinds = {gauge.name: gauge.kind for gauge in survey.gauges}
    found += [
        f"gauge {name!r} is of unknown kind {kind!r}; known are {', '.join(GAUGE_KINDS)}"
        for name, kind in kinds.items()
        if kind not in GAUGE_KINDS
    ]
    for observation in survey.observations:
        if observation.gauge not in kinds:
            found.append(f"readings name the gauge {observation.gauge!r}, which is not described")
        if not {observation.tap, observation.tap_2} <= known | {None}:
            found.append(f"readings name a tap that is not described: {observation.label!r}")
    shape = (len(survey.runs), len(survey.observations))
    for table in ("readings", "repeats", "spreads"):
        if getattr(survey, table).shape != shape:
            found.append(
                f"{table} has the shape {getattr(survey, table).shape}, not {shape} (runs, observations)"
            )
    if (survey.runs["flow"].to_numpy(float) < 0).any():
        found.append("a flow is negative; chainage increases downstream")
    return found


def _offtake_faults(survey: Survey) -> list[str]:
    """Off-takes that do not lie between two reaches, that take nothing known, or that take it all."""
    boundaries = [reach.start for reach in survey.reaches[1:]]
    found = [
        f"off-take {one.name!r} at {one.at} m lies at no boundary between two reaches; split the reach there"
        for one in survey.offtakes
        if not any(abs(one.at - at) <= 1e-6 for at in boundaries)
    ]
    missing = [one.name for one in survey.offtakes if one.column not in survey.runs.columns]
    found += [f"the runs do not tell what off-take {name!r} takes" for name in missing]
    if survey.offtakes and not missing:
        flow = survey.runs["flow"].to_numpy(float)
        taken = survey.runs[[one.column for one in survey.offtakes]].to_numpy(float).sum(axis=1)
        if ((flow > 0) & ~(taken < flow)).any():
            found.append("the off-takes of a run take as much as flows, or more")
    return found
