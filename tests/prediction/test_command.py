"""`gradeline predict`: what it prints, writes and refuses."""

from __future__ import annotations

import json

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.figure import Figure
from typer.testing import CliRunner

from gradeline.cli.app import app
from gradeline.prediction import predict
from gradeline.quantities.printing import US_DISPLAY
from gradeline.reduction import reduce
from gradeline.report import write
from gradeline.report.figures.prediction import _left_out, draw_head_loss, draw_predicted_lines
from gradeline.report.prediction import prediction_text
from tests.prediction.test_predict import survey


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments], prog_name="gradeline")


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    found, _ = survey(sigma=1e-3, draw=True, seed=4)
    target = tmp_path_factory.mktemp("reduced") / "out"
    write(reduce(found, monte_carlo=False), target, formats=("json",))
    return target


def test_it_prints_the_answer_and_nothing_else(folder) -> None:
    done = run("predict", folder, "--flow", "0.8 L/s", "--available-head", "2 m")
    assert done.exit_code == 0
    assert done.stderr == ""
    lines = done.stdout.splitlines()
    assert lines[0] == "Prediction: Simulated bench"
    assert lines[3].startswith("  - Under 2.000 m the line carries 1.")
    assert "(95 %: 1." in lines[3]
    assert "Head loss of the line" in lines
    assert "Grade lines" in lines
    assert max(map(len, lines)) <= 100
    assert (
        "  - The flow of a prediction is the true flow: errors of the flow meter and of the readings act in"
        in lines
    )


def test_json_holds_the_whole_result_in_si(folder) -> None:
    done = run("predict", folder, "--flow", "0.5 to 1 L/s", "--steps", "3", "--json")
    found = json.loads(done.stdout, parse_constant=pytest.fail)
    assert [row["flow"] for row in found["flows"]] == [0.0005, 0.00075, 0.001]
    assert found["capacity"] == []
    assert found["level"] == 0.95


def test_a_table_of_flows(folder, tmp_path) -> None:
    table = tmp_path / "flows.csv"
    table.write_text("day;flow [L/min]\nMonday;30\nTuesday;48\n")
    done = run("predict", folder, "--flows", table, "--json")
    assert [row["flow"] for row in json.loads(done.stdout)["flows"]] == pytest.approx([5e-4, 8e-4])
    table.write_text("flow [L/s]\n0.5\nhalf\n-1\n")
    done = run("predict", folder, "--flows", table)
    assert done.exit_code == 3
    assert done.stdout == ""
    assert "  flows.csv row 3, flow [L/s]: 'half' is not a number" in done.stderr
    assert "  flows.csv row 4, flow [L/s]: a flow is above 0; found '-1'" in done.stderr
    table.write_text("flow [L/s]\n0.5(1)\n")
    done = run("predict", folder, "--flows", table)
    assert (
        "flows.csv row 2, flow [L/s]: give the flow alone, without an uncertainty; found '0.5(1)'"
        in done.stderr
    )
    table.write_text("Q\n0.5\n")
    done = run("predict", folder, "--flows", table)
    assert (
        "flows.csv row 1: takes one column of flows with its unit in the heading, such as flow [L/s]; found 'Q'"
        in done.stderr
    )
    table.write_text("flow [L/s]\n")
    assert "the table holds no flow; add one a row" in run("predict", folder, "--flows", table).stderr


@pytest.mark.parametrize(
    ("arguments", "code", "said"),
    [
        ((), 2, "nothing to predict: give a flow, such as '12 L/s'"),
        (
            ("--flow", "1 L/s", "--flows", "x.csv"),
            2,
            "--flow and --flows: both say at which flows; give one of them",
        ),
        (("--flows", "missing.csv"), 2, "missing.csv cannot be read (No such file or directory)"),
        (
            ("--flow", "1 L/s", "--wall", "wall"),
            2,
            "--wall wall: takes a name and a value; write it as --wall NAME=0.15mm",
        ),
        (("--flow", "1 L/s", "--wall", "wall=1 s"), 2, "wall wall: the unit 's' is a time, not a length"),
    ],
)
def test_wrong_use(folder, arguments, code, said) -> None:
    done = run("predict", folder, *arguments)
    assert done.exit_code == code
    assert said in done.stderr
    assert done.stdout == ""


def test_no_reduction_is_told(tmp_path) -> None:
    done = run("predict", tmp_path / "none", "--flow", "1 L/s")
    assert done.exit_code == 3
    assert (
        "none does not exist; give the folder that gradeline reduce wrote, or its reduction.json"
        in done.stderr
    )


def test_out_holds_tables_record_and_figures(folder, tmp_path) -> None:
    out = tmp_path / "deep" / "prediction"
    asked = ("predict", folder, "--flow", "0.5 to 1 L/s", "--new-roughness", "drawn tubing", "--out", out)
    done = run(*asked)
    assert done.exit_code == 0
    assert done.stderr == f"Written to {out}\n"
    names = {path.name for path in out.iterdir()}
    assert names == {
        "prediction.json",
        "flows.csv",
        "reaches.csv",
        "grade_lines.csv",
        "new_pipe.csv",
        *(f"{figure}.{kind}" for figure in ("grade_lines", "head_loss") for kind in ("svg", "png")),
    }
    again = run(*asked)
    assert again.exit_code == 4
    assert "is not empty (it holds flows.csv)" in again.stderr
    first = (out / "grade_lines.svg").read_bytes()
    assert run(*asked, "--overwrite").exit_code == 0
    assert (out / "grade_lines.svg").read_bytes() == first
    (out / "notes.txt").write_text("mine")
    foreign = run(*asked, "--overwrite")
    assert foreign.exit_code == 4
    assert "holds notes.txt, which is no part of a prediction, so nothing was replaced" in foreign.stderr
    assert (out / "notes.txt").read_text() == "mine"
    assert not [path for path in out.parent.iterdir() if path != out]


def test_us_units_in_text_and_figures(folder) -> None:
    text = prediction_text(predict(folder, flow="0.5 to 1 L/s"), US_DISPLAY)
    assert "(ft)" in text
    assert "Water at 59" in text
    assert " m)" not in text


def test_faults_of_the_flows_are_headed_by_their_file(folder, tmp_path) -> None:
    table = tmp_path / "flows.csv"
    table.write_text("flow [L/s],note\n-3,a\nx,b\n")
    done = run("predict", folder, "--flows", table)
    assert done.exit_code == 3
    assert done.stderr.splitlines() == [
        f"{table}: 2 problems",
        "  flows.csv row 2, flow [L/s]: a flow is above 0; found '-3'",
        "  flows.csv row 3, flow [L/s]: 'x' is not a number",
    ]


def test_a_decimal_comma_where_semicolons_separate(folder, tmp_path) -> None:
    table = tmp_path / "flows.csv"
    table.write_text("flow [L/s];note\n0,5;a\n1;b\n")
    done = run("predict", folder, "--flows", table, "--json")
    assert [row["flow"] for row in json.loads(done.stdout)["flows"]] == [0.0005, 0.001]


def test_a_wide_table_of_a_pump_is_cut_nowhere(folder) -> None:
    told = run("predict", folder, "--flow", "0.1 to 0.6 L/s", "--static-head", "2 m", "--units", "us").stdout
    assert "…" not in told
    assert max(map(len, told.splitlines())) <= 100
    # 745.7 W a horsepower (NIST SP 811, appendix B.8)
    row = predict(folder, flow="0.6 L/s", static_head="2 m").flows.iloc[0]
    assert f"{row['pump_power'] / 745.69987:.7f}"[:6] in told
    assert "(hp)" in told


def test_more_flows_than_a_figure_holds_are_said(folder) -> None:
    found = predict(folder, flow="0.3 to 1.5 L/s", steps=12)
    with mpl.rc_context():
        ax = Figure().add_subplot()
        drawn = draw_predicted_lines(ax, found)
    assert len(drawn.hgl) == 8
    assert _left_out(found) == ", 8 of 12 flows"
    six = predict(folder, flow="0.3 to 1.5 L/s", steps=6)
    assert _left_out(six) == ""


def test_the_figures_hold_the_tables(folder) -> None:
    found = predict(folder, flow="0.5 to 1 L/s", steps=3, new_pipe="0.0015 mm")
    with mpl.rc_context():
        ax = Figure().add_subplot()
        drawn = draw_predicted_lines(ax, found)
        rows = found.grade_lines[found.grade_lines["flow"] == 0.001]
        np.testing.assert_allclose(drawn.hgl[2].get_ydata(), rows["piezometric_head"])
        np.testing.assert_allclose(drawn.egl[2].get_xdata(), rows["chainage"])
        band = drawn.bands[2].get_paths()[0].vertices[:, 1]
        assert band.min() == pytest.approx(rows["piezometric_head_low"].min())
        assert band.max() == pytest.approx(rows["piezometric_head_high"].max())
        band = drawn.egl_bands[2].get_paths()[0].vertices[:, 1]
        assert band.min() == pytest.approx(rows["energy_head_low"].min())
        assert band.max() == pytest.approx(rows["energy_head_high"].max())
        assert ax.get_xlabel() == "chainage x (m)"
        assert ax.get_ylabel() == "head above datum (m)"
        labels = [text.get_text() for text in ax.get_legend().get_texts()]
        assert labels == [
            "HGL",
            "EGL",
            "95 % band of the HGL",
            "95 % band of the EGL",
            "pipe's axis",
        ]
        ax = Figure().add_subplot()
        loss = draw_head_loss(ax, found, display=US_DISPLAY)
        np.testing.assert_allclose(loss.line.get_ydata(), found.flows["head_loss"] / 0.3048)
        np.testing.assert_allclose(loss.new.get_ydata(), found.new_pipe["head_loss_new"] / 0.3048)
        assert ax.get_ylabel() == "head loss of the line (ft)"


def test_one_band_stands_for_both_lines_where_the_velocity_head_is_nothing(folder) -> None:
    found = predict(folder, flow="1 L/s")
    lines = found.grade_lines
    # Friction a thousandfold: the velocity head, the distance of the lines, stays.
    ends = ("", "_low", "_high")
    head = lines["energy_head"] - lines["piezometric_head"]
    for end in ends:
        lines[f"piezometric_head{end}"] = 1000 * lines[f"piezometric_head{end}"]
        lines[f"energy_head{end}"] = lines[f"piezometric_head{end}"] + head
    with mpl.rc_context():
        ax = Figure().add_subplot()
        drawn = draw_predicted_lines(ax, found)
        assert drawn.egl_bands == ()
        labels = [text.get_text() for text in ax.get_legend().get_texts()]
        assert labels[1:3] == ["EGL", "95 % band of both lines"]
