"""Killed, out of space, not allowed, two at once: the old result or the new one is there whole, and the message says which."""

from __future__ import annotations

import fcntl
import json
import os
import random
import resource
import shutil
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest

TOP = Path(__file__).resolve().parents[2]
SURVEY = TOP / "data_demo" / "copper_bench"
WRITER = Path(__file__).with_name("writer.py")
FEW, MANY = ["json", "csv"], ["json", "csv", "svg"]
TIMES = 20

pytestmark = pytest.mark.skipif(not hasattr(os, "fork"), reason="this system has no fork")


class Writer:
    """The process of writer.py."""

    def __init__(self, *before: str) -> None:
        command = [*before, sys.executable, str(WRITER), str(SURVEY)]
        self._process = subprocess.Popen(
            command,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
            env=os.environ | {"OPENBLAS_NUM_THREADS": "1"},
        )
        self.ready = self._answer() == "ready"

    def _answer(self):
        line = self._process.stdout.readline()
        return json.loads(line) if line else None

    def _ask(self, **asked):
        self._process.stdin.write(json.dumps(asked) + "\n")
        self._process.stdin.flush()
        return self._answer()

    def write(self, which, folder, formats, **more):
        return self.both({"which": which, "folder": str(folder), "formats": formats, **more})[0]

    def both(self, *jobs):
        return self._ask(jobs=list(jobs))

    def look(self, folder):
        """The hash of each file under a folder as that process sees it."""
        return self._ask(look=str(folder))

    def close(self):
        self._process.stdin.close()
        self._process.stdout.close()
        self._process.wait(30)


@pytest.fixture(scope="module")
def writer():
    one = Writer()
    yield one
    one.close()


@pytest.fixture(scope="module")
def whole(writer, tmp_path_factory):
    """The results as they are when nobody disturbs, and how long the new one with its figures takes, s."""
    place = tmp_path_factory.mktemp("whole")
    writer.write("old", place / "old", FEW)
    writer.write("new", place / "new", MANY)  # the first one is slower
    begun = time.perf_counter()
    writer.write("new", place / "new", MANY)
    took = time.perf_counter() - begun
    writer.write("new", place / "plain", FEW)
    found = {name: writer.look(place / name) for name in ("old", "new", "plain")}
    assert set(found["old"]) < set(found["new"])
    assert found["old"]["reduction.json"] != found["new"]["reduction.json"]
    return {**found, "took": took}


def names(folder):
    return sorted(entry.name for entry in folder.iterdir())


def test_killed_at_twenty_random_times(writer, whole, tmp_path):
    """Spread over the time that a replacement takes, so that some fall into the figures, some behind the end."""
    times = random.Random(20261201)
    out = tmp_path / "out"
    killed, found = 0, []
    for _ in range(TIMES):
        assert writer.write("old", out, FEW) == {"killed": False, "said": ""}
        assert names(tmp_path) == ["out"]  # what the killed one before left is cleared away
        after = times.uniform(0, whole["took"])
        killed += writer.write("new", out, MANY, kill_after=after)["killed"]
        left = writer.look(out)
        assert left in (whole["old"], whole["new"]), after
        found.append(left == whole["old"])
    assert killed >= TIMES // 4
    assert any(found)


def test_killed_before_every_step_on_files(writer, whole, tmp_path):
    """Before each thing opened, made, renamed or removed: those of the swap lie too close for a random time."""
    out = tmp_path / "out"
    writer.write("old", out, FEW)
    count = int(writer.write("new", out, FEW, events=0)["said"].split(" events")[0])
    found = []
    for step in range(1, count + 1):
        assert writer.write("old", out, FEW)["said"] == ""
        assert names(tmp_path) == ["out"]
        assert writer.write("new", out, FEW, events=step)["killed"]
        left = writer.look(out)
        assert left in (whole["old"], whole["plain"]), step
        found.append(left == whole["old"])
    assert found == sorted(found, reverse=True)  # the old one up to a step, the new one from there on
    assert {True, False} == set(found)


@pytest.mark.parametrize(
    ("moment", "there"),
    [
        ("before the exchange", "old"),
        ("after the exchange", "plain"),
        ("tidying", "plain"),
        ("after two renames", "plain"),
    ],
)
def test_killed_in_the_swap(writer, whole, tmp_path, moment, there):
    out = tmp_path / "out"
    writer.write("old", out, FEW)
    assert writer.write("new", out, FEW, die_at=moment)["killed"]
    assert writer.look(out) == whole[there]
    assert len(names(tmp_path)) > 1
    writer.write("new", out, FEW)
    assert writer.look(out) == whole["plain"]
    assert names(tmp_path) == ["out"]


def test_killed_between_two_renames(writer, whole, tmp_path):
    """Where folders cannot be exchanged in one step: the old result is whole beside, and the next call puts it back."""
    out = tmp_path / "out"
    writer.write("old", out, FEW)
    assert writer.write("new", out, FEW, die_at="between two renames")["killed"]
    assert not out.exists()
    said = writer.write("new", out, FEW, overwrite=False)["said"]
    assert "is not empty (it holds budget.csv): the earlier report, back from a call that was killed" in said
    assert writer.look(out) == whole["old"]
    assert names(tmp_path) == ["out"]
    writer.write("new", out, FEW, die_at="between two renames")
    assert writer.write("new", out, FEW)["said"] == ""
    assert writer.look(out) == whole["plain"]


def test_a_first_result_is_there_whole_or_not_at_all(writer, whole, tmp_path):
    out = tmp_path / "out"
    assert writer.write("new", out, MANY, kill_after=whole["took"] / 2)["killed"]
    assert not out.exists()
    assert writer.write("new", out, MANY, overwrite=False)["said"] == ""
    assert writer.look(out) == whole["new"]
    assert names(tmp_path) == ["out"]


@pytest.mark.parametrize(
    "hidden", [".out-holidays", ".out-abcdefgh", ".out-backup", ".outer-abcdefgh"], ids=str.strip
)
def test_hidden_folders_of_others_stay(writer, tmp_path, hidden):
    """A name such as killed calls leave is not enough: what is inside has to be ours."""
    (tmp_path / hidden / "new").mkdir(parents=True)
    (tmp_path / hidden / "new" / "photo.jpg").write_text("mine")
    (tmp_path / ".out.lock").write_text("mine")
    assert writer.write("old", tmp_path / "out", FEW)["said"] == ""
    assert names(tmp_path) == sorted([hidden, ".out.lock", "out"])
    assert (tmp_path / ".out.lock").read_text() == "mine"


def test_two_at_once_with_overwrite(writer, whole, tmp_path):
    """Both say that they wrote; what is there is what one of them made."""
    out = tmp_path / "out"
    job = {"folder": str(out), "overwrite": True}
    for _ in range(3):
        told = writer.both({**job, "which": "old", "formats": FEW}, {**job, "which": "new", "formats": MANY})
        assert told == [{"killed": False, "said": ""}] * 2
        assert writer.look(out) in (whole["old"], whole["new"])
        assert names(tmp_path) == ["out"]


def test_four_at_once_without_overwrite(writer, whole, tmp_path):
    """One writes; the others say that something is there."""
    out = tmp_path / "out"
    job = {"folder": str(out), "overwrite": False, "which": "new", "formats": FEW}
    said = sorted(one["said"] for one in writer.both(*[job] * 4))
    assert said[0] == ""
    assert all("is not empty (it holds budget.csv)" in one for one in said[1:])
    assert writer.look(out) == whole["plain"]
    assert names(tmp_path) == ["out"]


def test_a_writer_that_does_not_end_is_not_waited_for_for_ever(writer, whole, tmp_path):
    out = tmp_path / "out"
    writer.write("old", out, FEW)
    with (tmp_path / ".out.lock").open("wb") as held:
        fcntl.flock(held, fcntl.LOCK_EX)
        said = writer.write("new", out, FEW, patience=0.2)["said"]
    assert "another process was writing there for more than" in said
    assert "the folder holds what was there before or what that one made, whole" in said
    assert writer.look(out) == whole["old"]
    assert writer.write("new", out, FEW, patience=0.2)["said"] == ""  # nobody holds the file that is left
    assert names(tmp_path) == ["out"]


def test_a_full_disk(whole, tmp_path):
    """A file system of its own, in memory, seen by that process alone, that holds the old result and not the new one."""
    place = tmp_path / "small"
    place.mkdir()
    mount = f"mount -t tmpfs -o size=256k gradeline '{place}' && exec \"$@\""
    if shutil.which("unshare") is None:
        pytest.skip("this system has no unshare")
    small = Writer("unshare", "--mount", "sh", "-c", mount, "sh")
    try:
        if not small.ready:
            pytest.skip("no file system may be mounted here")
        said = small.write("new", place / "out", MANY)["said"]
        assert said == (
            f"{place / 'out'}: the report could not be written (No space left on device); nothing was left there; choose "
            "another folder with --out"
        )
        assert small.look(place) == {}
        assert small.write("old", place / "out", FEW)["said"] == ""
        said = small.write("new", place / "out", MANY)["said"]
        assert "(No space left on device); the earlier report there stands unchanged" in said
        assert {f"out/{name}": value for name, value in whole["old"].items()} == small.look(place)
    finally:
        small.close()


def command(*arguments):
    return [sys.executable, "-m", "gradeline", *map(str, arguments)]


def run(*arguments, **more):
    done = subprocess.run(command(*arguments), capture_output=True, text=True, check=False, **more)
    assert "Traceback" not in done.stderr, done.stderr
    return done


def test_a_file_that_may_not_grow(tmp_path):
    """The command line's own word and exit code, by a limit on the size of files that holds everywhere."""

    def limit():
        resource.setrlimit(resource.RLIMIT_FSIZE, (20_000, 20_000))

    done = run("reduce", SURVEY, "--out", tmp_path / "out", "--formats", "json,csv", preexec_fn=limit)
    assert done.returncode == 4
    assert (
        "could not be written (File too large); nothing was left there; choose another folder" in done.stderr
    )
    assert names(tmp_path) == []


def test_a_folder_that_may_not_be_written(whole, tmp_path):
    """Root writes anywhere, so that it has to lay the right down first."""
    bound = ()
    if os.geteuid() == 0:
        if shutil.which("setpriv") is None:
            pytest.skip("run by root, and this system has no setpriv")
        bound = ("setpriv", "--bounding-set=-dac_override,-dac_read_search")
    place = tmp_path / "closed"
    place.mkdir()
    humble = Writer(*bound)
    try:
        assert humble.write("old", place / "out", FEW)["said"] == ""
        place.chmod(0o555)
        said = humble.write("new", place / "out", FEW)["said"]
        assert "(Permission denied); the earlier report there stands unchanged; choose another" in said
        said = humble.write("new", place / "other" / "deep", FEW)["said"]
        assert "(Permission denied); nothing was left there; choose another" in said
        assert humble.look(place / "out") == whole["old"]
        assert names(place) == ["out"]
    finally:
        place.chmod(0o755)
        humble.close()


def test_two_commands_into_one_folder(tmp_path):
    """Both through the command line, where one must say that the other was before it."""
    arguments = ("reduce", SURVEY, "--out", tmp_path / "out", "--formats", "json,csv,svg")
    with ThreadPoolExecutor(2) as pool:
        done = list(pool.map(lambda _: run(*arguments), range(2)))
    done.sort(key=lambda one: one.returncode)
    assert [one.returncode for one in done] == [0, 4]
    assert f"Written to {tmp_path / 'out'}" in done[0].stderr
    assert "is not empty (it holds " in done[1].stderr
    run(*arguments[:2], "--out", tmp_path / "alone", *arguments[4:])
    alone, out = (
        {path.name: path.read_bytes() for path in (tmp_path / name).rglob("*") if path.is_file()}
        for name in ("alone", "out")
    )
    assert alone == out
    assert names(tmp_path) == ["alone", "out"]


def test_a_sheet_is_replaced_whole(tmp_path):
    """A file of its own goes the same way: an earlier one stays where the disk refuses."""
    sheet = tmp_path / "sheet.pdf"
    assert run("sheet", SURVEY, "--out", sheet).returncode == 0
    before = sheet.read_bytes()

    def limit():
        resource.setrlimit(resource.RLIMIT_FSIZE, (1_000, 1_000))

    done = run("sheet", SURVEY, "--out", sheet, "--overwrite", "--runs", "3", preexec_fn=limit)
    assert done.returncode == 4
    assert "could not be written (File too large)" in done.stderr
    assert sheet.read_bytes() == before
    assert names(tmp_path) == ["sheet.pdf"]
    (tmp_path / ".sheet.pdf-unfinished").write_bytes(b"half")  # of a killed call
    assert run("sheet", SURVEY, "--out", sheet, "--overwrite", "--runs", "3").returncode == 0
    assert sheet.read_bytes() != before
    assert names(tmp_path) == ["sheet.pdf"]
