"""What a reader of a comparison must know."""

from __future__ import annotations

import datetime
from collections.abc import Mapping, Sequence
from typing import Any

from gradeline.comparison.bores import DIFFER, ONE, UNMATCHED
from gradeline.comparison.changes import MARGIN
from gradeline.comparison.matching import Taken, Together
from gradeline.reduction.fitted import FittedWall

__all__ = ["assumptions_of", "cautions_of"]

#: A common Re this far outside what a survey tested is told, relative.
_OUTSIDE = 0.02
#: Past the surveys by more than the time that they span, the line is little but its assumption.
_FAR = 1.0
#: Flagged readings named of a survey.
_NAMED = 4


def assumptions_of(
    together: Together, level: float, *, tests: int, dated: bool, walls: Sequence[Mapping[str, Any]]
) -> tuple[str, ...]:
    """Return every choice that was made."""
    said = [
        "The pipe is the same in all surveys: the errors of its bore, of the tap positions and elevations, of given loss "
        "coefficients and of gravity are one error where they are stated alike, and leave the differences."
    ]
    said += [
        f"Wall {wall['wall']}: the stated bores agree within their uncertainties and are taken as one, "
        f"{_bore(wall['diameter'])}, the mean of the statements, each weighed by its uncertainty: f, its change and the line of "
        "ageing are those in this bore. ε by each survey is that in the bore that it states."
        for wall in walls
        if wall.get("bores") == ONE and wall.get("diameter") is not None
    ]
    for what, same, option in (
        ("flow meter", together.meter, "--same-meter"),
        ("gauges", together.gauges, "--same-gauges"),
    ):
        plural = what.endswith("s")
        if same:
            said.append(f"The {what} {'are' if plural else 'is'} the same in all surveys, as was said.")
        else:
            said.append(
                f"The {what} {'are' if plural else 'is'} taken as {'others' if plural else 'another'} in each survey: to take an "
                f"error as common that is not would make a change look surer than it is ({option} where it is)."
            )
    chance = f"{100 * MARGIN * (1 - level):.3g} %"
    shared = "" if tests == 1 else f", shared among {tests} walls"
    said.append(
        f"A change is called real where chance alone would give as large a one in fewer than {chance} of cases{shared}; of "
        "several surveys against the first, that is shared among them too (Bonferroni)."
    )
    said.append(
        "The surveys stand in the order of their dates."
        if dated
        else "The surveys stand in the order in which they were given: they have no dates, not all of them, or all the same."
    )
    if dated:
        said.append(
            "Growth of the roughness is taken as even in time, ε = ε₀ + α t (Colebrook and White 1937), as is commonly assumed; "
            "pipes that age fast at first, or were cleaned or lined between surveys, do not follow it."
        )
    return tuple(said)


def cautions_of(
    taken: Sequence[Taken],
    walls: Mapping[str, Sequence[tuple[Taken, FittedWall]]],
    about: Sequence[Mapping[str, Any]],
    rows: Sequence[Sequence[Mapping[str, Any]]],
    until: datetime.date | None,
) -> tuple[str, ...]:
    """Return what sets the surveys apart beside the wall, and where the comparison reaches past what was tested."""
    said: list[str] = []
    for wall, mine in zip(about, rows, strict=True):
        said += _unlike(wall, mine)
        said += _outside(wall, mine)
        if wall.get("by_left_out"):
            said.append(
                f"Wall {wall['wall']}: the change rests on runs that were left out as off the law; with those among them that "
                "chance alone may have put there it is not told from chance, so it is not called real."
            )
        if until is not None:
            said += _past(wall, mine, until)
        scale = wall.get("line_scale") or 1.0
        if scale > 1.0:
            said.append(
                f"Wall {wall['wall']}: the surveys scatter about the line of ageing {scale:.2g} times as much as their "
                "uncertainties say; those of the line are widened by as much."
            )
    names = {name for one in taken for name in (wall.name for wall in one.reduction.fitted_walls)}
    for name in sorted(names - set(walls)):
        said.append(f"Wall {name} stands in one survey alone and is not compared.")
    for one in taken:
        flags = one.reduction.flags
        ill = sorted(set(flags["kind"][flags["kind"].isin(["law", "tap"])]))
        if ill:
            said.append(
                f"{one.label}: the reduction has flags of kind {' and '.join(ill)}; what they say bears on the comparison."
            )
        said += _flagged(one)
    return tuple(said)


def _flagged(one: Taken) -> list[str]:
    """Say which readings of a survey were flagged, and whether they entered."""
    flags, heads = one.reduction.flags, one.reduction.heads
    flagged = flags[(flags["kind"] == "reading").to_numpy(bool)]
    if not len(flagged):
        return []
    used = {
        (run, tap)
        for run, tap, use in zip(heads["run"], heads["tap"], heads["used"].fillna(False), strict=True)
        if use
    }
    places = [(row["run"], row["tap"]) for row in flagged.to_dict("records")]
    out = [place for place in places if place not in used]
    named = ", ".join(f"run {run} tap {tap}" for run, tap in places[:_NAMED])
    more = f" and {len(places) - _NAMED} more" if len(places) > _NAMED else ""
    fate = "left out" if len(out) == len(places) else "kept" if not out else f"{len(out)} of them left out"
    return [
        f"{one.label}: {len(places)} {'reading was' if len(places) == 1 else 'readings were'} flagged ({named}{more}) and {fate}."
    ]


def _bore(diameter: float) -> str:
    return f"{1000 * diameter:.5g} mm"


def _unlike(about: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> list[str]:
    said, wall = [], about["wall"]
    listed = _listed([(row["survey"], _bore(row["diameter"])) for row in rows])
    if about.get("bores") == DIFFER:
        said.append(
            f"Wall {wall}: the stated bores differ beyond their uncertainties ({listed}). f goes as the fifth power of the bore, "
            "so that f and ε by each survey differ by the statements alone; what is compared is S at equal flow, which no "
            "statement of a bore touches. It changes where the wall or the bore itself does. Of one pipe, state one bore "
            "in all surveys for the change of ε and its rate; of pipes of unlike bore S at equal flow tells nothing of the wall."
        )
    elif about.get("bores") == UNMATCHED:
        said.append(
            f"Wall {wall}: the surveys divide the line into other reaches, so that their bores are not held against each other "
            f"({listed} first); where they differ, so does f."
        )
    fluids = {row["fluid"] for row in rows}
    if len(fluids) > 1:
        listed = _listed([(row["survey"], str(row["fluid"])) for row in rows])
        said.append(f"Wall {wall}: the fluids differ ({listed}); f at one Re may be compared all the same.")
    return said


def _listed(pairs: Sequence[tuple[str, str]]) -> str:
    """Surveys by what they have: of many, those of each value are counted."""
    groups: dict[str, list[str]] = {}
    for survey, value in pairs:
        groups.setdefault(value, []).append(survey)
    if len(pairs) <= 6:
        return ", ".join(f"{value} in {', '.join(names)}" for value, names in groups.items())
    return ", ".join(
        f"{value} in {len(names)} surveys" if len(names) > 3 else f"{value} in {', '.join(names)}"
        for value, names in groups.items()
    )


def _outside(wall: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> list[str]:
    common = wall.get("reynolds")
    if common is None:
        return []
    out = [
        f"{row['survey']} ({row['reynolds_low']:.3g} to {row['reynolds_high']:.3g})"
        for row in rows
        if row["reynolds_low"] is not None
        and not row["reynolds_low"] * (1 - _OUTSIDE) <= common <= row["reynolds_high"] * (1 + _OUTSIDE)
    ]
    if not out:
        return []
    return [
        f"Wall {wall['wall']}: the common Re {common:.3g} lies outside what was tested in {', '.join(out)}; f there is carried on "
        "along the law."
    ]


def _past(wall: Mapping[str, Any], rows: Sequence[Mapping[str, Any]], until: datetime.date) -> list[str]:
    if wall.get("roughness_rate") is None:
        return []
    days = [datetime.date.fromisoformat(row["date"]) for row in rows if row["date"]]
    span, past = (max(days) - min(days)).days, (until - max(days)).days
    if past <= _FAR * span:
        return []
    return [
        f"Wall {wall['wall']}: {until} lies {past / 365.2425:.2g} years past the last survey, further than the "
        f"{span / 365.2425:.2g} years that the surveys span; the interval holds only if growth goes on evenly."
    ]
