"""Runs whose flow is not told from zero: as a rule static ones whose meter was read all the same."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.quantities import parse_unit, rounded
from gradeline.reduction.runs import Flowing
from gradeline.survey import Survey

__all__ = ["FAINT_FLOW", "faint_flow_cautions", "faint_flows"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A reading of the flow below this many of its standard uncertainties is not told from zero.
_FAINT = 2.0
#: Why such a run is left out.
FAINT_FLOW = "the flow is not told from zero"


def _relative_u(flowing: Flowing) -> Array:
    """Standard uncertainty of each run's flow relative to it (F,), its own and the shared errors together."""
    variance = flowing.flow_u**2
    for one in flowing.inputs:
        variance = variance + np.broadcast_to(one.flow, flowing.velocity.shape)[:, 0] ** 2
    return np.asarray(np.sqrt(variance))


def faint_flows(survey: Survey, flowing: Flowing) -> Mask:
    """Tell the flowing runs whose flow is not told from zero.

    Parameters
    ----------
    survey : Survey
        With the flow of every run worked out.
    flowing : Flowing
        What the fits say.

    Returns
    -------
    (F,) bool array
        Where the reading that the flow comes from is below twice its standard uncertainty.

    Notes
    -----
    With Q ∝ Rᵐ (m = 1/2 for a differential meter, 1 where the flow itself is given) u(Q)/Q = m u(R)/R: of a deflection
    of twice its uncertainty, the flow is still four times its own. So the bound is u(Q)/Q >= m/2.
    """
    power = np.ones(len(flowing.rows))
    if "flow_power" in survey.runs.columns:
        power = survey.runs["flow_power"].to_numpy(float)[flowing.rows]
    return np.asarray(_relative_u(flowing) * _FAINT >= power)


def faint_flow_cautions(survey: Survey, flowing: Flowing) -> list[str]:
    """Name such runs with their flow, and say what to do."""
    unit = parse_unit(survey.units.get("flow", "L/s"), "flow")
    relative = _relative_u(flowing)
    said = []
    for row in np.flatnonzero(faint_flows(survey, flowing)):
        flow = unit.from_si(float(flowing.flow[row]))
        said.append(
            f"The flow of run {survey.runs['run'].iloc[flowing.rows[row]]}, "
            f"({rounded(flow, float(relative[row]) * flow)}) {unit.label}, is not told from zero: its reading is below twice "
            "its standard uncertainty. If nothing flowed, enter 0 for the reading of the flow: the run is then a static one. "
            "It is left out of the wall's fit."
        )
    return said
