"""The sheet `survey` of a workbook: lines of TOML in its first column, or a table of keys and values."""

from __future__ import annotations

import datetime
import re
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

from gradeline.loader.ledger import Ledger

__all__ = ["SurveySheet", "read_survey_sheet"]

_ASSIGNMENT = re.compile(r"""^\s*(?:[\w\-]+|"[^"]*"|'[^']*')(?:\.[\w\- ]+)*\s*=""", re.MULTILINE)
_HEADER = re.compile(r"(\[\[|\[)\s*([^\[\]]+?)\s*(\]\]|\])")
_SEGMENT = re.compile(r"""\s*("[^"]*"|'[^']*'|[^.\[\]"']+?)\s*(?:\[([0-9]{1,4})\])?\s*(\.|$)""")


@dataclass
class SurveySheet:
    """What the sheet says.

    Parameters
    ----------
    text : str or None
        Its lines of TOML; None where it is a table.
    lines : list of int
        The row of the sheet that each line of `text` stands in.
    data : dict
        What the table says, as TOML would.
    rows : dict
        The row of each key path of the table, such as ``reach[1].diameter``.
    """

    text: str | None = None
    lines: list[int] = field(default_factory=list)
    data: dict[str, Any] = field(default_factory=dict)
    rows: dict[str, int] = field(default_factory=dict)

    def row_of(self, key: str) -> int | None:
        """Return the row of a key, or of the nearest table around it that has one."""
        while key and key not in self.rows:
            key = key[: max(key.rfind("."), key.rfind("["), 0)]
        return self.rows.get(key)


def read_survey_sheet(ledger: Ledger, place: str, rows: Sequence[Sequence[Any]]) -> SurveySheet | None:
    """Return what the rows of the sheet `survey` say, None (with the problems noted) where they cannot be read.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    place : str
        What messages call the sheet.
    rows : sequence of sequence
        The values of its cells, from its first row.

    Returns
    -------
    SurveySheet or None
        Lines of TOML where a cell of the first column holds ``key = value``; otherwise a table, whose first column
        holds keys (``fluid.name``, ``reach[1].diameter``, or ``diameter`` below a row ``[[reach]]``) and whose second
        one the values.
    """
    before = len(ledger.problems)
    first = [row[0] if row else "" for row in rows]
    is_text = any(isinstance(cell, str) and _ASSIGNMENT.search(cell) for cell in first)
    notes = _note_columns(rows)
    beyond = 1 if is_text else 2
    for line, row in enumerate(rows, start=1):
        for column, cell in enumerate(row[beyond:], start=beyond):
            if column not in notes and str(cell).strip():
                rule = (
                    "column A holds lines of TOML, and nothing may stand beside them"
                    if is_text
                    else "a key and its value take two columns"
                )
                ledger.problem(
                    place,
                    line,
                    None,
                    f"{str(cell)!r} stands in column {_letter(column)}, but {rule}; move it, or head the column 'note'",
                )
                break
    sheet = _lines(ledger, place, first) if is_text else _table(ledger, place, rows)
    return sheet if len(ledger.problems) == before else None


def _note_columns(rows: Sequence[Sequence[Any]]) -> set[int]:
    heading = next((row for row in rows if any(str(cell).strip() for cell in row)), ())
    return {column for column, cell in enumerate(heading) if str(cell).strip().casefold().startswith("note")}


def _letter(column: int) -> str:
    return chr(ord("A") + column) if column < 26 else str(column + 1)


def _lines(ledger: Ledger, place: str, cells: Sequence[Any]) -> SurveySheet:
    sheet = SurveySheet()
    texts: list[str] = []
    for row, cell in enumerate(cells, start=1):
        if not isinstance(cell, str):
            ledger.problem(
                place, row, None, f'{cell!s} is no line of TOML; write it as text, such as name = "water"'
            )
            continue
        parts = cell.splitlines() or [""]
        texts += parts
        sheet.lines += [row] * len(parts)
    sheet.text = "\n".join(texts) + "\n"
    return sheet


def _table(ledger: Ledger, place: str, rows: Sequence[Sequence[Any]]) -> SurveySheet:
    sheet = SurveySheet()
    header: list[tuple[str, int | None]] = []
    seen_any = False
    for line, cells in enumerate(rows, start=1):
        key = str(cells[0]).strip() if cells else ""
        value = cells[1] if len(cells) > 1 else ""
        if not key and not str(value).strip():
            continue
        if not seen_any and key.casefold() == "key":
            seen_any = True
            continue
        seen_any = True
        if key.startswith("#"):
            continue
        found = _HEADER.fullmatch(key)
        try:
            if found and len(found[1]) == len(found[3]):
                header = _path(found[2])
                _enter(sheet.data, header, listed=len(found[1]) == 2)
                if len(found[1]) == 2:
                    header = [*header[:-1], (header[-1][0], len(_inside(sheet.data, header)))]
                sheet.rows[_written(header)] = line
                continue
            if not key:
                raise ValueError(f"{str(value)!r} has no key before it; name it")
            if not str(value).strip():
                continue  # a key without a value is left out
            path = [*header, *_path(key)]
            _put(sheet.data, path, _value(value))
            sheet.rows[_written(path)] = line
        except ValueError as error:
            ledger.problem(place, line, None, str(error))
    return sheet


def _path(text: str) -> list[tuple[str, int | None]]:
    """The parts of a key: name and place in a list, counted from 1."""
    parts: list[tuple[str, int | None]] = []
    at = 0
    while at < len(text):
        found = _SEGMENT.match(text, at)
        if found is None or (found[3] == "." and found.end() == len(text)):
            if "[[" in text:
                raise ValueError(
                    f"{text!r} is no key; a header such as [[reach]] stands alone in column A of its own row, its keys "
                    "in the rows below"
                )
            raise ValueError(f"{text!r} is no key; write it as fluid.name or reach[1].diameter")
        parts.append((found[1].strip("\"'").strip(), int(found[2]) if found[2] else None))
        at = found.end()
    return parts


def _written(path: Sequence[tuple[str, int | None]]) -> str:
    return ".".join(name if place is None else f"{name}[{place}]" for name, place in path)


def _inside(data: dict[str, Any], path: Sequence[tuple[str, int | None]]) -> list[Any]:
    """The list at a path."""
    found: Any = data
    for name, place in path:
        found = found[name]
        if place is not None:
            found = found[place - 1]
    return list(found)


def _enter(data: dict[str, Any], path: Sequence[tuple[str, int | None]], *, listed: bool) -> None:
    """Make the table of a header; of a doubled bracket, a new one at the end of its list."""
    *before, (name, place) = path
    table = _down(data, before)
    if not listed:
        _down(data, path)
    elif place is not None:
        raise ValueError(f"[[{_written(path)}]] counts by itself; write [[{name}]]")
    elif isinstance(table.setdefault(name, []), list):
        table[name].append({})
    else:
        raise ValueError(f"{name!r} is a table already; head it [{name}] or make each of them [[{name}]]")


def _down(data: dict[str, Any], path: Sequence[tuple[str, int | None]]) -> dict[str, Any]:
    """The table at a path, made where it is not there."""
    for step, (name, place) in enumerate(path):
        if place is None:
            found = data.setdefault(name, {})
        else:
            listed = data.setdefault(name, [])
            if not isinstance(listed, list) or not 1 <= place <= len(listed) + 1:
                raise ValueError(f"{_written(path[: step + 1])!r} comes before its forerunner; count from 1")
            if place == len(listed) + 1:
                listed.append({})
            found = listed[place - 1]
        if not isinstance(found, dict):
            raise ValueError(  # noqa: TRY004  a fault of the file, not of the caller
                f"{_written(path[: step + 1])!r} has a value already; a table cannot stand there"
            )
        data = found
    return data


def _put(data: dict[str, Any], path: Sequence[tuple[str, int | None]], value: Any) -> None:
    *before, (name, place) = path
    table = _down(data, before)
    if place is not None:
        raise ValueError(
            f"{_written(path)!r} is one of a list; write a key of it, such as {_written(path)}.name"
        )
    if name in table:
        raise ValueError(f"the key {_written(path)!r} stands above already; keep one of the two")
    table[name] = value


def _value(cell: Any) -> Any:
    """A cell's value as TOML has it; text in quotes or brackets is read as TOML."""
    if isinstance(cell, datetime.datetime) and cell.time() == datetime.time():
        return cell.date()
    if isinstance(cell, float) and cell.is_integer():
        return int(cell)
    if not isinstance(cell, str):
        return cell
    text = cell.strip()
    if text[:1] in {'"', "'", "[", "{"}:
        try:
            return tomllib.loads(f"value = {text}")["value"]
        except ValueError:
            return text
    return text
