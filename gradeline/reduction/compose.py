"""From a survey to its reduction: the one place where hydraulics and fits meet."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gradeline.errors import ReductionError
from gradeline.reduction import tabulate
from gradeline.reduction.choices import CORRECTIONS, excluded_readings
from gradeline.reduction.corrections import static_corrections
from gradeline.reduction.directions import compare_directions
from gradeline.reduction.drift import steadied
from gradeline.reduction.flags import flag_table
from gradeline.reduction.flow import metered_flow, with_flow_inputs
from gradeline.reduction.fluids import air_cautions
from gradeline.reduction.friction import friction_of
from gradeline.reduction.heads import heads_of, observation_kinds
from gradeline.reduction.line import line_of
from gradeline.reduction.media import media_of, run_temperature_u
from gradeline.reduction.runs import fit_survey, stated_readings
from gradeline.reduction.statements import assumptions_of, cautions_of
from gradeline.reduction.tables import RESULT_TABLES, Reduction
from gradeline.reduction.walls import walls_of
from gradeline.survey import Survey

__all__ = ["reduce"]


def reduce(
    survey: Survey,
    *,
    level: float = 0.95,
    correct: str = "static",
    keep_all: bool = False,
    exclude: Sequence[str] = (),
) -> Reduction:
    """Reduce a survey: head loss, friction factor, roughness and loss coefficients, each with its uncertainty.

    Parameters
    ----------
    survey : Survey
        As `gradeline.read_survey` gives it.
    level : float
        Coverage of the intervals, between 0 and 1.
    correct : {"static", "none"}
        Whether the offsets of the taps in the static runs are taken off the others.
    keep_all : bool
        Whether flagged readings enter the fits all the same.
    exclude : sequence of str
        Readings to leave out: ``"T4"`` in all runs, ``"3:T4"`` in run 3.

    Returns
    -------
    Reduction
        A frozen set of tables, SI units.

    Raises
    ------
    ReductionError
        For a choice that does not exist.

    Examples
    --------
    >>> import gradeline
    >>> survey = gradeline.read_survey("data_demo/copper_bench")
    >>> reduction = gradeline.reduce(survey)
    >>> reduction.walls["wall"].tolist()
    ['drawn copper']
    """
    if not 0.0 < level < 1.0:
        raise ReductionError(f"the level of the intervals is between 0 and 1, such as 0.95; found {level}")
    if correct not in CORRECTIONS:
        raise ReductionError(f"to correct: {correct!r} is not one of {', '.join(CORRECTIONS)}")
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
        apply=correct == "static",
        excluded=excluded,
    )
    corrections = steadied(corrections, survey, line, media)
    flowing = fit_survey(survey, media, line, corrections, excluded, keep_all=keep_all)
    walls = walls_of(survey, line, media, flowing, level=level)
    friction = friction_of(
        line, media, flowing, walls, level=level, temperature_run=run_temperature_u(survey)[flowing.rows]
    )
    directions = compare_directions(survey, line, flowing, friction, walls, level=level)
    kind, _ = observation_kinds(survey)
    base = np.array([part.base for part in flowing.fits.scatter])[kind]
    grade_lines = tabulate.grade_line_table(survey, line, media, flowing)
    shape = (len(flowing.rows), -1) if len(flowing.rows) else (0, 0)
    piezometric = grade_lines["piezometric_head"].to_numpy(float).reshape(shape)
    crown = grade_lines["crown"].to_numpy(float).reshape(shape)
    law = survey.stated.friction_law
    return Reduction(
        survey={
            "title": survey.title,
            "date": survey.date,
            "source": survey.source,
            "files": {file.name: file.sha256 for file in survey.files},
        },
        assumptions=(
            *assumptions_of(
                survey,
                media,
                line,
                corrections,
                flowing,
                level=level,
                correct=correct,
                keep_all=keep_all,
                exclude=exclude,
            ),
            *directions[0],
        ),
        cautions=(
            *cautions_of(survey, line, corrections, flowing, walls, piezometric, crown, base),
            *air_cautions(
                survey.fluid,
                survey.runs["run"].iloc[flowing.rows].tolist(),
                media.density[flowing.rows],
                media.gravity,
                piezometric,
            ),
            *directions[1],
        ),
        reaches=tabulate.reach_table(survey, line, flowing),
        runs=tabulate.run_table(survey, media, line, flowing, friction),
        walls=tabulate.wall_table(walls),
        fittings=tabulate.fitting_table(line, media, flowing, friction, level=level),
        taps=tabulate.tap_table(survey, corrections, base, excluded),
        heads=tabulate.head_table(survey, line, corrections, flowing, excluded),
        flags=flag_table(survey, corrections, flowing, friction, walls, keep_all=keep_all),
        budget=tabulate.frame("budget", {name: [] for name in RESULT_TABLES["budget"]}),
        grade_lines=grade_lines,
        layout=tabulate.layout_table(survey, line),
        laminar=tabulate.laminar_table(survey, flowing, friction),
        reading_units=tabulate.reading_unit_table(survey),
        exponents=tabulate.exponent_table(survey, flowing, friction, walls, level=level),
        scatter=tabulate.scatter_table(survey, flowing, np.hypot(*stated_readings(survey, corrections))),
        bore_sensitivity=tabulate.bore_table(walls),
        inputs=tabulate.input_table(
            survey,
            level=level,
            correct=correct,
            keep_all=keep_all,
            exclude=exclude,
            unjudged=None if flowing.fits.search.done else flowing.fits.search.reason,
        ),
        stated_reaches=tabulate.stated_reach_table(survey),
        stated_taps=tabulate.stated_tap_table(survey),
        raw_readings=tabulate.raw_reading_table(survey),
        level=level,
        gravity=media.gravity,
        friction_law_u=float("nan") if law is None else law,
    )
