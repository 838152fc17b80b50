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


def test_a_list_of_readings_has_a_row_for_each_tap_of_each_run(tmp_path):
    folder = tmp_path / "listed"
    shutil.copytree(DEMOS / "copper_bench", folder)
    head, *rows = [line.split(",") for line in (folder / "readings.csv").read_text().splitlines()]
    taps = [(n, text) for n, text in enumerate(head) if text.startswith("T") and "[" in text]
    others = [n for n in range(len(head)) if n not in dict(taps)]
    (folder / "runs.csv").write_text("\n".join(",".join(row[n] for n in others) for row in [head, *rows]))
    unit = taps[0][1].partition("[")[2]
    listed = [f"{row[0]},{text.split()[0]},{row[n]}" for row in rows for n, text in taps if row[n]]
    (folder / "readings.csv").write_text("\n".join([f"run,tap,reading [{unit}", *listed]))
    out = tmp_path / "sheet.pdf"
    result = run("sheet", folder, "--out", out, "--runs", 3)
    assert result.exit_code == 0, result.output
    text = "".join(pages(out))
    assert squeezed(f"reading [{unit}") in text
    assert "onereadingarow" in text
    recording = read_recording(folder)
    assert [one.heading for one in recording.read] == [text.split()[0] for _, text in taps]
    for _, name in taps:
        label = name.split()[0]
        assert text.count(f"3{label}") + text.count(f"static{label}") >= 2


def test_the_rows_of_a_run_stay_on_one_page():
    columns = [SheetColumn("run"), SheetColumn("T1 [mm]")]
    content = recording_sheet("Rig", columns, [("board", "piezometer")], "9", runs=40, repeats=3)
    for page in PdfReader(io.BytesIO(content), strict=True).pages:
        lines = [line.strip() for line in page.extract_text().splitlines()]
        for label in map(str, range(1, 41)):
            assert lines.count(label) in (0, 3)


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


def test_readings_listed_one_a_row_stay_so(survey):
    (survey / "runs.csv").write_text("run,flow [L/s],temperature [degC]\n1,0.2,15\n")
    (survey / "readings.csv").write_text("run,tap,reading [cm]\n1,T1,50\n1,T2,49\n1,T3,48\n")
    recording = read_recording(survey)
    assert [one.heading for one in recording.columns] == ["run", "flow [L/s]", "temperature [degC]"]
    assert recording.listed == ("run", "tap", "reading [cm]")
    assert [one.heading for one in recording.read] == ["T1", "T2", "T3"]
    assert all(one.under.endswith(", cm") for one in recording.read)


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


def test_the_labels_of_the_runs_stand_in_the_column_of_the_runs_wherever_it_lies(survey):
    headings = "flow [L/s],run,temperature [degC],T1 [mm],T2 [mm],T3 [mm]"
    (survey / "readings.csv").write_text(headings + "\n")
    assert run("sheet", survey, "--runs", "2").exit_code == 0
    places = {}

    def seen(text, _matrix, at, *_more):
        if text.strip():
            places.setdefault(text.strip(), at[4])

    PdfReader(survey / "recording_sheet.pdf").pages[0].extract_text(visitor_text=seen)
    # Left edges: the flow of the static run, then the labels, then the first tap.
    assert places["0"] < min(places["static"], places["1"])
    assert max(places["static"], places["1"]) < places["T1 [mm]"]


def test_the_column_of_the_runs_comes_again_on_each_sheet_wherever_it_lies():
    columns = [
        SheetColumn("flow [L/s]", static="0"),
        *(SheetColumn(f"T{n} [mm]", f"{n}.5 m") for n in range(1, 31)),
        SheetColumn("run"),
    ]
    content = recording_sheet("Bench", columns, [], "9.9", runs=3)
    texts = [squeezed(sheet.extract_text()) for sheet in PdfReader(io.BytesIO(content)).pages]
    assert len(texts) > 1
    assert all(text.count("static") >= 1 and "run" in text for text in texts)
    assert sum(text.count(f"T{n}[mm]") for text in texts for n in range(1, 31)) == 30
