"""A comparison as record and as a folder of files."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

from gradeline.comparison.tables import COMPARISON_TABLES, Comparison
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.report.folder import Contents, write_folder
from gradeline.report.output import program_version
from gradeline.report.record import csv_of, json_of, rows_of

__all__ = ["comparison_record", "write_comparison"]

_COMPARISON = Contents(
    "comparison",
    frozenset({"comparison.json", "comparison.txt", *(f"{table}.csv" for table in COMPARISON_TABLES)}),
    re.compile(r"(roughness|friction_factor)_\d+\.(svg|png)"),
)
#: Numbers that count something are written without a decimal point.
_COUNTS = frozenset({"runs_used", "surveys_compared", "inputs"})


def comparison_record(comparison: Comparison) -> dict[str, Any]:
    """Return a comparison as JSON can hold it: SI units, null where nothing is known.

    Parameters
    ----------
    comparison : Comparison
        What was compared.

    Returns
    -------
    dict
        Level, assumptions, cautions and every table as a list of rows.
    """
    return {
        "gradeline": program_version(),
        "level": comparison.level,
        "in_order_of_dates": comparison.dated,
        **{table: _rows(comparison, table) for table in COMPARISON_TABLES},
        "assumptions": list(comparison.assumptions),
        "cautions": list(comparison.cautions),
    }


def _rows(comparison: Comparison, table: str) -> list[dict[str, Any]]:
    return rows_of(COMPARISON_TABLES[table], getattr(comparison, table), counts=_COUNTS)


def write_comparison(
    comparison: Comparison, folder: Path, *, overwrite: bool = False, display: Display = SI_DISPLAY
) -> None:
    """Write a comparison: ``comparison.json``, ``comparison.txt``, a csv a table, and ``figures``.

    Parameters
    ----------
    comparison : Comparison
        What was compared.
    folder : Path
        Absent or empty, or with `overwrite` an earlier comparison.
    overwrite : bool
        Whether an earlier comparison may be replaced. Files that are no part of one are never removed.
    display : Display
        Units of text and figures; json and csv are SI.

    Raises
    ------
    OutputError
        Where the folder holds something that may not be replaced, or the disk refuses.
    """
    write_folder(folder, _COMPARISON, lambda fresh: _fill(comparison, fresh, display), overwrite=overwrite)


def _fill(comparison: Comparison, folder: Path, display: Display) -> None:
    # matplotlib only where something is drawn
    from gradeline.report.comparison import comparison_text  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.figures.comparison import comparison_pictures  # noqa: PLC0415 (loaded when asked for: start-up time)

    (folder / "comparison.json").write_bytes(json_of(comparison_record(comparison)))
    text = comparison_text(comparison, display) + "\n"
    (folder / "comparison.txt").write_text(text, "utf-8", "backslashreplace")
    for table, columns in COMPARISON_TABLES.items():
        (folder / f"{table}.csv").write_bytes(csv_of(columns, _rows(comparison, table)))
    (folder / "figures").mkdir()
    for picture in comparison_pictures(comparison, display=display):
        (folder / "figures" / f"{picture.name}.svg").write_bytes(picture.svg)
        (folder / "figures" / f"{picture.name}.png").write_bytes(picture.png)
