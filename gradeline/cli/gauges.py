"""What `gradeline gauges` tells of the gauges of a survey, as text."""

from __future__ import annotations

import math

from gradeline.cli.shown_units import plain_number
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.gauge_ranges import GaugeRange, gauge_ranges
from gradeline.report.converted import converted_text
from gradeline.survey import Survey

__all__ = ["gauges_told"]

#: One step of the scale beyond this share of a difference leaves little of it.
_COARSE = 0.05


def gauges_told(survey: Survey, display: Display = SI_DISPLAY) -> str:
    """Return the range and the resolution of each gauge as head, and the gauge fluid that suits, in a reader's units."""
    parts = [survey.title]
    parts += ["\n".join([f"{one.gauge} ({one.kind})", *_lines(one, display)]) for one in gauge_ranges(survey)]
    return "\n\n".join(parts)


def _lines(one: GaugeRange, display: Display) -> list[str]:
    board = f"{plain_number(display.value('head', one.board), 4)} {display.unit('head')}"
    example = "1.2 m" if display is SI_DISPLAY else "4 ft"
    fluid = {each.fluid: _fluid(display, each.fluid) for each in one.choices}
    shows = (
        f"{_head(display, one.low)} to {_head(display, one.high)}"
        if math.isfinite(one.high)
        else f'not known; state range = "0 to {example}" or full_scale'
    )
    step = _head(display, one.resolution) if math.isfinite(one.resolution) else "not known; state resolution"
    lines = [f"  shows        {shows}", f"  resolution   {step}"]
    if not one.choices:
        return [*lines, "  differences  none in the flowing runs"]
    lines.append(
        f"  differences  {_head(display, one.smallest)} to {_head(display, one.largest)} over its taps in the flowing runs"
    )
    best = one.choices[0]
    if best.fits:
        lines.append(f"  suits        {fluid[best.fluid]}, on a board of {board}")
    else:
        lines.append(
            f"  suits        no manometer with a board of {board}: {fluid[best.fluid]} would need {_head(display, best.largest)}"
        )
    finest = max(one.choices, key=lambda each: each.smallest)
    if finest is not best and best.step > _COARSE:
        lines.append(f"               {fluid[finest.fluid]} for the smallest differences alone")
    for each in one.choices:
        verdict = "" if each.fits else ", beyond the board"
        lines.append(
            f"    {fluid[each.fluid]}: deflections {_head(display, each.smallest)} to {_head(display, each.largest)}{verdict}"
            + (f"; one step is {_percent(each.step)} of the smallest" if math.isfinite(each.step) else "")
        )
    return lines


def _percent(share: float) -> str:
    return f"{100 * share:.0f} %" if share > 0.1 else f"{100 * share:.2g} %"


def _fluid(display: Display, name: str) -> str:
    return name if display is SI_DISPLAY else converted_text(name, display)


def _head(display: Display, value: float) -> str:
    """A head or a deflection in the unit that suits it."""
    large = display.value("head", value)
    if abs(large) < 1:
        return f"{plain_number(display.value('small head', value), 3)} {display.unit('small head')}"
    return f"{plain_number(large, 4)} {display.unit('head')}"
