"""The means of windows against pandas on the same file, in every form that a logger writes."""

from __future__ import annotations

import datetime
import hashlib
import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import gradeline
from gradeline.loader import read_survey
from gradeline.loader.logger.engine import MEMORY, engine
from gradeline.reduction.record import with_record_read
from gradeline.survey import Survey
from tests.logger.made import BEGIN, TAPS, Logged, log, slope, stamped

#: The block sums are rounded to 1e-12 of a column's size.
CLOSE = 1e-11


def against_pandas(survey: Survey, logged: Logged) -> None:
    """The plain means are those that pandas has of the same rows."""
    for run, _, _ in logged.windows:
        rows = logged.inside(run)
        for tap in TAPS:
            assert survey.readings.loc[run, tap] == pytest.approx(
                rows[f"{tap} [mm]"].mean() / 1000, rel=CLOSE
            )
        flow = survey.runs.set_index("run")["flow"][run]
        assert flow == pytest.approx(rows["flow [L/s]"].mean() / 1000, rel=CLOSE)
        temperature = survey.runs.set_index("run")["temperature"][run]
        assert temperature == pytest.approx(rows["temperature [degC]"].mean() + 273.15, rel=CLOSE)


def test_means_of_given_windows(logged: Logged) -> None:
    survey = read_survey(logged.folder)
    against_pandas(survey, logged)
    assert survey.runs["flow"].iloc[0] == 0
    assert survey.runs["run"].tolist() == ["r0", "r1", "r2", "r3"]


def test_blocks_hold_every_sample_once(logged: Logged) -> None:
    record = read_survey(logged.folder).record
    assert record is not None
    table = logged.table["T3 [mm]"].to_numpy() / 1000
    k = record.names.index("T3")
    assert record.count[:, k].sum() == len(table)
    assert record.high[:, k].max() == pytest.approx(table.max(), rel=CLOSE)
    assert record.low[:, k].min() == pytest.approx(table.min(), rel=CLOSE)
    for place, (run, _, _) in enumerate(logged.windows):
        rows = logged.inside(run)["T3 [mm]"].to_numpy() / 1000
        mine = record.window == place
        count, mean = record.count[mine, k], record.mean[mine, k]
        assert count.sum() == len(rows)
        # Of equal length but perhaps the last.
        assert set(count[:-1].tolist()) == {count[0]}
        middle = (count * mean).sum() / count.sum()
        whole = record.squares[mine, k].sum() + (count * (mean - middle) ** 2).sum()
        assert whole / len(rows) == pytest.approx(rows.var(), rel=1e-6)


@pytest.mark.parametrize("form", ["parquet", "comma", "crlf", "mark"])
def test_the_same_numbers_in_another_form(logged: Logged, form: str) -> None:
    plain = read_survey(logged.folder)
    if form in ("parquet", "comma"):
        logged.write(parquet=form == "parquet", comma=form == "comma")
    elif form == "crlf":
        logged.csv.write_bytes(logged.csv.read_bytes().replace(b"\n", b"\r\n"))
    else:
        logged.csv.write_bytes(b"\xef\xbb\xbf" + logged.csv.read_bytes())
    other = read_survey(logged.folder)
    np.testing.assert_allclose(other.readings, plain.readings, rtol=CLOSE)
    np.testing.assert_allclose(other.runs["flow"], plain.runs["flow"], rtol=CLOSE)
    said = any("set off by a comma" in sentence for sentence in other.assumptions)
    assert said == (form == "comma")


@pytest.mark.parametrize("zone", ["", "Z", "+02:00"])
def test_timestamps(logged: Logged, zone: str) -> None:
    plain = read_survey(logged.folder)
    logged.table = stamped(logged.table, zone)
    logged.write()
    rows = [
        f"{run},{(BEGIN + datetime.timedelta(seconds=a)).isoformat()}{zone},"
        f"{(BEGIN + datetime.timedelta(seconds=b)).isoformat()}{zone}"
        for run, a, b in logged.windows
    ]
    logged.give("run,start,end\n" + "\n".join(rows) + "\n")
    survey = read_survey(logged.folder)
    np.testing.assert_allclose(survey.readings, plain.readings, rtol=CLOSE)
    assert survey.record is not None
    offset = {"": "", "Z": "+00:00", "+02:00": "+02:00"}[zone]
    assert survey.record.clock.told(90.0) == "2026-03-01T10:01:30" + offset


def test_timestamps_of_two_offsets_are_one_clock(logged: Logged) -> None:
    plain = read_survey(logged.folder)
    early, late = stamped(logged.table, "+01:00"), stamped(logged.table, "Z")
    shifted = late["time"].str.replace("T10:", "T09:", regex=False)
    half = len(early) // 2
    early.loc[half:, "time"] = shifted[half:]
    logged.table = early
    logged.write()
    begin = BEGIN - datetime.timedelta(hours=1)
    rows = [
        f"{run},{(begin + datetime.timedelta(seconds=a)).isoformat()}Z,{(begin + datetime.timedelta(seconds=b)).isoformat()}Z"
        for run, a, b in logged.windows
    ]
    logged.give("run,start,end\n" + "\n".join(rows) + "\n")
    np.testing.assert_allclose(read_survey(logged.folder).readings, plain.readings, rtol=CLOSE)


def test_minutes_and_windows_off_the_blocks(logged: Logged) -> None:
    logged.windows = [("b", 3.501 * 60, 4.7 * 60), ("a", 0.333 * 60, 1.5 * 60), ("c", 6.013 * 60, 6.52 * 60)]
    rows = "b,3.501,4.7\na,0.333,1.5\nc,6.013,6.52\n"
    logged.give("run,start [min],end [min]\n" + rows)
    survey = read_survey(logged.folder)
    against_pandas(survey, logged)
    assert survey.runs["run"].tolist() == ["b", "a", "c"]
    assert with_record_read(survey).runs["run"].tolist() == ["b", "a", "c"]


def test_what_runs_csv_tells_beside_the_windows(logged: Logged) -> None:
    logged.table = logged.table.drop(columns="temperature [degC]")
    logged.write()
    rows = "".join(f"{run},{a},{b},17.5,steady\n" for run, a, b in logged.windows)
    logged.give("run,start [s],end [s],temperature [degC],note\n" + rows)
    survey = with_record_read(read_survey(logged.folder))
    assert survey.runs["temperature"].tolist() == [290.65] * 4


def test_columns_of_no_use_are_told(logged: Logged) -> None:
    logged.table["battery [V]"] = 12.1
    logged.write()
    survey = read_survey(logged.folder)
    assert any("are not read: battery [V]" in sentence for sentence in survey.assumptions)
    against_pandas(survey, logged)


def test_both_limbs_of_a_gauge(tmp_path: Path) -> None:
    """The scatter of a deflection is that of the difference of its limbs, not of both as if they were apart."""
    made = log(tmp_path / "limbs")
    text = (made.folder / "survey.toml").read_text(encoding="utf-8")
    gauge = '[gauge.m1]\nkind = "u-tube"\nupstream = "T1"\ndownstream = "T5"\ngauge_fluid = "mercury"\n'
    (made.folder / "survey.toml").write_text(text + gauge, encoding="utf-8")
    taps = "".join(f"{tap},{at},board\n" for tap, at in TAPS.items())
    (made.folder / "taps.csv").write_text("tap,chainage [m],gauge\n" + taps, encoding="utf-8")
    rng = np.random.default_rng(3)
    sway = 4.0 * rng.standard_normal(len(made.table))
    made.table["m1 left [mm]"] = np.round(100 + sway, 2)
    made.table["m1 right [mm]"] = np.round(101 + sway + 0.2 * rng.standard_normal(len(sway)), 2)
    made.write()
    survey = read_survey(made.folder)
    record = survey.record
    assert record is not None
    k = record.names.index("m1")
    label = next(one.label for one in survey.observations if one.gauge == "m1")
    read = with_record_read(survey)
    for run, _, _ in made.windows:
        rows = made.inside(run)
        both = (rows["m1 right [mm]"] - rows["m1 left [mm]"]) / 1000
        assert survey.readings.loc[run, label] == pytest.approx(both.mean(), rel=1e-8)
        assert read.readings.loc[run, label] == pytest.approx(both.mean(), abs=5e-6)
    spread = np.sqrt(record.squares[:, k].sum() / record.count[:, k].sum())
    assert spread < 0.3e-3
    assert read.gauge("m1").reading_u is not None
    assert read.gauge("m1").reading_u < 0.3e-3


def test_path_with_signs_of_a_pattern(logged: Logged, tmp_path: Path) -> None:
    strange = tmp_path / "a[1] * 'β' {x}"
    shutil.copytree(logged.folder, strange)
    np.testing.assert_array_equal(read_survey(strange).readings, read_survey(logged.folder).readings)


def test_the_same_to_the_last_digit_whatever_the_cores(tmp_path: Path) -> None:
    """Threads split a csv of more than a few MB between them; sums of blocks on a seam may not show where."""
    made = log(tmp_path / "long", rate=100.0, seconds=400.0)
    made.windows = [("all", 0.0, 1e4)]
    made.give()
    found = [read_survey(made.folder, threads=threads).record for threads in (1, 2, 3)]
    first = found[0]
    assert first is not None
    for other in found[1:]:
        assert other is not None
        for name in ("count", "mean", "squares", "low", "high", "time_start"):
            np.testing.assert_array_equal(getattr(other, name), getattr(first, name), err_msg=name)


def test_hash_and_progress(logged: Logged) -> None:
    shares: list[float] = []
    survey = read_survey(logged.folder, progress=shares.append)
    whole = hashlib.sha256(logged.csv.read_bytes()).hexdigest()
    assert {file.name: file.sha256 for file in survey.files}["logger.csv"] == whole
    assert all(0 <= share <= 1 for share in shares)


def test_engine_is_held_back(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    with engine(1) as connection:
        settings = dict(
            connection.execute(
                "SELECT name, value FROM duckdb_settings() WHERE name IN ('memory_limit', 'temp_directory', "
                "'autoinstall_known_extensions', 'autoload_known_extensions', 'threads')"
            ).fetchall()
        )
        connection.execute("SELECT sum(range) FROM range(100000)").fetchall()
    # 500 MB are 476.8 MiB.
    assert MEMORY == "500MB"
    assert settings["memory_limit"].startswith("476.8")
    assert settings["temp_directory"] == ""
    assert settings["autoinstall_known_extensions"] == "false"
    assert settings["autoload_known_extensions"] == "false"
    assert settings["threads"] == "1"
    assert not list(tmp_path.iterdir())


def test_uncertainty_is_that_of_correlated_samples(tmp_path: Path) -> None:
    """Over many seeds the means scatter as their uncertainty says: an independent check of the whole way."""
    off, size = [], []
    for seed in range(12):
        made = log(tmp_path / f"s{seed}", seconds=120.0, seed=100 + seed)
        survey = with_record_read(read_survey(made.folder))
        assert survey.record is not None
        table = survey.record.statistics
        mine = table[table["column"].isin([survey.record.names.index(tap) for tap in TAPS])]
        for row in mine.itertuples():
            flow = (0.0, 0.4, 0.8, 1.4)[int(str(row.run)[1:])]
            truth = 0.9 - slope(flow) * TAPS[survey.record.names[int(row.column)]]
            off.append(float(row.mean) - truth)
            size.append(float(row.u))
    ratio = np.sqrt(np.mean(np.square(off)) / np.mean(np.square(size)))
    # Of 240 means it is known within 0.05. s/√n of the samples would make it √((1 + φ)/(1 − φ)) = 2.4 with φ = 0.7
    # (Box, Jenkins and Reinsel 1994, sec. 2.1).
    assert 0.8 < ratio < 1.1


def test_found_windows(logged: Logged) -> None:
    (logged.folder / "runs.csv").unlink()
    survey = with_record_read(read_survey(logged.folder))
    assert survey.record is not None
    windows = survey.record.windows
    assert [window.given for window in windows] == [False] * 4
    for k, window in enumerate(windows):
        assert 150.0 * k <= window.start < 150.0 * k + 40
        assert 150.0 * (k + 1) - 15 < window.end <= 150.0 * (k + 1)
    assert survey.runs["flow"].iloc[0] == 0
    np.testing.assert_allclose(survey.runs["flow"][1:], [0.4e-3, 0.8e-3, 1.4e-3], rtol=2e-3)
    assert survey.readings.shape == (4, 5)
    assert with_record_read(survey) is survey
    for sentence in ("at least 60 s long, 30 s after a change", "4 windows of logger.csv found steady"):
        assert any(sentence in one for one in survey.assumptions)


def test_reduces_to_the_same_as_readings_by_hand(logged: Logged, tmp_path: Path) -> None:
    """A survey with the means written down gives the same slopes."""
    reduction = gradeline.reduce(read_survey(logged.folder), monte_carlo=False)
    by_hand = tmp_path / "hand"
    by_hand.mkdir()
    for name in ("survey.toml", "taps.csv"):
        shutil.copy(logged.folder / name, by_hand / name)
    rows = []
    for run, _, _ in logged.windows:
        mean = logged.inside(run).mean()
        rows.append({"run": run, **mean.drop("time [s]").to_dict()})
    pd.DataFrame(rows).to_csv(by_hand / "readings.csv", index=False)
    other = gradeline.reduce(read_survey(by_hand), monte_carlo=False)
    np.testing.assert_allclose(
        reduction.runs["slope"].to_numpy(float), other.runs["slope"].to_numpy(float), rtol=2e-3
    )


def test_stated_uncertainty_and_that_of_the_record(logged: Logged) -> None:
    survey = with_record_read(read_survey(logged.folder))
    assert survey.record is not None
    table = survey.record.statistics
    mine = table[table["column"] == survey.record.names.index("T2")]
    size = np.sqrt((mine["u"] ** 2).mean())
    assert survey.tap("T2").reading_u == pytest.approx(np.hypot(0.3e-3, size))
    flow = table[(table["column"] == survey.record.names.index("flow")) & (table["run"] == "r3")]
    assert survey.runs.set_index("run")["flow_u"]["r3"] == pytest.approx(float(flow["widened_u"].iloc[0]))
