"""The calibration of a gauge: a straight line through its corrections, with the uncertainty of what it predicts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.slope import fit_lines, project

__all__ = ["CalibrationLine", "fit_calibration"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class CalibrationLine:
    """A correction b(t) = y₁ + y₂ (t − t₀), to be added to a reading t.

    Parameters
    ----------
    offset : float
        y₁, in the unit of the reading.
    slope : float
        y₂, dimensionless.
    at : float
        t₀, in the unit of the reading.
    covariance : (2, 2) array
        Of y₁ and y₂, in units of the reading squared, of the reading, and dimensionless.
    scatter : float
        Standard deviation of one correction about the line, in the unit of the reading.
    dof : int
        Degrees of freedom.
    low, high : float
        The range that was calibrated, in the unit of the reading.
    """

    offset: float
    slope: float
    at: float
    covariance: Array
    scatter: float
    dof: int
    low: float
    high: float

    def correction(self, reading: Array) -> Array:
        """Return the correction at each reading, in its unit."""
        return np.asarray(self.offset + self.slope * (reading - self.at))

    def correction_u(self, reading: Array) -> Array:
        """Return the standard uncertainty of the correction at each reading, in its unit."""
        away = np.asarray(reading) - self.at
        (a, c), (_, b) = self.covariance
        return np.asarray(np.sqrt(a + 2 * c * away + b * away**2))

    def independent_parts(self) -> tuple[Array, Array]:
        """Return what two independent errors of standard size change of (y₁, y₂): the columns of a square root."""
        values, axes = np.linalg.eigh(self.covariance)
        root = axes * np.sqrt(np.maximum(values, 0.0))
        return root[:, 0], root[:, 1]


def fit_calibration(reading: Array, true: Array, *, at: float | None = None) -> CalibrationLine:
    """Fit a straight line to the corrections of a gauge.

    Parameters
    ----------
    reading : (n,) array
        What the gauge showed, in SI units: three values or more, not all the same.
    true : (n,) array
        The true values, in SI units.
    at : float, optional
        t₀, in SI units; the mean reading where it is left out, at which y₁ and y₂ are not correlated.

    Returns
    -------
    CalibrationLine
        Estimates, their covariance from the scatter about the line, and the range.

    Raises
    ------
    ValueError
        For fewer than three readings or readings that are all the same.

    References
    ----------
    JCGM 100:2008, H.3: least squares, s² = Σ (b − b̂)²/(n − 2).

    Examples
    --------
    >>> line = fit_calibration(np.array([0.0, 50.0, 100.0]), np.array([1.0, 51.5, 102.0]))
    >>> print(f"{line.offset:.2f} {line.slope:.3f}")
    1.50 0.010
    """
    reading, true = np.asarray(reading, dtype=float), np.asarray(true, dtype=float)
    if len(reading) < 3 or np.ptp(reading) <= 0:
        raise ValueError("a calibration takes three readings or more, not all the same")
    start = float(reading.mean()) if at is None else at
    away = reading - start
    # scaled by the range, so that readings in pascals and in metres are judged alike
    span = float(np.abs(away).max())
    design = np.column_stack([np.ones(len(away)), away / span])
    fits = fit_lines(
        (true - reading)[None], design, project(design, np.ones((1, 1)), np.ones((1, len(away)), dtype=bool))
    )
    dof = int(fits.dof[0])
    variance = float(fits.sum_of_squares[0]) / dof
    size = np.array([1.0, 1.0 / span])
    offset, slope = fits.parameters[0] * size
    return CalibrationLine(
        offset=float(offset),
        slope=float(slope),
        at=start,
        covariance=fits.projectors.covariance[0] * variance * np.outer(size, size),
        scatter=float(np.sqrt(variance)),
        dof=dof,
        low=float(reading.min()),
        high=float(reading.max()),
    )
