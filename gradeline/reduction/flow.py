"""The flow of each run from what its method reads, with the errors that its runs share."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import Problem, SurveyError
from gradeline.flow_methods import FLOW_METHODS, FlowMethod, FlowSetup
from gradeline.quantities import Measured
from gradeline.reduction.drift import drift_uncertainty, flow_drift
from gradeline.reduction.flow_sentences import twice_stated, unstated
from gradeline.reduction.fluids import FluidInput, fluid_inputs
from gradeline.reduction.heads import Heads, Input
from gradeline.reduction.media import Media, media_of
from gradeline.reduction.meters import FLOWS, MeterReadings
from gradeline.reduction.swift_flows import swift_cautions
from gradeline.reduction.tappings import tapping_heads
from gradeline.survey import Survey

__all__ = ["Metered", "metered_flow", "with_flow_inputs"]

Array = NDArray[np.float64]

_FLOWS_APART = 0.02
#: Part of a standard uncertainty that an input is stepped by: small enough to be first order, large against rounding.
_PART = 1e-3
_NOT_READ = frozenset({"run", "file", "line"})


@dataclass(frozen=True)
class Metered:
    """A survey whose runs have their flow, m³/s, and the shared inputs of the flow (arrays (R, 1), relative)."""

    survey: Survey
    inputs: tuple[Input, ...] = ()


def metered_flow(survey: Survey) -> Metered:
    """Work out the flow of every run.

    Parameters
    ----------
    survey : Survey
        As read; its flows stay as they are where the flow itself was given and did not drift.

    Returns
    -------
    Metered
        With ``flow``, ``flow_u`` and, where the flow drifted, ``flow_drift_u`` (relative) in its runs; with
        ``flow_power``, the power of its reading that a metered flow goes with.

    Raises
    ------
    SurveyError
        Where the repeats of a run have flows that lie further apart than 2 % or three stated uncertainties.
    """
    found = _given_directly(survey) if survey.flow.method == "direct" else _from_readings(survey)
    swift = swift_cautions(found.survey)
    if not swift:
        return found
    return replace(found, survey=replace(found.survey, cautions=(*found.survey.cautions, *swift)))


def _given_directly(survey: Survey) -> Metered:
    drift = flow_drift(survey)
    if not drift.any():
        return Metered(replace(survey, assumptions=(*survey.assumptions, *_steady(survey))))
    u, assumptions, cautions = drift_uncertainty(survey, drift)
    return Metered(
        replace(
            survey,
            runs=survey.runs.assign(flow_drift_u=u),
            assumptions=(*survey.assumptions, *assumptions),
            cautions=(*survey.cautions, *cautions),
        )
    )


def _from_readings(survey: Survey) -> Metered:
    setup, table = survey.flow, survey.flow_readings
    method, meter = FLOW_METHODS[setup.method], FLOWS[setup.method]
    labels = {name: place for place, name in enumerate(survey.runs["run"])}
    run = np.array([labels[name] for name in table["run"]], dtype=np.intp)
    flows = survey.runs["flow"].to_numpy(float)[run] != 0
    media = media_of(survey)
    at = run[flows]
    given = _given(survey, setup, media, at, flows)
    flow = meter.flow(given)
    size = _row_uncertainty(given, method)
    per_run = np.zeros(len(labels))
    count = np.bincount(at, minlength=len(labels))
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.bincount(at, weights=flow, minlength=len(labels)) / count
        per_run = np.where(count > 0, mean, 0.0)
        squares = np.bincount(at, weights=(flow - per_run[at]) ** 2, minlength=len(labels))
        spread = np.where(count > 1, np.sqrt(squares / (count - 1) / count), np.nan)
        read = np.sqrt(np.bincount(at, weights=size**2, minlength=len(labels))) / count
    _check_repeats(survey, table["line"].to_numpy(int)[flows], at, flow, per_run)
    flow_u = np.fmax(spread, np.where(read > 0, read, np.nan))

    def relative(changed: Array) -> Array:
        change = np.bincount(at, weights=changed - flow, minlength=len(labels)) / np.maximum(count, 1)
        return np.asarray(change / _PART / np.where(per_run > 0, per_run, 1.0))[:, None]

    larger = given
    for heading in _headings(given, method.primary):
        larger = _stepped(larger, heading, _PART * given.columns[heading])
    inputs = _inputs(survey, media, given, flow, relative)
    gauged = given.tappings
    assumptions = [
        meter.said(given),
        *(gauged.assumptions if gauged is not None else ()),
        *twice_stated(survey, setup, method),
        *_steady(survey),
    ]
    cautions = [*unstated(survey, setup, method), *(gauged.cautions if gauged is not None else ())]
    if meter.limits is not None and len(flow):
        cautions += [
            f"The {setup.method} is used beyond {meter.standard}: {phrase}. The flow is worked out all the same."
            for phrase in meter.limits(given, flow)
        ]
    return Metered(
        replace(
            survey,
            runs=survey.runs.assign(
                flow=per_run, flow_u=flow_u, flow_power=np.abs(relative(meter.flow(larger))[:, 0])
            ),
            assumptions=(*survey.assumptions, *assumptions),
            cautions=(*survey.cautions, *cautions),
        ),
        inputs,
    )


def _steady(survey: Survey) -> list[str]:
    """Tell that a drift could not be looked for where taps were read in order and each run has one flow."""
    if survey.flow.read != "in order" or {"flow_start", "flow_end"} <= set(survey.runs.columns):
        return []
    return [
        "The taps were read in order and each run has one value of the flow: a drift of the flow meanwhile could not be "
        "looked for, and none is taken."
    ]


def _given(
    survey: Survey, setup: FlowSetup, media: Media, at: NDArray[np.intp], flows: NDArray[np.bool_]
) -> MeterReadings:
    own = dict(setup.settings)
    for outlet in setup.outlets:
        own |= {f"{key} {outlet.name}": value for key, value in outlet.settings.items()}
    table = survey.flow_readings
    pressure = survey.fluid.line_pressure
    tappings = tapping_heads(survey, flows) if survey.flow_gauges else None
    read = {name: table[name].to_numpy(float)[flows] for name in table.columns if name not in _NOT_READ}
    return MeterReadings(
        columns=read if tappings is None else {"differential": tappings.head},
        values={key: value.value for key, value in own.items() if isinstance(value, Measured)},
        words={key: value for key, value in own.items() if isinstance(value, str)},
        setup=setup,
        density=media.density[at],
        kinematic_viscosity=media.kinematic_viscosity[at],
        temperature=survey.runs["temperature"].to_numpy(float)[at],
        gravity=media.gravity,
        air=media.air,
        line_pressure=None if pressure is None else pressure.value,
        length=bool({"gauge_fluid", "gauge_fluid_density"} & set(own)),
        runs=tuple(survey.runs["run"].iloc[at]),
        tappings=tappings,
    )


def _stepped(given: MeterReadings, heading: str, step: Array | float) -> MeterReadings:
    return replace(given, columns={**given.columns, heading: given.columns[heading] + step})


def _headings(given: MeterReadings, column: str) -> list[str]:
    """The headings of a column: one, or one for each outlet."""
    return [name for name in given.columns if name == column or name.startswith(f"{column} ")]


def _row_uncertainty(given: MeterReadings, method: FlowMethod) -> Array:
    """Standard uncertainty of the flow of each row from the stated uncertainties of its single readings, m³/s."""
    flow_of = FLOWS[given.setup.method].flow
    now = flow_of(given)
    variance = np.zeros(len(now))
    if given.tappings is not None:
        step = _PART * given.tappings.head_u
        variance += ((flow_of(_stepped(given, method.primary, step)) - now) / _PART) ** 2
    for column in method.columns:
        key = f"u_{column.replace(' ', '_')}"
        size = given.values.get(key, 0.0)
        for heading in _headings(given, column) if size else []:
            # An outlet that is shut reads 0 and has no error.
            of = given.columns[heading] if key in given.setup.relative else 1.0
            step = np.where(given.columns[heading] > 0, _PART * size * of, 0.0)
            variance += ((flow_of(_stepped(given, heading, step)) - now) / _PART) ** 2
    return np.sqrt(variance)


def _inputs(
    survey: Survey, media: Media, given: MeterReadings, flow: Array, relative: Callable[[Array], Array]
) -> tuple[Input, ...]:
    """List the errors that the flows of all runs share, each by what one standard uncertainty of it changes."""
    setup = given.setup
    method, meter = FLOW_METHODS[setup.method], FLOWS[setup.method]
    found: list[Input] = []

    def add(name: str, subject: str, changed: Array) -> None:
        effect = relative(changed)
        if np.any(np.abs(effect) > 1e-12):
            found.append(Input(name, subject, flow=effect))

    def valued(key: str, value: float) -> MeterReadings:
        return replace(given, values={**given.values, key: value})

    own: dict[tuple[str, str], Measured | str] = {(key, ""): value for key, value in setup.settings.items()}
    own |= {(key, outlet.name): value for outlet in setup.outlets for key, value in outlet.settings.items()}
    for (key, outlet), value in own.items():
        if isinstance(value, Measured) and value.u:
            place = f"{key} {outlet}".strip()
            add(
                f"flow {key.replace('_', ' ')}",
                outlet,
                meter.flow(valued(place, value.value + _PART * value.u)),
            )
    size = meter.coefficient_u(given, flow) if meter.coefficient_u is not None else 0.0
    add("flow discharge coefficient", "", flow * (1.0 + _PART * size))
    primary = _headings(given, method.primary)
    scale, zero = (_PART * given.values.get(key, 0.0) for key in ("u_scale", "u_zero"))
    if setup.table is not None and "u_zero" in setup.relative:
        zero *= setup.table.reading[-1]
    scaled, shifted = given, given
    for heading in primary:
        scaled = _stepped(scaled, heading, scale * given.columns[heading])
        shifted = _stepped(shifted, heading, np.where(given.columns[heading] > 0, zero, 0.0))
    add("flow reading scale", "", meter.flow(scaled))
    add("flow reading zero", "", meter.flow(shifted))
    if setup.table is not None:
        u = np.nan_to_num(np.array(setup.table.flow_u))
        add(
            "flow meter table",
            "",
            flow + _PART * np.interp(given.columns[primary[0]], setup.table.reading, u),
        )
    common = _media_inputs(survey, media, given, relative)
    apart = {(one.name, one.subject) for one in common}
    for name, subject, change in given.tappings.errors if given.tappings is not None else ():
        if (name, subject) in apart:
            continue  # stepped with the fluid
        told, whose = ("flow tapping rise", "") if name == "tap elevation" else (f"flow {name}", subject)
        add(told, whose, meter.flow(_stepped(given, method.primary, _PART * change)))
    return tuple(found + [one for one in common if np.any(np.abs(one.flow) > 1e-12)])


def _media_inputs(
    survey: Survey, media: Media, given: MeterReadings, relative: Callable[[Array], Array]
) -> list[Input]:
    """What density, viscosity, temperature and gravity change: the same errors as those of the heads, by the same names.

    The whole flow is worked out again at both sides, its coefficient iterated anew: a central difference over a
    thousandth of a standard uncertainty. A complex step is not to be had, as the coefficients of ISO 5167 take real
    numbers; from one side the kinks of those formulas would count in full.
    """
    flow_of = FLOWS[given.setup.method].flow
    now = flow_of(given)
    labels = {name: place for place, name in enumerate(survey.runs["run"])}
    run = np.array([labels[name] for name in survey.flow_readings["run"]], dtype=np.intp)
    at = run[survey.runs["flow"].to_numpy(float)[run] != 0]
    errors = given.tappings.errors if given.tappings is not None else ()
    by_gauge = {(name, subject): change for name, subject, change in errors}
    pressure = survey.fluid.line_pressure

    def effect(name: str, subject: str, step: Callable[[float], MeterReadings]) -> Array:
        change = by_gauge.get((name, subject), 0.0)
        sides = [
            flow_of(_stepped(step(part), "differential", part * change) if np.any(change) else step(part))
            for part in (_PART, -_PART)
        ]
        return relative(now + (sides[0] - sides[1]) / 2.0)

    found = []
    for one in fluid_inputs(survey.fluid, survey.runs["temperature"].to_numpy(float)):

        def fluid(part: float, one: FluidInput = one) -> MeterReadings:
            stepped = replace(
                given,
                density=given.density * (1.0 + part * one.density[at]),
                kinematic_viscosity=given.kinematic_viscosity * (1.0 + part * one.viscosity[at]),
            )
            if one.name == "line pressure" and pressure is not None:
                # The expansibility of the gas goes with it too.
                stepped = replace(stepped, line_pressure=pressure.value + part * (pressure.u or 0.0))
            return stepped

        found.append(Input(one.name, one.subject, flow=effect(one.name, one.subject, fluid)))
    size = survey.stated.temperature
    if size:

        def warmer(part: float) -> MeterReadings:
            return replace(
                given,
                temperature=given.temperature + part * size,
                density=given.density + part * size * media.density_by_temperature[at],
                kinematic_viscosity=given.kinematic_viscosity
                * (1.0 + part * size * media.viscosity_by_temperature[at]),
            )

        found.append(Input("temperature", flow=effect("temperature", "", warmer)))
    if media.gravity_u:

        def heavier(part: float) -> MeterReadings:
            return replace(given, gravity=given.gravity * (1.0 + part * media.gravity_u))

        found.append(Input("gravity", flow=effect("gravity", "", heavier)))
    return found


def _check_repeats(
    survey: Survey, lines: NDArray[np.intp], run: NDArray[np.intp], flow: Array, mean: Array
) -> None:
    """Repeats of a run are one flow, as the loader holds given flows."""
    stated = survey.stated.flow
    file = str(survey.flow_readings["file"].iloc[0])
    high, low = np.full(len(mean), -np.inf), np.full(len(mean), np.inf)
    np.maximum.at(high, run, flow)
    np.minimum.at(low, run, flow)
    allowed = _FLOWS_APART * mean
    if stated is not None:
        allowed = np.maximum(allowed, 3 * (stated.value * mean if stated.relative else stated.value))
    problems = []
    for place in np.flatnonzero(high - low > allowed):
        mine = run == place
        listed = ", ".join(
            f"{1000 * q:.4g} L/s (row {line})" for q, line in zip(flow[mine], lines[mine], strict=True)
        )
        problems.append(
            Problem(
                file,
                int(lines[mine][-1]),
                None,
                f"the repeats of run {survey.runs['run'].iloc[place]!r} have the flows {listed}, further apart than 2 % or "
                "three times the stated uncertainty; give runs at different flows their own labels",
            )
        )
    if problems:
        raise SurveyError(problems)


def with_flow_inputs(heads: Heads, inputs: tuple[Input, ...]) -> Heads:
    """Return heads whose shared inputs know what they change in the flow; an input of the same name is one error.

    Parameters
    ----------
    heads : Heads
        As `heads_of` gives them.
    inputs : tuple of Input
        Of the flow.
    """
    by_name = {(one.name, one.subject): one for one in inputs}
    found = [
        replace(one, flow=by_name.pop((one.name, one.subject)).flow)
        if (one.name, one.subject) in by_name
        else one
        for one in heads.inputs
    ]
    return replace(heads, inputs=(*found, *by_name.values()))
