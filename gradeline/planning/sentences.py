"""What a plan takes for granted and what its reader must know, in sentences."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from gradeline.planning.assumed import Assumed
from gradeline.planning.expected import Expected
from gradeline.planning.layout import Layout, with_places
from gradeline.planning.tabulate import flows_of
from gradeline.quantities.printing import SI_DISPLAY, format_number
from gradeline.reduction import Reduction
from gradeline.reduction.line import disturbed_taps, line_of
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = ["plan_assumptions", "plan_cautions"]

#: Taps with none in the middle part of the line see neither a curve nor a step.
_MIDDLE = (0.3, 0.7)


def plan_assumptions(
    survey: Survey,
    expected: Expected,
    walls: Mapping[str, Assumed],
    losses: Mapping[str, Assumed],
    reading: Sequence[str],
    layout: Layout,
    *,
    head: float | None,
) -> tuple[str, ...]:
    """List every default and choice of a plan, before those of the loader."""
    said = [
        f"Roughness of {name!r}: {SI_DISPLAY.text('roughness', one.value, digits=3, unit=True)}, {one.source}."
        for name, one in walls.items()
    ]
    said += [
        f"Loss coefficient of {name!r}: K = {format_number(one.value, 3)}, {one.source}."
        for name, one in losses.items()
    ]
    said += reading
    said.append(
        "Expected readings follow the laminar law below Re 2000 and Colebrook–White above 4000, without noise; all stated "
        "uncertainties hold, and what nobody states contributes nothing."
    )
    last = survey.taps[-1].name
    if head is not None:
        said.append(f"In all runs the piezometric head at {last} is {head:g} m.")
    elif expected.tells_level:
        said.append(
            f"Each run is set so that the columns stand in the middle of what can be read: its piezometric head at {last} is told."
        )
    begins = [
        gauge.name
        for gauge in survey.gauges
        if GAUGE_KINDS[gauge.kind].reading == "length"
        and not GAUGE_KINDS[gauge.kind].differential
        and gauge.span is None
        and gauge.kind != "head"
        and not gauge.floats
    ]
    if begins:
        said.append(
            f'The range of {", ".join(begins)} is not stated: its scale begins at 0 and has no upper end (range = "0 to 1.2 m").'
        )
    if survey.levels is not None:
        said.append(
            "The levels of a compound manometer move up and down by turns, all from one rest level at 0."
        )
    if layout.reason is None:
        said.append(
            f"The recommended layout is D-optimal for the line's level, the slope of each reach and each fitted K, readings of equal "
            f"weight, with {format_number(layout.spacing, 3)} m between taps at least (--spacing)."
        )
    said.append(
        "Marks: laminar to Re 2000, turbulent from 4000; hydraulically smooth below ε⁺ = 5, fully rough above 70."
    )
    return tuple(dict.fromkeys((*said, *survey.assumptions, *expected.line.assumptions)))


def plan_cautions(
    survey: Survey, expected: Expected, reduction: Reduction, layout: Layout, *, greatest: float
) -> list[str]:
    """List what stands in the way of the plan."""
    runs = survey.runs["run"].to_numpy(object)
    said = []
    out = runs[~expected.fits].tolist()
    if out:
        most = (
            f"the greatest flow of the range that can is {SI_DISPLAY.text('flow', greatest, digits=3, unit=True)}"
            if np.isfinite(greatest)
            else "no flow of the range can"
        )
        said.append(
            f"In {_runs(out)} not all columns can be read on their scales with the pipe under pressure; {most}. Choose a longer "
            "scale, another gauge fluid, taps closer together or smaller flows."
        )
    flow = flows_of(expected)
    between = (expected.flow.reynolds >= 2000.0) & (expected.flow.reynolds <= 4000.0)
    critical = runs[between.any(axis=1) & (flow > 0)].tolist()
    if critical:
        said.append(
            f"In {_runs(critical)} Re lies between 2000 and 4000, where no law holds: such a run tells nothing of the wall."
        )
    unused = [tap.name for tap, disturbed in zip(survey.taps, layout.disturbed, strict=True) if disturbed]
    if unused:
        said.append(
            f"{', '.join(unused)} {'lies' if len(unused) == 1 else 'lie'} in a disturbed length in some run: readings there do not "
            "enter. The recommended layout keeps clear of it."
        )
    said += _near_fittings(survey, expected, layout)
    start, end = expected.line.bounds[[0, -1]]
    share = (layout.recommended - start) / (end - start)
    middle = (share > _MIDDLE[0]) & (share < _MIDDLE[1])
    if layout.reason is None and len(share) > 3 and not middle.any():
        said.append(
            "Taps at both ends alone tell S best, but show neither a curve nor a step between them: where joints, deposits or an "
            "off-take are possible, keep two taps in the middle (--fixed)."
        )
    for wall in reduction.walls.to_dict("records"):
        if not np.isfinite(wall["roughness_high"]):
            said.append(f"The runs will not tell the roughness of {wall['wall']!r}: {wall['reason']}.")
        elif not wall["roughness_low"] > 0:
            bound = SI_DISPLAY.text("roughness", wall["roughness_upper95"], digits=2, unit=True)
            said.append(
                f"The runs will not tell the roughness of {wall['wall']!r} from zero: an upper bound of about {bound} is what they "
                "can give."
            )
    return said


def _near_fittings(survey: Survey, expected: Expected, layout: Layout) -> list[str]:
    """Say which taps would stand where the reduction will doubt that the flow has recovered."""
    if layout.reason is not None:
        return []
    moved = with_places(survey, layout.recommended)
    reynolds = expected.flow.reynolds[expected.flow.reynolds[:, 0] > 0]
    now = set(disturbed_taps(survey, expected.line, reynolds)[2])
    return [
        f"At its recommended chainage: {text[:1].lower()}{text[1:]} Where that is in doubt, state a longer recovery of the fitting."
        for text in disturbed_taps(moved, line_of(moved), reynolds)[2]
        if text not in now
    ]


def _runs(names: Sequence[object]) -> str:
    shown = ", ".join(map(str, names[:6])) + (f" and {len(names) - 6} more" if len(names) > 6 else "")
    return f"run{'s' * (len(names) != 1)} {shown}"
