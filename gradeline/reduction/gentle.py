"""Tests that were too gentle: runs whose head loss hardly exceeds its own uncertainty, and the flow that would do."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.friction import colebrook_white_sensitivities
from gradeline.quantities import parse_unit
from gradeline.reduction.faint_flows import faint_flows
from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["ENOUGH", "flow_needed", "gentle_cautions"]

Array = NDArray[np.float64]

#: A head loss counts for a result from so many of its standard uncertainties on (common practice): f is then known to 20 %.
ENOUGH = 5.0
#: A head loss of fewer standard uncertainties tells nothing of its own size.
_FAINT = 2.0
#: Heads that rise by more than this many are a flag of their own.
_RISING = 3.0
#: Runs named one by one.
_FEW = 6


def flow_needed(flow: float, slope: float, slope_u: float, exponent: float) -> float:
    """Return the flow at which a head loss would be `ENOUGH` times its uncertainty.

    Parameters
    ----------
    flow : float
        Of the run, m³/s, above 0.
    slope, slope_u : float
        Its friction slope S and the standard uncertainty, dimensionless, above 0.
    exponent : float
        n of S ∝ Qⁿ, dimensionless, 1 to 2.

    Returns
    -------
    float
        m³/s, for an uncertainty that stays what it is: from 5 u = S (Q'/Q)ⁿ, Q' = Q (5 u/S)^(1/n).

    Examples
    --------
    Water in a rough pipe, 2 L/s, S = 0.004 ± 0.002: 5 u/S = 2.5, and √2.5 = 1.58 times the flow.

    >>> print(f"{flow_needed(2e-3, 0.004, 0.002, 2.0):.6f}")
    0.003162
    """
    return float(flow * (ENOUGH * slope_u / slope) ** (1.0 / exponent))


def gentle_cautions(
    survey: Survey, line: Line, flowing: Flowing, friction: Friction, walls: tuple[Wall, ...], gravity: float
) -> tuple[str, ...]:
    """Name the runs of each reach whose head loss is below five times its uncertainty, and the flow that would do.

    Parameters
    ----------
    survey, line, flowing, friction, walls
        What the fits say.
    gravity : float
        m/s².

    Returns
    -------
    tuple of str
        A sentence or two for each reach with such runs.

    Notes
    -----
    The flow is worked out from the fastest of them, with the exponent n = 2 + ∂ln f/∂ln Re of its wall's law. Where its
    head loss is not even twice its uncertainty, that of a smooth pipe stands for it, which no wall falls short of; flow
    that is not turbulent counts as laminar, n = 1. Both make the flow rather too large than too small; a faster run whose
    head loss is large enough sets an upper end.
    """
    found = []
    for k, reach in enumerate(survey.reaches):
        slope, u = friction.slope[:, k], friction.slope_u[:, k]
        with np.errstate(invalid="ignore"):
            gentle = (slope < ENOUGH * u) & (slope > -_RISING * u) & ~faint_flows(survey, flowing)
        if not gentle.any():
            continue
        rows = np.flatnonzero(gentle)
        where = f" in reach {reach.name!r}" if len(survey.reaches) > 1 else ""
        found.append(
            f"{_which(survey, flowing, rows, len(slope), where)} {_times(slope[rows] / u[rows])}: too gentle "
            f"a test for the friction of the pipe, which wants at least {ENOUGH:.0f} times. "
            + _remedy(
                survey, line, flowing, friction, walls, gravity, int(rows[flowing.flow[rows].argmax()]), k
            )
        )
    return tuple(found)


def _which(survey: Survey, flowing: Flowing, rows: NDArray[np.intp], runs: int, where: str) -> str:
    names = [str(survey.runs["run"].iloc[flowing.rows[row]]) for row in rows]
    if len(names) == 1:
        named = f"run {names[0]}"
    elif len(names) == runs:
        named = f"all {runs} flowing runs"
    elif len(names) <= _FEW:
        named = f"runs {', '.join(names[:-1])} and {names[-1]}"
    else:
        named = f"{len(names)} of {runs} flowing runs"
    return f"In {named}{where} the measured head loss is"


def _times(ratio: Array) -> str:
    """How many of its uncertainties a head loss is."""
    low, high = float(ratio.min()), float(ratio.max())
    if low <= 0.05:
        return (
            f"at most {high:.1f} times its uncertainty" if high > 0.05 else "nothing beside its uncertainty"
        )
    if f"{low:.1f}" == f"{high:.1f}":
        return f"only {high:.1f} times its uncertainty"
    return f"only {low:.1f} to {high:.1f} times its uncertainty"


def _remedy(
    survey: Survey,
    line: Line,
    flowing: Flowing,
    friction: Friction,
    walls: tuple[Wall, ...],
    gravity: float,
    row: int,
    k: int,
) -> str:
    """The flow from which on a run would be enough."""
    reynolds, turbulent = flowing.reynolds[row, k], friction.regime[row, k] == "turbulent"
    slope, u = friction.slope[row, k], friction.slope_u[row, k]
    roughness = next((wall.fit.roughness for wall in walls if k in wall.reaches), np.nan)
    faint = slope <= _FAINT * u
    if turbulent:
        known = np.isfinite(roughness) and not faint
        f, by_reynolds, _ = colebrook_white_sensitivities(
            reynolds, roughness / line.diameter[k] if known else 0.0
        )
        exponent = 2.0 + float(by_reynolds)
    else:
        constant = line.laminar_constant[k]
        f, exponent = np.asarray((constant if np.isfinite(constant) else 64.0) / reynolds), 1.0
    if faint:
        slope = float(f) * flowing.velocity[row, k] ** 2 / (2 * gravity * line.diameter[k])
    unit = parse_unit(survey.units.get("flow", "L/s"), "flow")
    flow = flow_needed(flowing.flow[row], slope, u, exponent)
    with np.errstate(invalid="ignore"):
        enough = (friction.slope[:, k] >= ENOUGH * friction.slope_u[:, k]) & (
            flowing.flow > flowing.flow[row]
        )
    # What a run of this survey has shown to do goes before what a law says.
    shown = min(flowing.flow[enough].tolist(), default=np.inf)
    said = f"{float(f'{unit.from_si(min(flow, shown)):.2g}'):g} {unit.label}"
    if faint and flow < shown:
        return f"Even a smooth pipe would reach that at about {said}, if the uncertainty stays what it is."
    return f"From about {said} on it would not be, if the uncertainty stays what it is."
