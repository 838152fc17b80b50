"""Flows that leave the line between the taps: what is left in each reach, and how it goes with what was measured."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import ReductionError
from gradeline.reduction.heads import Input
from gradeline.reduction.line import Line
from gradeline.survey import Survey

__all__ = ["flow_heads", "offtake_inputs", "reach_flows"]

Array = NDArray[np.float64]


def reach_flows(survey: Survey, rows: NDArray[np.intp]) -> Array:
    """Return the flow in each reach (F, K), m³/s: that of the run less all that left upstream.

    Parameters
    ----------
    survey : Survey
        Its runs, reaches and off-takes.
    rows : (F,) int array
        Flowing runs.

    Raises
    ------
    ReductionError
        Where the off-takes leave nothing.
    """
    flow = survey.runs["flow"].to_numpy(float)[rows, None] + np.zeros(len(survey.reaches))
    for one in survey.offtakes:
        flow -= survey.runs[one.column].to_numpy(float)[rows, None] * _downstream(survey, one.at)
    if survey.offtakes and (flow <= 0).any():
        run = survey.runs["run"].iloc[int(rows[np.argmin(flow.min(axis=1))])]
        raise ReductionError(
            f"the off-takes take all that flows in run {run}, or more; some must be left downstream: mend a flow or its unit"
        )
    return np.asarray(flow)


def _downstream(survey: Survey, at: float) -> Array:
    """1 for the reaches that begin at a chainage or after it."""
    return np.array([float(reach.start > at - 1e-6) for reach in survey.reaches])


def flow_heads(line: Line, sight: Array, heads: Array, loss_heads: Array, relative: Array) -> Array:
    """Return half the change of the observed energy heads with a change of the flows (F, n), m.

    Parameters
    ----------
    line : Line
        Its layout.
    sight : (n, T) array
        Which taps an observation sees.
    heads, loss_heads : (F, K), (F, M) array
        α V²/2g of the reaches and the given losses, m.
    relative : (F, K) array
        Relative change of the flow in each reach.
    """
    at_tap = (heads * relative)[:, line.reach_of_tap]
    return np.asarray((at_tap + (loss_heads * relative[:, line.reference]) @ line.passed.T) @ sight.T)


def offtake_inputs(
    survey: Survey, line: Line, sight: Array, rows: NDArray[np.intp], heads: Array, loss_heads: Array
) -> list[Input]:
    """List the off-takes whose flow has a stated uncertainty: the same error in all runs."""
    found = []
    flow = reach_flows(survey, rows)
    for one in survey.offtakes:
        if one.flow_u is None:
            continue
        taken = survey.runs[one.column].to_numpy(float)[rows]
        size = np.array([one.flow_u.of(value) if value else 0.0 for value in taken.tolist()])
        relative = -size[:, None] * _downstream(survey, one.at) / flow
        found.append(
            Input(
                "off-take flow",
                one.name,
                heads=2.0 * flow_heads(line, sight, heads, loss_heads, relative),
                flow=relative,
            )
        )
    return found
