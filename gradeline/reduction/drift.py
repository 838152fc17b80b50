"""A flow that changed while the taps were read: corrected where they were read in order, else an uncertainty."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.friction import LAMINAR_LIMIT
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import Input
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.survey import Survey

__all__ = ["drift_uncertainty", "flow_drift", "steadied"]

Array = NDArray[np.float64]

#: S goes as Q^n: 1 in laminar flow; between 1.75 (smooth, Blasius) and 2 (rough) otherwise, evenly likely.
_EXPONENT = 1.875
_EXPONENT_U = 0.125 / np.sqrt(3.0)


def flow_drift(survey: Survey) -> Array:
    """Return the change of the flow from the start of each run to its end (R,), relative; 0 where none was read."""
    if not {"flow_start", "flow_end"} <= set(survey.runs.columns):
        return np.zeros(len(survey.runs))
    flow = survey.runs["flow"].to_numpy(float)
    change = survey.runs["flow_end"].to_numpy(float) - survey.runs["flow_start"].to_numpy(float)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.nan_to_num(np.where(flow > 0, change / flow, 0.0))


def drift_uncertainty(survey: Survey, drift: Array) -> tuple[Array, list[str], list[str]]:
    """Return (relative standard uncertainty of each run's flow from its drift (R,), assumptions, cautions).

    Parameters
    ----------
    survey : Survey
        How its taps were read.
    drift : (R,) array
        Relative change of the flow over each run.

    Returns
    -------
    tuple
        Taps read together saw a flow somewhere between start and end, all equally likely: change / √12. Taps read in
        order are corrected (`steadied`).
    """
    largest = 100 * float(np.abs(drift).max())
    if survey.flow.read == "in order":
        said = (
            f"The flow changed by up to {largest:.2g} % while the taps were read one after another, from upstream at even "
            "intervals: each head is brought to the flow of its run with S ∝ Q^n, n = 1 in laminar flow and "
            f"{_EXPONENT:g} ± {_EXPONENT_U:.2g} otherwise. "
        )
        at = survey.flow.constant_head_at
        said += (
            f"The head at {at:g} m is taken as constant meanwhile."
            if at is not None
            else "The head in the middle of the line is taken as constant meanwhile, ± half the line "
            "([flow] constant_head_at says where it was)."
        )
        return np.zeros(len(drift)), [said], []
    u = np.abs(drift) / np.sqrt(12.0)
    said = (
        f"The flow changed by up to {largest:.2g} % during a run: 1/√12 of the change is added to the uncertainty of that "
        "run's flow."
    )
    if survey.flow.read is None:
        return (
            u,
            [said],
            [
                "The flow changed during the runs and nobody said how the taps were read: they are taken as read together. "
                'If they were read one after another, the lines are bent; write read = "in order" in [flow].'
            ],
        )
    return u, [said], []


def steadied(corrections: Corrections, survey: Survey, line: Line, media: Media) -> Corrections:
    """Return the heads of taps that were read in order, brought to the flow of their run.

    Parameters
    ----------
    corrections : Corrections
        Heads with the offsets of the static runs taken off.
    survey, line, media
        The survey, its layout and fluids.

    Returns
    -------
    Corrections
        h' = h_p + (h − h_p)(Q/Q_i)^n with Q_i the flow when tap i was read and h_p the head where it was constant. That
        place and n are shared inputs.
    """
    drift = flow_drift(survey)
    if survey.flow.read != "in order" or not drift.any():
        return corrections
    heads = corrections.heads
    flow = survey.runs["flow"].to_numpy(float)
    start = survey.runs["flow_start"].to_numpy(float)
    end = survey.runs["flow_end"].to_numpy(float)
    # Only what was read took its turn; a single reading is taken to have been read half-way.
    read = np.isfinite(heads.observed)
    turns = read.sum(axis=1)[:, None] - 1
    part = np.where(turns > 0, (np.cumsum(read, axis=1) - 1) / np.maximum(turns, 1), 0.5)
    with np.errstate(invalid="ignore", divide="ignore"):
        then = start[:, None] + (end - start)[:, None] * part
        log_ratio = np.where(drift[:, None] != 0, np.log(flow[:, None] / then), 0.0)
    velocity = flow / line.area[0]
    laminar = velocity * line.diameter[0] / media.kinematic_viscosity < LAMINAR_LIMIT
    exponent = np.where(laminar, 1.0, _EXPONENT)[:, None]
    ratio = np.exp(exponent * log_ratio)
    sees_level = heads.taps.sum(axis=1) != 0
    place = np.abs(heads.taps) @ line.chainage / np.maximum(np.abs(heads.taps).sum(axis=1), 1.0)
    pivot = survey.flow.constant_head_at
    at = float(place[sees_level].mean()) if pivot is None and sees_level.any() else (pivot or 0.0)
    level, fall = _levels(heads.observed[:, sees_level], place[sees_level], at)
    # A difference of heads has no level of its own.
    above = heads.observed - np.where(sees_level, level[:, None], 0.0)
    observed = np.where(drift[:, None] != 0, heads.observed + above * (ratio - 1.0), heads.observed)
    inputs = [
        *heads.inputs,
        Input(
            "exponent of the drift",
            heads=np.nan_to_num(above * log_ratio * np.where(laminar, 0.0, _EXPONENT_U)[:, None]),
        ),
    ]
    if pivot is None and sees_level.any():
        half = float(np.ptp(place[sees_level])) / 2.0
        moved = np.where(sees_level, (ratio - 1.0) * (fall * half)[:, None], 0.0)
        inputs.append(Input("head held during the drift", heads=np.nan_to_num(moved)))
    return replace(corrections, heads=replace(heads, observed=observed, inputs=tuple(inputs)))


def _levels(observed: Array, place: Array, at: float) -> tuple[Array, Array]:
    """Head at a chainage and fall per metre, by a straight line through the heads of each run (R,)."""
    known = np.isfinite(observed)
    count = np.maximum(known.sum(axis=1), 1)
    x = np.where(known, place, 0.0)
    y = np.where(known, observed, 0.0)
    middle, mean = x.sum(axis=1) / count, y.sum(axis=1) / count
    dx = np.where(known, place - middle[:, None], 0.0)
    squares = (dx**2).sum(axis=1)
    slope = (dx * y).sum(axis=1) / np.where(squares > 0, squares, 1.0)
    return mean + slope * (at - middle), -slope
