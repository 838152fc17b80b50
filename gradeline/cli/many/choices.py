"""How a survey is to be reduced, and a survey reduced so."""

from __future__ import annotations

import importlib
import threading
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import typer

if TYPE_CHECKING:
    from gradeline.reduction import Reduction
    from gradeline.survey import Survey

__all__ = ["Choices", "reduced"]


@dataclass(frozen=True)
class Choices:
    """How surveys are to be reduced; the names of the options of `gradeline reduce`.

    Parameters
    ----------
    level : float
        Coverage of the intervals.
    correct : {"static", "offsets", "none"}
        Which offsets are taken off.
    keep_all : bool
        Whether flagged readings stay in the fits.
    exclude : tuple of str
        Readings left out by hand.
    monte_carlo : bool
        Whether intervals are held against Monte Carlo.
    diameter, flow, temperature : str or None
        Beside one table of heads.
    """

    level: float
    correct: Literal["static", "offsets", "none"]
    keep_all: bool
    exclude: tuple[str, ...]
    monte_carlo: bool
    diameter: str | None = None
    flow: str | None = None
    temperature: str | None = None


def reduced(
    source: Path,
    choices: Choices,
    *,
    named: Path | None = None,
    results_alone: bool = False,
    several: bool = False,
) -> Reduction:
    """Read and reduce one survey.

    Parameters
    ----------
    source : Path
        Where it lies.
    choices : Choices
        How to reduce.
    named : Path, optional
        What the results call it, where that is another path to it: on another machine than the one that asks.
    results_alone : bool
        Whether the tables that figures and pages need beside the results are left out.
    several : bool
        Whether it is one of several surveys: a logger's file is then read by one core, without a bar of its own.
    """
    from gradeline.cli.progress import reading  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

    loading = None if several else _load_meanwhile(source)
    with reading(source.name, shown=not several) as progress:
        read = read_survey(
            source,
            diameter=choices.diameter,
            flow=choices.flow,
            temperature=choices.temperature,
            progress=progress,
            threads=1 if several else None,
        )
    if loading is not None:
        loading.join()
    if named is not None and str(named) != read.source:
        read = replace(read, source=str(named))
    if read.record is not None:
        from gradeline.reduction.record import with_record_read  # noqa: PLC0415 (only a logger's file needs it)

        read = with_record_read(read)
    _check_exclusions(choices.exclude, read)
    from gradeline.reduction import reduce  # noqa: PLC0415 (loaded when asked for: start-up time)

    less: dict[str, Any] = {"results_alone": True} if results_alone else {}
    return reduce(
        read,
        level=choices.level,
        correct=choices.correct,
        keep_all=choices.keep_all,
        exclude=choices.exclude,
        monte_carlo=choices.monte_carlo,
        **less,
    )


def _load_meanwhile(source: Path) -> threading.Thread | None:
    """Load what the reduction needs while a logger's file is read: its engine leaves this process to wait."""
    if not any((source / f"logger.{kind}").is_file() for kind in ("csv", "parquet")):
        return None

    def load() -> None:
        with suppress(ImportError):  # told where it is needed
            for name in ("gradeline.reduction.record", "scipy.ndimage"):
                importlib.import_module(name)

    found = threading.Thread(target=load)
    found.start()
    return found


def _check_exclusions(excluded: Sequence[str], survey: Survey) -> None:
    """Every exclusion names readings that the survey has."""
    taps, runs = set(survey.readings.columns), set(survey.readings.index)
    for text in excluded:
        if text in taps:
            continue
        run, _, tap = text.rpartition(":")
        if tap not in taps:
            raise typer.BadParameter(
                f"--exclude {text}: there is no tap {tap!r}; taps are {', '.join(map(str, survey.readings.columns))}"
            )
        if run not in runs:
            raise typer.BadParameter(f"--exclude {text}: there is no run {run!r}; write --exclude RUN:TAP")
