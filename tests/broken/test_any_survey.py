"""Whatever the survey: it is told, or what is read and reduced has a sound number wherever it has one.

``BROKEN_EXAMPLES=2000`` in the environment draws so many of each; the suite draws a few.
"""

from __future__ import annotations

import os
import tempfile
import warnings
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings

from gradeline import read_survey, reduce
from gradeline.errors import GradelineError
from gradeline.report.record import as_json
from gradeline.survey import Survey
from tests.broken.bases import write_files
from tests.broken.soundness import assert_record_sound, assert_survey_sound
from tests.broken.strategies import Drawn, faulty_surveys, sound_surveys

_EXAMPLES = int(os.environ.get("BROKEN_EXAMPLES", "0"))


def profile(few: int) -> settings:
    """A few examples in the suite, more where they are asked for."""
    return settings(
        max_examples=_EXAMPLES or few,
        deadline=10_000,  # ms
        suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
    )


def read(drawn: Drawn) -> Survey:
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place) / "survey"
        write_files(folder, drawn.files)
        survey = read_survey(folder / drawn.file if drawn.file else folder)
    assert_survey_sound(survey)
    return survey


def record_of(survey: Survey) -> None:
    """Reduce a survey; what comes out is sound, without a warning of the arithmetic."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert_record_sound(as_json(reduce(survey, monte_carlo=False), "any"))


@profile(25)
@given(sound_surveys())
def test_a_sound_survey_is_read_and_reduced(drawn: Drawn) -> None:
    survey = read(drawn)
    found = survey.readings.to_numpy(float)
    assert np.sort(found[np.isfinite(found)]) == pytest.approx(drawn.readings, rel=1e-12, abs=1e-300)
    record_of(survey)


@profile(60)
@given(faulty_surveys())
def test_a_faulty_survey_is_told_or_read(drawn: Drawn) -> None:
    told = None
    try:
        record_of(read(drawn))
    except GradelineError as error:  # also where a survey that was read cannot be reduced
        told = str(error)
    assert told is None or (told.strip() and "Traceback" not in told)
