"""What ails taps and line, in sentences: what was found, what it may be, and what the fits made of it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.diagnosis import Break
from gradeline.quantities import format_change, rounded
from gradeline.quantities.printing import thousands
from gradeline.reduction.ailments import TapAilment
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.line import Line
from gradeline.reduction.runs import Flowing

__all__ = [
    "BreakReading",
    "ailment_assumptions",
    "ailment_cautions",
    "break_sentence",
    "read_break",
    "static_offset_words",
    "tap_advice",
    "tap_sentence",
]

Array = NDArray[np.float64]

#: A step beside a kink agrees with a cause within this many standard uncertainties.
_AGREES = 3.0
#: A reading that stands still also lags behind by all of the change: it is told as the first.
_AS_WELL = 0.01
#: Exponent of S against the flow where the runs do not tell it.
_USUAL_EXPONENT = 1.9


def tap_sentence(one: TapAilment) -> str:
    """Say what ails a tap, with sizes.

    Parameters
    ----------
    one : TapAilment
        What was found.

    Returns
    -------
    str
        Without a full stop.
    """
    what, sizes = one.what, []
    if "offset" in one.name and np.isfinite(what.offset):
        sizes.append(f"{_millimetres(what.offset, what.offset_u)} in every run")
    if "edge" in one.name or "chainage" in one.name:
        as_edge = (
            f"({_signed(what.edge)}{rounded(abs(what.edge), what.edge_u)}) velocity heads (edge coefficient)"
        )
        as_place = (
            f"a true place ({rounded(1000 * abs(what.chainage), 1000 * what.chainage_u)}) mm "
            f"{'downstream' if what.chainage > 0 else 'upstream'} of the stated one"
        )
        if "not distinguishable" in one.name:
            sizes.append(f"an error of {as_edge}, or {as_place}")
        else:
            sizes.append(f"an error of {as_edge}" if "edge" in one.name else as_place)
    if "sluggish" in one.name or "air" in one.name:
        size = float(np.nanmax(np.abs(what.error)))
        sizes.append(f"off by up to {thousands(1000 * size, 2)} mm")
        blocked = "air" not in one.name
        stands = one.follows.stuck >= one.follows.slow - _AS_WELL
        if blocked and stands and np.isfinite(one.follows.share):
            share = round(100 * max(one.follows.share, 0.0))
            sizes.append(f"its reading makes {share} % of the head's change from run to run")
        elif blocked and one.follows.slow > 0.5:
            sizes.append(
                f"it lags behind by {100 * one.follows.memory:.0f} % of the change since the run before"
            )
        else:
            sizes.append(f"right in {100 * one.follows.sound:.0f} % of the runs")
    fate = (
        "taken off, with its uncertainty"
        if one.corrected
        else "left out of the fits"
        + ("; --correct offsets takes it off instead" if one.name == "datum offset" else "")
    )
    return f"{one.name}: {'; '.join(sizes)}; {fate}" if sizes else f"{one.name}; {fate}"


def tap_advice(one: TapAilment, *, read_at_rest: bool) -> str:
    """Say what to do about what ails a tap or gauge.

    Parameters
    ----------
    one : TapAilment
        What was found.
    read_at_rest : bool
        Whether a static run read it: then its offset has another cause.

    Returns
    -------
    str
        Without a full stop; empty where there is no more to say.
    """
    blow = "blow the line through (with the pressure off it), and look for kinks"
    said = []
    if "offset" in one.name and not read_at_rest:
        said.append("read it at rest (a static run), and look at the scale's zero")
    if "edge" in one.name:
        said.append("look into the hole for a burr, and rub it flush")
    if "chainage" in one.name:
        said.append("measure its chainage again")
    if one.name == "air in line":
        said.append("bleed the line")
    elif "sluggish" in one.name:
        said.append(f"bleed the line; {blow}" if "air" in one.name else blow)
    if one.name == "error that grows with the flow":
        said.append("look at the gauge's scale and at the holes of its taps")
    return "; ".join(said)


def static_offset_words(offset: float, u: float) -> str:
    """Say what a static run showed of a tap whose offset stands out, m."""
    return f"datum offset {_millimetres(offset, u)}, measured by the static run and taken off"


def _signed(value: float) -> str:
    return "−" if value < 0 else "+"


def _millimetres(value: float, u: float) -> str:
    return f"({_signed(value)}{rounded(1000 * abs(value), 1000 * u)}) mm"


@dataclass(frozen=True)
class BreakReading:
    """What a change of slope would be, read in three ways.

    Parameters
    ----------
    offtake, bore, factor : float
        Share of the flow that leaves (negative: that enters), relative change of the bore, relative change of f, each if it
        is that alone; dimensionless.
    agrees : tuple of bool
        Whether the step of the energy head beside it agrees with each.
    """

    offtake: float
    bore: float
    factor: float
    agrees: tuple[bool, bool, bool]


def read_break(one: Break, line: Line, flowing: Flowing) -> BreakReading:
    """Read a change of slope as an off-take, as another bore and as another wall.

    Parameters
    ----------
    one : Break
        A kink.
    line, flowing
        Bores and runs.

    Returns
    -------
    BreakReading
        S goes as Qⁿ / D^(n + 3), n from the runs. With the stated flow in the velocity head, the energy head seems to rise
        by 1 − (1 − φ)² velocity heads past an off-take of the share φ, and to fall by (D/D′)⁴ − 1 where the bore
        changes; the place in the gap, which is not known, shifts it by the change of slope times the way.
    """
    k = int(np.clip(np.searchsorted(line.bounds, one.at) - 1, 0, len(line.diameter) - 1))
    velocity, slope = flowing.velocity[:, k], flowing.slopes()[:, k]
    sound = (slope > 0) & (flowing.reynolds[:, k] > 4000)
    n = _USUAL_EXPONENT
    if sound.sum() >= 3 and np.ptp(np.log(velocity[sound])) > 0.3:
        n = float(np.clip(np.polyfit(np.log(velocity[sound]), np.log(slope[sound]), 1)[0], 1.5, 2.2))
    ratio = max(1.0 + one.change, 1e-6)
    offtake = 1.0 - ratio ** (1.0 / n)
    bore = ratio ** (-1.0 / (n + 3.0)) - 1.0
    heads = velocity**2 / (2.0 * 9.80665)
    slack = abs(one.change) * float(np.median(slope[sound] / heads[sound])) if sound.any() else 0.0
    slack *= (one.high - one.low) / 2.0
    expected = (-(1.0 - (1.0 - offtake) ** 2), (1.0 + bore) ** -4 - 1.0, 0.0)
    room = slack + _AGREES * one.loss_u + 0.1 * abs(one.change)
    agrees = tuple(abs(one.loss - value) <= room for value in expected)
    return BreakReading(offtake, bore, ratio - 1.0, (agrees[0], agrees[1], agrees[2]))


def break_sentence(one: Break, line: Line, flowing: Flowing) -> str:
    """Say what a step or a kink of the grade line is, where, and what stands for it.

    Parameters
    ----------
    one : Break
        What was found.
    line, flowing
        For what it may be.

    Returns
    -------
    str
        Without a full stop.
    """
    if one.kind == "curve":
        way = "steeper" if one.change > 0 else "flatter"
        return (
            f"from {one.low:.4g} m to {one.high:.4g} m the slope changes gradually, {format_change(abs(one.change))} {way} at the "
            "end than at the start, alike in all runs: a flow that drifts while taps are read in order, a bore or wall that "
            f"changes along the length, flow lost on the way. S is that of the middle"
        )
    where = f"between {one.low:.4g} m and {one.high:.4g} m (95 %)"
    listed = [fitting.name for fitting in line.fittings if one.low <= fitting.at <= one.high]
    beside = f" The listed {' and '.join(map(repr, listed))} lies there: look at its K." if listed else ""
    if one.kind == "step":
        more = _more_than_given(one, line)
        if more is not None:
            return f"{where} {more}. The rest is fitted there in every run"
        size = rounded(abs(one.loss), one.loss_u)
        what = (
            f"a loss that nobody listed, K = {size}, such as a partly closed valve, a blockage or a step at a joint"
            if one.loss > 0
            else f"a rise of the energy head by {size} velocity heads, which no loss can be: look at bores and elevations"
        )
        return f"{where} there is {what}. A loss of its own is fitted there in every run.{beside}"
    reading = read_break(one, line, flowing)
    flow = "leaving (off-take or leak)" if reading.offtake > 0 else "entering"
    causes = [
        f"{100 * abs(reading.offtake):.3g} % of the flow {flow}",
        f"a bore {format_change(abs(reading.bore))} {'larger' if reading.bore > 0 else 'smaller'}",
        f"a wall with f {format_change(abs(reading.factor))} {'higher' if reading.factor > 0 else 'lower'}",
    ]
    fits = [cause for cause, agrees in zip(causes, reading.agrees, strict=True) if agrees]
    against = [cause for cause, agrees in zip(causes, reading.agrees, strict=True) if not agrees]
    tells = (
        f"the step of the energy head there agrees with {' or '.join(fits)}"
        if fits
        else "no single cause fits the step"
    )
    if fits and against:
        tells += f", not with {' or '.join(against)}"
    way = "steeper" if one.change > 0 else "flatter"
    return (
        f"{where} the slope changes: {format_change(abs(one.change))} {way} downstream; {tells}. Each run has a "
        f"slope of its own downstream; S, f and ε are those upstream of it.{beside}"
    )


def _more_than_given(one: Break, line: Line) -> str | None:
    """What the one fitting of given K that lies there loses in all, where both refer to one velocity head."""
    here = [m for m, fitting in enumerate(line.fittings) if one.low <= fitting.at <= one.high]
    if len(here) != 1 or not one.loss > 0:
        return None
    (m,) = here
    fitting, reach = (
        line.fittings[m],
        int(np.clip(np.searchsorted(line.bounds, one.at) - 1, 0, len(line.diameter) - 1)),
    )
    given = fitting.loss_coefficient
    if given is None or fitting.change_of_bore or int(line.reference[m]) != reach:
        return None
    return (
        f"{fitting.name!r} (K = {given.value:g} given) loses more than that: K = {rounded(given.value + one.loss, one.loss_u)} "
        f"in all, {rounded(one.loss, one.loss_u)} more; look at its state and at the K given"
    )


def ailment_assumptions(flowing: Flowing, corrections: Corrections) -> list[str]:
    """Say how taps and line were looked at, and what cannot be seen."""
    found = flowing.ailments.diagnosis
    if found is None:
        return []
    if not found.done:
        return [f"Taps and line were not judged over the runs together: {found.reason}."]
    hidden = "An offset that all taps have in common cannot be seen" + (
        "."
        if corrections.applied
        else ", and one proportional to chainage shows only as an intercept of S against the law."
    )
    return [
        "Every tap (constant error, one that grows with the velocity head or with the slope, a reading that does not follow) and "
        "every stretch between taps (a loss or a change of slope that nobody listed) was held against all runs together; "
        f"one is named where chance would do so in about one of a hundred sound surveys. {hidden}"
    ]


def ailment_cautions(line: Line, flowing: Flowing) -> list[str]:
    """Say what was found and what the fits made of it."""
    diagnosis = flowing.ailments.diagnosis
    gave_up = diagnosis is not None and diagnosis.done and diagnosis.reason
    said = [f"Taps and line: {diagnosis.reason}." if gave_up and diagnosis else ""]
    said += [
        f"Tap {one.label}: {tap_sentence(one)}." if one.is_tap else f"Gauge {one.label}: {tap_sentence(one)}."
        for one in flowing.ailments.taps
    ]
    for one in dict.fromkeys(broken for broken, _ in flowing.ailments.names):
        text = break_sentence(one, line, flowing)
        said.append(text[0].upper() + text[1:] + ("" if text.endswith(".") else "."))
    return list(filter(None, said))
