"""What a prediction needs of a reduction beyond its tables: the line, and all that the runs say of it jointly."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.posterior import LossErrors, Posterior, WallPart, joint_posterior
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import Input
from gradeline.reduction.line import Line, change_of_bore_gains
from gradeline.reduction.losses import Loss
from gradeline.reduction.media import Media
from gradeline.reduction.run_losses import per_run
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall, wall_data
from gradeline.survey import Survey

__all__ = ["VERSION", "carried_of"]

Array = NDArray[np.float64]

#: Of the form of what is carried; an older program refuses a newer one.
VERSION = 1
#: Digits that are kept: far beyond what any reading gives.
_DIGITS = 12
#: Errors of the survey's thermometer say nothing of the temperature that a prediction is asked for.
_OF_THE_SURVEY = frozenset({"temperature"})


def carried_of(
    survey: Survey,
    line: Line,
    media: Media,
    flowing: Flowing,
    corrections: Corrections,
    walls: tuple[Wall, ...],
    losses: tuple[Loss, ...],
    *,
    level: float,
) -> Mapping[str, Any]:
    """Gather what `gradeline.predict` needs.

    Parameters
    ----------
    survey, line, media, flowing, corrections, walls, losses
        The survey and what its runs say; the line with the losses that nobody listed.
    level : float
        Coverage of the intervals.

    Returns
    -------
    mapping
        Plain lists, numbers and texts, SI units, None for what is missing: as it stands in ``carried.json``.
    """
    everywhere = np.arange(len(line.diameter), dtype=np.intp)
    inputs = flowing.inputs
    kept = np.array([q for q, one in enumerate(inputs) if _stays(one)], dtype=np.intp)
    fitted = tuple(one for one in losses if one.fit.runs)
    sound = [wall if wall.implausible() is None else None for wall in walls]
    posterior = joint_posterior(
        wall_data(survey, line, media, flowing, corrections, everywhere),
        [WallPart(wall.reaches, wall.data, wall.fit) for wall in sound if wall is not None],
        kept,
        _loss_errors(line, media, flowing, fitted),
    )
    freedoms = [wall.fit.dof for wall in walls if np.isfinite(wall.fit.dof)]
    temperature = survey.runs["temperature"].to_numpy(float)[flowing.rows]
    tested = _tested(walls, len(line.diameter))
    found = {
        "version": VERSION,
        "title": survey.title,
        "level": level,
        "dof": min(freedoms) if freedoms else None,
        "friction_law_u": survey.stated.friction_law,
        "gravity": media.gravity,
        "temperature": float(np.mean(temperature)) if np.isfinite(temperature).any() else None,
        "fluid": asdict(survey.fluid),
        "flow_low": float(flowing.flow.min()) if len(flowing.flow) else None,
        "flow_high": float(flowing.flow.max()) if len(flowing.flow) else None,
        "reaches": [
            {
                "reach": reach.name,
                "wall": reach.wall,
                "start": reach.start,
                "end": reach.end,
                "diameter": line.diameter[k],
                "area": line.area[k],
                "laminar_constant": line.laminar_constant[k],
                "circle": reach.section is None,
                "reynolds_low": tested[k, 0],
                "reynolds_high": tested[k, 1],
            }
            for k, reach in enumerate(survey.reaches)
        ],
        "fittings": _fittings(line, losses),
        "offtakes": [{"offtake": one.name, "at": one.at} for one in survey.offtakes],
        "taps": [
            {"tap": tap.name, "chainage": tap.chainage, "elevation": tap.elevation} for tap in survey.taps
        ],
        "inputs": _inputs(survey, line, inputs, kept),
        "losses": [one.place for one in fitted],
        "covariance": posterior.covariance,
        "walls": _walls(survey, walls, sound, posterior),
        "notes": _notes(flowing),
    }
    return _plain(found)  # type: ignore[no-any-return]  # of a dict a dict


def _tested(walls: tuple[Wall, ...], reaches: int) -> Array:
    """Least and largest Re of the runs behind a wall, in each of its reaches (K, 2); NaN where there are none."""
    found = np.full((reaches, 2), np.nan)
    for wall in walls:
        for n, k in enumerate(wall.reaches):
            own = wall.data.reynolds[:, n][wall.fit.used[:, n]]
            if own.size:
                found[k] = own.min(), own.max()
    return found


def _stays(one: Input) -> bool:
    """Whether an error belongs to the pipe, its fluid or its site, and not to the readings of the survey."""
    if one.name in _OF_THE_SURVEY:
        return False
    return bool(
        one.diameter is not None
        or one.viscosity is not None
        or one.gravity
        or one.name == "given loss coefficient"
    )


def _loss_errors(line: Line, media: Media, flowing: Flowing, losses: tuple[Loss, ...]) -> LossErrors:
    """What the weighted mean of each K is moved by; see `gradeline.reduction.losses`."""
    count, parameters = flowing.random.shape[:2]
    reaches, size = flowing.velocity.shape[1], len(losses)
    share = np.zeros((count, size, parameters))
    own, effect = np.zeros((count, size)), np.zeros((size, len(flowing.inputs)))
    for n, loss in enumerate(losses):
        run = per_run(line, media, flowing, loss.place)
        weight, mine = loss.fit.weight, loss.fit.weight > 0
        fitting = line.fittings[loss.place]
        inside = _inside(line, fitting.at, fitting.length)
        one = np.zeros(parameters)
        one[line.column[loss.place]] = 1.0
        one[1 : 1 + reaches] += inside
        share[:, n] = np.where(mine, weight * loss.fit.spread / run.head, 0.0)[:, None] * one
        by_flow = run.own - 2.0 * loss.fit.coefficient * run.own_head
        own[:, n] = np.where(mine, weight * loss.fit.spread * by_flow, 0.0)
        by_inputs = run.effect + loss.fit.coefficient * run.by_head
        effect[n] = weight @ np.where(mine[:, None], by_inputs, 0.0)
    random = np.where(np.isfinite(flowing.random), flowing.random, 0.0)
    return LossErrors(
        scatter=np.einsum("fmp,fpo,fno->mn", share, random, share) + own.T @ own,
        effect=effect,
        with_slope=np.einsum("fkp,fmp->fkm", random[:, 1 : 1 + reaches], share),
        own=own,
    )


def _inside(line: Line, at: float, length: float) -> Array:
    """Length of each reach between the ends of a fitting (K,), m."""
    low, high = at - length / 2, at + length / 2
    return np.asarray(np.clip(np.minimum(high, line.bounds[1:]) - np.maximum(low, line.bounds[:-1]), 0, None))


def _fittings(line: Line, losses: tuple[Loss, ...]) -> list[dict[str, Any]]:
    by_place = {one.place: one for one in losses}
    found = []
    for m, fitting in enumerate(line.fittings):
        loss = by_place.get(m)
        given = fitting.loss_coefficient
        # Of a fitted K the friction of its own length is part.
        taken_off = _inside(line, fitting.at, fitting.length if loss is not None and loss.fit.runs else 0.0)
        value: float | None = None
        u: float | None = None
        if given is not None:
            value, u = given.value, given.u
        elif loss is not None and loss.fit.runs:
            value, u = loss.fit.coefficient, loss.fit.u
        found.append(
            {
                "fitting": fitting.name,
                "at": fitting.at,
                "reach": int(line.reference[m]),
                "loss_coefficient": value,
                "loss_coefficient_u": u,
                "fitted": bool(line.fitted[m]),
                "taken_off": taken_off,
                "reason": None if loss is None else loss.reason,
            }
        )
    return found


def _inputs(
    survey: Survey, line: Line, inputs: tuple[Input, ...], kept: NDArray[np.intp]
) -> list[dict[str, Any]]:
    """What one standard uncertainty of each error changes in the pipe."""
    reaches, fittings = len(line.diameter), len(line.fittings)
    gains = np.zeros((fittings, reaches))
    listed = change_of_bore_gains(survey, line)
    gains[: len(listed)] = listed
    found = []
    for one in (inputs[q] for q in kept):
        diameter = np.zeros(reaches) if one.diameter is None else np.asarray(one.diameter, float)
        # What the area does beyond the square of the bore stands as a flow; other flows are the meter's.
        flow = np.zeros(reaches) if one.diameter is None else np.broadcast_to(one.flow, reaches)
        loss = gains @ (diameter - flow / 2.0)
        if one.name == "given loss coefficient":
            for m, fitting in enumerate(line.fittings):
                given = fitting.loss_coefficient
                if fitting.name == one.subject and given is not None and given.u:
                    loss[m] += given.u
        laminar = np.zeros(reaches) if one.laminar_constant is None else one.laminar_constant
        found.append(
            {
                "input": one.name,
                "subject": one.subject,
                "diameter": diameter,
                "flow": flow,
                "laminar_constant": laminar,
                "viscosity": 0.0 if one.viscosity is None else float(np.mean(one.viscosity)),
                "gravity": one.gravity,
                "loss_coefficient": loss,
            }
        )
    return found


def _walls(
    survey: Survey, walls: tuple[Wall, ...], sound: list[Wall | None], posterior: Posterior
) -> list[dict[str, Any]]:
    histories = {one.wall: one for one in survey.wall_histories}
    places = iter(range(len(posterior.roughness)))
    found: list[dict[str, Any]] = []
    for wall, good in zip(walls, sound, strict=True):
        fit, history = wall.fit, histories.get(wall.name)
        place = None if good is None else next(places)
        there = place is not None and len(posterior.roughness[place]) > 0
        reynolds = wall.data.reynolds[fit.used]
        published = None if history is None or history.published is None else history.published.value
        found.append(
            {
                "wall": wall.name,
                "roughness": fit.roughness if there else None,
                "roughness_low": fit.low if there else None,
                "roughness_high": fit.high if there else None,
                "reynolds_low": float(reynolds.min()) if there else None,
                "reynolds_high": float(reynolds.max()) if there else None,
                "interval": bool(there and (np.isfinite(fit.low) or np.isfinite(fit.upper95))),
                "published": published,
                "published_source": None
                if history is None or published is None
                else history.published_source,
                "grid": posterior.roughness[place] if there and place is not None else [],
                "score": posterior.score[place] if there and place is not None else [],
                "mean": posterior.mean[place] if there and place is not None else [],
                "reason": None if there else wall.implausible() or "no turbulent run gives it",
            }
        )
    return found


def _notes(flowing: Flowing) -> list[str]:
    """What of the line a prediction cannot hold."""
    return [
        f"the friction slope changes at {one.at:.4g} m without a change of reach; the prediction takes that of the reach "
        "upstream of it throughout"
        for one, what in flowing.ailments.names
        if what == "kink"
    ]


def _plain(value: Any) -> Any:
    """A value as JSON can hold it: lists, texts, whole and finite numbers, None."""
    if isinstance(value, Mapping):
        return {str(key): _plain(one) for key, one in value.items()}
    if isinstance(value, np.ndarray):
        return _plain(value.tolist())
    if isinstance(value, (list, tuple)):
        return [_plain(one) for one in value]
    if value is None or isinstance(value, (str, bool, np.bool_)):
        return bool(value) if isinstance(value, np.bool_) else value
    if isinstance(value, (int, np.integer)):
        return int(value)
    number = float(value)
    return float(f"{number:.{_DIGITS}g}") if math.isfinite(number) else None
