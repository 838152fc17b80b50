"""A logger's record in the report: tables, sentences, figure; and nothing of it where there is none."""

from __future__ import annotations

import csv
import dataclasses
import importlib.util
import io
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from matplotlib.figure import Figure

from gradeline.reduction.tables import RECORD_TABLES, RESULT_TABLES, Reduction
from gradeline.report.figures.logger_record import draw_faults, draw_trace, record_alt, record_figure
from gradeline.report.figures.render import pictures
from gradeline.report.figures.style import COLOURS, styled
from gradeline.report.logger import record_flag_table, record_sentences, window_table
from gradeline.report.output import write
from gradeline.report.page import page
from gradeline.report.record import as_csv, as_json
from gradeline.report.terminal import terminal_summary

CONTRACT = Path(__file__).resolve().parents[3] / "shared" / "contract.py"
NAN = float("nan")
WINDOWS = [
    ("1", 0.0, 300.0, 3000.0, 2900.0, NAN, NAN, True, "nothing flows"),
    ("2", 400.0, 900.0, 5000.0, 130.0, -0.0031, 0.0021, True, None),
    ("<b>3</b>", 1000.0, 1500.0, 5000.0, 210.0, 0.001, 0.002, True, None),
]
FLAGS = [
    (None, "gap", 905.0, 960.0, None, "55.0 s of samples are missing"),
    ("=T4", "stuck", 500.0, 650.0, "2", "stands still at 1106.2 mm for 150 s"),
    ("T5", "drift", 1000.0, 1500.0, "<b>3</b>", "rises by 7.41 mm over the window"),
    (
        "T5",
        "spike",
        100.0,
        102.0,
        "1",
        "a single sample 60.0 mm above those around it, taken out of the means",
    ),
]


@pytest.fixture(scope="module")
def logged(bench: Reduction) -> Reduction:
    windows = pd.DataFrame(
        [
            {
                "run": run,
                "start": start,
                "end": end,
                "length": end - start,
                "begins": f"{start:g} s",
                "ends": f"{end:g} s",
                "samples": samples,
                "effective_samples": effective,
                "flow_drift": drift,
                "flow_drift_u": drift_u,
                "found": found,
                "reason": reason,
            }
            for run, start, end, samples, effective, drift, drift_u, found, reason in WINDOWS
        ]
    ).astype({"found": "boolean"})
    flags = pd.DataFrame(
        [
            {
                "column": column,
                "kind": kind,
                "start": start,
                "end": end,
                "begins": f"{start:g} s",
                "ends": f"{end:g} s",
                "run": run,
                "what": what,
            }
            for column, kind, start, end, run, what in FLAGS
        ]
    )
    time = np.r_[np.arange(0.0, 905.0, 5.0), np.arange(960.0, 1500.0, 5.0)]
    trace = pd.concat(
        [
            pd.DataFrame(
                {
                    "column": name,
                    "role": role,
                    "unit": unit,
                    "time": time,
                    "low": level - 1.0,
                    "mean": level + 0.1 * np.sin(time),
                    "high": level + 1.0,
                }
            )
            for name, role, unit, level in (
                ("flow", "flow", "L/s", 2.0),
                ("=T4", "head", "mm", 900.0),
                ("T5", "head", "mm", 800.0),
                ("temperature", "temperature", "degC", 18.0),
            )
        ],
        ignore_index=True,
    )
    record = {"file": "logger.csv", "begins": "0 s", "samples": 14450, "interval": 0.1}
    return dataclasses.replace(
        bench,
        survey={**bench.survey, "record": record},
        windows=windows,
        record_flags=flags,
        record_trace=trace,
    )


def test_the_tables_stand_in_json_and_csv(logged: Reduction) -> None:
    told = json.loads(as_json(logged, "1.2.3"))
    assert list(told)[4:] == [*RESULT_TABLES, *RECORD_TABLES]
    assert [row["run"] for row in told["windows"]] == ["1", "2", "<b>3</b>"]
    assert told["windows"][0]["flow_drift"] is None
    assert told["windows"][0]["reason"] == "nothing flows"
    assert told["windows"][1]["samples"] == 5000
    assert told["record_flags"][0]["column"] is None
    rows = list(csv.DictReader(io.StringIO(as_csv(logged, "record_flags").decode())))
    assert rows[1]["column"] == "'=T4"
    assert rows[1]["start"] == "500.0"


@pytest.mark.skipif(not CONTRACT.exists(), reason="the project's contract script is not here")
def test_the_contract_script_agrees(logged: Reduction) -> None:
    spec = importlib.util.spec_from_file_location("contract", CONTRACT)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    assert list(module.faults(json.loads(as_json(logged, "1.2.3")))) == []


def test_files_are_written_only_where_there_is_a_record(
    logged: Reduction, bench: Reduction, tmp_path: Path
) -> None:
    for reduction, there in ((logged, True), (bench, False)):
        folder = tmp_path / str(there)
        write(reduction, folder, formats=("csv", "svg", "json"))
        names = ("windows.csv", "record_flags.csv", "figures/record.svg")
        assert [(folder / name).exists() for name in names] == [there] * 3
        assert ("windows" in json.loads((folder / "reduction.json").read_bytes())) is there
    # what was written once may be replaced
    write(bench, tmp_path / "True", formats=("csv",), overwrite=True)
    assert not (tmp_path / "True" / "windows.csv").exists()


def test_sentences_and_tables_say_what_the_windows_are(logged: Reduction, bench: Reduction) -> None:
    first, _ = record_sentences(logged)
    assert first == (
        "logger.csv holds 14\u202f450 rows from 0 s on, usually 0.1 s apart; 3 windows are found steady in it, 300 s to "
        "500 s long."
    )
    assert record_sentences(bench) == ()
    sound = dataclasses.replace(logged, record_flags=logged.record_flags.iloc[:0])
    assert record_sentences(sound)[-1].startswith("No drift, step, standstill, spike or gap")
    windows = window_table(logged)
    assert windows.rows[1][:7] == ("2", "400 s", "900 s", "500", "5\u202f000", "130", "−0.31 ± 0.21")
    assert windows.notes == ("nothing flows",)
    flags = record_flag_table(logged)
    assert [row[:2] for row in flags.rows] == [
        ("all", "gap"),
        ("=T4", "stuck"),
        ("T5", "drift"),
        ("T5", "spike"),
    ]


def test_page_and_terminal_show_them_escaped(logged: Reduction, bench: Reduction) -> None:
    drawn = pictures(logged, png=False)
    text = page(logged, drawn, "1.2.3")
    assert "The logger&#39;s record" in text
    assert "<b>3</b>" not in text
    terminal = terminal_summary(logged)
    assert "Windows of the record" in terminal
    assert "rises by 7.41 mm over the window" in terminal
    assert max(map(len, terminal.splitlines())) <= 100
    assert "Windows of the record" not in terminal_summary(bench)
    assert not any(one.name == "record" for one in pictures(bench, png=False))


def test_the_trace_holds_the_record_and_its_windows(logged: Reduction) -> None:
    with styled():
        ax = Figure().add_subplot()
        drawn = draw_trace(ax, logged, "head", numbered=True)
    assert [line.get_label() for line in drawn.means] == ["=T4", "T5"]
    # never by colour alone
    assert len({line.get_linestyle() for line in drawn.means}) == 2
    assert {line.get_color() for line in drawn.means} <= set(COLOURS.values())
    x, y = drawn.means[0].get_data()
    # 25 min of record are shown in minutes; the gap breaks the line
    assert np.nanmax(x) == pytest.approx(1495 / 60)
    assert np.isnan(y).sum() == 1
    assert [text.get_text() for text in drawn.names] == ["1", "2", "<b>3</b>"]
    assert len(drawn.windows) == 3
    assert ax.get_ylabel() == "reading, mm"


def test_faults_have_a_lane_a_mark_and_a_name(logged: Reduction) -> None:
    with styled():
        ax = Figure().add_subplot()
        ax.set_xlim(0, 25)
        drawn = draw_faults(ax, logged)
    assert [label.get_text() for label in ax.get_yticklabels()] == ["all", "=T4", "T5"]
    assert {text.get_text() for text in drawn.words} == {"gap", "stuck", "drift", "spike"}
    assert len({mark.get_marker() for mark in drawn.marks}) == 4
    assert sorted(tuple(np.round(span.get_xdata(), 3)) for span in drawn.spans)[1] == (8.333, 10.833)


def test_the_figure_has_a_panel_for_each_role_and_says_so(logged: Reduction) -> None:
    with styled():
        figure = record_figure(logged)
        assert len(figure.axes) == 4
        assert figure.axes[-1].get_xlabel() == "time, min"
        sound = record_figure(dataclasses.replace(logged, record_flags=logged.record_flags.iloc[:0]))
        assert len(sound.axes) == 3
    assert (
        "3 windows shaded and named by run; faults: 1 × gap, 1 × stuck, 1 × drift, 1 × spike."
        in record_alt(logged)
    )
