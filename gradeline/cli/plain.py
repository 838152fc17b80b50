"""Results as JSON for other programs: SI units, null where nothing is known, never NaN."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping
from dataclasses import fields, is_dataclass
from typing import TYPE_CHECKING, Any

import typer

from gradeline.cli.outcome import Outcome

if TYPE_CHECKING:
    from gradeline.survey import Survey

__all__ = ["conclude", "outcome_record", "plain", "print_json", "survey_record"]

#: What a survey says, without what the reduction alone needs of how it was written down.
_OF_SURVEY = (
    "title",
    "date",
    "source",
    "files",
    "fluid",
    "site",
    "reaches",
    "fittings",
    "offtakes",
    "side_valves",
    "wall_histories",
    "gauges",
    "flow_gauges",
    "flow",
    "taps",
    "observations",
    "stated",
    "runs",
    "assumptions",
    "cautions",
    "units",
)


def plain(value: Any) -> Any:
    """Return a value as JSON can hold it.

    Dataclasses become objects by field, tables lists of rows, numbers that are not finite null; anything else is
    written as text.

    Examples
    --------
    >>> from gradeline.quantities import Measured
    >>> plain({"bore": Measured(0.02664, None), "shares": (0.5, float("nan"))})
    {'bore': {'value': 0.02664, 'u': None}, 'shares': [0.5, None]}
    """
    if value is None or isinstance(value, (bool, int, str)):
        return value
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if is_dataclass(value) and not isinstance(value, type):
        return {each.name: plain(getattr(value, each.name)) for each in fields(value)}
    if hasattr(value, "to_dict") and hasattr(value, "columns"):
        return [plain(row) for row in value.to_dict("records")]
    if isinstance(value, Mapping):
        return {str(key): plain(each) for key, each in value.items()}
    if hasattr(value, "tolist"):  # an array, or one of its numbers
        return plain(value.tolist())
    if isinstance(value, Iterable):
        return [plain(each) for each in value]
    return str(value)


def survey_record(survey: Survey) -> dict[str, Any]:
    """Return what was understood of a survey: its line, gauges, runs and readings in SI units."""
    record = {name: plain(getattr(survey, name)) for name in _OF_SURVEY}
    from gradeline.reduction.flow import metered_flow  # noqa: PLC0415 (loaded when asked for: start-up time)

    # The flow that a meter's readings come to has cautions of its own.
    record["cautions"] = plain(metered_flow(survey).survey.cautions)
    readings = survey.readings.to_dict("split")
    record["readings"] = [
        {"run": str(run), **dict(zip(map(str, readings["columns"]), plain(row), strict=True))}
        for run, row in zip(readings["index"], readings["data"], strict=True)
    ]
    return record


def outcome_record(outcome: Outcome, **results: Any) -> dict[str, Any]:
    """Return what became of a survey, with its results under their names (null where it failed)."""
    return {
        "source": str(outcome.source),
        "exit_code": outcome.code,
        "message": outcome.message,
        "problems": [plain(problem) for problem in outcome.problems],
        **results,
    }


def print_json(value: Any) -> None:
    """Print a value as JSON; the terminal's own encoding makes no difference, since all else than ASCII is escaped."""
    print(json.dumps(value, indent=1, allow_nan=False), flush=True)


def conclude(outcome: Outcome, *, as_json: bool) -> None:
    """Tell a failure on stderr, with `as_json` as a record on stdout too, and end with its exit code; else do nothing.

    Parameters
    ----------
    outcome : Outcome
        What became of the one thing that a command did.
    as_json : bool
        Whether the command was asked for JSON.

    Raises
    ------
    typer.Exit
        Where the outcome is a failure.
    """
    for line in outcome.lines():
        typer.echo(line, err=True)
    if outcome.code:
        if as_json:
            print_json(outcome_record(outcome))
        raise typer.Exit(outcome.code)
