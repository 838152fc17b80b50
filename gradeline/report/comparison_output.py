"""Writing a comparison whole or not at all."""

from __future__ import annotations

import csv
import io
import json
import re
import shutil
import tempfile
from pathlib import Path
from typing import Any

from gradeline.comparison.tables import COMPARISON_TABLES, Comparison
from gradeline.errors import OutputError
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.report.output import _LITTER, _make_parents, _refused, _remove_if_empty, _swap, program_version
from gradeline.report.printed import records
from gradeline.report.record import _cell, _value

__all__ = ["comparison_record", "write_comparison"]

_FILES = frozenset({"comparison.json", "comparison.txt", *(f"{table}.csv" for table in COMPARISON_TABLES)})
_FIGURE = re.compile(r"(roughness|friction_factor)_\d+\.(svg|png)")
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
    columns = COMPARISON_TABLES[table]
    return [
        {name: _value(row[name], column, count=name in _COUNTS) for name, column in columns.items()}
        for row in records(getattr(comparison, table))
    ]


def _as_csv(comparison: Comparison, table: str) -> bytes:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    columns = COMPARISON_TABLES[table]
    writer.writerow(columns)
    for row in _rows(comparison, table):
        writer.writerow([_cell(row[name], column) for name, column in columns.items()])
    return out.getvalue().encode("utf-8", errors="backslashreplace")


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
    folder = Path(folder)
    work: Path | None = None
    made: list[Path] = []
    done = False
    try:
        target = folder.resolve()
        _check(target, folder, overwrite=overwrite)
        made = _make_parents(target.parent)
        work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
        fresh = work / "new"
        fresh.mkdir()
        _fill(comparison, fresh, display)
        _swap(fresh, target, work / "old")
        done = True
    except OutputError:
        raise
    except OSError as error:
        raise _refused(folder, error) from error
    finally:
        if work is not None:
            shutil.rmtree(work, ignore_errors=True)
        if not done:
            for parent in made:
                _remove_if_empty(parent)


def _check(target: Path, shown: Path, *, overwrite: bool) -> None:
    """Refuse a target that holds something we may not replace."""
    if not target.exists():
        return
    if not target.is_dir():
        raise OutputError(f"{shown} is a file, not a folder; choose another folder with --out")
    entries = sorted(target.iterdir())
    if entries and not overwrite:
        raise OutputError(
            f"{shown} is not empty (it holds {entries[0].name}); choose another folder with --out, or replace an earlier "
            "comparison with --overwrite"
        )
    for entry in entries:
        inside = sorted(entry.iterdir()) if entry.name == "figures" and entry.is_dir() else []
        foreign = [one for one in inside if not _FIGURE.fullmatch(one.name) and one.name not in _LITTER]
        if (not inside and entry.name not in _FILES | _LITTER | {"figures"}) or foreign:
            named = f"figures/{foreign[0].name}" if foreign else entry.name
            raise OutputError(
                f"{shown} holds {named}, which is no part of a comparison, so nothing was replaced; move it away or choose "
                "another folder with --out"
            )


def _fill(comparison: Comparison, folder: Path, display: Display) -> None:
    # matplotlib only where something is drawn
    from gradeline.report.comparison import comparison_text  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.figures.comparison import comparison_pictures  # noqa: PLC0415 (loaded when asked for: start-up time)

    record = json.dumps(comparison_record(comparison), ensure_ascii=False, allow_nan=False, indent=1)
    (folder / "comparison.json").write_text(record + "\n", "utf-8", "backslashreplace")
    (folder / "comparison.txt").write_text(
        comparison_text(comparison, display) + "\n", "utf-8", "backslashreplace"
    )
    for table in COMPARISON_TABLES:
        (folder / f"{table}.csv").write_bytes(_as_csv(comparison, table))
    (folder / "figures").mkdir()
    for picture in comparison_pictures(comparison, display=display):
        (folder / "figures" / f"{picture.name}.svg").write_bytes(picture.svg)
        (folder / "figures" / f"{picture.name}.png").write_bytes(picture.png)
