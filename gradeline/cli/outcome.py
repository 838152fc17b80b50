"""What became of one survey: its result, or what to tell and the exit code that it asks for."""

from __future__ import annotations

import os
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import typer

from gradeline.errors import GradelineError, OutputError, Problem, SurveyError, UsageError

__all__ = [
    "INTERRUPTED",
    "NOT_WRITTEN",
    "SURVEY_PROBLEMS",
    "UNKNOWN",
    "WRONG_USE",
    "Outcome",
    "attempt",
    "unknown_error",
]

UNKNOWN, WRONG_USE, SURVEY_PROBLEMS, NOT_WRITTEN = 1, 2, 3, 4
#: As a shell counts what Ctrl-C ended.
INTERRUPTED = 130


@dataclass(frozen=True)
class Outcome:
    """What became of one survey.

    Parameters
    ----------
    source : Path
        The survey.
    code : int
        Exit code: 0 done, 1 unknown error, 2 wrong use, 3 survey problems, 4 not written.
    result : object
        What the action returned; None where it failed.
    message : str or None
        What went wrong, where it was no list of problems.
    problems : tuple of Problem
        The faults of the survey.
    """

    source: Path
    code: int = 0
    result: Any = None
    message: str | None = None
    problems: tuple[Problem, ...] = ()

    def lines(self) -> list[str]:
        """Return what to tell of a failure, a line each; nothing where there is none."""
        if self.problems:
            count = len(self.problems)
            return [
                f"{self.source}: {count} problem{'s' * (count != 1)}",
                *(f"  {problem}" for problem in self.problems),
            ]
        return [] if self.message is None else [f"{self.source}: {self.message}"]


def unknown_error(error: Exception) -> str:
    """Return what is said of an error that nobody foresaw, in one line."""
    said = " ".join(str(error).split())[:200]
    return (
        f"gradeline met an error that it does not know ({type(error).__name__}: {said}). Please report it, with "
        "the survey if you can; GRADELINE_TRACEBACK=1 in the environment shows where it happened."
    )


def attempt(action: Callable[[], Any], source: Path, *, contain: bool = False) -> Outcome:
    """Do one survey.

    Parameters
    ----------
    action : callable
        What is done.
    source : Path
        The survey, named in messages.
    contain : bool
        Whether an error that nobody foresaw ends this survey alone, as where others wait behind it.

    Returns
    -------
    Outcome
        Never an exception of gradeline's own.
    """
    try:
        return Outcome(source, result=action())
    except typer.BadParameter as error:
        return Outcome(source, WRONG_USE, message=error.message)
    except UsageError as error:
        return Outcome(source, WRONG_USE, message=str(error))
    except OutputError as error:
        return Outcome(source, NOT_WRITTEN, message=str(error))
    except SurveyError as error:
        return Outcome(source, SURVEY_PROBLEMS, problems=error.problems)
    except GradelineError as error:
        return Outcome(source, SURVEY_PROBLEMS, message=str(error))
    except Exception as error:
        if not contain or os.environ.get("GRADELINE_TRACEBACK"):
            raise
        return Outcome(source, UNKNOWN, message=unknown_error(error))
