"""The report on paper: the page's sections in the page's order, with numbered pages and a block to sign."""

from __future__ import annotations

import io
import re
from collections.abc import Sequence
from typing import Literal

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.blocks import (
    Block,
    Bullets,
    Drawings,
    Fold,
    Heading,
    Outline,
    Pairs,
    Paragraph,
    Section,
    SideBySide,
    Tabled,
)
from gradeline.report.figures.render import Picture
from gradeline.report.outline import outline
from gradeline.report.paper import INK, LINE, MUTED, Paper, clean, quiet, room_for
from gradeline.report.printed import together

__all__ = ["as_pdf"]

#: Between two figures, mm; and how wide one is that stands alone.
_GAP, _ALONE = 4.0, 128.0
#: How much a paragraph and the first figures after it take, mm.
_FIRST_ROW = {"alone": 106.0, "pair": 82.0, "pair lines": 82.0}


def as_pdf(
    reduction: Reduction,
    pictures: Sequence[Picture],
    version: str,
    display: Display = SI_DISPLAY,
    paper: Literal["a4", "letter"] = "a4",
) -> bytes:
    """Return the report as a PDF.

    Parameters
    ----------
    reduction : Reduction
        What is reported.
    pictures : sequence of Picture
        Its figures, with what is made for paper.
    version : str
        Of the program.
    display : Display
        Units of the reader.
    paper : {"a4", "letter"}
        Size of the sheets.

    Returns
    -------
    bytes
        A PDF with the fonts in it. Its bookmarks are the headings; figures are vectors, hatched ones pictures of 200 dpi.
    """
    report = outline(reduction, version, display)
    sheet = Paper(paper, report.title, version)
    groups: dict[str, list[Picture]] = {}
    for picture in pictures:
        groups.setdefault(picture.group, []).append(picture)
    with quiet():
        sheet.add_page()
        _head(sheet, report)
        for section in report.sections:
            sheet.need(_beginning(section))
            _heading(sheet, section.heading, level=1)
            _print(sheet, section.blocks, groups)
        return sheet.finished()


def _head(sheet: Paper, report: Outline) -> None:
    """Title, what it is of, and the block for those who prepare and check it."""
    sheet.start_section(clean(report.title), level=0)
    sheet.words(report.title, 16, bold=True, after=0.5)
    sheet.words(report.subtitle, 9, colour=MUTED, after=2.5)
    quarter, top = sheet.epw / 4, sheet.get_y()
    for place, word in enumerate(("Prepared by", "Date", "Checked by", "Date")):
        x = sheet.l_margin + place * quarter
        sheet.rect(x, top, quarter, 13)
        sheet.set_xy(x + 1, top + 0.8)
        sheet.face(7, colour=MUTED)
        sheet.cell(quarter - 2, 3.5, word)
    sheet.set_xy(sheet.l_margin, top + 16)


def _heading(sheet: Paper, words: str, *, level: int) -> None:
    sheet.start_section(clean(words), level=level)
    if level == 1:
        sheet.set_y(sheet.get_y() + 2.5)
        y = sheet.get_y()
        sheet.set_draw_color(*INK)
        sheet.set_line_width(0.4)
        sheet.line(sheet.l_margin, y, sheet.l_margin + sheet.epw, y)
        sheet.set_draw_color(*LINE)
        sheet.set_line_width(0.15)
        sheet.set_y(y + 1.2)
        sheet.words(words, 12.5, bold=True, after=1)
        return
    sheet.set_y(sheet.get_y() + 1)
    sheet.words(words, 9.5, bold=True, after=0.8)


def _beginning(section: Section) -> float:
    """How much of a section should stand under its heading on the same page, mm."""
    early = [block for block in section.blocks[:2] if isinstance(block, Drawings)]
    if early:
        return 12.0 + _FIRST_ROW[early[0].layout]
    first, after = (*section.blocks, None, None)[:2]
    return 22.0 + _wanted(after) if isinstance(first, Heading) else 12.0 + max(_wanted(first), 22.0)


def _wanted(block: Block | None) -> float:
    """How much of a block should stand on the page of the heading before it, mm."""
    return room_for(block.printed) if isinstance(block, Tabled) else 18.0


def _print(sheet: Paper, blocks: Sequence[Block], groups: dict[str, list[Picture]]) -> None:
    for block, after in zip(blocks, (*blocks[1:], None), strict=True):
        match block:
            case Paragraph(text, style):
                if isinstance(after, Drawings) and any(groups.get(name) for name in after.groups):
                    sheet.need(_FIRST_ROW[after.layout])
                small = style == "small"
                sheet.words(
                    together(text), 8 if small else 9, bold=style == "close", colour=MUTED if small else INK
                )
            case Heading(words):
                sheet.need(10 + _wanted(after))
                _heading(sheet, words, level=2)
            case Bullets():
                _bullets(sheet, block)
            case Pairs(rows, code):
                for head, text in rows:
                    _pair(sheet, head, text, mono=code)
            case Tabled():
                _tabled(sheet, block)
            case Drawings(names, layout):
                _drawings(sheet, [one for name in names for one in groups.get(name, ())], layout)
            case Fold(words, inner, _):
                sheet.need(10 + _wanted(inner[0] if inner else None))
                _heading(sheet, words, level=2)
                _print(sheet, inner, groups)
            case SideBySide(columns, _):
                for column in columns:
                    _print(sheet, column, groups)


def _bullets(sheet: Paper, block: Bullets) -> None:
    for word, text in block.items:
        sheet.need(9)
        y = sheet.get_y()
        sheet.face(9)
        sheet.set_x(sheet.l_margin + 1)
        sheet.cell(4, 9 * 1.4 * 25.4 / 72, "•")
        sheet.set_xy(sheet.l_margin, y)
        if word:
            sheet.words(word, 9, bold=True, indent=5, after=0)
        sheet.words(together(text), 9, indent=5, after=0.8)
    sheet.set_y(sheet.get_y() + 0.8)


def _pair(sheet: Paper, head: str, text: str, *, mono: bool) -> None:
    """A name and what is said of it, beside each other where the name is short."""
    wide = 34.0
    sheet.need(9)
    y = sheet.get_y()
    sheet.face(8.5, bold=True)
    fits = sheet.get_string_width(clean(head)) < wide - 1
    sheet.words(head, 8.5, bold=True, after=0.4)
    if fits:
        sheet.set_y(y)
    sheet.words(text, 7.5 if mono else 8.5, mono=mono, indent=wide if fits else 5, after=0.7)


def _tabled(sheet: Paper, block: Tabled) -> None:
    if not block.printed.rows:
        sheet.words("None.", 8, colour=MUTED)
        return
    sheet.tabled(block.printed, name=block.name)
    if block.more:
        further = f"{block.more} further {'row is' if block.more == 1 else 'rows are'} in {block.place}."
        sheet.words(further, 8, colour=MUTED)


def _drawings(sheet: Paper, pictures: Sequence[Picture], layout: str) -> None:
    drawn = [picture for picture in pictures if picture.paper]
    across = 1 if layout == "alone" or len(drawn) == 1 else 2
    width = min(_ALONE, sheet.epw) if across == 1 else (sheet.epw - _GAP) / 2
    for at in range(0, len(drawn), across):
        row = drawn[at : at + across]
        heights = [width * _shape(picture.paper) for picture in row]
        sheet.need(max(heights) + 1)
        y = sheet.get_y()
        for place, (picture, height) in enumerate(zip(row, heights, strict=True)):
            sheet.image(
                io.BytesIO(picture.paper),
                x=sheet.l_margin + place * (width + _GAP),
                y=y,
                w=width,
                h=height,
                alt_text=clean(picture.alt),
            )
        sheet.set_y(y + max(heights) + 2)


def _shape(image: bytes) -> float:
    """Height over width of a figure."""
    if image[:8] == b"\x89PNG\r\n\x1a\n":
        wide, high = int.from_bytes(image[16:20]), int.from_bytes(image[20:24])
        return high / wide
    found = re.search(rb'viewBox="0 0 ([\d.]+) ([\d.]+)"', image[:2000])
    if found is None:  # matplotlib writes one in every SVG
        return 0.7
    wide_text, high_text = found.groups()
    return float(high_text) / float(wide_text)
