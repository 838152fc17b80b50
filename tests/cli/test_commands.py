import os
import re
import subprocess
import sys

import pytest
from typer.testing import CliRunner

import gradeline
from gradeline.cli import main
from gradeline.cli.app import DEFAULT_FORMATS, app
from gradeline.errors import OutputError, ReductionError
from gradeline.quantities.printing import SI_DISPLAY, US_DISPLAY

SI_ON_A4 = {"display": SI_DISPLAY, "paper": "a4"}


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments], prog_name="gradeline")


def python(code, *, encoding="utf-8", **environment):
    return subprocess.run(
        [sys.executable, "-W", "error", "-c", code],
        capture_output=True,
        encoding=encoding,
        check=False,
        env={**os.environ, **environment},
    )


HEAVY = (
    *("scipy", "pandas", "matplotlib", "pint", "pydantic", "numpy", "uncertainties", "jinja2", "chemicals"),
    *("fpdf", "xlsxwriter"),
)


def test_help_loads_nothing_heavy():
    code = (
        "import sys, gradeline\nfrom gradeline.cli import main\nsys.argv = ['gradeline', '--help']\n"
        "try:\n    main()\nexcept SystemExit as stop:\n    assert not stop.code\n"
        f"print('LOADED', sorted(set(sys.modules) & set({HEAVY!r})))"
    )
    done = python(code)
    assert done.stdout.startswith("Usage: gradeline [OPTIONS] COMMAND [ARGS]...")
    assert done.stdout.rstrip().endswith("LOADED []")
    assert done.stderr == ""


def test_reading_loads_nothing_that_only_reduces_or_draws(survey):
    code = (
        f"import sys, gradeline\ngradeline.read_survey({str(survey)!r})\n"
        "print(sorted(set(sys.modules) & {'scipy.stats', 'matplotlib', 'jinja2', 'chemicals'}))"
    )
    done = python(code)
    assert done.stdout == "[]\n", done.stderr


@pytest.mark.parametrize("command", ["check", "gauges", "new", "reduce", "watch"])
def test_every_command_shows_an_example(command):
    result = run(command, "--help")
    assert result.exit_code == 0
    assert f"Example: gradeline {command} " in result.stdout


def test_the_module_runs_as_the_script_does():
    done = subprocess.run(
        [sys.executable, "-m", "gradeline", "--version"], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0
    assert done.stdout.startswith("gradeline ")


def test_check_says_what_was_understood(survey):
    result = run("check", survey)
    assert result.exit_code == 0
    assert result.stderr == f"{survey}: no problems\n"
    for text in (
        "Bench line (2026-05-06)",
        "Fluid: water, density and viscosity from each run's temperature",
        "  main   0        6      26.64 ± 0.03  copper",
        "  valve    3      0.2 ± 0.1         smaller bore",
        "  board  piezometer  zero 0.8 m  resolution 1 mm",
        "  T2   1.5          0             board  2 of 3",
        "Runs (3 runs, 1 of them static)",
        "  1    static",
        "  3    0.5        18               2 of 3     1",
        "Units as found: m (taps.csv chainage, taps.csv elevation), L/s (flow), degC (temperature), mm (T1, T2, T3)",
        "Stated uncertainties: reading 0.5 mm, flow 0.4 %",
        "  - Neither latitude nor gravity is given: gravity is taken as 9.80665 m/s².",
        "  - The uncertainty of the chainage is not stated: it contributes nothing to the results.",
    ):
        assert text in result.stdout
    assert "\x1b" not in result.output


def test_check_shows_what_is_stated_in_the_unit_of_the_file(survey):
    toml = (survey / "survey.toml").read_text()
    toml = toml.replace(
        'kind = "piezometer"\nzero = "0.80 m"\nresolution = "1 mm"\n', 'kind = "pressure gauge"\n'
    )
    toml = toml.replace(
        "[gauge.board]\n",
        '[gauge.board]\nuncertainty = "0.02 psi"\nline_temperature = "59 degF +/- 1 degF"\n',
    )
    toml = toml.replace(
        'reading = "0.5 mm"', 'reading = "0.15 kPa"\nchainage = "0.7 mm"\ntemperature = "0.2 degC"'
    )
    (survey / "survey.toml").write_text(toml.replace('"0.4 %"', '"2 L/min"'))
    readings = (survey / "readings.csv").read_text()
    (survey / "readings.csv").write_text(readings.replace("[mm]", "[psi]"))
    taps = "tap,chainage [m],chainage uncertainty [in],reading uncertainty [mbar]\nT1,0.5,0.25,5\nT2,1.5,,\nT3,2.5,,\n"
    (survey / "taps.csv").write_text(taps)
    result = run("check", survey)
    for text in (
        "  board  pressure gauge  line_temperature 59 ± 1 degF  uncertainty 0.02 psi",
        "Stated uncertainties: reading 0.15 kPa, chainage 0.7 mm, flow 2 L/min, temperature 0.2 degC",
        "u(reading), mbar  u(chainage), in\n",
        " 5                 0.25\n",
    ):
        assert text in result.stdout


def test_check_takes_several_surveys(survey, bad_survey):
    result = run("check", bad_survey, survey)
    assert result.exit_code == 3
    assert result.stderr.splitlines()[0] == f"{bad_survey}: 2 problems"
    assert result.stderr.splitlines()[-1] == f"{survey}: no problems"
    assert "Bench line (2026-05-06)" in result.stdout


def test_help_tells_exit_codes_and_formats():
    told = " ".join(run("--help").stdout.split())
    assert "Exit codes: 0 done" in told
    assert "2 wrong use, 3 the survey has problems, 4 output could not be written" in told
    assert "any of html, json, csv, svg, png, pdf, xlsx." in " ".join(run("reduce", "--help").stdout.split())


def test_a_terminal_without_the_signs_is_no_error(survey):
    title = (survey / "survey.toml").read_text().replace("Bench line", "Bench ε")
    (survey / "survey.toml").write_text(title, encoding="utf-8")
    code = f"import sys\nfrom gradeline.cli import main\nsys.argv = ['gradeline', 'check', {str(survey)!r}]\nmain()"
    done = python(code, encoding="cp1252", PYTHONIOENCODING="cp1252", PYTHONUTF8="0")
    assert done.returncode == 0, done.stderr
    assert done.stdout.startswith("Bench ? (2026-05-06)")
    assert "26.64 ± 0.03" in done.stdout


def test_check_tells_every_problem(bad_survey):
    result = run("check", bad_survey)
    assert result.exit_code == 3
    assert result.stdout == ""
    assert result.stderr.splitlines() == [
        f"{bad_survey}: 2 problems",
        "  survey.toml gauge.board.zero: '0.80' has no unit; give a unit such as m, mm, cm, ft, in",
        "  readings.csv row 3, T2 [mm]: '45x' is not a number; leave the cell empty if the tap was not read",
    ]


def test_a_folder_that_is_not_there_is_a_problem_of_the_survey(tmp_path):
    result = run("check", tmp_path / "nowhere")
    assert result.exit_code == 3
    assert "there is no such folder; give the folder that holds survey.toml" in result.stderr


def test_a_new_survey_asks_to_be_filled_in_and_is_accepted_then(tmp_path):
    folder = tmp_path / "my_pipe"
    assert run("new", folder).exit_code == 0
    for columns in ("run, tap, reading [mm]", "run, flow [L/s], temperature [degC]"):
        assert f"#     {columns}" in (folder / "survey.toml").read_text()
    asked = run("check", folder)
    assert asked.exit_code == 3
    assert "survey.toml reach[1].diameter: the value is still to be filled in" in asked.stderr
    assert "taps.csv row 2, chainage [m]: the value is still to be filled in" in asked.stderr
    lines = asked.stderr.splitlines()[1:]
    assert all("still to be filled in" in line for line in lines)
    texts = {name: (folder / name).read_text() for name in ("survey.toml", "taps.csv", "readings.csv")}
    values = sum(
        line.split(" #")[0].count('"?') for line in texts["survey.toml"].splitlines() if line[:1] != "#"
    ) + sum(texts[name].count(",?") for name in ("taps.csv", "readings.csv"))
    assert len(lines) == values

    toml = (
        texts["survey.toml"].replace('"? m"', '"4 m"').replace('"? mm"', '"20 mm"').replace('"?"', '"Mine"')
    )
    (folder / "survey.toml").write_text(toml)
    taps = "\n".join(
        line.replace("?,?", f"{place},0") for place, line in enumerate(texts["taps.csv"].splitlines())
    )
    (folder / "taps.csv").write_text(taps)
    (folder / "readings.csv").write_text(texts["readings.csv"].replace("?", "20"))
    result = run("check", folder)
    assert result.exit_code == 0, result.stderr
    assert result.stdout.startswith("Mine")


def test_every_optional_line_of_a_new_survey_is_sound(tmp_path):
    folder = tmp_path / "my_pipe"
    run("new", folder)
    toml = (folder / "survey.toml").read_text()
    toml = toml.replace('"? m"', '"4 m"').replace('"? mm"', '"20 mm"').replace('"?"', '"Mine"')
    unused = ("kind =", "density", "viscosity", "line_", "gravity")
    lines = []
    for line in toml.splitlines():
        bare = line.removeprefix("# ")
        optional = re.match(r"# (\[\[fitting\]\]|[a-z_]+ = )", line) and not bare.startswith(unused)
        lines.append(bare if optional else line)
    (folder / "survey.toml").write_text("\n".join(lines))
    assert sum(line.startswith("# ") and not line.startswith("#   ") for line in lines) < 30
    result = run("check", folder)
    assert not [line for line in result.stderr.splitlines() if "survey.toml" in line]


def test_new_leaves_a_filled_folder_alone(survey):
    before = sorted(survey.iterdir())
    result = run("new", survey)
    assert result.exit_code == 4
    assert result.stderr == f"{survey} exists already and is not empty; name a new folder\n"
    assert sorted(survey.iterdir()) == before


def test_reduce_passes_its_options_on(survey, rooms):
    result = run("reduce", survey)
    assert result.exit_code == 0, result.output
    assert result.stdout == "summary of Bench line\n"
    assert result.stderr == f"Written to {survey / 'reduction' / 'report.html'}\n"
    assert rooms.reduced == [
        (
            "Bench line",
            {"level": 0.95, "correct": "static", "keep_all": False, "exclude": (), "monte_carlo": True},
        )
    ]
    assert rooms.written == [
        ("Bench line", survey / "reduction", {"formats": DEFAULT_FORMATS, "overwrite": False, **SI_ON_A4})
    ]


def test_reduce_passes_every_option_on(survey, rooms, tmp_path):
    out = tmp_path / "out"
    result = run(
        *("reduce", survey, "--out", out, "--overwrite", "--level", "0.99", "--formats", "json,csv"),
        *("--units", "us", "--paper", "letter"),
        *("--correct", "none", "--keep-all", "--exclude", "T2", "--exclude", "3:T1", "--no-monte-carlo"),
    )
    assert result.exit_code == 0, result.output
    assert result.stderr == f"Written to {out}\n"
    assert rooms.reduced[0][1] == {
        "level": 0.99,
        "correct": "none",
        "keep_all": True,
        "exclude": ("T2", "3:T1"),
        "monte_carlo": False,
    }
    assert rooms.written[0][1:] == (
        out,
        {"formats": ("json", "csv"), "overwrite": True, "display": US_DISPLAY, "paper": "letter"},
    )


def test_one_bad_survey_does_not_stop_the_others(survey, bad_survey, rooms, tmp_path):
    result = run("reduce", bad_survey, survey, "--out", tmp_path / "out", "--jobs", "1")
    assert result.exit_code == 3
    assert [folder for _, folder, _ in rooms.written] == [tmp_path / "out" / "bench_line"]
    assert f"{bad_survey}: 2 problems" in result.stderr


def test_the_highest_exit_code_is_kept(survey, bad_survey, rooms):
    rooms.error = OutputError("the folder holds results already; give --overwrite")
    result = run("reduce", survey, bad_survey, "--jobs", "1")
    assert result.exit_code == 4
    assert "the folder holds results already; give --overwrite" in result.stderr
    assert f"{bad_survey}: 2 problems" in result.stderr


def test_what_cannot_be_reduced_is_a_problem_of_the_survey(survey, rooms):
    rooms.error = ReductionError("nothing is left to fit")
    result = run("reduce", survey)
    assert result.exit_code == 3
    assert result.stderr == f"{survey}: nothing is left to fit\n"


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("--level", "95"), "95 is no coverage; it lies between 0 and 1, such as 0.95"),
        (("--level", "1"), "1 is no coverage"),
        (("--level", "nan"), "nan is no coverage"),
        (("--formats", "html,docx"), "unknown format 'docx'; choose from html,json,csv,svg,png,pdf,xlsx"),
        (("--correct", "all"), "'all' is not one of 'static', 'offsets', 'none'"),
        (("--exclude", "T9"), "--exclude T9: there is no tap 'T9'; taps are T1, T2, T3"),
        (("--exclude", "9:T1"), "--exclude 9:T1: there is no run '9'; write --exclude RUN:TAP"),
        (("--colour",), "No such option: --colour"),
    ],
)
def test_wrong_use_is_told(survey, rooms, arguments, message):
    result = run("reduce", survey, *arguments)
    assert result.exit_code == 2
    assert message in " ".join(result.stderr.split())
    assert "Value error" not in result.stderr
    assert not rooms.written


def test_two_surveys_of_one_name_need_two_places(survey, tmp_path):
    result = run("reduce", survey, survey, "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert "two surveys are called 'bench_line'; reduce them to different --out" in " ".join(
        result.stderr.split()
    )


def test_an_unforeseen_error_is_one_line(survey, rooms, monkeypatch, capsys):
    rooms.error = ZeroDivisionError("float\ndivision")
    monkeypatch.setattr(sys, "argv", ["gradeline", "reduce", str(survey)])
    with pytest.raises(SystemExit) as stop:
        main()
    assert stop.value.code == 1
    told = capsys.readouterr().err
    assert told.startswith(
        "gradeline met an error that it does not know (ZeroDivisionError: float division). Please report it"
    )
    assert told.count("\n") == 1
    monkeypatch.setenv("GRADELINE_TRACEBACK", "1")
    with pytest.raises(ZeroDivisionError):
        main()


def test_the_package_names_its_interface():
    assert sorted(gradeline.__all__) == [
        "Comparison",
        "GradelineError",
        "Plan",
        "Prediction",
        "Reduction",
        "Survey",
        "compare",
        "plan",
        "predict",
        "read_plan",
        "read_survey",
        "reduce",
    ]
    assert dir(gradeline) == sorted(gradeline.__all__)
    assert gradeline.read_survey.__module__ == "gradeline.loader.read"
    with pytest.raises(AttributeError, match="has no attribute 'nothing'"):
        _ = gradeline.nothing


def test_a_table_of_heads_has_no_gauges_to_tell(tmp_path):
    table = tmp_path / "heads.csv"
    table.write_text("chainage [m],head [mm]\n1,300\n2,200\n3,100\n", encoding="utf-8")
    result = run("gauges", table)
    assert result.exit_code == 2
    assert "one table of heads has no gauges" in result.output
    assert "--diameter" not in result.output


def test_a_new_survey_tells_the_columns_of_a_differential_gauge(tmp_path):
    assert run("new", tmp_path / "fresh").exit_code == 0
    text = (tmp_path / "fresh" / "survey.toml").read_text(encoding="utf-8")
    for words in (
        "m1 [mm]",
        "m1 left [mm]",
        "positive where the head is higher",
        "need no gauge in taps.csv",
    ):
        assert words in text
