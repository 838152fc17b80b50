"""What a prediction is asked: texts with units, or SI numbers, to what the line is worked out for."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import QuantityError, UsageError
from gradeline.prediction.carried import Carried
from gradeline.quantities import Measured, parse_quantity
from gradeline.reduction.surfaces import SOURCES, Surface, known_surfaces, one_spelling

__all__ = ["flows_asked", "new_roughness", "quantity", "roughness_of_walls", "taken_flows"]

Array = NDArray[np.float64]
Asked = str | float

_RANGE = re.compile(r"(.+?)\s+to\s+(.+)", re.DOTALL)
_STEPS = 6
_MOST = 100_000
#: A relative roughness beyond this is no wall that the law is claimed for.
_ROUGHEST = 0.1
#: Surfaces that a refusal names at most.
_NEAREST = 4


def quantity(
    value: Asked, dimension: str, name: str, *, above: float | None = 0.0, uncertain: bool = False
) -> Measured:
    """Return a text with a unit, or a number in SI, as a value; `name` is how messages call it.

    Raises
    ------
    UsageError
        Where it is none, not above `above`, or stated with an uncertainty that a prediction does not carry (`uncertain`
        tells where it does).

    Examples
    --------
    >>> quantity("12 L/s", "flow", "flow").value
    0.012
    >>> quantity("12 m", "flow", "flow")
    Traceback (most recent call last):
        ...
    gradeline.errors.UsageError: flow: the unit 'm' is a length, not a flow; give a unit such as L/s, m^3/s, m^3/h, ...
    """
    try:
        found = parse_quantity(value, dimension) if isinstance(value, str) else Measured(float(value))
    except QuantityError as error:
        raise UsageError(f"{name}: {error}") from None
    if found.u is not None and not uncertain:
        raise UsageError(f"{name}: give the value alone, without an uncertainty; found {value!r}")
    if not math.isfinite(found.value) or (above is not None and found.value <= above):
        raise UsageError(f"{name}: has to be above {above or 0:g}; found {value!r}")
    return found


def flows_asked(asked: Asked | Sequence[float] | Array | None, steps: int | None) -> Array:
    """Return the flows that are asked for, m³/s.

    Examples
    --------
    >>> flows_asked("2 to 12 L/s", 6).tolist()
    [0.002, 0.004, 0.006, 0.008, 0.01, 0.012]
    """
    if asked is None:
        return np.zeros(0)
    if isinstance(asked, str):
        text = asked.strip()
        ends = _RANGE.fullmatch(text)
        if ends is None:
            if steps is not None:
                raise UsageError(
                    f"steps: they divide a range of flows, such as '2 to 12 L/s'; found the one flow {text!r}"
                )
            return np.array([quantity(text, "flow", "flow").value])
        first, last = ends.groups()
        if re.fullmatch(r"[0-9.eE+-]+", first):
            unit = re.sub(r"^[0-9.eE+-]+\s*", "", last)
            first = f"{first} {unit}"
        low, high = (quantity(part, "flow", "flow").value for part in (first, last))
        count = _STEPS if steps is None else steps
        if count < 2 or count > _MOST:
            raise UsageError(f"steps: a range takes from 2 to {_MOST} flows; found {count}")
        if not low < high:
            raise UsageError(f"flow: a range rises from its first value to its last; found {text!r}")
        # As the unit's own decimals have it: 0.012 and not 0.012000000000000002.
        return np.array([float(f"{one:.12g}") for one in np.linspace(low, high, count)])
    if steps is not None:
        raise UsageError("steps: they divide a range of flows, such as '2 to 12 L/s'; numbers were given")
    flows = np.atleast_1d(np.asarray(asked, dtype=float))
    if flows.ndim != 1 or not flows.size or not (np.isfinite(flows) & (flows > 0)).all():
        raise UsageError("flow: every flow has to be a number above 0, in m³/s")
    return flows


def roughness_of_walls(
    carried: Carried, everywhere: Asked | None, walls: Mapping[str, Asked]
) -> dict[int, Measured]:
    """Return the roughness that stands in place of a wall's own, by the wall's number, m.

    Raises
    ------
    UsageError
        For an unknown wall, or a roughness that is none.
    """
    names = [wall.name for wall in carried.walls]
    found: dict[int, Measured] = {}
    if everywhere is not None:
        one = quantity(everywhere, "length", "roughness", above=None, uncertain=True)
        found = dict.fromkeys(range(len(names)), one)
    for asked, value in walls.items():
        alike = [one for one in names if one_spelling(one) == one_spelling(asked)]
        name = alike[0] if len(alike) == 1 else asked
        if name not in names:
            raise UsageError(f"wall: there is no wall {name!r}; {_choices(name, names, 'walls are')}")
        found[names.index(name)] = quantity(value, "length", f"wall {name}", above=None, uncertain=True)
    for wall, one in found.items():
        bore = float(carried.diameter[carried.wall_of == wall].min())
        if not 0 <= one.value <= _ROUGHEST * bore:
            raise UsageError(
                f"roughness: lies from 0 to a tenth of the bore ({100 * bore:.3g} mm), where the friction law ends; found "
                f"{1000 * one.value:.4g} mm"
            )
    return found


def _choices(name: str, names: Iterable[str], words: str) -> str:
    near = difflib.get_close_matches(name, list(names), n=1, cutoff=0.6)
    return f"did you mean {near[0]!r}?" if near else f"{words} {', '.join(map(repr, names))}"


def new_roughness(carried: Carried, asked: Asked | None) -> tuple[Array, str] | None:
    """Return the roughness of a new pipe for each wall (W,), m, and where it comes from; None where nothing is asked.

    Raises
    ------
    UsageError
        For a surface that is not listed, or by a name that several have.
    """
    if asked is None:
        return None
    if not isinstance(asked, str) or re.match(r"\s*[0-9.]", asked):
        value = quantity(asked, "length", "new roughness", above=None).value
        return np.full(len(carried.walls), value), f"ε = {1000 * value:.4g} mm, as given"
    wanted = one_spelling(asked)
    if wanted == "published":
        missing = [wall.name for wall in carried.walls if not math.isfinite(wall.published)]
        if missing:
            raise UsageError(
                f"new roughness: the survey states no published roughness of wall {missing[0]!r}; give one, such as "
                "'0.05 mm', or the name of a surface"
            )
        return np.array([wall.published for wall in carried.walls]), "as the survey states it of new walls"
    surfaces = known_surfaces()
    exact = [one for one in surfaces if one.name.casefold() == wanted]
    found = exact or [one for one in surfaces if wanted in one.name.casefold()]
    if len(found) != 1:
        rule = "several surfaces have" if found else "no listed surface has"
        near = found or _nearest(wanted, surfaces)
        raise UsageError(
            f"new roughness: {rule} {asked!r} in its name; give a roughness such as '0.05 mm', or one of the surfaces: "
            f'{"; ".join(repr(one.name) for one in near[:_NEAREST])} (the whole list: README.md, "Published surfaces")'
        )
    one = found[0]
    spread = (
        "" if one.low == one.high else f", the middle of {1000 * one.low:.3g} to {1000 * one.high:.3g} mm"
    )
    return (
        np.full(len(carried.walls), one.middle),
        f"{one.name}: ε = {1000 * one.middle:.3g} mm{spread} ({SOURCES[one.source]})",
    )


def _nearest(wanted: str, surfaces: Sequence[Surface]) -> list[Surface]:
    """Surfaces that share words with a name, those most like it first; the most like it where none does."""
    words = set(re.findall(r"[a-z]{3,}", wanted))

    def likeness(one: Surface) -> tuple[int, float]:
        shared = len(words & set(re.findall(r"[a-z]{3,}", one.name)))
        return shared, difflib.SequenceMatcher(None, wanted, one.name).ratio()

    ranked = sorted(surfaces, key=likeness, reverse=True)
    return [one for one in ranked if likeness(one)[0]] or ranked


def taken_flows(carried: Carried, asked: Mapping[str, Asked]) -> Array:
    """Return the flow taken away upstream of each reach (K,), m³/s.

    Raises
    ------
    UsageError
        For an unknown off-take.
    """
    taken = np.zeros(len(carried.reaches))
    places = dict(carried.offtakes)
    for name, value in asked.items():
        if name not in places:
            words = _choices(name, places, "off-takes are") if places else "the survey has none; leave it out"
            raise UsageError(f"off-take: there is no off-take {name!r}; {words}")
        one = quantity(value, "flow", f"off-take {name}", above=None).value
        if one < 0:
            raise UsageError(f"off-take {name}: takes a flow of 0 or above; found {value!r}")
        taken += np.where(carried.start >= places[name] - 1e-6, one, 0.0)
    return taken
