"""The command that holds surveys against each other: read and reduce each, compare, print, write."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

import typer

from gradeline.cli.outcome import NOT_WRITTEN, WRONG_USE, Outcome, attempt
from gradeline.cli.progress import bar
from gradeline.errors import OutputError, UsageError

if TYPE_CHECKING:
    from gradeline.comparison import Comparison
    from gradeline.reduction import Reduction

__all__ = ["Asked", "compare", "compare_surveys", "labels_of"]

#: Files of a reduction that somebody might take for the survey.
_OF_REDUCTION = frozenset({"reduction.json", "carried.json"})


@dataclass(frozen=True)
class Asked:
    """How the surveys are to be compared, as `gradeline.compare` takes it.

    Parameters
    ----------
    reynolds : float or None
        Common Re.
    same_meter, same_gauges : bool
        What is the same beside the pipe.
    until : str or None
        A date.
    level : float
        Coverage.
    """

    reynolds: float | None
    same_meter: bool
    same_gauges: bool
    until: str | None
    level: float


def labels_of(surveys: Sequence[Path]) -> list[str]:
    """Return what to call each survey: the name of its folder or file, with as much of the path as sets it apart.

    Examples
    --------
    >>> labels_of([Path("main/2019"), Path("main/2024")]), labels_of([Path("north/a"), Path("south/a")])
    (['2019', '2024'], ['north/a', 'south/a'])
    """
    parts = [Path(one.stem if one.suffix else one.name) for one in surveys]
    whole = [one.resolve() for one in surveys]
    for depth in range(1, 9):
        names = [
            "/".join([*path.parts[-depth:-1], part.name]) for path, part in zip(whole, parts, strict=True)
        ]
        if len(set(names)) == len(names):
            return names
    return [str(one) for one in surveys]


def compare_surveys(
    surveys: Sequence[Path],
    asked: Asked,
    *,
    out: Path | None,
    overwrite: bool,
    as_json: bool,
    units: Literal["si", "us"] = "si",
) -> int:
    """Compare surveys and tell what was found.

    Parameters
    ----------
    surveys : sequence of Path
        At least two.
    asked : Asked
        How.
    out : Path or None
        Folder for figures and tables; None: nothing is written.
    overwrite : bool
        Whether an earlier comparison there may be replaced.
    as_json : bool
        Whether the result goes to stdout as JSON instead of text.
    units : {"si", "us"}
        Units of the reader.

    Returns
    -------
    int
        Exit code. A survey that cannot be reduced ends the comparison once all have been looked at.
    """
    if len(surveys) < 2:
        why = f"a comparison takes two surveys or more; found {len(surveys)}"
        return _refused(WRONG_USE, why, (), as_json=as_json)
    if len({one.resolve() for one in surveys}) < len(surveys):
        return _refused(WRONG_USE, "one survey is given twice; name each survey once", (), as_json=as_json)
    outcomes: list[Outcome] = []
    with bar(len(surveys)) as shown:
        for source in surveys:
            shown.begin(source.name)
            # The default binds this source, which the type checker cannot see.
            outcome = attempt(lambda source=source: _reduced(source, asked.level), source, contain=True)  # type: ignore[misc]
            for line in outcome.lines():
                shown.tell(line, err=True)
            outcomes.append(outcome)
            shown.end()
    if code := max(one.code for one in outcomes):
        why = "nothing was compared: mend the surveys named above, or leave them out"
        return _refused(code, why, outcomes, as_json=as_json)
    try:
        comparison = _compared([one.result for one in outcomes], labels_of(surveys), asked)
    except UsageError as error:
        return _refused(WRONG_USE, str(error), outcomes, as_json=as_json)
    try:
        _told(comparison, out=out, overwrite=overwrite, as_json=as_json, units=units)
    except OutputError as error:
        return _refused(NOT_WRITTEN, str(error), outcomes, as_json=as_json)
    return 0


def _refused(code: int, message: str, outcomes: Sequence[Outcome], *, as_json: bool) -> int:
    """Say why nothing was compared, with `as_json` as a record on stdout too."""
    typer.echo(message, err=True)
    if as_json:
        from gradeline.cli.plain import outcome_record, print_json  # noqa: PLC0415 (loaded when asked for: start-up time)

        told = [outcome_record(one) for one in outcomes]
        print_json({"exit_code": code, "message": message, "surveys": told})
    return code


def _no_survey(source: Path) -> str | None:
    """Say what to give instead of what a reduction wrote; None where it is none."""
    folder = source if source.is_dir() else source.parent
    if not (folder / "reduction.json").is_file() or (folder / "survey.toml").is_file():
        return None
    if not source.is_dir() and source.name not in _OF_REDUCTION:
        return None
    survey = folder.resolve().parent
    remedy = "give the folder of the survey"
    if (survey / "survey.toml").is_file():
        remedy += f", {folder.parent if folder.name else survey}"
    return f"this is what a reduction wrote, while a comparison fits the runs of the surveys anew; {remedy}"


def _reduced(source: Path, level: float) -> Reduction:
    if (refusal := _no_survey(source)) is not None:
        raise UsageError(refusal)
    from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

    survey = read_survey(source)
    from gradeline.reduction import reduce  # noqa: PLC0415 (loaded when asked for: start-up time)

    # The intervals that Monte Carlo would check are not read here.
    return reduce(survey, level=level, monte_carlo=False)


def _compared(reductions: Sequence[Reduction], labels: Sequence[str], asked: Asked) -> Comparison:
    from gradeline.comparison import compare as compare_reductions  # noqa: PLC0415 (loaded when asked for: start-up time)

    return compare_reductions(
        reductions,
        labels=labels,
        reynolds=asked.reynolds,
        same_meter=asked.same_meter,
        same_gauges=asked.same_gauges,
        until=asked.until,
        level=asked.level,
    )


def _told(
    comparison: Comparison, *, out: Path | None, overwrite: bool, as_json: bool, units: Literal["si", "us"]
) -> None:
    from gradeline.quantities.printing import SI_DISPLAY, US_DISPLAY  # noqa: PLC0415 (loaded when asked for: start-up time)

    display = US_DISPLAY if units == "us" else SI_DISPLAY
    if out is not None:
        from gradeline.report.comparison_output import write_comparison  # noqa: PLC0415 (loaded when asked for: start-up time)

        write_comparison(comparison, out, overwrite=overwrite, display=display)
    if as_json:
        from gradeline.cli.plain import print_json  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.report.comparison_output import comparison_record  # noqa: PLC0415 (loaded when asked for: start-up time)

        print_json(comparison_record(comparison))
    else:
        from gradeline.report.comparison import comparison_text  # noqa: PLC0415 (loaded when asked for: start-up time)

        typer.echo(comparison_text(comparison, display))
    if out is not None:
        typer.echo(f"Written to {out}", err=True)


def compare(
    surveys: Annotated[
        list[Path], typer.Argument(metavar="SURVEY SURVEY...", help="Surveys: folders or .xlsx workbooks.")
    ],
    same_meter: Annotated[
        bool,
        typer.Option(
            "--same-meter",
            help="The flow meter is the same in all, so that its calibration leaves the differences. By default it is taken as "
            "another: a common error that is none would make a change look surer than it is.",
        ),
    ] = False,
    same_gauges: Annotated[
        bool,
        typer.Option("--same-gauges", help="The gauges are the same in all; by default they are others."),
    ] = False,
    until: Annotated[
        str | None, typer.Option("--until", metavar="DATE", help="Carry the line of ageing on to 2035-01-01.")
    ] = None,
    reynolds: Annotated[
        float | None,
        typer.Option(
            "--reynolds",
            metavar="RE",
            help="Compare f at this Re; by default in the middle of what all tested.",
        ),
    ] = None,
    level: Annotated[
        float, typer.Option("--level", metavar="P", help="Coverage of the intervals, 0.95 by default.")
    ] = 0.95,
    out: Annotated[
        Path | None, typer.Option("--out", metavar="DIR", help="Folder for figures, tables and text.")
    ] = None,
    overwrite: Annotated[
        bool, typer.Option("--overwrite", help="Replace results that are there already.")
    ] = False,
    units: Annotated[
        Literal["si", "us"],
        typer.Option("--units", help="Units of text and figures; json and csv are always SI."),
    ] = "si",
    as_json: Annotated[
        bool, typer.Option("--json", help="Print the result as JSON, for other programs.")
    ] = False,
) -> None:
    """Compare surveys of one line, or groups on one rig: is a change of the wall real, and how fast does it age.

    Errors that the surveys share (bore, tap positions, gravity) are taken out of the differences.

    Example: gradeline compare main/2019 main/2024 --until 2035-01-01 --out compared
    """
    if not 0 < level < 1:
        raise typer.BadParameter(
            f"{level:g} is no coverage; it lies between 0 and 1, such as 0.95", param_hint="--level"
        )
    asked = Asked(reynolds, same_meter, same_gauges, until, level)
    code = compare_surveys(surveys, asked, out=out, overwrite=overwrite, as_json=as_json, units=units)
    if code:
        raise typer.Exit(code)
