"""A plan as record and as a folder of files."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from gradeline.planning.tables import PLAN_TABLES, Plan
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.report.folder import Contents, write_folder
from gradeline.report.output import program_version
from gradeline.report.plan import plan_summary
from gradeline.report.record import csv_of, json_of, jsonable, rows_of

__all__ = ["plan_record", "write_plan"]

_FIGURES = ("expected_grade_lines", "expected_deflections")
_PLAN = Contents(
    "plan",
    frozenset(
        {
            "plan.txt",
            "plan.json",
            *(f"{name}.csv" for name in PLAN_TABLES),
            *(f"{name}.{kind}" for name in _FIGURES for kind in ("svg", "png")),
        }
    ),
)


def plan_record(plan: Plan) -> dict[str, Any]:
    """Return a plan as JSON can hold it: SI units, null where nothing is known.

    Parameters
    ----------
    plan : Plan
        What was planned.
    """
    words = {name: jsonable(value) for name, value in plan.words.items()}
    tables = {name: rows_of(columns, plan.tables[name]) for name, columns in PLAN_TABLES.items()}
    return {"gradeline": program_version(), **words, **tables}


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
    write_folder(folder, _PLAN, lambda fresh: _fill(plan, fresh, display), overwrite=overwrite)


def _fill(plan: Plan, folder: Path, display: Display) -> None:
    from gradeline.report.figures.plan import plan_pictures  # noqa: PLC0415 (loaded when asked for: start-up time)

    (folder / "plan.txt").write_text(plan_summary(plan, display) + "\n", "utf-8", "backslashreplace")
    (folder / "plan.json").write_bytes(json_of(plan_record(plan)))
    for name, columns in PLAN_TABLES.items():
        (folder / f"{name}.csv").write_bytes(csv_of(columns, rows_of(columns, plan.tables[name])))
    for name, (svg, png) in plan_pictures(plan, display=display).items():
        (folder / f"{name}.svg").write_bytes(svg)
        (folder / f"{name}.png").write_bytes(png)
