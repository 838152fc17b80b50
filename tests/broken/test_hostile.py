"""Surveys made to do harm: nothing is written outside the results, nothing run, nothing fetched, memory and time bounded.

What the program decides: a name that a spreadsheet could take for a formula stands behind an apostrophe in csv and xlsx; text
is escaped wherever it is drawn or shown; links to files are read as the files they lead to, as the user may read them anyway,
but a link in place of the folder of results is refused.
"""

from __future__ import annotations

import csv
import io
import os
import re
import subprocess
import sys
import time
import zipfile
from pathlib import Path
from xml.etree import ElementTree as ET

import pytest

import gradeline
from tests.broken.bases import BASES, Files, sheets_of, workbook_of, write_files

TOP = Path(__file__).resolve().parents[2]
#: Address space, MB, and time, s, that any of them may take; the libraries alone take 1.5 GB of the first.
MEMORY, LONGEST = 3500, 60.0
#: Processor time, s, of reading what is refused.
BUSY = 10.0

CAN_LIMIT = sys.platform.startswith("linux")
pytestmark = pytest.mark.skipif(not CAN_LIMIT, reason="limits of memory and device files are those of Linux")


def run(
    *arguments: object, places: tuple[Path, ...] = (), memory: int = MEMORY
) -> subprocess.CompletedProcess[str]:
    """Run the program with its hands tied; it may write to `places` alone."""
    begun = os.times()
    ran = subprocess.run(
        [
            sys.executable,
            "-B",
            "-m",
            "tests.broken.guarded",
            f"{memory}",
            *places,
            "--",
            *map(str, arguments),
        ],
        cwd=TOP,
        env={**os.environ, "OPENBLAS_NUM_THREADS": "1"},
        capture_output=True,
        text=True,
        timeout=LONGEST,
        check=False,
    )
    ended = os.times()
    busy = ended.children_user + ended.children_system - begun.children_user - begun.children_system
    assert busy < 4 * BUSY if ran.returncode == 0 else busy < BUSY + 2.0, f"{busy:.1f} s of processor time"
    assert "Traceback" not in ran.stderr
    assert "forbidden" not in ran.stderr, ran.stderr
    assert "MemoryError" not in ran.stderr
    return ran


def refused(source: Path, *options: object, place: str) -> str:
    """Reduce what has to be refused; return what is told, which names the place."""
    before = sorted(source.parent.rglob("*"))
    ran = run("reduce", source, *options)
    assert ran.returncode == 3, ran.stderr
    assert ran.stdout == ""
    assert place in ran.stderr
    assert len(ran.stderr) < 500_000
    assert sorted(source.parent.rglob("*")) == before
    return ran.stderr


def bench() -> Files:
    return BASES["listed"]()


def renamed(**names: str) -> Files:
    """A survey whose title, walls, reaches, taps and runs are called otherwise."""
    files = bench()

    def quoted(text: str) -> bytes:
        return ('"' + text.replace("\\", "\\\\").replace('"', '\\"') + '"').encode()

    toml = files["survey.toml"]
    for old, new in {"Hill main": "title", "copper": "wall", "upper": "reach"}.items():
        toml = toml.replace(f'"{old}"'.encode(), quoted(names[new]))
    files["survey.toml"] = toml
    for name in ("taps.csv", "readings.csv", "runs.csv"):
        rows = list(csv.reader(io.StringIO(files[name].decode())))
        out = io.StringIO()
        swaps = {"T2": names["tap"], "02": names["run"]}
        csv.writer(out).writerows([[swaps.get(cell, cell) for cell in row] for row in rows])
        files[name] = out.getvalue().encode()
    return files


FORMULAS = {
    "title": '=HYPERLINK("http://example.invalid","x")',
    "wall": "@SUM(A1:A9)",
    "reach": "+cmd|' /C calc'!A0",
    "tap": "=1+1",
    "run": "-2+3",
}
MARKUP = {
    "title": "<script>alert(1)</script>{{7*7}}</title></svg>]]>",
    "wall": "<img src=x onerror=alert(2)>",
    "reach": "</script><svg onload=alert(3)>",
    "tap": "<b>&amp;$\\frac{1}{0}$",
    "run": "javascript:alert(4)//%s{0}",
}


@pytest.fixture(scope="module", params=["formulas", "markup"])
def reduced(
    request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory
) -> tuple[str, Path, Path]:
    """A survey with hostile names, and its results in every format."""
    place = tmp_path_factory.mktemp(request.param)
    survey, out = place / "survey", place / "results" / "out"
    write_files(survey, renamed(**(FORMULAS if request.param == "formulas" else MARKUP)))
    before = sorted(place.rglob("*"))
    ran = run(
        "reduce",
        survey,
        "--out",
        out,
        "--formats",
        "html,json,csv,svg,pdf,xlsx",
        "--no-monte-carlo",
        places=(place / "results",),
    )
    assert ran.returncode == 0, ran.stderr
    assert set(before) <= set(place.rglob("*"))
    assert all(
        out in path.parents or path in (out, out.parent) for path in set(place.rglob("*")) - set(before)
    )
    return request.param, survey, out


def test_no_cell_of_a_csv_file_is_a_formula(reduced: tuple[str, Path, Path]) -> None:
    _, _, out = reduced
    tables = sorted(out.glob("*.csv"))
    assert tables
    cells = [
        cell for table in tables for row in csv.reader(io.StringIO(table.read_text("utf-8"))) for cell in row
    ]
    assert not [
        cell
        for cell in cells
        if re.match(r"[=+\-@\t\r]", cell) and not re.fullmatch(r"[+-]?[\d.]+(e[+-]?\d+)?", cell)
    ]


def test_a_name_that_is_guarded_is_still_there(reduced: tuple[str, Path, Path]) -> None:
    kind, _, out = reduced
    names = FORMULAS if kind == "formulas" else MARKUP
    cells = {cell for row in csv.reader(io.StringIO((out / "heads.csv").read_text("utf-8"))) for cell in row}
    assert {names["tap"], f"'{names['tap']}"} & cells
    assert {names["run"], f"'{names['run']}"} & cells


def test_no_cell_of_a_workbook_is_a_formula_or_a_link(reduced: tuple[str, Path, Path]) -> None:
    _, _, out = reduced
    with zipfile.ZipFile(out / "reduction.xlsx") as book:
        sheets = {name: book.read(name) for name in book.namelist() if "worksheets/" in name}
        texts = book.read("xl/sharedStrings.xml").decode()
    assert sheets
    assert not [
        name
        for name, sheet in sheets.items()
        if b"<f>" in sheet or b"<f " in sheet or b"hyperlink" in sheet.lower()
    ]
    assert not re.findall(r"<t[^>]*>[=@]", texts)


def test_a_page_and_its_drawings_run_nothing(reduced: tuple[str, Path, Path]) -> None:
    _, _, out = reduced
    page = (out / "report.html").read_text("utf-8")
    assert not re.search(r"<script>alert|<img src=x|<svg onload|<b>&amp;\$|onerror=alert\(2\)>", page)
    assert 'href="javascript:' not in page.lower()
    drawings = sorted(out.rglob("*.svg"))
    assert drawings
    for drawing in drawings:
        for element in ET.parse(drawing).iter():
            assert (
                element.tag.rpartition("}")[2] not in {"script", "foreignObject", "img", "image"}
                or "svg" not in drawing.name
            )
            assert not [name for name in element.attrib if name.lower().startswith("on")]
            links = [value for name, value in element.attrib.items() if name.endswith("href")]
            assert all(link.startswith(("#", "data:image/png")) for link in links)


def test_a_title_stands_in_the_page_as_text(reduced: tuple[str, Path, Path]) -> None:
    kind, _, out = reduced
    page = (out / "report.html").read_text("utf-8")
    shown = "{{7*7}}" if kind == "markup" else "=HYPERLINK("
    assert shown in page
    assert "49</title>" not in page


def test_a_pdf_has_no_script_and_no_link_of_the_survey(reduced: tuple[str, Path, Path]) -> None:
    _, _, out = reduced
    content = (out / "report.pdf").read_bytes()
    assert content.startswith(b"%PDF")
    assert not [
        mark for mark in (b"/JavaScript", b"/JS", b"/Launch", b"/URI", b"/EmbeddedFile") if mark in content
    ]


def test_a_notebook_shows_names_as_text(reduced: tuple[str, Path, Path]) -> None:
    _, folder, _ = reduced
    survey = gradeline.read_survey(folder)
    for shown in (survey._repr_html_(), gradeline.reduce(survey, monte_carlo=False)._repr_html_()):
        assert not re.search(r"<script>alert|<img src=x|<svg onload", shown)


def test_a_tap_called_as_a_path_stays_a_name(tmp_path: Path) -> None:
    names = {
        **FORMULAS,
        "tap": "../../x",
        "wall": "../../../etc/cron.d/y",
        "reach": "a/b\\c:d",
        "run": "../z",
        "title": "../../t",
    }
    survey, out = tmp_path / "deep" / "survey", tmp_path / "deep" / "out"
    write_files(survey, renamed(**names))
    ran = run(
        "reduce",
        survey,
        "--out",
        out,
        "--formats",
        "html,json,csv,svg,png,pdf,xlsx",
        "--no-monte-carlo",
        places=(tmp_path / "deep",),
    )
    assert ran.returncode == 0, ran.stderr
    assert sorted(path.name for path in tmp_path.iterdir()) == ["deep"]
    assert sorted(path.name for path in (tmp_path / "deep").iterdir()) == ["out", "survey"]
    assert all(re.fullmatch(r"[A-Za-z0-9_.-]+", path.name) for path in out.rglob("*"))


def _with_part(part: str, content: bytes, *, said: int | None = None) -> bytes:
    """The workbook with a part of it replaced, packed; `said` is the length that its directory states."""
    out = io.BytesIO()
    with (
        zipfile.ZipFile(io.BytesIO(BASES["workbook"]()["bench.xlsx"])) as archive,
        zipfile.ZipFile(out, "w") as packed,
    ):
        for name in archive.namelist():
            if name != part:
                packed.writestr(name, archive.read(name))
        packed.writestr(part, content, zipfile.ZIP_DEFLATED, 9)
    data = out.getvalue()
    if said is not None:
        size = len(content).to_bytes(4, "little")
        assert size in data
        data = data.replace(size, said.to_bytes(4, "little"))
    return data


def _zeros(millions: int) -> bytes:
    return bytes(millions * 10**6)


def test_a_zip_bomb_is_refused_unread(tmp_path: Path) -> None:
    bomb = _with_part("xl/worksheets/sheet3.xml", _zeros(500))
    assert len(bomb) < 2_000_000
    (tmp_path / "bomb.xlsx").write_bytes(bomb)
    told = refused(tmp_path / "bomb.xlsx", place="bomb.xlsx: the workbook unpacks to 5")
    assert "at most 400 MB" in told


def test_a_zip_bomb_that_says_it_is_small_is_refused(tmp_path: Path) -> None:
    (tmp_path / "bomb.xlsx").write_bytes(_with_part("xl/worksheets/sheet3.xml", _zeros(300), said=1000))
    refused(tmp_path / "bomb.xlsx", place="bomb.xlsx: the file is damaged")


def test_a_long_text_that_every_cell_points_at_is_refused(tmp_path: Path) -> None:
    sheets = sheets_of(BASES["plate"]())
    sheets["readings"] += [["x" * 30_000] * 5] * 8000
    (tmp_path / "bomb.xlsx").write_bytes(workbook_of(sheets))
    refused(tmp_path / "bomb.xlsx", place="bomb.xlsx: the texts of a sheet are too long")


@pytest.mark.parametrize("name", ["survey.toml", "taps.csv", "readings.csv", "runs.csv"])
def test_a_line_of_a_gigabyte_is_refused_unread(name: str, tmp_path: Path) -> None:
    survey = tmp_path / "survey"
    write_files(survey, bench())
    with (survey / name).open("wb") as stream:
        stream.truncate(10**9)  # takes no room on the disk
    told = refused(survey, place=f"{name}: the file is larger than ")
    assert "MB; split the survey" in told


@pytest.mark.parametrize(
    "sign", [b",", b"x", b'"x\n', b"1,"], ids=["commas", "letters", "quoted lines", "cells"]
)
def test_a_line_of_nearly_the_largest_file_is_refused(sign: bytes, tmp_path: Path) -> None:
    survey = tmp_path / "survey"
    write_files(survey, {**bench(), "readings.csv": sign * (190_000_000 // len(sign))})
    refused(survey, place="readings.csv row 1: ")


def test_a_hundred_thousand_columns_are_told_briefly(tmp_path: Path) -> None:
    survey = tmp_path / "survey"
    names = ",".join(f"X{number} [mm]" for number in range(100_000))
    table = f"run,flow [L/s],temperature [degC],{names}\n1,0.2,18,{','.join(['5'] * 100_000)}\n"
    files = bench()
    del files["runs.csv"]
    write_files(survey, {**files, "readings.csv": table.encode()})
    assert "reading stopped after 1000 problems" in refused(survey, place="readings.csv row 1, X0 [mm]: ")


def test_a_million_faults_are_told_briefly(tmp_path: Path) -> None:
    survey = tmp_path / "survey"
    write_files(survey, {**bench(), "readings.csv": b"run,tap,reading,unit\n" + b"1,T1\n" * 1_000_000})
    assert "reading stopped after 1000 problems" in refused(survey, place="readings.csv row 2: ")


@pytest.mark.parametrize(
    ("text", "place"),
    [
        (b"x = " + b"[" * 1000 + b"]" * 1000, "survey.toml: the file nests lists or tables too deeply"),
        (
            b"x = " + b"{a = " * 1000 + b"1" + b"}" * 1000,
            "survey.toml: the file nests lists or tables too deeply",
        ),
        (b"a" + b".a" * 100_000 + b" = 1", "survey.toml row 1: a key has more than 50 parts"),
        (b"[a" + b".a" * 1000 + b"]", "survey.toml row 1: a key has more than 50 parts"),
        (b"reach = [" + b"1," * 500_000 + b"]", "reading stopped after 1000 problems"),
        (b"".join(b"k%d = 1\n" % number for number in range(150_000)), "reading stopped after 1000 problems"),
        (b"# " + b"y" * 100_000_000, "survey.toml: the file is larger than 2 MB"),
    ],
    ids=[
        "lists",
        "tables",
        "a dotted key",
        "a dotted header",
        "a list of numbers",
        "many keys",
        "a hundred MB",
    ],
)
def test_a_document_made_to_be_slow_is_refused(text: bytes, place: str, tmp_path: Path) -> None:
    survey = tmp_path / "survey"
    write_files(survey, {**bench(), "survey.toml": text + b"\n"})
    refused(survey, place=place)


@pytest.mark.parametrize("name", ["survey.toml", "taps.csv", "readings.csv"])
@pytest.mark.parametrize("what", ["zeros", "pipe", "loop", "nowhere"])
def test_what_is_no_file_is_never_waited_for(name: str, what: str, tmp_path: Path) -> None:
    survey = tmp_path / "survey"
    write_files(survey, bench())
    path = survey / name
    path.unlink()
    if what == "zeros":
        path.symlink_to("/dev/zero")
    elif what == "pipe":
        os.mkfifo(path)
    elif what == "loop":
        path.symlink_to(path)
    else:
        path.symlink_to(tmp_path / "nowhere")
    begun = time.monotonic()
    with pytest.raises(gradeline.GradelineError) as caught:
        gradeline.read_survey(survey)
    assert time.monotonic() - begun < BUSY
    assert f"{name}: " in str(caught.value)


@pytest.mark.parametrize("command", ["reduce", "sheet"])
def test_results_are_not_written_through_a_link(command: str, tmp_path: Path) -> None:
    """A survey from elsewhere may hold a link where the results go by default."""
    survey, elsewhere = tmp_path / "survey", tmp_path / "elsewhere"
    write_files(survey, bench())
    elsewhere.mkdir()
    name = "reduction" if command == "reduce" else "recording_sheet.pdf"
    (survey / name).symlink_to(elsewhere / ("" if command == "reduce" else "sheet.pdf"))
    options = ("--formats", "json") if command == "reduce" else ()
    ran = run(command, survey, *options, places=(survey,))
    assert ran.returncode == 4
    assert f"{survey / name} is a link" in ran.stderr
    assert list(elsewhere.iterdir()) == []


def test_a_folder_that_is_a_link_is_a_survey_like_any_other(tmp_path: Path) -> None:
    write_files(tmp_path / "real", bench())
    (tmp_path / "linked").symlink_to(tmp_path / "real", target_is_directory=True)
    ran = run(
        "reduce", tmp_path / "linked", "--out", tmp_path / "out", "--formats", "json", places=(tmp_path,)
    )
    assert ran.returncode == 0, ran.stderr
    assert sorted(path.name for path in (tmp_path / "real").iterdir()) == sorted(bench())


def test_the_guard_itself_refuses(tmp_path: Path) -> None:
    """Writing where nothing may be written is seen, or the tests above would see nothing."""
    write_files(tmp_path / "survey", bench())
    with pytest.raises(AssertionError, match="forbidden: "):
        run("reduce", tmp_path / "survey", "--out", tmp_path / "out", "--formats", "json")
