"""What is told of a logger's file at fault: the place, the value, the remedy."""

from __future__ import annotations

import pytest

from gradeline.errors import SurveyError
from gradeline.loader import read_survey
from gradeline.reduction.record import with_record_read
from tests.logger.made import Logged, stamped


def told(logged: Logged) -> str:
    with pytest.raises(SurveyError) as caught:
        read_survey(logged.folder)
    return str(caught.value)


def test_bad_cells_are_counted_and_left_out(logged: Logged) -> None:
    for line in (77, 78, 300):
        logged.change(line, "T2", "ERR")
    logged.change(300, "T3", "")
    logged.change(301, "T3", "NaN")
    logged.change(302, "T4", "1e400")
    survey = read_survey(logged.folder)
    said = "\n".join(survey.cautions)
    assert (
        "logger.csv, T2 [mm]: 3 cells are not a number; the first is 'ERR' in row 77. They are left out"
        in said
    )
    assert "logger.csv, T4 [mm]: 1 cell is not a number; too large to be meant" in said
    assert "T3" not in said
    assert any("T2 (3), T3 (2), T4 (1)" in one for one in survey.assumptions)
    # The other cells of such a row stay: row 77 is 18.75 s and in no window, row 300 at 74.5 s in the first one.
    rows = logged.inside("r0")
    kept = rows.drop(index=298)
    assert survey.readings.loc["r0", "T2"] == pytest.approx(
        kept.drop(index=[75, 76], errors="ignore")["T2 [mm]"].mean() / 1000, rel=1e-11
    )
    assert survey.readings.loc["r0", "T5"] == pytest.approx(rows["T5 [mm]"].mean() / 1000, rel=1e-11)


def test_a_column_of_bad_cells_is_refused(logged: Logged) -> None:
    lines = logged.lines()
    logged.put([lines[0], *(f"{one.rsplit(',', 1)[0]},--" for one in lines[1:])])
    assert (
        "logger.csv row 2, T5 [mm]: 2400 cells are not a number; the first is '--' in row 2; leave such cells empty"
        in told(logged)
    )


def test_rows_cut_short(logged: Logged) -> None:
    lines = logged.lines()
    logged.put([*lines[:100], "5,6", *lines[100:], "600.25,1.4"])
    survey = read_survey(logged.folder)
    assert any(
        "logger.csv: 2 rows have not the 8 cells of the heading, the first in row 101. They are left out."
        in one
        for one in survey.cautions
    )


def test_a_time_that_is_none(logged: Logged) -> None:
    logged.change(90, "time", "noon")
    survey = read_survey(logged.folder)
    assert any(
        "logger.csv: 1 row has no time that can be read, the first ('noon') in row 90" in one
        for one in survey.cautions
    )


@pytest.mark.parametrize("parquet", [False, True])
def test_time_runs_backwards(logged: Logged, parquet: bool) -> None:
    order = list(range(len(logged.table)))
    order[500], order[501] = order[501], order[500]
    logged.table = logged.table.iloc[order].reset_index(drop=True)
    logged.write(parquet=parquet)
    # The first row of data is 2 in csv and 1 in parquet; the earlier time stands in the second of the two.
    file, row = ("logger.parquet", 502) if parquet else ("logger.csv", 503)
    assert (
        f"{file} row {row}, time [s]: 125 s comes after 125.25 s in row {row - 1}; time must not run backwards"
        in told(logged)
    )


def test_a_clock_set_back(logged: Logged) -> None:
    later = logged.table["time [s]"] > 300
    logged.table.loc[later, "time [s]"] -= 3.0
    logged.write()
    assert "logger.csv row 1203, time [s]: 297.25 s comes after 300 s in row 1202" in told(logged)


def test_gaps_are_told(logged: Logged) -> None:
    logged.table = logged.table.drop(index=range(700, 740)).reset_index(drop=True)
    logged.write()
    survey = read_survey(logged.folder)
    assert any("logger.csv has no samples from 174.75 s to 185 s." in one for one in survey.cautions)


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        (
            "time [s]",
            "clock [s]",
            "logger.csv row 1: the column 'time [s]' is missing; head it so (or [min], [h]), or 'time'",
        ),
        ("time [s]", "time [mm]", "logger.csv row 1, time [mm]: the unit 'mm' is a length, not a time"),
        ("time [s]", "time", "logger.csv row 2, time: '0.0' is not a time; write timestamps of ISO 8601"),
        ("T4 [mm]", "X4 [mm]", "taps.csv row 5, tap: the tap 'T4' has no column in logger.csv"),
        ("T4 [mm]", "T4 [kPa]", "logger.csv row 1, T4 [kPa]: the unit 'kPa' is a pressure, not a length"),
        ("T4 [mm]", "T4", "logger.csv row 1, T4: a unit is missing"),
        ("T4 [mm]", "T4 (mm)", "logger.csv row 1, T4 (mm): units stand in square brackets"),
        ("T4 [mm]", "T3 [mm]", "logger.csv row 1, T3 [mm]: two columns are called 'T3'"),
        ("temperature [degC]", "temperature [K]", "logger.csv mean of temperature [K] in run 'r0': 18.000"),
        ("flow [L/s]", "discharge [L/s]", "logger.csv row 1: the column 'flow [L/s]' is missing"),
    ],
)
def test_headings(logged: Logged, old: str, new: str, said: str) -> None:
    logged.csv.write_text(logged.csv.read_text(encoding="utf-8").replace(old, new, 1), encoding="utf-8")
    assert said in told(logged)


def test_a_flow_upstream(logged: Logged) -> None:
    logged.table["flow [L/s]"] *= -1
    logged.write()
    assert "logger.csv mean of flow [L/s] in run 'r3': -1.400" in told(logged)


@pytest.mark.parametrize(
    ("rows", "said"),
    [
        (
            "run,start [s]\na,1\n",
            "runs.csv row 1: the column 'end [s]' is missing; beside logger.csv each run has",
        ),
        ("run,start [s],end [s]\na,90,30\n", "runs.csv row 2, end [s]: '30' is not after the start"),
        (
            "run,start [s],end [s]\na,30,90\nb,80,120\n",
            "runs.csv row 3: the windows of runs 'a' and 'b' overlap",
        ),
        (
            "run,start [s],end [s]\na,1e5,2e5\n",
            "runs.csv row 2, end [s]: the window of run 'a' lies outside the record, which logger.csv has from 0 s to 599.75 s",
        ),
        (
            "run,start [s],end [s]\na,x,90\n",
            "runs.csv row 2, start [s]: 'x' is not a time; write it as logger.csv does",
        ),
        (
            "run,start,end\na,1,90\n",
            "runs.csv row 1, start: logger.csv tells time in s; head the column 'start [s]'",
        ),
        ("run,start [s],end [s]\na,1,9\na,20,90\n", "runs.csv row 3, run: there are two windows of run 'a'"),
        (
            "run,start [s],end [s]\na,10.05,10.2\n",
            "runs.csv: logger.csv has no samples in the window of run 'a', from 10.05 s to 10.2 s",
        ),
    ],
)
def test_windows(logged: Logged, rows: str, said: str) -> None:
    logged.give(rows)
    assert said in told(logged)


def test_offsets_from_utc_on_one_side(logged: Logged) -> None:
    logged.table = stamped(logged.table, "")
    logged.write()
    logged.give("run,start,end\na,2026-03-01T10:00:30Z,2026-03-01T10:01:30Z\n")
    assert "'2026-03-01T10:00:30Z' has an offset from UTC, and the times of logger.csv have none" in told(
        logged
    )


def test_readings_as_well(logged: Logged) -> None:
    (logged.folder / "readings.csv").write_text("run\n", encoding="utf-8")
    assert (
        "logger.csv: readings.csv is there as well; keep the record of the logger or the readings taken by hand"
        in told(logged)
    )


def test_both_kinds_of_file(logged: Logged) -> None:
    logged.table.to_parquet(logged.folder / "logger.parquet", index=False)
    assert "logger.parquet: logger.csv holds a record as well; keep one of the two files" in told(logged)


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (b"", "logger.csv: the file is empty"),
        (b"time [s],flow [L/s]\n", "logger.csv: there is no row with a cell for each heading"),
        (b"a" * 1_500_000, "logger.csv row 1: the first line does not end within 1 MB"),
        (b"time [s],flow [L/s]\n1,\xff\n", "logger.csv row 2: the byte 0xFF is not UTF-8"),
        (b"time [s],x\n1,\x1b[31m\n", "logger.csv row 2: the character U+001B is not printable"),
        (b"\xff\xfet\0i\0", "logger.csv: the file is not plain text in UTF-8"),
        (
            ",".join(f"c{k}" for k in range(5000)).encode() + b"\n1\n",
            "logger.csv row 1: the heading has 5000 columns",
        ),
    ],
)
def test_files_that_are_none(logged: Logged, content: bytes, said: str) -> None:
    logged.csv.write_bytes(content)
    assert said in told(logged)


def test_a_parquet_that_is_none(logged: Logged) -> None:
    logged.csv.unlink()
    (logged.folder / "logger.parquet").write_bytes(b"PAR1 and no more")
    assert "logger.parquet: the file cannot be read as parquet" in told(logged)


@pytest.mark.parametrize(
    ("line", "said"),
    [
        (
            'drift = "1 mm"',
            "survey.toml, logger.drift: the drift limit is a part of the flow; write it in percent",
        ),
        ('drift = "40 %"', "logger.drift: '40 %' is not above 0 % and up to 20 %"),
        ("settle = 30", "logger.settle: 30 has no unit"),
        ('steady = "1 s"', "logger.steady: unknown key 'steady'; known are drift, least_length, settle"),
    ],
)
def test_settings(logged: Logged, line: str, said: str) -> None:
    path = logged.folder / "survey.toml"
    path.write_text(path.read_text(encoding="utf-8") + f"[logger]\n{line}\n", encoding="utf-8")
    assert said.removeprefix("survey.toml, ") in told(logged)


def test_no_steady_window(logged: Logged) -> None:
    (logged.folder / "runs.csv").unlink()
    logged.table["flow [L/s]"] = 0.5 + logged.table["time [s]"] / 300
    logged.write()
    survey = read_survey(logged.folder)
    with pytest.raises(
        SurveyError, match=r"logger.csv: no window of 60 s is steady within 0.5 % of the flow"
    ):
        with_record_read(survey)


def test_a_timed_method(logged: Logged) -> None:
    path = logged.folder / "survey.toml"
    path.write_text(path.read_text(encoding="utf-8") + '[flow]\nmethod = "weighing tank"\n', encoding="utf-8")
    assert "survey.toml flow.method: a weighing tank is read once a run, logger.csv at every moment" in told(
        logged
    ).replace(", flow", " flow")


def test_a_meters_zero_is_no_flow(logged: Logged) -> None:
    still = logged.table["time [s]"] < 150
    logged.table.loc[still, "flow [L/s]"] = [0.0005, -0.0007] * (int(still.sum()) // 2)
    logged.write()
    survey = with_record_read(read_survey(logged.folder))
    assert survey.runs["flow"].iloc[0] == 0
    assert any("Nothing flows where flow [L/s]" in one and "'r0'" in one for one in survey.assumptions)


def test_a_spike_is_taken_out(logged: Logged) -> None:
    at = 400
    logged.table.loc[at, "T1 [mm]"] = 4000.0
    logged.write()
    survey = with_record_read(read_survey(logged.folder))
    rows = logged.inside("r0").drop(index=at)
    assert survey.readings.loc["r0", "T1"] == pytest.approx(rows["T1 [mm]"].mean() / 1000, rel=1e-9)
    assert any(
        "Single samples far off are taken out of the means" in one and "T1 (" in one
        for one in survey.assumptions
    )
