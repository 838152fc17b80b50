"""The record as a workbook: a sheet for each result table, SI units, numbers as numbers, and two charts."""

from __future__ import annotations

import io
import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
import xlsxwriter
from xlsxwriter.utility import xl_rowcol_to_cell

from gradeline.hydraulics.friction import TURBULENT_LIMIT, colebrook_white
from gradeline.reduction.tables import RESULT_TABLES, Column, Reduction
from gradeline.report.record import guarded, table_rows, tables_of

__all__ = ["as_xlsx"]

#: Widths of columns, in letters.
_NARROW, _WIDE = 8, 40
_NAMES, _TEXTS = 24, 110
#: Of a line of text, and the most that a row can have, points.
_LINE_HEIGHT, _HIGHEST = 15.0, 409.0
_A4 = 9
#: Whole numbers below this count something and are shown as they are.
_COUNTED = 1e7
_CHARTS, _CHART_DATA = "charts", "chart data"
#: What is drawn: columns of runs, title, words of the axes.
_DRAWN = (
    ("velocity", "slope", "Friction slope and velocity", "mean velocity V (m/s)", "friction slope S (m/m)"),
    (
        "reynolds",
        "friction_factor",
        "Friction factor and Reynolds number",
        "Reynolds number Re",
        "Darcy friction factor f",
    ),
)
_LAW_POINTS = 25
_WIDE_SPREAD = 5.0
#: Rows of a sheet, the headings among them, that the format has room for.
_MOST_ROWS = 1_048_576
#: What a cell can hold.
_LONGEST = 32_767
_OKABE_ITO = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
_MARKERS = ("circle", "square", "triangle", "diamond", "x", "plus")


def as_xlsx(reduction: Reduction, version: str) -> bytes:
    """Return the result tables as a workbook.

    Parameters
    ----------
    reduction : Reduction
        What is written; SI units.
    version : str
        Of the program.

    Returns
    -------
    bytes
        An ``.xlsx``: the sheet ``survey`` with assumptions, cautions and files, then one sheet for each table of
        ``RESULT_TABLES``. Its first row holds the keys, its second the units (1: a number without one), and both stay in
        sight. Missing values are empty cells. Text that a spreadsheet could take for a formula gets a leading apostrophe,
        as in the csv files. The sheet ``charts`` shows S over V and f over Re, with intervals and the fitted law, where there
        is a turbulent or laminar run; ``chart data`` holds their numbers. Cells hold every digit and show about five. On
        paper each sheet is one page wide with its heads on every page.
    """
    out = io.BytesIO()
    book = xlsxwriter.Workbook(
        out,
        {
            "in_memory": True,
            "strings_to_formulas": False,
            "strings_to_urls": False,
            "strings_to_numbers": False,
        },
    )
    book.set_properties(
        {"title": _text(reduction.survey.get("title") or "Survey"), "comments": f"gradeline {version}"}
    )
    head = book.add_format({"bold": True, "bottom": 0, "valign": "bottom", "text_wrap": True})
    unit = book.add_format({"italic": True, "font_color": "#55606A", "bottom": 1})
    wrap = book.add_format({"text_wrap": True, "valign": "top"})
    formats = _Formats(book, wrap)
    _survey_sheet(book.add_worksheet("survey"), reduction, version, head, wrap)
    for name, columns in tables_of(reduction).items():
        rows = table_rows(name, getattr(reduction, name))
        _table_sheet(book.add_worksheet(name), columns, rows[: _MOST_ROWS - 2], head, unit, formats)
    _charts(book, reduction, head, unit, formats)
    book.close()
    return out.getvalue()


def _text(value: object) -> str:
    """A text as a cell can hold it."""
    text = guarded(str(value))
    # a file name that was not UTF-8 holds surrogates, which XML may not
    return text.encode("utf-8", "replace").decode("utf-8")[:_LONGEST]


def _survey_sheet(sheet: Any, reduction: Reduction, version: str, head: Any, wrap: Any) -> None:
    rows: list[tuple[str, str]] = [("program", f"gradeline {version}"), ("units", "SI throughout")]
    for key in ("title", "date", "source"):
        value = reduction.survey.get(key)
        if value:
            rows.append((key, str(value)))
    rows += [
        (f"SHA-256 of {name}", str(digest))
        for name, digest in dict(reduction.survey.get("files") or {}).items()
    ]
    rows += [("assumption", text) for text in reduction.assumptions]
    rows += [("caution", text) for text in reduction.cautions]
    sheet.write_row(0, 0, ("what", "text"), head)
    for place, (what, text) in enumerate(rows, 1):
        sheet.write_string(place, 0, _text(what), wrap)
        sheet.write_string(place, 1, _text(text), wrap)
        sheet.set_row(place, _height(max(_lines(what, _NAMES), _lines(text, _TEXTS))))
    sheet.set_column(0, 0, _NAMES)
    sheet.set_column(1, 1, _TEXTS)
    sheet.freeze_panes(1, 0)
    _for_paper(sheet, heads=1)


def _lines(text: str, width: int) -> int:
    """Lines that a text takes in a column; other fonts are wider than the one that its width is told in."""
    return max(1, math.ceil(len(text) / (0.95 * width)))


def _height(lines: int) -> float:
    return float(min(_LINE_HEIGHT * lines, _HIGHEST))


def _for_paper(sheet: Any, *, heads: int) -> None:
    """Landscape, one page wide, the heads on every page, its name and the page's number at the top."""
    sheet.set_landscape()
    sheet.set_paper(_A4)
    sheet.fit_to_pages(1, 0)
    sheet.set_margins(left=0.5, right=0.5, top=0.8, bottom=0.6)
    sheet.set_header("&L&A&Rpage &P of &N")
    if heads:
        sheet.repeat_rows(0, heads - 1)


def _table_sheet(
    sheet: Any,
    columns: Mapping[str, Column],
    rows: Sequence[Mapping[str, Any]],
    head: Any,
    unit: Any,
    formats: _Formats,
) -> None:
    lines, tall = [1] * len(rows), 1
    for place, (name, column) in enumerate(columns.items()):
        longest = len(column.unit)
        sheet.write_string(0, place, name, head)
        sheet.write_string(1, place, _unit_of(column), unit)
        shown = formats.of([row[name] for row in rows])
        for number, row in enumerate(rows):
            value = row[name]
            longest = max(longest, _put(sheet, number + 2, place, value, shown(value)))
            if isinstance(value, str):
                lines[number] = max(lines[number], _lines(value, _WIDE))
        # a heading may take two lines, so that wide tables stay readable on paper
        width = min(max(longest + 1, math.ceil(len(name) / 2) + 1, _NARROW), _WIDE)
        tall = max(tall, _lines(name, width))
        sheet.set_column(place, place, width)
    sheet.set_row(0, _height(tall))
    for number, count in enumerate(lines):
        if count > 1:
            sheet.set_row(number + 2, _height(count))
    sheet.freeze_panes(2, 1)
    _for_paper(sheet, heads=2)
    if rows:
        sheet.autofilter(1, 0, len(rows) + 1, len(columns) - 1)


class _Formats:
    """How numbers are shown: a column has the decimals of its largest one; a cell holds every digit all the same."""

    def __init__(self, book: Any, text: Any) -> None:
        self._book, self._text = book, text
        self._made: dict[str, Any] = {}

    def named(self, pattern: str) -> Any:
        if pattern not in self._made:
            self._made[pattern] = self._book.add_format({"num_format": pattern, "valign": "top"})
        return self._made[pattern]

    def of(self, values: Sequence[Any]) -> Callable[[Any], Any]:
        """Return what gives the format of each cell of a column."""
        numbers = [
            abs(float(one))
            for one in values
            if isinstance(one, (int, float)) and not isinstance(one, bool) and one and math.isfinite(one)
        ]
        pattern = _pattern(numbers)

        def chosen(value: Any) -> Any:
            if isinstance(value, bool) or not isinstance(value, (int, float)):
                return self._text
            return self.named(pattern)

        return chosen


def _pattern(sizes: Sequence[float]) -> str:
    """The number format of a column by the sizes of its numbers other than zero: some five digits of the largest."""
    if all(size == round(size) and size < _COUNTED for size in sizes):
        return "0"
    largest, least = max(sizes), min(sizes)
    if largest >= 1e7 or largest < 1e-3 or largest / least > 1e4:
        return "0.0000E+00"
    decimals = min(max(4 - math.floor(math.log10(largest)), 0), 8)
    return "0." + "0" * decimals if decimals else "0"


def _unit_of(column: Column) -> str:
    return column.unit or ("1" if column.kind == "number" else "")


def _put(sheet: Any, row: int, column: int, value: Any, shown: Any = None) -> int:
    """Write a cell; return how many letters it takes."""
    if value is None:
        return 0
    if isinstance(value, bool):
        sheet.write_boolean(row, column, value)  # a format of its own would show 1
        return 5
    if isinstance(value, (int, float)):
        sheet.write_number(row, column, value, shown)
        return 11
    text = _text(value)
    sheet.write_string(row, column, text, shown)
    return min(len(text), _WIDE)


def _charts(book: Any, reduction: Reduction, head: Any, unit: Any, formats: _Formats) -> None:
    """S over V and f over Re, a series for each reach with its intervals, alone on a sheet; their numbers on another."""
    of_reach = {
        str(reach): own
        for reach, own in reduction.runs.groupby("reach", sort=False)
        if (own["slope"].to_numpy(float) > 0).any()
    }
    if not of_reach:
        return
    sheet, data = book.add_worksheet(_CHARTS), book.add_worksheet(_CHART_DATA)
    laws = _fitted_laws(reduction, of_reach)
    at = 0
    for place, (x, y, title, across, up) in enumerate(_DRAWN):
        chart = book.add_chart({"type": "scatter"})
        shown = 0
        for n, (reach, own) in enumerate(of_reach.items()):
            colour = _OKABE_ITO[n % len(_OKABE_ITO)]
            points = _points(own, x, y)
            heads = (x, y, f"{y}, down", f"{y}, up")
            _numbers(data, at, reach, heads, points, (head, unit), formats)
            if points:
                shown += 1
                last = 2 + len(points)
                chart.add_series(
                    {
                        "name": _text(reach),
                        "categories": [_CHART_DATA, 3, at, last, at],
                        "values": [_CHART_DATA, 3, at + 1, last, at + 1],
                        "marker": {
                            "type": _MARKERS[n % len(_MARKERS)],
                            "size": 6,
                            "border": {"color": colour},
                            "fill": {"color": colour},
                        },
                        "y_error_bars": {
                            "type": "custom",
                            "minus_values": _reference(at + 2, last),
                            "plus_values": _reference(at + 3, last),
                            "line": {"color": colour, "width": 0.75},
                        },
                    }
                )
            at += 5
            law = laws.get(reach, []) if y == "friction_factor" else []
            if law:
                shown += 1
                _numbers(data, at, f"fitted law, {reach}", (x, y), law, (head, unit), formats)
                chart.add_series(
                    {
                        "name": _text(f"fitted law, {reach}"),
                        "categories": [_CHART_DATA, 3, at, 2 + len(law), at],
                        "values": [_CHART_DATA, 3, at + 1, 2 + len(law), at + 1],
                        "marker": {"type": "none"},
                        "line": {"color": colour, "width": 1.25},
                    }
                )
                at += 3
        points = [point for own in of_reach.values() for point in _points(own, x, y)]
        lines = {"visible": True, "line": {"color": "#D5DADD", "width": 0.5}}
        chart.set_title({"name": title, "name_font": {"size": 12}})
        for setter, name, values in (
            (chart.set_x_axis, across, [point[0] for point in points]),
            (chart.set_y_axis, up, [end for p in points for end in (p[1], p[1] - p[2], p[1] + p[3])]),
        ):
            setter({"name": name, "major_gridlines": lines, **_axis(values)})
        chart.set_legend({"position": "bottom"} if shown > 1 else {"none": True})
        chart.set_size({"width": 840, "height": 500})
        sheet.insert_chart(1 + 27 * place, 0, chart, {"description": title, "object_position": 2})
    data.set_column(0, at, 20)
    data.freeze_panes(3, 0)
    _for_paper(data, heads=3)
    _for_paper(sheet, heads=0)
    sheet.set_portrait()
    sheet.print_area(0, 0, 54, 13)
    sheet.fit_to_pages(1, 1)


def _reference(column: int, last: int) -> str:
    return f"='{_CHART_DATA}'!{xl_rowcol_to_cell(3, column, True, True)}:{xl_rowcol_to_cell(last, column, True, True)}"


def _numbers(
    sheet: Any,
    at: int,
    title: str,
    names: Sequence[str],
    points: Sequence[tuple[float, ...]],
    formats_of_heads: tuple[Any, Any],
    formats: _Formats,
) -> None:
    """Write the numbers of a series under their heads and units."""
    head, unit = formats_of_heads
    sheet.write_string(0, at, _text(title), head)
    for offset, name in enumerate(names):
        values = [point[offset] for point in points]
        sheet.write_string(1, at + offset, name, head)
        sheet.write_string(2, at + offset, _unit_of(RESULT_TABLES["runs"][name.partition(",")[0]]), unit)
        shown = formats.of(values)
        for row, value in enumerate(values, 3):
            sheet.write_number(row, at + offset, value, shown(value))


def _points(own: pd.DataFrame, x: str, y: str) -> list[tuple[float, float, float, float]]:
    """The points of a reach that log axes can show: x, y, and how far its interval reaches down and up (0: none)."""
    found = []
    for across, up, low, high in zip(
        *(own[name].to_numpy(float) for name in (x, y, f"{y}_low", f"{y}_high")), strict=True
    ):
        if not (math.isfinite(across) and math.isfinite(up) and across > 0 and up > 0):
            continue
        down = max(up - low, 0.0) if math.isfinite(low) else 0.0
        # a bar to zero and below has no place on a log axis
        found.append(
            (
                float(across),
                float(up),
                float(min(down, 0.9 * up)),
                float(max(high - up, 0.0)) if math.isfinite(high) else 0.0,
            )
        )
    return found


def _fitted_laws(
    reduction: Reduction, of_reach: Mapping[str, pd.DataFrame]
) -> dict[str, list[tuple[float, float]]]:
    """Points of the friction law at the wall's roughness, over the turbulent Re of each reach."""
    rough = dict(zip(reduction.walls["wall"], reduction.walls["roughness"].to_numpy(float), strict=True))
    found: dict[str, list[tuple[float, float]]] = {}
    for row in reduction.reaches.to_dict("records"):
        reach, roughness = str(row["reach"]), rough.get(row["wall"], math.nan)
        if reach not in of_reach or not math.isfinite(roughness):
            continue
        reynolds = of_reach[reach]["reynolds"].to_numpy(float)
        reynolds = reynolds[reynolds > TURBULENT_LIMIT]
        if reynolds.size:
            grid = np.geomspace(0.97 * reynolds.min(), 1.03 * reynolds.max(), _LAW_POINTS)
            law = colebrook_white(grid, roughness / float(row["diameter"]))
            found[reach] = list(zip(grid.tolist(), law.tolist(), strict=True))
    return found


def _axis(values: Sequence[float]) -> dict[str, Any]:
    """An axis about the numbers: by logarithms where they spread over more than a factor of five, else even."""
    if not values:
        return {}
    low, high = min(values), max(values)
    if high > _WIDE_SPREAD * low:
        low, high = _rounded_down(low), -_rounded_down(-high)
        return {
            "log_base": 10,
            "min": low,
            "max": high,
            "crossing": low,
            "minor_gridlines": {"visible": True, "line": {"color": "#ECEEF0", "width": 0.4}},
        }
    step = _rounded_down((high - low) / 4 or high / 4)
    low, high = step * math.floor(low / step), step * math.ceil(high / step)
    decimals = max(-math.floor(math.log10(step)), 0)
    return {
        "min": round(low, 12),
        "max": round(high if high > low else low + step, 12),
        "major_unit": step,
        "crossing": round(low, 12),
        "num_format": "0." + "0" * decimals if decimals else "0",
    }


def _rounded_down(value: float) -> float:
    """The next of 1, 2 and 5 times a power of ten below a number; for a negative one, of its size above."""
    power = math.floor(math.log10(abs(value)))
    shares = [part * 10.0**power for part in (1, 2, 5, 10)]
    if value > 0:
        return float(f"{max(one for one in shares if one <= value * (1 + 1e-9)):.12g}")
    return -float(f"{min(one for one in shares if one >= -value * (1 - 1e-9)):.12g}")
