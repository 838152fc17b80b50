"""`gradeline plan`: what a survey is expected to tell before anybody has read a tap."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, Literal

import typer

from gradeline.cli.outcome import attempt
from gradeline.cli.plain import conclude
from gradeline.errors import QuantityError, UsageError

if TYPE_CHECKING:
    from gradeline.planning import Plan

__all__ = ["plan"]


def _quantity(flag: str, text: str) -> Any:
    return typer.Option(flag, metavar="Q", help=text)


def plan(
    survey: Annotated[
        Path,
        typer.Argument(
            metavar="SURVEY",
            help="A folder or an .xlsx workbook with line, taps and gauges; readings are not needed.",
        ),
    ],
    flows: Annotated[
        str | None,
        _quantity(
            "--flows",
            'Flows to plan for: "0.2 to 1.5 L/s", or "0, 0.2, 0.8 L/s"; those of readings.csv by default.',
        ),
    ] = None,
    runs: Annotated[
        int, typer.Option("--runs", metavar="N", help="Runs that a range of flows is made of.")
    ] = 10,
    temperature: Annotated[
        str | None, _quantity("--temperature", "Of all runs; as in the files, else 15 degC, by default.")
    ] = None,
    roughness: Annotated[
        str | None,
        _quantity("--roughness", 'Assumed of all walls: "0.1 mm"; that of a published surface by default.'),
    ] = None,
    wall: Annotated[
        list[str] | None,
        typer.Option("--wall", metavar="WALL=Q", help="Assumed roughness of one wall; may be repeated."),
    ] = None,
    loss: Annotated[
        list[str] | None,
        typer.Option(
            "--loss", metavar="FITTING=K", help="Assumed K of a fitting to be fitted; may be repeated."
        ),
    ] = None,
    reading: Annotated[
        str | None,
        _quantity(
            "--reading", 'Standard uncertainty of one reading where a gauge states none: "1 mm", "0.2 kPa".'
        ),
    ] = None,
    head: Annotated[
        str | None,
        _quantity(
            "--head",
            "Piezometric head at the last tap in all runs; the middle of what can be read by default.",
        ),
    ] = None,
    spacing: Annotated[
        str | None,
        _quantity("--spacing", "Least distance between two recommended taps; ten bores by default."),
    ] = None,
    fixed: Annotated[
        list[str] | None,
        typer.Option("--fixed", metavar="TAP", help="A tap that cannot be moved; may be repeated."),
    ] = None,
    level: Annotated[float, typer.Option("--level", metavar="P", help="Coverage of the intervals.")] = 0.95,
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="DIR", help="Write text, record, tables and figures there."),
    ] = None,
    overwrite: Annotated[bool, typer.Option("--overwrite", help="Replace an earlier plan.")] = False,
    units: Annotated[Literal["si", "us"], typer.Option("--units", help="Units of text and figures.")] = "si",
    as_json: Annotated[
        bool, typer.Option("--json", help="Print the result as JSON, for other programs.")
    ] = False,
) -> None:
    """Tell what a test will show before it is made: columns, regimes, expected uncertainties, and what buys most.

    Example: gradeline plan data_demo/copper_bench --flows "0.2 to 1.5 L/s" --runs 8
    """

    def one() -> None:
        length, pressure = _reading(reading)
        rough = _roughness(roughness, wall or ())
        losses = _losses(loss or ())
        level_of_tail = _value("--head", head, "length")
        apart = _value("--spacing", spacing, "length")
        if not 0 < level < 1:
            raise UsageError(f"--level {level:g} is no coverage; it lies between 0 and 1, such as 0.95")
        from gradeline.loader import read_plan  # noqa: PLC0415 (loaded when asked for: start-up time)

        read = read_plan(survey, flows=flows, runs=runs, temperature=temperature)
        from gradeline.planning import plan as plan_survey  # noqa: PLC0415 (loaded when asked for: start-up time)

        told = plan_survey(
            read,
            roughness=rough,
            loss=losses,
            reading=length,
            reading_pressure=pressure,
            head=level_of_tail,
            spacing=apart,
            fixed=tuple(fixed or ()),
            level=level,
        )
        _done(told, out, overwrite=overwrite, units=units, as_json=as_json)

    outcome = attempt(one, survey)
    conclude(outcome, as_json=as_json)


def _done(told: Plan, out: Path | None, *, overwrite: bool, units: str, as_json: bool) -> None:
    """Write and print a plan."""
    from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.plan import plan_summary  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.plan_output import plan_record, write_plan  # noqa: PLC0415 (as above)

    display = DISPLAYS[units]
    if out is not None:
        write_plan(told, out, overwrite=overwrite, display=display)
        typer.echo(f"Written to {out}", err=True)
    if as_json:
        from gradeline.cli.plain import print_json  # noqa: PLC0415 (loaded when asked for: start-up time)

        print_json(plan_record(told))
    else:
        typer.echo(plan_summary(told, display))


def _value(option: str, text: str | None, dimension: str) -> float | None:
    if text is None:
        return None
    from gradeline.quantities import parse_quantity  # noqa: PLC0415 (loaded when asked for: start-up time)

    try:
        found = parse_quantity(text, dimension)
    except QuantityError as error:
        raise UsageError(f"{option} {text!r}: {error}") from None
    if found.u is not None:
        raise UsageError(f"{option} {text!r}: give the value alone, without an uncertainty")
    return found.value


def _reading(text: str | None) -> tuple[float | None, float | None]:
    """A standard uncertainty of one reading, as a length or as a pressure."""
    if text is None:
        return None, None
    length = pressure = None
    try:
        length = _value("--reading", text, "length")
    except UsageError as error:
        try:
            pressure = _value("--reading", text, "pressure")
        except UsageError:
            raise error from None
    size = length if pressure is None else pressure
    if size is None or not size > 0:
        raise UsageError(f'--reading {text!r}: give an uncertainty above 0, such as "0.5 mm"')
    return length, pressure


def _named(option: str, text: str, example: str) -> tuple[str, str]:
    name, sign, value = text.rpartition("=")
    if not sign or not name.strip():
        raise UsageError(f'{option} {text!r}: give a name and a value, such as "{example}"')
    return name.strip(), value.strip()


def _roughness(all_walls: str | None, walls: Sequence[str]) -> float | dict[str, float] | None:
    if all_walls is not None and walls:
        raise UsageError("--roughness and --wall: both say how rough a wall is; give one of them")
    if not walls:
        return _value("--roughness", all_walls, "length")
    found: dict[str, float] = {}
    for text in walls:
        name, value = _named("--wall", text, "lower main=0.15 mm")
        found[name] = _value("--wall", value, "length") or 0.0
    return found


def _losses(texts: Sequence[str]) -> dict[str, float]:
    found: dict[str, float] = {}
    for text in texts:
        name, value = _named("--loss", text, "gate valve=0.2")
        try:
            found[name] = float(value)
        except ValueError:
            raise UsageError(f"--loss {text!r}: {value!r} is not a number; K has no unit") from None
    return found
