"""From several reductions to a comparison."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtrc, stdtr, stdtrit

from gradeline.comparison.ageing import Ageing, ageing_of
from gradeline.comparison.matching import Taken, Together, matched, part_of, shared_rows
from gradeline.comparison.odd import odd_ones
from gradeline.comparison.sayings import assumptions_of, cautions_of
from gradeline.comparison.tables import Comparison, table_of
from gradeline.errors import UsageError
from gradeline.fitting.joint import JointLevels, Part, freedom_of, joint_levels
from gradeline.fitting.one_thread import one_thread
from gradeline.hydraulics.friction import TURBULENT_LIMIT
from gradeline.reduction import reduce
from gradeline.reduction.fitted import FittedWall
from gradeline.reduction.tables import Reduction
from gradeline.survey import Survey

__all__ = ["compare"]

Array = NDArray[np.float64]

_MANY = 1e9


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
    error in all surveys that state them alike, and all but cancel in a difference. A change is tested on ln f at the
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
    held = [
        _wall(name, found, together, reynolds, level, len(walls), last, dated=dated)
        for name, found in walls.items()
    ]
    shared = [row for name, found in walls.items() for row in shared_rows(name, found, together)]
    return Comparison(
        surveys=table_of("surveys", [row for one in held for row in one.surveys]),
        walls=table_of("walls", [one.wall for one in held]),
        ageing=table_of("ageing", [row for one in held for row in one.ageing]),
        runs=table_of("runs", [row for one in held for row in one.runs]),
        shared=table_of("shared", shared),
        assumptions=assumptions_of(together, level, tests=len(walls), dated=dated),
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
    together: Together,
    reynolds: float | None,
    level: float,
    tests: int,
    until: datetime.date | None,
    *,
    dated: bool,
) -> _Held:
    rows = [_told(one, wall) for one, wall in found]
    runs = [row for one, wall in found for row in _run_rows(one, wall)]
    usable = [
        n for n, (_, wall) in enumerate(found) if rows[n]["reason"] is None and np.isfinite(wall.fit.low)
    ]
    about: dict[str, Any] = {"wall": name, "surveys_compared": len(usable)}
    if len(usable) < 2:
        why = "fewer than two surveys give this wall a friction and tell how sure it is"
        return _Held(about | {"reason": why}, rows, [], runs)
    common = reynolds if reynolds is not None else _common_reynolds([rows[n] for n in usable])
    about["reynolds"] = common
    diameter = float(found[usable[0]][1].data.diameter[0])
    parts = [part_of(found[n][0].label, found[n][1], together) for n in usable]
    levels = joint_levels(parts, common, diameter)
    mine = [rows[n] for n in usable]
    _tell_factors(mine, levels, parts, common, diameter, level)
    _tell_changes(mine, levels, level, tests)
    about |= _unchanged(levels, level, tests)
    ageing: Ageing | None = None
    if dated:
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


def _run_rows(one: Taken, wall: FittedWall) -> list[dict[str, Any]]:
    """The turbulent runs that entered, for drawing; f of each with its whole uncertainty."""
    runs, used = one.reduction.runs, wall.fit.used
    reaches = one.reduction.reaches["reach"][(one.reduction.reaches["wall"] == wall.name).to_numpy(bool)]
    flowing = list(dict.fromkeys(runs["run"][(runs["regime"] != "static").to_numpy(bool)]))
    entered = {
        (flowing[r], reach)
        for r in range(used.shape[0])
        for k, reach in enumerate(reaches)
        if used[r, k] and r < len(flowing)
    }
    return [
        {"wall": wall.name, "survey": one.label}
        | {key: row[key] for key in ("run", "reach", "reynolds", "friction_factor", "friction_factor_u")}
        for row in runs.to_dict("records")
        if (row["run"], row["reach"]) in entered
    ]


def _common_reynolds(rows: Sequence[dict[str, Any]]) -> float:
    """The middle of what all surveys tested, or between them where they tested nothing in common; two digits."""
    low, high = max(row["reynolds_low"] for row in rows), min(row["reynolds_high"] for row in rows)
    middle = float(np.sqrt(low * high))
    return float(f"{max(middle, TURBULENT_LIMIT):.1e}")


def _quantile(level: float, dof: float) -> float:
    return float(stdtrit(min(dof, _MANY), 0.5 + level / 2.0))


def _size(levels: JointLevels, n: int, log_factor: float) -> float:
    """ε of an ln f near that of a survey, m: along the law's own bend, of second order in ε."""
    return float(levels.roughness[n] + (log_factor - levels.log_factor[n]) / levels.by_roughness[n])


def _tell_factors(
    rows: Sequence[dict[str, Any]],
    levels: JointLevels,
    parts: Sequence[Part],
    reynolds: float,
    diameter: float,
    level: float,
) -> None:
    """Add f at the common Re in each survey's own bore, and ε without what all surveys share."""
    for n, (row, part) in enumerate(zip(rows, parts, strict=True)):
        weights = np.eye(len(rows))[n]
        u, dof = float(np.sqrt(levels.covariance[n, n])), freedom_of(levels, weights)
        t = _quantile(level, dof)
        law = part.data.law.factor
        own = np.log(law(reynolds, levels.roughness[n] / part.data.diameter[0])) - np.log(
            law(reynolds, levels.roughness[n] / diameter)
        )
        factor = float(np.exp(levels.log_factor[n] + own))
        row |= {
            "friction_factor": factor,
            "friction_factor_u": factor * u,
            "friction_factor_low": factor * float(np.exp(-t * u)),
            "friction_factor_high": factor * float(np.exp(t * u)),
        }
        if levels.resolved[n]:
            apart = t * float(np.sqrt(max(levels.apart[n, n], 0.0)))
            row["roughness_apart_low"] = max(_size(levels, n, levels.log_factor[n] - apart), 0.0)
            row["roughness_apart_high"] = _size(levels, n, levels.log_factor[n] + apart)


def _tell_changes(rows: Sequence[dict[str, Any]], levels: JointLevels, level: float, tests: int) -> None:
    """Add each survey's change against the first."""
    alarm = (1.0 - level) / (tests * max(len(rows) - 1, 1))
    for n, row in enumerate(rows[1:], 1):
        weights = np.zeros(len(rows))
        weights[0], weights[n] = -1.0, 1.0
        change = float(weights @ levels.log_factor)
        u, dof = float(np.sqrt(weights @ levels.covariance @ weights)), freedom_of(levels, weights)
        t = _quantile(level, dof)
        p = 2.0 * float(stdtr(min(dof, _MANY), -abs(change) / u)) if u > 0 else float(change == 0)
        row |= {
            "log_factor_change": change,
            "log_factor_change_u": u,
            "log_factor_change_dof": dof if np.isfinite(dof) else None,
            "log_factor_change_low": change - t * u,
            "log_factor_change_high": change + t * u,
            "change_p": p,
            "changed": bool(p < alarm),
        }
        if levels.resolved[0] and levels.resolved[n]:
            by = weights / levels.by_roughness
            grown = float(levels.roughness[n] - levels.roughness[0])
            wide = _quantile(level, freedom_of(levels, by)) * float(np.sqrt(by @ levels.covariance @ by))
            row |= {
                "roughness_change": grown,
                "roughness_change_low": grown - wide,
                "roughness_change_high": grown + wide,
            }


def _unchanged(levels: JointLevels, level: float, tests: int) -> dict[str, Any]:
    """Return whether all surveys found one friction: the F test of their contrasts."""
    count = len(levels.log_factor)
    contrasts = np.column_stack([-np.ones(count - 1), np.eye(count - 1)])
    apart = contrasts @ levels.log_factor
    covariance = contrasts @ levels.covariance @ contrasts.T
    dof = min(freedom_of(levels, row) for row in contrasts)
    square = float(apart @ np.linalg.pinv(covariance, hermitian=True) @ apart)
    p = float(fdtrc(count - 1, min(dof, _MANY), square / (count - 1)))
    last = contrasts[-1]
    needed = float(stdtrit(min(dof, _MANY), 1.0 - (1.0 - level) / (2.0 * tests)))
    return {
        "unchanged_p": p,
        "changed": bool(p < (1.0 - level) / tests),
        "least_log_factor_change": needed * float(np.sqrt(last @ levels.covariance @ last)),
    }


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
