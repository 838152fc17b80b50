"""The same input gives the same bytes, whatever the machine's cores, language and time zone; other forms only say so."""

from __future__ import annotations

import datetime
import json
import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from tests.logger.made import BEGIN, log, stamped

TOP = Path(__file__).resolve().parents[2]
DEMOS = ("copper_bench", "hydrant_main")
SURVEYS = (*DEMOS, "logged")
LOCALES = ("de_DE", "tr_TR")
# The C library's own words and numbers follow the language only where a program asks it to.
ASKED = "import locale; locale.setlocale(locale.LC_ALL, ''); from gradeline.cli import main; main()"
PLAIN = {
    name: value
    for name, value in os.environ.items()
    if not name.startswith(("LC_", "LANG", "TZ", "OMP_", "OPENBLAS_", "MKL_", "PYTHONIO", "PYTHONUTF8"))
} | {"LC_ALL": "C.UTF-8", "OPENBLAS_NUM_THREADS": "1"}

THREADS = {
    f"{count} threads": {"OPENBLAS_NUM_THREADS": count, "OMP_NUM_THREADS": count, "PYTHONHASHSEED": count * 3}
    for count in "124"
}
SURROUNDINGS = {
    **THREADS,
    "time zone": {"TZ": "Pacific/Auckland"},
    # no UTF-8 anywhere, as the system has it
    "plain ascii": {"LC_ALL": "C", "PYTHONUTF8": "0", "PYTHONCOERCECLOCALE": "0"},
}


@pytest.fixture(scope="module")
def place(tmp_path_factory):
    """Two demo surveys, and a logger's file of ISO timestamps without a zone, long enough to be cut among threads."""
    folder = tmp_path_factory.mktemp("same")
    for name in DEMOS:
        shutil.copytree(TOP / "data_demo" / name, folder / name, ignore=shutil.ignore_patterns("reduction"))
    made = log(folder / "logged", rate=40.0)
    made.table = stamped(made.table, "")
    made.write()
    rows = "".join(
        f"{run},{(BEGIN + datetime.timedelta(seconds=start)).isoformat()},"
        f"{(BEGIN + datetime.timedelta(seconds=end)).isoformat()}\n"
        for run, start, end in made.windows
    )
    made.give(f"run,start,end\n{rows}")
    return folder


def reduce_there(place, out, *surveys, env=None, code=None, **more):
    """Reduce surveys from their folder by the command line; return every file of the results, and what was told."""
    begin = [sys.executable, "-c", code] if code else [sys.executable, "-m", "gradeline"]
    named = surveys or SURVEYS
    options = [
        "--out",
        str(out),
        "--formats",
        "json,csv",
        "--overwrite",
        *more.pop("options", ["--jobs", "1"]),
    ]
    done = subprocess.run(
        [*begin, "reduce", *map(str, named), *options],
        cwd=place,
        env=PLAIN | (env or {}),
        capture_output=True,
        check=False,
        **more,
    )
    assert done.returncode == 0, done.stderr.decode(errors="replace")
    found = {str(path.relative_to(out)): path.read_bytes() for path in out.rglob("*") if path.is_file()}
    return found, done.stdout


@pytest.fixture(scope="module")
def expected(place, tmp_path_factory):
    found, told = reduce_there(place, tmp_path_factory.mktemp("expected"))
    assert {f"{name}/reduction.json" for name in SURVEYS} < set(found)
    return found, told


@pytest.mark.parametrize("around", SURROUNDINGS)
def test_surroundings_leave_every_byte(place, expected, tmp_path, around):
    """Records, tables and what is told."""
    found, told = reduce_there(place, tmp_path / "out", env=SURROUNDINGS[around])
    assert found == expected[0]
    assert told == expected[1]


@pytest.mark.skipif(not hasattr(os, "sched_setaffinity"), reason="no way here to give a process one core")
def test_one_core(place, expected, tmp_path):
    one = min(os.sched_getaffinity(0))
    found, _ = reduce_there(place, tmp_path / "out", preexec_fn=lambda: os.sched_setaffinity(0, {one}))
    assert found == expected[0]


def test_several_processes(place, expected, tmp_path):
    found, told = reduce_there(place, tmp_path / "out", options=["--jobs", "3"])
    assert found == expected[0]
    assert told == expected[1]


@pytest.mark.parametrize("survey", SURVEYS)
def test_alone_as_among_others(place, expected, tmp_path, survey):
    found, _ = reduce_there(place, tmp_path / survey, survey, options=[])
    assert {f"{survey}/{name}": content for name, content in found.items() if name != "summary.csv"} == {
        name: content for name, content in expected[0].items() if name.startswith(f"{survey}/")
    }


@pytest.fixture(scope="module")
def languages(tmp_path_factory):
    """A folder with the two languages, made where the system has them not; empty where that is not possible."""
    folder = tmp_path_factory.mktemp("languages")
    if shutil.which("localedef"):
        for name in LOCALES:
            subprocess.run(
                ["localedef", "--no-archive", "-i", name, "-f", "UTF-8", folder / f"{name}.UTF-8"],
                capture_output=True,
                check=False,
            )
    return folder


@pytest.mark.parametrize("name", LOCALES)
def test_languages_leave_every_byte(place, expected, languages, tmp_path, name):
    """Decimal commas in German; in Turkish, I and i are no pair."""
    env = {"LC_ALL": f"{name}.UTF-8", "LANG": f"{name}.UTF-8"}
    if (languages / f"{name}.UTF-8").is_dir():
        env["LOCPATH"] = str(languages)
    point = "import locale; locale.setlocale(locale.LC_ALL, ''); print(locale.localeconv()['decimal_point'])"
    known = subprocess.run(
        [sys.executable, "-c", point], env=PLAIN | env, capture_output=True, text=True, check=False
    )
    if known.returncode:
        pytest.skip(f"this system neither has nor makes the locale {name}")
    assert known.stdout == ",\n"
    found, told = reduce_there(place, tmp_path / "out", env=env, code=ASKED)
    assert found == expected[0]
    assert told == expected[1]


def windows_lines(_, text):
    return text.replace("\n", "\r\n").encode()


def old_lines(name, text):
    return text.encode() if name == "survey.toml" else text.replace("\n", "\r").encode()


def byte_order_mark(_, text):
    return text.encode("utf-8-sig")


def no_last_line_end(_, text):
    return text.rstrip("\n").encode()


def semicolons(name, text):
    return text.encode() if name == "survey.toml" else text.replace(",", ";").encode()


def decimal_commas(name, text):
    return text.encode() if name == "survey.toml" else text.replace(",", ";").replace(".", ",").encode()


#: Each form, and what it adds to the assumptions for each file.
FORMS = {
    windows_lines: 0,
    old_lines: 0,
    byte_order_mark: 0,
    no_last_line_end: 0,
    semicolons: 0,
    decimal_commas: 1,
}


def without_files(record):
    """The record without what names and hashes the files, and that part."""
    survey = record["survey"]
    return record | {"survey": {**survey, "files": None, "source": None}, "assumptions": None}, survey


@pytest.mark.parametrize(
    ("survey", "form"),
    [
        (survey, form)
        for survey in ("copper_bench", "logged")
        for form in FORMS
        if (survey, form) != ("logged", old_lines)  # no logger ends lines with carriage returns alone
    ],
    ids=lambda one: one if isinstance(one, str) else one.__name__,
)
def test_another_form_of_the_files_differs_in_hashes_alone(place, expected, tmp_path, survey, form):
    """And a decimal comma is told; the folder has blanks and letters beyond ASCII."""
    folder = tmp_path / "Prüfstand Süd № 3" / "水 läuft"
    folder.mkdir(parents=True)
    for path in (place / survey).iterdir():
        (folder / path.name).write_bytes(form(path.name, path.read_text("utf-8")))
    found, _ = reduce_there(tmp_path, tmp_path / "out dir ü", folder.relative_to(tmp_path), options=[])
    before = {
        name.removeprefix(f"{survey}/"): content
        for name, content in expected[0].items()
        if name.startswith(f"{survey}/")
    }
    assert set(found) == set(before)
    changed = {name for name in found if found[name] != before[name]}
    assert changed <= {"reduction.json", "carried.json"}
    one, other = json.loads(found["reduction.json"]), json.loads(before["reduction.json"])
    (rest, about), (rest_before, about_before) = without_files(one), without_files(other)
    assert rest == rest_before
    assert about["source"] == str(folder.relative_to(tmp_path))
    assert about["files"].keys() == about_before["files"].keys()
    more = [text for text in one["assumptions"] if text not in other["assumptions"]]
    assert [text for text in one["assumptions"] if text not in more] == other["assumptions"]
    assert len(more) == FORMS[form] * sum("," in text for text in more)
    assert bool(more) == bool(FORMS[form])
    assert all("decimals of" in text and "set off by a comma" in text for text in more)
