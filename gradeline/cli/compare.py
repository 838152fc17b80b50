"""The command that holds surveys against each other: read and reduce each, compare, print, write."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

import typer

from gradeline.cli.outcome import NOT_WRITTEN, WRONG_USE, attempt
from gradeline.cli.progress import bar
from gradeline.errors import OutputError, UsageError

if TYPE_CHECKING:
    from gradeline.comparison import Comparison
    from gradeline.reduction import Reduction

__all__ = ["Asked", "compare", "compare_surveys", "labels_of"]


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
        typer.echo(f"a comparison takes two surveys or more; found {len(surveys)}", err=True)
        return WRONG_USE
    if len({one.resolve() for one in surveys}) < len(surveys):
        typer.echo("one survey is given twice; name each survey once", err=True)
        return WRONG_USE
    reductions: list[Reduction] = []
    codes = [0]
    with bar(len(surveys)) as shown:
        for source in surveys:
            shown.begin(source.name)
            outcome = attempt(lambda source=source: _reduced(source, asked.level), source, contain=True)  # type: ignore[misc]
            for line in outcome.lines():
                shown.tell(line, err=True)
            codes.append(outcome.code)
            if outcome.code == 0:
                reductions.append(outcome.result)
            shown.end()
    if max(codes):
        typer.echo("nothing was compared: mend the surveys named above, or leave them out", err=True)
        return max(codes)
    try:
        comparison = _compared(reductions, labels_of(surveys), asked)
    except UsageError as error:
        typer.echo(str(error), err=True)
        return WRONG_USE
    return _told(comparison, out=out, overwrite=overwrite, as_json=as_json, units=units)


def _reduced(source: Path, level: float) -> Reduction:
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
) -> int:
    from gradeline.quantities.printing import SI_DISPLAY, US_DISPLAY  # noqa: PLC0415 (loaded when asked for: start-up time)

    display = US_DISPLAY if units == "us" else SI_DISPLAY
    if out is not None:
        from gradeline.report.comparison_output import write_comparison  # noqa: PLC0415 (loaded when asked for: start-up time)

        try:
            write_comparison(comparison, out, overwrite=overwrite, display=display)
        except OutputError as error:
            typer.echo(str(error), err=True)
            return NOT_WRITTEN
    if as_json:
        from gradeline.cli.plain import print_json  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.report.comparison_output import comparison_record  # noqa: PLC0415 (loaded when asked for: start-up time)

        print_json(comparison_record(comparison))
    else:
        from gradeline.report.comparison import comparison_text  # noqa: PLC0415 (loaded when asked for: start-up time)

        typer.echo(comparison_text(comparison, display))
    if out is not None:
        typer.echo(f"Written to {out}", err=True)
    return 0


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
