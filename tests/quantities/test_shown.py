"""How results show themselves in a notebook."""

from __future__ import annotations

import dataclasses
import subprocess
import sys
from html.parser import HTMLParser

import pandas as pd
import pytest

import gradeline
from gradeline.quantities.shown import MOST_ROWS, Shown, counted, shown

HOSTILE = "<script>alert('1')</script> & \"Co\""


class Read(HTMLParser):
    """What a browser would make of a fragment: its elements, its text, the rows of its table."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.elements: list[str] = []
        self.open: list[str] = []
        self.text = ""
        self.rows: list[list[str]] = []
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        assert attrs in ([], [("class", "dataframe")])
        self.elements.append(tag)
        if tag == "tr":
            self.rows.append([])
        if tag in ("td", "th"):
            self.rows[-1].append("")
        if tag != "br":
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.text += data
        if self.open[-1] in ("td", "th"):
            self.rows[-1][-1] += data


@pytest.fixture(scope="module")
def bench():
    return gradeline.read_survey("data_demo/copper_bench")


@pytest.fixture(scope="module")
def reduction(bench):
    return gradeline.reduce(bench, monte_carlo=False)


@pytest.fixture(scope="module")
def results(bench, reduction):
    """One of each that shows itself, its title hostile where it has one."""
    survey = dataclasses.replace(bench, title=HOSTILE)
    reduced = dataclasses.replace(reduction, survey={**reduction.survey, "title": HOSTILE})
    prediction = gradeline.predict(
        reduction, flow="1 L/s", available_head="2 m", new_pipe="0.0015 mm", temperature="15 degC"
    )
    plan = gradeline.plan(
        gradeline.read_plan("data_demo/copper_bench", flows="0.4 to 1.4 L/s", runs=3), roughness=1.5e-6
    )
    return {
        "Survey": survey,
        "Reduction": reduced,
        "Prediction": dataclasses.replace(prediction, title=HOSTILE),
        "Plan": dataclasses.replace(plan, title=HOSTILE),
        "Comparison": gradeline.compare([reduction, reduction], labels=[HOSTILE, "June"]),
    }


@pytest.mark.parametrize("kind", ["Survey", "Reduction", "Prediction", "Plan", "Comparison"])
def test_html_in_a_title_is_text(results, kind):
    assert type(results[kind]).__name__ == kind
    read = Read(results[kind]._repr_html_())
    assert set(read.elements) <= {"p", "strong", "br", "table", "thead", "tbody", "tr", "th", "td"}
    assert HOSTILE in read.text


def test_a_survey_shows_its_readings(bench):
    rows = Read(bench._repr_html_()).rows
    assert rows[0] == ["run", "flow (L/s)", "t (°C)", *(f"T{n} (mm)" for n in range(1, 11))]
    # data_demo/copper_bench/readings.csv, its first rows
    assert rows[1][:4] == ["static", "0", "15.10", "658.0"]
    assert rows[2][:4] == ["1", "0.03200", "15.20", "644.0"]
    assert len(rows) == 11


@pytest.mark.parametrize("folder", ["cast_main", "hydrant_main", "mercury_bench"])
def test_every_kind_of_gauge_is_shown_in_units_of_its_own(folder):
    survey = gradeline.read_survey(f"data_demo/{folder}")
    heads = Read(survey._repr_html_()).rows[0]
    unit = "mm" if folder == "mercury_bench" else "kPa"
    assert heads[-len(survey.observations) :] == [f"{one.label} ({unit})" for one in survey.observations]


def test_a_reduction_shows_runs_and_walls(reduction):
    read = Read(reduction._repr_html_())
    assert "9 flowing runs, 1 flag" in read.text
    wall = reduction.walls.iloc[0]
    assert f"drawn copper: roughness 95 % interval 0 to {1e3 * wall['roughness_high']:.4f} mm" in read.text
    assert read.rows[0] == ["run", "flow (L/s)", "Re", "regime", "S (mm/m)", "f"]
    assert read.rows[1] == ["static", "0", "0", "static", "–", "–"]
    last = reduction.runs.iloc[-1]
    value, u = (float(part) for part in read.rows[-1][-1].split(" ± "))
    assert value == pytest.approx(last["friction_factor"], abs=5e-6)
    assert u == pytest.approx(last["friction_factor_u"], rel=0.05)


def test_a_prediction_shows_intervals_and_a_new_pipe(results):
    prediction = results["Prediction"]
    read = Read(prediction._repr_html_())
    row = dict(zip(*read.rows, strict=True))
    assert row["flow (L/s)"] == "1.000"
    low, high = (float(end) for end in read.rows[1][2].split(" to "))
    flows = prediction.flows.iloc[0]
    assert (low, high) == pytest.approx((flows["head_loss_low"], flows["head_loss_high"]), rel=1e-3)
    assert float(row["new pipe (m)"]) == pytest.approx(prediction.new_pipe["head_loss_new"].iloc[0], rel=1e-3)
    assert "under 2.000 m it carries" in read.text


def test_a_capacity_that_is_not_told_says_why(results):
    prediction = results["Prediction"]
    capacity = prediction.capacity.assign(flow=None, flow_low=None, flow_high=None, reason="no flow does")
    shown_of = dataclasses.replace(prediction, capacity=capacity.astype({"flow": float}))._repr_html_()
    assert "under 2.000 m it carries – (no flow does)" in Read(shown_of).text


def test_a_prediction_without_a_new_pipe_has_no_column_for_it(reduction):
    heads = Read(gradeline.predict(reduction, flow=[0.001, 0.0012])._repr_html_()).rows[0]
    assert heads == ["flow (L/s)", "head loss (m)", "interval (m)", "beyond the tested Re"]


def test_a_plan_shows_expected_runs(results):
    read = Read(results["Plan"]._repr_html_())
    assert "3 flowing runs, 10 taps" in read.text
    assert "drawn copper: roughness assumed 0.00150 mm, 95 % interval about 0 to " in read.text
    assert [row[1] for row in read.rows[1:]] == ["0.4000", "0.7480", "1.400"]  # 0.748² = 0.4 × 1.4


def test_a_comparison_shows_surveys_side_by_side(results):
    read = Read(results["Comparison"]._repr_html_())
    assert "drawn copper: no change beyond chance" in read.text
    first, second = (dict(zip(read.rows[0], row, strict=True)) for row in read.rows[1:])
    assert (first["survey"], second["survey"]) == (HOSTILE, "June")
    assert (first["changed"], second["changed"]) == ("", "no")


def test_rows_beyond_the_most_are_counted():
    table = pd.DataFrame({"run": [str(n) for n in range(MOST_ROWS + 7)], "empty": None})
    read = Read(shown("Many", [""], table, [Shown("run", "run"), Shown("nothing", "empty")]))
    assert len(read.rows) == MOST_ROWS + 1
    assert read.rows[0] == ["run"]
    assert read.text.endswith("and 7 more rows")
    assert "br" not in read.elements


def test_a_table_without_rows_is_left_out():
    read = Read(shown("Nothing", ["said"], pd.DataFrame({"run": []}), [Shown("run", "run")]))
    assert read.elements == ["p", "strong", "br"]


def test_counts_speak_in_the_singular_and_leave_out_none():
    assert counted((1, "flag"), (0, "run"), (2, "caution")) == "1 flag, 2 cautions"


def test_it_loads_nothing_heavy():
    code = (
        "import sys, gradeline, gradeline.quantities.shown\n"
        "print(sorted(set(sys.modules) & {'numpy', 'pandas', 'scipy', 'matplotlib', 'pint', 'jinja2'}))"
    )
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code], capture_output=True, text=True, check=True
    )
    assert done.stdout == "[]\n"
