"""The runs of a survey through the fits: energy heads, lines, scatter, outlying readings, with all shared effects."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.diagnosis.shown_flow import shown_velocity_heads
from gradeline.fitting.pooled import robust_scatter
from gradeline.fitting.runs import Model, RunFits, fit_runs
from gradeline.fitting.scatter import Scatter
from gradeline.hydraulics.friction import (
    colebrook_white,
    kinetic_energy_coefficient,
)
from gradeline.reduction.ailments import Ailments, look_for_ailments
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import Input
from gradeline.reduction.inputs import common_errors, flowing_inputs, persistent_errors, stated_tap_errors
from gradeline.reduction.kinetic import law_roughness, with_kinetic_correction
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.offtakes import flow_heads
from gradeline.reduction.setting import Setting, setting_of
from gradeline.survey import Survey

__all__ = ["Flowing", "fit_survey"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Looks for what ails taps and line at most: each knows the slopes that the one before left.
_LOOKS = 3
#: A slope this small is rounding of the heads.
_NO_SLOPE = 1e-12
#: An effect below this share of what it acts on, or of a slope or head (m) this small, is rounding.
_ROUNDING, _SMALL = 1e-12, 1e-3


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
        E₀, the reaches, the fitted losses, the levels of gauges that float, what nobody listed.
    inputs : tuple of Input
        All shared inputs with a stated uncertainty.
    effect : (F, p, q) array
        Change of the parameters with each of them.
    own : (F, p) array
        Change of the parameters with the run's own flow error.
    random : (F, p, p) array
        Covariance of the parameters from scatter alone; NaN where the scatter is not known.
    ailments : Ailments
        What ails taps and line, and what the fits made of it.
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
    ailments: Ailments

    def slopes(self) -> Array:
        """S of each run and reach (F, K), NaN where the taps do not determine it."""
        slopes = self.fits.lines.parameters[:, 1 : 1 + self.velocity.shape[1]]
        # What is left of equal readings is rounding, not a slope.
        return np.where(np.abs(slopes) < _NO_SLOPE, 0.0, slopes)


@dataclass(frozen=True)
class _Fitted:
    """One round of fits."""

    used: Mask
    model: Model
    first: RunFits
    slopes: Array
    heads: Array
    energy: Array
    inputs: tuple[Input, ...]
    felt: Array
    fits: RunFits


def fit_survey(
    survey: Survey,
    media: Media,
    line: Line,
    corrections: Corrections,
    excluded: Mask,
    *,
    keep_all: bool,
    look: bool = True,
    correct_offsets: bool = False,
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
    look : bool
        Whether to look for what ails taps and line over all runs.
    correct_offsets : bool
        Whether offsets of taps that the flowing runs show are taken off; else such taps are left out.

    Returns
    -------
    Flowing
        Two passes: the second knows the friction that the velocity profile depends on, and the slopes that
        the errors of the tap positions depend on.
    """
    here = setting_of(survey, media, line, corrections, excluded)
    ailments = Ailments.none(len(here.model.design))
    if look:
        ailments = _ailments(here, ailments, correct_offsets=correct_offsets)
    stage = _fitted(here, ailments, keep_all=keep_all, whole=True)
    fits = stage.fits
    before, shared = stage.first.lines.projectors, fits.lines.projectors
    gain = shared.gain[shared.index]
    inputs = with_kinetic_correction(
        stage.inputs,
        line,
        media,
        sight=here.sight,
        slopes=stage.slopes,
        gain=before.gain[before.index][:, 1 : 1 + len(line.diameter)],
        velocity=here.velocity,
        reynolds=here.reynolds,
        plain_head=here.plain_head,
    )
    columns = [np.zeros(stage.energy.shape) if one.heads is None else one.heads for one in inputs]
    stacked = np.stack(columns, axis=2) if columns else np.zeros((*stage.energy.shape, 0))
    return Flowing(
        rows=here.rows,
        flow=here.flow,
        flow_u=here.flow_u,
        reach_flow_u=here.flow_u[:, None] * here.flow_gain,
        velocity=here.velocity,
        reynolds=here.reynolds,
        velocity_heads=stage.heads,
        energy=stage.energy,
        given=here.given,
        disturbed=here.disturbed,
        excluded=here.excluded,
        used=stage.used & (~fits.flagged | keep_all),
        reasons=here.reasons,
        cautions=here.cautions,
        fits=fits,
        design=stage.model.design,
        inputs=inputs,
        effect=_without_rounding(
            np.einsum("fpn,fnq->fpq", gain, np.where(np.isfinite(stacked), stacked, 0.0)),
            fits.lines.parameters[:, :, None],
        ),
        own=_without_rounding(
            np.einsum("fpn,fn->fp", gain, np.where(stage.used, stage.felt, 0.0)), fits.lines.parameters
        ),
        random=fits.random_covariance(),
        ailments=ailments,
    )


def _without_rounding(effect: Array, parameter: Array) -> Array:
    """Take out what is left of effects on a slope or a head that cancel: it would pass for an uncertainty."""
    size = np.maximum(np.abs(np.nan_to_num(parameter)), _SMALL)
    return np.where(np.abs(effect) < _ROUNDING * size, 0.0, effect)


def _energy(here: Setting, factor: Array, ailments: Ailments) -> tuple[Array, Array]:
    """Velocity heads with α for a friction factor, and the observed energy heads."""
    heads = np.asarray(kinetic_energy_coefficient(here.reynolds, factor)) * here.plain_head
    return heads, here.observed + heads[
        :, here.line.reach_of_tap
    ] @ here.sight.T + here.given - ailments.taken_off


def _fitted(here: Setting, ailments: Ailments, *, keep_all: bool, whole: bool) -> _Fitted:
    """All passes with what ails taps and line as far as it is known; `whole`: single readings are judged."""
    line, corrections = here.line, here.corrections
    mine = here.used & ~ailments.left_out
    together = None if ailments.diagnosis is None else ailments.diagnosis.together & mine
    around = replace(here.model, design=np.hstack([here.model.design, ailments.columns]))
    smooth = np.asarray(colebrook_white(np.maximum(here.reynolds, 1.0), 0.0))
    first = fit_runs(_energy(here, smooth, ailments)[1], mine, around, search=False, details=False)
    slopes = first.lines.parameters[:, 1 : 1 + len(line.diameter)]
    heads, energy = _energy(
        here, _law_factor(slopes, here.velocity, here.reynolds, line, here.media), ailments
    )
    given = here.loss_head * here.given_k
    flow_effect = 2.0 * here.flow_u[:, None] * flow_heads(line, here.sight, heads, given, here.flow_gain)
    # The scatter first as the trimmed readings show it, then as the fit does that knows of the static readings.
    scatter = robust_scatter(energy, mine if together is None else mine & ~together, around)
    for last in (False, True) if corrections.applied and whole else (True,):
        single = len(here.rows) == 1 or not last
        base = _static_scatter(scatter, here.kind, corrections, here.repeats, single=single)
        inputs = flowing_inputs(
            here.survey,
            line,
            corrections,
            here.rows,
            slopes,
            heads,
            here.loss_head,
            here.given_k,
            base,
            here.flow_gain,
        )
        inputs = (*inputs, *ailments.inputs)
        persistent, steady, along_slope = persistent_errors(inputs, mine)
        common, felt = common_errors(inputs, flow_effect, here.sight.sum(axis=1), mine)
        told = replace(around, persistent=persistent, common=common, steady=steady, along_slope=along_slope)
        judged = last and whole
        # Judged in the first pass too: else a wrong reading would pass for scatter of the static readings.
        fits = fit_runs(
            energy,
            mine,
            told,
            search=whole,
            keep_all=keep_all and judged,
            details=judged,
            together=together,
        )
        scatter = fits.scatter
    return _Fitted(mine, told, first, slopes, heads, energy, inputs, felt, fits)


def _shown_heads(here: Setting, stage: _Fitted) -> Array:
    """Velocity heads of each run and reach with what its own flow error does to them taken out."""
    count = stage.slopes.shape[1]
    u = np.sqrt(np.einsum("fpp->fp", stage.fits.random_covariance())[:, 1 : 1 + count])
    return np.column_stack(
        [shown_velocity_heads(here.plain_head[:, k], stage.slopes[:, k], u[:, k]) for k in range(count)]
    )


def _ailments(here: Setting, ailments: Ailments, *, correct_offsets: bool) -> Ailments:
    """Taps and line before any single reading: an unlisted loss would make outliers of innocent neighbours."""
    for _ in range(_LOOKS):
        stage = _fitted(here, ailments, keep_all=False, whole=False)
        again = look_for_ailments(
            here.survey,
            here.line,
            replace(stage.model, design=here.model.design, persistent=None),
            here.sight,
            stage.energy + ailments.taken_off,
            here.observed,
            here.used,
            stage.slopes,
            _shown_heads(here, stage),
            stated_tap_errors(stage.inputs, here.used.shape),
            correct_offsets=correct_offsets,
        )
        stands = again.same_as(ailments)
        ailments = again
        if stands:
            break
    return ailments


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


def _law_factor(slopes: Array, velocity: Array, reynolds: Array, line: Line, media: Media) -> Array:
    """Friction factor of the law at the roughness that the slopes of the first pass show."""
    rough, _ = law_roughness(slopes, velocity, reynolds, line, media)
    return np.asarray(colebrook_white(np.maximum(reynolds, 1.0), rough))
