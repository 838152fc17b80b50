"""A prediction as text, record and files."""

from __future__ import annotations

import csv
import io
import json
import shutil
import tempfile
from collections.abc import Callable, Collection, Mapping
from pathlib import Path
from typing import Any

from gradeline.errors import OutputError
from gradeline.prediction.tables import PREDICTION_TABLES, Prediction
from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    Display,
    format_interval,
    format_number,
    format_within,
    thousands,
)
from gradeline.report.converted import converted_text
from gradeline.report.output import _make_parents, _refused, _remove_if_empty, _swap
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
from gradeline.report.record import _cell, _value
from gradeline.report.terminal import _bullets, _table, _wrapped

__all__ = ["PREDICTION_FORMATS", "prediction_record", "prediction_text", "write_prediction"]

#: What can be written, by name.
PREDICTION_FORMATS = ("json", "csv", "svg", "png")
_MOST_ROWS = 40
_KILO, _KWH = 1e3, 3.6e6


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
    blocks = ["\n".join(_wrapped(f"Prediction: {prediction.title}"))]
    found = _capacity(prediction, display)
    if found:
        blocks.append("\n".join(["Found", *_bullets(found)]))
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
            blocks.append(_table(title, table, set(), f"{name}.csv (with --out)", rows - _MOST_ROWS))
    if prediction.cautions:
        blocks.append("\n".join(["Cautions", *_bullets(_told(prediction.cautions, prediction, display))]))
    blocks.append("\n".join(["Assumptions", *_bullets(_told(prediction.assumptions, prediction, display))]))
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
        said.append(f"Under {head} the line carries {flow}{between}.")
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


def _scaled(name: str, words: str, unit: str, size: float) -> list[TableColumn]:
    """The same for powers and energies, which have one unit for all readers."""

    def numbers(row: Row) -> list[float | None]:
        return [
            None if not known(row[key]) else row[key] / size for key in (name, f"{name}_low", f"{name}_high")
        ]

    return [
        TableColumn(f"{words} ({unit})", lambda row: format_within(*numbers(row)), always=False),
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
            *_scaled("pump_power", "pump power", "kW", _KILO),
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
    return lay_out(
        "",
        _shown(prediction, "new_pipe"),
        [
            _flow_column(display),
            TableColumn(
                display.head("new pipe loses", "head"),
                lambda row: display.text("head", row["head_loss_new"], digits=3),
            ),
            *_within(display, "head", "extra_head", "extra head"),
            _scaled("extra_power", "extra power", "kW", _KILO)[0],
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

    def interval(row: Row) -> str:
        low, high = row["piezometric_head_low"], row["piezometric_head_high"]
        return MISSING if low == high else display.interval("head", low, high)

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
            TableColumn(display.head("HGL", "head"), level("piezometric_head")),
            TableColumn(display.head("interval", "head"), interval, always=False),
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
        **{name: _rows(prediction, name) for name in PREDICTION_TABLES},
    }


def _rows(prediction: Prediction, name: str) -> list[dict[str, Any]]:
    columns = PREDICTION_TABLES[name]
    return [
        {key: _value(row[key], column, count=False) for key, column in columns.items()}
        for row in records(getattr(prediction, name))
    ]


def _as_csv(prediction: Prediction, name: str) -> bytes:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    columns = PREDICTION_TABLES[name]
    writer.writerow(columns)
    for row in _rows(prediction, name):
        writer.writerow([_cell(row[key], column) for key, column in columns.items()])
    return out.getvalue().encode("utf-8", errors="backslashreplace")


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
    files = _files(prediction, version, formats, display)
    target = Path(folder).resolve()
    work: Path | None = None
    made: list[Path] = []
    done = False
    try:
        _check(target, Path(folder), overwrite=overwrite)
        made = _make_parents(target.parent)
        work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
        fresh = work / "new"
        fresh.mkdir()
        for name, content in files.items():
            (fresh / name).write_bytes(content)
        _swap(fresh, target, work / "old")
        done = True
    except OutputError:
        raise
    except OSError as error:
        raise _refused(Path(folder), error) from error
    finally:
        if work is not None:
            shutil.rmtree(work, ignore_errors=True)
        if not done:
            for parent in made:
                _remove_if_empty(parent)


_NAMES = frozenset(
    {"prediction.json", *(f"{table}.csv" for table in PREDICTION_TABLES)}
    | {f"{name}.{kind}" for name in ("grade_lines", "head_loss") for kind in ("svg", "png")}
)


def _check(target: Path, shown: Path, *, overwrite: bool) -> None:
    if target.exists() and not target.is_dir():
        raise OutputError(f"{shown} is a file; choose another folder with --out")
    entries = sorted(target.iterdir()) if target.exists() else []
    foreign = [one.name for one in entries if one.name not in _NAMES or one.is_symlink() or not one.is_file()]
    if foreign:
        raise OutputError(
            f"{shown} holds {foreign[0]}, which is no part of a prediction, so nothing was written; choose another folder "
            "with --out"
        )
    if entries and not overwrite:
        raise OutputError(
            f"{shown} is not empty (it holds {entries[0].name}); choose another folder with --out, or replace an earlier "
            "prediction with --overwrite"
        )


def _files(
    prediction: Prediction, version: str, formats: Collection[str], display: Display
) -> Mapping[str, bytes]:
    found: dict[str, bytes] = {}
    if "json" in formats:
        text = json.dumps(
            prediction_record(prediction, version), indent=1, ensure_ascii=False, allow_nan=False
        )
        found["prediction.json"] = (text + "\n").encode("utf-8", errors="backslashreplace")
    if "csv" in formats:
        for name in PREDICTION_TABLES:
            if len(getattr(prediction, name)):
                found[f"{name}.csv"] = _as_csv(prediction, name)
    kinds = [kind for kind in ("svg", "png") if kind in formats]
    if kinds:
        from gradeline.report.figures.prediction import prediction_pictures  # noqa: PLC0415 (start-up time)

        for name, pictures in prediction_pictures(prediction, kinds, display).items():
            for kind, content in pictures.items():
                found[f"{name}.{kind}"] = content
    return found
