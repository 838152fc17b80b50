"""The uncertainty budget and the likelihood of the roughness as a reader sees them: a table and sentences."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    Display,
    format_number,
    thousands,
)
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import PrintedTable, Row, TableColumn, known, lay_out, records

__all__ = [
    "OTHERS",
    "BudgetedValue",
    "best_improvement",
    "budget_table",
    "budgeted_values",
    "improvement_sentences",
    "likelihood_sentences",
]

#: What a reader sees of the inputs that add less than a hundredth of the variance wherever they are shown.
OTHERS = "all others"
_SHOWN = 0.01
_SYMBOLS = {
    "slope": "S",
    "friction_factor": "f",
    "roughness": "ε",
    "roughness_upper95": "bound of ε",
    "loss_coefficient": "K",
}
#: Which quantity comes first where one sentence has to do.
_FIRST = ("roughness", "roughness_upper95", "friction_factor", "loss_coefficient", "slope")
_HALF = {
    "reading scatter": "Half the scatter of the readings (four times as many)",
    "scatter about the law": "Half the scatter of the runs about the law (four times as many runs)",
    "static reading": "Half the uncertainty of the static readings (four times as many)",
    "flow of each run": "Half the uncertainty of each run's own flow",
    "temperature of each run": "Half the uncertainty of each run's own temperature",
    "tap chainage": "Half the uncertainty of the tap chainages",
    "tap elevation": "Half the uncertainty of the tap elevations",
}
#: An improvement below this share is none.
_NOTHING = 0.03
#: ε⁺ from which a sand-roughened wall is fully rough, and up to which it is smooth (Nikuradse 1933).
_ROUGH, _SMOOTH = 70.0, 5.0


@dataclass(frozen=True)
class BudgetedValue:
    """One value whose budget is shown.

    Parameters
    ----------
    quantity, subject : str
        As in the table ``budget``.
    name : str
        As a reader sees it.
    shares : mapping of str to float
        Share of the variance of each input, those that matter nowhere together under `OTHERS`.
    """

    quantity: str
    subject: str
    name: str
    shares: dict[str, float]


def budgeted_values(reduction: Reduction) -> list[BudgetedValue]:
    """Return the values whose budget page and figure show: of S and f the fastest run of each reach, every ε and K."""
    rows = records(reduction.budget)
    values: dict[tuple[str, str], dict[str, float]] = {}
    for row in rows:
        values.setdefault((row["quantity"], row["subject"]), {})[row["input"]] = row["variance_share"]
    several = len(reduction.reaches) > 1
    shown: dict[tuple[str, str], dict[str, float]] = {}
    reaches: set[tuple[str, str]] = set()
    for (quantity, subject), shares in values.items():
        if quantity in ("slope", "friction_factor"):
            # Runs stand in falling order of flow.
            reach = (quantity, _reach(reduction, subject))
            if reach in reaches:
                continue
            reaches.add(reach)
        shown[quantity, subject] = shares
    large = {name for shares in shown.values() for name, share in shares.items() if share >= _SHOWN}
    found = []
    for (quantity, subject), shares in shown.items():
        kept = {name: share for name, share in shares.items() if name in large}
        rest = sum(share for name, share in shares.items() if name not in large)
        if rest:
            kept[OTHERS] = rest
        found.append(
            BudgetedValue(
                quantity,
                subject,
                f"{_SYMBOLS[quantity]}, {_short(reduction, subject, several=several)}",
                kept,
            )
        )
    return found


def _reach(reduction: Reduction, subject: str) -> str:
    return next((str(name) for name in reduction.reaches["reach"] if subject.endswith(f", {name}")), "")


def _short(reduction: Reduction, subject: str, *, several: bool) -> str:
    """The subject, without the reach where there is only one."""
    reach = _reach(reduction, subject)
    return subject if several or not reach else subject.removesuffix(f", {reach}")


def ordered_inputs(values: list[BudgetedValue]) -> list[str]:
    """Return the inputs of some values, those that add most anywhere first, the others together last."""
    most: dict[str, float] = {}
    for value in values:
        for name, share in value.shares.items():
            most[name] = max(most.get(name, 0.0), share)
    return sorted(most, key=lambda name: (name == OTHERS, -most[name]))


def budget_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the uncertainty budget: a row for each input, a column for each value, shares of the variance in %."""
    values = budgeted_values(reduction)
    rows: list[dict[str, Any]] = [
        {"input": name, **{str(n): value.shares.get(name) for n, value in enumerate(values)}}
        for name in ordered_inputs(values)
    ]
    totals = {str(n): _total(reduction, value, display) for n, value in enumerate(values)}
    rows.append({"input": "standard uncertainty", **totals})

    def cell(n: int) -> TableColumn:
        def text(row: Row) -> str:
            share = row[str(n)]
            if isinstance(share, str):
                return share
            if not known(share):
                return MISSING
            return "< 0.1" if share < 0.001 else f"{100 * share:.1f}"

        return TableColumn(values[n].name, text)

    return lay_out(
        "Uncertainty budget: each input's share of the variance, %. Inputs of one name are together; slower runs and what "
        "each adds, in SI units, are in budget.csv.",
        rows if values else [],
        [TableColumn("input", lambda row: str(row["input"]), text=True), *map(cell, range(len(values)))],
        note=None,
    )


def _total(reduction: Reduction, value: BudgetedValue, display: Display) -> str:
    """The standard uncertainty of a value in the reader's unit."""
    table = reduction.budget
    mine = (table["quantity"] == value.quantity) & (table["subject"] == value.subject)
    u = float((table.loc[mine, "contribution_u"] ** 2).sum() ** 0.5)
    quantity = value.quantity.removesuffix("_upper95")
    if quantity in ("slope", "roughness"):
        shown = format_number(u * display.factor(quantity), 2)
        return f"{shown} {display.unit(quantity)}".strip()
    return format_number(u, 2)


def improvement_sentences(reduction: Reduction, display: Display = SI_DISPLAY) -> list[str]:
    """Return what pays most for every f, ε and K that page and figure show."""
    shown = {(value.quantity, value.subject) for value in budgeted_values(reduction)}
    several = len(reduction.reaches) > 1
    return [
        _improvement(row, _short(reduction, row["subject"], several=several), display)
        for row in records(reduction.improvements)
        if (row["quantity"], row["subject"]) in shown and row["quantity"] != "slope"
    ]


def best_improvement(reduction: Reduction, display: Display = SI_DISPLAY) -> str | None:
    """Return one sentence for the summary: what pays most for the roughness, else for f, K or S."""
    rows = records(reduction.improvements)
    several = len(reduction.reaches) > 1
    for quantity in _FIRST:
        for row in rows:
            if row["quantity"] == quantity:
                return _improvement(row, _short(reduction, row["subject"], several=several), display)
    return None


def _improvement(row: dict[str, Any], subject: str, display: Display) -> str:
    half = _HALF.get(row["input"], f"Half the uncertainty of the {row['input']}")
    quantity = row["quantity"]
    what = {
        "slope": f"S of {subject}",
        "friction_factor": f"f of {subject}",
        "roughness": f"the roughness of the wall {subject}",
        "roughness_upper95": f"the roughness of the wall {subject}",
        "loss_coefficient": f"K of {subject}",
    }[quantity]
    bound = known(row["bound"])
    now, then = (row["bound"], row["bound_halved"]) if bound else (row["u"], row["u_halved"])
    if not (known(now) and known(then)):
        return f"Most of what is unknown of {what} comes from the {row['input']}."
    if then > (1 - _NOTHING) * now:
        return f"No single input pays for {what}: {half[0].lower()}{half[1:]}, the best of them, lowers its uncertainty by less than 3 %."
    if bound:
        factor, unit = display.factor("roughness"), display.unit("roughness")
        return (
            f"{half} would pay most for {what}: an upper bound of {format_number(factor * then, 2)} {unit} instead of "
            f"{format_number(factor * now, 2)} {unit} could be expected."
        )
    if quantity == "loss_coefficient" or not row["value"] > 0:
        return f"{half} would pay most for {what}: it would be known to ± {format_number(then, 2)} instead of ± {format_number(now, 2)}."
    shares = [f"{format_number(100 * one / row['value'], 2)} %" for one in (then, now)]
    return f"{half} would pay most for {what}: it would be known to {shares[0]} instead of {shares[1]} (one standard uncertainty)."


def likelihood_sentences(reduction: Reduction, display: Display = SI_DISPLAY) -> list[str]:
    """Return what ε⁺ of each wall says: smooth, between, or fully rough."""
    said = []
    fastest = dict(zip(reduction.likelihood["wall"], reduction.likelihood["reynolds"], strict=True))
    limits = dict(zip(reduction.likelihood["wall"], reduction.likelihood["smooth_limit"], strict=True))
    for wall in records(reduction.walls):
        name = wall["wall"]
        if name not in limits or not known(wall["roughness_upper95"]):
            continue
        plus, upper = (_SMOOTH * wall[key] / limits[name] for key in ("roughness", "roughness_upper95"))
        ends = [_SMOOTH * wall[key] / limits[name] for key in ("roughness_low", "roughness_high")]
        if upper < _SMOOTH:
            verdict = "by the sand-grain criterion hydraulically smooth even at the upper bound"
        elif ends[0] > _ROUGH:
            verdict = "fully rough over the whole interval"
        elif ends[0] > _SMOOTH and ends[1] < _ROUGH:
            verdict = "between smooth and fully rough over the whole interval"
        else:
            verdict = "the interval reaches over more than one of smooth, transition and fully rough"
        value = (
            f"ε⁺ = {format_number(plus, 2)} ({format_number(ends[0], 2)} to {format_number(ends[1], 2)})"
            if wall["roughness_resolved"]
            else f"ε⁺ is at most {format_number(upper, 2)} (95 %)"
        )
        said.append(
            f"In the fastest run (Re {thousands(fastest[name], 3)}) the roughness Reynolds number of the wall {name} is "
            f"{value.removeprefix('ε⁺ is ')}: {verdict} (below ε⁺ = 5 a wall of sand is smooth, above 70 fully rough: "
            f"Nikuradse 1933). ε⁺ = 5 is ε = {display.text('roughness', limits[name], digits=2, unit=True)} here."
        )
    return said
