"""A blank sheet to write readings down on, column for column as ``readings.csv`` has them."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal, cast

from fpdf.enums import MethodReturnValue, XPos, YPos
from fpdf.util import Padding

from gradeline.report.paper import INK, MUTED, Paper, clean, quiet

__all__ = ["SheetColumn", "recording_sheet"]

#: mm: the narrowest column that a number can be written in, the one of the runs, a row, and the row of what is said once.
_NARROWEST, _RUN, _ROW, _BLOCK = 12.5, 15.0, 8.2, 11.0
#: mm: of the frames of cells. And rows of one run that are kept on one page at most.
_THIN, _KEPT = 0.15, 12
_WASH = (244, 246, 247)
_FRAME = (120, 130, 138)
_SIDES = Padding(left=0.3, right=0.3)
#: Between a number and its unit.
_UNIT = re.compile(r"(?<=\d) (?=[A-Za-zµ])")


@dataclass(frozen=True)
class SheetColumn:
    """A column of the sheet: its heading, where it is read, and what stands in it in a static run."""

    heading: str
    under: str = ""
    static: str = ""


def recording_sheet(
    title: str,
    columns: Sequence[SheetColumn],
    gauges: Sequence[tuple[str, str]],
    version: str,
    *,
    runs: int = 10,
    repeats: int = 1,
    paper: Literal["a4", "letter"] = "a4",
    listed: Sequence[str] = (),
    read: Sequence[SheetColumn] = (),
) -> bytes:
    """Return a recording sheet as a PDF.

    Parameters
    ----------
    title : str
        Of the survey.
    columns : sequence of SheetColumn
        Those of ``readings.csv``; that of the runs comes again where the columns do not fit side by side.
    gauges : sequence of (str, str)
        Each gauge with its kind.
    version : str
        Of the program.
    runs, repeats : int
        Rows for flowing runs, and how many rows each has; both at least 1. A static run comes first.
    paper : {"a4", "letter"}
        Size of the sheets; they lie on their long edge where the columns ask for it.
    listed : sequence of str
        Columns of ``readings.csv`` where it lists readings one a row; `columns` are then those of ``runs.csv``.
    read : sequence of SheetColumn
        What is read in each run, a row each in such a list: the tap as heading, its place and unit under it.

    Returns
    -------
    bytes
        A PDF with the fonts in it.
    """
    columns = [replace(column, under=_UNIT.sub("\u00a0", column.under)) for column in columns]
    with quiet():
        upright = Paper(paper, title, version)
        wide = sum(_widths(upright, columns)) > upright.epw + 1e-6
        sheet = upright
        if wide:
            upright.close_fonts()
            sheet = Paper(paper, title, version, landscape=True)
        sheet.set_draw_color(*_FRAME)
        sheet.set_line_width(_THIN)
        sheet.add_page()
        _head(sheet, title)
        widths = _widths(sheet, columns)
        run = _run_place(columns)
        bands = _bands(widths, run, sheet.epw)
        rows = [("static", True)] * repeats + [
            (str(run), False) for run in range(1, runs + 1) for _ in range(repeats)
        ]
        if not listed or len(columns) > 1:
            for place, band in enumerate(bands):
                if place:
                    sheet.add_page()
                _band(sheet, columns, band, run, _spread(widths, band, sheet.epw), rows)
        if listed:
            if len(columns) > 1:
                sheet.add_page()
            _list(sheet, listed, read, rows)
        _words(sheet, gauges, repeats, listed=bool(listed))
        return sheet.finished()


def _list(
    sheet: Paper, listed: Sequence[str], read: Sequence[SheetColumn], rows: Sequence[tuple[str, bool]]
) -> None:
    """The readings one a row: each run, and in it the taps in order, as a list of readings has them."""
    columns = [SheetColumn(heading) for heading in listed]
    names = [heading.partition("[")[0].strip().casefold() for heading in listed]
    run = names.index("run") if "run" in names else 0
    tap = names.index("tap") if "tap" in names else min(1, len(names) - 1)
    widths = _spread(_widths(sheet, columns), range(len(columns)), sheet.epw)
    _heads(sheet, columns, widths)
    for label, _ in rows:
        if sheet.left() < min(len(read), _KEPT) * _ROW:
            sheet.add_page()
            _heads(sheet, columns, widths)
        for place, one in enumerate(read):
            if sheet.left() < _ROW:
                sheet.add_page()
                _heads(sheet, columns, widths)
            x, y = sheet.l_margin, sheet.get_y()
            for column, width in enumerate(widths):
                sheet.set_xy(x, y)
                sheet.face(8.5, bold=column == run)
                words = label if column == run else one.heading if column == tap else ""
                sheet.cell(width, _ROW, words, border=1, align="C")
                if column == tap and one.under:
                    sheet.set_xy(x, y + 0.62 * _ROW)
                    sheet.face(5.5, colour=MUTED)
                    sheet.cell(width, 0.34 * _ROW, clean(one.under), align="C")
                x += width
            if place == len(read) - 1:
                _rule(sheet, y + _ROW, sum(widths))
            sheet.set_xy(sheet.l_margin, y + _ROW)


def _rule(sheet: Paper, y: float, width: float) -> None:
    """A thick rule between two runs, upon the frames of the cells."""
    sheet.set_line_width(0.5)
    sheet.line(sheet.l_margin, y, sheet.l_margin + width, y)
    sheet.set_line_width(_THIN)


def _head(sheet: Paper, title: str) -> None:
    sheet.start_section("Recording sheet", level=0)
    sheet.words(title, 13, bold=True, after=0.2)
    sheet.words("Recording sheet", 9, colour=MUTED, after=1.5)
    blanks = ("Date", "Observers", "Begun at", "Ended at", "Air temperature", "Checked by")
    shares = (2, 4, 2, 2, 2, 3)
    x, top = sheet.l_margin, sheet.get_y()
    for words, share in zip(blanks, shares, strict=True):
        width = sheet.epw * share / sum(shares)
        sheet.rect(x, top, width, _BLOCK)
        sheet.set_xy(x + 0.6, top + 0.5)
        sheet.face(6.5, colour=MUTED)
        sheet.cell(width - 1.2, 3, words)
        x += width
    sheet.set_xy(sheet.l_margin, top + _BLOCK + 3)


def _widths(sheet: Paper, columns: Sequence[SheetColumn]) -> list[float]:
    """The least width of each column, mm: its heading in two or three lines, and room to write in."""
    found = []
    for n, column in enumerate(columns):
        sheet.face(7.5, bold=True)
        words = max(sheet.get_string_width(word) for word in (*clean(column.heading).split(" "), "0"))
        sheet.face(6.5)
        words = max(words, *(sheet.get_string_width(word) for word in (*clean(column.under).split(" "), "0")))
        found.append(max(_RUN if n == _run_place(columns) else _NARROWEST, min(words + 1.8, 45.0)))
    return found


def _run_place(columns: Sequence[SheetColumn]) -> int:
    """The column that names the run, which need not be the first."""
    return next((n for n, column in enumerate(columns) if column.heading.strip().casefold() == "run"), 0)


def _bands(widths: Sequence[float], run: int, room: float) -> list[list[int]]:
    """Columns side by side in their order; of more than one band each later one has the column of the runs first."""
    bands: list[list[int]] = [[]]
    for n, width in enumerate(widths):
        # Room for the column of the runs is kept in a band that does not hold it yet.
        kept = widths[run] if len(bands) == 1 and n < run else 0.0
        if len(bands[-1]) > 1 and sum(widths[k] for k in bands[-1]) + width + kept > room + 1e-6:
            if run not in bands[-1]:
                bands[-1].insert(0, run)
            bands.append([run])
        if n not in bands[-1]:
            bands[-1].append(n)
    return bands


def _spread(widths: Sequence[float], band: Sequence[int], room: float) -> list[float]:
    """The widths of a band, the room that is left shared out, up to twice the least of each."""
    least = [widths[n] for n in band]
    factor = min(room / sum(least), 2.0)
    return [width * factor for width in least]


def _band(
    sheet: Paper,
    columns: Sequence[SheetColumn],
    band: Sequence[int],
    run: int,
    widths: Sequence[float],
    rows: Sequence[tuple[str, bool]],
) -> None:
    heads = [columns[n] for n in band]
    _heads(sheet, heads, widths)
    each = sum(label == rows[0][0] for label, _ in rows)
    rules: list[float] = []
    for n, (label, static) in enumerate(rows):
        # the rows of a run stay on one page
        if (n % each == 0 and sheet.left() < min(each, _KEPT) * _ROW) or sheet.left() < _ROW:
            _ruled(sheet, rules, sum(widths))
            sheet.add_page()
            _heads(sheet, heads, widths)
        y = sheet.get_y()
        if each > 1 and n % each == each - 1:
            rules.append(y + _ROW)
        x = sheet.l_margin
        for place, column, width in zip(band, heads, widths, strict=True):
            words = label if place == run else column.static if static else ""
            sheet.set_xy(x, y)
            sheet.face(8.5, bold=place == run)
            sheet.cell(width, _ROW, words, border=1, align="C")
            x += width
        sheet.set_xy(sheet.l_margin, y + _ROW)
    end = sheet.get_y()
    _ruled(sheet, rules, sum(widths))
    sheet.set_xy(sheet.l_margin, end)


def _ruled(sheet: Paper, rules: list[float], width: float) -> None:
    """Draw the rules of a page after its cells, whose frames would lie upon them, and forget them."""
    for y in rules:
        _rule(sheet, y, width)
    rules.clear()


def _heads(sheet: Paper, heads: Sequence[SheetColumn], widths: Sequence[float]) -> None:
    """The headings as the csv has them, and below each where it is read."""
    tall = max(_height(sheet, head, width) for head, width in zip(heads, widths, strict=True)) + 1.2
    x, y = sheet.l_margin, sheet.get_y()
    sheet.set_fill_color(*_WASH)
    for head, width in zip(heads, widths, strict=True):
        sheet.rect(x, y, width, tall, style="DF")
        sheet.set_xy(x, y + 0.6)
        for words, bold, size in ((head.heading, True, 7.5), (head.under, False, 6.5)):
            if words:
                sheet.face(size, bold=bold, colour=INK if bold else MUTED)
                sheet.set_x(x)
                sheet.multi_cell(
                    width,
                    size * 0.45,
                    clean(words),
                    align="C",
                    new_x=XPos.LEFT,
                    new_y=YPos.NEXT,
                    padding=_SIDES,
                )
        x += width
    sheet.set_xy(sheet.l_margin, y + tall)


def _height(sheet: Paper, head: SheetColumn, width: float) -> float:
    total = 0.0
    for words, bold, size in ((head.heading, True, 7.5), (head.under, False, 6.5)):
        if words:
            sheet.face(size, bold=bold)
            height = sheet.multi_cell(
                width,
                size * 0.45,
                clean(words),
                align="C",
                padding=_SIDES,
                dry_run=True,
                output=MethodReturnValue.HEIGHT,
            )
            total += cast(float, height)
    return total


def _words(sheet: Paper, gauges: Sequence[tuple[str, str]], repeats: int, *, listed: bool) -> None:
    """What has to be known to fill it in."""
    sheet.set_y(sheet.get_y() + 2)
    sheet.need(16)
    rows = "Rows with one run's label are repeats of it. " if repeats > 1 and not listed else ""
    of = (
        "The columns are those of runs.csv and, one reading a row, of readings.csv."
        if listed
        else "Columns and headings are those of readings.csv; where note stands under a heading, it begins with that in the file."
    )
    text = (
        f"{of} Nothing flows in a static run. Leave a cell empty where nothing was read, "
        f"and write each reading as it stands on the scale, in the unit of the heading. {rows}"
        f"Gauges: {'; '.join(f'{name} ({kind})' for name, kind in gauges)}."
    )
    sheet.words(text, 7.5, colour=MUTED)
