"""What the laws say of a survey, in sentences and tables: critical velocities, the law, known surfaces, C and n."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    Display,
    format_number,
    rounded,
    thousands,
)
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import (
    PrintedTable,
    Row,
    TableColumn,
    count,
    known,
    lay_out,
    name_column,
    percent,
    records,
    truth,
)

__all__ = [
    "conveyance_table",
    "law_sentences",
    "law_table",
    "roughness_check_table",
    "surface_table",
    "telling_laws",
    "transition_table",
    "zero_drift_table",
]

#: Verdicts as the tables hold them.
_SMOOTH, _NONE, _NOT_TOLD = "smooth", "none", "not told apart"
_CALLED = {
    "Colebrook–White": "Colebrook–White",
    "sand-grain": "the sand-grain transition",
    "smooth": "the smooth law",
}


def law_sentences(reduction: Reduction, display: Display = SI_DISPLAY) -> tuple[str, ...]:
    """Return all that the laws say, in the order of the page's section.

    Parameters
    ----------
    reduction : Reduction
        Its tables ``transition``, ``laws``, ``departures``, ``surfaces``, ``roughness_checks`` and ``wall_conveyance``
        are read.
    display : Display
        Units of the reader.

    Returns
    -------
    tuple of str
        Sentences; empty where nothing can be said.
    """
    return (
        *_transitions(reduction, display),
        *_verdicts(reduction, display),
        *_intercepts(reduction, display),
        *_surfaces(reduction, display),
        *_checks(reduction, display),
        *_conveyance(reduction),
    )


def telling_laws(reduction: Reduction, display: Display = SI_DISPLAY) -> tuple[list[str], list[str]]:
    """Return the sentences that belong in a summary: (what was found, what to look at).

    Parameters
    ----------
    reduction : Reduction
        As for `law_sentences`.
    display : Display
        Units of the reader.

    Returns
    -------
    tuple of lists
        Critical velocities, a law other than the usual one, and what was stated of a wall; walls that no law describes.
    """
    found = [*_transitions(reduction, display)]
    look = []
    for wall, rows in _by_wall(reduction).items():
        verdict = rows[0]["verdict"]
        if verdict == "sand-grain":
            found.append(_verdict(wall, rows, display))
        elif verdict == _NONE:
            look.append(_verdict(wall, rows, display))
    return [*found, *_checks(reduction, display)], look


def _by_wall(reduction: Reduction) -> dict[str, list[dict[str, Any]]]:
    found: dict[str, list[dict[str, Any]]] = {}
    for row in records(reduction.laws):
        if row["law"] is not None:
            found.setdefault(str(row["wall"]), []).append(row)
    return found


def _span(display: Display, quantity: str, low: float | None, high: float | None) -> str:
    """From a run to the next: an open end where there is no run beyond."""
    unit = display.unit(quantity)
    ends = [display.text(quantity, end, digits=3) if known(end) else None for end in (low, high)]
    if ends[0] is None:
        return f"below {ends[1]} {unit}"
    return f"above {ends[0]} {unit}" if ends[1] is None else f"between {ends[0]} and {ends[1]} {unit}"


def _reynolds(low: float | None, high: float | None) -> str:
    ends = [thousands(end, 3) if known(end) else None for end in (low, high)]
    if ends[0] is None:
        return f"Re below {ends[1]}"
    return f"Re above {ends[0]}" if ends[1] is None else f"Re {ends[0]} to {ends[1]}"


def _bracket(row: dict[str, Any], which: str, display: Display) -> str:
    velocity = _span(display, "velocity", row[f"{which}_from"], row[f"{which}_to"])
    return f"{velocity} ({_reynolds(row[f'{which}_reynolds_from'], row[f'{which}_reynolds_to'])})"


def _transitions(reduction: Reduction, display: Display) -> Iterable[str]:
    rows = records(reduction.transition)
    several = len({row["reach"] for row in rows}) > 1
    for row in rows:
        where = f" in the reach {row['reach']}" if several else ""
        when = "" if row["direction"] == "not stated" else f"With the flow {row['direction']}, "
        same = row["lower_from"] == row["upper_from"] and row["lower_to"] == row["upper_to"]
        if same:
            words = f"{when}the critical velocity{where} lies {_bracket(row, 'lower', display)}: no run lies between"
        else:
            words = (
                f"{when}the lower critical velocity{where}, where laminar flow ends, lies {_bracket(row, 'lower', display)}, "
                f"and the upper one, from which on it is turbulent, {_bracket(row, 'upper', display)}"
            )
        words = words[:1].upper() + words[1:] + ", by f itself"
        yield words + (f". There {row['reason']}." if row["reason"] else ".")


def _verdicts(reduction: Reduction, display: Display) -> Iterable[str]:
    for wall, rows in _by_wall(reduction).items():
        yield _verdict(wall, rows, display)
    for row in records(reduction.laws):
        if row["law"] is None and row["reason"]:
            yield f"Which law the wall {row['wall']} follows is not told: {row['reason']}."


def _verdict(wall: str, rows: list[dict[str, Any]], display: Display) -> str:
    verdict, needed = rows[0]["verdict"], format_number(rows[0]["needed"], 3)
    others = [row for row in rows if row["law"] != verdict]

    def larger(row: dict[str, Any]) -> str:
        return f"{format_number(row['chi_square_above'], 2)} for {_CALLED[row['law']]}"

    if verdict == _NONE:
        return f"No law describes the runs of the wall {wall}: {rows[0]['reason']}."
    if verdict == _SMOOTH:
        above = next(row["chi_square_above"] for row in rows if row["law"] == _SMOOTH)
        return (
            f"The smooth law describes the runs of the wall {wall} as well as any roughness does: its χ² is larger by "
            f"{format_number(above, 2)} at most, and {needed} tells two laws apart."
        )
    if verdict == _NOT_TOLD:
        rough = [row for row in rows if row["law"] != _SMOOTH]
        smooth = next(row for row in rows if row["law"] == _SMOOTH)
        apart = abs(rough[0]["chi_square"] - rough[1]["chi_square"])
        return (
            f"The runs of the wall {wall} do not tell Colebrook–White from the sand-grain transition: their χ² differ by "
            f"{format_number(apart, 2)}, and {needed} tells two laws apart; a smooth wall is ruled out (χ² larger by "
            f"{format_number(smooth['chi_square_above'], 2)})."
        )
    words = f"The runs of the wall {wall} are best described by {_CALLED[verdict]}"
    if verdict == "sand-grain":
        own = next(row for row in rows if row["law"] == verdict)
        words += f" with ε = {display.text('roughness', own['roughness'], digits=2, unit=True)}"
    return f"{words}: χ² is larger by {' and '.join(larger(row) for row in others)}, and {needed} tells two laws apart."


def _intercepts(reduction: Reduction, display: Display) -> Iterable[str]:
    for row in records(reduction.departures):
        if row["departure"] != "intercept" or not known(row["value_u"]):
            continue
        size = display.text("slope", row["value"], row["value_u"], unit=True)
        if not row["beyond_chance"]:
            chance = "no more than chance: no error of the heads in proportion to the chainage is seen"
        elif row["reason"]:
            chance = f"more than chance, but {row['reason']}"
        else:
            chance = "more than chance: an error of the heads in proportion to the chainage would do that"
        yield f"Against the law the slopes of the wall {row['wall']} have an intercept of {size}, {chance}."


def _surfaces(reduction: Reduction, display: Display) -> Iterable[str]:
    walls = {row["wall"]: row for row in records(reduction.walls)}
    rows = records(reduction.surfaces)
    for wall in dict.fromkeys(row["wall"] for row in rows):
        own = [row for row in rows if row["wall"] == wall]
        first = own[0]
        listed = _size(first, display)
        resolved = walls[wall]["roughness_resolved"]
        if not first["agrees"]:
            yield (
                f"No surface on the list has a roughness like that of the wall {wall}; the nearest is {first['surface']}, "
                f"{listed} ({first['source']})."
            )
        elif resolved:
            yield (
                f"The roughness of the wall {wall} is typical of {first['surface']}, {listed} ({first['source']})."
            )
        else:
            yield (
                f"The bound on the roughness of the wall {wall} leaves room for {first['surface']}, {listed} "
                f"({first['source']}), and for all that is smoother."
            )


def _size(row: Row, display: Display) -> str:
    low, high = (display.text("roughness", row[end], digits=2) for end in ("low", "high"))
    unit = display.unit("roughness")
    return f"{low} {unit}" if low == high else f"{low} to {high} {unit}"


def _checks(reduction: Reduction, display: Display) -> Iterable[str]:
    for row in records(reduction.roughness_checks):
        stated = display.text("roughness", row["roughness"], row["roughness_u"], digits=2, unit=True)
        source = f" ({row['source']})" if row["source"] else ""
        against = f"the {row['against']} roughness of {stated}{source}"
        if row["verdict"] is None:
            yield f"The wall {row['wall']} could not be held against {against}: {row['reason']}."
        elif row["verdict"] == "not distinguishable":
            yield f"The wall {row['wall']} is not distinguishable from {against}."
        else:
            word = "rougher" if row["verdict"] == "worse" else "smoother"
            yield f"The wall {row['wall']} is {row['verdict']}, that is {word}, than {against}."


def _conveyance(reduction: Reduction) -> Iterable[str]:
    for row in records(reduction.wall_conveyance):
        if not known(row["hazen_williams_c"]):
            continue
        words = (
            f"At the highest flow (run {row['run']}) the wall {row['wall']} has a Hazen–Williams C of "
            f"{rounded(row['hazen_williams_c'], row['hazen_williams_c_u'])} and a Manning n of "
            f"{rounded(row['manning_n'], row['manning_n_u'])}"
        )
        yield f"{words}. Caution: {row['caution']}." if row["caution"] else f"{words}."


def transition_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the critical velocities, each as the two runs between which it lies."""

    def within(name: str) -> TableColumn:
        return TableColumn(
            display.head(f"{name} critical velocity", "velocity"),
            lambda row: display.interval("velocity", row[f"{name}_from"], row[f"{name}_to"]),
        )

    def reynolds(name: str) -> TableColumn:
        return TableColumn(
            f"{name} critical Re",
            lambda row: _reynolds(row[f"{name}_reynolds_from"], row[f"{name}_reynolds_to"]).removeprefix(
                "Re "
            ),
        )

    return lay_out(
        "Critical velocities, between two runs each. A run counts as laminar or turbulent where its f lies on that law "
        "(within 5 % and 10 %, or two standard uncertainties), whatever its Re.",
        records(reduction.transition),
        [
            name_column("reach"),
            name_column("direction", "flow"),
            within("lower"),
            reynolds("lower"),
            within("upper"),
            reynolds("upper"),
        ],
    )


def _needed(reduction: Reduction) -> str:
    """Say where what tells two laws apart comes from."""
    needed = sorted({round(row["needed"], 6) for row in records(reduction.laws) if known(row["needed"])})
    if not needed:
        return ""
    told = " and ".join(format_number(one, 3) for one in needed)
    return (
        f" What tells two of them apart, χ² larger by {told}, is t² at {percent(reduction.level)} with the degrees of freedom "
        "of the pooled scatter: 3.84 at 95 % where that is known, more where few readings tell it."
    )


def law_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the laws with the roughness that suits each best and its misfit."""
    return lay_out(
        f"Laws of turbulent friction, each at the roughness that suits it best, all on the same slopes with one covariance."
        f"{_needed(reduction)}",
        [row for row in records(reduction.laws) if row["law"] is not None],
        [
            name_column("wall"),
            name_column("law"),
            TableColumn(
                display.head("roughness ε", "roughness"),
                lambda row: (
                    MISSING
                    if row["law"] == _SMOOTH
                    else display.text("roughness", row["roughness"], digits=3)
                ),
            ),
            TableColumn("χ²", lambda row: format_number(row["chi_square"], 3)),
            TableColumn("above the least", lambda row: format_number(row["chi_square_above"], 3)),
            TableColumn("slopes", lambda row: count(row["slopes_used"])),
            name_column("verdict"),
        ],
        note=None,
    )


def surface_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the published surfaces nearest to each wall."""
    return lay_out(
        "Known surfaces with a roughness such as the wall's, nearest first. Published single values are taken to stand for "
        "surfaces within 30 %.",
        records(reduction.surfaces),
        [
            name_column("wall"),
            name_column("surface"),
            TableColumn(
                display.head("published roughness", "roughness"),
                lambda row: _size(row, display).removesuffix(display.unit("roughness")).strip(),
            ),
            TableColumn(
                "within the wall's interval",
                lambda row: MISSING if row["agrees"] is None else "yes" if row["agrees"] else "no",
                text=True,
            ),
            name_column("source"),
        ],
        note=None,
    )


def roughness_check_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return each wall against what was stated of it beforehand."""
    return lay_out(
        "The walls against what was stated of them. Better is smoother, worse is rougher, each beyond the uncertainty of both.",
        records(reduction.roughness_checks),
        [
            name_column("wall"),
            name_column("against"),
            TableColumn(
                display.head("stated", "roughness"),
                lambda row: display.text("roughness", row["roughness"], row["roughness_u"], digits=2),
            ),
            name_column("source", always=False),
            name_column("verdict"),
        ],
    )


def conveyance_table(reduction: Reduction, *, limit: int | None = None) -> PrintedTable:
    """Return Hazen–Williams C and Manning n of each run."""
    several = len(reduction.reaches) > 1
    rows = [
        row
        for row in records(reduction.conveyance if limit is None else reduction.conveyance.iloc[:limit])
        if known(row["hazen_williams_c"])
    ]
    return lay_out(
        "Hazen–Williams C (V = 0.8492 C R^0.63 S^0.54 in m and s, 1.318 in ft and s) and Manning n (V = R^(2/3) S^(1/2)/n in m "
        "and s, 1.486/n in ft and s) of each turbulent run: the same numbers in either units. Both change with the flow where "
        "the formula is used beyond its range.",
        rows,
        [
            name_column("run"),
            *([name_column("reach")] if several else []),
            TableColumn(
                "Hazen–Williams C", lambda row: rounded(row["hazen_williams_c"], row["hazen_williams_c_u"])
            ),
            TableColumn("Manning n", lambda row: rounded(row["manning_n"], row["manning_n_u"])),
        ],
        note=None,
    )


def zero_drift_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return what each tap reads more in a static run than in the one before."""
    return lay_out(
        "Zero drift: what a tap reads more in a static run than in the one before, the level of the line taken off. Beyond "
        "chance: more than in one of a hundred surveys, over all taps and pairs.",
        records(reduction.zero_drift),
        [
            name_column("tap"),
            name_column("run", "from static run"),
            name_column("run_2", "to static run"),
            TableColumn(
                display.head("drift", "small head"),
                lambda row: display.text("small head", row["drift"], row["drift_u"], digits=2),
            ),
            TableColumn("beyond chance", lambda row: truth(row["beyond_chance"]), text=True),
        ],
        note=None,
    )
