"""Slips of the pen that would explain a flag, as a reader sees them."""

from __future__ import annotations

from gradeline.quantities.printing import MISSING, format_number, rounded
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import PrintedTable, Row, TableColumn, known, lay_out, name_column, records

__all__ = ["named_slips", "slip_table"]


def named_slips(reduction: Reduction) -> list[Row]:
    """Return the best slip behind each flag, where it deserves a word."""
    best: dict[tuple[object, object, object], Row] = {}
    for row in records(reduction.slips):
        # A flagged reading is a flag of its own; a run off the law is one, whichever of its numbers is at fault.
        tap = None if row["flag"] in ("run", "law") else row["tap"]
        if row["named"]:
            best.setdefault((row["flag"], row["run"], tap), row)
    return list(best.values())


def slip_table(reduction: Reduction, *, limit: int | None = None) -> PrintedTable:
    """Return the slips of the pen that would explain a flag, in the units of the files."""
    return lay_out(
        "Slips of the pen that would explain a flag, in the unit of the file. The score is what the value meant would lie "
        "from the expected one, in standard deviations; the chance is that of another slip or of none, and only slips of small "
        "chance are named: a wrong last digit, say, cannot be told from scatter. Nothing was changed: look it up in the record.",
        named_slips(reduction)[:limit],
        [
            name_column("run"),
            TableColumn("where", lambda row: str(row["tap"] or "flow"), text=True),
            name_column("kind", "slip"),
            TableColumn("written", lambda row: _in_unit(row["written"], row)),
            TableColumn("meant", lambda row: _in_unit(row["repaired"], row)),
            TableColumn("expected", lambda row: rounded(row["expected"], row["expected_u"])),
            TableColumn("score", lambda row: format_number(row["score"], 2)),
            TableColumn("chance (%)", lambda row: format_number(100 * row["chance"], 2)),
        ],
        note=None,
    )


def _in_unit(value: float | None, row: Row) -> str:
    # As written: without zeros that only digits would add.
    return f"{value:.7g} {row['unit']}".replace("-", "−") if known(value) else MISSING
