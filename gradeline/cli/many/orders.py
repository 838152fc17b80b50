"""What is asked of one survey among others, and the little that comes back: both cross from process to process."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal, Protocol

from gradeline.cli.many.choices import Choices

__all__ = ["Done", "Order", "Watcher"]

#: Formats that are written from the result tables alone.
_PLAIN = frozenset({"json", "csv"})


@dataclass(frozen=True)
class Order:
    """One survey to reduce.

    Parameters
    ----------
    source : Path
        The survey, as it was named; messages and results call it so.
    target : Path or None
        Where its results go; None: nowhere.
    choices : Choices
        How to reduce.
    formats : tuple of str
        What to write.
    overwrite : bool
        Whether earlier results may be replaced.
    units : {"si", "us"}
        Units of the reader.
    paper : {"a4", "letter"}
        Sheets of the PDF.
    several : bool
        Whether it is one of several: then it is told in one line, and an error that nobody foresaw ends it alone.
    as_json : bool
        Whether its results are to come back as JSON.
    summary : bool
        Whether its rows of the summary are to come back.
    folder : Path or None
        The folder that paths start from, where another machine or process may start from elsewhere.
    """

    source: Path
    target: Path | None
    choices: Choices
    formats: tuple[str, ...]
    overwrite: bool = False
    units: Literal["si", "us"] = "si"
    paper: Literal["a4", "letter"] = "a4"
    several: bool = False
    as_json: bool = False
    summary: bool = False
    folder: Path | None = None

    @property
    def results_alone(self) -> bool:
        """Whether nothing is drawn or laid out, so that the result tables are all that is needed."""
        return self.several and (self.target is None or _PLAIN.issuperset(self.formats))

    @property
    def is_free(self) -> bool:
        """Whether nothing lies where the results go, so that what a dead worker leaves there is this call's own."""
        target = self.target
        try:
            return target is not None and (
                not target.exists() or (target.is_dir() and not any(target.iterdir()))
            )
        except OSError:
            return False

    def at(self, path: Path) -> Path:
        """Return a path as this process finds it."""
        return path if self.folder is None else self.folder / path


@dataclass(frozen=True)
class Done:
    """What became of one survey: text and numbers, no tables, so that memory stays flat over thousands.

    Parameters
    ----------
    source : Path
        The survey.
    code : int
        Exit code that it asks for.
    messages : tuple of str
        What to tell on the error stream, a line each.
    told : str or None
        What was found.
    record : str or None
        The results as JSON, where asked for.
    rows : tuple of mapping
        Its rows of the summary, where asked for.
    """

    source: Path
    code: int
    messages: tuple[str, ...] = ()
    told: str | None = None
    record: str | None = None
    rows: tuple[Mapping[str, Any], ...] = ()


class Watcher(Protocol):
    """Who is told when a survey is begun and when it is done: a progress bar."""

    def begin(self, name: str) -> None:
        """Hear what is begun."""

    def end(self) -> None:
        """Hear that one more is done."""
