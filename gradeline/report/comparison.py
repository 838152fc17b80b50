"""A comparison as text: what was found first, then one table a wall, then what a reader must know."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from gradeline.comparison.bores import DIFFER, ONE
from gradeline.comparison.tables import Comparison
from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    Display,
    format_change,
    format_interval,
    format_number,
    format_within,
    rounded,
    thousands,
)
from gradeline.report.converted import converted_sentences
from gradeline.report.printed import (
    PrintedTable,
    Row,
    TableColumn,
    known,
    lay_out,
    name_column,
    percent,
    records,
)
from gradeline.report.text import listed, paragraph, text_table

__all__ = ["comparison_found", "comparison_text", "survey_table"]

#: A difference of the column of ε and of the change shows from this share of the change or of its interval on.
_SHOWS = 0.1


def comparison_text(comparison: Comparison, display: Display = SI_DISPLAY) -> str:
    """Return what a terminal shows of a comparison.

    Parameters
    ----------
    comparison : Comparison
        What was compared.
    display : Display
        Units of the reader.

    Returns
    -------
    str
        Plain text, no line longer than 100 columns.
    """
    names = list(dict.fromkeys(comparison.surveys["survey"]))
    dates = sorted(date for date in comparison.surveys["date"].dropna())
    when = f", {dates[0]} to {dates[-1]}" if comparison.dated else ""
    blocks = [f"Comparison of {len(names)} surveys{when}"]
    blocks.append(listed("Found", comparison_found(comparison, display)))
    walls = records(comparison.walls)
    for wall in walls:
        table = survey_table(comparison, str(wall["wall"]), display)
        blocks.append(text_table(f"Wall {wall['wall']}: {table.caption}", table, set()))
    if len(comparison.shared):
        blocks.append(listed("Errors of the differences", _shared(comparison)))
    if comparison.cautions:
        blocks.append(
            listed("Cautions", converted_sentences(comparison.cautions, display, _labels(comparison)))
        )
    blocks.append(
        listed("Assumptions", converted_sentences(comparison.assumptions, display, _labels(comparison)))
    )
    blocks.append(
        paragraph(
            f"Intervals cover {percent(comparison.level)}. Those of each survey hold all its errors; those of a change "
            "leave out what the surveys share. This supports a judgement and does not replace one."
        )
    )
    return "\n\n".join(blocks)


def _labels(comparison: Comparison) -> list[object]:
    """Names of the surveys, which stay as they are in any units."""
    return [*comparison.surveys["survey"], *comparison.walls["wall"]]


def comparison_found(comparison: Comparison, display: Display = SI_DISPLAY) -> list[str]:
    """Return what was found, wall by wall, in sentences.

    Parameters
    ----------
    comparison : Comparison
        What was compared.
    display : Display
        Units of the reader.

    Returns
    -------
    list of str
        Whole sentences.
    """
    said: list[str] = []
    several = len(comparison.walls) > 1
    for wall in records(comparison.walls):
        rows = [row for row in records(comparison.surveys) if row["wall"] == wall["wall"]]
        compared = [row for row in rows if row["friction_factor"] is not None]
        if len(compared) < 2:
            said.append(f"Wall {wall['wall']}: not compared, {wall['reason']}.")
            continue
        of_wall = [
            *_bores(wall, compared, display),
            _change(wall, compared, display) if len(compared) == 2 else _changes(wall, compared, display),
            *_alone(wall, compared, display),
            *_odd(wall, compared),
            *_growth(comparison, wall, display),
        ]
        said += [
            f"Wall {wall['wall']}: {text}" if several else text[:1].upper() + text[1:] for text in of_wall
        ]
    return said


def _chance(p: float) -> str:
    return "p below 0.001" if p < 0.001 else f"p = {p:.2g}"


def _ratio(log: float) -> str:
    """A change of ln f as a signed percentage."""
    return f"{100 * math.expm1(log):+.1f}".replace("-", "−")


def _ends(low: float, high: float) -> str:
    return f"{_ratio(low)} to {_ratio(high)} %"


def _measure(wall: Row) -> str:
    """What is compared: f, or S at equal flow where the stated bores differ."""
    at = thousands(wall["reynolds"], 3)
    return f"S at equal flow (near Re {at})" if wall["bores"] == DIFFER else f"f at Re {at}"


def _bores(wall: Row, rows: list[dict[str, Any]], display: Display) -> list[str]:
    """Say that stated bores differ, by how much, and what that alone makes of f."""
    if wall["bores"] != DIFFER:
        return []
    first = rows[0]
    other = max(rows, key=lambda row: abs(row["log_factor_by_bore"]))
    apart = other["diameter"] / first["diameter"] - 1.0
    return [
        f"the bore is stated differently: {display.text('diameter', first['diameter'], digits=5, unit=True)} in "
        f"{first['survey']} and {display.text('diameter', other['diameter'], digits=5, unit=True)} in {other['survey']}, "
        f"{100 * abs(apart):.2g} % {'larger' if apart > 0 else 'smaller'}, which alone makes f differ by "
        f"{_ratio(other['log_factor_by_bore'])} % (f goes as D⁵). Compared is therefore S at equal flow, which no statement "
        "of a bore touches."
    ]


def _alone(wall: Row, rows: list[dict[str, Any]], display: Display) -> list[str]:
    """Say why the column of ε does not subtract to the change, where that shows."""
    first, last = rows[0], rows[-1]
    change = last["roughness_change"]
    if change is None or not (first["roughness_resolved"] and last["roughness_resolved"]):
        return []
    alone = last["roughness"] - first["roughness"]
    width = last["roughness_change_high"] - last["roughness_change_low"]
    if abs(alone - change) <= _SHOWS * max(width, abs(change)):
        return []
    factor, unit = display.factor("roughness"), display.unit("roughness")
    shown = f"{format_number(factor * abs(alone), 2)} {unit}"
    why = (
        "each in the bore that it states; the change is of all surveys fitted together in one bore"
        if wall["bores"] == ONE
        else "with all its errors; the change is of all surveys fitted together"
    )
    return [
        f"the column of ε, where the two are {shown} apart, holds each survey fitted alone, {why}, so that what they share is "
        "one error and the runs weigh otherwise: the column need not subtract to the change."
    ]


def _change(wall: Row, rows: list[dict[str, Any]], display: Display) -> str:
    first, second = rows
    change, what = second["log_factor_change"], _measure(wall)
    ends = _ends(second["log_factor_change_low"], second["log_factor_change_high"])
    between = f"between {first['survey']} and {second['survey']}"
    if wall["changed"]:
        verb = "rose" if change > 0 else "fell"
        text = (
            f"the change is real. {what} {verb} by {format_change(math.expm1(change))} {between} "
            f"({ends}; {_chance(wall['unchanged_p'])})"
        )
    else:
        text = (
            f"no change is told from chance. {what} differs by {_ratio(change)} % {between} ({ends}; "
            f"{_chance(wall['unchanged_p'])}); a change by {format_change(math.expm1(wall['least_log_factor_change']))} "
            "would have been told"
        )
    return text + _size(wall, second, display) + "."


def _size(wall: Row, row: Row, display: Display) -> str:
    """The change of ε beside that of f."""
    if wall["bores"] == DIFFER:
        return ""
    if row["roughness_change"] is None:
        return (
            "; ε is not told from zero in both of them, so it is f itself that is compared, against the law"
        )
    value, low, high = (row[f"roughness_change{end}"] for end in ("", "_low", "_high"))
    factor = display.factor("roughness")
    value, low, high = factor * value, factor * low, factor * high
    unit, ends = display.unit("roughness"), format_interval(low, high)
    if low <= 0 <= high:
        return f"; ε differs by {ends} {unit}"
    shown = format_within(abs(value), *((low, high) if value > 0 else (-high, -low)))
    return f"; ε is {'larger' if value > 0 else 'smaller'} by {shown} {unit} ({ends})"


def _changes(wall: Row, rows: list[dict[str, Any]], display: Display) -> str:
    what = "f"
    if wall["bores"] == DIFFER:
        what = "S at equal flow"
        changes = [row["log_factor_change"] or 0.0 for row in rows]
        spread = f"{_measure(wall)} from {_ratio(min(changes))} to {_ratio(max(changes))} % against {rows[0]['survey']}"
    else:
        factors = [row["friction_factor"] for row in rows]
        spread = f"{_measure(wall)} from {format_number(min(factors), 3)} to {format_number(max(factors), 3)}"
    if not wall["changed"]:
        return (
            f"the {len(rows)} surveys found one friction as far as can be told ({spread}; "
            f"{_chance(wall['unchanged_p'])})."
        )
    changed = [row["survey"] for row in rows if row["changed"]]
    against = (
        f"Against {rows[0]['survey']} the change is real in {_names(changed)}"
        if changed
        else f"No single one differs from {rows[0]['survey']} beyond chance"
    )
    last = rows[-1]
    to_last = ""
    if last["changed"]:
        ends = _ends(last["log_factor_change_low"], last["log_factor_change_high"])
        to_last = (
            f"; to {last['survey']} {what} changed by {_ratio(last['log_factor_change'])} % ({ends})"
            f"{_size(wall, last, display)}"
        )
    return (
        f"the friction differs among the {len(rows)} surveys beyond chance ({spread}; {_chance(wall['unchanged_p'])}). "
        f"{against}{to_last}."
    )


def _names(names: list[str], most: int = 8) -> str:
    if len(names) > most:
        return f"{', '.join(names[:most])} and {len(names) - most} more"
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def _odd(wall: Row, rows: list[dict[str, Any]]) -> list[str]:
    if wall["critical_score"] is None:
        return []
    odd = [f"{row['survey']} (score {format_number(row['score'], 2)})" for row in rows if row["odd"]]
    if not odd:
        return [f"no survey is odd among the {len(rows)}."]
    return [
        f"odd among the {len(rows)}: {_names(odd)}. Of {len(rows)} sound surveys the largest score is beyond "
        f"{format_number(wall['critical_score'], 2)} in one case of twenty."
    ]


def _growth(comparison: Comparison, wall: Row, display: Display) -> list[str]:
    if wall["roughness_rate"] is None:
        why = wall["reason"]
        return [f"{why}."] if comparison.dated and why else []
    factor, unit = display.factor("roughness"), display.unit("roughness")
    rate, low, high = (factor * wall[f"roughness_rate{end}"] for end in ("", "_low", "_high"))
    told = low > 0 or high < 0
    verb = "grows" if rate > 0 else "falls"
    ends = f"{format_interval(low, high)} {unit} a year"
    if told:
        shown = format_within(abs(rate), *((low, high) if rate > 0 else (-high, -low)))
        said = [f"the roughness {verb} by {shown} {unit} a year ({ends}), growth taken as even in time."]
    else:
        said = [f"no growth of the roughness is told from chance: {ends}."]
    line = [row for row in records(comparison.ageing) if row["wall"] == wall["wall"]]
    if line and line[-1]["beyond_surveys"]:
        end = line[-1]
        value = display.within(
            "roughness", *(end[f"roughness{part}"] for part in ("", "_low", "_high")), unit=True
        )
        between = display.interval("roughness", end["roughness_low"], end["roughness_high"])
        factors = [end[f"friction_factor{part}"] for part in ("", "_low", "_high")]
        said.append(
            f"on {end['date']} the roughness is then expected at {value} ({between}), and f at Re "
            f"{thousands(wall['reynolds'], 3)} at {format_within(*factors)} ({format_interval(*factors[1:])}, from the roughness "
            "alone)."
        )
    return said


def _shared(comparison: Comparison) -> list[str]:
    said = []
    rows = records(comparison.shared)
    common = dict.fromkeys(_input(row) for row in rows if row["common"])
    if common:
        said.append(f"Common to all, and taken out: {', '.join(common)}.")
    reasons: dict[str, dict[str, None]] = {}
    for row in rows:
        if not row["common"]:
            reasons.setdefault(str(row["reason"]), {})[_input(row)] = None
    said += [f"Each survey's own: {', '.join(inputs)} ({reason})." for reason, inputs in reasons.items()]
    return said


def _input(row: Row) -> str:
    count = int(row["inputs"])
    return str(row["input"]) if count == 1 else f"{row['input']} ({count})"


def survey_table(comparison: Comparison, wall: str, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the surveys of a wall side by side.

    Parameters
    ----------
    comparison : Comparison
        What was compared.
    wall : str
        Which wall.
    display : Display
        Units of the reader.

    Returns
    -------
    PrintedTable
        One row a survey; a real change and an odd survey are marked in words.
    """
    about: Mapping[str, Any] = next(row for row in records(comparison.walls) if row["wall"] == wall)
    rows = [row for row in records(comparison.surveys) if row["wall"] == wall]
    level = percent(comparison.level)

    def roughness(row: Row) -> str:
        if row["roughness_resolved"] is False:
            return f"< {display.text('roughness', row['roughness_upper95'], digits=2)}"
        return display.within("roughness", row["roughness"], row["roughness_low"], row["roughness_high"])

    def interval(row: Row) -> str:
        if row["roughness_resolved"] is False:
            return MISSING
        return display.interval("roughness", row["roughness_low"], row["roughness_high"])

    def change(row: Row) -> str:
        log = row["log_factor_change"]
        if not known(log):
            return MISSING
        shown = rounded(100 * math.expm1(log), 100 * math.exp(log) * row["log_factor_change_u"])
        return shown if log < 0 or shown.startswith("−") else f"+{shown}"

    def marks(row: Row) -> str:
        return " ".join(["real"] * bool(row["changed"]) + ["odd"] * bool(row["odd"])) or MISSING

    unit, differ = display.unit("roughness"), about["bores"] == DIFFER
    columns = [
        name_column("survey"),
        TableColumn("date", lambda row: row["date"] or MISSING, always=False),
        TableColumn(f"roughness ε ({unit})", roughness),
        TableColumn(f"its {level} interval ({unit})", interval, always=False),
        TableColumn("f", lambda row: rounded(row["friction_factor"], row["friction_factor_u"])),
        TableColumn("change of S (%)" if differ else "change of f (%)", change),
        TableColumn("mark", marks, always=False),
    ]
    at = thousands(about["reynolds"], 3) if known(about["reynolds"]) else MISSING
    caption = (
        "by each survey in the bore that it states; S at equal flow against the first"
        if differ
        else f"ε by each survey, f at Re {at}, and its change against the first"
    )
    return lay_out(caption, rows, columns)
