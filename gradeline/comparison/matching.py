"""Which walls of several surveys are one wall, and which of their errors are one error."""

from __future__ import annotations

import math
from collections.abc import Hashable, Sequence
from dataclasses import dataclass

from gradeline.fitting.joint import Part
from gradeline.reduction.fitted import FittedWall, SharedInput
from gradeline.reduction.tables import Reduction

__all__ = ["Taken", "Together", "keys_of", "matched", "part_of", "shared_rows"]

#: Stated values of one thing that differ by less than this share are the same statement.
_SAME = 1e-9


@dataclass(frozen=True)
class Taken:
    """A survey among those compared.

    Parameters
    ----------
    label : str
        What it is called.
    reduction : Reduction
        What was reduced.
    """

    label: str
    reduction: Reduction


@dataclass(frozen=True)
class Together:
    """What is one and the same in all surveys beside the pipe.

    Parameters
    ----------
    meter, gauges : bool
        The flow meter; the gauges.
    """

    meter: bool = False
    gauges: bool = False

    def common(self, one: SharedInput) -> bool:
        """Return whether an input's error is the same in all surveys that state it alike."""
        return {"pipe": True, "meter": self.meter, "gauges": self.gauges}.get(one.belongs, False)


def matched(taken: Sequence[Taken]) -> dict[str, list[tuple[Taken, FittedWall]]]:
    """Return the walls by name, each with the surveys that have it; those of a single survey too."""
    found: dict[str, list[tuple[Taken, FittedWall]]] = {}
    for one in taken:
        for wall in one.reduction.fitted_walls:
            found.setdefault(wall.name, []).append((one, wall))
    return found


def keys_of(label: str, wall: FittedWall, together: Together) -> tuple[Hashable, ...]:
    """Return a key for each shared input: the same in two surveys where the error is one."""
    count: dict[tuple[str, str], int] = {}
    keys: list[Hashable] = []
    for place, one in enumerate(wall.inputs):
        number = count[one.name, one.subject] = count.get((one.name, one.subject), 0) + 1
        if together.common(one):
            value = None if math.isnan(one.value) else _rounded(one.value)
            keys.append((one.name, one.subject, number, value))
        else:
            keys.append((label, place))
    return tuple(keys)


def _rounded(value: float) -> float:
    return 0.0 if value == 0 else round(value, 9 - math.floor(math.log10(abs(value))))


def part_of(label: str, wall: FittedWall, together: Together) -> Part:
    """Return what the joint fit needs of a wall in one survey."""
    return Part(wall.data, wall.fit, keys_of(label, wall, together), bool(wall.fit.low > 0))


def shared_rows(
    name: str, found: Sequence[tuple[Taken, FittedWall]], together: Together
) -> list[dict[str, object]]:
    """Return, input by input, whether its error was taken as one in all surveys, and why."""
    keys = [set(keys_of(one.label, wall, together)) for one, wall in found]
    everywhere = set.intersection(*keys)
    rows: dict[tuple[str, bool], dict[str, object]] = {}
    told: set[tuple[str, str]] = set()
    for one, wall in found:
        for key, entry in zip(keys_of(one.label, wall, together), wall.inputs, strict=True):
            if (entry.name, entry.subject) in told:
                continue
            told.add((entry.name, entry.subject))
            common = key in everywhere
            reason = _why(entry, found, together, common=common)
            row = rows.setdefault(
                (entry.name, common),
                {"wall": name, "input": entry.name, "inputs": 0, "common": common, "reason": reason},
            )
            row["inputs"] = int(str(row["inputs"])) + 1
    return list(rows.values())


def _why(
    entry: SharedInput, found: Sequence[tuple[Taken, FittedWall]], together: Together, *, common: bool
) -> str:
    if common:
        return {
            "pipe": "the pipe is the same, and all are compared with one value of it",
            "meter": "the flow meter is said to be the same",
            "gauges": "the gauges are said to be the same",
        }[entry.belongs]
    if entry.belongs == "meter" and not together.meter:
        return "whether the flow meter is the same was not said: taken as another (--same-meter)"
    if entry.belongs == "gauges" and not together.gauges:
        return "whether the gauges are the same was not said: taken as others (--same-gauges)"
    if entry.belongs == "other":
        return "made anew in each survey"
    values = {
        _rounded(one.value)
        for _, wall in found
        for one in wall.inputs
        if (one.name, one.subject) == (entry.name, entry.subject) and not math.isnan(one.value)
    }
    if len(values) > 1:
        return "stated otherwise in the surveys: taken as measured anew"
    return "not stated with an uncertainty, or not under this name, in every survey"
