"""What the fuzzer and hypothesis found, kept: each is told, or read and reduced to sound numbers."""

from __future__ import annotations

from pathlib import Path

import pytest

from gradeline import read_survey
from gradeline.errors import GradelineError
from tests.broken.soundness import assert_survey_sound
from tests.broken.test_any_survey import record_of

FINDS = sorted((Path(__file__).parent / "finds").iterdir())
#: Those that are told; the others can be reduced.
TOLD = {
    "side_valves_beside_taps_without_chainage": "taps.csv row 1: the column 'chainage [m]' is missing",
    "runs_without_a_label_beside_a_tank": "readings.csv row 1",
}


@pytest.mark.parametrize("folder", FINDS, ids=[folder.name for folder in FINDS])
def test_a_find_is_told_or_sound(folder: Path) -> None:
    source = next(folder.glob("*.xlsx"), folder)
    if folder.name in TOLD:
        with pytest.raises(GradelineError) as caught:
            read_survey(source)
        assert TOLD[folder.name] in str(caught.value)
        return
    survey = read_survey(source)
    assert_survey_sound(survey)
    record_of(survey)
