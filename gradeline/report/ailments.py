"""What ails taps and line, as a reader sees it."""

from __future__ import annotations

from collections.abc import Iterable

from gradeline.quantities.printing import MISSING, SI_DISPLAY, Display, rounded, thousands
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import PrintedTable, Row, TableColumn, known, lay_out, name_column, records

__all__ = ["ailment_sentences", "ailment_table"]

_NONE_FOUND = "Every tap and every stretch between taps was held against all runs: none is off beyond chance."
_FOUND = (
    "Every tap and every stretch between taps was held against all runs. What is off beyond chance stands here; the others "
    "are not."
)


def ailment_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return what ails taps and line: what, where, how large, on what evidence, and what was done."""
    return lay_out(
        "What ails taps and line, over all runs. The evidence is the fall of χ² that taking it up brings; the rival is what "
        "the best error of a single tap would bring in its place.",
        records(reduction.ailments),
        [
            TableColumn("what", _what, text=True),
            TableColumn("where", lambda row: _where(row, display), text=True),
            name_column("ailment"),
            TableColumn("size", lambda row: "; ".join(_sizes(row, display)) or MISSING, text=True),
            TableColumn("evidence Δχ²", lambda row: thousands(row["evidence"], 3)),
            TableColumn("best rival Δχ²", lambda row: thousands(row["rival"], 3), always=False),
            name_column("fate", "what was done"),
        ],
        note=None,
    )


def _what(row: Row) -> str:
    return "line" if row["what"] == "line" else f"{row['what']} {row['name']}"


def _where(row: Row, display: Display) -> str:
    if not known(row["start"]):
        return MISSING
    # As the sentences and the figure have it.
    return f"{display.text('chainage', row['start'])} to {display.text('chainage', row['end'], unit=True)}"


def _sizes(row: Row, display: Display) -> Iterable[str]:
    if known(row["offset"]) and "offset" in row["ailment"]:
        yield f"offset {display.text('small head', row['offset'], row['offset_u'], unit=True)}"
    grown = [
        f"edge coefficient {rounded(row['edge_coefficient'], row['edge_coefficient_u'])}"
        if known(row["edge_coefficient"]) and "edge" in row["ailment"]
        else "",
        f"chainage off by {display.text('small head', row['chainage_error'], row['chainage_error_u'], unit=True)}"
        if known(row["chainage_error"]) and "chainage" in row["ailment"]
        else "",
    ]
    if any(grown):
        yield " or ".join(filter(None, grown))
    if known(row["loss_coefficient"]):
        if row["ailment"] == "unlisted loss":
            yield f"K = {rounded(row['loss_coefficient'], row['loss_coefficient_u'])}"
        else:
            way = "falls" if row["loss_coefficient"] > 0 else "rises"
            step = rounded(abs(row["loss_coefficient"]), row["loss_coefficient_u"])
            yield f"energy head {way} by {f'({step})' if '±' in step else step} V²/2g there"
    if known(row["slope_change"]):
        change = rounded(100 * abs(row["slope_change"]), 100 * row["slope_change_u"])
        way = "steeper" if row["slope_change"] > 0 else "flatter"
        where = (
            "at the end than at the start" if row["ailment"] == "gradual change of slope" else "downstream"
        )
        yield f"slope {f'({change})' if '±' in change else change} % {way} {where}"


def ailment_sentences(reduction: Reduction) -> tuple[str, ...]:
    """Say that taps and line were looked at, and whether anything was found; or why they were not.

    Parameters
    ----------
    reduction : Reduction
        Its tables ``ailments`` and ``inputs`` are read.

    Returns
    -------
    tuple of str
        One sentence or two.
    """
    if len(reduction.ailments):
        return (_FOUND,)
    judged = [
        str(row["text"]) for row in records(reduction.inputs) if row["what"] == "taps and line over all runs"
    ]
    if judged and judged[0].startswith("not judged"):
        why = judged[0].removeprefix("not judged").removeprefix(": ").rstrip(".")
        return (f"No tap and no stretch between taps is named{': ' + why if why else ''}.",)
    return (_NONE_FOUND,)
