"""The summary for a terminal: plain text, at most 100 columns."""

from __future__ import annotations

import textwrap
import unicodedata
from collections.abc import Iterable, Sequence

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.cautions import further_cautions
from gradeline.report.converted import converted
from gradeline.report.printed import PrintedTable
from gradeline.report.sentences import summarise
from gradeline.report.tables import fitting_table, flag_table, run_table, wall_table

__all__ = ["terminal_summary"]

WIDTH = 100
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
    blocks = ["\n".join(_wrapped(f"{title}, {date}" if date else title))]
    for head, sentences in (
        ("Found", summary.found),
        ("To look at", summary.look),
        ("Not determined", summary.missing),
    ):
        if sentences:
            blocks.append("\n".join([head, *_bullets(sentences)]))
    runs = len(reduction.runs)
    drop = {"t (", "straightness p", "readings used", "roughness ε", "ε,"}
    blocks.append(
        _table("Runs", run_table(reduction, display, limit=_MOST_RUNS), drop, "runs.csv", runs - _MOST_RUNS)
    )
    drop = {"hydraulically smooth", "ε⁺"}
    blocks.append(_table("Walls", wall_table(reduction, display, conveyance=False), drop))
    if len(reduction.fittings):
        blocks.append(_table("Fittings", fitting_table(reduction, display), set()))
    if len(reduction.flags):
        flags = len(reduction.flags)
        table = flag_table(reduction, display, limit=_MOST_FLAGS)
        blocks.append(_table("Flags", table, {"suggestion"}, "flags.csv", flags - _MOST_FLAGS))
    cautions = further_cautions(reduction, summary.look)
    if cautions:
        shown = list(cautions[:_MOST_CAUTIONS])
        if len(cautions) > _MOST_CAUTIONS:
            shown.append(f"{len(cautions) - _MOST_CAUTIONS} more in reduction.json")
        blocks.append("\n".join(["Cautions", *_bullets(shown)]))
    blocks.append("\n".join(_wrapped(summary.close)))
    return "\n\n".join(blocks)


def _plain(text: str) -> str:
    """A text without characters that would steer a terminal."""
    return "".join(
        " " if unicodedata.category(letter) in ("Cc", "Cf", "Zl", "Zp") else letter for letter in text
    )


def _wrapped(text: str, first: str = "", rest: str = "") -> list[str]:
    # a value and its uncertainty stay on one line
    joined = _plain(text).replace(" ± ", "\u00a0±\u00a0")
    lines = textwrap.wrap(joined, WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)
    return [line.replace("\u00a0", " ") for line in lines] or [first]


def _bullets(sentences: Iterable[str]) -> list[str]:
    return [line for sentence in sentences for line in _wrapped(sentence, "  - ", "    ")]


def _columns(text: str) -> int:
    """How many columns of a terminal a text takes."""
    return sum(
        0 if unicodedata.combining(letter) else 2 if unicodedata.east_asian_width(letter) in "WF" else 1
        for letter in text
    )


def _cut(text: str, width: int) -> str:
    text = _plain(text)
    if _columns(text) <= width:
        return text
    while text and _columns(text) > width - 1:
        text = text[:-1]
    return text + "…"


def _table(title: str, table: PrintedTable, drop: set[str], more_in: str = "", more: int = 0) -> str:
    """Lay out a table in columns two spaces apart; names are cut until it fits."""
    kept = [n for n, head in enumerate(table.heads) if not any(head.startswith(word) for word in drop)]
    heads = [table.heads[n] for n in kept]
    rows = [[_plain(row[n]) for n in kept] for row in table.rows]
    lines = _heads(heads)
    room = WIDTH - 2
    widths = [
        max([_columns(line[place]) for line in lines] + [_columns(row[place]) for row in rows])
        for place in range(len(kept))
    ]
    texts = [place for place, n in enumerate(kept) if n in table.text_columns]
    while sum(widths) + 2 * (len(widths) - 1) > room and texts:
        widest = max(texts, key=lambda place: widths[place])
        if widths[widest] <= 4:
            break
        widths[widest] -= 1
    shown = []
    for row in [*lines, *rows]:
        cells = []
        for place, n in enumerate(kept):
            cell = _cut(row[place], widths[place])
            pad = " " * (widths[place] - _columns(cell))
            cells.append(cell + pad if n in table.text_columns else pad + cell)
        shown.append(_cut(("  " + "  ".join(cells)).rstrip(), WIDTH))
    if more > 0:
        shown.append(f"  and {more} more in {more_in}")
    for n, note in enumerate(table.notes, 1):
        shown += _wrapped(note, f"  {n}: ", "     ")
    return "\n".join([title, *shown])


def _heads(heads: Sequence[str]) -> list[list[str]]:
    """Column heads on up to three lines, those with fewer standing at the bottom; the unit has its own."""
    stacks: list[list[str]] = []
    for head in heads:
        words, bracket, unit = head.partition(" (")
        stack = _halves(words)
        stacks.append([*stack, bracket.strip() + unit] if bracket else stack)
    lines = max((len(stack) for stack in stacks), default=1)
    stacks = [[""] * (lines - len(stack)) + stack for stack in stacks]
    return [[stack[line] for stack in stacks] for line in range(lines)]


def _halves(words: str) -> list[str]:
    """Words on two lines of about the same length, on one where they are short."""
    gaps = [n for n, letter in enumerate(words) if letter == " "]
    if len(words) <= 11 or not gaps:
        return [words]
    middle = min(gaps, key=lambda n: abs(n - len(words) / 2))
    return [words[:middle], words[middle + 1 :]]
