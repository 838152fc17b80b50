"""A plan as text and as figures: what is drawn, in which units, and what the marks say."""

from __future__ import annotations

from dataclasses import replace

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.figure import Figure

import gradeline
from gradeline.planning import Plan
from gradeline.quantities.printing import DISPLAYS
from gradeline.report.figures.plan import draw_deflections, draw_expected_lines, plan_figures
from gradeline.report.plan import plan_summary
from gradeline.report.plan_output import plan_record

mpl.use("agg")


@pytest.fixture(scope="module")
def board() -> Plan:
    """A board of 1 m: the fastest runs do not fit on it."""
    survey = gradeline.read_plan("data_demo/copper_bench")
    short = replace(survey.gauges[0], span=(0.0, 1.0))
    return gradeline.plan(replace(survey, gauges=(short,)), roughness=1.5e-6)


@pytest.fixture(scope="module")
def pairs() -> Plan:
    return gradeline.plan(gradeline.read_plan("data_demo/mercury_bench"))


def test_grade_lines_stand_on_the_board(board: Plan) -> None:
    ax = Figure().add_subplot()
    drawn = draw_expected_lines(ax, board)
    assert ax.get_xlabel() == "chainage x (m)"
    assert ax.get_ylabel() == "piezometric head h (m)"
    assert set(drawn.lines) == set(board.runs["run"])
    fastest = drawn.lines["9"]
    # The line passes through the heads of its columns.
    mine = board.columns[(board.columns["run"] == "9").to_numpy(bool)]
    line = np.interp(mine["chainage"], *np.asarray(fastest.get_data(), dtype=float))
    assert line == pytest.approx(mine["head"].to_numpy(float), abs=1e-3)
    (shown,) = drawn.boards
    heights = shown.get_datalim(ax.transData).intervaly
    assert heights == pytest.approx([0.75, 1.75], abs=0.003)  # zero of the board at 0.750 m
    assert drawn.unread is not None
    assert len(drawn.unread.get_xdata()) == (~board.columns["on_scale"].to_numpy(bool)).sum()


def test_units_of_the_reader(board: Plan) -> None:
    ax = Figure().add_subplot()
    drawn = draw_expected_lines(ax, board, display=DISPLAYS["us"])
    assert ax.get_xlabel() == "chainage x (ft)"
    assert float(np.max(drawn.lines["9"].get_xdata())) == pytest.approx(5.5 / 0.3048)


def test_deflections_against_their_scales(pairs: Plan) -> None:
    ax = Figure().add_subplot()
    drawn = draw_deflections(ax, pairs)
    assert ax.get_ylabel() == "deflection (mm)"
    assert ax.get_xlabel() == "flow Q (L/s)"
    assert set(drawn.lines) == {"m1, m2, m3", "a1, a2, a3"}
    assert sorted(float(end.get_ydata()[0]) for end in drawn.ends) == pytest.approx([400.0, 600.0])
    assert set(plan_figures(pairs)) == {"expected_grade_lines", "expected_deflections"}


def test_marks_of_what_cannot_be_read(board: Plan) -> None:
    text = plan_summary(board)
    assert "! beyond the scale: cannot be read" in text
    assert max(map(len, text.splitlines())) <= 100
    assert "Piezometric head at T10: planned, and between which all columns can be read" in text
    assert (
        f"The greatest flow at which all columns can be read is {1000 * board.greatest_flow:.3g} L/s." in text
    )


def test_the_record_holds_no_nan(board: Plan) -> None:
    def values(value: object) -> list[object]:
        if isinstance(value, dict):
            return [each for one in value.values() for each in values(one)]
        return [each for one in value for each in values(one)] if isinstance(value, list) else [value]

    flat = values(plan_record(board))
    assert not any(isinstance(one, float) and not np.isfinite(one) for one in flat)
    assert {type(one) for one in flat} <= {str, float, int, bool, type(None)}
