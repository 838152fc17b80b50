"""The commands: parse, call, print. Nothing is computed here.

Modules that take time to load are imported by the command that needs them, so that help and mistakes in the
command line are answered at once.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

import typer

from gradeline.errors import GradelineError, OutputError, SurveyError, UsageError

if TYPE_CHECKING:
    from gradeline.survey import Survey

__all__ = ["FORMATS", "app"]

#: What can be written, by the name that ``--formats`` takes.
FORMATS = ("html", "json", "csv", "svg", "png")

_WRONG_USE, _SURVEY_PROBLEMS, _NOT_WRITTEN = 2, 3, 4

# For one table of heads, which says nothing of its line.
_Diameter = Annotated[
    str | None, typer.Option("--diameter", metavar="Q", help='Bore, for one table of heads: "26.6 mm".')
]
_Flow = Annotated[
    str | None, typer.Option("--flow", metavar="Q", help='Flow, for one table of heads: "0.84 L/s".')
]
_Temperature = Annotated[
    str | None,
    typer.Option("--temperature", metavar="Q", help='Temperature, for one table of heads: "18 degC".'),
]
_SURVEYS = "Surveys: folders, .xlsx workbooks, or tables of heads (.csv)."

app = typer.Typer(
    name="gradeline",
    help="From manometer and gauge readings along a pipe to head loss, friction factor and wall roughness, each "
    "with its uncertainty.\n\nExample: gradeline reduce data_demo/copper_bench",
    epilog="Exit codes: 0 done (flags are results, not failures), 1 an error that gradeline does not know, 2 wrong "
    "use, 3 the survey has problems, 4 output could not be written; of several surveys the highest.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)


def _print_version(asked: bool) -> None:
    if asked:
        from importlib.metadata import version  # noqa: PLC0415 (loaded when asked for: start-up time)

        typer.echo(f"gradeline {version('gradeline')}")
        raise typer.Exit


@app.callback()
def _gradeline(
    _version: Annotated[
        bool, typer.Option("--version", callback=_print_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    """Nothing to do before a command."""


def _say(text: str) -> None:
    """A message, to the error stream."""
    typer.echo(text, err=True)


def _tell_problems(source: Path, error: GradelineError) -> None:
    if isinstance(error, SurveyError):
        count = len(error.problems)
        _say(f"{source}: {count} problem{'s' * (count != 1)}")
        for problem in error.problems:
            _say(f"  {problem}")
    else:
        _say(f"{source}: {error}")


@app.command(short_help="Tell every problem of surveys, and what was understood.")
def check(
    surveys: Annotated[list[Path], typer.Argument(metavar="SURVEY...", help=_SURVEYS)],
    diameter: _Diameter = None,
    flow: _Flow = None,
    temperature: _Temperature = None,
) -> None:
    """Load surveys, tell every problem at once, and say what was understood.

    Example: gradeline check data_demo/copper_bench
    """

    def one(source: Path) -> None:
        from gradeline.cli.understood import understood  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

        read = read_survey(source, diameter=diameter, flow=flow, temperature=temperature)
        if source != surveys[0]:
            typer.echo()
        typer.echo(understood(read))
        _say(f"{source}: no problems")

    code = max(_attempt(one, source) for source in surveys)
    if code:
        raise typer.Exit(code)


@app.command(short_help="Tell what each gauge can show, and which gauge fluid suits.")
def gauges(
    surveys: Annotated[list[Path], typer.Argument(metavar="SURVEY...", help=_SURVEYS)],
) -> None:
    """Tell the range of head that each gauge can show, its resolution as head, and the gauge fluid that suits.

    A heavy gauge fluid keeps a large difference on the board, one of a density near the flowing fluid's magnifies a small
    one. The choice goes by the survey's own differences.

    Example: gradeline gauges data_demo/copper_bench
    """

    def one(source: Path) -> None:
        from gradeline.cli.gauges import gauges_told  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

        if source != surveys[0]:
            typer.echo()
        try:
            survey = read_survey(source)
        except UsageError:  # nothing is given beside it here: only a table of heads asks for more
            raise UsageError(
                "one table of heads has no gauges; give a survey that describes them in survey.toml"
            ) from None
        typer.echo(gauges_told(survey))

    code = max(_attempt(one, source) for source in surveys)
    if code:
        raise typer.Exit(code)


@app.command(short_help="Write a commented survey to fill in.")
def new(
    folder: Annotated[Path, typer.Argument(metavar="DIR", help="Folder to make; absent or empty.")],
) -> None:
    """Write a commented survey to fill in.

    Example: gradeline new my_pipe
    """
    from gradeline.cli.new import NEW_FILES, write_new  # noqa: PLC0415 (loaded when asked for: start-up time)

    try:
        write_new(folder)
    except OutputError as error:
        _say(str(error))
        raise typer.Exit(_NOT_WRITTEN) from None
    _say(f"Written to {folder}: {', '.join(NEW_FILES)}")
    _say(f"Fill in the values that begin with '?', then run: gradeline check {folder}")


def _level(value: float) -> float:
    if not 0 < value < 1:
        raise typer.BadParameter(f"{value:g} is no coverage; it lies between 0 and 1, such as 0.95")
    return value


def _formats(value: str) -> str:
    chosen = [each.strip() for each in value.split(",")]
    unknown = [each for each in chosen if each not in FORMATS]
    if unknown:
        raise typer.BadParameter(f"unknown format {unknown[0]!r}; choose from {','.join(FORMATS)}")
    return value


@app.command(short_help="Reduce surveys and write their reports.")
def reduce(
    surveys: Annotated[list[Path], typer.Argument(metavar="SURVEY...", help=_SURVEYS)],
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            metavar="DIR",
            help="Folder for the results: SURVEY/reduction by default, or SURVEY_reduction beside a survey in one "
            "file; of several surveys, a folder in DIR each.",
        ),
    ] = None,
    overwrite: Annotated[
        bool, typer.Option("--overwrite", help="Replace results that are there already.")
    ] = False,
    level: Annotated[
        float, typer.Option("--level", metavar="P", callback=_level, help="Coverage of the intervals.")
    ] = 0.95,
    formats: Annotated[
        str,
        typer.Option(
            "--formats",
            metavar="LIST",
            callback=_formats,
            help=f"What to write, set apart by commas: any of {', '.join(FORMATS)}.",
        ),
    ] = ",".join(FORMATS),
    correct: Annotated[
        Literal["static", "none"],
        typer.Option("--correct", help="Whether the static runs correct the offsets of the taps."),
    ] = "static",
    keep_all: Annotated[bool, typer.Option("--keep-all", help="Fit with the flagged readings too.")] = False,
    exclude: Annotated[
        list[str] | None,
        typer.Option("--exclude", metavar="TAP|RUN:TAP", help="Leave a reading out; may be repeated."),
    ] = None,
    diameter: _Diameter = None,
    flow: _Flow = None,
    temperature: _Temperature = None,
) -> None:
    """Reduce surveys: fit every run, find wrong readings, estimate the wall, write the report.

    Example: gradeline reduce data_demo/copper_bench --exclude T4 --out results

    A table with the columns chainage [m] and head [mm] alone: gradeline reduce heads.csv --diameter "26.6 mm" --flow
    "0.84 L/s" --temperature "18 degC"
    """
    chosen = tuple(each.strip() for each in formats.split(","))
    targets = _targets(surveys, out)
    excluded = tuple(exclude or ())

    def one(source: Path, target: Path) -> None:
        from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

        read = read_survey(source, diameter=diameter, flow=flow, temperature=temperature)
        _check_exclusions(excluded, read)
        from gradeline.reduction import reduce as reduce_survey  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.report import terminal_summary, write  # noqa: PLC0415 (loaded when asked for: start-up time)

        reduction = reduce_survey(read, level=level, correct=correct, keep_all=keep_all, exclude=excluded)
        write(reduction, target, formats=chosen, overwrite=overwrite)
        typer.echo(terminal_summary(reduction))
        _say(f"Written to {target / 'report.html' if 'html' in chosen else target}")

    code = max(_attempt(one, source, target) for source, target in zip(surveys, targets, strict=True))
    if code:
        raise typer.Exit(code)


def _attempt(action: Callable[..., None], source: Path, *targets: Path) -> int:
    """Do one survey; return the exit code that its errors ask for."""
    try:
        action(source, *targets)
    except typer.BadParameter as error:
        _say(f"{source}: {error.message}")
        return _WRONG_USE
    except UsageError as error:
        _say(f"{source}: {error}")
        return _WRONG_USE
    except OutputError as error:
        _say(f"{source}: {error}")
        return _NOT_WRITTEN
    except GradelineError as error:
        _tell_problems(source, error)
        return _SURVEY_PROBLEMS
    return 0


def _targets(surveys: Sequence[Path], out: Path | None) -> list[Path]:
    """Where the results of each survey go."""
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
