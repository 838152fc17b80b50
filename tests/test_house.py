"""The house: what lies at its top, and that the demo data are what their script writes."""

from __future__ import annotations

import subprocess
import sys
from fnmatch import fnmatch
from pathlib import Path

import pytest

TOP = Path(__file__).resolve().parents[1]
ROOMS = {"README.md", "DEVELOPERS.md", "pyproject.toml", "gradeline", "tests", "data_demo", "notebooks"}
SURVEYS = ("cast_main", "copper_bench", "hydrant_main", "mercury_bench")


def ignored(name: str) -> bool:
    patterns = [line.rstrip("/") for line in (TOP / ".gitignore").read_text("utf-8").splitlines() if line]
    return any(fnmatch(name, pattern) for pattern in patterns)


def test_the_top_level_holds_nothing_else() -> None:
    """A file that belongs to no room has no place; dot-files and what git ignores do not count."""
    found = {entry.name for entry in TOP.iterdir() if not entry.name.startswith(".")}
    assert {name for name in found if not ignored(name)} <= ROOMS


def test_the_licence_and_the_type_marker_travel_with_the_package() -> None:
    assert (TOP / "gradeline" / "LICENSE").is_file()
    assert (TOP / "gradeline" / "py.typed").is_file()


@pytest.fixture(scope="module")
def written(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("demo")
    script = TOP / "tests" / "simulate" / "make_demo.py"
    subprocess.run([sys.executable, str(script), str(folder)], check=True)
    return folder


def test_the_demo_holds_these_surveys() -> None:
    assert sorted(entry.name for entry in (TOP / "data_demo").iterdir()) == sorted(SURVEYS)


@pytest.mark.parametrize("survey", SURVEYS)
def test_a_demo_survey_is_what_its_script_writes(survey: str, written: Path) -> None:
    """Byte for byte; a folder `reduction` left by a user is no part of the survey."""
    kept = {path.name: path.read_bytes() for path in (TOP / "data_demo" / survey).iterdir() if path.is_file()}
    made = {path.name: path.read_bytes() for path in (written / survey).iterdir()}
    assert kept == made


@pytest.mark.parametrize("survey", SURVEYS)
def test_a_demo_survey_says_that_it_is_invented(survey: str) -> None:
    first = (TOP / "data_demo" / survey / "survey.toml").read_text("utf-8").splitlines()[0]
    assert first.startswith("# Invented data with a known truth")
