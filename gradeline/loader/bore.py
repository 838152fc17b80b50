"""The bore of a reach, in whichever way it was had: stated, from the pipe's make, by filling it, or of no circle."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any

from pydantic import BeforeValidator

from gradeline.errors import QuantityError
from gradeline.loader.keys import choice_reader, measured_reader
from gradeline.quantities import Measured
from gradeline.survey import Section

if TYPE_CHECKING:
    from gradeline.loader.document import ReachTable

__all__ = [
    "Bore",
    "BoreFaultError",
    "Diameter",
    "MeasuredArea",
    "Number",
    "Shape",
    "Thickness",
    "Volume",
    "bore_of",
]

Diameter = Annotated[
    Measured, BeforeValidator(measured_reader("length", "26.64 mm +/- 0.03 mm", 0, strict=True))
]
Thickness = Annotated[Measured, BeforeValidator(measured_reader("length", "6 mm +/- 0.5 mm", 0))]
Volume = Annotated[Measured, BeforeValidator(measured_reader("volume", "3.07 L +/- 0.01 L", 0, strict=True))]
MeasuredArea = Annotated[Measured, BeforeValidator(measured_reader("area", "0.12 m^2", 0, strict=True))]
Number = Annotated[Measured, BeforeValidator(measured_reader("dimensionless", "57", 0, strict=True))]
Shape = Annotated[str, BeforeValidator(choice_reader("rectangle", "annulus"))]

_MISSING = 'the key is missing; add it, such as diameter = "26.64 mm +/- 0.03 mm"'


class BoreFaultError(QuantityError):
    """What is wrong with the keys of a bore: the key and the message."""

    def __init__(self, key: str, message: str) -> None:
        super().__init__(message)
        self.key, self.message = key, message


@dataclass(frozen=True)
class Bore:
    """The bore of a reach.

    Parameters
    ----------
    diameter : Measured
        Its bore, or the hydraulic diameter of its section, m.
    section : Section or None
        What it is where it is no circle.
    said : str or None
        How it was had, where it was not stated, after the reach's name.
    unstated : tuple of str
        What it was had from whose uncertainty nobody stated.
    """

    diameter: Measured
    section: Section | None = None
    said: str | None = None
    unstated: tuple[str, ...] = ()


def bore_of(table: ReachTable) -> Bore:
    """Return the bore that the keys of a reach give.

    Parameters
    ----------
    table : ReachTable
        One ``[[reach]]``.

    Returns
    -------
    Bore
        With the uncertainty that those stated give (JCGM 100, 5.1.2: independent inputs to first order).

    Raises
    ------
    BoreFaultError
        Where no way is given whole, or two, or where the bore is not above 0.
    """
    given = {
        key: tuple(name for name in names if getattr(table, name) is not None)
        for key, (names, _) in _WAYS.items()
    }
    ways = [key for key, names in given.items() if names]
    if not ways:
        raise BoreFaultError("diameter", _MISSING)
    if len(ways) > 1:
        first, second = given[ways[0]][0], given[ways[1]][0]
        raise BoreFaultError(
            second, f"{first} is given as well, which tells the bore in another way; keep one of the two"
        )
    names, make = _WAYS[ways[0]]
    return make(table, {name: getattr(table, name) for name in names if getattr(table, name) is not None})


def _stated(_: ReachTable, given: Mapping[str, Any]) -> Bore:
    return Bore(given["diameter"])


def _made(_: ReachTable, given: Mapping[str, Measured]) -> Bore:
    """Nominal size less wall and lining: with a wall thickness the nominal size is the outside diameter."""
    if "nominal" not in given:
        raise BoreFaultError(
            "nominal",
            'the key is missing; add it, such as nominal = "168.3 mm" (outside diameter of the pipe)',
        )
    if len(given) == 1:
        raise BoreFaultError(
            "nominal",
            "a nominal size alone is no bore; add wall_thickness (then it is the outside diameter) or lining (then it is "
            "the bore before lining), or state the bore as diameter",
        )
    inside = [name for name in ("wall_thickness", "lining") if name in given]
    value = given["nominal"].value - sum(2.0 * given[name].value for name in inside)
    if not value > 0:
        less = " and ".join(f"twice the {_words(name)} of {_mm(given[name])}" for name in inside)
        raise BoreFaultError(
            inside[-1],
            f"the bore is {1000 * value:.6g} mm, which is {_mm(given['nominal'])} less {less}; it must be above 0: mend the "
            "value or the unit",
        )
    weights = {name: 1.0 if name == "nominal" else -2.0 for name in given}
    what = "outside diameter" if "wall_thickness" in given else "bore before lining"
    less = " and ".join(f"twice the {_words(name)}" for name in inside)
    return Bore(
        Measured(value, _combined(given, weights)),
        said=f"is its nominal {what} less {less}",
        unstated=_unstated(given),
    )


def _filled(_: ReachTable, given: Mapping[str, Measured]) -> Bore:
    """The volume V that fills a length L: D = √(4 V/πL)."""
    for name, example in (("fill_volume", "3.07 L +/- 0.01 L"), ("fill_length", "5.5 m +/- 2 mm")):
        if name not in given:
            raise BoreFaultError(name, f'the key is missing; add it, such as {name} = "{example}"')
    value = math.sqrt(4.0 * given["fill_volume"].value / (math.pi * given["fill_length"].value))
    weights = {
        "fill_volume": value / (2.0 * given["fill_volume"].value),
        "fill_length": -value / (2.0 * given["fill_length"].value),
    }
    return Bore(
        Measured(value, _combined(given, weights)),
        said="is that of the circle that the volume fills over its length, √(4V/πL): the mean of its area",
        unstated=_unstated(given),
    )


def _shaped(table: ReachTable, given: Mapping[str, Any]) -> Bore:
    """A rectangle or an annulus by its sides, any other section by area and perimeter."""
    needed = {"rectangle": ("width", "height"), "annulus": ("outer", "inner"), None: ("area", "perimeter")}
    shape = table.shape
    if shape is None and not {"area", "perimeter"} & set(given):
        key = next(iter(given))
        if key == "laminar_constant":
            raise BoreFaultError(key, "the key goes with area and perimeter; add them or take it away")
        wanted = "rectangle" if key in needed["rectangle"] else "annulus"
        raise BoreFaultError("shape", f'the key is missing; add it, such as shape = "{wanted}"')
    sides = needed[shape]
    for name in given:
        if name not in (*sides, "shape") and not (name == "laminar_constant" and shape is None):
            whose = f"shape = {shape!r}" if shape is not None else "area and perimeter"
            raise BoreFaultError(
                name, f"the key does not go with {whose}, which takes {' and '.join(sides)}; take it away"
            )
    for name in sides:
        if name not in given:
            example = "0.12 m^2" if name == "area" else "0.2 m +/- 0.5 mm"
            raise BoreFaultError(name, f'the key is missing; add it, such as {name} = "{example}"')
    first, second = given[sides[0]], given[sides[1]]
    constant = given.get("laminar_constant")
    section = Section(
        shape or "given",  # type: ignore[arg-type]  # one of the known shapes, checked above
        (first, second),
        None if constant is None else constant.value,
    )
    if shape == "annulus" and not first.value > second.value:
        raise BoreFaultError(
            "inner",
            f"the inner diameter of {_mm(second)} is not below the outer one of {_mm(first)}; mend one of them",
        )
    if shape is None and second.value < 2.0 * math.sqrt(math.pi * first.value) * (1.0 - 1e-9):
        least = 2.0 * math.sqrt(math.pi * first.value)
        raise BoreFaultError(
            "perimeter",
            f"a perimeter of {second.value:g} m does not enclose {first.value:g} m²: the shortest, of a circle, is {least:.4g} "
            "m; mend the value or the unit",
        )
    value, weights = _hydraulic(shape, first.value, second.value)
    by_name = dict(zip(sides, weights, strict=True))
    measured = {name: given[name] for name in sides}
    return Bore(Measured(value, _combined(measured, by_name)), section, None, _unstated(measured))


def _hydraulic(shape: str | None, first: float, second: float) -> tuple[float, tuple[float, float]]:
    """4 A/P and its derivatives by the two sides."""
    if shape == "rectangle":
        both = first + second
        return 2.0 * first * second / both, (2.0 * (second / both) ** 2, 2.0 * (first / both) ** 2)
    if shape == "annulus":
        return first - second, (1.0, -1.0)
    return 4.0 * first / second, (4.0 / second, -4.0 * first / second**2)


def _combined(given: Mapping[str, Measured], weights: Mapping[str, float]) -> float | None:
    """The root of the sum of squares of what was stated; None where nothing was."""
    parts = [weights[name] * value.u for name, value in given.items() if value.u is not None]
    return math.hypot(*parts) if parts else None


def _unstated(given: Mapping[str, Measured]) -> tuple[str, ...]:
    bare = tuple(_words(name) for name, value in given.items() if value.u is None)
    # Where none is stated the bore has none, which is told of the bore itself.
    return bare if len(bare) < len(given) else ()


def _words(name: str) -> str:
    return {"nominal": "nominal size", "outer": "outer diameter", "inner": "inner diameter"}.get(
        name, name.replace("_", " ")
    )


def _mm(value: Measured) -> str:
    return f"{1000 * value.value:g} mm"


_WAYS: Mapping[str, tuple[tuple[str, ...], Callable[[ReachTable, Mapping[str, Any]], Bore]]] = {
    "stated": (("diameter",), _stated),
    "made": (("nominal", "wall_thickness", "lining"), _made),
    "filled": (("fill_volume", "fill_length"), _filled),
    "shaped": (
        ("shape", "width", "height", "outer", "inner", "area", "perimeter", "laminar_constant"),
        _shaped,
    ),
}
