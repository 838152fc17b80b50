"""The cross-sections of the reaches: area, f·Re of laminar flow, and how both diameters go with what was measured."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gradeline.hydraulics.sections import CIRCLE, annulus_laminar_constant, rectangle_laminar_constant
from gradeline.survey import Reach

__all__ = [
    "Dimension",
    "area_of",
    "dimensions_of",
    "laminar_constant_of",
    "laminar_name",
    "section_assumptions",
]


@dataclass(frozen=True)
class Dimension:
    """One measured dimension of a section, by what one standard uncertainty of it changes.

    Parameters
    ----------
    name : str
        As the budget calls it.
    diameter, area, constant : float
        Relative change of the hydraulic diameter, of the area and of f·Re of laminar flow.
    """

    name: str
    diameter: float
    area: float
    constant: float = 0.0


def area_of(reach: Reach) -> float:
    """Return the cross-section of a reach, m²."""
    section = reach.section
    if section is None:
        return float(np.pi / 4 * reach.diameter.value**2)
    first, second = (side.value for side in section.sides)
    if section.shape == "rectangle":
        return first * second
    return float(np.pi / 4 * (first**2 - second**2)) if section.shape == "annulus" else first


def laminar_constant_of(reach: Reach) -> float:
    """Return f·Re of laminar flow in a reach, NaN where its shape is not known."""
    section = reach.section
    if section is None:
        return CIRCLE
    if section.laminar_constant is not None:
        return section.laminar_constant
    first, second = (side.value for side in section.sides)
    if section.shape == "rectangle":
        return float(rectangle_laminar_constant(first / second))
    return float(annulus_laminar_constant(second / first)) if section.shape == "annulus" else float("nan")


def laminar_name(constant: float) -> str:
    """Return f Re over its value in laminar flow, in words.

    Examples
    --------
    >>> laminar_name(64.0), laminar_name(56.908)
    ('f Re / 64', 'f Re / 56.91')
    """
    return f"f Re / {constant:.4g}"


def dimensions_of(reach: Reach) -> tuple[Dimension, ...]:
    """Return the dimensions of a reach that have a stated uncertainty.

    Examples
    --------
    Of a circle the area goes as the square of the bore.

    >>> from gradeline.quantities import Measured
    >>> dimensions_of(Reach("main", 0.0, 4.0, Measured(0.1, 0.001), "steel"))
    (Dimension(name='bore', diameter=0.01, area=0.02, constant=0.0),)
    """
    section = reach.section
    if section is None:
        size = reach.diameter.relative_u
        return (Dimension("bore", size, 2.0 * size),) if size else ()
    first, second = (side.value for side in section.sides)
    if section.shape == "rectangle":
        both = first + second
        found = [("width", second / both, 1.0), ("height", first / both, 1.0)]
    elif section.shape == "annulus":
        gap, squares = first - second, first**2 - second**2
        found = [
            ("outer diameter", first / gap, 2 * first**2 / squares),
            ("inner diameter", -second / gap, -2 * second**2 / squares),
        ]
    else:
        found = [("area", 1.0, 1.0), ("perimeter", -1.0, 0.0)]
    by_ratio = _constant_by_ratio(reach)
    return tuple(
        Dimension(
            name, by_diameter * side.relative_u, by_area * side.relative_u, sign * by_ratio * side.relative_u
        )
        for (name, by_diameter, by_area), side, sign in zip(found, section.sides, (1.0, -1.0), strict=True)
        if side.relative_u
    )


def _constant_by_ratio(reach: Reach) -> float:
    """∂ ln(f·Re) / ∂ ln(first side over second side)."""
    section = reach.section
    if section is None or section.laminar_constant is not None or section.shape == "given":
        return 0.0
    ratio, step = section.sides[0].value / section.sides[1].value, 1e-5
    at = [ratio * (1.0 - step), ratio * (1.0 + step)]
    if section.shape == "rectangle":
        values = rectangle_laminar_constant(at)
    else:
        values = annulus_laminar_constant([1.0 / max(one, 1.0 + 1e-12) for one in at])
    return float(np.log(values[1] / values[0]) / (2.0 * step))


def section_assumptions(reaches: tuple[Reach, ...]) -> list[str]:
    """Say what is taken for granted of the reaches that are no circles."""
    said = []
    for reach in reaches:
        if reach.section is None:
            continue
        constant = laminar_constant_of(reach)
        laminar = (
            f"laminar flow is held against f·Re = {constant:.4g}"
            if np.isfinite(constant)
            else "f·Re of laminar flow is not known for its shape, so laminar runs check nothing"
        )
        how = {
            "rectangle": " of a rectangle (the series of Shah and London)",
            "annulus": " of a concentric annulus (closed form)",
            "given": " as given" if np.isfinite(constant) else "",
        }[section_shape(reach)]
        said.append(
            f"Reach {reach.name!r} is no circle: its hydraulic diameter 4A/P of {1000 * reach.diameter.value:.4g} mm stands for "
            f"the bore in Re, f and ε/D, and the velocity is the flow over {area_of(reach):.4g} m². Turbulent flow is taken "
            f"to follow the law of a circle on it (within some 5 to 10 %: common practice), velocity heads to carry the α of "
            f"a circle; {laminar}{how}."
        )
    return said


def section_shape(reach: Reach) -> str:
    """Return the shape of a reach's section."""
    return "circle" if reach.section is None else reach.section.shape
