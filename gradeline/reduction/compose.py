"""From a survey to its reduction: the one place where hydraulics and fits meet."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gradeline.fitting.one_thread import one_thread
from gradeline.reduction import tabulate
from gradeline.reduction.ailment_sentences import ailment_assumptions, ailment_cautions
from gradeline.reduction.beside import drawing_tables, no_drawing_tables
from gradeline.reduction.budget import budget_sentences, run_budgets, wall_budgets
from gradeline.reduction.carried import carried_of
from gradeline.reduction.conveyance import conveyance_of, wall_conveyance_table
from gradeline.reduction.directions import compare_directions
from gradeline.reduction.estimates import estimates_of
from gradeline.reduction.fitted import fitted_walls_of
from gradeline.reduction.flags import flag_table
from gradeline.reduction.fluids import air_cautions
from gradeline.reduction.gentle import gentle_cautions
from gradeline.reduction.heads import observation_kinds
from gradeline.reduction.laws import UNSEEN_OFFSETS, laws_of
from gradeline.reduction.loss_errors import loss_budgets
from gradeline.reduction.losses import loss_assumptions, loss_cautions
from gradeline.reduction.monte_carlo import SEED
from gradeline.reduction.slips import slip_table, slips_of, with_slips
from gradeline.reduction.statements import assumptions_of, cautions_of
from gradeline.reduction.tables import DRAWING_TABLES, Reduction
from gradeline.reduction.zero_drift import zero_drift_of
from gradeline.survey import Survey

__all__ = ["reduce"]


@one_thread
def reduce(
    survey: Survey,
    *,
    level: float = 0.95,
    correct: str = "static",
    keep_all: bool = False,
    exclude: Sequence[str] = (),
    monte_carlo: bool = True,
    seed: int = SEED,
    results_alone: bool = False,
) -> Reduction:
    """Reduce a survey: head loss, friction factor, roughness and loss coefficients, each with its uncertainty.

    Parameters
    ----------
    survey : Survey
        As `gradeline.read_survey` gives it.
    level : float
        Coverage of the intervals, between 0 and 1.
    correct : {"static", "none", "offsets"}
        Whether the offsets of the taps in the static runs are taken off the others; ``"offsets"``: those that the
        flowing runs show as well.
    keep_all : bool
        Whether flagged readings enter the fits all the same.
    exclude : sequence of str
        Readings to leave out: ``"T4"`` in all runs, ``"3:T4"`` in run 3.
    monte_carlo : bool
        Whether the intervals of S, f and K are held against Monte Carlo; where the two differ, its limits stand.
    seed : int
        Of the Monte Carlo draws: the same seed gives the same limits.
    results_alone : bool
        Whether the tables of `DRAWING_TABLES` that the results do without stay empty, as for thousands of surveys: it
        takes less time, and what is drawn of such a reduction shows less.

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
    estimates = estimates_of(
        survey,
        level=level,
        correct=correct,
        keep_all=keep_all,
        exclude=exclude,
        monte_carlo=monte_carlo,
        seed=seed,
    )
    survey, excluded, media = estimates.survey, estimates.excluded, estimates.media
    line, whole, corrections = estimates.line, estimates.whole, estimates.corrections
    flowing, walls, friction, losses = (
        estimates.flowing,
        estimates.walls,
        estimates.friction,
        estimates.losses,
    )
    budgets = [
        *run_budgets(survey, flowing, friction, walls),
        *wall_budgets(flowing, walls, improve=not results_alone),
        *loss_budgets(whole, media, flowing, losses),
    ]
    directions = compare_directions(survey, line, flowing, friction, walls, level=level)
    kind, _ = observation_kinds(survey)
    base = np.array([part.base for part in flowing.fits.scatter])[kind]
    laws, found = laws_of(walls), flowing.ailments.diagnosis
    conveyance = conveyance_of(line, flowing, friction)
    of_walls = wall_conveyance_table(survey, media, flowing, walls, conveyance)
    drift = zero_drift_of(survey, corrections, base, flowing.fits.pooled_dof, excluded)
    grade_lines = tabulate.grade_line_table(survey, line, media, flowing)
    shape = (len(flowing.rows), -1) if len(flowing.rows) else (0, 0)
    piezometric = grade_lines["piezometric_head"].to_numpy(float).reshape(shape)
    crown = grade_lines["crown"].to_numpy(float).reshape(shape)
    law = survey.stated.friction_law
    slips = slips_of(survey, corrections, flowing, walls)
    beside = (
        no_drawing_tables()
        if results_alone
        else drawing_tables(
            estimates,
            budgets=budgets,
            laws=laws,
            conveyance=conveyance,
            level=level,
            correct=correct,
            keep_all=keep_all,
            exclude=exclude,
        )
    )
    return Reduction(
        survey={
            "title": survey.title,
            "date": survey.date,
            "source": survey.source,
            "files": {file.name: file.sha256 for file in survey.files},
            "units": {name: survey.units[name] for name in ("flow", "temperature") if name in survey.units},
            **tabulate.record_facts(survey),
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
            *ailment_assumptions(flowing, corrections),
            *loss_assumptions(whole, losses),
            estimates.check,
            *budget_sentences(budgets),
            *directions[0],
            # The diagnosis says so itself where it was done.
            *((UNSEEN_OFFSETS,) if found is None or not found.done else ()),
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
            *gentle_cautions(survey, line, flowing, friction, walls, media.gravity),
            *ailment_cautions(line, flowing),
            *loss_cautions(whole, losses, survey.runs["run"].iloc[flowing.rows].tolist()),
            *directions[1],
        ),
        reaches=tabulate.reach_table(survey, line, flowing),
        runs=tabulate.run_table(survey, media, line, flowing, friction),
        walls=tabulate.wall_table(walls, of_walls),
        fittings=tabulate.fitting_table(whole, flowing, friction, losses, walls),
        taps=tabulate.tap_table(survey, corrections, flowing, base, excluded),
        heads=tabulate.head_table(survey, line, corrections, flowing, excluded),
        flags=with_slips(
            flag_table(
                survey, corrections, flowing, friction, walls, laws, line=line, keep_all=keep_all, drift=drift
            ),
            slips,
        ),
        slips=slip_table(slips),
        budget=tabulate.budget_table(budgets),
        windows=tabulate.window_table(survey),
        record_flags=tabulate.record_flag_table(survey),
        grade_lines=grade_lines,
        level=level,
        gravity=media.gravity,
        friction_law_u=float("nan") if law is None else law,
        wall_conveyance=of_walls,
        carried=carried_of(survey, whole, media, flowing, corrections, walls, losses, level=level),
        zero_drift=tabulate.frame("zero_drift", {name: [] for name in DRAWING_TABLES["zero_drift"]})
        if drift is None
        else drift.table(),
        fitted_walls=() if results_alone else fitted_walls_of(survey, media, flowing, walls),
        **beside,
    )
