"""A prediction as text, record and files."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from pathlib import Path
from typing import Any

from gradeline.prediction.tables import PREDICTION_TABLES, Prediction
from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    US_DISPLAY,
    Display,
    format_interval,
    format_number,
    format_within,
    thousands,
)
from gradeline.report.converted import converted_text
from gradeline.report.folder import Contents, write_folder
from gradeline.report.printed import (
    PrintedTable,
    Row,
    TableColumn,
    known,
    lay_out,
    name_column,
    percent,
    records,
)
from gradeline.report.record import csv_of, json_of, rows_of
from gradeline.report.text import listed, paragraph, text_table

__all__ = ["PREDICTION_FORMATS", "prediction_record", "prediction_text", "write_prediction"]

#: What can be written, by name.
PREDICTION_FORMATS = ("json", "csv", "svg", "png")
_MOST_ROWS = 40
_KILO, _KWH = 1e3, 3.6e6
# 550 foot pounds-force a second (NIST SP 811, appendix B.8)
_HORSEPOWER = 550 * 0.3048 * 0.45359237 * 9.80665


def prediction_text(prediction: Prediction, display: Display = SI_DISPLAY) -> str:
    """Return what a terminal shows of a prediction.

    Parameters
    ----------
    prediction : Prediction
        What was predicted.
    display : Display
        Units of the reader.

    Returns
    -------
    str
        Plain text, no line longer than 100 columns.
    """
    blocks = [paragraph(f"Prediction: {prediction.title}")]
    found = _capacity(prediction, display)
    if found:
        blocks.append(listed("Found", found))
    many = len(prediction.flows) > 1
    for title, name, table in (
        ("Head loss of the line", "flows", _flow_table(prediction, display)),
        ("Reaches", "reaches", _reach_table(prediction, display)),
        ("Fittings", "fittings", _fitting_table(prediction, display)),
        ("Against a new pipe", "new_pipe", _new_table(prediction, display)),
        ("Grade lines", "grade_lines", None if many else _line_table(prediction, display)),
    ):
        rows = len(getattr(prediction, name))
        if rows and table is not None:
            blocks.append(text_table(title, table, set(), f"{name}.csv (with --out)", rows - _MOST_ROWS))
    if prediction.cautions:
        blocks.append(listed("Cautions", _told(prediction.cautions, prediction, display)))
    blocks.append(listed("Assumptions", _told(prediction.assumptions, prediction, display)))
    return "\n\n".join(blocks)


def _told(sentences: Collection[str], prediction: Prediction, display: Display) -> list[str]:
    if display is SI_DISPLAY:
        return list(sentences)
    labels = {str(name) for name in (*prediction.reaches["reach"], *prediction.fittings["fitting"])}
    return [converted_text(sentence, display, labels) for sentence in sentences]


def _capacity(prediction: Prediction, display: Display) -> list[str]:
    said = []
    for row in records(prediction.capacity):
        head = display.text("head", row["available_head"], unit=True)
        if not known(row["flow"]):
            said.append(f"Under {head} no flow is told: {row['reason']}.")
            continue
        flow = display.within("flow", row["flow"], row["flow_low"], row["flow_high"], unit=True)
        span = display.interval("flow", row["flow_low"], row["flow_high"])
        between = (
            f" ({percent(prediction.level)}: {span})" if known(row["flow_low"]) else f" ({row['reason']})"
        )
        note = f"; {row['reason']}" if known(row["flow_low"]) and row["reason"] else ""
        said.append(f"Under {head} the line carries {flow}{between}{note}.")
    return said


def _within(
    display: Display, quantity: str, name: str, words: str, *, always: bool = True
) -> list[TableColumn]:
    """A value and its interval, in columns side by side."""
    return [
        TableColumn(
            display.head(words, quantity),
            lambda row: display.within(quantity, row[name], row[f"{name}_low"], row[f"{name}_high"]),
            always=always,
        ),
        TableColumn(
            display.head("interval", quantity),
            lambda row: display.interval(quantity, row[f"{name}_low"], row[f"{name}_high"]),
            always=False,
        ),
    ]


def _power(
    rows: Sequence[Row], display: Display, name: str, words: str, *, always: bool
) -> list[TableColumn]:
    """Powers in watts where all are small, else in kilowatts, with horsepower beside for readers of US units."""
    largest = max((abs(row[name]) for row in rows if known(row[name])), default=0.0)
    unit, size = ("W", 1.0) if largest < _KILO else ("kW", _KILO)
    columns = _scaled(name, words, unit, size, always=always)
    if display is US_DISPLAY:
        columns += _scaled(name, words, "hp", _HORSEPOWER)
    return columns


def _scaled(name: str, words: str, unit: str, size: float, *, always: bool = False) -> list[TableColumn]:
    """A value and its interval in a unit that no quantity of the display has."""

    def numbers(row: Row) -> list[float | None]:
        return [
            None if not known(row[key]) else row[key] / size for key in (name, f"{name}_low", f"{name}_high")
        ]

    return [
        TableColumn(f"{words} ({unit})", lambda row: format_within(*numbers(row)), always=always),
        TableColumn(f"interval ({unit})", lambda row: format_interval(*numbers(row)[1:]), always=False),
    ]


def _flow_column(display: Display) -> TableColumn:
    return TableColumn(display.head("flow Q", "flow"), lambda row: display.text("flow", row["flow"]))


def _shown(prediction: Prediction, name: str) -> list[dict[str, Any]]:
    return records(getattr(prediction, name).head(_MOST_ROWS))


def _flow_table(prediction: Prediction, display: Display) -> PrintedTable:
    rows = _shown(prediction, "flows")
    lifted = any(row["pump_head"] != row["head_loss"] for row in rows if known(row["head_loss"]))
    return lay_out(
        "",
        rows,
        [
            _flow_column(display),
            *_within(display, "head", "head_loss", "head loss"),
            *(_within(display, "head", "pump_head", "pump head") if lifted else []),
            *_power(rows, display, "pump_power", "pump power", always=True),
        ],
    )


def _reach_table(prediction: Prediction, display: Display) -> PrintedTable:
    return lay_out(
        "",
        _shown(prediction, "reaches"),
        [
            _flow_column(display),
            name_column("reach"),
            TableColumn(
                display.head("V", "velocity"), lambda row: display.text("velocity", row["velocity"], digits=3)
            ),
            TableColumn("Re", lambda row: thousands(row["reynolds"], 3)),
            TableColumn("f", lambda row: format_number(row["friction_factor"])),
            TableColumn(display.head("S", "slope"), lambda row: display.text("slope", row["slope"])),
            *_within(display, "head", "head_loss", "head loss"),
            TableColumn("Re over tested", _beyond, always=False),
        ],
    )


def _beyond(row: Row) -> str:
    return MISSING if not known(row["beyond"]) or row["beyond"] == 1 else f"× {row['beyond']:.3g}"


def _fitting_table(prediction: Prediction, display: Display) -> PrintedTable:
    return lay_out(
        "",
        _shown(prediction, "fittings"),
        [
            _flow_column(display),
            name_column("fitting"),
            TableColumn("K", lambda row: format_number(row["loss_coefficient"], 3)),
            *_within(display, "head", "head_loss", "head loss"),
        ],
    )


def _new_table(prediction: Prediction, display: Display) -> PrintedTable:
    rows = _shown(prediction, "new_pipe")
    return lay_out(
        "",
        rows,
        [
            _flow_column(display),
            TableColumn(
                display.head("new pipe loses", "head"),
                lambda row: display.text("head", row["head_loss_new"], digits=3),
            ),
            *_within(display, "head", "extra_head", "extra head"),
            *_power(rows, display, "extra_power", "extra power", always=False),
            *_scaled("extra_energy", "extra energy a year", "kWh", _KWH),
        ],
    )


def _line_table(prediction: Prediction, display: Display) -> PrintedTable:
    def level(name: str) -> Callable[[Row], str]:
        def cell(row: Row) -> str:
            value, low, high = (row[f"{name}{end}"] for end in ("", "_low", "_high"))
            # The level at the end of the line is given: it has no interval that its digits could follow.
            if low == high:
                return display.text("head", value)
            return display.within("head", value, low, high)

        return cell

    def interval(name: str) -> Callable[[Row], str]:
        def cell(row: Row) -> str:
            low, high = row[f"{name}_low"], row[f"{name}_high"]
            return MISSING if low == high else display.interval("head", low, high)

        return cell

    return lay_out(
        "",
        _shown(prediction, "grade_lines"),
        [
            TableColumn(display.head("x", "chainage"), lambda row: display.text("chainage", row["chainage"])),
            name_column("place"),
            TableColumn(
                display.head("axis", "elevation"), lambda row: display.text("elevation", row["elevation"])
            ),
            TableColumn(display.head("EGL", "head"), level("energy_head")),
            TableColumn(display.head("interval", "head"), interval("energy_head"), always=False),
            TableColumn(display.head("HGL", "head"), level("piezometric_head")),
            TableColumn(display.head("interval", "head"), interval("piezometric_head"), always=False),
        ],
        note=None,
    )


def prediction_record(prediction: Prediction, version: str) -> dict[str, Any]:
    """Return a prediction as JSON can hold it: SI units, null where a value is missing.

    Parameters
    ----------
    prediction : Prediction
        What was predicted.
    version : str
        Of the program.

    Returns
    -------
    dict
        The tables as lists of rows, with title, assumptions, cautions, level and temperature.
    """
    return {
        "gradeline": version,
        "title": prediction.title,
        "level": prediction.level,
        "temperature": prediction.temperature,
        "assumptions": list(prediction.assumptions),
        "cautions": list(prediction.cautions),
        **{name: rows_of(columns, getattr(prediction, name)) for name, columns in PREDICTION_TABLES.items()},
    }


_PREDICTION = Contents(
    "prediction",
    frozenset(
        {"prediction.json", *(f"{table}.csv" for table in PREDICTION_TABLES)}
        | {f"{name}.{kind}" for name in ("grade_lines", "head_loss") for kind in ("svg", "png")}
    ),
)


def write_prediction(
    prediction: Prediction,
    folder: Path,
    version: str,
    *,
    formats: Collection[str] = PREDICTION_FORMATS,
    overwrite: bool = False,
    display: Display = SI_DISPLAY,
) -> None:
    """Write a prediction to a folder, all of it or nothing.

    Parameters
    ----------
    prediction : Prediction
        What is written.
    folder : Path
        The target. It may be absent or empty.
    version : str
        Of the program.
    formats : collection of str
        Any of ``json`` (prediction.json), ``csv`` (one file a table), ``svg`` and ``png`` (figures).
    overwrite : bool
        Whether an earlier prediction there may be replaced. Other files are never removed.
    display : Display
        Units of the figures.

    Raises
    ------
    OutputError
        Where the folder holds something else, or the disk refuses.
    """

    def fill(fresh: Path) -> None:
        for name, content in _files(prediction, version, formats, display).items():
            (fresh / name).write_bytes(content)

    write_folder(folder, _PREDICTION, fill, overwrite=overwrite)


def _files(
    prediction: Prediction, version: str, formats: Collection[str], display: Display
) -> Mapping[str, bytes]:
    found: dict[str, bytes] = {}
    if "json" in formats:
        found["prediction.json"] = json_of(prediction_record(prediction, version))
    if "csv" in formats:
        for name, columns in PREDICTION_TABLES.items():
            table = getattr(prediction, name)
            if len(table):
                found[f"{name}.csv"] = csv_of(columns, rows_of(columns, table))
    kinds = [kind for kind in ("svg", "png") if kind in formats]
    if kinds:
        from gradeline.report.figures.prediction import prediction_pictures  # noqa: PLC0415 (start-up time)

        for name, pictures in prediction_pictures(prediction, kinds, display).items():
            for kind, content in pictures.items():
                found[f"{name}.{kind}"] = content
    return found
