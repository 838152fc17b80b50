"""Runs and reaches: a row for each run and reach, and what the reaches show over all runs."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.fitting.straightness import FEWEST_TAPS, run_straightness, shared_curve
from gradeline.reduction.faint_flows import FAINT_FLOW, faint_flows
from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tabulate.frames import frame
from gradeline.survey import Survey

__all__ = ["reach_table", "run_table"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def run_table(survey: Survey, media: Media, line: Line, flowing: Flowing, friction: Friction) -> pd.DataFrame:
    """Return the table of runs: a row for each run and reach, static runs too."""
    runs, reaches = len(survey.runs), len(line.diameter)

    def spread(values: Array, fill: float = np.nan) -> Array:
        whole = np.full((runs, reaches), fill)
        whole[flowing.rows] = values
        return whole.ravel()

    names = survey.runs["run"].to_numpy(object)
    reasons = np.full((runs, reaches), None, dtype=object)
    reasons[:] = "static run"
    reasons[flowing.rows] = _run_reasons(flowing, friction)
    reasons[flowing.rows[faint_flows(survey, flowing)]] = FAINT_FLOW
    regimes = np.full((runs, reaches), "static", dtype=object)
    regimes[flowing.rows] = friction.regime
    positive = friction.roughness_signed >= 0
    used = np.zeros((runs, reaches))
    in_reach = _in_reach(flowing, line)
    used[flowing.rows] = flowing.used.astype(float) @ in_reach
    straight = np.full((runs, reaches), np.nan)
    for k in range(reaches):
        curve = _curve(flowing, line, k)
        if curve is not None:
            straight[flowing.rows, k] = run_straightness(
                flowing.fits.lines, curve, flowing.fits.pooled_dof or np.inf
            )
    return frame(
        "runs",
        {
            "run": np.repeat(names, reaches),
            "reach": np.tile([reach.name for reach in survey.reaches], runs),
            "flow": np.repeat(survey.runs["flow"].to_numpy(float), reaches),
            "velocity": spread(flowing.velocity, 0.0),
            "temperature": np.repeat(survey.runs["temperature"].to_numpy(float), reaches),
            "density": np.repeat(media.density, reaches),
            "kinematic_viscosity": np.repeat(media.kinematic_viscosity, reaches),
            "reynolds": spread(flowing.reynolds, 0.0),
            "regime": regimes.ravel(),
            "slope": spread(friction.slope),
            "slope_u": spread(friction.slope_u),
            "slope_u_random": spread(friction.slope_u_random),
            "slope_dof": spread(np.where(np.isfinite(friction.slope), friction.slope_dof, np.nan)),
            "slope_low": spread(friction.slope_low),
            "slope_high": spread(friction.slope_high),
            "friction_factor": spread(friction.factor),
            "friction_factor_u": spread(friction.factor_u),
            "friction_factor_low": spread(friction.factor_low),
            "friction_factor_high": spread(friction.factor_high),
            "roughness": spread(np.where(positive, friction.roughness_signed, np.nan)),
            "roughness_low": spread(np.where(positive, friction.roughness_low, np.nan)),
            "roughness_high": spread(np.where(positive, friction.roughness_high, np.nan)),
            "roughness_signed": spread(friction.roughness_signed),
            "observations_used": used.ravel(),
            "straightness_p": straight.ravel(),
            "reason": reasons.ravel(),
        },
    )


def _run_reasons(flowing: Flowing, friction: Friction) -> NDArray[np.object_]:
    """Say why a value is missing in a run and reach."""
    reasons = np.full(friction.slope.shape, None, dtype=object)
    kinds = {
        "laminar": "laminar: the friction does not depend on the wall",
        "critical": "critical zone: no law holds between laminar and turbulent flow",
    }
    for kind, text in kinds.items():
        reasons[friction.regime == kind] = text
    below = friction.roughness_signed < 0
    reasons[below] = "f lies below that of a smooth wall: no roughness of zero or more gives it"
    bare = np.isfinite(friction.slope) & np.isfinite(friction.slope_u) & ~np.isfinite(friction.slope_u_random)
    for run, k in np.argwhere(bare):
        told = "the scatter of the readings is not known: the uncertainty holds the stated errors alone"
        reasons[run, k] = f"{reasons[run, k]}; {told}" if reasons[run, k] else told
    unknown = np.isfinite(friction.slope) & ~np.isfinite(friction.slope_u)
    reasons[unknown] = (
        "one line through as many readings as it has parameters: no uncertainty without a stated one"
    )
    reasons[unknown & np.isfinite(friction.factor_u)] = (
        "the scatter of the readings is not known, and nothing that was stated moves S: no uncertainty of S; in that of f "
        "the uncertainty holds the stated errors alone"
    )
    reasons[friction.slope <= 0] = "no loss of head could be measured: S is not above zero"
    missing = ~np.isfinite(friction.slope)
    reasons[missing] = (
        "the usable taps do not determine the slope of this reach: it takes two with no fitted loss between"
    )
    empty = ~np.asarray(flowing.used.any(axis=1))
    reasons[missing & empty[:, None]] = "no usable reading in this run: not taken, left out or disturbed"
    return reasons


def _in_reach(flowing: Flowing, line: Line) -> Array:
    """Which observations touch each reach (n, K): of a differential gauge both taps count."""
    span = np.abs(flowing.design[:, 1 : 1 + len(line.diameter)])
    sees = flowing.design[:, 0] != 0
    taps = np.zeros((len(sees), len(line.diameter)))
    if sees.all():
        # Single taps: the reach in which the tap lies.
        lengths = span[:, :, None] > 0
        last = np.where(
            lengths[:, :, 0].any(axis=1), lengths[:, ::-1, 0].argmax(axis=1), len(line.diameter) - 1
        )
        taps[np.arange(len(sees)), len(line.diameter) - 1 - last] = 1.0
        return taps
    return (span > 0).astype(float)


def _curve(flowing: Flowing, line: Line, k: int) -> Array | None:
    """Return the quadratic column of a reach, None where fewer than three of its taps are read."""
    position = -flowing.design[:, 1 + k]
    inside = _in_reach(flowing, line)[:, k] > 0
    if inside.sum() < 3 or (flowing.design[:, 0] == 0).any():
        return None
    length = line.bounds[k + 1] - line.bounds[k]
    return np.where(inside, position * (position - length), 0.0)


def reach_table(survey: Survey, line: Line, flowing: Flowing) -> pd.DataFrame:
    """Return the table of reaches, with the test of a curve that all runs share."""
    slopes, values, reasons = flowing.slopes(), [], []
    residuals = np.where(flowing.used, flowing.fits.lines.residuals, np.nan)
    for k in range(len(line.diameter)):
        inside = _in_reach(flowing, line)[:, k] > 0
        curve = _curve(flowing, line, k)
        value = np.nan
        if curve is not None and len(slopes):
            value = shared_curve(residuals[:, inside], slopes[:, k], -flowing.design[inside, 1 + k])
        values.append(value)
        reasons.append(
            None
            if np.isfinite(value)
            else f"a curve is not told from tap errors with fewer than {FEWEST_TAPS} usable taps in the reach"
        )
    return frame(
        "reaches",
        {
            "reach": [reach.name for reach in survey.reaches],
            "wall": [reach.wall for reach in survey.reaches],
            "length": [reach.length for reach in survey.reaches],
            "diameter": line.diameter,
            "shared_curve_p": values,
            "reason": reasons,
        },
    )
