"""`gradeline reduce`: every survey in turn, and what is told of each."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import typer

from gradeline.cli.outcome import Outcome, attempt
from gradeline.cli.progress import bar

if TYPE_CHECKING:
    from gradeline.reduction import Reduction
    from gradeline.survey import Survey

__all__ = ["Choices", "reduce_surveys", "reduced", "targets_of"]


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


def reduced(source: Path, choices: Choices) -> Reduction:
    """Read and reduce one survey."""
    from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

    read = read_survey(source, diameter=choices.diameter, flow=choices.flow, temperature=choices.temperature)
    _check_exclusions(choices.exclude, read)
    from gradeline.reduction import reduce  # noqa: PLC0415 (loaded when asked for: start-up time)

    return reduce(
        read,
        level=choices.level,
        correct=choices.correct,
        keep_all=choices.keep_all,
        exclude=choices.exclude,
        monte_carlo=choices.monte_carlo,
    )


def reduce_surveys(
    surveys: Sequence[Path],
    targets: Sequence[Path | None],
    choices: Choices,
    *,
    formats: tuple[str, ...],
    overwrite: bool,
    as_json: bool,
    units: Literal["si", "us"] = "si",
    paper: Literal["a4", "letter"] = "a4",
) -> int:
    """Reduce surveys, write their reports and tell what was found.

    Parameters
    ----------
    surveys : sequence of Path
        One is told in full, several in a line each.
    targets : sequence of Path or None
        Where the results of each go; None: nowhere.
    choices : Choices
        How to reduce.
    formats, overwrite, paper
        As `gradeline.report.write` takes them.
    as_json : bool
        Whether the results go to stdout as JSON instead.
    units : {"si", "us"}
        Units of the reader.

    Returns
    -------
    int
        The highest exit code.
    """
    several = len(surveys) > 1
    outcomes: list[Outcome] = []
    records: list[dict[str, Any]] = []
    with bar(len(surveys)) as shown:
        for source, target in zip(surveys, targets, strict=True):
            shown.begin(source.name)
            outcome = attempt(
                lambda source=source, target=target: _one(  # type: ignore[misc]
                    source, target, choices, formats=formats, overwrite=overwrite, units=units, paper=paper
                ),
                source,
                contain=several,
            )
            for line in outcome.lines():
                shown.tell(line, err=True)
            if as_json:
                records.append(_record(outcome, target))
            elif outcome.code == 0:
                shown.tell(_told(outcome.result, source, several=several, units=units))
            if outcome.code == 0 and target is not None and not several:
                shown.tell(f"Written to {_page(target, formats)}", err=True)
            outcomes.append(Outcome(source, outcome.code))  # the tables of forty surveys need not be kept
            shown.end()
        if several:
            done = sum(outcome.code == 0 for outcome in outcomes)
            shown.tell(f"{done} of {len(surveys)} surveys reduced{_where(targets) if done else ''}", err=True)
    if as_json:
        from gradeline.cli.plain import print_json  # noqa: PLC0415 (loaded when asked for: start-up time)

        print_json({"surveys": records})
    return max(outcome.code for outcome in outcomes)


def _one(
    source: Path,
    target: Path | None,
    choices: Choices,
    *,
    formats: tuple[str, ...],
    overwrite: bool,
    units: str,
    paper: Literal["a4", "letter"],
) -> Reduction:
    reduction = reduced(source, choices)
    if target is not None:
        from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.report import write  # noqa: PLC0415 (loaded when asked for: start-up time)

        write(reduction, target, formats=formats, overwrite=overwrite, display=DISPLAYS[units], paper=paper)
    return reduction


def _told(reduction: Reduction, source: Path, *, several: bool, units: str) -> str:
    from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report import one_line, terminal_summary  # noqa: PLC0415 (loaded when asked for: start-up time)

    display = DISPLAYS[units]
    return f"{source}: {one_line(reduction, display)}" if several else terminal_summary(reduction, display)


def _record(outcome: Outcome, target: Path | None) -> dict[str, Any]:
    from gradeline.cli.plain import outcome_record  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.output import program_version  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.record import as_json  # noqa: PLC0415 (loaded when asked for: start-up time)

    done = outcome.code == 0
    return outcome_record(
        outcome,
        written_to=str(target) if done and target is not None else None,
        reduction=json.loads(as_json(outcome.result, program_version())) if done else None,
    )


def _where(targets: Sequence[Path | None]) -> str:
    folders = {target.parent for target in targets if target is not None}
    if not folders:
        return ""
    return f"; results in {folders.pop()}" if len(folders) == 1 else "; results beside each"


def _page(target: Path, formats: tuple[str, ...]) -> Path:
    for name in ("html", "pdf"):
        if name in formats:
            return target / f"report.{name}"
    return target


def targets_of(surveys: Sequence[Path], out: Path | None) -> list[Path]:
    """Return where the results of each survey go.

    Raises
    ------
    typer.BadParameter
        Where two surveys of one name would go to one folder.
    """
    if out is None:
        return [
            source.with_name(f"{source.stem}_reduction") if source.is_file() else source / "reduction"
            for source in surveys
        ]
    if len(surveys) == 1:
        return [out]
    targets = [out / (source.stem if source.is_file() else source.resolve().name) for source in surveys]
    for place, target in enumerate(targets):
        if target in targets[:place]:
            raise typer.BadParameter(
                f"two surveys are called {target.name!r}; reduce them to different --out"
            )
    return targets


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
