"""A progress bar on the error stream, where somebody sees it."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

import typer

if TYPE_CHECKING:
    from rich.progress import Progress, TaskID

__all__ = ["Bar", "bar", "reading", "wants_bar"]


def wants_bar() -> bool:
    """Whether the error stream is a terminal that draws, and nobody asked for plain text."""
    return sys.stderr.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"


class Bar:
    """A bar that makes room for each line that is printed; without a terminal the lines alone.

    Parameters
    ----------
    progress, task
        What draws it; None: nothing is drawn.
    """

    def __init__(self, progress: Progress | None = None, task: TaskID | None = None) -> None:
        self._progress, self._task = progress, task

    def begin(self, name: str) -> None:
        """Say what is being done."""
        if self._progress is not None and self._task is not None:
            self._progress.update(self._task, description=name)

    def end(self) -> None:
        """One more is done."""
        if self._progress is not None and self._task is not None:
            self._progress.advance(self._task)

    def tell(self, line: str, *, err: bool = False) -> None:
        """Print a line: a result, or a message to the error stream."""
        if self._progress is not None:
            self._progress.stop()  # takes the bar away: both streams may be one terminal
        typer.echo(line, err=err)
        if self._progress is not None:
            self._progress.start()


@contextmanager
def bar(total: int, noun: str = "surveys") -> Iterator[Bar]:
    """Show a bar for so many things to do; none for a single one, and none without a terminal."""
    if total < 2 or not wants_bar():
        yield Bar()
        return
    from rich.console import Console  # noqa: PLC0415 (loaded when asked for: start-up time)
    from rich.progress import (  # noqa: PLC0415 (loaded when asked for: start-up time)
        BarColumn,
        MofNCompleteColumn,
        Progress,
        TextColumn,
        TimeRemainingColumn,
    )

    progress = Progress(
        BarColumn(),
        MofNCompleteColumn(),
        TextColumn(noun + ", at {task.description}", markup=False),  # a name may hold square brackets
        TimeRemainingColumn(),
        console=Console(stderr=True),
        transient=True,
    )
    with progress:
        yield Bar(progress, progress.add_task("the first", total=total))


@contextmanager
def reading(name: str, *, shown: bool = True) -> Iterator[Callable[[float], None] | None]:
    """Give what is told the share of a large file that was read, 0 to 1, and draws it; None where nobody sees it.

    Parameters
    ----------
    name : str
        What is read.
    shown : bool
        Whether a bar may be drawn: no other one is.
    """
    if not shown or not wants_bar():
        yield None
        return
    drawn: list[Progress] = []

    def told(share: float) -> None:
        if not drawn:  # nothing is drawn for what tells nothing: a file that is read at once
            from rich.console import Console  # noqa: PLC0415 (loaded when asked for: start-up time)

            # Loaded when asked for as well.
            from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeRemainingColumn  # noqa: PLC0415

            progress = Progress(
                BarColumn(),
                TaskProgressColumn(),
                TextColumn("of {task.description} read", markup=False),  # a name may hold square brackets
                TimeRemainingColumn(),
                console=Console(stderr=True),
                transient=True,
            )
            progress.add_task(name, total=1.0)
            progress.start()
            drawn.append(progress)
        drawn[0].update(drawn[0].task_ids[0], completed=share)

    try:
        yield told
    finally:
        for progress in drawn:
            progress.stop()
