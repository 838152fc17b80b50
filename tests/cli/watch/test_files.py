"""Which files are watched, and that half-written and locked ones are waited for."""

from __future__ import annotations

import threading
import time
from pathlib import Path
from threading import Event

import pytest

from gradeline.cli.watch.files import SurveyFiles, settled, ticks


def test_what_belongs_to_a_survey(survey: Path) -> None:
    """Calibrations in a folder of their own do; results, marks of open spreadsheets and notes do not."""
    (survey / "calibrations").mkdir()
    (survey / "calibrations" / "gauge.csv").write_text("")
    for folder in ("reduction", ".git", "results"):
        (survey / folder).mkdir()
        (survey / folder / "runs.csv").write_text("")
    for name in (
        "~$readings.xlsx",
        ".~lock.readings.csv#",
        ".readings.csv.swp",
        "notes.txt",
        "readings.csv~",
    ):
        (survey / name).write_text("")
    found = {path.relative_to(survey).as_posix() for path in SurveyFiles(survey, survey / "results").state()}
    assert found == {"survey.toml", "taps.csv", "readings.csv", "calibrations/gauge.csv"}


def test_a_survey_in_one_file_is_that_file_alone(tmp_path: Path) -> None:
    for name in ("heads.csv", "other.csv"):
        (tmp_path / name).write_text("x")
    files = SurveyFiles(tmp_path / "heads.csv")
    assert files.folder == tmp_path
    assert list(files.state()) == [tmp_path / "heads.csv"]
    (tmp_path / "heads.csv").unlink()
    assert files.state() == {}


def test_a_file_that_grows_is_waited_for(survey: Path) -> None:
    """Written in ten parts, 50 ms apart: the wait ends when the last one is there."""
    path = survey / "readings.csv"
    whole = path.read_text()

    def write() -> None:
        with path.open("w") as stream:
            for start in range(0, len(whole), len(whole) // 10 + 1):
                stream.write(whole[start : start + len(whole) // 10 + 1])
                stream.flush()
                time.sleep(0.05)

    writer = threading.Thread(target=write)
    writer.start()
    time.sleep(0.02)
    state, held = settled(SurveyFiles(survey), Event(), quiet=0.25, patience=10)
    assert not writer.is_alive()
    assert held == []
    assert state[path][0] == path.stat().st_size == len(whole)
    assert path.read_text() == whole
    writer.join()


def test_a_file_that_another_program_holds_is_waited_for(
    survey: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """As a spreadsheet program does on some systems: opening it fails until it is let go."""
    opened, locked = Path.open, {"on": True}

    def refuse(self: Path, *arguments, **keys):
        if locked["on"] and self.name == "readings.csv":
            raise PermissionError(13, "Permission denied")
        return opened(self, *arguments, **keys)

    monkeypatch.setattr(Path, "open", refuse)
    threading.Timer(0.6, lambda: locked.update(on=False)).start()
    began = time.monotonic()
    _, held = settled(SurveyFiles(survey), Event(), quiet=0.05, patience=10)
    assert held == []
    assert time.monotonic() - began >= 0.55

    locked["on"] = True
    _, held = settled(SurveyFiles(survey), Event(), quiet=0.05, patience=0.2)
    assert held == [survey / "readings.csv"]


def test_the_wait_ends_when_told(survey: Path) -> None:
    stop = Event()
    stop.set()
    began = time.monotonic()
    settled(SurveyFiles(survey), stop, quiet=30, patience=60)
    assert time.monotonic() - began < 5


def test_a_saved_file_is_noticed_at_once_and_the_end_too(survey: Path) -> None:
    stop = Event()
    noticed = ticks(survey, stop)
    next(noticed)  # the first look needs no change
    threading.Timer(0.3, lambda: (survey / "readings.csv").write_text("saved")).start()
    before, found = SurveyFiles(survey).state(), False
    until = time.monotonic() + 10
    while not found and time.monotonic() < until:
        next(noticed)
        found = SurveyFiles(survey).state() != before
    assert found
    stop.set()
    assert len(list(noticed)) <= 1


def test_where_the_system_gives_no_notice_the_files_are_looked_at(
    survey: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """As where all its watches are used up."""

    def none_left(*_arguments, **_keys):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("watchfiles.watch", none_left)
    monkeypatch.setattr("gradeline.cli.watch.files._LOOK", 0.01)
    noticed = ticks(survey, Event())
    assert [next(noticed) for _ in range(3)] == [None] * 3
