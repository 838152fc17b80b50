"""The fits of a survey: everything that is estimated, before any table is filled."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import ReductionError
from gradeline.fitting.one_thread import one_thread
from gradeline.reduction.choices import CORRECTIONS, excluded_readings
from gradeline.reduction.corrections import Corrections, static_corrections
from gradeline.reduction.drift import steadied
from gradeline.reduction.flow import metered_flow, with_flow_inputs
from gradeline.reduction.friction import Friction, friction_of
from gradeline.reduction.heads import heads_of
from gradeline.reduction.line import Line, line_of
from gradeline.reduction.loss_errors import checked_losses
from gradeline.reduction.losses import Loss, losses_of
from gradeline.reduction.media import Media, media_of, run_temperature_u
from gradeline.reduction.monte_carlo import SEED, check_sentence, checked_friction
from gradeline.reduction.record import with_record_read
from gradeline.reduction.runs import Flowing, fit_survey
from gradeline.reduction.unlisted_losses import with_coefficients, with_unlisted_losses
from gradeline.reduction.walls import Wall, walls_of
from gradeline.survey import Survey

__all__ = ["Estimates", "estimates_of"]


@dataclass(frozen=True)
class Estimates:
    """All that is estimated of a survey.

    Parameters
    ----------
    survey : Survey
        With the flow of every run worked out.
    excluded : (R, n) bool array
        Readings left out by hand.
    media, corrections, flowing, walls, friction
        Fluids; static runs; the flowing runs' lines; roughness; friction factors.
    line : Line
        As the survey lays it out.
    whole : Line
        With the losses that nobody listed.
    losses : tuple of Loss
        Fitted losses of the whole line.
    check : str
        What Monte Carlo made of the intervals, in a sentence.
    """

    survey: Survey
    excluded: NDArray[np.bool_]
    media: Media
    line: Line
    whole: Line
    corrections: Corrections
    flowing: Flowing
    walls: tuple[Wall, ...]
    friction: Friction
    losses: tuple[Loss, ...]
    check: str


@one_thread
def estimates_of(
    survey: Survey,
    *,
    level: float = 0.95,
    correct: str = "static",
    keep_all: bool = False,
    exclude: Sequence[str] = (),
    monte_carlo: bool = True,
    seed: int = SEED,
) -> Estimates:
    """Fit a survey; the arguments are those of `gradeline.reduce`.

    Parameters
    ----------
    survey : Survey
        As read.
    level : float
        Coverage of the intervals, between 0 and 1.
    correct : {"static", "none", "offsets"}
        Which offsets of taps are taken off.
    keep_all : bool
        Whether flagged readings enter the fits all the same.
    exclude : sequence of str
        Readings to leave out.
    monte_carlo : bool
        Whether the intervals of S, f and K are held against Monte Carlo.
    seed : int
        Of its draws.

    Returns
    -------
    Estimates
        Arrays, no tables.

    Raises
    ------
    ReductionError
        For a choice that does not exist.
    """
    if not 0.0 < level < 1.0:
        raise ReductionError(f"the level of the intervals is between 0 and 1, such as 0.95; found {level}")
    if correct not in CORRECTIONS:
        raise ReductionError(f"to correct: {correct!r} is not one of {', '.join(CORRECTIONS)}")
    survey = with_record_read(survey)
    metered = metered_flow(survey)
    survey = metered.survey
    excluded = excluded_readings(survey, exclude)
    media = media_of(survey)
    line = line_of(survey)
    static = survey.runs["flow"].to_numpy(float) == 0
    corrections = static_corrections(
        with_flow_inputs(heads_of(survey, media), metered.inputs),
        static,
        survey.repeats.to_numpy(float),
        apply=correct != "none",
        excluded=excluded,
    )
    corrections = steadied(corrections, survey, line, media)
    flowing = fit_survey(
        survey,
        media,
        line,
        corrections,
        excluded,
        keep_all=keep_all,
        correct_offsets=correct == "offsets",
    )
    walls = walls_of(survey, line, media, flowing, corrections, level=level)
    friction = friction_of(
        line, media, flowing, walls, level=level, temperature_run=run_temperature_u(survey)[flowing.rows]
    )
    whole = with_unlisted_losses(line, flowing)
    losses = losses_of(whole, media, flowing, friction, walls, corrections, level=level)
    check = "Intervals are of first order alone: Monte Carlo was left out."
    if monte_carlo:
        friction, checked = checked_friction(flowing, friction, level=level, seed=seed)
        losses, checked_k = checked_losses(whole, media, flowing, losses, level=level, seed=seed)
        check = check_sentence((*checked, checked_k), seed)
    flowing = with_coefficients(flowing, whole, losses)
    return Estimates(
        survey, excluded, media, line, whole, corrections, flowing, walls, friction, losses, check
    )
