"""What a plan is expected to tell, by the steps of `gradeline.reduce` that make its uncertainties."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.planning.expected import Expected
from gradeline.reduction.choices import excluded_readings
from gradeline.reduction.corrections import static_corrections
from gradeline.reduction.drift import steadied
from gradeline.reduction.flow import metered_flow, with_flow_inputs
from gradeline.reduction.friction import friction_of
from gradeline.reduction.heads import heads_of
from gradeline.reduction.losses import losses_of
from gradeline.reduction.media import run_temperature_u
from gradeline.reduction.runs import fit_survey
from gradeline.reduction.walls import walls_of

__all__ = ["Accuracy", "accuracy_of"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Accuracy:
    """Expected uncertainties.

    Parameters
    ----------
    flow : (F,) array
        Of the flowing runs, m³/s.
    slope_u, factor_u : (F, K) array
        Relative standard uncertainties of S and f, dimensionless; NaN where they are not told.
    roughness : mapping of str to (float, float)
        Interval of ε of each wall, m; NaN where there is none.
    loss_u : mapping of str to float
        Standard uncertainty of each fitted K, dimensionless; NaN where there is none.
    used : (F, n) bool array
        Whether each observation enters its run.
    """

    flow: Array
    slope_u: Array
    factor_u: Array
    roughness: Mapping[str, tuple[float, float]]
    loss_u: Mapping[str, float]
    used: NDArray[np.bool_]

    def width(self, wall: str) -> float:
        """Return the width of the interval of a wall's ε, m; infinite where the runs set none."""
        low, high = self.roughness[wall]
        return high - low if np.isfinite(high - low) else float("inf")


def accuracy_of(expected: Expected, *, level: float = 0.95) -> Accuracy:
    """Work out what a plan is expected to tell.

    Parameters
    ----------
    expected : Expected
        The survey with its expected readings.
    level : float
        Coverage of the intervals.

    Returns
    -------
    Accuracy
        What `gradeline.reduce` would find of the same survey: its search for what ails taps and line is left out, since
        readings by the law have nothing to find.
    """
    metered = metered_flow(expected.survey)
    survey, media, line = metered.survey, expected.media, expected.line
    excluded = excluded_readings(survey, ())
    corrections = steadied(
        static_corrections(
            with_flow_inputs(heads_of(survey, media), metered.inputs),
            survey.runs["flow"].to_numpy(float) == 0,
            survey.repeats.to_numpy(float),
            apply=True,
            excluded=excluded,
        ),
        survey,
        line,
        media,
    )
    flowing = fit_survey(survey, media, line, corrections, excluded, keep_all=False, look=False)
    walls = walls_of(survey, line, media, flowing, corrections, level=level)
    friction = friction_of(
        line, media, flowing, walls, level=level, temperature_run=run_temperature_u(survey)[flowing.rows]
    )
    losses = losses_of(line, media, flowing, friction, walls, corrections, level=level)
    with np.errstate(invalid="ignore", divide="ignore"):
        slope_u = friction.slope_u / friction.slope
        factor_u = friction.factor_u / friction.factor
    return Accuracy(
        flow=flowing.flow,
        slope_u=slope_u,
        factor_u=factor_u,
        roughness={wall.name: (float(wall.fit.low), float(wall.fit.high)) for wall in walls},
        loss_u={line.fittings[one.place].name: float(one.fit.u) for one in losses},
        used=flowing.used,
    )
