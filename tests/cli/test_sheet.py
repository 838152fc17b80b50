"""`gradeline sheet`: its headings are those that the survey's readings have, or that would be read."""

import io
import json
import shutil
from pathlib import Path

import pytest
from pypdf import PdfReader
from typer.testing import CliRunner

import gradeline
from gradeline.cli.app import app
from gradeline.loader.recording import read_recording
from gradeline.report.recording_sheet import SheetColumn, recording_sheet

DEMOS = Path(__file__).parents[2] / "data_demo"
NAMES = ("cast_main", "copper_bench", "hydrant_main", "mercury_bench")


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments], prog_name="gradeline")


def squeezed(text):
    """Without blanks: a heading may run over two lines of the sheet."""
    return "".join(text.split())


def pages(path):
    return [squeezed(page.extract_text()) for page in PdfReader(path, strict=True).pages]


@pytest.mark.parametrize("paper", ["a4", "letter"])
@pytest.mark.parametrize("name", NAMES)
def test_its_headings_are_those_of_the_readings(name, paper, tmp_path):
    out = tmp_path / "sheet.pdf"
    result = run("sheet", DEMOS / name, "--out", out, "--paper", paper, "--json")
    assert result.exit_code == 0, result.output
    headings = (DEMOS / name / "readings.csv").read_text().splitlines()[0].split(",")
    assert json.loads(result.stdout)["columns"] == headings
    (sheet,) = pages(out)
    at = 0
    for heading in headings:
        at = sheet.index(squeezed(heading), at)


def test_taps_stand_with_their_chainages(tmp_path):
    columns = {one.heading: one for one in read_recording(DEMOS / "cast_main").columns}
    assert columns["M5 [kPa]"].under == "445 m"
    assert columns["flow [L/s]"].static == "0"
    columns = {one.heading: one for one in read_recording(DEMOS / "mercury_bench").columns}
    assert columns["m2 [mm]"].under == "T2 1.6 m to T3 2.8 m"
    run("sheet", DEMOS / "cast_main", "--out", tmp_path / "sheet.pdf")
    assert "445\u00a0m".replace("\u00a0", "") in pages(tmp_path / "sheet.pdf")[0].replace("\u00a0", "")


def filled(recording):
    """The sheet as somebody might have filled it in: a static run and two that flow."""
    rows = [",".join(one.heading for one in recording.columns)]
    for run_, flowing in (("static", False), ("1", True), ("2", True)):
        cells = []
        for one in recording.columns:
            name = one.heading.partition(" [")[0]
            if name == "run":
                cells.append(run_)
            elif name.startswith("note"):
                cells.append("10:15")
            elif name.startswith("temperature"):
                cells.append("15")
            elif one.static and not flowing:
                cells.append(one.static)
            elif one.under:
                cells.append("300")
            else:
                cells.append("20")
        rows.append(",".join(cells))
    return "\n".join(rows) + "\n"


@pytest.mark.parametrize("name", NAMES)
def test_a_survey_without_readings_gets_headings_that_the_loader_reads(name, tmp_path):
    folder = tmp_path / name
    shutil.copytree(DEMOS / name, folder, ignore=shutil.ignore_patterns("readings.csv", "reduction"))
    recording = read_recording(folder)
    assert recording.taken_from is None
    (folder / "readings.csv").write_text(filled(recording))
    survey = gradeline.read_survey(folder)
    assert list(survey.runs["run"]) == ["static", "1", "2"]
    assert survey.readings.notna().all().all()
    again = read_recording(folder)
    assert [one.heading for one in again.columns] == [one.heading for one in recording.columns]
    assert again.taken_from == "readings.csv"


FLOWS = {
    "volumetric tank": ("", ["volume [L]", "time [s]"]),
    "weighing tank": ("", ["mass [kg]", "time [s]"]),
    "orifice plate": ('throat_bore = "12 mm"\npipe_bore = "26.64 mm"', ["differential [kPa]"]),
    "venturi": (
        'throat_bore = "12 mm"\npipe_bore = "26.64 mm"\ngauge_fluid = "mercury"',
        ["differential [mm]"],
    ),
    "v-notch weir": ('notch_angle = "90 deg"', ["weir head [mm]"]),
}


@pytest.mark.parametrize("method", FLOWS)
def test_the_columns_of_the_flow_are_those_of_its_method(method, survey):
    keys, columns = FLOWS[method]
    toml = (survey / "survey.toml").read_text()
    (survey / "survey.toml").write_text(f'{toml}\n[flow]\nmethod = "{method}"\n{keys}\n')
    (survey / "readings.csv").unlink()
    headings = [one.heading for one in read_recording(survey).columns]
    assert headings[2 : 2 + len(columns)] == columns
    assert headings[-3:] == ["T1 [mm]", "T2 [mm]", "T3 [mm]"]


def test_headings_alone_are_headings(survey):
    headings = "run,note sky,flow [m^3/h],temperature [degC],T1 [cm],T2 [cm],T3 [cm]"
    (survey / "readings.csv").write_text(headings + "\n")
    assert [one.heading for one in read_recording(survey).columns] == headings.split(",")


def test_readings_listed_one_a_row_get_a_column_a_tap(survey):
    (survey / "runs.csv").write_text("run,flow [L/s],temperature [degC]\n1,0.2,15\n")
    (survey / "readings.csv").write_text("run,tap,reading [cm]\n1,T1,50\n1,T2,49\n1,T3,48\n")
    assert [one.heading for one in read_recording(survey).columns] == [
        *("run", "flow [L/s]", "temperature [degC]", "T1 [cm]", "T2 [cm]", "T3 [cm]"),
    ]


def test_rows_for_a_static_run_then_runs_and_repeats():
    content = recording_sheet(
        "Bench",
        [SheetColumn("run"), SheetColumn("T1 [mm]", "0.5 m")],
        [("board", "piezometer")],
        "9.9",
        runs=3,
        repeats=2,
    )
    lines = PdfReader(io.BytesIO(content)).pages[0].extract_text().split()
    labels = [word for word in lines[lines.index("run") + 1 :] if word in ("static", "1", "2", "3")]
    assert labels[:8] == ["static", "static", "1", "1", "2", "2", "3", "3"]


def test_many_taps_lie_on_the_long_edge_and_go_on_over_the_page():
    columns = [
        SheetColumn("run"),
        SheetColumn("flow [L/s]"),
        *(SheetColumn(f"T{n} [mm]", f"{n}.5 m") for n in range(1, 41)),
    ]
    content = recording_sheet("Bench", columns, [], "9.9", runs=30, paper="letter")
    sheets = PdfReader(io.BytesIO(content)).pages
    assert len(sheets) > 4
    found = []
    for sheet in sheets:
        assert float(sheet.mediabox.width) == pytest.approx(11 * 72)
        assert float(sheet.mediabox.height) == pytest.approx(8.5 * 72)
        text = squeezed(sheet.extract_text())
        assert "run" in text
        found += [n for n in range(1, 41) if f"T{n}[mm]" in text and n not in found]
    assert found == list(range(1, 41))
    few = PdfReader(io.BytesIO(recording_sheet("Bench", columns[:4], [], "9.9"))).pages[0]
    assert float(few.mediabox.height) > float(few.mediabox.width)


def test_a_sheet_that_is_there_stays_unless_told(survey):
    assert run("sheet", survey).exit_code == 0
    before = (survey / "recording_sheet.pdf").read_bytes()
    result = run("sheet", survey, "--runs", "3")
    assert result.exit_code == 4
    assert result.stderr == (
        f"{survey}: {survey / 'recording_sheet.pdf'} exists already; name another file with --out, or replace it with "
        "--overwrite\n"
    )
    assert (survey / "recording_sheet.pdf").read_bytes() == before
    assert run("sheet", survey, "--runs", "3", "--overwrite").exit_code == 0
    assert (survey / "recording_sheet.pdf").read_bytes() != before
    assert gradeline.read_survey(survey).title == "Bench line"  # the sheet in its folder is no part of it


def test_faults_of_the_line_are_told(survey, tmp_path):
    (survey / "taps.csv").write_text("tap,chainage [m]\nT1,0.5\nT1,1.5\n")
    result = run("sheet", survey)
    assert result.exit_code == 3
    assert "taps.csv row 3" in result.stderr
    table = tmp_path / "heads.csv"
    table.write_text("chainage [m],head [mm]\n0,100\n1,90\n")
    result = run("sheet", table)
    assert result.exit_code == 2
    assert "one table of heads has no gauges to read" in result.stderr


@pytest.mark.parametrize("options", [("--runs", "0"), ("--repeats", "0"), ("--paper", "a5")])
def test_wrong_options_are_wrong_use(survey, options):
    assert run("sheet", survey, *options).exit_code == 2
    assert not (survey / "recording_sheet.pdf").exists()
