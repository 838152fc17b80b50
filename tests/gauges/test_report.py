"""Pages and command line of surveys without a level, and of gauges that read two taps."""

from __future__ import annotations

import dataclasses
import json

import numpy as np
import pytest
from matplotlib.figure import Figure
from typer.testing import CliRunner

import gradeline
from gradeline.cli.app import app
from gradeline.quantities.printing import SI_DISPLAY
from gradeline.report.figures import draw_grade_lines, draw_pipe, pictures
from gradeline.report.figures.differences import head_axis
from gradeline.report.inputs import gauge_table
from tests.gauges.conftest import AIR, CHAINAGE, NAMES, RHO, heads
from tests.gauges.test_reduction import ENDS, FALL, LEGS, MERCURY, UTUBE

HEADS = heads()
DEFLECTION = FALL * RHO / (MERCURY - RHO)


def run(*arguments):
    return CliRunner().invoke(app, [str(each) for each in arguments])


def surveys(bench, which):
    if which == "u-tube":
        return bench(UTUBE, {"m1 [mm]": 1000 * DEFLECTION}, ENDS)
    if which == "compound":
        return bench(LEGS, {"c1 a [m]": -1.0 - DEFLECTION / 2, "c1 b [m]": -1.0 + DEFLECTION / 2}, ENDS)
    columns = {f"{name} [m]": HEADS[:, t] / (1 - AIR / RHO) for t, name in enumerate(NAMES)}
    if which == "floating":
        board = '[gauge.board]\nkind = "closed multitube manometer"\nzero = "0 m"\n'
        return bench(board, columns, dict.fromkeys(NAMES, ("board", 0.3)))
    board = UTUBE + '[gauge.board]\nkind = "piezometer"\nzero = "0 m"\nuncertainty = "1 mm"\n'
    columns["m1 [mm]"] = 1000 * DEFLECTION
    return bench(board, columns, dict.fromkeys(NAMES, ("board", 0.0)))


@pytest.mark.parametrize("which", ["u-tube", "compound", "floating", "beside a board"])
def test_a_report_is_written(bench, which):
    folder = surveys(bench, which)
    result = run("reduce", folder)
    assert result.exit_code == 0, result.output
    table = json.loads((folder / "reduction" / "reduction.json").read_text("utf-8"))
    assert len(table["heads"]) == 6 * {"u-tube": 1, "compound": 1, "floating": 6, "beside a board": 7}[which]
    level = any("no absolute head can be had" in text for text in table["cautions"])
    assert level == (which != "beside a board")
    assert any("Mercury is poisonous" in text for text in table["cautions"]) == (which != "floating")
    assert run("check", folder).exit_code == 0


def test_gauges_tells_range_resolution_and_fluid(bench):
    gauge = UTUBE + 'range = "0 to 0.6 m"\nresolution = "1 mm"\n'
    result = run("gauges", bench(gauge, {"m1 [mm]": 1000 * DEFLECTION}, ENDS))
    assert result.exit_code == 0, result.output
    # 0.6 m of mercury under water is 7.5 m of water (13.56 - 1), 1 mm is 12.6 mm
    factor = MERCURY / RHO - 1
    assert f"shows        {-0.6 * factor:.4g} m to {0.6 * factor:.4g} m" in result.output
    assert f"resolution   {factor:.3g} mm" in result.output
    least, most = np.sort(FALL[1:])[[0, -1]]
    assert f"differences  {1000 * least:.3g} mm to {1000 * most:.3g} mm" in result.output
    # 0.66 m of water is beyond 0.6 m of board with air above, and 52 mm of mercury
    assert "suits        mercury below, on a board of 0.6 m" in result.output


def test_gauges_of_a_bad_survey_are_its_problems(tmp_path):
    result = run("gauges", tmp_path / "nowhere")
    assert result.exit_code == 3
    assert "there is no such folder" in result.output


def reduced(folder):
    return gradeline.reduce(gradeline.read_survey(folder))


def two_tubes(bench):
    """U-tubes over the first and the second half of the line; at rest in a run of their own."""
    halves = np.column_stack([HEADS[:, 0] - HEADS[:, 3], HEADS[:, 3] - HEADS[:, 5]]) * RHO / (MERCURY - RHO)
    gauges = "".join(
        UTUBE.replace("gauge.m1", f"gauge.m{n}").replace('"T1"', f'"{up}"').replace('"T6"', f'"{down}"')
        for n, (up, down) in enumerate([("T1", "T4"), ("T4", "T6")], 1)
    )
    return bench(
        gauges,
        {f"m{n + 1} [mm]": 1000 * halves[:, n] for n in range(2)},
        dict.fromkeys(("T1", "T4", "T6"), ("", 0.0)),
    )


def test_differences_are_marks_below_the_fitted_head_upstream(bench):
    reduction = reduced(two_tubes(bench))
    run_name = reduction.runs["run"].iloc[-1]
    heads = reduction.heads.copy()
    mine = (heads["run"] == run_name).to_numpy(bool)
    bad = mine & (heads["gauge"] == "m2").to_numpy(bool)
    heads.loc[bad, "flag"] = "outlier"
    heads.loc[bad, "reason"] = "as if"
    ax = Figure().add_subplot()
    drawn = draw_grade_lines(ax, dataclasses.replace(reduction, heads=heads), run_name)
    lines = reduction.grade_lines[reduction.grade_lines["run"] == run_name]
    level = dict(zip(lines["chainage"], lines["piezometric_head"], strict=True))
    where = dict(zip(reduction.layout["name"], reduction.layout["chainage"], strict=True))
    falls = heads["head"][mine].to_numpy(float)
    assert drawn.used is None
    assert drawn.falls.get_xdata() == pytest.approx([where["T4"], where["T6"]])
    assert drawn.falls.get_ydata() == pytest.approx(
        [level[where["T1"]] - falls[0], level[where["T4"]] - falls[1]]
    )
    assert drawn.flagged.get_xdata() == pytest.approx([where["T6"]])
    assert [label.get_text() for label in drawn.labels] == ["m2: as if"]
    assert ax.get_ylabel() == "head relative to the line's start (m)"


def test_differences_beside_a_board_are_steps_from_the_fitted_head_upstream(bench):
    reduction = reduced(surveys(bench, "beside a board"))
    run_name = reduction.runs["run"].iloc[-1]
    heads = reduction.heads.copy()
    mine = (heads["run"] == run_name).to_numpy(bool)
    bad = mine & (heads["gauge"] == "m1").to_numpy(bool)
    heads.loc[bad, "flag"] = "outlier"
    heads.loc[bad, "used"] = False
    level = np.interp(
        [CHAINAGE[0]],
        *(
            reduction.grade_lines.loc[reduction.grade_lines["run"] == run_name, name]
            for name in ("chainage", "piezometric_head")
        ),
    )[0]
    foot = level - float(heads.loc[bad, "head"].iloc[0])
    for table, left_out in ((reduction.heads, False), (heads, True)):
        ax = Figure().add_subplot()
        drawn = draw_grade_lines(ax, dataclasses.replace(reduction, heads=table), run_name)
        assert len(drawn.used.get_xdata()) == len(NAMES)
        (step,) = drawn.steps.get_segments()
        assert step == pytest.approx(
            np.array([(CHAINAGE[0], level), (CHAINAGE[-1], level), (CHAINAGE[-1], foot)])
        )
        mark = drawn.left_out if left_out else drawn.falls
        assert mark.get_marker() == "D"
        assert (mark.get_markerfacecolor() == "white") == left_out
        assert mark.get_xydata() == pytest.approx(np.array([(CHAINAGE[-1], foot)]))
        assert (drawn.flagged is not None) == left_out
        words = {text.get_text() for text in ax.get_legend().get_texts()}
        assert ("fall from the tap upstream" in words) != left_out
        assert ax.get_ylabel() == "head above datum (m)"


def test_a_static_run_without_a_level_has_no_grade_lines(bench):
    reduction = reduced(two_tubes(bench))
    static = set(reduction.runs["run"][reduction.runs["regime"] == "static"])
    titles = [one.title for one in pictures(reduction, png=False) if one.group == "grade lines"]
    assert len(static) == 1
    assert len(titles) == reduction.runs["run"].nunique() - 1
    assert not any("no flow" in title for title in titles)


def test_the_pipe_is_drawn_from_tap_to_tap_without_a_level(bench):
    pipe = draw_pipe(Figure().add_subplot(), reduced(two_tubes(bench)))
    assert pipe.axis.get_xdata() == pytest.approx(pipe.taps.get_xdata())
    assert pipe.axis.get_ydata() == pytest.approx([0.0, 0.0, 0.0])


@pytest.mark.parametrize(
    ("which", "words"),
    [("floating", "head above a free level (m)"), ("beside a board", "head above datum (m)")],
)
def test_heads_stand_above_datum_only_where_a_gauge_tells_it(bench, which, words):
    assert head_axis(reduced(surveys(bench, which)), SI_DISPLAY) == words


def test_assumptions_of_several_gauges_are_told_once(bench):
    assumptions = gradeline.read_survey(two_tubes(bench)).assumptions
    limbs = [text for text in assumptions if text.startswith("The limbs of")]
    assert limbs == [
        "The limbs of gauges 'm1' and 'm2' are taken as of one bore, so that their capillary rises cancel."
    ]


def test_the_range_of_a_gauge_is_in_its_table(bench):
    gauge = UTUBE + 'range = "0 to 0.6 m"\n'
    table = gauge_table(reduced(bench(gauge, {"m1 [mm]": 1000 * DEFLECTION}, ENDS)))
    cells = dict(zip(table.heads, table.rows[0], strict=True))
    assert (cells["range, from"], cells["range, to"]) == ("0 mm", "600 mm")
