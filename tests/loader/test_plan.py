"""Surveys whose readings are still to be taken."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pytest

from gradeline.errors import SurveyError, UsageError
from gradeline.loader import read_plan, read_survey

DEMO = Path("data_demo")


@pytest.fixture
def unread(tmp_path: Path) -> Path:
    """A bench without readings."""
    folder = tmp_path / "bench"
    shutil.copytree(DEMO / "copper_bench", folder)
    (folder / "readings.csv").unlink()
    return folder


@pytest.mark.parametrize("name", ["copper_bench", "mercury_bench", "cast_main", "hydrant_main"])
def test_a_survey_with_readings_gives_the_same_plan_without_them(name: str, tmp_path: Path) -> None:
    folder = tmp_path / name
    shutil.copytree(DEMO / name, folder)
    whole = read_survey(folder)
    lines = (folder / "readings.csv").read_text().splitlines()
    heads = lines[0].split(",")
    labels = {one.label for one in whole.observations}
    taps = [n for n, head in enumerate(heads) if any(head.startswith(f"{name} ") for name in labels)]
    kept = [
        ",".join("" if n in taps else cell for n, cell in enumerate(line.split(","))) for line in lines[1:]
    ]
    (folder / "readings.csv").write_text("\n".join([lines[0], *kept]) + "\n")
    found = read_plan(folder)
    assert found.readings.isna().all(axis=None)
    assert found.observations == whole.observations
    assert found.runs["run"].tolist() == whole.runs["run"].tolist()
    np.testing.assert_array_equal(found.runs["flow"], whole.runs["flow"])
    with pytest.raises(SurveyError, match="readings"):
        read_survey(folder)


def test_flows_may_be_given(unread: Path) -> None:
    found = read_plan(unread, flows="0, 0.25, 1.0 L/s", temperature="18 degC")
    assert found.runs["run"].tolist() == ["static", "1", "2"]
    assert found.runs["flow"].tolist() == pytest.approx([0.0, 2.5e-4, 1e-3])
    assert found.runs["temperature"].tolist() == pytest.approx([291.15] * 3)
    assert [one.label for one in found.observations] == [f"T{n}" for n in range(1, 11)]


def test_a_range_is_even_on_a_log_axis(unread: Path) -> None:
    found = read_plan(unread, flows="0.1 L/s to 1.6 L/s", runs=5)
    assert found.runs["flow"].tolist() == pytest.approx([1e-4, 2e-4, 4e-4, 8e-4, 1.6e-3], rel=1e-3)
    assert any("temperature is not given: it is taken as 15 degC" in text for text in found.assumptions)


def test_the_way_of_measuring_the_flow_is_left_aside_where_flows_are_given() -> None:
    found = read_plan(DEMO / "mercury_bench", flows="0.05 to 0.2 L/s", runs=3)
    assert found.runs["flow"].notna().all()
    assert any("[flow] is left aside" in text for text in found.assumptions)


def test_runs_listed_apart_are_planned(unread: Path) -> None:
    (unread / "runs.csv").write_text("run,flow [L/s],temperature [degC]\na,0.3,17\nb,0.9,\n")
    (unread / "readings.csv").write_text("run,tap,reading [mm]\na,T1,900\n")
    found = read_plan(unread)
    assert found.runs["run"].tolist() == ["a", "b"]
    assert found.runs["temperature"].tolist() == pytest.approx([290.15, 288.15])
    assert found.readings.shape == (2, 10)


@pytest.mark.parametrize(
    ("flows", "message"),
    [
        (None, "there are no flows to plan for; give --flows"),
        ("2 to 1 L/s", "a range goes from a smaller flow above 0 to a greater one"),
        ("0 L/s", "nothing flows; give at least one flow above 0"),
        ("-1, 2 L/s", "a flow is below zero"),
        ("1 kg", "the unit 'kg' is a mass, not a flow"),
        ("1 +/- 0.1 L/s", "has an uncertainty; state it for all runs as flow and flow_scale"),
    ],
)
def test_flows_that_cannot_be(unread: Path, flows: str | None, message: str) -> None:
    with pytest.raises(UsageError) as caught:
        read_plan(unread, flows=flows)
    assert message in str(caught.value)


def test_a_range_takes_two_runs_at_least(unread: Path) -> None:
    with pytest.raises(UsageError, match="--runs 1: a range takes 2 to 1000 runs"):
        read_plan(unread, flows="1 to 2 L/s", runs=1)


def test_a_temperature_that_is_none(unread: Path) -> None:
    with pytest.raises(UsageError, match="--temperature '18 L/s'"):
        read_plan(unread, flows="1 L/s", temperature="18 L/s")


def test_problems_of_the_line_are_told(unread: Path) -> None:
    text = (unread / "survey.toml").read_text()
    (unread / "survey.toml").write_text(text.replace('to = "5.5 m"', 'to = "5.5"'))
    with pytest.raises(SurveyError, match=r"survey.toml reach\[1\].to"):
        read_plan(unread, flows="1 L/s")


def test_a_table_of_heads_has_no_gauges(tmp_path: Path) -> None:
    table = tmp_path / "heads.csv"
    table.write_text("chainage [m],head [mm]\n0,100\n1,90\n")
    with pytest.raises(UsageError, match="one table of heads has no gauges to plan with"):
        read_plan(table, flows="1 L/s")


def test_no_such_folder() -> None:
    with pytest.raises(SurveyError, match="there is no such folder"):
        read_plan("no such folder", flows="1 L/s")
