"""The tables that figures and pages need beside the results: what costs time and is left out where nothing is drawn."""

from __future__ import annotations

import functools
from collections.abc import Mapping, Sequence
from types import MappingProxyType

import numpy as np
import pandas as pd

from gradeline.reduction import tabulate
from gradeline.reduction.budget import Budget
from gradeline.reduction.conveyance import Conveyance, conveyance_table
from gradeline.reduction.estimates import Estimates
from gradeline.reduction.laws import WallLaws, departure_table, law_table
from gradeline.reduction.setting import stated_readings
from gradeline.reduction.surfaces import roughness_check_table, surface_table
from gradeline.reduction.tables import DRAWING_TABLES, empty
from gradeline.reduction.transition import transition_table

__all__ = ["drawing_tables", "no_drawing_tables"]


def drawing_tables(
    estimates: Estimates,
    *,
    budgets: Sequence[Budget],
    laws: tuple[WallLaws, ...],
    conveyance: Conveyance,
    level: float,
    correct: str,
    keep_all: bool,
    exclude: Sequence[str],
) -> dict[str, pd.DataFrame]:
    """Return every table of `DRAWING_TABLES` that the results themselves do without, by name.

    Parameters
    ----------
    estimates : Estimates
        The fits.
    budgets, laws, conveyance
        What was made of them for the results.
    level, correct, keep_all, exclude
        As `gradeline.reduce` takes them.
    """
    survey, media, line, flowing = estimates.survey, estimates.media, estimates.line, estimates.flowing
    walls, friction, corrections = estimates.walls, estimates.friction, estimates.corrections
    found = flowing.ailments.diagnosis
    return {
        "improvements": tabulate.improvement_table(budgets),
        "likelihood": tabulate.likelihood_table(walls),
        "layout": tabulate.layout_table(survey, line),
        "laminar": tabulate.laminar_table(survey, flowing, friction),
        "reading_units": tabulate.reading_unit_table(survey),
        "exponents": tabulate.exponent_table(survey, line, flowing, friction, walls, level=level),
        "ailments": tabulate.ailment_table(flowing),
        "ailment_runs": tabulate.ailment_run_table(survey, line, media, flowing, corrections.heads.observed),
        "break_heads": tabulate.break_head_table(survey, line, media, flowing),
        "scatter": tabulate.scatter_table(survey, flowing, np.hypot(*stated_readings(survey, corrections))),
        "bore_sensitivity": tabulate.bore_table(walls),
        "losses": tabulate.loss_table(estimates.whole, estimates.losses),
        "loss_runs": tabulate.loss_run_table(survey, estimates.whole, flowing, estimates.losses),
        "inputs": tabulate.input_table(
            survey,
            level=level,
            correct=correct,
            keep_all=keep_all,
            exclude=exclude,
            unjudged=None if flowing.fits.search.done else flowing.fits.search.reason,
            line_unjudged=None if found is None else found.reason,
        ),
        "stated_reaches": tabulate.stated_reach_table(survey),
        "stated_taps": tabulate.stated_tap_table(survey),
        "raw_readings": tabulate.raw_reading_table(survey),
        "record_trace": tabulate.record_trace_table(survey),
        "transition": transition_table(survey, line, flowing, friction, walls),
        "laws": law_table(laws),
        "departures": departure_table(laws),
        "conveyance": conveyance_table(survey, flowing, conveyance),
        "surfaces": surface_table(walls),
        "roughness_checks": roughness_check_table(survey, walls, level=level),
    }


@functools.cache
def no_drawing_tables() -> Mapping[str, pd.DataFrame]:
    """Return every table that `drawing_tables` fills, without rows."""
    results = ("slips", "grade_lines", "wall_conveyance", "zero_drift")  # filled on the way to the results
    return MappingProxyType({name: empty(name) for name in DRAWING_TABLES if name not in results})
