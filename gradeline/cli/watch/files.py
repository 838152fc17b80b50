"""Which files belong to a survey, when they change, and when they are whole."""

from __future__ import annotations

import os
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from threading import Event

__all__ = ["ENDINGS", "State", "SurveyFiles", "settled", "ticks"]

#: What a survey is read from.
ENDINGS = frozenset({".toml", ".csv", ".tsv", ".parquet", ".xlsx", ".xlsm"})
#: Size and time of the last change (ns) of each file.
State = dict[Path, tuple[int, int]]

#: s: a file is whole when nothing has changed for so long.
_QUIET = 0.3
#: s between two looks where the system tells of no change (network drives).
_LOOK = 1.0


@dataclass(frozen=True)
class SurveyFiles:
    """The files of a survey.

    Parameters
    ----------
    source : Path
        A folder, or a survey in one file.
    out : Path or None
        A folder with results, which is no part of the survey wherever it lies.
    """

    source: Path
    out: Path | None = None

    @property
    def folder(self) -> Path:
        """Where changes are looked for: a file is watched by its folder, since many programs save by renaming."""
        return self.source if self.source.is_dir() else self.source.parent

    def _found(self) -> Iterator[Path]:
        if not self.source.is_dir():
            if self.source.is_file():
                yield self.source
            return
        results = None if self.out is None else self.out.resolve()
        for folder, folders, names in os.walk(self.source):
            at = Path(folder)
            folders[:] = [
                name
                for name in folders
                if not name.startswith(".") and name != "reduction" and (at / name).resolve() != results
            ]
            for name in names:
                # ~$ and .~lock are the marks of spreadsheet programs on a file that is open
                if Path(name).suffix.casefold() in ENDINGS and not name.startswith((".", "~")):
                    yield at / name

    def state(self) -> State:
        """Return size and time of each file; one that goes away meanwhile is left out."""
        found: State = {}
        for path in self._found():
            try:
                about = path.stat()
            except OSError:
                continue
            found[path] = (about.st_size, about.st_mtime_ns)
        return found

    def locked(self) -> list[Path]:
        """Return the files that cannot be opened for reading now: another program is writing them."""
        held = []
        for path in self._found():
            try:
                with path.open("rb") as stream:
                    stream.read(1)
            except FileNotFoundError:
                continue
            except OSError:
                held.append(path)
        return held


def settled(
    files: SurveyFiles, stop: Event, *, patience: float, quiet: float = _QUIET
) -> tuple[State, list[Path]]:
    """Wait until every file is whole: nothing has changed for a while and all of them can be opened.

    Parameters
    ----------
    files : SurveyFiles
        The survey's.
    stop : Event
        Ends the wait.
    quiet : float
        How long nothing may change, s.
    patience : float
        How long the wait takes at most, s.

    Returns
    -------
    state : State
        Of the files.
    locked : list of Path
        Those that were still held after all the patience.
    """
    before, until = files.state(), time.monotonic() + patience
    while True:
        stopped = stop.wait(quiet)
        now, held = files.state(), files.locked()
        if stopped or (now == before and not held) or time.monotonic() > until:
            return now, held
        before = now


def ticks(folder: Path, stop: Event) -> Iterator[None]:
    """Yield whenever something changes in a folder, and each second besides, until told to stop.

    The system's own notice is quick, but it fails on network drives and where its watches are used up; so the files
    are looked at each second as well.
    """
    from watchfiles import watch  # noqa: PLC0415 (loaded when asked for: start-up time)

    yield None
    try:
        for _ in watch(
            folder,
            watch_filter=None,
            debounce=200,
            step=50,
            rust_timeout=int(1000 * _LOOK),
            yield_on_timeout=True,
            stop_event=stop,
            ignore_permission_denied=True,
        ):
            yield None
    except (OSError, RuntimeError):
        while not stop.wait(_LOOK):
            yield None
