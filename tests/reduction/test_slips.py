"""Slips of the pen in surveys as they lie on disk: what is said, in the unit of the file, and where it stands."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import gradeline
from gradeline.reduction.written import column_of, flow_column, limb_columns
from gradeline.report.page import page
from gradeline.report.sentences import summarise
from gradeline.report.slips import slip_table
from gradeline.report.tables import flag_table
from gradeline.report.terminal import terminal_summary
from tests.simulate.surveys import NominalReach, make_survey

LINE = """
[survey]
title = "A short line"
[fluid]
name = "water"
[[reach]]
name = "pipe"
from = "0 m"
to = "5.5 m"
diameter = "26.6 mm +/- 0.03 mm"
wall = "w"
"""
BOARD = '[gauge.board]\nkind = "piezometer"\nzero = "0.8 m"\n'
U_TUBE = '[gauge.dp]\nkind = "u-tube"\nupstream = "A"\ndownstream = "B"\ngauge_fluid = "mercury"\n'
FLOWS = np.round(np.linspace(0.3, 1.4, 10), 3)
FLOWS[7] = 1.163
REACH = NominalReach(0.0, 5.5, 0.0266, 5e-5)


def readings(chainage, sigma=5e-4):
    """Heights of open columns to whole mm, (runs, taps)."""
    survey, _ = make_survey(
        np.random.default_rng(3),
        chainage=chainage,
        reaches=[REACH],
        flows=FLOWS * 1e-3,
        temperature=288.15,
        sigma=sigma,
        draw=False,
    )
    return np.round(survey.readings.to_numpy() * 1000)


def reduced(folder, toml, chainage, columns, rows):
    folder.mkdir()
    (folder / "survey.toml").write_text(LINE + toml, "utf-8")
    taps = "\n".join(f"{name},{x}" for name, x in chainage.items())
    (folder / "taps.csv").write_text(f"tap,chainage [m]\n{taps}\n", "utf-8")
    text = "\n".join(",".join(map(str, row)) for row in rows)
    (folder / "readings.csv").write_text(f"run,flow [L/s],temperature [degC],{columns}\n{text}\n", "utf-8")
    return gradeline.reduce(gradeline.read_survey(folder), monte_carlo=False)


def named(reduction):
    slips = reduction.slips
    return [
        (row.run, row.tap, row.kind, row.repaired)
        for row in slips[slips["named"].fillna(False).astype(bool)].itertuples()
    ]


MANY = {f"T{n}": round(x, 2) for n, x in enumerate(np.linspace(0.2, 5.3, 10), 1)}


def board(tmp_path, values, *, flows=FLOWS, repeat=None):
    columns = ",".join(f"{name} [mm]" for name in MANY)
    rows = [
        (run, q, 15, *(f"{value:g}" for value in row))
        for run, (q, row) in enumerate(zip(flows, values, strict=True), 1)
    ]
    if repeat is not None:
        rows += repeat
    return reduced(tmp_path / "board", BOARD, MANY, columns, rows)


def test_a_transposed_reading_is_named_in_its_flag_in_the_table_and_in_the_summary(tmp_path):
    values = readings(list(MANY.values()))
    assert values[8, 1] == 1297.0
    values[8, 1] = 1927.0
    reduction = board(tmp_path, values)
    assert named(reduction) == [("9", "T2", "transposed", 1297.0)]
    flag = reduction.flags[reduction.flags["kind"] == "reading"].iloc[0]
    assert flag["suggestion"].startswith(
        "T2: 1927 written for 1297? two digits transposed: 1297 mm would lie "
    )
    assert "standard deviations from what the others expect; left out of the fit" in flag["suggestion"]
    row = reduction.slips.iloc[0]
    assert row["written"] == 1927.0
    assert row["expected"] == pytest.approx(1297.0, abs=3 * row["expected_u"])
    assert row["chance"] < 0.1
    # Never applied by itself: it is left out, as any flagged reading.
    heads = reduction.heads
    assert not heads[(heads["run"] == "9") & (heads["tap"] == "T2")]["used"].any()
    # Other hints go where a slip is named, and nothing is said of it again.
    assert flag["suggestion"].endswith("; left out of the fit")
    look = " ".join(summarise(reduction).look)
    assert look.count("1927") == 1 + look.count("1927 mm was read")
    assert "slip of the pen" not in look.casefold()
    assert flag_table(reduction).rows[0][:4] == ("reading", "transposed?", "9", "T2")
    assert "a wrong last digit, say, cannot be told from scatter" in slip_table(reduction).caption
    assert slip_table(reduction).rows[0][:5] == ("9", "T2", "transposed", "1927 mm", "1297 mm")
    assert "1927 written for 1297?" in terminal_summary(reduction)
    assert "Slips of the pen that would explain a flag" in page(reduction, [], version="0")


def test_two_neighbouring_taps_in_each_others_place(tmp_path):
    values = readings(list(MANY.values()))
    values[6, [3, 4]] = values[6, [4, 3]]
    found = named(board(tmp_path, values))
    assert [each[:3] for each in found] == [("7", "T4", "swapped"), ("7", "T5", "swapped")]


def test_a_reading_copied_from_the_run_above_has_no_repair(tmp_path):
    values = readings(list(MANY.values()))
    values[8, 2] = values[7, 2]
    reduction = board(tmp_path, values)
    flag = reduction.flags[reduction.flags["kind"] == "reading"].iloc[0]
    above = f"{values[7, 2]:g}"
    assert flag["suggestion"].startswith(
        f"T3: copied from the run above? {above} mm stands in run 8 as well, "
    )
    assert "mm is expected; nothing of the true value is left" in flag["suggestion"]
    assert np.isnan(reduction.slips.iloc[0]["repaired"])


def test_an_error_that_no_slip_made_gets_none(tmp_path):
    values = readings(list(MANY.values()))
    values[5, 4] += 37.0
    reduction = board(tmp_path, values)
    assert (reduction.flags["kind"] == "reading").sum() == 1
    assert named(reduction) == []
    assert "written for" not in " ".join(reduction.flags["suggestion"])
    assert "slip of the pen" not in " ".join(summarise(reduction).look).casefold()


def test_a_slip_sits_in_one_of_the_repeats(tmp_path):
    values = readings(list(MANY.values()))
    again = values[8] + np.random.default_rng(5).integers(-1, 2, values.shape[1])
    meant = again[1]
    digits = f"{meant:.0f}"
    again[1] = float(digits[0] + digits[2] + digits[1] + digits[3])
    repeat = [(9, FLOWS[8], 15, *(f"{value:g}" for value in again))]
    reduction = board(tmp_path, values, repeat=repeat)
    assert named(reduction) == [("9", "T2, reading 2 of 2", "transposed", meant)]
    assert (
        "the mean of 2 readings"
        in reduction.flags[reduction.flags["kind"] == "reading"].iloc[0]["suggestion"]
    )


TWO = {"A": 0.5, "B": 5.0}


def two_taps(tmp_path, values, flows=FLOWS):
    rows = [
        (run, q, 15, f"{a:g}", f"{b:g}") for run, (q, (a, b)) in enumerate(zip(flows, values, strict=True), 1)
    ]
    return reduced(tmp_path / "two", BOARD, TWO, "A [mm],B [mm]", rows)


@pytest.mark.parametrize(
    ("written", "kind"),
    [("0.163", "one digit"), ("1.613", "transposed"), ("11.63", "decimal point"), ("69.78", "unit")],
)
def test_a_slip_of_the_flow(tmp_path, written, kind):
    """1.163 L/s as one digit wrong, transposed, a point off, and in L/min (1.163 x 60 = 69.78)."""
    flows = [f"{q:.3f}" for q in FLOWS]
    flows[7] = written
    reduction = two_taps(tmp_path, readings([0.5, 5.0]), flows)
    (found,) = named(reduction)
    assert found[:3] == ("8", None, kind)
    assert found[3] == pytest.approx(1.163)
    flag = reduction.flags[reduction.flags["kind"] == "run"].iloc[0]
    assert flag["suggestion"].startswith(f"the flow: {written} written for 1.163?")
    assert flag["suggestion"].endswith("from what the others expect; left out of the wall's fit")
    assert flag_table(reduction).rows[0][:2] == ("run", f"{kind}?")
    if kind == "unit":
        assert "? L/min for L/s: 1.163 L/s would lie" in flag["suggestion"]


def test_flows_of_two_runs_in_each_others_place(tmp_path):
    flows = [f"{q:.3f}" for q in FLOWS]
    flows[4], flows[5] = flows[5], flows[4]
    reduction = two_taps(tmp_path, readings([0.5, 5.0]), flows)
    assert {(run, tap, kind) for run, tap, kind, _ in named(reduction)} == {
        ("5", None, "swapped"),
        ("6", None, "swapped"),
    }
    assert "the flows of runs 5 and 6 swapped?" in " ".join(reduction.flags["suggestion"])


def test_a_slip_of_a_lone_reading(tmp_path):
    values = readings([0.5, 5.0])
    meant = values[8, 0]
    values[8, 0] /= 10
    reduction = two_taps(tmp_path, values)
    assert named(reduction) == [("9", "A", "decimal point", meant)]
    assert "decimal point, or cm for mm" in reduction.flags.iloc[0]["suggestion"]


def test_two_taps_swapped_in_one_run(tmp_path):
    values = readings([0.5, 5.0])
    values[8] = values[8, ::-1]
    reduction = two_taps(tmp_path, values)
    (found,) = named(reduction)
    assert found[:3] == ("9", "A and B", "swapped")
    law = reduction.flags[reduction.flags["kind"] == "law"]["suggestion"]
    assert any("; run 9: taps A and B swapped? The other way round" in text for text in law)


def limbs(tmp_path, right, left):
    rows = [
        (run, q, 15, f"{a:g}", f"{b:g}")
        for run, (q, a, b) in enumerate(zip(FLOWS, left, right, strict=True), 1)
    ]
    return reduced(tmp_path / "limbs", U_TUBE, TWO, "dp left [mm],dp right [mm]", rows)


@pytest.fixture
def deflections():
    """Right and left limb of a mercury gauge, mm, from the falls of the open columns (12.6: mercury under water)."""
    values = readings([0.5, 5.0])
    fall = (values[:, 0] - values[:, 1]) / 12.6
    return np.round(200 + fall / 2, 1), np.round(200 - fall / 2, 1)


def test_limbs_swapped(tmp_path, deflections):
    right, left = deflections
    right[7], left[7] = left[7], right[7]
    reduction = limbs(tmp_path, right, left)
    (found,) = named(reduction)
    assert found[:3] == ("8", "dp", "limbs swapped")


def test_a_slip_in_one_limb(tmp_path, deflections):
    right, left = deflections
    meant, text = right[7], f"{right[7]:.1f}"
    right[7] = float("1" + text[1:]) if text[0] == "2" else float("2" + text[1:])
    reduction = limbs(tmp_path, right, left)
    assert named(reduction) == [("8", "dp right", "one digit", meant)]


def test_a_survey_without_flags_has_an_empty_table(tmp_path):
    reduction = board(tmp_path, readings(list(MANY.values())))
    assert len(reduction.flags) == 0
    assert len(reduction.slips) == 0
    assert slip_table(reduction).rows == ()


DEMO = Path(__file__).resolve().parents[2] / "data_demo/copper_bench"


def test_a_slip_in_a_static_reading(tmp_path):
    """656.0 mm written as 566.0 puts the tap off in all flowing runs by 90 mm."""
    for name in ("survey.toml", "taps.csv"):
        (tmp_path / name).write_text((DEMO / name).read_text("utf-8"), "utf-8")
    text = (DEMO / "readings.csv").read_text("utf-8")
    sound = "static,0,15.1,658.0,658.5,655.5,656.0"
    assert text.count(sound) == 1
    (tmp_path / "readings.csv").write_text(text.replace(sound, sound.replace("656.0", "566.0")), "utf-8")
    reduction = gradeline.reduce(gradeline.read_survey(tmp_path), monte_carlo=False)
    assert named(reduction)[0] == ("static", "T4", "transposed", 656.0)
    flag = reduction.flags[(reduction.flags["kind"] == "tap") & (reduction.flags["tap"] == "T4")].iloc[0]
    said = flag["suggestion"]
    assert said.startswith("datum offset and edge or chainage, not distinguishable: (+89.")
    assert (
        "left out of the fits. The static reading: T4: 566 written for 656? two digits transposed: 656 mm would lie"
        in said
    )
    # The other hints go.
    assert said.endswith("from what the others expect")
    assert "burr" not in said


def test_the_loader_keeps_each_repeat_and_each_limb(tmp_path):
    folder = tmp_path / "kept"
    folder.mkdir()
    (folder / "survey.toml").write_text(LINE + U_TUBE, "utf-8")
    (folder / "taps.csv").write_text("tap,chainage [m]\nA,0.5\nB,5.0\n", "utf-8")
    (folder / "readings.csv").write_text(
        "run,flow [L/s],temperature [degC],dp left [mm],dp right [mm]\n"
        "1,0.3,15,190.5,201.5\n2,0.6,15,180.0,211.0\n2,0.6,15,180.5,\n",
        "utf-8",
    )
    written = gradeline.read_survey(folder).written
    assert sorted(written.itertuples(index=False, name=None)) == [
        ("1", "dp left", 0.1905),
        ("1", "dp right", 0.2015),
        ("2", "dp left", 0.18),
        ("2", "dp left", 0.1805),
        ("2", "dp right", 0.211),
    ]


def test_the_columns_of_a_file():
    """Digits, step and other units of readings to half millimetres."""
    survey = gradeline.read_survey(DEMO)
    column = column_of(survey, 5)
    assert (column.unit.text, column.decimals, column.step) == ("mm", 1, 0.5)
    assert column.values[7] == 543.0
    # 1 in = 25.4 mm, 1 ft = 304.8 mm by definition.
    assert column.factors == pytest.approx({"cm": 10.0, "m": 1000.0, "in": 25.4, "ft": 304.8})
    assert column.shown(543.5) == "543.5"
    assert flow_column(survey).unit.text == "L/s"
    assert limb_columns(survey, 5) is None
