"""The errors that reach a user, each with the place, the rule, the value found and the remedy."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

__all__ = [
    "GradelineError",
    "OutputError",
    "Problem",
    "QuantityError",
    "ReductionError",
    "SurveyError",
    "UsageError",
]


class GradelineError(Exception):
    """The base of every error that gradeline raises on purpose."""


class QuantityError(GradelineError, ValueError):
    """A text that is not a number with a unit of the wanted dimension."""


class ReductionError(GradelineError, ValueError):
    """A survey that is sound as a file but from which nothing at all can be reduced as asked."""


class UsageError(GradelineError, ValueError):
    """An argument that does not fit what it was given with."""


class OutputError(GradelineError, OSError):
    """A result that could not be written."""


# Files in the order in which a survey is read, by name without ending; any other file comes first.
_ORDER = ("survey", "taps", "runs", "readings")


@dataclass(frozen=True)
class Problem:
    """One fault of a survey.

    Parameters
    ----------
    file : str
        Name of the file inside the survey folder, such as ``readings.csv``; of a workbook with its sheet.
    row : int or None
        Line number as an editor or a spreadsheet program shows it (the heading is 1); None where the whole file is
        meant.
    column : str or None
        Heading of the column, or the TOML key such as ``reach[1].diameter``.
    message : str
        The rule, the value found and the remedy, in one sentence.

    Examples
    --------
    >>> str(Problem("readings.csv", 7, "T4 [mm]", "'12,4x' is not a number; leave the cell empty"))
    "readings.csv row 7, T4 [mm]: '12,4x' is not a number; leave the cell empty"
    """

    file: str
    row: int | None
    column: str | None
    message: str

    @property
    def place(self) -> tuple[int, str, int]:
        """What problems are sorted by: the file in reading order, then the row."""
        stem = self.file.rpartition(" sheet ")[2].partition(".")[0]
        return (_ORDER.index(stem) if stem in _ORDER else -1, self.file, self.row or 0)

    def __str__(self) -> str:
        row = f" row {self.row}" if self.row is not None else ""
        comma = "," if row else ""
        column = f"{comma} {self.column}" if self.column else ""
        return f"{self.file}{row}{column}: {self.message}"


class SurveyError(GradelineError, ValueError):
    """A survey with problems; all of them are told at once.

    Parameters
    ----------
    problems : iterable of Problem
        At least one; sorted by place here, and left in their order within one row.

    Examples
    --------
    >>> error = SurveyError([Problem("taps.csv", None, None, "the file is missing; add it")])
    >>> print(error)
    taps.csv: the file is missing; add it
    """

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems = tuple(sorted(problems, key=lambda problem: problem.place))
        super().__init__("\n".join(str(problem) for problem in self.problems))

    def __reduce__(self) -> tuple[type[SurveyError], tuple[tuple[Problem, ...]]]:
        return type(self), (self.problems,)
