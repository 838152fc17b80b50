"""One fault of a survey: the sound survey, what is changed in it, and the place that the message has to name."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

from tests.broken.bases import Files

__all__ = [
    "GIVEN",
    "Broken",
    "P",
    "R",
    "T",
    "U",
    "added",
    "also",
    "cells",
    "recoded",
    "source_in",
    "swap",
    "whole",
    "without",
]

#: What is given beside one table of heads.
GIVEN: Mapping[str, str] = {"diameter": "26.6 mm", "flow": "0.84 L/s", "temperature": "18 degC"}

T, P, R, U = "survey.toml", "taps.csv", "readings.csv", "runs.csv"
_FILES = {"heads": "heads.csv", "workbook": "bench.xlsx"}


def source_in(folder: Path, base: str) -> Path:
    """Return what is given to the program: the folder, or the one file in it."""
    return folder / _FILES[base] if base in _FILES else folder


@dataclass(frozen=True)
class Broken:
    """A survey with one fault.

    Parameters
    ----------
    kind : str
        The kind of fault.
    name : str
        The fault.
    base : str
        The sound survey it is made of.
    change : callable
        Changes the files.
    place : str
        What the message names: file, row and column or key, as far as the fault has them; ``{source}`` for what was
        given to the program.
    folders : tuple of str
        Folders to make where files should be.
    given : mapping or None
        Beside a table of heads, in place of `GIVEN`.
    """

    kind: str
    name: str
    base: str
    change: Callable[[Files], None]
    place: str
    folders: tuple[str, ...] = ()
    given: Mapping[str, str] | None = None

    @property
    def options(self) -> Mapping[str, str]:
        """What is given beside the survey."""
        if self.given is not None:
            return self.given
        return GIVEN if self.base == "heads" else {}


def swap(file: str, old: str | bytes, new: str | bytes) -> Callable[[Files], None]:
    """Replace a text in a file, once."""
    old, new = (one.encode() if isinstance(one, str) else one for one in (old, new))

    def change(files: Files) -> None:
        assert old in files[file], f"{old!r} is not in {file}"
        files[file] = files[file].replace(old, new, 1)

    return change


def whole(file: str, content: str | bytes) -> Callable[[Files], None]:
    """Replace a whole file."""
    data = content.encode() if isinstance(content, str) else content
    return lambda files: files.update({file: data})


def without(*names: str) -> Callable[[Files], None]:
    """Take files away."""

    def change(files: Files) -> None:
        for name in names:
            del files[name]

    return change


def added(text: str) -> Callable[[Files], None]:
    """Add lines to the line's description."""
    return lambda files: files.update({T: files[T] + text.encode()})


def recoded(file: str, encoding: str, old: str = "", new: str = "") -> Callable[[Files], None]:
    """Write a file in another encoding."""
    return lambda files: files.update({file: files[file].decode().replace(old, new, 1).encode(encoding)})


def also(*changes: Callable[[Files], None]) -> Callable[[Files], None]:
    def change(files: Files) -> None:
        for each in changes:
            each(files)

    return change


def cells(base: str, kind: str, cases: list[tuple[str, str, str, str, str]]) -> list[Broken]:
    """Cases that change a text of a file: name, file, old, new, place."""
    return [
        Broken(
            kind, name, base, swap(file, old, new), place if place.startswith((T, R)) else f"{file}{place}"
        )
        for name, file, old, new, place in cases
    ]
