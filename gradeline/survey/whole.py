"""The survey as a whole."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import pandas as pd

from gradeline.errors import Problem, SurveyError
from gradeline.flow_methods import FlowSetup
from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.quantities.shown import Shown, counted, shown
from gradeline.survey.faults import faults
from gradeline.survey.fluid import Fluid
from gradeline.survey.gauges import Gauge, Observation
from gradeline.survey.line import Fitting, Offtake, Reach, SideValve, Site, Tap, WallHistory
from gradeline.survey.record import Record
from gradeline.survey.stated import StatedUncertainties

__all__ = ["SourceFile", "Survey"]


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
    record : Record or None
        What a logger wrote; its runs' means, uncertainties and, where they are to be found, windows are worked out by the
        reduction, and until then `readings` has plain means of the given windows, or of the whole record.

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
    fluid: Fluid = field(default_factory=Fluid)
    site: Site = field(default_factory=Site)
    stated: StatedUncertainties = field(default_factory=StatedUncertainties)
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
    record: Record | None = None

    def __post_init__(self) -> None:
        problems = [Problem(self.source or "survey", None, None, text) for text in faults(self)]
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
