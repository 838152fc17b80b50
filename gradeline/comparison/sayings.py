"""What a reader of a comparison must know."""

from __future__ import annotations

import datetime
from collections.abc import Mapping, Sequence
from typing import Any

from gradeline.comparison.matching import Taken, Together
from gradeline.reduction.fitted import FittedWall

__all__ = ["assumptions_of", "cautions_of"]

#: Bores that differ by less are one bore, relative.
_SAME_BORE = 1e-3
#: A common Re this far outside what a survey tested is told, relative.
_OUTSIDE = 0.02
#: Past the surveys by more than the time that they span, the line is little but its assumption.
_FAR = 1.0


def assumptions_of(together: Together, level: float, *, tests: int, dated: bool) -> tuple[str, ...]:
    """Return every choice that was made."""
    said = [
        "The pipe is the same in all surveys: the errors of its bore, of the tap positions and elevations, of given loss "
        "coefficients and of gravity are one error where they are stated alike, and leave the differences."
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
    chance = f"{100 * (1 - level):.3g} %"
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
        said += _unlike(str(wall["wall"]), mine)
        said += _outside(wall, mine)
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
    return tuple(said)


def _unlike(wall: str, rows: Sequence[Mapping[str, Any]]) -> list[str]:
    said = []
    bores = [row["diameter"] for row in rows]
    if max(bores) / min(bores) - 1.0 > _SAME_BORE:
        listed = _listed([(row["survey"], f"{1000 * row['diameter']:.5g} mm") for row in rows])
        said.append(
            f"Wall {wall}: the stated bores differ ({listed}), so their errors are not one. Changes are told as those of f of "
            "the same roughnesses in the first bore."
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
