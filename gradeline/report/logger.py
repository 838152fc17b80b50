"""What the report says of a logger's record: the windows that are runs, and what is wrong with the record."""

from __future__ import annotations

from collections.abc import Callable

from gradeline.quantities.printing import MISSING, rounded, thousands
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import PrintedTable, Row, TableColumn, known, lay_out, name_column, records

__all__ = ["record_flag_table", "record_sentences", "window_table"]


def record_sentences(reduction: Reduction) -> tuple[str, ...]:
    """Say what was recorded and what became of it; nothing without a logger's record.

    Parameters
    ----------
    reduction : Reduction
        Its tables ``windows`` and ``record_flags`` are read.

    Returns
    -------
    tuple of str
        Two sentences or three.
    """
    record = reduction.survey.get("record")
    if not record:
        return ()
    windows = records(reduction.windows)
    found = any(row["found"] for row in windows)
    lengths = [row["length"] for row in windows if known(row["length"])]
    span = f", {_seconds(min(lengths))} to {_seconds(max(lengths))} long" if lengths else ""
    how = "found steady in it" if found else "given in runs.csv"
    count = f"{len(windows)} window{'' if len(windows) == 1 else 's'}"
    told = [
        f"{record['file']} holds {thousands(record['samples'], 9)} rows from {record['begins']} on, usually "
        f"{_seconds(record['interval'])} apart; {count} {'is' if len(windows) == 1 else 'are'} {how}{span}.",
        "A run's readings, flow and temperature are means over its window; their uncertainties come from the record's own "
        "correlation: the effective samples are as many uncorrelated ones as would tell the mean of the flow as well.",
    ]
    faults = len(reduction.record_flags)
    if not faults:
        told.append("No drift, step, standstill, spike or gap was found beyond chance.")
    return tuple(told)


def window_table(reduction: Reduction, *, limit: int | None = None) -> PrintedTable:
    """Return the windows: when, how long, how many samples, how far the flow drifts over each."""
    return lay_out(
        "The windows of the record. Drift: the change of the flow over the window, over its mean, ± one standard uncertainty.",
        records(reduction.windows)[:limit],
        [
            name_column("run"),
            _text("from", "begins"),
            _text("to", "ends"),
            TableColumn("length, s", lambda row: f"{row['length']:.5g}"),
            TableColumn("samples", lambda row: thousands(row["samples"], 9)),
            TableColumn(
                "effective samples", lambda row: thousands(row["effective_samples"], 3), always=False
            ),
            TableColumn("flow's drift, %", _drift),
            TableColumn("window", lambda row: "found" if row["found"] else "given", text=True),
        ],
    )


def record_flag_table(reduction: Reduction, *, limit: int | None = None) -> PrintedTable:
    """Return what is wrong with the record, with its times."""
    return lay_out(
        "What is wrong with the record, beyond chance. Sizes are in the units of the file.",
        records(reduction.record_flags)[:limit],
        [
            TableColumn("column", lambda row: row["column"] or "all", text=True),
            name_column("kind"),
            _text("from", "begins"),
            _text("to", "ends"),
            TableColumn("run", lambda row: row["run"] or MISSING, text=True, always=False),
            TableColumn("what", lambda row: row["what"] or MISSING, text=True),
        ],
        note=None,
    )


def _text(head: str, name: str) -> TableColumn:
    cell: Callable[[Row], str] = lambda row: row[name] or MISSING  # noqa: E731 (one of many cells)
    return TableColumn(head, cell, text=True)


def _drift(row: Row) -> str:
    if not known(row["flow_drift"]):
        return MISSING
    return rounded(100 * row["flow_drift"], 100 * row["flow_drift_u"] if known(row["flow_drift_u"]) else None)


def _seconds(value: float) -> str:
    return f"{value:.5g} s"
