"""Every broken survey is told, at its place, in good time, and nothing comes of it."""

from __future__ import annotations

import subprocess
import sys
import time
from collections import Counter
from pathlib import Path

import pytest

from gradeline.cli import main
from gradeline.errors import GradelineError, SurveyError
from gradeline.loader import read_survey
from tests.broken.bases import BASES, write_files
from tests.broken.corpus import CASES, GIVEN, Broken, source_in, write_case
from tests.broken.soundness import assert_survey_sound

#: The longest that anything may take, s.
LONGEST = 10.0
#: Share of the surveys of a kind whose message names the place.
SHARE = 0.95

KINDS = sorted({case.kind for case in CASES})


def options_of(case: Broken) -> list[str]:
    return [word for name, text in case.options.items() for word in (f"--{name}", text)]


def told_of(case: Broken, source: Path) -> list[str]:
    """The lines that the library tells of a survey."""
    with pytest.raises(GradelineError) as caught:
        read_survey(source, **case.options)
    if isinstance(caught.value, SurveyError):
        return [str(problem) for problem in caught.value.problems]
    return [str(caught.value)]


def names_place(case: Broken, source: Path, told: list[str]) -> bool:
    """Whether a line begins with the place; a mistake in an option is named anywhere."""
    place = case.place.replace("{source}", str(source))
    if place.startswith("--"):
        return any(place in line for line in told)
    return any(line.startswith(f"{place}: ") for line in told)


def test_the_corpus_is_large_and_each_survey_differs() -> None:
    assert len(CASES) >= 150
    assert len(KINDS) >= 20
    assert max(Counter((case.kind, case.name, case.base) for case in CASES).values()) == 1


@pytest.mark.parametrize("base", BASES)
def test_what_the_broken_surveys_are_made_of_is_sound(base: str, tmp_path: Path) -> None:
    write_files(tmp_path, BASES[base]())
    assert_survey_sound(read_survey(source_in(tmp_path, base), **(GIVEN if base == "heads" else {})))


@pytest.mark.parametrize("kind", KINDS)
def test_a_fault_is_told_at_its_place(kind: str, tmp_path: Path) -> None:
    elsewhere = []
    cases = [case for case in CASES if case.kind == kind]
    for number, case in enumerate(cases):
        source = write_case(case, tmp_path / f"{number}")
        begun = time.monotonic()
        told = told_of(case, source)
        assert time.monotonic() - begun < LONGEST, case.name
        assert all(line.strip() and "Traceback" not in line and len(line) < 4000 for line in told), case.name
        if not names_place(case, source, told):
            elsewhere.append((case.name, case.place, told))
    assert len(elsewhere) <= (1 - SHARE) * len(cases), elsewhere


@pytest.mark.parametrize("kind", KINDS)
def test_reduce_tells_it_and_writes_nothing(
    kind: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setenv("GRADELINE_TRACEBACK", "1")
    for number, case in enumerate(each for each in CASES if each.kind == kind):
        place = tmp_path / f"{number}"
        source = write_case(case, place)
        before = sorted(place.rglob("*"))
        monkeypatch.setattr(sys, "argv", ["gradeline", "reduce", str(source), *options_of(case)])
        with pytest.raises(SystemExit) as left:
            main()
        said = capsys.readouterr()
        assert left.value.code in (2, 3), case.name
        assert said.out == "", case.name
        assert said.err.startswith(str(source)), case.name
        assert sorted(place.rglob("*")) == before, case.name


@pytest.mark.parametrize("kind", KINDS[::4])
def test_the_program_itself_tells_it(kind: str, tmp_path: Path) -> None:
    """A few as a process of its own: exit code, streams and time are what a shell sees."""
    case = next(case for case in CASES if case.kind == kind)
    source = write_case(case, tmp_path / "survey")
    ran = subprocess.run(
        [sys.executable, "-m", "gradeline", "reduce", source, "--out", tmp_path / "out", *options_of(case)],
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    assert ran.returncode in (2, 3)
    assert ran.stdout == ""
    assert "Traceback" not in ran.stderr
    assert names_place(case, source, [line.strip() for line in ran.stderr.splitlines()])
    assert not (tmp_path / "out").exists()
