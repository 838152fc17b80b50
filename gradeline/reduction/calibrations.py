"""Readings corrected by the calibrations of their gauges, and the two errors that each calibration leaves."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.calibration import CalibrationLine, fit_calibration
from gradeline.survey import Survey

__all__ = ["Calibrated", "calibrated", "calibration_sentences", "freedom_factor"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Calibrated:
    """Readings with their corrections.

    Parameters
    ----------
    readings : (R, n) array
        Corrected, SI.
    rate : (n,) array
        Change of the corrected reading for one unit of the reading, dimensionless.
    errors : tuple of (str, (R, n) array)
        Independent errors of standard size, `freedom_factor` included: the gauge and the change of its readings, SI.
    """

    readings: Array
    rate: Array
    errors: tuple[tuple[str, Array], ...]


def freedom_factor(dof: int) -> float:
    """Return what the standard uncertainty of a calibration line is multiplied by for its few degrees of freedom.

    Parameters
    ----------
    dof : int
        Degrees of freedom of the line's scatter, n − 2, at least 1.

    Returns
    -------
    float
        Student's t over the normal's point, both at 97.5 %. The errors of a calibration are shared by all runs, and
        intervals take shared errors as normal: so a 95 % interval that only the calibration decides is the one by t.

    References
    ----------
    JCGM 100:2008, H.3 gives the line's uncertainty with n − 2 degrees of freedom; G.3.2 the interval by t.

    Examples
    --------
    >>> [round(freedom_factor(dof), 2) for dof in (1, 9)]
    [6.48, 1.15]
    """
    from scipy.special import ndtri, stdtrit  # noqa: PLC0415 (start-up time)

    return float(stdtrit(dof, 0.975) / ndtri(0.975))


def _lines(survey: Survey) -> dict[str, CalibrationLine]:
    return {
        gauge.name: fit_calibration(np.array(gauge.calibration.reading), np.array(gauge.calibration.true))
        for gauge in survey.gauges
        if gauge.calibration is not None
    }


def calibrated(survey: Survey) -> Calibrated:
    """Correct the readings of a survey.

    Parameters
    ----------
    survey : Survey
        Its readings and the calibrations of its gauges.

    Returns
    -------
    Calibrated
        The readings as they are where no gauge has a calibration.
    """
    readings = survey.readings.to_numpy(float)
    rate = np.ones(readings.shape[1])
    errors: list[tuple[str, Array]] = []
    lines = _lines(survey)
    if lines:
        readings = readings.copy()
    for name, line in lines.items():
        mine = np.array([one.gauge == name for one in survey.observations])
        if not mine.any():
            continue
        away = readings[:, mine] - line.at
        factor = freedom_factor(line.dof)
        for offset, slope in line.independent_parts():
            change = np.zeros(readings.shape)
            change[:, mine] = factor * (offset + slope * away)
            errors.append((name, change))
        readings[:, mine] += line.correction(readings[:, mine])
        rate[mine] = 1.0 + line.slope
    return Calibrated(readings, rate, tuple(errors))


def calibration_sentences(survey: Survey) -> tuple[list[str], list[str]]:
    """Return what is to be said of the calibrations: (assumptions, cautions)."""
    assumed, cautions = [], []
    for gauge in survey.gauges:
        if gauge.calibration is None:
            continue
        line = _lines(survey)[gauge.name]
        points = len(gauge.calibration.reading)
        assumed.append(
            f"The readings of gauge {gauge.name!r} are corrected by the straight line through the {points} points of "
            f"{gauge.calibration.file}, with its uncertainty from their scatter, times {freedom_factor(line.dof):.3g} for its "
            f"{line.dof} degree{'s' * (line.dof != 1)} of freedom (Student's t over the normal at 95 %)."
        )
        beyond = [
            f"{run}:{one.label}"
            for i, one in enumerate(survey.observations)
            if one.gauge == gauge.name
            for run, reading in zip(survey.runs["run"], survey.readings.iloc[:, i], strict=True)
            if reading < line.low or reading > line.high
        ]
        if beyond:
            shown = ", ".join(beyond[:6]) + (f" and {len(beyond) - 6} more" if len(beyond) > 6 else "")
            cautions.append(
                f"Readings of gauge {gauge.name!r} lie outside the range of its calibration in {gauge.calibration.file} "
                f"({shown}): the straight line is carried on beyond it. Calibrate over the whole range that is used."
            )
    return assumed, cautions
