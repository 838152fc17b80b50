"""Velocities that no liquid has in a pipe: a flow or a bore in another unit than was meant, as a rule."""

from __future__ import annotations

import numpy as np

from gradeline.quantities import parse_unit
from gradeline.quantities.printing import format_number
from gradeline.reduction.media import media_of
from gradeline.reduction.sections import area_of
from gradeline.survey import Survey

__all__ = ["swift_cautions"]

#: m/s: mains run at 1 to 3, penstocks and jets of test rigs at up to about 20 (common practice).
_SWIFT = 20.0
#: kg/m³: what is lighter is a gas, which may be faster.
_LIQUID = 300.0
#: Units a flow may have been read in, for one that is too fast.
_SMALLER = {"L/s": "L/min", "m^3/s": "L/s", "m³/s": "L/s", "m^3/h": "L/min", "m³/h": "L/min", "L/min": "L/h"}


def swift_cautions(survey: Survey) -> list[str]:
    """Say where a liquid would flow faster than 20 m/s, and which unit to look at.

    Parameters
    ----------
    survey : Survey
        With the flow of every run worked out.

    Returns
    -------
    list of str
        One sentence, of the narrowest reach, or none.
    """
    flow = survey.runs["flow"].to_numpy(float)
    narrow = min(survey.reaches, key=area_of)
    velocity = flow / area_of(narrow)
    swift = np.flatnonzero(velocity > _SWIFT)
    if not len(swift) or float(np.min(media_of(survey).density)) < _LIQUID:
        return []
    fastest = int(velocity.argmax())
    unit = survey.units.get("flow")
    other = _SMALLER.get(unit or "")
    guess = ""
    if unit and other:
        ratio = parse_unit(other, "flow").to_si(1.0) / parse_unit(unit, "flow").to_si(1.0)
        # Said only where it would do.
        guess = f" (is it {other}, not {unit}?)" if velocity[fastest] * ratio <= _SWIFT else ""
    flowing = int((flow > 0).sum())
    return [
        f"In {len(swift)} of {flowing} flowing run{'s' * (flowing != 1)} the velocity in reach {narrow.name!r} is above 20 m/s, "
        f"up to {format_number(float(velocity[fastest]), 3)} m/s in run {survey.runs['run'].iloc[fastest]}, which no liquid has in "
        f"a pipe (common practice): look at the unit of the flow{guess} and at that of the bore."
    ]
