"""Flags: readings, runs and the law itself, each with what was expected."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.fitting.misfit import PATTERNS
from gradeline.quantities import format_change, parse_unit, rounded
from gradeline.reduction.ailment_sentences import break_sentence, tap_advice, tap_sentence
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.friction import LAMINAR_FAR, Friction
from gradeline.reduction.laws import WallLaws, departure_flag, likelier_error
from gradeline.reduction.line import Line
from gradeline.reduction.runs import Flowing
from gradeline.reduction.sections import laminar_constant_of, laminar_name
from gradeline.reduction.tables import RESULT_TABLES
from gradeline.reduction.tabulate import frame
from gradeline.reduction.walls import Wall
from gradeline.reduction.zero_drift import ZeroDrift
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = ["AT_REST", "LOOK_UP", "flag_table"]

#: What goes where a slip of the pen is named in its place (`gradeline.reduction.slips`).
LOOK_UP = "; look it up in the record, or read it again"
AT_REST = ". Since a static run was read: "

Array = NDArray[np.float64]

#: A trend or an offset of the law is no chance beyond this two-sided probability.
_LAW_FALSE_ALARM = 0.01
#: Taps named of a shared misfit: the clearest ones.
_MOST_TAPS = 4
#: Runs named one by one.
_FEW = 3


@dataclass(frozen=True)
class _Flag:
    kind: str
    run: str | None = None
    tap: str | None = None
    reading: float = np.nan
    expected: float = np.nan
    score: float = np.nan
    suggestion: str = ""


def flag_table(
    survey: Survey,
    corrections: Corrections,
    flowing: Flowing,
    friction: Friction,
    walls: tuple[Wall, ...],
    laws: tuple[WallLaws, ...],
    *,
    line: Line,
    keep_all: bool,
    drift: ZeroDrift | None = None,
) -> pd.DataFrame:
    """Collect the flags of a reduction.

    Parameters
    ----------
    survey, corrections, flowing, friction, walls, laws
        What the fits say.
    line : Line
        The line's layout.
    keep_all : bool
        Whether flagged readings entered the fits all the same.
    drift : ZeroDrift or None
        Of the taps between static runs.

    Returns
    -------
    DataFrame
        The table ``flags``, readings first, then runs, then the law.
    """
    drifts = [] if drift is None else drift.flags()
    found = [
        *_readings(survey, corrections, flowing, keep_all=keep_all),
        *_runs(survey, flowing, walls),
        *_ailments(survey, corrections, flowing, line),
        *_taps(survey, corrections, flowing),
        *_rising(survey, flowing, friction),
        *_laminar(survey, flowing, friction),
        *(flag for one in laws for flag in _law(one, survey.stated.friction_law or 0.0)),
        *(_Flag("tap", tap=tap, score=score, suggestion=text) for tap, score, text in drifts),
    ]
    columns: dict[str, list[Any]] = {
        name: [getattr(flag, name) for flag in found] for name in RESULT_TABLES["flags"]
    }
    return frame("flags", columns)


def _readings(survey: Survey, corrections: Corrections, flowing: Flowing, *, keep_all: bool) -> list[_Flag]:
    readings = survey.readings.to_numpy(float)
    fate = "kept in the fit as asked" if keep_all else "left out of the fit"
    found = []
    for row, i in np.argwhere(flowing.fits.flagged):
        run = flowing.rows[row]
        reading = readings[run, i]
        expected = reading - flowing.fits.error[row, i] / corrections.heads.gain[run, i]
        found.append(
            _Flag(
                "reading",
                survey.runs["run"].iloc[run],
                survey.observations[i].label,
                reading,
                float(expected),
                float(flowing.fits.score[row, i]),
                f"{_mean_of(survey, run, i)}{fate}{LOOK_UP}",
            )
        )
    return found


def _mean_of(survey: Survey, run: int, i: int) -> str:
    """A mean of repeats is a value that nobody wrote down."""
    count = int(survey.repeats.to_numpy(int)[run, i])
    return f"the mean of {count} readings; " if count > 1 else ""


def _runs(survey: Survey, flowing: Flowing, walls: tuple[Wall, ...]) -> list[_Flag]:
    found = []
    for wall in walls:
        for row, k in np.argwhere(wall.fit.off_law):
            slope, expected = wall.data.slope[row, k], wall.fit.expected_slope[row, k]
            ratio = slope / expected
            # S goes almost as Q²: the factor on the flow that would bring this run onto the law.
            flow = ratio**0.5 - 1
            other = f"{format_change(flow)} {'larger' if flow > 0 else 'smaller'}"
            reach = survey.reaches[wall.reaches[k]].name
            found.append(
                _Flag(
                    "run",
                    survey.runs["run"].iloc[flowing.rows[row]],
                    None,
                    score=float(wall.fit.score[row, k]),
                    suggestion=(
                        f"in reach {reach!r} S is {ratio:.3g} times what the other runs' law gives: "
                        f"look up its readings and its flow (one {other} would fit); "
                        "left out of the wall's fit"
                    ),
                )
            )
    return found


def _ailments(survey: Survey, corrections: Corrections, flowing: Flowing, line: Line) -> list[_Flag]:
    """What ails taps and line over all runs."""
    found = []
    for one in flowing.ailments.taps:
        text = tap_sentence(one)
        seen = [i for i, other in enumerate(survey.observations) if one.label in (other.label, other.tap)]
        at_rest = bool(corrections.applied and seen and corrections.known[seen[0]])
        advice = tap_advice(one, read_at_rest=at_rest)
        if advice:
            text = f"{text}. {advice[0].upper()}{advice[1:]}"
        if one.name == "datum offset" and at_rest:
            text = f"{text}{AT_REST}{_static_slip(survey, corrections, one.what.offset, seen[0])}"
        score = np.sqrt(one.what.gain) * (np.sign(np.nansum(one.what.error)) or 1.0)
        found.append(_Flag("tap", None, one.label, score=float(score), suggestion=text))
    for broken in dict.fromkeys(other for other, _ in flowing.ailments.names):
        text = break_sentence(broken, line, flowing)
        found.append(_Flag("law", score=float(np.sqrt(broken.gain)), suggestion=text))
    return found


def _taps(survey: Survey, corrections: Corrections, flowing: Flowing) -> list[_Flag]:
    """Taps at which most runs share a misfit that nothing explains, clearest first."""
    misfit = flowing.fits.misfit
    if misfit is None or not misfit.shared:
        return []
    score = misfit.score[np.arange(len(misfit.score)), np.abs(misfit.score).argmax(axis=1)]
    order = [int(i) for i in np.argsort(-np.abs(score)) if abs(score[i]) > misfit.critical][:_MOST_TAPS]
    found = []
    for place, i in enumerate(order):
        text = (
            f"off in the same way in most runs, {PATTERNS[misfit.pattern]}: an error of the tap or its gauge, an unlisted "
            "local loss near it or a change of slope; the slopes may be biased until the cause is found"
        )
        errors = flowing.fits.error[np.isfinite(flowing.fits.error[:, i]), i]
        if (
            place == 0
            and misfit.pattern == 0
            and corrections.applied
            and corrections.known[i]
            and errors.size
        ):
            error = float(np.median(errors))
            text = f"off by the same amount in most runs: {_static_slip(survey, corrections, error, i)}"
        found.append(_Flag("tap", None, survey.observations[i].label, score=float(score[i]), suggestion=text))
    return found


def _static_slip(survey: Survey, corrections: Corrections, error: float, i: int) -> str:
    """What the static reading of an observation should have been for its flowing readings to be right."""
    static = [
        run
        for run in np.flatnonzero(survey.runs["flow"].to_numpy(float) == 0)
        if np.isfinite(survey.readings.to_numpy(float)[run, i])
    ]
    label = survey.observations[i].label
    dimension = GAUGE_KINDS[survey.gauge(survey.observations[i].gauge).kind].reading
    unit = parse_unit(survey.units.get(label, "m" if dimension == "length" else "Pa"), dimension)
    scale = unit.difference_to_si(1.0)
    reading = float(survey.readings.to_numpy(float)[static[0], i])
    expected = reading + error / float(corrections.heads.gain[static[0], i])
    name = survey.runs["run"].iloc[static[0]]
    return (
        f"look at the static reading, {reading / scale:.6g} {unit.text}, where {expected / scale:.5g} {unit.text} would "
        f"bring them onto the line; leave it out with --exclude {name}:{label} if it is wrong"
    )


def _rising(survey: Survey, flowing: Flowing, friction: Friction) -> list[_Flag]:
    """Heads that rise downstream, beyond what scatter can do: most often labels or chainages the wrong way round."""
    slopes, found = flowing.slopes(), []
    with np.errstate(invalid="ignore"):
        beyond = slopes < -3.0 * friction.slope_u
    for k, reach in enumerate(survey.reaches):
        known = np.isfinite(friction.slope_u[:, k])
        # Where nothing tells the scatter, most of the runs must agree.
        agree = (slopes[:, k] < 0) & ~known
        rising = beyond[:, k] | (agree & (2 * agree.sum() > max(int((~known).sum()), 1)))
        names = [str(survey.runs["run"].iloc[flowing.rows[run]]) for run in np.flatnonzero(rising)]
        if not names:
            continue
        which = (
            f"in run {' and '.join(names)}"
            if len(names) <= _FEW
            else f"in {len(names)} of {len(slopes)} runs"
        )
        cause = (
            "look for a sign, swapped limbs or swapped taps there"
            if 2 * len(names) < len(slopes)
            else "look whether chainages, tap labels, limbs or the direction of the flow are the wrong way round"
        )
        found.append(
            _Flag(
                "law",
                suggestion=f"{which} the head rises downstream in reach {reach.name!r}, which friction cannot do: {cause}",
            )
        )
    return found


def _laminar(survey: Survey, flowing: Flowing, friction: Friction) -> list[_Flag]:
    """Laminar runs whose f Re / 64 is not 1 within its uncertainty: a check of the bore's fourth power."""
    found = []
    for k, reach in enumerate(survey.reaches):
        mine = np.flatnonzero(np.isfinite(friction.laminar_ratio_u[:, k]))
        if not len(mine):
            continue
        ratio, u = friction.laminar_ratio[mine, k], friction.laminar_ratio_u[mine, k]
        weight = 1 / u**2 / (1 / u**2).sum()
        # Shared errors do not average out: the mean is known no better than the mean of the uncertainties.
        mean, spread = float(weight @ ratio), float(weight @ u)
        score = (mean - 1) / spread
        dof = max(flowing.fits.pooled_dof, 1.0) if flowing.fits.pooled_dof else 1e9
        if abs(score) > stdtrit(dof, 1 - _LAW_FALSE_ALARM / 2):
            bore = mean**-0.25 - 1
            name = f"{laminar_name(laminar_constant_of(reach))} = {rounded(mean, spread)}"
            remedy = f"a bore {format_change(bore)} {'larger' if bore > 0 else 'smaller'} would make it 1"
            if not 1 / LAMINAR_FAR < mean < LAMINAR_FAR:
                remedy = "look at the units of bore, flow and chainage"
            found.append(
                _Flag(
                    "law",
                    score=float(score),
                    suggestion=f"in the laminar runs of reach {reach.name!r} {name}: {remedy}",
                )
            )
    return found


def _law(laws: WallLaws, law_u: float) -> list[_Flag]:
    wall, fit = laws.wall, laws.wall.fit
    found: list[_Flag] = []
    why = wall.implausible()
    if why is not None:
        return [_Flag("law", suggestion=f"wall {wall.name!r}: {why}")]
    if not np.isfinite(fit.roughness):
        return found
    beyond = float(stdtrit(fit.dof if np.isfinite(fit.dof) else 1e9, 1 - _LAW_FALSE_ALARM / 2))
    of_trend = float(stdtrit(fit.trend_dof if np.isfinite(fit.trend_dof) else 1e9, 1 - _LAW_FALSE_ALARM / 2))
    other = departure_flag(laws)
    if other is not None:
        found.append(_Flag("law", score=other[0], suggestion=other[1]))
    elif np.isfinite(fit.trend) and fit.trend_u > 0 and abs(fit.trend / fit.trend_u) > of_trend:
        way = "falls" if fit.trend < 0 else "rises"
        found.append(
            _Flag(
                "law",
                score=fit.trend / fit.trend_u,
                suggestion=(
                    f"wall {wall.name!r}: f {way} against the fitted law by {format_change(abs(fit.trend))} ± "
                    f"{format_change(fit.trend_u)} per decade of Re"
                    + (", the wrong way for roughness" if fit.trend < 0 else "")
                    + ": the law does not describe these runs; look at the flow meter's calibration over its range"
                ),
            )
        )
    score = fit.offset / np.hypot(fit.offset_u, law_u) if fit.offset_u > 0 else 0.0
    if fit.roughness == 0 and score < -beyond:
        # f goes as D⁵/Q², and the law itself a little with Re.
        by_reynolds = float(wall.data.law.sensitivities(wall.data.reynolds[fit.used], 0.0)[1].mean())
        bore = float(np.expm1(-fit.offset / (5 + by_reynolds)))
        flow = float(-np.expm1(fit.offset / (2 + by_reynolds)))
        found.append(
            _Flag(
                "law",
                score=float(score),
                suggestion=(
                    f"wall {wall.name!r}: f lies {format_change(-np.expm1(fit.offset))} below that of a smooth wall, beyond its "
                    f"uncertainty: a bore about {format_change(bore)} larger or flows about {format_change(flow)} smaller than stated "
                    f"would bring it onto the law; {likelier_error(wall, bore, flow)}"
                ),
            )
        )
    return found
