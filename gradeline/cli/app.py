"""The commands: parse, call, print. Nothing is computed here.

Modules that take time to load are imported by the command that needs them, so that help and mistakes in the
command line are answered at once.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Annotated, Any, Literal

import typer
from typer.core import TyperGroup

from gradeline.cli import compare as compare_command
from gradeline.cli import plan as plan_command
from gradeline.cli import predict as predict_command
from gradeline.cli.outcome import NOT_WRITTEN, Outcome, attempt
from gradeline.errors import OutputError, UsageError

__all__ = ["FORMATS", "app"]

#: What can be written, by the name that ``--formats`` takes.
FORMATS = ("html", "json", "csv", "svg", "png", "pdf", "xlsx")
#: What is written unless somebody asks for another choice.
DEFAULT_FORMATS = FORMATS[:5]

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
_Json = Annotated[bool, typer.Option("--json", help="Print the result as JSON, for other programs.")]
_Units = Annotated[
    Literal["si", "us"],
    typer.Option("--units", help="Units of the text: SI or US customary; json is always SI."),
]
_SURVEYS = "Surveys: folders, .xlsx workbooks, or tables of heads (.csv)."


class _Commands(TyperGroup):
    """The commands; of a wrong choice the rule is told, not the name of an exception."""

    def invoke(self, ctx: Any) -> Any:
        try:
            return super().invoke(ctx)
        except typer.BadParameter as error:
            error.message = error.message.removeprefix("Value error, ")
            raise


app = typer.Typer(
    name="gradeline",
    cls=_Commands,
    help="From manometer and gauge readings along a pipe to head loss, friction factor and wall roughness, each "
    "with its uncertainty.\n\nExample: gradeline reduce data_demo/copper_bench",
    epilog="Exit codes: 0 done (flags are results, not failures), 1 an error that gradeline does not know, 2 wrong "
    "use, 3 the survey has problems, 4 output could not be written; of several surveys the highest. 130: ended by Ctrl-C.",
    no_args_is_help=True,
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


def _tell(outcome: Outcome) -> None:
    for line in outcome.lines():
        _say(line)


def _print_json(value: Any) -> None:
    from gradeline.cli.plain import print_json  # noqa: PLC0415 (loaded when asked for: start-up time)

    print_json(value)


def _leave(outcomes: Sequence[Outcome]) -> None:
    """End with the highest exit code."""
    code = max(outcome.code for outcome in outcomes)
    if code:
        raise typer.Exit(code)


@app.command(short_help="Tell every problem of surveys, and what was understood.")
def check(
    surveys: Annotated[list[Path], typer.Argument(metavar="SURVEY...", help=_SURVEYS)],
    diameter: _Diameter = None,
    flow: _Flow = None,
    temperature: _Temperature = None,
    units: _Units = "si",
    as_json: _Json = False,
) -> None:
    """Load surveys, tell every problem at once, and say what was understood.

    Example: gradeline check data_demo/copper_bench
    """

    def one(source: Path) -> dict[str, Any] | None:
        from gradeline.cli.progress import reading  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

        with reading(source.name) as progress:
            read = read_survey(
                source, diameter=diameter, flow=flow, temperature=temperature, progress=progress
            )
        if read.record is not None:
            from gradeline.reduction.record import with_record_read  # noqa: PLC0415 (only a logger's file needs it)

            read = with_record_read(read)
        if as_json:
            from gradeline.cli.plain import survey_record  # noqa: PLC0415 (loaded when asked for: start-up time)

            return survey_record(read)
        from gradeline.cli.understood import understood  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)

        if source != surveys[0]:
            typer.echo()
        typer.echo(understood(read, DISPLAYS[units]))
        _say(f"{source}: no problems")
        return None

    outcomes = []
    for source in surveys:
        outcomes.append(attempt(lambda source=source: one(source), source))  # type: ignore[misc]  # the default binds this source
        _tell(outcomes[-1])
    if as_json:
        _print_outcomes(outcomes, "survey")
    _leave(outcomes)


def _print_outcomes(outcomes: Sequence[Outcome], name: str) -> None:
    """What became of each survey as JSON, its result under a name."""
    from gradeline.cli.plain import outcome_record  # noqa: PLC0415 (loaded when asked for: start-up time)

    _print_json({"surveys": [outcome_record(outcome, **{name: outcome.result}) for outcome in outcomes]})


@app.command(short_help="Tell what each gauge can show, and which gauge fluid suits.")
def gauges(
    surveys: Annotated[list[Path], typer.Argument(metavar="SURVEY...", help=_SURVEYS)],
    units: _Units = "si",
    as_json: _Json = False,
) -> None:
    """Tell the range of head that each gauge can show, its resolution as head, and the gauge fluid that suits.

    A heavy gauge fluid keeps a large difference on the board, one of a density near the flowing fluid's magnifies a small
    one. The choice goes by the survey's own differences.

    Example: gradeline gauges data_demo/copper_bench
    """

    def one(source: Path) -> list[dict[str, Any]] | None:
        from gradeline.loader import read_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

        if source != surveys[0] and not as_json:
            typer.echo()
        try:
            survey = read_survey(source)
        except UsageError:  # nothing is given beside it here: only a table of heads asks for more
            raise UsageError(
                "one table of heads has no gauges; give a survey that describes them in survey.toml"
            ) from None
        if as_json:
            from gradeline.cli.plain import plain  # noqa: PLC0415 (loaded when asked for: start-up time)
            from gradeline.reduction.gauge_ranges import gauge_ranges  # noqa: PLC0415 (loaded when asked for: start-up time)

            return [plain(each) for each in gauge_ranges(survey)]
        from gradeline.cli.gauges import gauges_told  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)

        typer.echo(gauges_told(survey, DISPLAYS[units]))
        return None

    outcomes = []
    for source in surveys:
        outcomes.append(attempt(lambda source=source: one(source), source))  # type: ignore[misc]  # the default binds this source
        _tell(outcomes[-1])
    if as_json:
        _print_outcomes(outcomes, "gauges")
    _leave(outcomes)


@app.command(short_help="Write a blank recording sheet to print.")
def sheet(
    survey: Annotated[
        Path,
        typer.Argument(
            metavar="SURVEY", help="Survey, with or without readings: a folder or an .xlsx workbook."
        ),
    ],
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="FILE", help="The PDF: SURVEY/recording_sheet.pdf by default."),
    ] = None,
    runs: Annotated[int, typer.Option("--runs", min=1, max=500, help="Flowing runs to leave rows for.")] = 10,
    repeats: Annotated[int, typer.Option("--repeats", min=1, max=50, help="Rows of each run.")] = 1,
    paper: Annotated[Literal["a4", "letter"], typer.Option("--paper", help="Size of the sheets.")] = "a4",
    overwrite: Annotated[
        bool, typer.Option("--overwrite", help="Replace a sheet that is there already.")
    ] = False,
    as_json: _Json = False,
) -> None:
    """Write a blank recording sheet to print, column for column as readings.csv has or will have them.

    Example: gradeline sheet data_demo/copper_bench --runs 10 --repeats 2 --paper letter
    """
    from gradeline.cli.sheet import write_sheet  # noqa: PLC0415 (loaded when asked for: start-up time)

    outcome = attempt(
        lambda: write_sheet(survey, out, runs=runs, repeats=repeats, paper=paper, overwrite=overwrite), survey
    )
    _tell(outcome)
    if as_json:
        from gradeline.cli.plain import outcome_record  # noqa: PLC0415 (loaded when asked for: start-up time)

        _print_json(outcome_record(outcome, **(outcome.result or {"written_to": None, "columns": []})))
    elif outcome.result is not None:
        _say(f"Written to {outcome.result['written_to']}")
    _leave([outcome])


@app.command(short_help="Write a commented survey to fill in.")
def new(
    folder: Annotated[Path, typer.Argument(metavar="DIR", help="Folder to make; absent or empty.")],
    as_json: _Json = False,
) -> None:
    """Write a commented survey to fill in.

    Example: gradeline new my_pipe
    """
    from gradeline.cli.new import NEW_FILES, write_new  # noqa: PLC0415 (loaded when asked for: start-up time)

    try:
        write_new(folder)
    except OutputError as error:
        if as_json:
            _print_json({"folder": str(folder), "exit_code": NOT_WRITTEN, "message": str(error), "files": []})
        _say(str(error))
        raise typer.Exit(NOT_WRITTEN) from None
    if as_json:
        _print_json({"folder": str(folder), "exit_code": 0, "message": None, "files": list(NEW_FILES)})
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


# How a survey is to be reduced.
_Level = Annotated[
    float, typer.Option("--level", metavar="P", callback=_level, help="Coverage of the intervals.")
]
_Correct = Annotated[
    Literal["static", "offsets", "none"],
    typer.Option(
        "--correct",
        help="Which offsets of the taps are taken off: those of the static runs; those too that the flowing runs show; none.",
    ),
]
_KeepAll = Annotated[
    bool,
    typer.Option("--keep-all", help="Fit with the flagged single readings too; runs off the law stay out."),
]
_Exclude = Annotated[
    list[str] | None,
    typer.Option("--exclude", metavar="TAP|RUN:TAP", help="Leave a reading out; may be repeated."),
]
_NoMonteCarlo = Annotated[
    bool,
    typer.Option("--no-monte-carlo", help="Leave the intervals of S, f and K as first order has them."),
]
_Overwrite = Annotated[bool, typer.Option("--overwrite", help="Replace results that are there already.")]


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
    overwrite: _Overwrite = False,
    level: _Level = 0.95,
    formats: Annotated[
        str,
        typer.Option(
            "--formats",
            metavar="LIST",
            callback=_formats,
            help=f"What to write, set apart by commas: any of {', '.join(FORMATS)}.",
        ),
    ] = ",".join(DEFAULT_FORMATS),
    units: Annotated[
        Literal["si", "us"],
        typer.Option(
            "--units",
            help="Units of page, PDF, figures and terminal: SI or US customary; json, csv and xlsx are always SI.",
        ),
    ] = "si",
    paper: Annotated[Literal["a4", "letter"], typer.Option("--paper", help="Sheets of the PDF.")] = "a4",
    correct: _Correct = "static",
    keep_all: _KeepAll = False,
    exclude: _Exclude = None,
    no_monte_carlo: _NoMonteCarlo = False,
    diameter: _Diameter = None,
    flow: _Flow = None,
    temperature: _Temperature = None,
    as_json: Annotated[
        bool,
        typer.Option(
            "--json",
            help="Print the results as JSON, for other programs; files are then written only where --out is given.",
        ),
    ] = False,
    jobs: Annotated[
        int | None,
        typer.Option(
            "--jobs",
            "-j",
            metavar="N",
            min=1,
            max=1024,
            help="Surveys at once, a process each: by default one for each processor core.",
        ),
    ] = None,
    summary: Annotated[
        Path | None,
        typer.Option(
            "--summary",
            metavar="FILE",
            help="A table over all surveys, .csv or .parquet, a row for each survey and wall; of several surveys "
            "DIR/summary.csv by default where --out is given.",
        ),
    ] = None,
    scheduler: Annotated[
        str | None,
        typer.Option(
            "--scheduler",
            metavar="ADDRESS",
            help="Hand the surveys to the workers of a Dask cluster instead, such as tcp://10.0.0.5:8786.",
        ),
    ] = None,
) -> None:
    """Reduce surveys: fit every run, find wrong readings, estimate the wall, write the report.

    Example: gradeline reduce data_demo/copper_bench --exclude T4 --out results

    A table with the columns chainage [m] and head [mm] alone: gradeline reduce heads.csv --diameter "26.6 mm" --flow
    "0.84 L/s" --temperature "18 degC"
    """
    from gradeline.cli.many.summary import summary_path  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.cli.reducing import Choices, reduce_surveys, targets_of  # noqa: PLC0415 (loaded when asked for: start-up time)

    if jobs is not None and scheduler is not None:
        raise typer.BadParameter(
            "--jobs is for this machine, --scheduler for a cluster, whose workers say how many they are; give one of them"
        )
    targets = targets_of(surveys, out)
    choices = Choices(
        level=level,
        correct=correct,
        keep_all=keep_all,
        exclude=tuple(exclude or ()),
        monte_carlo=not no_monte_carlo,
        diameter=diameter,
        flow=flow,
        temperature=temperature,
    )
    code = reduce_surveys(
        surveys,
        [None] * len(surveys) if as_json and out is None else targets,
        choices,
        formats=tuple(each.strip() for each in formats.split(",")),
        overwrite=overwrite,
        units=units,
        paper=paper,
        as_json=as_json,
        jobs=jobs,
        scheduler=scheduler,
        summary=summary_path(summary, out, targets, several=len(surveys) > 1),
    )
    if code:
        raise typer.Exit(code)


@app.command(short_help="Reduce a survey again whenever it is saved, in an open page.")
def watch(
    survey: Annotated[
        Path,
        typer.Argument(metavar="SURVEY", help="A folder, an .xlsx workbook, or a table of heads (.csv)."),
    ],
    out: Annotated[
        Path | None,
        typer.Option(
            "--out", metavar="DIR", help="Folder for the results; by default one that is removed at the end."
        ),
    ] = None,
    overwrite: _Overwrite = False,
    open_browser: Annotated[bool, typer.Option("--open", help="Open the page in the browser.")] = False,
    level: _Level = 0.95,
    correct: _Correct = "static",
    keep_all: _KeepAll = False,
    exclude: _Exclude = None,
    no_monte_carlo: _NoMonteCarlo = False,
    units: Annotated[
        Literal["si", "us"], typer.Option("--units", help="Units of the page: SI or US customary.")
    ] = "si",
    diameter: _Diameter = None,
    flow: _Flow = None,
    temperature: _Temperature = None,
    as_json: Annotated[
        bool,
        typer.Option("--json", help="Print each event as JSON on a line of its own, for other programs."),
    ] = False,
) -> None:
    """Reduce a survey again whenever one of its files is saved, and keep the open page up to date.

    While the survey has problems the last good page stays, with a note of them. The page is served to this machine alone;
    Ctrl-C ends it.

    Example: gradeline watch data_demo/copper_bench --open
    """
    from gradeline.cli.reducing import Choices  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.cli.watch.following import watch_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

    choices = Choices(
        level=level,
        correct=correct,
        keep_all=keep_all,
        exclude=tuple(exclude or ()),
        monte_carlo=not no_monte_carlo,
        diameter=diameter,
        flow=flow,
        temperature=temperature,
    )
    code = watch_survey(
        survey,
        choices,
        out=out,
        overwrite=overwrite,
        units=units,
        open_browser=open_browser,
        as_json=as_json,
    )
    if code:
        raise typer.Exit(code)


app.command(short_help="Tell before a test what it will show, and what buys most.")(plan_command.plan)
app.command(short_help="Predict head losses at other flows from a reduction.")(predict_command.predict)
app.command(short_help="Compare surveys: is a change of the wall real, and how fast does it age.")(
    compare_command.compare
)
