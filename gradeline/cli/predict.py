"""`gradeline predict`: what a tested line loses at other flows, and what it carries."""

from __future__ import annotations

import re
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, Literal

import typer

from gradeline.cli.outcome import attempt
from gradeline.cli.plain import conclude
from gradeline.errors import Problem, QuantityError, SurveyError, UsageError

if TYPE_CHECKING:
    from gradeline.prediction import Prediction

__all__ = ["flows_in", "predict"]

_HEADING = re.compile(r"flow\s*\[\s*([^\]]+?)\s*\]", re.IGNORECASE)
_MOST_FLOWS = 100_000


def _quantity(flag: str, text: str) -> Any:
    return typer.Option(flag, metavar="Q", help=text)


def predict(
    reduction: Annotated[
        Path,
        typer.Argument(
            metavar="REDUCTION",
            help="Folder that gradeline reduce wrote, its reduction.json, or the survey it is in.",
        ),
    ],
    flow: Annotated[
        str | None, _quantity("--flow", 'True flow at the line\'s start: "12 L/s", or "2 to 12 L/s".')
    ] = None,
    steps: Annotated[
        int | None,
        typer.Option("--steps", metavar="N", help="Flows in a range, both ends included; 6 by default."),
    ] = None,
    flows: Annotated[
        Path | None,
        typer.Option("--flows", metavar="FILE", help="Table (.csv) with a column such as flow [L/s]."),
    ] = None,
    available_head: Annotated[
        str | None,
        _quantity(
            "--available-head", 'Head for losses and lift: "14 m"; tells the flow that the line carries.'
        ),
    ] = None,
    temperature: Annotated[
        str | None, _quantity("--temperature", "Of the fluid; the mean of the runs by default.")
    ] = None,
    roughness: Annotated[
        str | None, _quantity("--roughness", 'What if all walls had this roughness: "0.1 mm".')
    ] = None,
    wall: Annotated[
        list[str] | None,
        typer.Option("--wall", metavar="WALL=Q", help="What if one wall had; may be repeated."),
    ] = None,
    new_roughness: Annotated[
        str | None,
        typer.Option(
            "--new-roughness",
            metavar="Q|SURFACE",
            help='Compare with a new pipe: "0.05 mm", a known surface such as "commercial steel", or "published" as the '
            "survey states it.",
        ),
    ] = None,
    hours: Annotated[
        float | None, typer.Option("--hours", metavar="H", help="Duty in a year, for the energy lost.")
    ] = None,
    efficiency: Annotated[
        str | None,
        typer.Option("--efficiency", metavar="P", help='Of pump and motor: "70 %"; 100 % by default.'),
    ] = None,
    static_head: Annotated[
        str | None, _quantity("--static-head", "What the pump lifts beside the losses; 0 by default.")
    ] = None,
    end_head: Annotated[
        str | None,
        _quantity("--end-head", "Piezometric head at the downstream end; the pipe's axis there by default."),
    ] = None,
    offtake: Annotated[
        list[str] | None,
        typer.Option(
            "--offtake", metavar="NAME=Q", help="What an off-take takes; shut by default; may be repeated."
        ),
    ] = None,
    head_loss_u: Annotated[
        str | None,
        _quantity(
            "--head-loss-u",
            "Standard uncertainty of a measured head loss to be held against the prediction; widens the intervals.",
        ),
    ] = None,
    out: Annotated[
        Path | None, typer.Option("--out", metavar="DIR", help="Write tables, record and figures there.")
    ] = None,
    overwrite: Annotated[bool, typer.Option("--overwrite", help="Replace an earlier prediction.")] = False,
    units: Annotated[Literal["si", "us"], typer.Option("--units", help="Units of text and figures.")] = "si",
    as_json: Annotated[
        bool, typer.Option("--json", help="Print the result as JSON, for other programs.")
    ] = False,
) -> None:
    """Predict head losses, grade lines and pump power at other flows, or the flow under a given head, with intervals.

    Example: gradeline predict data_demo/copper_bench/reduction --flow "0.2 to 1.4 L/s" --steps 7
    """
    asked: Any = flow
    if flows is not None and flow is None:
        table = attempt(lambda: flows_in(flows), flows)
        conclude(table, as_json=as_json)
        asked = table.result

    def one() -> Prediction:
        if flow is not None and flows is not None:
            raise UsageError("--flow and --flows: both say at which flows; give one of them")
        walls, offtakes = _pairs("--wall", wall), _pairs("--offtake", offtake)
        from gradeline.prediction import predict as predict_line  # noqa: PLC0415 (loaded when asked for: start-up time)

        return predict_line(
            reduction,
            flow=asked,
            steps=steps,
            available_head=available_head,
            temperature=temperature,
            roughness=roughness,
            walls=walls,
            new_pipe=new_roughness,
            hours=hours,
            efficiency=efficiency,
            static_head=static_head,
            end_head=end_head,
            offtakes=offtakes,
            head_loss_u=head_loss_u,
        )

    outcome = attempt(lambda: _done(one(), out, overwrite=overwrite, units=units, as_json=as_json), reduction)
    conclude(outcome, as_json=as_json)


def _done(prediction: Prediction, out: Path | None, *, overwrite: bool, units: str, as_json: bool) -> None:
    """Write and print a prediction."""
    from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.output import program_version  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.prediction import (  # noqa: PLC0415 (loaded when asked for: start-up time)
        prediction_record,
        prediction_text,
        write_prediction,
    )

    if out is not None:
        write_prediction(prediction, out, program_version(), overwrite=overwrite, display=DISPLAYS[units])
    if as_json:
        from gradeline.cli.plain import print_json  # noqa: PLC0415 (loaded when asked for: start-up time)

        print_json(prediction_record(prediction, program_version()))
    else:
        typer.echo(prediction_text(prediction, DISPLAYS[units]))
    if out is not None:
        typer.echo(f"Written to {out}", err=True)


def _pairs(flag: str, texts: list[str] | None) -> dict[str, str]:
    """What stands on either side of the sign of equality."""
    found = {}
    for text in texts or ():
        name, sign, value = text.rpartition("=")
        if not sign or not name.strip() or not value.strip():
            raise UsageError(f"{flag} {text}: takes a name and a value; write it as {flag} NAME=0.15mm")
        found[name.strip()] = value.strip()
    return found


def flows_in(path: Path) -> list[float]:
    """Return the flows of a table, m³/s.

    Raises
    ------
    SurveyError
        With every fault of the table.
    """
    from gradeline.loader.delimited import WITH_COMMA, read_rows, separator_of  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.quantities import parse_quantity  # noqa: PLC0415 (loaded when asked for: start-up time)

    name = path.name
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        why = getattr(error, "strerror", None) or "it is no UTF-8 text"
        raise UsageError(f"{path} cannot be read ({why}); give a table with a column flow [L/s]") from None
    separator = separator_of(text)
    rows, lines, fault = read_rows(text, separator)
    if fault is not None:
        raise SurveyError(
            [Problem(name, fault[0], None, f"the row cannot be read ({fault[1]}); save the table as csv")]
        )
    headings = [cell.strip() for cell in rows[0]] if rows else []
    places = [n for n, heading in enumerate(headings) if _HEADING.fullmatch(heading)]
    if len(places) != 1:
        raise SurveyError(
            [
                Problem(
                    name,
                    1,
                    None,
                    "takes one column of flows with its unit in the heading, such as flow [L/s]; found "
                    + (", ".join(map(repr, headings)) or "an empty table"),
                )
            ]
        )
    place = places[0]
    match = _HEADING.fullmatch(headings[place])
    assert match is not None
    problems, found = [], []
    for row, line in zip(rows[1:], lines[1:], strict=True):
        cell = row[place].strip() if place < len(row) else ""
        if separator != "," and WITH_COMMA.fullmatch(cell):
            cell = cell.replace(",", ".")
        try:
            known = parse_quantity(f"{cell} {match[1]}", "flow")
        except QuantityError as error:
            problems.append(Problem(name, line, headings[place], f"{error}"))
            continue
        value = known.value
        if known.u is not None:
            problems.append(
                Problem(
                    name,
                    line,
                    headings[place],
                    f"give the flow alone, without an uncertainty; found {cell!r}",
                )
            )
        if value <= 0:
            problems.append(Problem(name, line, headings[place], f"a flow is above 0; found {cell!r}"))
        found.append(value)
    if not problems and not found:
        problems.append(Problem(name, None, headings[place], "the table holds no flow; add one a row"))
    if len(found) > _MOST_FLOWS:
        problems.append(
            Problem(name, None, headings[place], f"up to {_MOST_FLOWS} flows are taken; found {len(found)}")
        )
    if problems:
        raise SurveyError(problems)
    return found
