"""The summary for a terminal: plain text, at most 100 columns."""

from __future__ import annotations

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.cautions import further_cautions
from gradeline.report.converted import converted
from gradeline.report.logger import record_flag_table, window_table
from gradeline.report.sentences import summarise
from gradeline.report.tables import fitting_table, flag_table, run_table, wall_table
from gradeline.report.text import listed, paragraph, text_table

__all__ = ["terminal_summary"]

_MOST_RUNS = 40
_MOST_FLAGS = 20
_MOST_CAUTIONS = 12


def terminal_summary(reduction: Reduction, display: Display = SI_DISPLAY) -> str:
    """Return what a terminal shows of a reduction: sentences first, then compact tables, flags and cautions.

    Parameters
    ----------
    reduction : Reduction
        What was reduced.
    display : Display
        Units of the reader.

    Returns
    -------
    str
        Plain text, no line longer than 100 columns, no line end after the last line.
    """
    reduction = converted(reduction, display)
    summary = summarise(reduction, display)
    title = str(reduction.survey.get("title") or "Survey")
    date = reduction.survey.get("date")
    blocks = [paragraph(f"{title}, {date}" if date else title)]
    for head, sentences in (
        ("Found", summary.found),
        ("To look at", summary.look),
        ("Not determined", summary.missing),
    ):
        if sentences:
            blocks.append(listed(head, sentences))
    if len(reduction.windows):
        windows, faults = len(reduction.windows), len(reduction.record_flags)
        table = window_table(reduction, limit=_MOST_RUNS)
        blocks.append(text_table("Windows of the record", table, {"to"}, "windows.csv", windows - _MOST_RUNS))
        if faults:
            table = record_flag_table(reduction, limit=_MOST_FLAGS)
            more = faults - _MOST_FLAGS
            blocks.append(
                text_table("What is wrong with the record", table, {"run"}, "record_flags.csv", more)
            )
    runs = len(reduction.runs)
    drop = {"t (", "straightness p", "readings used", "roughness ε", "ε,"}
    blocks.append(
        text_table(
            "Runs", run_table(reduction, display, limit=_MOST_RUNS), drop, "runs.csv", runs - _MOST_RUNS
        )
    )
    drop = {"hydraulically smooth", "ε⁺"}
    blocks.append(text_table("Walls", wall_table(reduction, display, conveyance=False), drop))
    if len(reduction.fittings):
        blocks.append(text_table("Fittings", fitting_table(reduction, display), set()))
    if len(reduction.flags):
        flags = len(reduction.flags)
        table = flag_table(reduction, display, limit=_MOST_FLAGS)
        blocks.append(text_table("Flags", table, {"suggestion"}, "flags.csv", flags - _MOST_FLAGS))
    cautions = further_cautions(reduction, summary.look)
    if cautions:
        shown = list(cautions[:_MOST_CAUTIONS])
        if len(cautions) > _MOST_CAUTIONS:
            shown.append(f"{len(cautions) - _MOST_CAUTIONS} more in reduction.json")
        blocks.append(listed("Cautions", shown))
    blocks.append(paragraph(summary.close))
    return "\n\n".join(blocks)
