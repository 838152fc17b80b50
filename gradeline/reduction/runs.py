"""The runs of a survey through the fits: energy heads, lines, scatter, outlying readings, with all shared effects."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.runs import Model, RunFits, fit_runs
from gradeline.hydraulics.friction import (
    colebrook_white,
    darcy_friction_factor,
    kinetic_energy_coefficient,
    relative_roughness,
    velocity_head,
)
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import Input, observation_kinds
from gradeline.reduction.line import Line, disturbed_taps
from gradeline.reduction.media import Media
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = ["Flowing", "fit_survey", "stated_floor"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A slope this small is rounding of the heads.
_NO_SLOPE = 1e-12
#: Inputs that move single taps, and so the residuals.
_TAP_INPUTS = frozenset({"tap chainage", "tap elevation", "static reading"})
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
        E₀, the reaches, the fitted losses.
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
    velocity = flow[:, None] / line.area
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
        [sight.sum(axis=1), -(sight @ line.lengths), -(sight @ line.passed)[:, line.fitted]]
    )
    kind, _ = observation_kinds(survey)
    floor = stated_floor(survey, corrections)
    repeats = survey.repeats.to_numpy(float)[rows]
    model = Model(
        design=design,
        velocity_head=plain_head.max(axis=1) if len(rows) else np.zeros(0),
        kind=kind,
        floor=floor,
        stated=bool((stated_floor(survey, corrections, resolution=False) > 0).all()),
        repeats=repeats if (repeats > 1).any() else None,
    )
    factor = np.asarray(colebrook_white(np.maximum(reynolds, 1.0), 0.0))

    def energy_of(factor: Array) -> tuple[Array, Array]:
        heads = np.asarray(kinetic_energy_coefficient(reynolds, factor)) * plain_head
        return heads, observed + heads[:, line.reach_of_tap] @ sight.T + given

    heads, energy = energy_of(factor)
    first = fit_runs(energy, used, model, details=False)
    slopes = first.lines.parameters[:, 1 : 1 + len(line.diameter)]
    heads, energy = energy_of(_law_factor(slopes, velocity, reynolds, line, media))
    base = np.array([part.base for part in first.scatter])[kind] if len(kind) else np.zeros(0)
    inputs = _all_inputs(survey, line, corrections, rows, slopes, heads, loss_head, given_k, base, floor)
    flow_effect = 2.0 * flow_u[:, None] * (heads[:, line.reach_of_tap] @ sight.T + given)
    if _is_level(flow_effect, sight.sum(axis=1), used):
        flow_effect = np.zeros_like(flow_effect)
    model = replace(
        model,
        persistent=_persistent(inputs, used, several=len(survey.gauges) > 1),
        flow_effect=flow_effect if flow_effect.any() else None,
    )
    fits = fit_runs(energy, used, model, keep_all=keep_all)
    shared = fits.lines.projectors
    gain = shared.gain[shared.index]
    columns = [np.zeros(energy.shape) if one.heads is None else one.heads for one in inputs]
    stacked = np.stack(columns, axis=2) if columns else np.zeros((*energy.shape, 0))
    known = fits.pooled_dof > 0 or model.is_stated
    random = fits.random_covariance() if known else np.full((len(rows), *[design.shape[1]] * 2), np.nan)
    return Flowing(
        rows=rows,
        flow=flow,
        flow_u=flow_u,
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
        own=np.einsum("fpn,fn->fp", gain, np.where(used, flow_effect, 0.0)),
        random=random,
    )


def _flow_uncertainty(survey: Survey, rows: NDArray[np.intp], flow: Array) -> Array:
    """Relative standard uncertainty of each run's own flow: as stated, else from its repeats."""
    stated = survey.stated.flow
    if stated is not None:
        return np.full(len(flow), stated.value) if stated.relative else stated.value / flow
    return np.nan_to_num(survey.runs["flow_u"].to_numpy(float)[rows] / flow)


def stated_floor(survey: Survey, corrections: Corrections, *, resolution: bool = True) -> Array:
    """Stated uncertainty of one reading of each observation as head, with its resolution, m; 0 where unstated."""
    gain = np.abs(corrections.heads.gain)
    known = np.isfinite(gain)
    size = np.where(known, gain, 0.0).sum(axis=0) / np.maximum(known.sum(axis=0), 1)
    floors = []
    for observation in survey.observations:
        gauge, tap = survey.gauge(observation.gauge), survey.tap(observation.tap)
        general = {"m": survey.stated.reading, "Pa": survey.stated.reading_pressure}
        stated = gauge.reading_u if tap.reading_u is None or observation.tap_2 else tap.reading_u
        if stated is None:
            stated = general["Pa" if gauge.kind in _PRESSURE_KINDS else "m"]
        floors.append(np.hypot(stated or 0.0, (gauge.resolution or 0.0) * resolution / np.sqrt(12.0)))
    return np.asarray(np.array(floors) * size)


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


def _is_level(effect: Array, sees_level: Array, used: Mask) -> bool:
    """Whether a change moves all observations of a run alike, so that the line does not feel it."""
    if not len(effect):
        return True
    alike = np.where(used & (sees_level != 0), effect, np.nan)
    other = np.where(used & (sees_level == 0), effect, 0.0)
    if not np.isfinite(alike).any():
        return not other.any()
    high, low = (
        np.nanmax(np.where(np.isnan(alike), -np.inf, alike), axis=1),
        np.nanmin(np.where(np.isnan(alike), np.inf, alike), axis=1),
    )
    seen = np.isfinite(high)
    return bool((high - low)[seen].max(initial=0.0) < 1e-12) and not other.any()


def _all_inputs(
    survey: Survey,
    line: Line,
    corrections: Corrections,
    rows: NDArray[np.intp],
    slopes: Array,
    heads: Array,
    loss_head: Array,
    given_k: Array,
    base: Array,
    floor: Array,
) -> tuple[Input, ...]:
    """The shared inputs of the readings, of the line and of the static runs, for the flowing runs."""
    sight, stated = corrections.heads.taps, survey.stated
    found = [
        replace(
            one,
            heads=None if one.heads is None else one.heads[rows],
            viscosity=None if one.viscosity is None else one.viscosity[rows],
        )
        for one in corrections.heads.inputs
    ]
    count = len(line.diameter)
    for k, reach in enumerate(survey.reaches):
        size = reach.diameter.relative_u
        if not size:
            continue
        at_tap = heads[:, line.reach_of_tap] * (line.reach_of_tap == k)
        losses = (loss_head * given_k * (line.reference == k)) @ line.passed.T
        found.append(
            Input(
                "bore",
                reach.name,
                (at_tap + losses) @ sight.T * (-4.0 * size),
                size * (np.arange(count) == k),
            )
        )
    if stated.flow_scale:
        whole = heads[:, line.reach_of_tap] + (loss_head * given_k) @ line.passed.T
        found.append(
            Input(
                "flow calibration", heads=whole @ sight.T * (2.0 * stated.flow_scale), flow=stated.flow_scale
            )
        )
    local = np.nan_to_num(slopes)[:, line.reach_of_tap]
    for t, tap in enumerate(survey.taps):
        size = stated.chainage if tap.chainage_u is None else tap.chainage_u
        if size:
            found.append(Input("tap chainage", tap.name, heads=local[:, [t]] * size * sight[:, t]))
    for m, fitting in enumerate(line.fittings):
        if fitting.loss_coefficient is not None and fitting.loss_coefficient.u:
            head = loss_head[:, [m]] * fitting.loss_coefficient.u
            found.append(
                Input("given loss coefficient", fitting.name, heads=head * (sight @ line.passed[:, m]))
            )
    if corrections.applied:
        times = np.maximum(corrections.times, 1.0)
        # The scatter of the first pass holds the static reading's share; taken apart here.
        alone = np.maximum(np.nan_to_num(base) / np.sqrt(1.0 + 1.0 / times), floor)
        for i, observation in enumerate(survey.observations):
            if corrections.times[i] > 0 and alone[i] > 0:
                effect = -corrections.spread[:, i] * alone[i] / np.sqrt(times[i])
                found.append(
                    Input("static reading", observation.label, heads=np.tile(effect, (len(rows), 1)))
                )
    return tuple(found)


def _persistent(inputs: tuple[Input, ...], used: Mask, *, several: bool) -> Array | None:
    """Standard uncertainty of each observation from stated errors that are the same in all runs, m."""
    names = _TAP_INPUTS | ({"gauge zero"} if several else set())
    parts = [one.heads**2 for one in inputs if one.name in names and one.heads is not None]
    if not parts:
        return None
    total = np.sqrt(np.sum(parts, axis=0))
    return np.where(used, total, 0.0) if total.any() else None
