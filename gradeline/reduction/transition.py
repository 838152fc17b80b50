"""Where laminar flow ends and turbulent flow begins, from f itself: critical velocities, rising and falling flows apart."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.hydraulics.friction import colebrook_white
from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["flow_states", "transition_table"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A run is laminar or turbulent where f lies this close to its law, or within two standard uncertainties. The laminar law
#: is exact; near the transition the turbulent one is only good to some 5 % (common practice: 10 % are allowed).
_LAMINAR_ROOM, _TURBULENT_ROOM = 0.05, 0.10
#: Below this Re the two laws lie too close to each other for f to tell them apart: such runs are laminar.
_CROSSING = 1200.0
#: No turbulence lasts below, whatever f says (common practice), and no flow is laminar above the other.
_NEVER_TURBULENT = 1800.0
_NEVER_LAMINAR = 1e5
_DIRECTIONS = ("rising", "falling")
_TOGETHER = "not stated"


def flow_states(
    factor: Array, relative_u: Array, reynolds: Array, constant: float, turbulent: Array
) -> Array:
    """Tell laminar from turbulent runs by their friction factor.

    Parameters
    ----------
    factor, relative_u, reynolds : (N,) array
        f, its relative standard uncertainty (NaN where not known), Re.
    constant : float
        f Re of laminar flow.
    turbulent : (N,) array
        f by the turbulent law at each Re.

    Returns
    -------
    (N,) array
        −1 laminar, +1 turbulent, 0 neither or not known: intermittent, or off both laws.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        off_laminar = np.abs(np.log(factor * reynolds / constant))
        off_turbulent = np.abs(np.log(factor / turbulent))
        room = 2.0 * np.nan_to_num(relative_u)
        laminar = off_laminar <= np.maximum(room, _LAMINAR_ROOM)
        laminar &= ((off_laminar < off_turbulent) | (reynolds < _CROSSING)) & (reynolds < _NEVER_LAMINAR)
        fully = (
            (off_turbulent <= np.maximum(room, _TURBULENT_ROOM)) & (reynolds > _NEVER_TURBULENT) & ~laminar
        )
    return np.where(laminar, -1.0, np.where(fully, 1.0, 0.0))


def transition_table(
    survey: Survey, line: Line, flowing: Flowing, friction: Friction, walls: tuple[Wall, ...]
) -> pd.DataFrame:
    """Return the table of critical velocities.

    Parameters
    ----------
    survey, line, flowing, friction, walls
        The survey and what its runs say.

    Returns
    -------
    DataFrame
        A row for each reach with both laminar and turbulent runs, and for each direction of the flow where it was noted. The
        lower critical velocity lies between the fastest run below which all are laminar and the next; the upper one between
        the slowest run above which all are turbulent and the one before. Where no run lies between, they are one.
    """
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["transition"]}
    said = np.full(len(flowing.rows), None, dtype=object)
    if "direction" in survey.runs.columns:
        said = survey.runs["direction"].to_numpy(object)[flowing.rows]
    noted = [name for name in _DIRECTIONS if (said == name).any()]
    for k, reach in enumerate(survey.reaches):
        wall = next((one for one in walls if one.name == reach.wall), None)
        rough = 0.0 if wall is None or not np.isfinite(wall.fit.roughness) else wall.fit.roughness
        reynolds, factor = flowing.reynolds[:, k], friction.factor[:, k]
        law = np.asarray(
            colebrook_white(np.maximum(reynolds, 1.0), np.clip(rough / line.diameter[k], 0.0, 0.1))
        )
        constant = float(line.laminar_constant[k])
        if not np.isfinite(constant):
            continue
        states = flow_states(factor, friction.factor_u[:, k] / factor, reynolds, constant, law)
        for direction in noted or [_TOGETHER]:
            mine = np.isfinite(factor) & ((said == direction) if noted else True)
            found = _brackets(flowing.velocity[mine, k], reynolds[mine], states[mine])
            if found is None:
                continue
            values: dict[str, Any] = {"reach": reach.name, "direction": direction} | found
            for name, column in rows.items():
                column.append(values[name])
    return frame("transition", rows)


def _brackets(velocity: Array, reynolds: Array, states: Array) -> dict[str, Any] | None:
    """The two brackets of one set of runs; None where it does not straddle the transition."""
    if not ((states < 0).any() and (states > 0).any()):
        return None
    order = np.argsort(reynolds, kind="stable")
    velocity, reynolds, states = velocity[order], reynolds[order], states[order]
    first_other = int(np.argmax(states >= 0)) if (states >= 0).any() else len(states)
    last_other = len(states) - 1 - int(np.argmax(states[::-1] <= 0))
    found: dict[str, Any] = {
        "laminar_runs": int((states < 0).sum()),
        "turbulent_runs": int((states > 0).sum()),
        "reason": None,
    }
    mixed = np.flatnonzero(states > 0)[0] < np.flatnonzero(states < 0)[-1]
    if mixed:
        found["reason"] = (
            "laminar and turbulent runs overlap in Re: the state depended on more than the flow, such as the direction it "
            "changed in, the inlet or vibration"
        )
    if first_other == 0 or last_other == len(states) - 1:
        # The slowest run is not laminar, or the fastest not turbulent: one end of the bracket is open.
        found["reason"] = "; ".join(
            filter(None, [found["reason"], "the slowest run is not laminar, or the fastest not turbulent"])
        )
    for name, low, high in (("lower", first_other - 1, first_other), ("upper", last_other, last_other + 1)):
        for what, values in (("", velocity), ("_reynolds", reynolds)):
            found[f"{name}{what}_from"] = float(values[low]) if low >= 0 else np.nan
            found[f"{name}{what}_to"] = float(values[high]) if high < len(values) else np.nan
    return found
