"""Survey folders through the command line: the demo data against their truth, and odd surveys that must not fall over."""

from __future__ import annotations

import csv
import json
import re
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner

import gradeline
from gradeline.cli.app import app
from gradeline.reduction.tables import RESULT_TABLES

TOP = Path(__file__).resolve().parents[1]
DEMO = TOP / "data_demo"
CONTRACT = TOP.parent / "shared" / "contract.py"
RUN_COLUMNS = "run,flow [L/s],temperature [degC],"

TOML = """\
[survey]
title = "Odd line"
[fluid]
name = "water"
[site]
gravity = "9.81 m/s^2"
[[reach]]
name = "main"
from = "0 m"
to = "6 m"
diameter = "25 mm"
wall = "steel"
[gauge.board]
kind = "piezometer"
zero = "0 m"
"""


def run(*arguments):
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def refuse(name):
    raise AssertionError(f"{name} stands in the JSON")


def load(folder):
    """Return reduction.json, strictly: no NaN and no Infinity."""
    return json.loads((folder / "reduction.json").read_text(encoding="utf-8"), parse_constant=refuse)


def hold_reasons(result):
    for table, value in (("runs", "slope"), ("walls", "roughness"), ("fittings", "loss_coefficient")):
        for row in result[table]:
            assert row[value] is not None or row["reason"], (table, row)
    for row in result["runs"]:
        assert row["roughness"] is not None or row["reason"], row


needs_contract = pytest.mark.skipif(
    not CONTRACT.exists(), reason="the contract of reduction.json is not beside the project"
)


def hold_contract(folder):
    """Run the published contract over a reduction.json."""
    told = subprocess.run(
        [sys.executable, CONTRACT, folder / "reduction.json"], capture_output=True, text=True, check=False
    )
    assert told.returncode == 0, told.stdout


def reduce_demo(name, folder):
    """Reduce a copy of a demo survey: name, folder read, folder written, outcome."""
    source = folder / name
    shutil.copytree(DEMO / name, source, ignore=shutil.ignore_patterns("reduction"))
    return name, source, folder / "out", run("reduce", source, "--out", folder / "out")


@pytest.fixture(scope="module")
def bench(tmp_path_factory):
    return reduce_demo("copper_bench", tmp_path_factory.mktemp("bench"))


@pytest.fixture(scope="module")
def main(tmp_path_factory):
    return reduce_demo("cast_main", tmp_path_factory.mktemp("main"))


@pytest.fixture(scope="module")
def mercury(tmp_path_factory):
    return reduce_demo("mercury_bench", tmp_path_factory.mktemp("mercury"))


@pytest.fixture(scope="module")
def hydrants(tmp_path_factory):
    return reduce_demo("hydrant_main", tmp_path_factory.mktemp("hydrants"))


@pytest.fixture(params=["bench", "main", "mercury", "hydrants"])
def demo(request):
    return request.getfixturevalue(request.param)


def words(name, pattern):
    """Return what the head of a demo's survey.toml gives as its truth."""
    head = (DEMO / name / "survey.toml").read_text(encoding="utf-8").split("[survey]")[0].replace("\n#", "")
    found = re.search(pattern, head)
    assert found, pattern
    return found.groups()


def truth(name, pattern):
    """Return the numbers that it gives."""
    return [float(text) for text in words(name, pattern)]


def test_the_demo_is_reduced(demo):
    name, _, out, result = demo
    assert result.exit_code == 0
    assert "Traceback" not in result.output
    assert result.stderr == f"Written to {out / 'report.html'}\n"
    there = {path.name for path in out.iterdir()}
    files = {"report.html", "reduction.json", "carried.json", *(f"{table}.csv" for table in RESULT_TABLES)}
    assert there == {*files, "figures"}
    runs = {"copper_bench": 10, "cast_main": 7, "mercury_bench": 10, "hydrant_main": 6}[name]
    figures = sorted(path.name for path in (out / "figures").iterdir())
    drawn = runs - (name == "mercury_bench")  # differences alone: a run at rest has no grade line to show
    # residuals, S against V, f against Re, the budget, the likelihood of the one wall; K of the one fitted valve
    assert len(figures) == 2 * (drawn + 5 + (name == "cast_main"))
    assert all((out / "figures" / figure).stat().st_size > 1000 for figure in figures)


def test_the_page_stands_alone(demo):
    _, source, out, _ = demo
    page = (out / "report.html").read_text(encoding="utf-8")
    assert page.lower().startswith("<!doctype html>")
    assert gradeline.read_survey(source).title in page
    # nothing is fetched
    assert not re.search(r"""(?:src|href)\s*=\s*["']?(?:https?:)?//""", page)
    assert "@import" not in page
    assert not re.findall(r">\s*(?:nan|inf|None)\s*<", page)


def test_the_json_agrees_with_the_tables(demo):
    _, source, out, _ = demo
    result = load(out)
    reduction = gradeline.reduce(gradeline.read_survey(source))
    for table, columns in RESULT_TABLES.items():
        frame = getattr(reduction, table)
        rows = result[table]
        assert len(rows) == len(frame)
        with (out / f"{table}.csv").open(encoding="utf-8", newline="") as file:
            lines = list(csv.DictReader(file))
        assert len(lines) == len(frame)
        for column, kind in columns.items():
            expected = frame[column].tolist()
            for value, row, line in zip(expected, rows, lines, strict=True):
                if kind.kind == "number" and np.isfinite(value):
                    assert row[column] == pytest.approx(value, rel=1e-12)
                    assert float(line[column]) == pytest.approx(value, rel=1e-12)
                elif kind.kind == "number" or value is None:
                    assert row[column] is None
                    assert line[column] == ""
                else:
                    assert row[column] == value
    assert result["assumptions"] == list(reduction.assumptions)
    assert result["cautions"] == list(reduction.cautions)
    hold_reasons(result)


@needs_contract
def test_the_demo_keeps_the_contract(demo):
    hold_contract(demo[2])


def test_the_terminal_tells_the_same_numbers(demo):
    name, _, out, result = demo
    wall = load(out)["walls"][0]
    assert wall["wall"] in result.stdout
    if name == "cast_main":
        assert f"{1000 * wall['roughness']:.2g} mm" in result.stdout
        valve = next(row for row in load(out)["fittings"] if row["fitting"] == "gate valve")
        assert f"K = {valve['loss_coefficient']:.2f} ± {valve['loss_coefficient_u']:.2f}" in result.stdout


def test_the_bench_holds_its_truth(bench):
    name, _, out, _ = bench
    result = load(out)
    (micrometres,) = truth(name, r"roughness ([\d.]+) um")
    wall = result["walls"][0]
    assert wall["roughness_low"] <= micrometres * 1e-6 <= wall["roughness_high"]
    assert micrometres * 1e-6 <= wall["roughness_upper95"]
    tap, run_label, right, wrong = truth(
        name, r"T(\d+) in run (\d+), where ([\d.]+) mm was written down as ([\d.]+) mm"
    )
    assert len(result["flags"]) == 1
    flag = result["flags"][0]
    assert (flag["kind"], flag["run"], flag["tap"]) == ("reading", f"{run_label:.0f}", f"T{tap:.0f}")
    assert flag["reading"] == pytest.approx(wrong / 1000)
    assert flag["expected"] == pytest.approx(right / 1000, abs=3e-3)
    flagged = [(row["run"], row["tap"]) for row in result["heads"] if row["flag"]]
    assert flagged == [("7", "T6")]
    assert {row["regime"] for row in result["runs"]} == {"static", "laminar", "critical", "turbulent"}


def test_the_main_holds_its_truth(main):
    name, _, out, _ = main
    result = load(out)
    (millimetres,) = truth(name, r"roughness ([\d.]+) mm")
    wall = result["walls"][0]
    assert wall["roughness_low"] <= millimetres * 1e-3 <= wall["roughness_high"]
    assert wall["roughness_resolved"] is True
    (coefficient,) = truth(name, r"K = ([\d.]+) of the gate valve")
    valve = next(row for row in result["fittings"] if row["fitting"] == "gate valve")
    assert valve["loss_coefficient_low"] <= coefficient <= valve["loss_coefficient_high"]
    assert result["flags"] == []


def hold_flows(name, result, relative):
    """Hold each flow against the truth within a relative bound."""
    (listed,) = words(name, r"True flows[^:]*:\s+([\d., ]+) L/s")
    true = np.array([float(text) for text in listed.split(",")]) / 1000
    found = np.array([row["flow"] for row in result["runs"] if row["flow"] > 0])
    assert found == pytest.approx(true, rel=relative)


def test_the_mercury_bench_holds_its_truth(mercury):
    name, source, out, _ = mercury
    result = load(out)
    (micrometres,) = truth(name, r"roughness ([\d.]+) um")
    wall = result["walls"][0]
    assert wall["roughness_low"] <= micrometres * 1e-6 <= wall["roughness_high"]
    assert wall["roughness_resolved"] is True
    # 10 g at random and 10 g of zero on 4 kg at the least, 0.1 s of 120 s, the balance's 0.1 %: twice in quadrature
    hold_flows(name, result, 2 * np.hypot(np.hypot(0.010 * 1.5 / 4.0, 0.1 / 120), 0.001))
    assert {row["regime"] for row in result["runs"]} == {"static", "laminar", "critical", "turbulent"}
    assert result["flags"] == []
    # each flowing run is read by one kind of gauge, the one that suits
    readings = gradeline.read_survey(source).readings.drop("static")
    by_air, by_mercury = (readings[[f"{letter}{n}" for n in (1, 2, 3)]].notna() for letter in "am")
    assert (by_air.all(axis=1) ^ by_mercury.all(axis=1)).all()
    assert by_air.any().all()
    assert by_mercury.any().all()
    # the largest fall that mercury showed, 285 mm of it against water: 13.56 less 1 (handbooks, about 15 degC)
    told = run("gauges", source).stdout
    largest = re.search(r"m1 \(u-tube\).*?differences +\S+ m to (\S+) m", told, re.DOTALL)
    assert largest, told
    assert float(largest[1]) == pytest.approx(0.285 * 12.56, rel=0.01)
    # Hagen and Poiseuille, 64/Re, whatever the wall
    for row in result["runs"]:
        if row["regime"] == "laminar":
            assert abs(row["friction_factor"] - 64 / row["reynolds"]) < 2.5 * row["friction_factor_u"]


def test_the_hydrant_main_holds_its_truth(hydrants):
    name, _, out, _ = hydrants
    result = load(out)
    (millimetres,) = truth(name, r"roughness ([\d.]+) mm")
    wall = result["walls"][0]
    assert wall["roughness_low"] <= millimetres * 1e-3 <= wall["roughness_high"]
    # the outlets' coefficients ± 1.1 %, bores ± 0.6 % in area, pitots 0.5 kPa of 25 kPa at the least: twice in quadrature
    hold_flows(name, result, 2 * np.sqrt(0.011**2 + 0.006**2 + 0.010**2))
    assert result["flags"] == []
    page = (out / "report.html").read_text(encoding="utf-8")
    assert "Isolation checklist: were all side valves shut? Here 3 of 4 are stated shut." in page
    assert any("farm branch" in text and "between H4 and H5" in text for text in result["cautions"])
    assert any("Side valves stated shut: mill, school, scour" in text for text in result["assumptions"])


def write(folder, *, taps, rows):
    folder.mkdir()
    names = [f"T{number}" for number in range(1, len(taps) + 1)]
    folder.joinpath("survey.toml").write_text(TOML)
    table = "".join(f"{name},{at}\n" for name, at in zip(names, taps, strict=True))
    folder.joinpath("taps.csv").write_text("tap,chainage [m]\n" + table)
    head = RUN_COLUMNS + ",".join(f"{name} [mm]" for name in names)
    folder.joinpath("readings.csv").write_text(head + "\n" + "\n".join(rows) + "\n")
    return folder


def row(label, flow, heads):
    return f"{label},{flow},18," + ",".join(str(head) for head in heads)


FALLING = (900, 850, 801, 749, 700)
CHAINAGES = (1, 2, 3, 4, 5)
#: Flows of 0.3 L/s are turbulent in a bore of 25 mm (Re 14 500), of 0.01 L/s laminar (Re 480).
ODD = {
    "all zero": (CHAINAGES, [row(n, 0.3 + 0.1 * n, [0] * 5) for n in range(4)]),
    "one tap": ((1,), [row(n, 0.3 + 0.1 * n, [900]) for n in range(4)]),
    "two taps": ((1, 5), [row(n, 0.1 * (3 + n), [900, 900 - 24 * (3 + n) ** 1.8]) for n in range(5)]),
    "one run": (CHAINAGES, [row(1, 0.3, FALLING)]),
    "one run, one tap": ((1,), [row(1, 0.3, [900])]),
    "only laminar": (
        CHAINAGES,
        [row(n, 0.005 * n, [900 - 0.3 * n * x for x in CHAINAGES]) for n in (1, 2, 3)],
    ),
    "only static": (CHAINAGES, [row(n, 0, [900, 901, 899, 900, 902]) for n in range(3)]),
    "one static": (CHAINAGES, [row("rest", 0, FALLING)]),
    "nothing falls": (CHAINAGES, [row(n, 0.3, [900] * 5) for n in range(3)]),
    "mostly unread": (CHAINAGES, [row(n, 0.3, [900, "", "", "", 700 + n]) for n in range(4)]),
    "one reading": (CHAINAGES, [row(n, 0.3, ["", "", 800, "", ""]) for n in range(4)]),
    "nothing falls, static": (CHAINAGES, [row("rest", 0, [0] * 5), row(1, 0.3, [0] * 5)]),
}


@pytest.mark.parametrize("name", ODD)
def test_odd_surveys_are_reduced(name, tmp_path):
    taps, rows = ODD[name]
    folder = write(tmp_path / "odd", taps=taps, rows=rows)
    result = run("reduce", folder, "--formats", "html,json")
    assert result.exit_code == 0, result.output
    assert "Traceback" not in result.output
    page = (folder / "reduction" / "report.html").read_text(encoding="utf-8")
    assert "Odd line" in page
    assert not re.findall(r">\s*(?:nan|inf|None)\s*<", page)
    told = load(folder / "reduction")
    hold_reasons(told)
    assert len(told["runs"]) == len(rows)


@needs_contract
@pytest.mark.parametrize("name", ODD)
def test_odd_surveys_keep_the_contract(name, tmp_path):
    taps, rows = ODD[name]
    folder = write(tmp_path / "odd", taps=taps, rows=rows)
    assert run("reduce", folder, "--formats", "json").exit_code == 0
    hold_contract(folder / "reduction")


@pytest.mark.parametrize(
    ("name", "table", "reason"),
    [
        ("all zero", "runs", "no loss of head could be measured"),
        ("one tap", "runs", "the usable taps do not determine the slope"),
        ("only laminar", "walls", "no turbulent run"),
        ("only static", "runs", "static run"),
        ("one reading", "runs", "the usable taps do not determine the slope"),
    ],
)
def test_odd_surveys_say_why(name, table, reason, tmp_path):
    taps, rows = ODD[name]
    folder = write(tmp_path / "odd", taps=taps, rows=rows)
    assert run("reduce", folder, "--formats", "json").exit_code == 0
    told = load(folder / "reduction")[table]
    assert all(reason in line["reason"] for line in told)


def test_ten_thousand_runs(tmp_path):
    """Flows from 0.2 to 1.2 L/s, S after Blasius (0.3164 Re^-1/4), readings to the millimetre."""
    rng = np.random.default_rng(7)
    flow = rng.uniform(0.2, 1.2, 10_000)
    velocity = flow / 1000 / (np.pi / 4 * 0.025**2)
    slope = 0.3164 * (velocity * 0.025 / 1.0533e-6) ** -0.25 * velocity**2 / (2 * 9.81 * 0.025)
    heads = np.round(4000 - 1000 * slope[:, None] * np.array(CHAINAGES) + rng.normal(0, 1, (10_000, 5)))
    rows = [row(n, f"{q:.5f}", one.astype(int)) for n, (q, one) in enumerate(zip(flow, heads, strict=True))]
    folder = write(tmp_path / "long", taps=CHAINAGES, rows=rows)
    result = run("reduce", folder, "--formats", "json")
    assert result.exit_code == 0
    told = load(folder / "reduction")
    assert len(told["runs"]) == 10_000
    assert len(told["heads"]) == 50_000
    found = np.array([line["slope"] for line in told["runs"]])
    # 1 mm over 5 taps a metre apart: u(S) = 1e-3 / √10
    assert np.abs(found - slope * (1 - 1.1992 / 998.6)).std() < 1.2 * 1e-3 / np.sqrt(10)
    hold_reasons(told)
