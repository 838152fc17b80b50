"""The inputs that all flowing runs share, each by what one standard uncertainty of it changes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import Input
from gradeline.reduction.line import Line, change_of_bore_gains
from gradeline.reduction.offtakes import flow_heads, offtake_inputs
from gradeline.reduction.sections import dimensions_of
from gradeline.survey import Survey

__all__ = ["common_errors", "flowing_inputs", "persistent_errors", "stated_tap_errors"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Errors of single taps that are the same in all runs, or grow with the slope.
_STEADY = frozenset({"static reading", "tap elevation"})
_ALONG_SLOPE = frozenset({"tap chainage"})
#: Errors that all readings of one gauge share, and that set it apart from the others.
_OF_A_GAUGE = frozenset({"gauge zero", "gauge zero reading", "gauge calibration", "gauge leg elevation"})
#: A change of head below this is none, m.
_NO_HEAD = 1e-9


def flowing_inputs(
    survey: Survey,
    line: Line,
    corrections: Corrections,
    rows: NDArray[np.intp],
    slopes: Array,
    heads: Array,
    loss_head: Array,
    given_k: Array,
    base: Array,
    gain: Array,
) -> tuple[Input, ...]:
    """List the shared inputs of the readings, of the line and of the static runs, for the flowing runs.

    Parameters
    ----------
    survey, line, corrections
        The survey, its layout and its static runs.
    rows : (F,) int array
        Flowing runs among all.
    slopes, heads : (F, K) array
        Friction slopes; α V²/2g, m.
    loss_head : (F, M) array
        V²/2g that each loss refers to, m.
    given_k : (M,) array
        Given loss coefficients, 0 where fitted.
    base : (n,) array
        Standard deviation of one static reading, m; 0 where it is not known.
    gain : (F, K) array
        Relative change of the flow in a reach for one of the flow at the line's start: 1 without off-takes.

    Returns
    -------
    tuple of Input
        Each with a stated uncertainty.
    """
    sight, stated = corrections.heads.taps, survey.stated
    found = [
        replace(
            one,
            heads=None if one.heads is None else one.heads[rows],
            viscosity=None if one.viscosity is None else one.viscosity[rows],
        )
        for one in corrections.heads.inputs
    ]
    found = [_of_flow(one, rows, gain, line, sight, heads, loss_head * given_k) for one in found]
    count = len(line.diameter)
    gains = change_of_bore_gains(survey, line)
    for k, reach in enumerate(survey.reaches):
        here = np.arange(count) == k
        at_tap = heads[:, line.reach_of_tap] * (line.reach_of_tap == k)
        losses = (loss_head * given_k * (line.reference == k)) @ line.passed.T
        # K of a sudden change of bore follows the bore of the same area.
        changed = (loss_head * gains[:, k]) @ line.passed.T
        found += [
            Input(
                one.name,
                reach.name,
                (-2.0 * (at_tap + losses) + 0.5 * changed) @ sight.T * one.area,
                one.diameter * here,
                # As if the area went as the square of the bore: what it does beyond that stands as a flow.
                0.0 if reach.section is None else (2.0 * one.diameter - one.area) * here,
                laminar_constant=one.constant * here if one.constant else None,
            )
            for one in dimensions_of(reach)
        ]
    if stated.flow_scale:
        found.append(
            Input(
                "flow calibration",
                heads=flow_heads(line, sight, heads, loss_head * given_k, gain) * (2.0 * stated.flow_scale),
                flow=stated.flow_scale if not survey.offtakes else stated.flow_scale * gain,
            )
        )
    found += offtake_inputs(survey, line, sight, rows, heads, loss_head * given_k)
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
        # The offsets' own scatter, along its principal axes: independent of one another.
        covariance = corrections.covariance * np.outer(base, base)
        variances, axes = np.linalg.eigh(covariance)
        found += [
            Input("static reading", heads=np.tile(-np.sqrt(variance) * axis, (len(rows), 1)))
            for variance, axis in zip(variances, axes.T, strict=True)
            if variance > 1e-9 * max(float(variances[-1]), 1e-300)
        ]
    return tuple(found)


def _of_flow(
    one: Input,
    rows: NDArray[np.intp],
    gain: Array,
    line: Line,
    sight: Array,
    heads: Array,
    loss_heads: Array,
) -> Input:
    """An input that changes the flow of each run in its own way (R, 1), with the velocity heads that go with it."""
    if not isinstance(one.flow, np.ndarray):
        return one
    relative = one.flow[rows] * gain
    change = 2.0 * flow_heads(line, sight, heads, loss_heads, relative)
    return replace(one, flow=relative, heads=change if one.heads is None else one.heads + change)


def persistent_errors(inputs: tuple[Input, ...], used: Mask) -> tuple[Array | None, bool, bool]:
    """Return the errors of single taps that persist over the runs.

    Parameters
    ----------
    inputs : tuple of Input
        All shared inputs.
    used : (F, n) bool array
        Observations that enter.

    Returns
    -------
    persistent : (F, n) array or None
        Standard uncertainty of each observation from them, m.
    steady, along_slope : bool
        Whether some are constant over the runs, or grow with the slope; the zeros of gauges among the former.
    """
    found = {
        one.name for one in inputs if one.heads is not None and np.abs(one.heads).max(initial=0.0) > _NO_HEAD
    }
    parts = [one.heads**2 for one in inputs if one.name in _STEADY | _ALONG_SLOPE and one.heads is not None]
    total = np.sqrt(np.sum(parts, axis=0)) if parts else np.zeros(used.shape)
    steady = bool(found & _STEADY) or any(name.startswith("gauge") for name in found)
    return (
        np.where(used, total, 0.0) if (total > _NO_HEAD).any() else None,
        steady,
        bool(found & _ALONG_SLOPE),
    )


def stated_tap_errors(inputs: tuple[Input, ...], shape: tuple[int, int]) -> Array:
    """Return the stated errors that set single observations apart over all runs.

    Parameters
    ----------
    inputs : tuple of Input
        All shared inputs.
    shape : (F, n)
        Of the observations.

    Returns
    -------
    (F, n, q) array
        Change of the observations for one standard uncertainty of each, m: positions, elevations, static readings, and
        what belongs to a gauge.
    """
    parts = [
        np.nan_to_num(one.heads)
        for one in inputs
        if one.heads is not None
        and (
            one.name in _STEADY | _ALONG_SLOPE
            or (one.name.startswith("gauge") and one.name not in _OF_A_GAUGE)
        )
        and np.abs(np.nan_to_num(one.heads)).max(initial=0.0) > _NO_HEAD
    ]
    return np.stack(parts, axis=2) if parts else np.zeros((*shape, 0))


def common_errors(
    inputs: tuple[Input, ...], flow_effect: Array, sees_level: Array, used: Mask
) -> tuple[Array | None, Array]:
    """Return the errors that several observations of a run share and that its line feels.

    Parameters
    ----------
    inputs : tuple of Input
        All shared inputs; the zeros of gauges are looked for.
    flow_effect : (F, n) array
        Change of the observations for one standard uncertainty of the run's own flow, m.
    sees_level : (n,) array
        1 for a head, 0 for a difference of heads.
    used : (F, n) bool array
        Observations that enter.

    Returns
    -------
    common : (F, n, k) array or None
        All of them, m; what moves all observations alike is left to the line's level.
    flow_effect : (F, n) array
        As given, or zero where the line does not feel it, m.
    """
    if _is_level(flow_effect, sees_level, used):
        flow_effect = np.zeros_like(flow_effect)
    parts = [flow_effect] if flow_effect.any() else []
    parts += [
        one.heads
        for one in inputs
        if one.name in _OF_A_GAUGE and one.heads is not None and not _is_level(one.heads, sees_level, used)
    ]
    return (np.stack(parts, axis=2) if parts else None), flow_effect


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
    return bool((high - low)[seen].max(initial=0.0) < _NO_HEAD) and not other.any()
