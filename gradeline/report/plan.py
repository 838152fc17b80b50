"""A plan as text for a terminal: what to expect first, then what buys most, then the columns run by run."""

from __future__ import annotations

import math
from collections.abc import Iterator

from gradeline.planning.tables import Plan
from gradeline.quantities.printing import MISSING, SI_DISPLAY, Display, format_number, thousands
from gradeline.report.converted import converted_sentences
from gradeline.report.printed import (
    PrintedTable,
    Row,
    TableColumn,
    count,
    known,
    lay_out,
    percent,
    records,
    truth,
)
from gradeline.report.text import WIDTH, bullets, listed, paragraph, text_table

__all__ = ["plan_summary"]

_MOST_RUNS = 40
_MOST_CHANGES = 12
_BUDGETED = 3
#: Columns of a reading and its mark, and of run and flow before them.
_CELL, _LEFT = 8, 18


def plan_summary(plan: Plan, display: Display = SI_DISPLAY) -> str:
    """Return what a terminal shows of a plan.

    Parameters
    ----------
    plan : Plan
        What was planned.
    display : Display
        Units of the reader.

    Returns
    -------
    str
        Plain text, no line longer than 100 columns, no line end after the last line.
    """
    blocks = [paragraph(f"Plan: {plan.title}")]
    blocks.append(listed("To expect", _expected(plan, display)))
    if plan.cautions:
        blocks.append(listed("To look at", converted_sentences(plan.cautions, display, _labels(plan))))
    blocks.append(_changes(plan, display))
    blocks += [*_layout(plan, display), *_flows(plan, display), *_comparison(plan, display)]
    blocks.append(_runs(plan, display))
    if plan.columns["above_crown"].notna().any():  # else no gauge tells the level
        blocks.append(_levels(plan, display))
    blocks += _columns(plan, display)
    blocks.append(listed("Taken for granted", converted_sentences(plan.assumptions, display, _labels(plan))))
    return "\n\n".join(blocks)


def _expected(plan: Plan, display: Display) -> Iterator[str]:
    runs = records(plan.runs)
    for wall in records(plan.walls):
        assumed = display.text("roughness", wall["roughness"], digits=3, unit=True)
        if not known(wall["roughness_high"]):
            yield f"Roughness ε of {wall['wall']}, assumed {assumed}: not told by these runs."
            continue
        inside = display.interval("roughness", wall["roughness_low"], wall["roughness_high"], unit=True)
        yield (
            f"Roughness ε of {wall['wall']}, assumed {assumed}: the {percent(plan.level)} interval will be about {inside}"
            f"{_leading(plan, wall['wall'])}."
        )
    for reach in dict.fromkeys(row["reach"] for row in runs):
        mine = [row for row in runs if row["reach"] == reach and known(row["slope_u"])]
        if mine:
            first, last = (choice(mine, key=lambda row: row["flow"]) for choice in (min, max))
            yield (
                f"{reach}: S known to {_share(first['slope_u'], first['slope'])} in the slowest run and "
                f"{_share(last['slope_u'], last['slope'])} in the fastest, f to "
                f"{_share(first['friction_factor_u'], first['friction_factor'])} and "
                f"{_share(last['friction_factor_u'], last['friction_factor'])} (standard uncertainties)."
            )
    for row in records(plan.fittings):
        if known(row["loss_coefficient_u"]):
            value = display.text("number", row["loss_coefficient"], row["loss_coefficient_u"])
            yield f"Loss coefficient of {row['fitting']}: K = {value}."
        else:
            yield f"Loss coefficient of {row['fitting']}: not told; {row['reason']}."
    for row in records(plan.thresholds):
        rough = (
            f"fully rough above {_flow(row['rough_above'], display)}, hydraulically smooth below "
            f"{_flow(row['smooth_below'], display)}"
            if known(row["rough_above"])
            else "never fully rough, since the wall is taken as smooth"
        )
        yield (
            f"{row['reach']}: laminar below {_flow(row['laminar_below'], display)}, turbulent above "
            f"{_flow(row['turbulent_above'], display)}; {rough}."
        )
    if known(plan.greatest_flow) and plan.greatest_flow < max(row["flow"] for row in runs) * (1 - 1e-9):
        yield f"The greatest flow at which all columns can be read is {_flow(plan.greatest_flow, display)}."


def _leading(plan: Plan, wall: str) -> str:
    """What makes most of the variance of a wall's roughness."""
    rows = [
        row
        for row in records(plan.budget)
        if row["subject"] == wall and row["quantity"] in ("roughness", "roughness_upper95")
    ][:_BUDGETED]
    if not rows:
        return ""
    shares = ", ".join(f"{row['input']} {100 * row['variance_share']:.0f} %" for row in rows)
    return f"; of its variance: {shares}"


def _share(u: float | None, value: float | None) -> str:
    if u is None or not value or not known(u):
        return MISSING
    return f"{format_number(100 * u / abs(value), 2)}\u00a0%"  # kept on one line


def _flow(value: float | None, display: Display) -> str:
    return display.text("flow", value, digits=3, unit=True)


def _changes(plan: Plan, display: Display) -> str:
    rows = records(plan.improvements)
    walls = len({row["wall"] for row in rows})
    kept = rows[: (_MOST_CHANGES + 1) * walls]
    columns = [
        TableColumn("change", lambda row: str(row["change"]), text=True),
        *([TableColumn("wall", lambda row: str(row["wall"]), text=True)] if walls > 1 else []),
        TableColumn(
            display.head("ε interval", "roughness"),
            lambda row: display.interval("roughness", row["roughness_low"], row["roughness_high"]),
        ),
        TableColumn("its width", lambda row: _percentage(row["width_ratio"])),
        TableColumn("u(S)/S (%)", lambda row: _hundred(row["slope_u"])),
        TableColumn("u(f)/f (%)", lambda row: _hundred(row["friction_factor_u"])),
        TableColumn("all read", lambda row: truth(row["fits"])),
    ]
    table = lay_out("", kept, columns, note=None)
    more = (len(rows) - len(kept)) // max(walls, 1)
    return text_table("What buys most (S and f of the fastest run)", table, set(), "plan.json", more)


def _percentage(ratio: float | None) -> str:
    return MISSING if not known(ratio) or ratio is None else f"{100 * ratio:.0f} %"


def _hundred(share: float | None) -> str:
    return MISSING if not known(share) or share is None else format_number(100 * share, 2)


def _labels(plan: Plan) -> list[object]:
    """Names of the survey, which stay as they are in any units."""
    return [
        *plan.walls["wall"],
        *plan.layout["tap"],
        *plan.fittings["fitting"],
        *plan.runs["reach"],
        *plan.runs["run"],
    ]


def _layout(plan: Plan, display: Display) -> Iterator[str]:
    rows = records(plan.layout)
    if plan.layout_reason is not None:
        yield listed("Taps", [f"{plan.layout_reason[:1].upper()}{plan.layout_reason[1:]}."])
        return
    table = lay_out(
        "",
        rows,
        [
            TableColumn("tap", lambda row: str(row["tap"]), text=True),
            TableColumn(
                display.head("chainage now", "chainage"),
                lambda row: _length(row["chainage"], display),
            ),
            TableColumn(
                display.head("recommended", "chainage"),
                lambda row: _length(row["recommended_chainage"], display),
            ),
            TableColumn("disturbed now", lambda row: truth(row["disturbed"])),
            *(
                TableColumn(
                    f"{words} after a fitting (bores)",
                    lambda row, key=key: format_number(row[key], 2),  # type: ignore[misc]  # the default binds this key
                    always=False,
                )
                for words, key in (("now", "bores_downstream"), ("then", "recommended_bores_downstream"))
            ),
        ],
        note=None,
    )
    if known(plan.layout_efficiency):
        title = (
            f"Taps (the present layout is worth {100 * plan.layout_efficiency:.0f} % of the D-optimal one)"
        )
    else:
        title = "Taps"
    yield text_table(title, table, set())


def _length(value: float | None, display: Display) -> str:
    if value is None or not known(value):
        return MISSING
    return f"{round(display.value('chainage', value), 3):.8g}"


def _flows(plan: Plan, display: Display) -> Iterator[str]:
    if plan.flows_reason is not None:
        yield listed("Flows", [f"{plan.flows_reason[:1].upper()}{plan.flows_reason[1:]}."])
        return
    table = lay_out(
        "",
        records(plan.flows),
        [
            TableColumn("run", lambda row: str(row["run"]), text=True),
            TableColumn(
                display.head("flow now", "flow"), lambda row: display.text("flow", row["flow"], digits=3)
            ),
            TableColumn(
                display.head("recommended", "flow"),
                lambda row: display.text("flow", row["recommended_flow"], digits=3),
            ),
        ],
        note=None,
    )
    yield text_table(f"Flows that tell the wall best ({plan.flows_spread})", table, set())


_QUANTITIES = {
    "roughness_low": ("lower end of ε", "roughness"),
    "roughness_high": ("upper end of ε", "roughness"),
    "slope_u": ("u(S)/S", "relative"),
    "friction_factor_u": ("u(f)/f", "relative"),
    "loss_coefficient_u": ("u(K)", "number"),
}


def _comparison(plan: Plan, display: Display) -> Iterator[str]:
    if plan.layout_reason is not None and plan.flows_reason is not None:
        return

    def cell(row: Row, key: str) -> str:
        if row["quantity"] not in _QUANTITIES:
            return count(row[key])
        name = _QUANTITIES[row["quantity"]][1]
        digits = 3 if name == "number" else 2
        return display.text(name, row[key], digits=digits, unit=True)

    def words(row: Row) -> str:
        if row["quantity"] not in _QUANTITIES:
            return f"runs of {len(plan.levels)} that can be read"
        return f"{_QUANTITIES[row['quantity']][0]}, {row['subject']}"

    table = lay_out(
        "",
        records(plan.comparison),
        [
            TableColumn("quantity", words, text=True),
            TableColumn("now", lambda row: cell(row, "now")),
            TableColumn("recommended", lambda row: cell(row, "recommended")),
        ],
        note=None,
    )
    yield text_table("Before and after all that is recommended", table, set())


def _runs(plan: Plan, display: Display) -> str:
    rows = records(plan.runs)
    reaches = len({row["reach"] for row in rows})
    columns = [
        TableColumn("run", lambda row: str(row["run"]), text=True),
        *([TableColumn("reach", lambda row: str(row["reach"]), text=True)] if reaches > 1 else []),
        TableColumn(display.head("flow Q", "flow"), lambda row: display.text("flow", row["flow"], digits=3)),
        TableColumn("Re", lambda row: thousands(row["reynolds"], 3)),
        TableColumn("regime", lambda row: str(row["regime"]), text=True),
        TableColumn(
            display.head("S", "slope"), lambda row: display.text("slope", row["slope"], row["slope_u"])
        ),
        TableColumn(
            "f", lambda row: display.text("number", row["friction_factor"], row["friction_factor_u"])
        ),
        TableColumn("ε⁺", lambda row: format_number(row["roughness_reynolds"], 2)),
        TableColumn(
            display.head("entrance length", "length"),
            lambda row: display.text("length", row["entrance_length"], digits=3),
        ),
    ]
    table = lay_out("", rows[:_MOST_RUNS], columns, note=None)
    return text_table("Runs as expected", table, set(), "plan.json", len(rows) - _MOST_RUNS)


def _levels(plan: Plan, display: Display) -> str:
    """The heads at the last tap: as planned, and between which everything can be read."""

    def head(row: Row, key: str) -> str:
        return MISSING if not known(row[key]) else f"{display.value('head', row[key]):.2f}"

    table = lay_out(
        "",
        records(plan.levels)[:_MOST_RUNS],
        [
            TableColumn("run", lambda row: str(row["run"]), text=True),
            TableColumn(
                display.head("flow Q", "flow"), lambda row: display.text("flow", row["flow"], digits=3)
            ),
            TableColumn(display.head("planned", "head"), lambda row: head(row, "level")),
            TableColumn(display.head("lowest", "head"), lambda row: head(row, "level_low")),
            TableColumn(display.head("highest", "head"), lambda row: head(row, "level_high"), always=False),
            TableColumn("all read", lambda row: truth(row["fits"])),
        ],
        note=None,
    )
    last = plan.layout["tap"].iloc[-1]
    title = f"Piezometric head at {last}: planned, and between which all columns can be read"
    return text_table(title, table, set(), "plan.json", len(plan.levels) - _MOST_RUNS)


def _columns(plan: Plan, display: Display) -> Iterator[str]:
    """The expected readings, runs down and gauges across, as many as fit on a line."""
    rows = records(plan.columns)
    by_run: dict[str, list[Row]] = {}
    for row in rows:
        by_run.setdefault(row["run"], []).append(row)
    wide = len(next(iter(by_run.values()), []))
    across = max((WIDTH - _LEFT) // _CELL, 1)
    runs = list(by_run.values())[:_MOST_RUNS]
    for start in range(0, wide, across):
        part = range(start, min(start + across, wide))
        heads = ["run", display.head("flow", "flow"), *(_reading_head(runs[0][n], display) for n in part)]
        cells = [
            (
                str(mine[0]["run"]),
                display.text("flow", mine[0]["flow"], digits=3),
                *(_reading(mine[n], display) for n in part),
            )
            for mine in runs
        ]
        title = "Readings as expected" if not start else "Readings as expected, further ones"
        yield text_table(
            title,
            PrintedTable("", tuple(heads), tuple(cells), frozenset({0})),
            set(),
            "plan.json",
            len(by_run) - _MOST_RUNS,
        )
    marks = {_mark(row) for row in rows}
    said = [
        text
        for mark, text in (
            ("!", "! beyond the scale: cannot be read"),
            ("v", "v below the crown of the pipe: air may be drawn in"),
            ("x", "x in a disturbed length: does not enter"),
        )
        if mark in marks
    ]
    if said:
        yield "\n".join(bullets(said))


def _reading_head(row: Row, display: Display) -> str:
    name = row["tap"] if row["tap_2"] is None else row["gauge"]
    return display.head(str(name), "small head" if row["reading_unit"] == "m" else "pressure")


def _mark(row: Row) -> str:
    if row["on_scale"] is False:
        return "!"
    if row["above_crown"] is False:
        return "v"
    return "" if row["used"] else "x"


def _reading(row: Row, display: Display) -> str:
    value: float | None = row["reading"]
    if value is None or not math.isfinite(value):
        return MISSING
    quantity = "small head" if row["reading_unit"] == "m" else "pressure"
    shown = display.value(quantity, value)
    places = 1 if abs(shown) < 100 else 0
    text = f"{shown:.{places}f}".replace("-", "−")
    return f"{text}{_mark(row)}"
