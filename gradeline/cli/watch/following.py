"""Reducing a survey anew whenever its files change."""

from __future__ import annotations

import json
import signal
import tempfile
import time
import webbrowser
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from threading import Event
from types import FrameType
from typing import Literal

import typer

from gradeline.cli.outcome import NOT_WRITTEN, SURVEY_PROBLEMS, WRONG_USE, Outcome, attempt
from gradeline.cli.reducing import Choices, reduced
from gradeline.cli.watch.files import SurveyFiles, settled, ticks
from gradeline.cli.watch.live import Live
from gradeline.cli.watch.server import serving
from gradeline.quantities.printing import DISPLAYS

__all__ = ["Follower", "watch_survey"]

#: What is written: drawing the figures once more for png would take as long again.
FORMATS = ("html", "json", "csv", "svg")
#: s: a file that another program holds is waited for so long before that is told.
PATIENCE = 10.0
#: s: problems stand so long before they are told, since a program may write the files of a survey one by one.
_GRACE = 0.7


class Follower:
    """Keeps the report of a survey up to date.

    Parameters
    ----------
    source : Path
        The survey.
    out : Path
        Where its report goes.
    choices : Choices
        How to reduce.
    overwrite : bool
        Whether a report that was there before may be replaced; its own it always replaces.
    units : {"si", "us"}
        Of the reader.
    as_json : bool
        Whether each event is told as JSON, one a line.
    """

    def __init__(
        self,
        source: Path,
        out: Path,
        choices: Choices,
        *,
        overwrite: bool = False,
        units: Literal["si", "us"] = "si",
        as_json: bool = False,
    ) -> None:
        self.source, self.out, self.choices, self.display = source, out, choices, DISPLAYS[units]
        self.files = SurveyFiles(source, out)
        self.live = Live(str(source))
        self.stop = Event()
        self._overwrite, self._as_json = overwrite, as_json
        self._seen: object = None

    def step(self) -> Outcome | None:
        """Reduce where something changed since the last time; None where nothing did.

        Files that are being written are waited for, and problems must stand for a moment before they count.
        """
        if self.files.state() == self._seen:
            return None
        state, held = settled(self.files, self.stop, patience=PATIENCE)
        outcome = attempt(self._reduce, self.source, contain=True)
        if outcome.code == SURVEY_PROBLEMS and not self.stop.wait(_GRACE):
            state, held = settled(self.files, self.stop, patience=PATIENCE)
            outcome = attempt(self._reduce, self.source, contain=True)
        if self.stop.is_set():
            return None
        # A file that another program holds is tried again though nothing changes.
        self._seen = None if held else state
        self._publish(outcome)
        return outcome

    def _reduce(self) -> object:
        from gradeline.report import write  # noqa: PLC0415 (loaded when asked for: start-up time)

        reduction = reduced(self.source, self.choices)
        write(reduction, self.out, formats=FORMATS, overwrite=self._overwrite, display=self.display)
        self._overwrite = True
        return reduction

    def _publish(self, outcome: Outcome) -> None:
        when, before = time.strftime("%H:%M:%S"), self.live.shown
        if outcome.code == 0:
            report = (self.out / "report.html").read_text(encoding="utf-8")
            version = self.live.good(report, when)
        else:
            told = [str(problem) for problem in outcome.problems] or [outcome.message or "unknown"]
            version = self.live.bad(told, when)
        if version != before.version:
            self._tell(outcome, when, version)

    def _tell(self, outcome: Outcome, when: str, version: str) -> None:
        if self._as_json:
            from gradeline.cli.plain import outcome_record  # noqa: PLC0415 (loaded when asked for: start-up time)

            print_line({"event": "reduced", "time": when, "version": version, **outcome_record(outcome)})
            return
        if outcome.code == 0:
            from gradeline.report import one_line  # noqa: PLC0415 (loaded when asked for: start-up time)

            typer.echo(f"{when} {one_line(outcome.result, self.display)}")
        for line in outcome.lines():
            typer.echo(f"{when} {line}", err=True)

    def follow(self) -> None:
        """Keep the report up to date until told to stop."""
        for _ in ticks(self.files.folder, self.stop):
            self.step()


def print_line(value: dict[str, object]) -> None:
    """Print an event as JSON on a line of its own."""
    print(json.dumps(value, allow_nan=False), flush=True)


def watch_survey(
    source: Path,
    choices: Choices,
    *,
    out: Path | None,
    overwrite: bool,
    units: Literal["si", "us"],
    open_browser: bool,
    as_json: bool,
) -> int:
    """Follow a survey until Ctrl-C.

    Parameters
    ----------
    source : Path
        The survey; it must be there.
    choices : Choices
        How to reduce.
    out : Path or None
        Where the report goes; None: a folder that is removed at the end.
    overwrite : bool
        Whether an earlier report in `out` may be replaced.
    units : {"si", "us"}
        Of the reader.
    open_browser : bool
        Whether the page is opened.
    as_json : bool
        Whether events are told as JSON.

    Returns
    -------
    int
        The exit code: 0 where it was stopped by Ctrl-C, else that of what kept it from beginning.
    """
    if not source.exists():
        missing = attempt(lambda: reduced(source, choices), source)
        for line in missing.lines():
            typer.echo(line, err=True)
        return missing.code
    with _folder(out) as target, _ended_like_interrupted():
        follower = Follower(source, target, choices, overwrite=overwrite, units=units, as_json=as_json)
        try:
            return _serve(follower, open_browser=open_browser, as_json=as_json)
        except KeyboardInterrupt:
            typer.echo("Stopped.", err=True)
            return 0


def _serve(follower: Follower, *, open_browser: bool, as_json: bool) -> int:
    with serving(follower.live, follower.out) as server:
        if as_json:
            print_line(
                {
                    "event": "serving",
                    "address": server.address,
                    "source": str(follower.source),
                    "results": str(follower.out),
                }
            )
        else:
            typer.echo(f"Watching {follower.source}: {server.address} (Ctrl-C ends)")
        if open_browser:
            webbrowser.open(server.address)
        first = follower.step()
        if first is not None and first.code in (WRONG_USE, NOT_WRITTEN):
            return first.code  # saving a file will not mend the command line
        follower.follow()
    return 0


@contextmanager
def _folder(out: Path | None) -> Iterator[Path]:
    """The folder of the results; one that nobody named goes away again."""
    if out is not None:
        yield out
        return
    with tempfile.TemporaryDirectory(prefix="gradeline-") as folder:
        yield Path(folder) / "reduction"


@contextmanager
def _ended_like_interrupted() -> Iterator[None]:
    """Let a request to end (SIGTERM) clean up as Ctrl-C does."""

    def interrupt(_signal: int, _frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    before = signal.signal(signal.SIGTERM, interrupt)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)
