"""The record as a workbook: a sheet for each result table, SI units, numbers as numbers, and two charts."""

from __future__ import annotations

import io
import math
from collections.abc import Mapping, Sequence
from typing import Any

import pandas as pd
import xlsxwriter

from gradeline.reduction.tables import RESULT_TABLES, Column, Reduction
from gradeline.report.record import guarded, table_rows

__all__ = ["as_xlsx"]

#: Widths of columns, in letters.
_NARROW, _WIDE = 8, 60
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
        as in the csv files. The sheet ``charts`` shows S over V and f over Re where there is a turbulent or laminar run.
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
    head = book.add_format({"bold": True, "bottom": 0, "valign": "bottom"})
    unit = book.add_format({"italic": True, "font_color": "#55606A", "bottom": 1})
    wrap = book.add_format({"text_wrap": True, "valign": "top"})
    _survey_sheet(book.add_worksheet("survey"), reduction, version, head, wrap)
    for name, columns in RESULT_TABLES.items():
        rows = table_rows(name, getattr(reduction, name))
        _table_sheet(book.add_worksheet(name), columns, rows[: _MOST_ROWS - 2], head, unit)
    _charts(book, reduction, head, unit)
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
    sheet.set_column(0, 0, 24)
    sheet.set_column(1, 1, 110)
    sheet.freeze_panes(1, 0)


def _table_sheet(
    sheet: Any, columns: Mapping[str, Column], rows: Sequence[Mapping[str, Any]], head: Any, unit: Any
) -> None:
    for place, (name, column) in enumerate(columns.items()):
        longest = max(len(name), len(column.unit))
        sheet.write_string(0, place, name, head)
        sheet.write_string(1, place, _unit_of(column), unit)
        for number, row in enumerate(rows, 2):
            longest = max(longest, _put(sheet, number, place, row[name]))
        sheet.set_column(place, place, min(max(longest + 2, _NARROW), _WIDE))
    sheet.freeze_panes(2, 1)
    if rows:
        sheet.autofilter(1, 0, len(rows) + 1, len(columns) - 1)


def _unit_of(column: Column) -> str:
    return column.unit or ("1" if column.kind == "number" else "")


def _put(sheet: Any, row: int, column: int, value: Any) -> int:
    """Write a cell; return how many letters it takes."""
    if value is None:
        return 0
    if isinstance(value, bool):
        sheet.write_boolean(row, column, value)
        return 5
    if isinstance(value, (int, float)):
        sheet.write_number(row, column, value)
        return 11
    text = _text(value)
    sheet.write_string(row, column, text)
    return min(len(text), _WIDE)


def _charts(book: Any, reduction: Reduction, head: Any, unit: Any) -> None:
    """S over V and f over Re on log axes, a series for each reach, on a sheet with the numbers that they show."""
    runs = reduction.runs
    of_reach = {
        str(reach): own
        for reach, own in runs.groupby("reach", sort=False)
        if (own["slope"].to_numpy(float) > 0).any()
    }
    if not of_reach:
        return
    sheet = book.add_worksheet("charts")
    slopes = book.add_chart({"type": "scatter"})
    factors = book.add_chart({"type": "scatter"})
    for n, (reach, own) in enumerate(of_reach.items()):
        at = 5 * n
        pairs = _positive(own, "velocity", "slope"), _positive(own, "reynolds", "friction_factor")
        titles = ("velocity", "slope"), ("reynolds", "friction_factor")
        sheet.write_string(0, at, _text(f"reach {reach}"), head)
        for place, (chart, points, names) in enumerate(zip((slopes, factors), pairs, titles, strict=True)):
            column = at + 2 * place
            for offset, name in enumerate(names):
                sheet.write_string(1, column + offset, name, head)
                sheet.write_string(2, column + offset, _unit_of(RESULT_TABLES["runs"][name]), unit)
                sheet.write_column(3, column + offset, [point[offset] for point in points])
            if points:
                last = 2 + len(points)
                chart.add_series(
                    {
                        "name": _text(reach),
                        "categories": ["charts", 3, column, last, column],
                        "values": ["charts", 3, column + 1, last, column + 1],
                        "marker": {
                            "type": _MARKERS[n % len(_MARKERS)],
                            "size": 6,
                            "border": {"color": _OKABE_ITO[n % len(_OKABE_ITO)]},
                            "fill": {"color": _OKABE_ITO[n % len(_OKABE_ITO)]},
                        },
                    }
                )
    sheet.set_column(0, 5 * len(of_reach), 14)
    sheet.freeze_panes(3, 0)
    words = (
        (slopes, "Friction slope and velocity", "mean velocity V (m/s)", "friction slope S (1)"),
        (
            factors,
            "Friction factor and Reynolds number",
            "Reynolds number Re (1)",
            "Darcy friction factor f (1)",
        ),
    )
    for place, (chart, title, across, up) in enumerate(words):
        lines = {"visible": True, "line": {"color": "#D5DADD", "width": 0.5}}
        chart.set_title({"name": title, "name_font": {"size": 12}})
        x, y = _bounds(of_reach, place)
        chart.set_x_axis(
            {"name": across, "log_base": 10, "major_gridlines": lines, **x, "crossing": x["min"]}
        )
        chart.set_y_axis({"name": up, "log_base": 10, "major_gridlines": lines, **y, "crossing": y["min"]})
        chart.set_legend({"position": "bottom"} if len(of_reach) > 1 else {"none": True})
        chart.set_size({"width": 620, "height": 420})
        sheet.insert_chart(3, 5 * len(of_reach), chart, {"y_offset": 440 * place, "description": title})


def _positive(own: pd.DataFrame, *names: str) -> list[tuple[float, float]]:
    """The points of a reach that log axes can show."""
    first, second = (own[name].to_numpy(float) for name in names)
    return [
        (float(x), float(y))
        for x, y in zip(first, second, strict=True)
        if math.isfinite(x) and math.isfinite(y) and x > 0 and y > 0
    ]


def _bounds(of_reach: Mapping[str, pd.DataFrame], place: int) -> tuple[dict[str, float], dict[str, float]]:
    """Whole decades about all points of a chart: a spreadsheet's own choice begins far below."""
    names = (("velocity", "slope"), ("reynolds", "friction_factor"))[place]
    points = [point for own in of_reach.values() for point in _positive(own, *names)]
    found = []
    for side in (0, 1):
        values = [math.log10(point[side]) for point in points] or [0.0]
        low, high = math.floor(min(values)), math.ceil(max(values))
        found.append({"min": 10.0**low, "max": 10.0 ** max(high, low + 1)})
    return found[0], found[1]
