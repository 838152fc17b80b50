"""What a report is made of: sections of blocks, in plain text; page and PDF know how each kind of block looks."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import ClassVar, Literal

from gradeline.report.printed import PrintedTable

__all__ = [
    "Block",
    "Bullets",
    "Drawings",
    "Fold",
    "Heading",
    "Outline",
    "Pairs",
    "Paragraph",
    "Section",
    "SideBySide",
    "Tabled",
    "headings",
]


@dataclass(frozen=True)
class Paragraph:
    """A paragraph; ``small`` ones are asides, ``close`` ones the last word of a section."""

    kind: ClassVar[str] = "paragraph"
    text: str
    style: Literal["intro", "small", "close"] = "intro"


@dataclass(frozen=True)
class Heading:
    """A heading within a section."""

    kind: ClassVar[str] = "heading"
    words: str


@dataclass(frozen=True)
class Bullets:
    """A list of sentences, each perhaps with a word set off before it."""

    kind: ClassVar[str] = "bullets"
    items: tuple[tuple[str, str], ...]
    style: Literal["plain", "look", ""] = "plain"


@dataclass(frozen=True)
class Pairs:
    """Names with what is said of each; ``code`` ones are set in a fixed pitch."""

    kind: ClassVar[str] = "pairs"
    rows: tuple[tuple[str, str], ...]
    code: bool = False


@dataclass(frozen=True)
class Tabled:
    """A table with a name of its own, and how many rows it leaves to `place`."""

    kind: ClassVar[str] = "table"
    printed: PrintedTable
    name: str
    more: int = 0
    place: str = "the csv file of this table"


@dataclass(frozen=True)
class Drawings:
    """The figures of some groups, one beside the other or each alone."""

    kind: ClassVar[str] = "drawings"
    groups: tuple[str, ...]
    layout: Literal["pair lines", "pair", "alone"] = "pair"


@dataclass(frozen=True)
class Fold:
    """Blocks under a line that a page can fold away."""

    kind: ClassVar[str] = "fold"
    words: str
    blocks: tuple[Block, ...]
    unfolded: bool = False


@dataclass(frozen=True)
class SideBySide:
    """Columns of blocks that stand beside each other where there is room."""

    kind: ClassVar[str] = "columns"
    columns: tuple[tuple[Block, ...], ...]
    style: Literal["columns", "pair"] = "pair"


Block = Paragraph | Heading | Bullets | Pairs | Tabled | Drawings | Fold | SideBySide


@dataclass(frozen=True)
class Section:
    """A section of the report.

    Parameters
    ----------
    key : str
        Its anchor on the page.
    heading : str
        As it stands above the section.
    short : str
        As it stands in the list of sections; empty: it is not on the list.
    blocks : tuple of Block
        What it holds, in order.
    together : bool
        Whether it should not be broken over two sheets of paper.
    """

    key: str
    heading: str
    short: str
    blocks: tuple[Block, ...]
    together: bool = False


@dataclass(frozen=True)
class Outline:
    """The whole report but for its figures, which its blocks name by their groups."""

    title: str
    subtitle: str
    date: str
    sections: tuple[Section, ...]


def headings(report: Outline) -> tuple[str, ...]:
    """Return every heading of a report in the order in which a reader meets them, the title first."""
    found = [report.title]
    for section in report.sections:
        found += [section.heading, *_within(section.blocks)]
    return tuple(found)


def _within(blocks: Sequence[Block]) -> Iterator[str]:
    for block in blocks:
        match block:
            case Heading(words):
                yield words
            case Fold(words, inner, _):
                yield words
                yield from _within(inner)
            case SideBySide(columns, _):
                for column in columns:
                    yield from _within(column)
