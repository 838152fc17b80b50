"""The flowing runs before any fit: what was observed where, what is given, and what is known of the readings."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.model import Model
from gradeline.hydraulics.friction import velocity_head
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import observation_kinds
from gradeline.reduction.line import Line, disturbed_taps
from gradeline.reduction.media import Media
from gradeline.reduction.offtakes import reach_flows
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = ["Setting", "setting_of", "stated_readings"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_PRESSURE_KINDS = frozenset(name for name, kind in GAUGE_KINDS.items() if kind.reading == "pressure")


@dataclass(frozen=True)
class Setting:
    """The flowing runs, F of them, before any fit.

    Parameters
    ----------
    survey, media, line, corrections
        Where they come from.
    rows : (F,) int array
        Their places among the runs of the survey.
    flow, flow_u : (F,) array
        m³/s; relative standard uncertainty of the run's own flow.
    flow_gain : (F, K) array
        Relative change of the flow in a reach for one of the flow at the line's start, dimensionless.
    velocity, reynolds, plain_head : (F, K) array
        m/s; dimensionless; V²/2g, m.
    loss_head : (F, M) array
        V²/2g that each loss refers to, m.
    given_k : (M,) array
        Given loss coefficients, 0 where fitted, dimensionless.
    given : (F, n) array
        Losses of given K upstream of each observation, m.
    sight : (n, T) array
        Which taps each observation sees.
    observed : (F, n) array
        Piezometric heads or differences of them, m.
    used, disturbed, excluded : (F, n) bool array
        Observations that may enter, and why others may not.
    reasons, cautions : list of str
        Why a tap is disturbed; taps close to a fitting.
    kind : (n,) int array
        Group whose scatter an observation shares.
    repeats : (F, n) array
        Readings behind each observation, dimensionless.
    model : Model
        What is known of the observations.
    """

    survey: Survey
    media: Media
    line: Line
    corrections: Corrections
    rows: NDArray[np.intp]
    flow: Array
    flow_u: Array
    flow_gain: Array
    velocity: Array
    reynolds: Array
    plain_head: Array
    loss_head: Array
    given_k: Array
    given: Array
    sight: Array
    observed: Array
    used: Mask
    disturbed: Mask
    excluded: Mask
    reasons: list[str]
    cautions: list[str]
    kind: NDArray[np.intp]
    repeats: Array
    model: Model


def setting_of(survey: Survey, media: Media, line: Line, corrections: Corrections, excluded: Mask) -> Setting:
    """Lay out the flowing runs of a survey.

    Parameters
    ----------
    survey, media, line, corrections
        What is to be fitted.
    excluded : (R, n) bool array
        Readings left out by hand.

    Returns
    -------
    Setting
        Of the runs with a flow.
    """
    rows = np.flatnonzero(survey.runs["flow"].to_numpy(float) > 0)
    flow = survey.runs["flow"].to_numpy(float)[rows]
    in_reach = reach_flows(survey, rows)
    flow_gain = flow[:, None] / in_reach
    velocity = in_reach / line.area
    reynolds = velocity * line.diameter / media.kinematic_viscosity[rows, None]
    plain_head = velocity_head(velocity, media.gravity)
    flow_u = _flow_uncertainty(survey, rows, flow)
    sight = corrections.heads.taps
    observed = corrections.heads.observed[rows]
    disturbed_tap, reasons, cautions = disturbed_taps(survey, line, reynolds)
    disturbed = disturbed_tap @ (sight != 0).T.astype(float) > 0
    out = excluded[rows]
    used = np.isfinite(observed) & ~disturbed & ~out
    loss_head = plain_head[:, line.reference] if len(line.fittings) else np.zeros((len(rows), 0))
    given_k = np.array(
        [0.0 if one.loss_coefficient is None else one.loss_coefficient.value for one in line.fittings]
    )
    given = (loss_head * given_k) @ (sight @ line.passed).T
    design = np.column_stack(
        [
            sight.sum(axis=1),
            -(sight @ line.lengths),
            -(sight @ line.passed)[:, line.fitted],
            corrections.heads.levels[:, 1:],
        ]
    )
    kind, _ = observation_kinds(survey)
    floor, resolution = stated_readings(survey, corrections)
    repeats = survey.repeats.to_numpy(float)[rows]
    # The spread of a deflection is that of both its limbs; of a compound manometer it is that of one level among several.
    legs = np.array([bool(survey.gauge(one.gauge).legs) for one in survey.observations], dtype=bool)
    to_head = np.where(legs, corrections.heads.spread, np.abs(corrections.heads.gain))
    spreads = survey.spreads.to_numpy(float)[rows] * to_head[rows]
    model = Model(
        design=design,
        velocity_head=plain_head.max(axis=1) if len(rows) else np.zeros(0),
        kind=kind,
        floor=floor,
        resolution=resolution,
        repeats=repeats if (repeats > 1).any() else None,
        spreads=spreads if (repeats > 1).any() else None,
    )
    return Setting(
        survey=survey,
        media=media,
        line=line,
        corrections=corrections,
        rows=rows,
        flow=flow,
        flow_u=flow_u,
        flow_gain=flow_gain,
        velocity=velocity,
        reynolds=reynolds,
        plain_head=plain_head,
        loss_head=loss_head,
        given_k=given_k,
        given=given,
        sight=sight,
        observed=observed,
        used=used,
        disturbed=disturbed,
        excluded=out,
        reasons=reasons,
        cautions=cautions,
        kind=kind,
        repeats=repeats,
        model=model,
    )


def _flow_uncertainty(survey: Survey, rows: NDArray[np.intp], flow: Array) -> Array:
    """Relative standard uncertainty of each run's own flow: as stated, else from its repeats."""
    stated = survey.stated.flow
    if stated is not None:
        own = np.full(len(flow), stated.value) if stated.relative else stated.value / flow
        if survey.record is not None:
            own = np.hypot(own, np.nan_to_num(survey.runs["flow_u"].to_numpy(float)[rows] / flow))
    else:
        own = np.nan_to_num(survey.runs["flow_u"].to_numpy(float)[rows] / flow)
    if "flow_drift_u" in survey.runs.columns:
        own = np.hypot(own, survey.runs["flow_drift_u"].to_numpy(float)[rows])
    return np.asarray(own)


def stated_readings(survey: Survey, corrections: Corrections) -> tuple[Array, Array]:
    """Return (stated uncertainty of one reading of each observation, what its resolution adds), as heads, m.

    0 where nothing is stated. A tap that is never read says nothing of its kind: it is given what the best of the others
    has.
    """
    gain = corrections.heads.spread
    known = np.isfinite(gain)
    size = np.where(known, gain, 0.0).sum(axis=0) / np.maximum(known.sum(axis=0), 1)
    floors, resolutions = [], []
    for observation in survey.observations:
        gauge, tap = survey.gauge(observation.gauge), survey.tap(observation.tap)
        general = {"m": survey.stated.reading, "Pa": survey.stated.reading_pressure}
        stated = gauge.reading_u if tap.reading_u is None or observation.tap_2 else tap.reading_u
        if stated is None:
            stated = general["Pa" if gauge.kind in _PRESSURE_KINDS else "m"]
        floors.append(stated or 0.0)
        resolutions.append((gauge.resolution or 0.0) / np.sqrt(12.0))
    kind, _ = observation_kinds(survey)
    read = np.asarray(known.any(axis=0), bool)
    floor, resolution = (
        _as_the_read_ones(np.array(values) * size, read, kind) for values in (floors, resolutions)
    )
    return floor, resolution


def _as_the_read_ones(values: Array, read: Mask, kind: NDArray[np.intp]) -> Array:
    """Values of the observations that are read, the others with the least one of their kind, else of all."""
    found = values.copy()
    for mine in (kind == one for one in np.unique(kind)):
        like = values[mine & read] if (mine & read).any() else values[read]
        found[mine & ~read] = like.min() if len(like) else 0.0
    return found
