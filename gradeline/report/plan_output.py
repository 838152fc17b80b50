"""Writing a plan: its text, its record, its tables and figures, all of them or none."""

from __future__ import annotations

import csv
import io
import json
import math
import shutil
import tempfile
from pathlib import Path
from typing import Any

from gradeline.errors import OutputError
from gradeline.planning.tables import PLAN_TABLES, Plan
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.report.output import _make_parents, _refused, _remove_if_empty, _swap, program_version
from gradeline.report.plan import plan_summary
from gradeline.report.printed import records

__all__ = ["plan_record", "write_plan"]

_FIGURES = ("expected_grade_lines", "expected_deflections")
_FILES = frozenset(
    {
        "plan.txt",
        "plan.json",
        *(f"{name}.csv" for name in PLAN_TABLES),
        *(f"{name}.{kind}" for name in _FIGURES for kind in ("svg", "png")),
    }
)


def plan_record(plan: Plan) -> dict[str, Any]:
    """Return a plan as JSON can hold it: SI units, null where nothing is known.

    Parameters
    ----------
    plan : Plan
        What was planned.
    """
    words = {name: _value(value) for name, value in plan.words.items()}
    tables = {
        name: [{key: _value(value) for key, value in row.items()} for row in records(table)]
        for name, table in plan.tables.items()
    }
    return {"gradeline": program_version(), **words, **tables}


def _value(value: Any) -> Any:
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    return list(value) if isinstance(value, tuple) else value


def write_plan(plan: Plan, folder: Path, *, overwrite: bool = False, display: Display = SI_DISPLAY) -> None:
    """Write a plan to a folder: ``plan.txt``, ``plan.json``, a csv for each table, and the figures as svg and png.

    Parameters
    ----------
    plan : Plan
        What is written.
    folder : Path
        The target, absent or empty.
    overwrite : bool
        Whether an earlier plan there may be replaced; files of anything else never are.
    display : Display
        Units of text and figures.

    Raises
    ------
    OutputError
        Where the folder holds something else, or the disk refuses.
    """
    target = folder.resolve()
    work: Path | None = None
    made: list[Path] = []
    done = False
    try:
        _check(target, folder, overwrite=overwrite)
        made = _make_parents(target.parent)
        work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
        fresh = work / "new"
        fresh.mkdir()
        _fill(plan, fresh, display)
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
    if not target.exists():
        return
    if not target.is_dir():
        raise OutputError(f"{shown} is a file, not a folder; choose another folder with --out")
    entries = sorted(entry.name for entry in target.iterdir())
    if not entries:
        return
    if not overwrite:
        raise OutputError(
            f"{shown} is not empty (it holds {entries[0]}); choose another folder with --out, or replace an earlier plan "
            "with --overwrite"
        )
    foreign = [name for name in entries if name not in _FILES]
    if foreign:
        raise OutputError(
            f"{shown} holds {foreign[0]}, which is no part of a plan, so nothing was replaced; move it away or choose another "
            "folder with --out"
        )


def _fill(plan: Plan, folder: Path, display: Display) -> None:
    from gradeline.report.figures.plan import plan_figures  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.figures.style import styled  # noqa: PLC0415 (loaded when asked for: start-up time)

    (folder / "plan.txt").write_text(plan_summary(plan, display) + "\n", encoding="utf-8")
    text = json.dumps(plan_record(plan), ensure_ascii=False, allow_nan=False, indent=1)
    (folder / "plan.json").write_text(text + "\n", encoding="utf-8")
    for name, table in plan.tables.items():
        (folder / f"{name}.csv").write_text(_csv(name, records(table)), encoding="utf-8")
    with styled():
        for name, figure in plan_figures(plan, display=display).items():
            figure.savefig(folder / f"{name}.svg", metadata={"Date": None})
            figure.savefig(folder / f"{name}.png", dpi=150)


def _csv(name: str, rows: list[dict[str, Any]]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(PLAN_TABLES[name])
    for row in rows:
        writer.writerow([_cell(row[key]) for key in PLAN_TABLES[name]])
    return out.getvalue()


def _cell(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return repr(value)
    text = str(value).replace("\r", "\n")
    # A spreadsheet takes such a text for a formula.
    return f"'{text}" if text[:1] in ("=", "+", "-", "@", "\t", "\n") else text
