"""Sheets of paper: what every PDF of the program shares, its fonts, its margins, its feet and its tables."""

from __future__ import annotations

import logging
import unicodedata
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from types import MappingProxyType
from typing import Literal

import matplotlib as mpl
from fpdf import FPDF
from fpdf.enums import TableBordersLayout, XPos, YPos
from fpdf.fonts import FontFace, TTFFont

from gradeline.report.printed import PrintedTable

__all__ = ["INK", "LINE", "MUTED", "Paper", "clean", "quiet", "room_for"]

#: What fpdf2 calls the papers, by the name that ``--paper`` takes.
_SIZES: Mapping[str, str] = MappingProxyType({"a4": "A4", "letter": "Letter"})
MARGIN = 15.0
INK, MUTED, LINE = (31, 41, 51), (85, 96, 106), (200, 206, 210)
#: Font sizes that a table is tried in, points, the largest first.
_TABLE_SIZES = (7.4, 6.8, 6.2, 5.6)
_POINT = 25.4 / 72
#: mm on either side of a cell's words.
_PADDING = 0.9
#: Words wider than this are cut into lines.
_WIDEST_WORD = 48.0
#: A longer cell would not fit on a sheet.
_LONGEST_CELL = 900
#: The least that a column of sentences may be narrowed to, mm.
_NARROWEST_TEXT = 26.0


def clean(text: object) -> str:
    r"""Return a text as a PDF can hold it: characters that control something, or are none, as a space or a box.

    Examples
    --------
    >>> clean("a\tb\x07"), ascii(clean("\udc80x"))
    ('a b ', "'\\ufffdx'")
    """
    return "".join(
        "\N{REPLACEMENT CHARACTER}"
        if unicodedata.category(letter) == "Cs"
        else " "
        if unicodedata.category(letter) in ("Cc", "Zl", "Zp")
        else letter
        for letter in str(text)
    )


class Paper(FPDF):
    """A PDF on A4 or Letter with the program's fonts; its feet hold a line of words and the page's number.

    Parameters
    ----------
    size : {"a4", "letter"}
        The paper.
    title : str
        Of the document; it stands in the feet too.
    version : str
        Of the program.
    landscape : bool
        Whether the long edge lies at the bottom.
    """

    def __init__(
        self, size: Literal["a4", "letter"], title: str, version: str, *, landscape: bool = False
    ) -> None:
        super().__init__(orientation="landscape" if landscape else "portrait", format=_SIZES[size])
        # DejaVu has the signs that the program prints; matplotlib brings it along as a file.
        fonts = Path(mpl.get_data_path()) / "fonts" / "ttf"
        self.add_font("DejaVu", "", fonts / "DejaVuSans.ttf")
        self.add_font("DejaVu", "B", fonts / "DejaVuSans-Bold.ttf")
        self.add_font("DejaVuMono", "", fonts / "DejaVuSansMono.ttf")
        self.foot = clean(title)
        self.version = version
        self.set_title(clean(title))
        self.set_creator(f"gradeline {version}")
        self.set_lang("en-GB")
        self.set_margins(MARGIN, MARGIN - 1, MARGIN)
        self.set_auto_page_break(auto=True, margin=MARGIN + 2)
        self.alias_nb_pages("{nb}")
        self.set_draw_color(*LINE)
        self.set_line_width(0.15)

    def finished(self) -> bytes:
        """Return the PDF; nothing more can be printed."""
        content = bytes(self.output())
        self.close_fonts()
        return content

    def close_fonts(self) -> None:
        """Close the files of the fonts, which the library leaves open."""
        for font in self.fonts.values():
            if isinstance(font, TTFFont):
                font.ttfont.close()

    def footer(self) -> None:
        """Draw the foot of a page; the library calls it."""
        self.set_y(-MARGIN + 2)
        self.face(7, colour=MUTED)
        right = f"gradeline {self.version} · page {self.page_no()} of {{nb}}"
        room = self.epw - self.get_string_width(right) - 8
        words = self.foot
        while words and self.get_string_width(words) > room:
            words = words[:-2].rstrip() + "…" if len(words) > 2 else ""
        self.cell(self.epw / 2, 4, words)
        self.cell(self.epw / 2, 4, right, align="R")

    def face(
        self, size: float, *, bold: bool = False, mono: bool = False, colour: tuple[int, int, int] = INK
    ) -> None:
        """Choose how the next words look."""
        self.set_font("DejaVuMono" if mono else "DejaVu", "B" if bold else "", size)
        self.set_text_color(*colour)

    def left(self) -> float:
        """Return how much of the page is left, mm."""
        return float(self.page_break_trigger - self.get_y())

    def need(self, height: float) -> None:
        """Begin a new page where less than `height` mm is left."""
        if self.left() < height and self.get_y() > self.t_margin + 1:
            self.add_page()

    def words(
        self,
        text: str,
        size: float = 9.0,
        *,
        bold: bool = False,
        mono: bool = False,
        colour: tuple[int, int, int] = INK,
        indent: float = 0.0,
        after: float = 1.2,
    ) -> None:
        """Print a paragraph."""
        self.face(size, bold=bold, mono=mono, colour=colour)
        self.set_x(self.l_margin + indent)
        self.multi_cell(
            self.epw - indent,
            size * 1.4 * _POINT,
            clean(text),
            align="L",
            new_x=XPos.LMARGIN,
            new_y=YPos.NEXT,
        )
        self.set_y(self.get_y() + after)

    def tabled(self, printed: PrintedTable, *, name: str | None = None) -> None:
        """Print a table with its caption; its heads come again on every page that it runs over."""
        size, widths = self._fit(printed)
        kept = _groups(widths, self.epw)
        for place, columns in enumerate(kept):
            self.need(room_for(printed))
            caption = printed.caption if place == 0 else f"{name or printed.heads[0]}, further columns."
            self.words(caption, 8, colour=MUTED, after=0.8)
            self._table(printed, columns, widths, size)
        for number, note in enumerate(printed.notes, 1):
            self.words(f"{number}. {note}", 7.5, colour=MUTED, indent=2, after=0.4)
        self.set_y(self.get_y() + 2)

    def _table(
        self, printed: PrintedTable, columns: Sequence[int], widths: Sequence[float], size: float
    ) -> None:
        self.face(size)
        chosen = tuple(widths[n] for n in columns)
        with self.table(
            align="L",
            borders_layout=TableBordersLayout.HORIZONTAL_LINES,
            col_widths=chosen,
            width=min(sum(chosen), self.epw),
            headings_style=FontFace(emphasis="BOLD", color=INK, fill_color=(244, 246, 247)),
            line_height=size * 1.3 * _POINT,
            padding=(0.5, _PADDING, 0.5, _PADDING),
            text_align=tuple("LEFT" if n == 0 or n in printed.text_columns else "RIGHT" for n in columns),
            v_align="TOP",
            wrapmode="WORD",
        ) as table:
            heads = table.row()
            for n in columns:
                heads.cell(clean(printed.heads[n]), v_align="BOTTOM")
            first = FontFace(emphasis="BOLD")
            for row in printed.rows:
                line = table.row()
                for n in columns:
                    line.cell(_cut(clean(row[n])), style=first if n == 0 else None)
        self.set_y(self.get_y() + 0.8)

    def _fit(self, printed: PrintedTable) -> tuple[float, list[float]]:
        """The largest size of font in which a table is no wider than the page, and its columns' widths, mm."""
        widths: list[float] = []
        for size in _TABLE_SIZES:
            wanted, least = self._widths(printed, size)
            if sum(least) <= self.epw:
                return size, _shared(wanted, least, self.epw)
            widths = least
        return _TABLE_SIZES[-1], [min(width, self.epw / 2) for width in widths]

    def _widths(self, printed: PrintedTable, size: float) -> tuple[list[float], list[float]]:
        """The widths that the columns would have, and the least that they need."""
        wanted, least = [], []
        for n, head in enumerate(printed.heads):
            cells = {_cut(clean(row[n])) for row in printed.rows}
            self.face(size, bold=True)
            head_word = self._longest_word([clean(head)])
            head_whole = self.get_string_width(clean(head))
            self.face(size, bold=n == 0)
            # the longest by letters are the widest, near enough
            longest = max((self.get_string_width(cell) for cell in sorted(cells, key=len)[-8:]), default=0.0)
            text = n == 0 or n in printed.text_columns
            whole = max(longest, head_word, min(head_whole, max(longest, head_whole / 3 + 2)))
            word = self._longest_word(cells) if text else longest
            narrow = max(word, head_word)
            # short words stay on one line; only where nothing else helps is there one word a line
            if text and size > _TABLE_SIZES[-1]:
                narrow = max(narrow, min(longest, _NARROWEST_TEXT))
            room = 2 * _PADDING + 0.4
            wanted.append(max(whole, narrow) + room)
            least.append(min(narrow, max(_WIDEST_WORD, head_word)) + room)
        return wanted, least

    def _longest_word(self, texts: Sequence[str] | set[str]) -> float:
        words = sorted({word for text in texts for word in text.split(" ")}, key=len)
        return max((self.get_string_width(word) for word in words[-6:]), default=0.0)


def room_for(printed: PrintedTable) -> float:
    """Return how much of a table should stand on one page, mm: short ones whole, of others caption, heads and some rows."""
    rows = len(printed.rows)
    return 20 + 4.8 * rows if rows <= 12 else 40.0


def _cut(text: str) -> str:
    return text if len(text) <= _LONGEST_CELL else text[: _LONGEST_CELL - 1] + "…"


def _shared(wanted: Sequence[float], least: Sequence[float], room: float) -> list[float]:
    """Widths no wider than the room: what is missing is taken from the columns in proportion to what they can give."""
    over = sum(wanted) - room
    if over <= 0:
        return list(wanted)
    spare = sum(a - b for a, b in zip(wanted, least, strict=True))
    return [a - over * (a - b) / spare for a, b in zip(wanted, least, strict=True)]


def _groups(widths: Sequence[float], room: float) -> list[list[int]]:
    """Columns that fit side by side; the first one, which names the rows, begins each group."""
    groups = [[0]]
    for n in range(1, len(widths)):
        if len(groups[-1]) > 1 and sum(widths[k] for k in groups[-1]) + widths[n] > room + 1e-6:
            groups.append([0])
        groups[-1].append(n)
    return groups


@contextmanager
def quiet() -> Iterator[None]:
    """Keep the libraries from telling which letters of a name a font lacks: a box stands for them."""
    loggers = [logging.getLogger(name) for name in ("fpdf", "fontTools")]
    levels = [logger.level for logger in loggers]
    for logger in loggers:
        logger.setLevel(logging.CRITICAL)
    try:
        yield
    finally:
        for logger, level in zip(loggers, levels, strict=True):
            logger.setLevel(level)
