"""What would make a plan tell more: each change is made to the plan, and all is worked out anew."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from gradeline.planning.accuracy import Accuracy, accuracy_of
from gradeline.planning.expected import Expected
from gradeline.planning.flows import with_more_runs
from gradeline.quantities import Measured
from gradeline.reduction.media import fluid_density, media_of
from gradeline.survey import GAUGE_KINDS, Gauge, Stated, Survey

__all__ = ["Change", "changes_of", "evaluated", "gauge_fluid_changes"]

_ROOM = 293.15
#: Gauge fluids to choose from beside the named ones, kg/m³ at 20 °C.
_LIGHT = {"oil": 800.0}
_HEAVY = {"a heavy liquid": 1600.0}
#: Another fluid within this of the present one's density is the same, relative.
_SAME = 0.02
_TIMES = 4


@dataclass(frozen=True)
class Change:
    """A change of the plan, and what it is expected to tell then.

    Parameters
    ----------
    name : str
        What is changed, as a phrase.
    accuracy : Accuracy
        The outcome.
    fits : bool
        Whether all columns of all runs can be read.
    """

    name: str
    accuracy: Accuracy
    fits: bool


def evaluated(name: str, survey: Survey, expect: Callable[[Survey], Expected], *, level: float) -> Change:
    """Work a changed plan out anew."""
    expected = expect(survey)
    return Change(name, accuracy_of(expected, level=level), bool(expected.fits.all()))


def changes_of(survey: Survey) -> Iterator[tuple[str, Survey]]:
    """Yield the changes to a plan that do not ask for other places or flows.

    Parameters
    ----------
    survey : Survey
        The plan.

    Yields
    ------
    str, Survey
        The change, and the plan with it: a bore, a reading and every other stated uncertainty half as large; other gauge
        fluids; more runs and repeats; a static run.
    """
    yield from gauge_fluid_changes(survey)
    yield "every run done twice", with_more_runs(survey)
    yield f"every tap read {_TIMES} times a run", _repeated(survey)
    if not (survey.runs["flow"] == 0).any() and not len(survey.flow_readings) and not survey.offtakes:
        yield "a static run before the others", _with_static(survey)
    yield from _halved(survey)


def gauge_fluid_changes(survey: Survey) -> Iterator[tuple[str, Survey]]:
    """Yield the plan with another fluid in each gauge that has one."""
    density = float(np.mean(media_of(survey).density))
    alike: dict[tuple[str, ...], list[Gauge]] = {}
    for gauge in survey.gauges:
        if "gauge_fluid" in GAUGE_KINDS[gauge.kind].keys:
            fluid = [str(gauge.settings.get(key)) for key in ("gauge_fluid", "gauge_fluid_density")]
            alike.setdefault((gauge.kind, *fluid), []).append(gauge)
    for gauges in alike.values():
        gauge = gauges[0]
        own = gauge.settings.get("gauge_fluid_density")
        now = (
            own.value if isinstance(own, Measured) else _named(str(gauge.settings.get("gauge_fluid", "air")))
        )
        above = now < density
        named = "air" if above else "mercury"
        choices = {named: _named(named), **(_LIGHT if above else _HEAVY)}
        for name, other in choices.items():
            if abs(other / now - 1) < _SAME or (other < density) is not above:
                continue
            shown = name if name == named else f"{name} of {other:.0f} kg/m³"
            changed = survey
            for one in gauges:
                changed = _with_gauge(changed, _filled(one, name, other, named=name == named))
            yield f"{shown} in {', '.join(one.name for one in gauges)}", changed


def _named(name: str) -> float:
    return float(fluid_density(name, np.array([_ROOM]))[0])


def _filled(gauge: Gauge, name: str, density: float, *, named: bool) -> Gauge:
    gone = {"gauge_fluid", "gauge_fluid_density", "gauge_fluid_expansion", "gas_pressure"}
    kept = {key: value for key, value in gauge.settings.items() if key not in gone}
    fluid: dict[str, Measured | str] = {"gauge_fluid": name}
    if not named:
        fluid["gauge_fluid_density"] = Measured(density)
    return replace(gauge, settings={**kept, **fluid})


def _with_gauge(survey: Survey, gauge: Gauge) -> Survey:
    return replace(survey, gauges=tuple(gauge if one.name == gauge.name else one for one in survey.gauges))


def _repeated(survey: Survey) -> Survey:
    runs = survey.runs.assign(repeats=survey.runs["repeats"] * _TIMES)
    return replace(survey, runs=runs, repeats=survey.repeats * _TIMES)


def _with_static(survey: Survey) -> Survey:
    first = survey.runs.iloc[[0]].copy()
    label = "static run"
    first["run"], first["flow"] = label, 0.0

    def grown(table: pd.DataFrame) -> pd.DataFrame:
        row = table.iloc[[0]].copy()
        row.index = pd.Index([label], dtype=object, name=table.index.name)
        return pd.concat([row, table])

    return replace(
        survey,
        runs=pd.concat([first, survey.runs], ignore_index=True),
        readings=grown(survey.readings),
        repeats=grown(survey.repeats),
        spreads=grown(survey.spreads),
        levels=None if survey.levels is None else grown(survey.levels),
    )


def _halved(survey: Survey) -> Iterator[tuple[str, Survey]]:
    """Yield the plan with each stated uncertainty half as large."""
    stated = survey.stated
    if any(reach.diameter.u for reach in survey.reaches):
        bores = tuple(
            replace(reach, diameter=replace(reach.diameter, u=reach.diameter.u / 2))
            if reach.diameter.u
            else reach
            for reach in survey.reaches
        )
        yield "the bore known twice as well", replace(survey, reaches=bores)
    yield "each reading twice as good", _better_readings(survey)
    if stated.chainage or any(tap.chainage_u for tap in survey.taps):
        taps = tuple(replace(tap, chainage_u=_half(tap.chainage_u)) for tap in survey.taps)
        yield (
            "chainages twice as good",
            replace(survey, taps=taps, stated=replace(stated, chainage=_half(stated.chainage))),
        )
    if stated.elevation or any(tap.elevation_u for tap in survey.taps):
        taps = tuple(replace(tap, elevation_u=_half(tap.elevation_u)) for tap in survey.taps)
        yield (
            "elevations twice as good",
            replace(survey, taps=taps, stated=replace(stated, elevation=_half(stated.elevation))),
        )
    if stated.flow is not None and stated.flow.value:
        own = Stated(stated.flow.value / 2, stated.flow.relative)
        yield "each run's own flow twice as good", replace(survey, stated=replace(stated, flow=own))
    for key, name in (
        ("flow_scale", "the flow's calibration twice as good"),
        ("temperature", "the thermometer twice as good"),
    ):
        if getattr(stated, key):
            yield name, replace(survey, stated=replace(stated, **{key: getattr(stated, key) / 2}))
    gauges = tuple(_better_gauge(one) for one in survey.gauges)
    if gauges != survey.gauges:
        yield "zeros and scales of the gauges twice as good", replace(survey, gauges=gauges)


def _better_gauge(gauge: Gauge) -> Gauge:
    """The gauge with half the uncertainty of its zero and scale, and half its limits of error."""
    settings = {
        key: replace(value, value=value.value / 2)
        if key.startswith("accuracy") and isinstance(value, Measured)
        else value
        for key, value in gauge.settings.items()
    }
    return replace(gauge, zero_u=_half(gauge.zero_u), scale_u=_half(gauge.scale_u), settings=settings)


def _half(u: float | None) -> float | None:
    return None if u is None else u / 2


def _better_readings(survey: Survey) -> Survey:
    stated = survey.stated
    gauges = tuple(
        replace(one, reading_u=_half(one.reading_u), resolution=_half(one.resolution))
        for one in survey.gauges
    )
    taps = tuple(replace(one, reading_u=_half(one.reading_u)) for one in survey.taps)
    general = replace(stated, reading=_half(stated.reading), reading_pressure=_half(stated.reading_pressure))
    return replace(survey, gauges=gauges, taps=taps, stated=general)
