"""Text for a terminal: paragraphs, lists and tables, 100 columns wide at most."""

from __future__ import annotations

import textwrap
import unicodedata
from collections.abc import Iterable, Sequence

from gradeline.report.printed import PrintedTable

__all__ = ["WIDTH", "bullets", "listed", "paragraph", "text_table", "wrapped"]

WIDTH = 100
#: A name is cut to no fewer letters than this while the table can be broken into parts instead.
_SHORTEST_NAME = 24


def _plain(text: str) -> str:
    """A text without characters that would steer a terminal."""
    return "".join(
        " " if unicodedata.category(letter) in ("Cc", "Cf", "Zl", "Zp") else letter for letter in text
    )


def wrapped(text: str, first: str = "", rest: str = "") -> list[str]:
    """Return a text on lines as wide as a terminal, what stands before the first and before the rest given."""
    # a value and its uncertainty stay on one line
    joined = _plain(text).replace(" ± ", "\u00a0±\u00a0")
    lines = textwrap.wrap(joined, WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)
    return [line.replace("\u00a0", " ") for line in lines] or [first]


def bullets(sentences: Iterable[str]) -> list[str]:
    """Return sentences with a dash before each, on lines as wide as a terminal."""
    return [line for sentence in sentences for line in wrapped(sentence, "  - ", "    ")]


def paragraph(text: str) -> str:
    """Return a text as one block."""
    return "\n".join(wrapped(text))


def listed(title: str, sentences: Iterable[str]) -> str:
    """Return sentences under a title as one block.

    Examples
    --------
    >>> print(listed("Found", ["The wall is smooth."]))
    Found
      - The wall is smooth.
    """
    return "\n".join([title, *bullets(sentences)])


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


def text_table(title: str, table: PrintedTable, drop: set[str], more_in: str = "", more: int = 0) -> str:
    """Return a table under its title, in columns two spaces apart; one too wide stands in parts, each with its names.

    Long names are cut where they alone make a table too wide; a number never is.

    Parameters
    ----------
    title : str
        The line above it.
    table : PrintedTable
        The cells.
    drop : set of str
        Columns whose heads begin so are left out.
    more_in, more : str, int
        Where further rows are to be found, and how many; nothing is said of none.
    """
    kept = [n for n, head in enumerate(table.heads) if not any(head.startswith(word) for word in drop)]
    shown: list[str] = []
    for part in _parts(table, kept):
        shown += ["", *_grid(table, part)] if shown else _grid(table, part)
    if more > 0:
        shown.append(f"  and {more} more in {more_in}")
    for n, note in enumerate(table.notes, 1):
        shown += wrapped(note, f"  {n}: ", "     ")
    return "\n".join([title, *shown])


def _natural(table: PrintedTable, column: int) -> int:
    """How wide a column is with nothing cut."""
    stack = [line[0] for line in _heads([table.heads[column]])]
    return max(_columns(_plain(text)) for text in [*stack, *(row[column] for row in table.rows)])


def _least(table: PrintedTable, column: int) -> int:
    """How narrow a column may become: a number is never cut, a name keeps enough to be told from others."""
    natural = _natural(table, column)
    return min(natural, _SHORTEST_NAME) if column in table.text_columns else natural


def _parts(table: PrintedTable, kept: list[int]) -> list[list[int]]:
    """Columns in parts that fit: the names of a row stand in each, an interval beside its value."""

    def fits(columns: list[int]) -> bool:
        return sum(_least(table, n) for n in columns) + 2 * (len(columns) - 1) <= WIDTH - 2

    if not kept or fits(kept):
        return [kept]
    names = kept[:1]
    for n in kept[1:]:
        if n not in table.text_columns:
            break
        names.append(n)
    groups: list[list[int]] = []
    for n in kept[len(names) :]:
        if groups and table.heads[n].startswith("interval"):
            groups[-1].append(n)
        else:
            groups.append([n])
    parts = [names]
    for group in groups:
        if fits([*parts[-1], *group]) or parts[-1] == names:
            parts[-1] = [*parts[-1], *group]
        else:
            parts.append([*names, *group])
    return parts


def _grid(table: PrintedTable, kept: list[int]) -> list[str]:
    """The lines of one part, heads first; names are cut until it fits."""
    lines = _heads([table.heads[n] for n in kept])
    rows = [[_plain(row[n]) for n in kept] for row in table.rows]
    widths = [_natural(table, n) for n in kept]
    texts = [place for place, n in enumerate(kept) if n in table.text_columns]
    while sum(widths) + 2 * (len(widths) - 1) > WIDTH - 2 and texts:
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
    return shown


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
