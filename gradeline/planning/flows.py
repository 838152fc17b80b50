"""Flows for the runs of a plan: how they may be spread over a range, and which flows mark a change of regime."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.hydraulics.friction import LAMINAR_LIMIT, TURBULENT_LIMIT
from gradeline.survey import Survey

__all__ = ["ROUGH", "SMOOTH", "Marks", "flow_marks", "spreads", "with_flows", "with_more_runs"]

Array = NDArray[np.float64]

#: ε⁺ below which a wall is hydraulically smooth, and above which it is fully rough (Schlichting, Boundary-Layer Theory,
#: from memory).
SMOOTH, ROUGH = 5.0, 70.0


@dataclass(frozen=True)
class Marks:
    """Flows at which a reach changes its regime, m³/s; NaN where a smooth wall has none.

    Parameters
    ----------
    laminar, turbulent : float
        Laminar below the first (Re 2000), turbulent above the second (Re 4000).
    smooth, rough : float
        Hydraulically smooth below the first (ε⁺ = 5), fully rough above the second (ε⁺ = 70).
    """

    laminar: float
    turbulent: float
    smooth: float
    rough: float


def flow_marks(diameter: float, area: float, viscosity: float, roughness: float) -> Marks:
    """Return the flows at which a reach changes its regime.

    Parameters
    ----------
    diameter : float
        Bore (hydraulic diameter), m.
    area : float
        Cross-section, m².
    viscosity : float
        Kinematic viscosity, m²/s.
    roughness : float
        ε, m, at least 0.

    Returns
    -------
    Marks
        In m³/s.

    Notes
    -----
    ε⁺ = ε u*/ν gives the friction velocity u* = ε⁺ ν/ε, and so Re √f = √8 u* D/ν; Colebrook and White's law then has no
    unknown on its right side: 1/√f = −2 lg(ε/(3.7 D) + 2.51/(Re √f)), and V = u* √8/√f.

    Examples
    --------
    >>> marks = flow_marks(0.1, 0.25 * np.pi * 0.1**2, 1e-6, 1e-3)
    >>> round(1000 * marks.turbulent, 3), round(1000 * marks.rough, 2)
    (0.314, 7.93)
    """

    def at(reynolds: float) -> float:
        return float(reynolds * viscosity / diameter * area)

    def by_wall(roughness_reynolds: float) -> float:
        if not roughness > 0:
            return float("nan")
        shear = roughness_reynolds * viscosity / roughness
        turned = np.sqrt(8.0) * shear * diameter / viscosity
        root = -2.0 * np.log10(roughness / (3.7 * diameter) + 2.51 / turned)
        return float(shear * np.sqrt(8.0) * root * area)

    return Marks(at(LAMINAR_LIMIT), at(TURBULENT_LIMIT), by_wall(SMOOTH), by_wall(ROUGH))


def spreads(low: float, high: float, count: int) -> Mapping[str, Array]:
    """Return ways to spread flows over a range, by name.

    Parameters
    ----------
    low, high : float
        Ends of the range, m³/s, above 0.
    count : int
        Number of runs.

    Returns
    -------
    mapping of str to (count,) array
        Flows in rising order, m³/s. From four runs on each has at least three different flows, so that runs off the law
        still show.

    Examples
    --------
    >>> [(name, flows.round(2).tolist()) for name, flows in spreads(1.0, 4.0, 5).items()][:2]
    [('even on a log axis', [1.0, 1.41, 2.0, 2.83, 4.0]), ('even', [1.0, 1.75, 2.5, 3.25, 4.0])]
    """
    middle = np.sqrt(low * high)
    half = max((count - 1) // 2, 1)
    found = {
        "even on a log axis": np.geomspace(low, high, count),
        "even": np.linspace(low, high, count),
    }
    if count > 3:
        found["both ends and a middle"] = np.array([low] * half + [middle] + [high] * (count - half - 1))
        found["upper half"] = np.linspace(0.5 * (low + high), high, count)
        some = max(count // 4, 1)
        found["mostly at the greatest"] = np.array([low] * some + [middle] + [high] * (count - some - 1))
    return {name: np.sort(flows) for name, flows in found.items()}


def with_flows(survey: Survey, flows: Array) -> Survey:
    """Return a survey whose flowing runs have other flows, in rising order; static runs stay.

    Parameters
    ----------
    survey : Survey
        The plan; its flows are given, not worked out from readings.
    flows : (F,) array
        m³/s.
    """
    runs = survey.runs.copy()
    flowing = (runs["flow"] > 0).to_numpy(bool)
    before = runs["flow"].to_numpy(float)
    order = np.argsort(before[flowing], kind="stable")
    after = np.empty(int(flowing.sum()))
    after[order] = np.sort(flows)
    changed = before.copy()
    changed[flowing] = after
    runs["flow"] = changed
    # The spread of repeats goes with the flow.
    with np.errstate(invalid="ignore", divide="ignore"):
        runs["flow_u"] = np.where(flowing, runs["flow_u"].to_numpy(float) * changed / before, runs["flow_u"])
    return replace(survey, runs=runs)


def with_more_runs(survey: Survey) -> Survey:
    """Return a survey in which every flowing run is done twice, at the same flow."""
    runs = survey.runs
    again = runs[(runs["flow"] != 0).to_numpy(bool)].copy()
    label = {name: f"{name} again" for name in again["run"]}
    again["run"] = again["run"].map(label)

    def doubled(table: pd.DataFrame) -> pd.DataFrame:
        more = table.loc[list(label)].copy()
        more.index = pd.Index(list(label.values()), dtype=object, name=table.index.name)
        return pd.concat([table, more])

    rows = survey.flow_readings
    if len(rows):
        more = rows[rows["run"].isin(list(label))].copy()
        more["run"] = more["run"].map(label)
        rows = pd.concat([rows, more], ignore_index=True)
    return replace(
        survey,
        runs=pd.concat([runs, again], ignore_index=True),
        readings=doubled(survey.readings),
        repeats=doubled(survey.repeats),
        spreads=doubled(survey.spreads),
        levels=None if survey.levels is None else doubled(survey.levels),
        flow_readings=rows,
    )
