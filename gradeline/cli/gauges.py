"""What `gradeline gauges` tells of the gauges of a survey, as text."""

from __future__ import annotations

import math

from gradeline.reduction.gauge_ranges import GaugeRange, gauge_ranges
from gradeline.survey import Survey

__all__ = ["gauges_told"]

#: One step of the scale beyond this share of a difference leaves little of it.
_COARSE = 0.05


def gauges_told(survey: Survey) -> str:
    """Return the range and the resolution of each gauge as head, and the gauge fluid that suits."""
    parts = [survey.title]
    parts += ["\n".join([f"{one.gauge} ({one.kind})", *_lines(one)]) for one in gauge_ranges(survey)]
    return "\n\n".join(parts)


def _lines(one: GaugeRange) -> list[str]:
    shows = (
        f"{_head(one.low)} to {_head(one.high)}"
        if math.isfinite(one.high)
        else 'not known; state range = "0 to 1.2 m" or full_scale'
    )
    step = _head(one.resolution) if math.isfinite(one.resolution) else "not known; state resolution"
    lines = [f"  shows        {shows}", f"  resolution   {step}"]
    if not one.choices:
        return [*lines, "  differences  none in the flowing runs"]
    lines.append(
        f"  differences  {_head(one.smallest)} to {_head(one.largest)} over its taps in the flowing runs"
    )
    best = one.choices[0]
    if best.fits:
        lines.append(f"  suits        {best.fluid}, on a board of {one.board:g} m")
    else:
        lines.append(
            f"  suits        no manometer with a board of {one.board:g} m: {best.fluid} would need {_head(best.largest)}"
        )
    finest = max(one.choices, key=lambda each: each.smallest)
    if finest is not best and best.step > _COARSE:
        lines.append(f"               {finest.fluid} for the smallest differences alone")
    for each in one.choices:
        verdict = "" if each.fits else ", beyond the board"
        lines.append(
            f"    {each.fluid}: deflections {_head(each.smallest)} to {_head(each.largest)}{verdict}"
            + (f"; one step is {_percent(each.step)} of the smallest" if math.isfinite(each.step) else "")
        )
    return lines


def _percent(share: float) -> str:
    return f"{100 * share:.0f} %" if share > 0.1 else f"{100 * share:.2g} %"


def _head(value: float) -> str:
    """A head or a deflection in the unit that suits it."""
    return f"{1000 * value:.3g} mm" if abs(value) < 1 else f"{value:.4g} m"
