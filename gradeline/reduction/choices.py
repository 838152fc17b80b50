"""What the caller asked for, checked against the survey."""

from __future__ import annotations

import difflib
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import ReductionError
from gradeline.survey import Survey

__all__ = ["CORRECTIONS", "excluded_readings"]

#: What may be taken off the readings.
CORRECTIONS = ("static", "none", "offsets")


def excluded_readings(survey: Survey, exclude: Sequence[str]) -> NDArray[np.bool_]:
    """Tell which readings are left out by hand.

    Parameters
    ----------
    survey : Survey
        Its runs and observations.
    exclude : sequence of str
        ``"T4"`` leaves a tap (or differential gauge) out of all runs, ``"3:T4"`` out of run 3.

    Returns
    -------
    (R, n) bool array
        True where left out.

    Raises
    ------
    ReductionError
        For a run or tap that the survey does not have; the nearest known one is named.
    """
    if isinstance(exclude, str):
        raise ReductionError(f"to exclude: give a list of readings, such as [{exclude!r}], not a bare text")
    labels = [observation.label for observation in survey.observations]
    runs = list(survey.runs["run"])
    excluded = np.zeros((len(runs), len(labels)), dtype=bool)
    for text in exclude:
        whole = text.strip()
        if whole in labels:
            excluded[:, labels.index(whole)] = True
            continue
        run, _, label = whole.rpartition(":")
        if not run:
            raise ReductionError(_unknown("tap", whole, labels))
        if run not in runs:
            raise ReductionError(_unknown("run", run, runs))
        if label not in labels:
            raise ReductionError(_unknown("tap", label, labels))
        excluded[runs.index(run), labels.index(label)] = True
    return excluded


def _unknown(what: str, name: str, known: list[str]) -> str:
    near = difflib.get_close_matches(name, known, n=1)
    hint = f"did you mean {near[0]!r}?" if near else f"known are {', '.join(known[:20])}"
    return f"to exclude: there is no {what} {name!r}; {hint}"
