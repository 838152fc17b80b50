"""Hazen–Williams C and Manning n of every run, and of each wall at its highest flow."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.hydraulics.conveyance import RADIUS_POWER, SLOPE_POWER, hazen_williams_c, manning_n
from gradeline.hydraulics.friction import roughness_reynolds
from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["Conveyance", "conveyance_of", "conveyance_table", "wall_conveyance_table"]

Array = NDArray[np.float64]

#: Where the formula of Hazen and Williams is meant to hold (common practice): bore, m; velocity, m/s; temperature, K.
_SMALLEST_BORE, _VELOCITIES, _TEMPERATURES = 0.05, (0.3, 3.0), (278.15, 298.15)
#: ε⁺ from which on a wall is fully rough.
_FULLY_ROUGH = 70.0


@dataclass(frozen=True)
class Conveyance:
    """Arrays (F, K): C, n and their standard uncertainties; NaN where S is not above zero or the flow not turbulent."""

    c: Array
    c_u: Array
    n: Array
    n_u: Array


def conveyance_of(line: Line, flowing: Flowing, friction: Friction) -> Conveyance:
    """Work out C and n of every turbulent run and reach, uncertainties by first order with all shared inputs."""
    slope = np.where((friction.slope > 0) & (friction.regime == "turbulent"), friction.slope, np.nan)
    reaches = slope.shape[1]
    c = hazen_williams_c(flowing.velocity, line.diameter, slope)
    n = manning_n(flowing.velocity, line.diameter, slope)
    own = flowing.own[:, 1 : 1 + reaches] / slope
    # The run's own flow error stands in the random part of S where the bore changes; here it goes with V.
    scatter = np.sqrt(np.maximum(np.nan_to_num(friction.slope_u_random) ** 2 / slope**2 - own**2, 0.0))
    shape = (*slope.shape, len(flowing.inputs))
    by_slope = flowing.effect[:, 1 : 1 + reaches] / slope[:, :, None]
    by_flow, by_bore = np.zeros(shape), np.zeros(shape)
    for q, one in enumerate(flowing.inputs):
        by_flow[:, :, q] = np.broadcast_to(one.flow, slope.shape)
        by_bore[:, :, q] = 0.0 if one.diameter is None else one.diameter

    def relative_u(slope_power: float, bore_power: float, flow_power: float) -> Array:
        shared = slope_power * by_slope + bore_power * by_bore + flow_power * by_flow
        run = slope_power * own + flow_power * flowing.reach_flow_u
        u = np.sqrt((slope_power * scatter) ** 2 + run**2 + np.einsum("fkq,fkq->fk", shared, shared))
        return np.where(u > 0, u, np.nan)

    return Conveyance(
        c,
        c * relative_u(-SLOPE_POWER, -2.0 - RADIUS_POWER, 1.0),
        n,
        n * relative_u(0.5, 2.0 + 2.0 / 3.0, -1.0),
    )


def conveyance_table(survey: Survey, flowing: Flowing, found: Conveyance) -> pd.DataFrame:
    """Return the table of runs and reaches."""
    runs, reaches = found.c.shape
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    return frame(
        "conveyance",
        {
            "run": np.repeat(names, reaches),
            "reach": np.tile([reach.name for reach in survey.reaches], runs),
            "hazen_williams_c": found.c.ravel(),
            "hazen_williams_c_u": found.c_u.ravel(),
            "manning_n": found.n.ravel(),
            "manning_n_u": found.n_u.ravel(),
        },
    )


def wall_conveyance_table(
    survey: Survey, media: Media, flowing: Flowing, walls: tuple[Wall, ...], found: Conveyance
) -> pd.DataFrame:
    """Return C and n of each wall at the highest flow that entered its fit, with what speaks against using them."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["wall_conveyance"]}
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    for wall in walls:
        if not wall.fit.used.any() or wall.implausible() is not None:
            continue
        flow = np.where(wall.fit.used, flowing.flow[:, None], -1.0)
        run, place = np.unravel_index(int(flow.argmax()), flow.shape)
        k = int(wall.reaches[place])
        values = (
            wall.name,
            names[run],
            survey.reaches[k].name,
            found.c[run, k],
            found.c_u[run, k],
            found.n[run, k],
            found.n_u[run, k],
            _caution(survey, media, flowing, wall, int(run), int(place)),
        )
        for name, entry in zip(rows, values, strict=True):
            rows[name].append(entry)
    return frame("wall_conveyance", rows)


def _caution(survey: Survey, media: Media, flowing: Flowing, wall: Wall, run: int, place: int) -> str | None:
    """Say where C and n are used beyond what their formulas are meant for."""
    k = int(wall.reaches[place])
    bore, velocity = float(wall.data.diameter[place]), float(wall.data.velocity[run, place])
    temperature = float(survey.runs["temperature"].to_numpy(float)[flowing.rows[run]])
    beyond = []
    if not survey.fluid.is_water:
        beyond.append(f"{survey.fluid.name} in place of water")
    elif np.isfinite(temperature) and not _TEMPERATURES[0] <= temperature <= _TEMPERATURES[1]:
        beyond.append(f"{temperature - 273.15:.0f} °C")
    if bore <= _SMALLEST_BORE:
        beyond.append(f"a bore of {1000 * bore:.3g} mm")
    if not _VELOCITIES[0] <= velocity <= _VELOCITIES[1]:
        beyond.append(f"{velocity:.2g} m/s")
    if survey.reaches[k].section is not None:
        beyond.append("a section that is no circle")
    said = []
    if beyond:
        said.append(
            "the Hazen–Williams formula is meant for water near 15 °C in bores above 50 mm at 0.3 to 3 m/s, not for "
            + " and ".join(beyond)
        )
    factor = 2 * media.gravity * bore * float(wall.fit.expected_slope[run, place]) / max(velocity, 1e-12) ** 2
    plus = float(
        roughness_reynolds(wall.fit.roughness, velocity, factor, float(wall.data.kinematic_viscosity[run]))
    )
    if np.isfinite(plus) and plus < _FULLY_ROUGH:
        said.append(
            f"Manning's formula is meant for fully rough walls (ε⁺ above 70), and ε⁺ is {plus:.2g} here: n changes with the flow"
        )
    return "; ".join(said) or None
