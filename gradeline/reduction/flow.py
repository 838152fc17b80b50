"""The flow of each run from what its method reads, with the errors that its runs share."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import Problem, SurveyError
from gradeline.flow_methods import FLOW_METHODS, FlowMethod, FlowSetup
from gradeline.quantities import Measured
from gradeline.reduction.drift import drift_uncertainty, flow_drift
from gradeline.reduction.fluids import fluid_inputs
from gradeline.reduction.heads import Heads, Input
from gradeline.reduction.media import Media, media_of
from gradeline.reduction.meters import FLOWS, MeterReadings
from gradeline.survey import Survey

__all__ = ["Metered", "metered_flow", "with_flow_inputs"]

Array = NDArray[np.float64]

_FLOWS_APART = 0.02
#: Part of a standard uncertainty that an input is stepped by: small enough to be first order, large against rounding.
_PART = 1e-3


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
        With ``flow``, ``flow_u`` and, where the flow drifted, ``flow_drift_u`` (relative) in its runs.

    Raises
    ------
    SurveyError
        Where the repeats of a run have flows that lie further apart than 2 % or three stated uncertainties.
    """
    if survey.flow.method == "direct":
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
    return _from_readings(survey)


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

    inputs = _inputs(survey, media, given, flow, relative)
    assumptions = [meter.said(given), *_twice_stated(survey, setup, method), *_steady(survey)]
    cautions = _unstated(survey, setup, method)
    if meter.limits is not None and len(flow):
        cautions += [
            f"The {setup.method} is used beyond {meter.standard}: {phrase}. The flow is worked out all the same."
            for phrase in meter.limits(given, flow)
        ]
    return Metered(
        replace(
            survey,
            runs=survey.runs.assign(flow=per_run, flow_u=flow_u),
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
    return MeterReadings(
        columns={
            name: table[name].to_numpy(float)[flows]
            for name in table.columns
            if name not in {"run", "file", "line"}
        },
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
    for column in method.columns:
        size = given.values.get(f"u_{column.replace(' ', '_')}", 0.0)
        for heading in _headings(given, column) if size else []:
            # An outlet that is shut reads 0 and has no error.
            step = np.where(given.columns[heading] > 0, _PART * size, 0.0)
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
    size = meter.coefficient_u(given) if meter.coefficient_u is not None else 0.0
    add("flow discharge coefficient", "", flow * (1.0 + _PART * size))
    primary = _headings(given, method.primary)
    scale, zero = (_PART * given.values.get(key, 0.0) for key in ("u_scale", "u_zero"))
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
    found += _media_inputs(survey, media, given, relative)
    return tuple(found)


def _media_inputs(
    survey: Survey, media: Media, given: MeterReadings, relative: Callable[[Array], Array]
) -> list[Input]:
    """What density, temperature and gravity change: the same errors as those of the heads, by the same names."""
    flow_of = FLOWS[given.setup.method].flow
    found = []
    labels = {name: place for place, name in enumerate(survey.runs["run"])}
    run = np.array([labels[name] for name in survey.flow_readings["run"]], dtype=np.intp)
    at = run[survey.runs["flow"].to_numpy(float)[run] != 0]
    for one in fluid_inputs(survey.fluid, survey.runs["temperature"].to_numpy(float)):
        stepped = replace(
            given,
            density=given.density * (1.0 + _PART * one.density[at]),
            kinematic_viscosity=given.kinematic_viscosity * (1.0 + _PART * one.viscosity[at]),
        )
        pressure = survey.fluid.line_pressure
        if one.name == "line pressure" and pressure is not None:
            # The expansibility of the gas goes with it too.
            stepped = replace(stepped, line_pressure=pressure.value + _PART * (pressure.u or 0.0))
        found.append(Input(one.name, one.subject, flow=relative(flow_of(stepped))))
    if survey.stated.temperature:
        step = media.density_by_temperature[at] * survey.stated.temperature * _PART
        found.append(
            Input("temperature", flow=relative(flow_of(replace(given, density=given.density + step))))
        )
    if media.gravity_u:
        changed = flow_of(replace(given, gravity=given.gravity * (1.0 + _PART * media.gravity_u)))
        found.append(Input("gravity", flow=relative(changed)))
    return [one for one in found if np.any(np.abs(one.flow) > 1e-12)]


def _twice_stated(survey: Survey, setup: FlowSetup, method: FlowMethod) -> list[str]:
    """Tell where [uncertainty] and [flow] both state an uncertainty of the flow."""
    said = []
    random = [key for column in method.columns if (key := f"u_{column.replace(' ', '_')}") in setup.settings]
    if survey.stated.flow is not None and random:
        said.append(
            "The flow's random uncertainty is the one stated in [uncertainty]; "
            f"[flow] {' and '.join(random)} {'is' if len(random) == 1 else 'are'} not used."
        )
    shared = [key for key in ("u_scale", "u_coefficient") if key in setup.settings]
    coefficient = setup.settings.get("discharge_coefficient")
    if isinstance(coefficient, Measured) and coefficient.u:
        shared.append("discharge_coefficient")
    shared += [
        f"discharge_coefficient of outlet {outlet.name!r}"
        for outlet in setup.outlets
        if isinstance(value := outlet.settings.get("discharge_coefficient"), Measured) and value.u
    ]
    if survey.stated.flow_scale and shared:
        said.append(
            f"[uncertainty] flow_scale is counted beside the uncertainty of [flow] {' and '.join(shared)}: "
            "keep one if both describe the same calibration."
        )
    return said


def _unstated(survey: Survey, setup: FlowSetup, method: FlowMethod) -> list[str]:
    """Tell the uncertainties of the method's readings that nobody stated."""
    said = []
    nothing = "it contributes nothing to the results"
    if survey.stated.flow is None:
        said += [
            f"The uncertainty of a reading of {column!r} ([flow] u_{column.replace(' ', '_')}) is not stated: {nothing} "
            "beyond what repeats show."
            for column in method.columns
            if f"u_{column.replace(' ', '_')}" not in setup.settings
        ]
    if survey.stated.flow_scale is None:
        said += [
            f"The uncertainty of the {'calibration' if key == 'u_scale' else 'zero'} of {method.primary!r} "
            f"([flow] {key}) is not stated: {nothing}."
            for key in ("u_scale", "u_zero")
            if key in method.keys and key not in setup.settings
        ]
    if setup.settings.get("gauge_fluid") == "mercury":
        said.append(
            "Mercury is poisonous, as a vapour too: fill and bleed such lines over a tray, in moving air, and have a spill kit "
            "at hand."
        )
    bare = [
        key
        for key in ("pipe_bore", "throat_bore", "notch_angle", "notch_width")
        if _bare(setup.settings, key)
    ]
    said += [f"The uncertainty of [flow] {key} is not stated: {nothing}." for key in bare]
    said += [
        f"The uncertainty of the {key.replace('_', ' ')} of outlet {outlet.name!r} is not stated: {nothing}."
        for outlet in setup.outlets
        for key in outlet.settings
        if _bare(outlet.settings, key)
    ]
    if setup.table is not None and np.isnan(setup.table.flow_u).any():
        said.append(
            f"The uncertainty of the flows in {setup.table.file} is not stated throughout: {nothing}."
        )
    return said


def _bare(settings: Mapping[str, Measured | str], key: str) -> bool:
    value = settings.get(key)
    return isinstance(value, Measured) and value.u is None


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
