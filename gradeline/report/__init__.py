"""A reduction to what people read and keep: figures, page, tables, terminal.

The names below are loaded when they are first asked for, so that asking for help loads no drawing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from gradeline.report.formats import FORMATS

if TYPE_CHECKING:
    from gradeline.report.brief import one_line
    from gradeline.report.output import write
    from gradeline.report.sentences import summarise
    from gradeline.report.summary import failed_row, summary_rows
    from gradeline.report.terminal import terminal_summary

__all__ = [
    "FORMATS",
    "failed_row",
    "one_line",
    "summarise",
    "summary_rows",
    "terminal_summary",
    "write",
]

_HOMES = {
    "failed_row": "gradeline.report.summary",
    "one_line": "gradeline.report.brief",
    "summarise": "gradeline.report.sentences",
    "summary_rows": "gradeline.report.summary",
    "terminal_summary": "gradeline.report.terminal",
    "write": "gradeline.report.output",
}


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
