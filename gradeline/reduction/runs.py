"""The runs of a survey through the fits: energy heads, lines, scatter, outlying readings, with all shared effects."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.pooled import robust_scatter
from gradeline.fitting.runs import Model, RunFits, fit_runs
from gradeline.fitting.scatter import Scatter
from gradeline.hydraulics.friction import (
    colebrook_white,
    darcy_friction_factor,
    kinetic_energy_coefficient,
    relative_roughness,
    velocity_head,
)
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import Input, observation_kinds
from gradeline.reduction.inputs import common_errors, flowing_inputs, persistent_errors
from gradeline.reduction.line import Line, disturbed_taps
from gradeline.reduction.media import Media
from gradeline.reduction.offtakes import flow_heads, reach_flows
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = ["Flowing", "fit_survey", "stated_readings"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A slope this small is rounding of the heads.
_NO_SLOPE = 1e-12
_PRESSURE_KINDS = frozenset(name for name, kind in GAUGE_KINDS.items() if kind.reading == "pressure")


@dataclass(frozen=True)
class Flowing:
    """All that the fits say of the flowing runs, F of them.

    Parameters
    ----------
    rows : (F,) int array
        Their places among the runs of the survey.
    flow, flow_u : (F,) array
        m³/s; relative standard uncertainty of the run's own flow, 0 where it is not known.
    reach_flow_u : (F, K) array
        Relative standard uncertainty of the flow in each reach from that of the run: larger below an off-take.
    velocity, reynolds, velocity_heads : (F, K) array
        m/s; dimensionless; α V²/2g, m.
    energy : (F, n) array
        Observed energy heads, the losses of given K added back, m.
    given : (F, n) array
        Those losses, m.
    disturbed, excluded, used : (F, n) bool array
        Why an observation did not enter, and whether it did.
    reasons : list of str
        Why a tap is disturbed.
    cautions : list of str
        Of taps that are close to a fitting.
    fits : RunFits
        The fits.
    design : (n, p) array
        E₀, the reaches, the fitted losses, the levels of gauges that float.
    inputs : tuple of Input
        All shared inputs with a stated uncertainty.
    effect : (F, p, q) array
        Change of the parameters with each of them.
    own : (F, p) array
        Change of the parameters with the run's own flow error.
    random : (F, p, p) array
        Covariance of the parameters from scatter alone; NaN where the scatter is not known.
    """

    rows: NDArray[np.intp]
    flow: Array
    flow_u: Array
    reach_flow_u: Array
    velocity: Array
    reynolds: Array
    velocity_heads: Array
    energy: Array
    given: Array
    disturbed: Mask
    excluded: Mask
    used: Mask
    reasons: list[str]
    cautions: list[str]
    fits: RunFits
    design: Array
    inputs: tuple[Input, ...]
    effect: Array
    own: Array
    random: Array

    def slopes(self) -> Array:
        """S of each run and reach (F, K), NaN where the taps do not determine it."""
        slopes = self.fits.lines.parameters[:, 1 : 1 + self.velocity.shape[1]]
        # What is left of equal readings is rounding, not a slope.
        return np.where(np.abs(slopes) < _NO_SLOPE, 0.0, slopes)


def fit_survey(
    survey: Survey,
    media: Media,
    line: Line,
    corrections: Corrections,
    excluded: Mask,
    *,
    keep_all: bool,
) -> Flowing:
    """Fit the flowing runs.

    Parameters
    ----------
    survey, media, line, corrections
        What is to be fitted.
    excluded : (R, n) bool array
        Readings left out by hand.
    keep_all : bool
        Whether flagged readings enter all the same.

    Returns
    -------
    Flowing
        Two passes: the second knows the friction that the velocity profile depends on, and the slopes that
        the errors of the tap positions depend on.
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
    read = np.isfinite(observed)
    disturbed_tap, reasons, cautions = disturbed_taps(survey, line, reynolds)
    disturbed = disturbed_tap @ (sight != 0).T.astype(float) > 0
    out = excluded[rows]
    used = read & ~disturbed & ~out
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
    spreads = survey.spreads.to_numpy(float)[rows] * np.abs(corrections.heads.gain[rows])
    model = Model(
        design=design,
        velocity_head=plain_head.max(axis=1) if len(rows) else np.zeros(0),
        kind=kind,
        floor=floor,
        resolution=resolution,
        repeats=repeats if (repeats > 1).any() else None,
        spreads=spreads if (repeats > 1).any() else None,
    )
    factor = np.asarray(colebrook_white(np.maximum(reynolds, 1.0), 0.0))

    def energy_of(factor: Array) -> tuple[Array, Array]:
        heads = np.asarray(kinetic_energy_coefficient(reynolds, factor)) * plain_head
        return heads, observed + heads[:, line.reach_of_tap] @ sight.T + given

    heads, energy = energy_of(factor)
    first = fit_runs(energy, used, model, search=False, details=False)
    slopes = first.lines.parameters[:, 1 : 1 + len(line.diameter)]
    heads, energy = energy_of(_law_factor(slopes, velocity, reynolds, line, media))
    flow_effect = 2.0 * flow_u[:, None] * flow_heads(line, sight, heads, loss_head * given_k, flow_gain)
    # The scatter first as the trimmed readings show it, then as the fit does that knows of the static readings.
    scatter = robust_scatter(energy, used, model)
    for last in (False, True) if corrections.applied else (True,):
        base = _static_scatter(scatter, kind, corrections, repeats, single=len(rows) == 1 or not last)
        inputs = flowing_inputs(
            survey, line, corrections, rows, slopes, heads, loss_head, given_k, base, flow_gain
        )
        persistent, steady, along_slope = persistent_errors(inputs, used)
        common, felt = common_errors(inputs, flow_effect, sight.sum(axis=1), used)
        told = replace(model, persistent=persistent, common=common, steady=steady, along_slope=along_slope)
        fits = fit_runs(energy, used, told, keep_all=keep_all and last, details=last)
        scatter = fits.scatter
    shared = fits.lines.projectors
    gain = shared.gain[shared.index]
    columns = [np.zeros(energy.shape) if one.heads is None else one.heads for one in inputs]
    stacked = np.stack(columns, axis=2) if columns else np.zeros((*energy.shape, 0))
    return Flowing(
        rows=rows,
        flow=flow,
        flow_u=flow_u,
        reach_flow_u=flow_u[:, None] * flow_gain,
        velocity=velocity,
        reynolds=reynolds,
        velocity_heads=heads,
        energy=energy,
        given=given,
        disturbed=disturbed,
        excluded=out,
        used=used & (~fits.flagged | keep_all),
        reasons=reasons,
        cautions=cautions,
        fits=fits,
        design=design,
        inputs=inputs,
        effect=np.einsum("fpn,fnq->fpq", gain, np.where(np.isfinite(stacked), stacked, 0.0)),
        own=np.einsum("fpn,fn->fp", gain, np.where(used, felt, 0.0)),
        random=fits.random_covariance(),
    )


def _flow_uncertainty(survey: Survey, rows: NDArray[np.intp], flow: Array) -> Array:
    """Relative standard uncertainty of each run's own flow: as stated, else from its repeats."""
    stated = survey.stated.flow
    if stated is not None:
        own = np.full(len(flow), stated.value) if stated.relative else stated.value / flow
    else:
        own = np.nan_to_num(survey.runs["flow_u"].to_numpy(float)[rows] / flow)
    if "flow_drift_u" in survey.runs.columns:
        own = np.hypot(own, survey.runs["flow_drift_u"].to_numpy(float)[rows])
    return np.asarray(own)


def _static_scatter(
    scatter: tuple[Scatter, ...],
    kind: NDArray[np.intp],
    corrections: Corrections,
    repeats: Array,
    *,
    single: bool,
) -> Array:
    """Standard deviation of one static reading of each observation, m; 0 where it is not known.

    With a single run (or before the persistent errors are told apart) the scatter about the line holds the static
    reading's share: σ² (1/n + 1/m) for means of n flowing and m static readings.
    """
    if not len(kind):
        return np.zeros(0)
    base = np.nan_to_num(np.array([part.base for part in scatter])[kind])
    known = np.array([part.stands for part in scatter])[kind]
    times = np.nanmean(repeats, axis=0) if len(repeats) else np.ones(len(kind))
    share = np.sqrt(1.0 + np.maximum(times, 1.0) * np.diagonal(corrections.covariance))
    return np.asarray(np.where(known | (not single), base, base / share))


def stated_readings(survey: Survey, corrections: Corrections) -> tuple[Array, Array]:
    """Return (stated uncertainty of one reading of each observation, what its resolution adds), as heads, m.

    0 where nothing is stated.
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
    return np.array(floors) * size, np.array(resolutions) * size


def _law_factor(slopes: Array, velocity: Array, reynolds: Array, line: Line, media: Media) -> Array:
    """Friction factor of the law at the roughness that the slopes of the first pass show."""
    turbulent = (reynolds > 4000) & (slopes > 0)
    factor = darcy_friction_factor(np.where(turbulent, slopes, 1.0), line.diameter, velocity, media.gravity)
    signed = np.where(turbulent, relative_roughness(factor, np.maximum(reynolds, 1.0)), np.nan)
    rough = np.zeros(len(line.diameter))
    for k in range(len(rough)):
        mine = signed[:, k][np.isfinite(signed[:, k])]
        rough[k] = np.clip(np.median(mine), 0.0, 0.1) if len(mine) else 0.0
    return np.asarray(colebrook_white(np.maximum(reynolds, 1.0), rough))
