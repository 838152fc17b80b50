"""From several reductions to a comparison."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from gradeline.comparison.ageing import Ageing, ageing_of
from gradeline.comparison.bores import DIFFER, ONE, OneBore, one_bore
from gradeline.comparison.changes import tell_changes, tell_factors, unchanged, with_left_out
from gradeline.comparison.matching import Taken, Together, matched, part_of, shared_rows
from gradeline.comparison.odd import odd_ones
from gradeline.comparison.sayings import assumptions_of, cautions_of
from gradeline.comparison.tables import Comparison, table_of
from gradeline.errors import UsageError
from gradeline.fitting.joint import JointLevels, joint_levels
from gradeline.fitting.one_thread import one_thread
from gradeline.hydraulics.friction import TURBULENT_LIMIT
from gradeline.reduction import reduce
from gradeline.reduction.fitted import FittedWall
from gradeline.reduction.tables import Reduction
from gradeline.survey import Survey

__all__ = ["compare"]


@one_thread
def compare(
    surveys: Sequence[Survey | Reduction],
    *,
    labels: Sequence[str] | None = None,
    reynolds: float | None = None,
    same_meter: bool = False,
    same_gauges: bool = False,
    until: datetime.date | str | None = None,
    level: float | None = None,
) -> Comparison:
    """Compare surveys of one line: is the change of its friction real, how fast does the wall age, which survey is odd.

    Parameters
    ----------
    surveys : sequence of Survey or Reduction
        At least two. A Survey is reduced first. Walls are matched by name.
    labels : sequence of str, optional
        What to call them; else the name of each survey's folder or file.
    reynolds : float, optional
        Common Reynolds number at which f is told, turbulent; else the middle of what all surveys of a wall tested.
    same_meter, same_gauges : bool
        Whether the flow meter, or the gauges, are the same in all surveys, so that their error is one and leaves the
        differences. Off by default: taking an error as common that is not makes a change look surer than it is, while the
        other mistake only makes the test less sharp.
    until : date or text as ``2035-01-01``, optional
        To which the line of ageing is carried on; after the last survey.
    level : float, optional
        Coverage of the intervals, that of the reductions, 0.95 where surveys are given. A change is called real where
        it is beyond chance at one less this level.

    Returns
    -------
    Comparison
        A frozen set of tables, SI units.

    Raises
    ------
    UsageError
        For fewer than two surveys, labels that do not fit, a wall that no two surveys share, or a date, level or Reynolds
        number that cannot be used.

    Notes
    -----
    The pipe is taken as the same: errors of bore, tap positions (and so of the lengths between them) and gravity are one
    error in all surveys that state them alike, and all but cancel in a difference. Bores that are stated otherwise make no
    change: all surveys are compared in one bore, in which f differs between them as S/Q² does. Where the statements agree
    within their uncertainties it is their mean; where they do not, S at equal flow is all that is compared. A change is tested on ln f at the
    common Re, of which the likelihood is nearly a parabola; where ε is told from zero this is a test of ε. Degrees of freedom
    by Welch and Satterthwaite.

    Examples
    --------
    >>> import gradeline
    >>> bench = gradeline.reduce(gradeline.read_survey("data_demo/copper_bench"))
    >>> found = gradeline.compare([bench, bench], labels=["May", "June"])
    >>> found.walls[["wall", "changed"]].values.tolist()
    [['drawn copper', False]]
    """
    level = _level_of(surveys, level)
    taken, dated = _taken(surveys, labels, level)
    last = _until(until, taken, dated=dated)
    if reynolds is not None and not reynolds >= TURBULENT_LIMIT:
        raise UsageError(
            f"the common Reynolds number is {reynolds:g}; roughness shows in turbulent flow alone, so give one of at "
            f"least {TURBULENT_LIMIT:g}"
        )
    together = Together(same_meter, same_gauges)
    walls = {name: found for name, found in matched(taken).items() if len(found) > 1}
    if not walls:
        named = "; ".join(
            f"{one.label}: {', '.join(wall.name for wall in one.reduction.fitted_walls) or 'none'}"
            for one in taken
        )
        raise UsageError(
            f"no two surveys have a wall of one name ({named}); give the same wall the same name"
        )
    bores = {name: one_bore([wall for _, wall in found]) for name, found in walls.items()}
    held = [
        _wall(name, found, bores[name], together, reynolds, level, len(walls), last, dated=dated)
        for name, found in walls.items()
    ]
    shared = [
        row
        for name, found in walls.items()
        for row in shared_rows(
            name, [(one, wall) for (one, _), wall in zip(found, bores[name].walls, strict=True)], together
        )
    ]
    return Comparison(
        surveys=table_of("surveys", [row for one in held for row in one.surveys]),
        walls=table_of("walls", [one.wall for one in held]),
        ageing=table_of("ageing", [row for one in held for row in one.ageing]),
        runs=table_of("runs", [row for one in held for row in one.runs]),
        shared=table_of("shared", shared),
        assumptions=assumptions_of(
            together, level, tests=len(walls), dated=dated, walls=[one.wall for one in held]
        ),
        cautions=cautions_of(taken, walls, [one.wall for one in held], [one.surveys for one in held], last),
        level=level,
        dated=dated,
    )


def _level_of(surveys: Sequence[Survey | Reduction], level: float | None) -> float:
    if len(surveys) < 2:
        raise UsageError(f"a comparison takes two surveys or more; found {len(surveys)}")
    there = {one.level for one in surveys if isinstance(one, Reduction)}
    if len(there | ({level} if level is not None else set())) > 1:
        named = ", ".join(f"{one:g}" for one in sorted(there))
        wanted = "" if level is None else f", and {level:g} is asked for"
        raise UsageError(f"the reductions have intervals of level {named}{wanted}; reduce all at one level")
    found = level if level is not None else there.pop() if there else 0.95
    if not 0.0 < found < 1.0:
        raise UsageError(f"the level of the intervals is between 0 and 1, such as 0.95; found {found:g}")
    return found


def _taken(
    surveys: Sequence[Survey | Reduction], labels: Sequence[str] | None, level: float
) -> tuple[list[Taken], bool]:
    """Reduce what is not reduced, name each, and put them in the order of their dates where all have one."""
    reductions = [
        one if isinstance(one, Reduction) else reduce(one, level=level, monte_carlo=False) for one in surveys
    ]
    if labels is None:
        labels = _own_labels(reductions)
    elif len(labels) != len(reductions) or len(set(labels)) < len(labels):
        raise UsageError(
            f"{len(reductions)} surveys have the labels {', '.join(labels)}; give each a label of its own"
        )
    taken = [Taken(label, one) for label, one in zip(labels, reductions, strict=True)]
    days = [date_of(one.reduction) for one in taken]
    known = [day for day in days if day is not None]
    if len(known) < len(days) or len(set(known)) == 1:
        return taken, False
    order = sorted(range(len(taken)), key=lambda n: known[n])
    return [taken[n] for n in order], True


def _own_labels(reductions: Sequence[Reduction]) -> list[str]:
    names = [
        Path(str(one.survey.get("source") or "")).stem or str(one.survey.get("title") or "survey")
        for one in reductions
    ]
    seen: dict[str, int] = {}
    found = []
    for name in names:
        seen[name] = seen.get(name, 0) + 1
        found.append(name if names.count(name) == 1 else f"{name} ({seen[name]})")
    return found


def date_of(reduction: Reduction) -> datetime.date | None:
    """Return the day of a survey, None where none is stated."""
    text = reduction.survey.get("date")
    return None if not text else datetime.date.fromisoformat(str(text)[:10])


def _until(until: datetime.date | str | None, taken: Sequence[Taken], *, dated: bool) -> datetime.date | None:
    if until is None:
        return None
    if isinstance(until, str):
        try:
            until = datetime.date.fromisoformat(until)
        except ValueError:
            raise UsageError(f"{until!r} is not a date; write it as 2035-01-01") from None
    if not dated:
        raise UsageError(
            "a line of ageing needs surveys of different dates; give [survey] date in each survey.toml"
        )
    last = max(day for one in taken if (day := date_of(one.reduction)) is not None)
    if until <= last:
        raise UsageError(
            f"the line of ageing is asked for until {until}, but the last survey is of {last}; give a later date"
        )
    return until


@dataclass(frozen=True)
class _Held:
    """The rows that one wall adds to each table."""

    wall: dict[str, Any]
    surveys: list[dict[str, Any]]
    ageing: list[dict[str, Any]]
    runs: list[dict[str, Any]]


def _wall(
    name: str,
    found: Sequence[tuple[Taken, FittedWall]],
    bore: OneBore,
    together: Together,
    reynolds: float | None,
    level: float,
    tests: int,
    until: datetime.date | None,
    *,
    dated: bool,
) -> _Held:
    rows = [_told(one, wall) for one, wall in found]
    # Of bores that differ it is not known which is true, so that the runs stand as each survey has them.
    shown = [wall for _, wall in found] if bore.kind == DIFFER else bore.walls
    runs = [row for (one, wall), mine in zip(found, shown, strict=True) for row in _run_rows(one, wall, mine)]
    usable = [
        n for n, (_, wall) in enumerate(found) if rows[n]["reason"] is None and np.isfinite(wall.fit.low)
    ]
    about: dict[str, Any] = {"wall": name, "surveys_compared": len(usable), "bores": bore.kind}
    if len(usable) < 2:
        why = "fewer than two surveys give this wall a friction and tell how sure it is"
        return _Held(about | {"reason": why}, rows, [], runs)
    common = reynolds if reynolds is not None else _common_reynolds([bore.walls[n] for n in usable])
    diameter = bore.diameter
    about |= {"reynolds": common, "diameter": diameter}
    parts = [part_of(found[n][0].label, bore.walls[n], together) for n in usable]
    levels = joint_levels(parts, common, diameter)
    fuller = [with_left_out(part) for part in parts]
    same = all(one is other for one, other in zip(fuller, parts, strict=True))
    whole = levels if same else joint_levels(fuller, common, diameter)
    mine = [rows[n] for n in usable]
    differ = bore.kind == DIFFER
    if differ:
        own = [part_of(found[n][0].label, found[n][1], together) for n in usable]
        tell_factors(mine, joint_levels(own, common, diameter), own, common, diameter, level)
    else:
        tell_factors(mine, levels, parts, common, diameter, level)
    tell_changes(mine, levels, whole, level, tests, of_roughness=not differ)
    if bore.kind in (ONE, DIFFER):
        for n, row in zip(usable, mine, strict=True):
            row["log_factor_by_bore"] = float(bore.log_factor[n] - bore.log_factor[usable[0]])
    about |= unchanged(levels, whole, level, tests)
    ageing: Ageing | None = None
    if dated and differ:
        about["reason"] = "the stated bores differ beyond their uncertainties: no rate of growth"
    elif dated:
        days = [date_of(found[n][0].reduction) for n in usable]
        ageing = ageing_of(
            parts, levels, [day for day in days if day is not None], common, diameter, level, until
        )
        about |= ageing.about
    _tell_odd(mine, levels, about, ageing)
    table = [] if ageing is None else [{"wall": name} | row for row in ageing.rows]
    return _Held(about, rows, table, runs)


def _told(one: Taken, wall: FittedWall) -> dict[str, Any]:
    """What a survey alone says of a wall."""
    walls = one.reduction.walls
    row = walls[(walls["wall"] == wall.name).to_numpy(bool)].iloc[0]
    used = wall.data.reynolds[wall.fit.used]
    inputs = one.reduction.inputs
    fluids = inputs["name"][(inputs["group"] == "fluid").to_numpy(bool)].dropna()
    missing = not np.isfinite(row["roughness"])
    return {
        "wall": wall.name,
        "survey": one.label,
        "title": one.reduction.survey.get("title"),
        "date": None if (day := date_of(one.reduction)) is None else day.isoformat(),
        "diameter": float(wall.data.diameter[0]),
        "fluid": None if fluids.empty else str(fluids.iloc[0]),
        "runs_used": float(row["runs_used"]),
        "reynolds_low": float(used.min()) if used.size and not missing else None,
        "reynolds_high": float(used.max()) if used.size and not missing else None,
        "roughness": float(row["roughness"]),
        "roughness_low": float(row["roughness_low"]),
        "roughness_high": float(row["roughness_high"]),
        "roughness_upper95": float(row["roughness_upper95"]),
        "roughness_resolved": None if missing else bool(wall.fit.low > 0),
        "reason": (row["reason"] or "no roughness") if missing else _unsure(wall),
    }


def _unsure(wall: FittedWall) -> str | None:
    return None if np.isfinite(wall.fit.low) else "nothing tells how sure its friction is"


def _run_rows(one: Taken, wall: FittedWall, shown: FittedWall) -> list[dict[str, Any]]:
    """The turbulent runs that entered, for drawing; f of each with its whole uncertainty, in the bore that is shown."""
    runs, used = one.reduction.runs, wall.fit.used
    reaches = one.reduction.reaches["reach"][(one.reduction.reaches["wall"] == wall.name).to_numpy(bool)]
    flowing = list(dict.fromkeys(runs["run"][(runs["regime"] != "static").to_numpy(bool)]))
    entered = {
        (flowing[r], reach): (r, k)
        for r in range(used.shape[0])
        for k, reach in enumerate(reaches)
        if used[r, k] and r < len(flowing)
    }
    faster = shown.data.reynolds / wall.data.reynolds
    rougher = (shown.data.diameter * shown.data.slope / shown.data.velocity**2) / (
        wall.data.diameter * wall.data.slope / wall.data.velocity**2
    )
    return [
        {
            "wall": wall.name,
            "survey": one.label,
            "run": row["run"],
            "reach": row["reach"],
            "reynolds": row["reynolds"] * faster[place],
            "friction_factor": row["friction_factor"] * rougher[place],
            "friction_factor_u": row["friction_factor_u"] * rougher[place],
        }
        for row in runs.to_dict("records")
        if (place := entered.get((row["run"], row["reach"]))) is not None
    ]


def _common_reynolds(walls: Sequence[FittedWall]) -> float:
    """The middle of what all surveys tested, or between them where they tested nothing in common; two digits."""
    tested = [wall.data.reynolds[wall.fit.used] for wall in walls]
    low, high = max(one.min() for one in tested), min(one.max() for one in tested)
    middle = float(np.sqrt(low * high))
    return float(f"{max(middle, TURBULENT_LIMIT):.1e}")


def _tell_odd(
    rows: Sequence[dict[str, Any]], levels: JointLevels, about: dict[str, Any], ageing: Ageing | None
) -> None:
    times = None
    if ageing is not None and ageing.beyond_chance:
        times = ageing.years
    found = odd_ones(levels.log_factor, np.sqrt(np.diagonal(levels.apart)), times)
    if found is None:
        return
    about["critical_score"] = found.critical
    for row, score, odd in zip(rows, found.score, found.odd, strict=True):
        row |= {"score": float(score), "odd": bool(odd)}
