"""Flags: readings, runs and the law itself, each with what was expected."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.reduction.corrections import Corrections
from gradeline.reduction.friction import Friction
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tables import RESULT_TABLES
from gradeline.reduction.tabulate import frame
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["flag_table"]

Array = NDArray[np.float64]

#: A trend or an offset of the law is no chance beyond this two-sided probability.
_LAW_FALSE_ALARM = 0.01


@dataclass(frozen=True)
class _Flag:
    kind: str
    run: str | None = None
    tap: str | None = None
    reading: float = np.nan
    expected: float = np.nan
    score: float = np.nan
    suggestion: str = ""


def flag_table(
    survey: Survey,
    corrections: Corrections,
    flowing: Flowing,
    friction: Friction,
    walls: tuple[Wall, ...],
    *,
    keep_all: bool,
) -> pd.DataFrame:
    """Collect the flags of a reduction.

    Parameters
    ----------
    survey, corrections, flowing, friction, walls
        What the fits say.
    keep_all : bool
        Whether flagged readings entered the fits all the same.

    Returns
    -------
    DataFrame
        The table ``flags``, readings first, then runs, then the law.
    """
    found = [
        *_readings(survey, corrections, flowing, keep_all=keep_all),
        *_runs(survey, flowing, walls),
        *_laminar(survey, flowing, friction),
        *(flag for wall in walls for flag in _law(wall)),
    ]
    columns: dict[str, list[Any]] = {
        name: [getattr(flag, name) for flag in found] for name in RESULT_TABLES["flags"]
    }
    return frame("flags", columns)


def _readings(survey: Survey, corrections: Corrections, flowing: Flowing, *, keep_all: bool) -> list[_Flag]:
    readings = survey.readings.to_numpy(float)
    fate = "kept in the fit as asked" if keep_all else "left out of the fit"
    found = []
    for row, i in np.argwhere(flowing.fits.flagged):
        run = flowing.rows[row]
        reading = readings[run, i]
        expected = reading - flowing.fits.error[row, i] / corrections.heads.gain[run, i]
        found.append(
            _Flag(
                "reading",
                survey.runs["run"].iloc[run],
                survey.observations[i].label,
                reading,
                float(expected),
                float(flowing.fits.score[row, i]),
                f"{fate}; look it up in the record, or read it again",
            )
        )
    return found


def _runs(survey: Survey, flowing: Flowing, walls: tuple[Wall, ...]) -> list[_Flag]:
    found = []
    for wall in walls:
        for row, k in np.argwhere(wall.fit.off_law):
            slope, expected = wall.data.slope[row, k], wall.fit.expected_slope[row, k]
            ratio = slope / expected
            # S goes almost as Q²: the factor on the flow that would bring this run onto the law.
            flow = ratio**0.5
            other = (
                f"{flow:.3g} times as large"
                if not 0.5 < flow < 2
                else f"{abs(100 * (flow - 1)):.2g} % {'larger' if flow > 1 else 'smaller'}"
            )
            reach = survey.reaches[wall.reaches[k]].name
            found.append(
                _Flag(
                    "run",
                    survey.runs["run"].iloc[flowing.rows[row]],
                    None,
                    score=float(wall.fit.score[row, k]),
                    suggestion=(
                        f"in reach {reach!r} S is {ratio:.3g} times what the other runs' law gives: "
                        f"look up its readings and its flow (one {other} would fit); "
                        "left out of the wall's fit"
                    ),
                )
            )
    return found


def _laminar(survey: Survey, flowing: Flowing, friction: Friction) -> list[_Flag]:
    """Laminar runs whose f Re / 64 is not 1 within its uncertainty: a check of the bore's fourth power."""
    found = []
    for k, reach in enumerate(survey.reaches):
        mine = np.flatnonzero(np.isfinite(friction.laminar_ratio_u[:, k]))
        if not len(mine):
            continue
        ratio, u = friction.laminar_ratio[mine, k], friction.laminar_ratio_u[mine, k]
        weight = 1 / u**2 / (1 / u**2).sum()
        # Shared errors do not average out: the mean is known no better than the mean of the uncertainties.
        mean, spread = float(weight @ ratio), float(weight @ u)
        score = (mean - 1) / spread
        dof = max(flowing.fits.pooled_dof, 1.0) if flowing.fits.pooled_dof else 1e9
        if abs(score) > stdtrit(dof, 1 - _LAW_FALSE_ALARM / 2):
            bore = 100 * (mean**-0.25 - 1)
            found.append(
                _Flag(
                    "law",
                    score=float(score),
                    suggestion=(
                        f"in the laminar runs of reach {reach.name!r} f Re / 64 = {mean:.3f} ± {spread:.3f}: a bore "
                        f"{abs(bore):.2g} % {'larger' if bore > 0 else 'smaller'} would make it 1"
                    ),
                )
            )
    return found


def _law(wall: Wall) -> list[_Flag]:
    fit = wall.fit
    found: list[_Flag] = []
    if not np.isfinite(fit.roughness):
        return found
    beyond = float(stdtrit(fit.dof if np.isfinite(fit.dof) else 1e9, 1 - _LAW_FALSE_ALARM / 2))
    if np.isfinite(fit.trend) and fit.trend_u > 0 and abs(fit.trend / fit.trend_u) > beyond:
        way = "falls" if fit.trend < 0 else "rises"
        found.append(
            _Flag(
                "law",
                score=fit.trend / fit.trend_u,
                suggestion=(
                    f"wall {wall.name!r}: f {way} against the fitted law by {abs(100 * fit.trend):.2g} % ± "
                    f"{100 * fit.trend_u:.1g} % per decade of Re"
                    + (", the wrong way for roughness" if fit.trend < 0 else "")
                    + ": the law does not describe these runs; look at the flow meter's calibration over its range"
                ),
            )
        )
    score = fit.offset / fit.offset_u if fit.offset_u > 0 else 0.0
    if fit.roughness == 0 and score < -beyond:
        bore = 100 * (np.exp(-fit.offset / 5) - 1)
        flow = 100 * (1 - np.exp(fit.offset / 2))
        found.append(
            _Flag(
                "law",
                score=float(score),
                suggestion=(
                    f"wall {wall.name!r}: f lies {abs(100 * fit.offset):.2g} % below that of a smooth wall, beyond its "
                    f"uncertainty: a bore about {bore:.2g} % larger or flows about {flow:.2g} % smaller than stated "
                    "would bring it onto the law"
                ),
            )
        )
    return found
