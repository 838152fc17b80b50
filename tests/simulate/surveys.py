"""Whole simulated surveys of one piezometer board, built in memory, with their truth.

A survey states nominal values and their standard uncertainties. With ``draw=True`` the truth behind it takes each
input from its stated uncertainty; with ``draw=False`` the shared inputs are exact and only readings scatter.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike

from gradeline.quantities import Measured
from gradeline.survey import (
    Fitting,
    Gauge,
    Observation,
    Reach,
    Site,
    Stated,
    StatedUncertainties,
    Survey,
    Tap,
)
from tests.simulate.line import Floats, TrueLine, TrueLoss, TrueReach
from tests.simulate.water import air_density, density, kinematic_viscosity

BOARD_ZERO, TAIL_COLUMN, AIR = 0.8, 0.1, air_density(293.15)


@dataclass(frozen=True)
class NominalReach:
    """A length of one bore as the survey states it, with the true roughness of its wall; metres."""

    start: float
    end: float
    diameter: float
    roughness: float
    diameter_u: float | None = None
    wall: str = "wall"
    inlet: bool = False


@dataclass(frozen=True)
class NominalFitting:
    """A local loss with its true coefficient, of the smaller bore's velocity head.

    `stated` is what the survey says of it: ``"fit"``, the coefficient as a Measured, or None where the survey does
    not list it at all.
    """

    at: float
    true_coefficient: float
    stated: Measured | str | None = "fit"
    change_of_bore: bool = False


@dataclass(frozen=True)
class Uncertainties:
    """Standard uncertainties that the survey states, SI; None where it states none (then nothing is drawn).

    `flow` and `flow_scale` are relative, `chainage` and `zero` in m, `scale` (of the board) relative, `temperature`
    (all runs alike) and `temperature_run` in K. `reading` (m) is stated only: `make_survey` scatters by its `sigma`.
    """

    reading: float | None = None
    flow: float | None = None
    flow_scale: float | None = None
    chainage: float | None = None
    zero: float | None = None
    scale: float | None = None
    temperature: float | None = None
    temperature_run: float | None = None


@dataclass(frozen=True)
class Truth:
    """What the survey does not know. Arrays are (runs,), (taps,), (runs, taps) or (runs, reaches), SI."""

    line: TrueLine
    chainage: Floats
    flow: Floats
    temperature: Floats
    viscosity: Floats
    heads: Floats
    reynolds: Floats
    slope: Floats
    friction_factor: Floats
    zero: float
    offsets: Floats


def make_survey(
    rng: np.random.Generator,
    *,
    chainage: ArrayLike,
    reaches: Sequence[NominalReach],
    flows: ArrayLike,
    temperature: ArrayLike = 288.15,
    sigma: float = 1e-3,
    surge: float = 0.0,
    stated: Uncertainties = Uncertainties(),
    fittings: Sequence[NominalFitting] = (),
    offsets: ArrayLike = 0.0,
    slips: Mapping[tuple[int, int], float] | None = None,
    resolution: float | None = None,
    gravity: float = 9.80665,
    draw: bool = True,
    same_pipe: Truth | None = None,
) -> tuple[Survey, Truth]:
    """Build a survey of open columns on one board and the truth behind it.

    Parameters
    ----------
    rng : Generator
        The source of every draw.
    chainage, flows, temperature : array_like
        Stated values: of each tap (m), of each run (m³/s, 0 for a static run), of each run or of all (K).
    reaches, fittings : sequences
        The line as stated, with the true roughness and loss coefficients.
    sigma, surge : float
        One reading scatters with σ² = sigma² + (surge V²/2g)² (m), V in the bore at the tap.
    stated : Uncertainties
        What the survey states, and with `draw` what the truth is drawn from.
    offsets : array_like
        Error of each tap's zero (m), constant over the runs and stated nowhere.
    slips : mapping, optional
        Wrong readings: ``{(run number, tap number): error in m}``.
    resolution : float, optional
        Step (m) to which readings are rounded, stated as the board's.
    gravity : float
        Stated and true, m/s².
    draw : bool
        Whether the inputs are drawn from their stated uncertainties.
    same_pipe : Truth, optional
        Of an earlier survey: its bores and tap positions are the true ones here too.

    Returns
    -------
    tuple of Survey and Truth
        Runs are labelled ``1``, ``2``, …, taps ``T1``, ``T2``, … in the order given.
    """

    def error(u: float | None, size: int | None = None) -> float | Floats:
        deviate = rng.standard_normal(size)  # drawn in any case, so that one seed gives the same scatter
        return deviate * (u if draw and u is not None else 0.0)

    stated_x, stated_flow = np.asarray(chainage, dtype=float), np.asarray(flows, dtype=float)
    stated_temperature = np.broadcast_to(np.asarray(temperature, dtype=float), stated_flow.shape)
    runs, taps = stated_flow.size, stated_x.size

    bores = [reach.diameter + float(error(reach.diameter_u)) for reach in reaches]
    if same_pipe is not None:
        bores = [reach.diameter for reach in same_pipe.line.reaches]
    line = TrueLine(
        tuple(
            TrueReach(reach.start, reach.end, bore, reach.roughness)
            for reach, bore in zip(reaches, bores, strict=True)
        ),
        tuple(TrueLoss(fitting.at, fitting.true_coefficient) for fitting in fittings),
        gravity,
    )
    x = stated_x + error(stated.chainage, taps)
    if same_pipe is not None:
        x = same_pipe.chainage
    flow = stated_flow * (1 + error(stated.flow_scale) + error(stated.flow, runs))
    kelvin = stated_temperature + error(stated.temperature) + error(stated.temperature_run, runs)
    zero = BOARD_ZERO + float(error(stated.zero))
    viscosity, rho = kinematic_viscosity(kelvin), density(kelvin)

    heads = line.heads(np.clip(x, reaches[0].start, reaches[-1].end), flow, viscosity)
    heads += BOARD_ZERO + TAIL_COLUMN - heads[:, -1:]
    top = heads / (1 - AIR / rho)[:, None]
    readings = (top - zero) * (1 + error(stated.scale)) + np.asarray(offsets, dtype=float)
    home = np.searchsorted([reach.end for reach in line.reaches[:-1]], x)
    velocity = np.stack([reach.velocity(flow) for reach in line.reaches], axis=1)[:, home]
    readings += np.hypot(sigma, surge * velocity**2 / (2 * gravity)) * rng.standard_normal((runs, taps))
    for place, slip in (slips or {}).items():
        readings[place] += slip
    if resolution is not None:
        readings = np.round(readings / resolution) * resolution

    per_reach = {
        name: np.stack(values, axis=1)
        for name, values in {
            "reynolds": [reach.reynolds(flow, viscosity) for reach in line.reaches],
            "slope": [reach.slope(flow, viscosity, gravity) for reach in line.reaches],
            "friction_factor": [reach.friction_factor(flow, viscosity) for reach in line.reaches],
        }.items()
    }
    truth = Truth(
        line=line,
        chainage=x,
        flow=flow,
        temperature=kelvin,
        viscosity=viscosity,
        heads=heads,
        zero=zero,
        offsets=np.broadcast_to(np.asarray(offsets, dtype=float), taps),
        **per_reach,
    )
    survey = _survey(
        stated_x=stated_x,
        stated_flow=stated_flow,
        stated_temperature=stated_temperature,
        readings=readings,
        reaches=reaches,
        fittings=fittings,
        stated=stated,
        resolution=resolution,
        gravity=gravity,
    )
    return survey, truth


def _survey(
    *,
    stated_x: Floats,
    stated_flow: Floats,
    stated_temperature: Floats,
    readings: Floats,
    reaches: Sequence[NominalReach],
    fittings: Sequence[NominalFitting],
    stated: Uncertainties,
    resolution: float | None,
    gravity: float,
) -> Survey:
    """What the survey states, without a look at the truth."""
    labels = [str(number) for number in range(1, stated_flow.size + 1)]
    names = [f"T{number}" for number in range(1, stated_x.size + 1)]

    def table(values: Floats | float) -> pd.DataFrame:
        return pd.DataFrame(values, index=pd.Index(labels, name="run"), columns=names)

    return Survey(
        title="Simulated bench",
        source="simulated",
        reaches=tuple(
            Reach(
                f"reach {number}",
                reach.start,
                reach.end,
                Measured(reach.diameter, reach.diameter_u),
                reach.wall,
                inlet=reach.inlet,
            )
            for number, reach in enumerate(reaches, start=1)
        ),
        fittings=tuple(
            Fitting(
                f"fitting {number}",
                fitting.at,
                fitting.stated if isinstance(fitting.stated, Measured) else None,
                change_of_bore=fitting.change_of_bore,
            )
            for number, fitting in enumerate(fittings, start=1)
            if fitting.stated is not None
        ),
        taps=tuple(Tap(name, float(at), gauge="board") for name, at in zip(names, stated_x, strict=True)),
        gauges=(
            Gauge(
                "board",
                "piezometer",
                {"zero": Measured(BOARD_ZERO)},
                reading_u=stated.reading,
                resolution=resolution,
                zero_u=stated.zero,
                scale_u=stated.scale,
            ),
        ),
        observations=tuple(Observation("board", name) for name in names),
        runs=pd.DataFrame(
            {
                "run": labels,
                "flow": stated_flow,
                "flow_u": np.nan,
                "temperature": stated_temperature,
                "repeats": 1,
            }
        ),
        readings=table(readings),
        repeats=table(1.0).astype(int),
        spreads=table(np.nan),
        site=Site(gravity=Measured(gravity)),
        stated=StatedUncertainties(
            chainage=stated.chainage,
            flow=None if stated.flow is None else Stated(stated.flow, relative=True),
            flow_scale=stated.flow_scale,
            temperature=stated.temperature,
            temperature_run=stated.temperature_run,
        ),
    )
