"""What a prediction takes for granted, and what its reader must know."""

from __future__ import annotations

import math
from collections.abc import Sequence

from gradeline.hydraulics.friction import colebrook_white
from gradeline.prediction.carried import Carried
from gradeline.prediction.line import Answer, PipeLine

__all__ = ["assumptions_of", "cautions_of"]

#: A shift of the law by shared errors below this is not worth a word.
_SHIFT = 5e-4


def assumptions_of(
    carried: Carried,
    line: PipeLine,
    answers: Sequence[Answer],
    *,
    temperature: tuple[float, bool],
    new: str | None,
    efficiency: tuple[float, bool],
    static_head: tuple[float, bool],
    hours: float | None,
) -> tuple[str, ...]:
    """List every default and choice; each pair is a value and whether somebody gave it."""
    fluid = carried.fluid.name
    whence = "as given" if temperature[1] else "the mean of the flowing runs"
    said = [f"{fluid[:1].upper()}{fluid[1:]} at {temperature[0] - 273.15:.4g} °C, {whence}."]
    said.append(
        "The flow of a prediction is the true flow: errors of the flow meter and of the readings act in the runs alone."
    )
    percent = f"{100 * carried.level:.4g} %"
    errors = _errors(carried)
    law = carried.friction_law_u
    if math.isfinite(law):
        errors.append(f"the friction law ({100 * law:.3g} % of f, as the survey states it)")
    said.append(f"Intervals are {percent}; they count {', '.join(errors)}.")
    if not math.isfinite(law):
        said.append(
            "The friction law is taken as exact, since the survey states no friction_law under [uncertainty]; 2 % of f is common."
        )
    said += _shifted(carried, answers)
    said += _other_losses(carried, answers)
    for w, one in line.replaced.items():
        u = f" ± {1000 * one.u:.3g}" if one.u else ""
        said.append(
            f"What if: ε of wall {carried.walls[w].name!r} is {1000 * one.value:.4g}{u} mm, in place of what the runs show."
        )
    if line.end_head is None:
        said.append(
            f"The grade lines start from the pipe's axis at the downstream end ({line.elevation[-1]:.4g} m), as if it ended "
            "there in the open; --end-head sets another level."
        )
    else:
        said.append(f"The hydraulic grade line ends at {line.end_head:.4g} m, as given.")
    if static_head[1]:
        said.append(f"The pump lifts {static_head[0]:.4g} m beside the losses.")
    else:
        said.append("The pump overcomes the losses of this line alone; --static-head adds what it lifts.")
    said.append(
        f"Powers and energies are those at the motor's terminals, at an efficiency of {100 * efficiency[0]:.4g} %."
        if efficiency[1]
        else "Powers and energies are those of the water itself: no efficiency was given."
        if carried.fluid.is_water
        else "Powers and energies are those of the fluid itself: no efficiency was given."
    )
    if new is not None:
        said.append(
            f"New pipe: {new}; the same bore, fittings and flow. The law's own errors there and here are taken as independent."
        )
    if hours is not None:
        said.append(f"A year's energy is that of {hours:g} hours at each flow.")
    for name, _ in carried.offtakes:
        if not line.conditions.taken.any():
            said.append(f"Off-take {name!r} is shut; --offtake {name}=Q takes a flow there.")
    if len(carried.walls) > 1:
        said.append(
            "The walls are taken together, with the scatter that their slopes share in a run; each alone, as in the table of "
            "walls, may differ from that by a part of its uncertainty."
        )
    return tuple(said)


def _shifted(carried: Carried, answers: Sequence[Answer]) -> list[str]:
    """Say where S is not that of the f and the bore beside it, since the runs together show the bore to be another."""
    diameter = dict(zip(carried.reaches, carried.diameter.tolist(), strict=True))
    away = [
        abs(
            row["slope"]
            / (row["friction_factor"] * row["velocity"] ** 2 / (2 * carried.gravity * diameter[row["reach"]]))
            - 1
        )
        for answer in answers
        for row in answer.reaches
        if math.isfinite(row["slope"]) and row["slope"] > 0
    ]
    most = max(away, default=0.0)
    if not most > _SHIFT:
        return []
    return [
        "Bores and loss coefficients are as all runs together show them best, within their stated uncertainties; Re, V and f "
        f"are told of the stated bores, so that f V²/2gD differs from S by up to {100 * most:.2g} %."
    ]


def _other_losses(carried: Carried, answers: Sequence[Answer]) -> list[str]:
    """Say which K differs, as it is printed, from that of the reduction, and why."""
    alone = dict(zip(carried.fittings, carried.loss_coefficient.tolist(), strict=True))
    here = {row["fitting"]: row["loss_coefficient"] for answer in answers for row in answer.fittings}
    differ = [
        f"{name!r} {value:.3g} for {alone[name]:.3g}"
        for name, value in here.items()
        if math.isfinite(value) and f"{value:.3g}" != f"{alone[name]:.3g}"
    ]
    if not differ:
        return []
    return [
        f"K is that which suits roughness and bore best, all fitted together, not K alone as in the reduction: {', '.join(differ)}."
    ]


def _errors(carried: Carried) -> list[str]:
    """What the intervals count, by name."""
    found = []
    if any(len(wall.grid) for wall in carried.walls):
        found.append("the roughness as the runs leave it")
    bores = sum(bool(row.any()) for row in carried.by_diameter)
    if bores:
        found.append("the bore as far as the runs leave it open")
    if carried.by_viscosity.any():
        found.append("the fluid")
    if carried.by_gravity.any():
        found.append("gravity")
    if carried.by_loss.any():
        found.append("the loss coefficients")
    return found or ["nothing that the survey states"]


def cautions_of(carried: Carried, line: PipeLine, answers: Sequence[Answer]) -> tuple[str, ...]:
    """Say where the tests do not reach, what is missing, and where the line runs dry of pressure."""
    said = [note[:1].upper() + note[1:] + "." for note in carried.notes]
    rows = [row for answer in answers for row in answer.reaches]
    for reach in carried.reaches:
        mine = [row for row in rows if row["reach"] == reach and math.isfinite(row["beyond"])]
        above = max(mine, key=lambda row: row["beyond"], default=None)
        if above is not None and above["beyond"] > 1:
            said.append(
                f"Reach {reach!r}: Re {_re(above['reynolds'])} at {_flow(above['flow'])} is {above['beyond']:.3g} times the highest "
                f"tested ({_re(above['tested_reynolds_high'])}): what the wall does there follows from the friction law alone."
            )
        below = min(mine, key=lambda row: row["beyond"], default=None)
        if below is not None and below["beyond"] < 1:
            said.append(
                f"Reach {reach!r}: Re {_re(below['reynolds'])} at {_flow(below['flow'])} is {below['beyond']:.3g} times the lowest "
                f"tested ({_re(below['tested_reynolds_low'])}): what the wall does there follows from the friction law alone."
            )
    critical = [
        answer.flow for answer in answers if any(row["regime"] == "critical" for row in answer.reaches)
    ]
    if critical:
        span = (
            _flow(critical[0]) if len(critical) == 1 else f"{_flow(min(critical))} to {_flow(max(critical))}"
        )
        said.append(
            f"At {span} Re lies between 2000 and 4000, where no law of friction holds: no head loss is told there"
            f"{_between(carried, line, answers)}."
        )
    for name, value, reason in zip(carried.fittings, carried.loss_coefficient, carried.reasons, strict=True):
        if math.isnan(value):
            said.append(
                f"Fitting {name!r} is left out of all losses, since its K is not known ({reason or 'no run gives one'})."
            )
    low = [
        (answer.flow, row)
        for answer in answers
        for row in answer.grade_lines
        if math.isfinite(row["piezometric_head"]) and row["piezometric_head"] < row["elevation"] - 1e-9
    ]
    if low and any(carried.tap_elevation):
        end = ", if the line ends at the level of its axis" if line.end_head is None else ""
        flow, row = min(low, key=lambda one: one[1]["piezometric_head"] - one[1]["elevation"])
        said.append(
            f"At {_flow(flow)} the hydraulic grade line lies {row['elevation'] - row['piezometric_head']:.3g} m below the pipe's "
            f"axis at {row['chainage']:.4g} m{end}: the pressure there is below the atmosphere's."
        )
    return tuple(said)


def _between(carried: Carried, line: PipeLine, answers: Sequence[Answer]) -> str:
    """What is told in place of a head loss: the interval between the laws, and the f that they give."""
    at = [
        (k, row["reynolds"])
        for answer in answers
        for k, row in enumerate(answer.reaches)
        if row["regime"] == "critical" and math.isfinite(row["head_loss_low"])
    ]
    if not at:
        return ""
    slow = [carried.laminar_constant[k] / reynolds for k, reynolds in at]
    swift = [
        float(colebrook_white(reynolds, line.roughness[0, k] / carried.diameter[k])) for k, reynolds in at
    ]
    return f", only the interval from laminar to turbulent flow (f from {min(slow):.3g} to {max(swift):.3g})"


def _re(value: float) -> str:
    return f"{float(f'{value:.3g}'):,.0f}".replace(",", "\u202f")


def _flow(value: float) -> str:
    return f"{1000 * value:.4g} L/s"
