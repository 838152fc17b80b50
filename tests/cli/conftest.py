import sys
from pathlib import Path
from types import ModuleType, SimpleNamespace

import pytest

TOML = """\
[survey]
title = "Bench line"
date = 2026-05-06
[fluid]
name = "water"
[[reach]]
name = "main"
from = "0 m"
to = "6 m"
diameter = "26.64 mm +/- 0.03 mm"
wall = "copper"
[[fitting]]
name = "valve"
at = "3 m"
loss_coefficient = "0.2(1)"
[gauge.board]
kind = "piezometer"
zero = "0.80 m"
resolution = "1 mm"
[uncertainty]
reading = "0.5 mm"
flow = "0.4 %"
"""
TAPS = "tap,chainage [m],elevation [m]\nT1,0.5,0\nT2,1.5,0\nT3,2.5,0\n"
READINGS = (
    "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm]\n"
    "1,0,18,500,500,500\n2,0.25,18,480,455,431\n3,0.5,18,430,,310\n"
)


@pytest.fixture
def survey(tmp_path: Path) -> Path:
    folder = tmp_path / "bench_line"
    folder.mkdir()
    folder.joinpath("survey.toml").write_text(TOML)
    folder.joinpath("taps.csv").write_text(TAPS)
    folder.joinpath("readings.csv").write_text(READINGS)
    return folder


@pytest.fixture
def bad_survey(tmp_path: Path) -> Path:
    folder = tmp_path / "bad_line"
    folder.mkdir()
    folder.joinpath("survey.toml").write_text(TOML.replace("0.80 m", "0.80"))
    folder.joinpath("taps.csv").write_text(TAPS)
    folder.joinpath("readings.csv").write_text(READINGS.replace("455", "45x"))
    return folder


@pytest.fixture
def rooms(monkeypatch: pytest.MonkeyPatch) -> SimpleNamespace:
    """In place of the rooms that reduce and write: what they were called with. The command line only passes on."""
    calls = SimpleNamespace(reduced=[], written=[], error=None)

    def reduce(survey, **options):
        calls.reduced.append((survey.title, options))
        return SimpleNamespace(title=survey.title)

    def write(reduction, folder, **options):
        if calls.error is not None:
            raise calls.error
        calls.written.append((reduction.title, folder, options))

    from gradeline.report import summary  # noqa: PLC0415 (the real one, before its room is another's)

    reduction, report = ModuleType("gradeline.reduction"), ModuleType("gradeline.report")
    reduction.reduce = reduce
    report.write, report.terminal_summary = write, lambda reduction, _display: f"summary of {reduction.title}"
    report.summary_rows = lambda _reduction, survey: (summary.failed_row(survey, 0, ""),)
    report.failed_row = summary.failed_row
    report.one_line = lambda reduction, _display: f"line of {reduction.title}"
    monkeypatch.setitem(sys.modules, "gradeline.reduction", reduction)
    monkeypatch.setitem(sys.modules, "gradeline.report", report)
    return calls
