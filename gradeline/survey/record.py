"""What a logger's file held, in blocks short enough to find steady windows in and few enough to keep."""

from __future__ import annotations

import datetime
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

__all__ = ["Clock", "Record", "Target", "Window", "still"]

Array = NDArray[np.float64]

#: A mean flow below this share of the greatest may be a meter's zero, and below the smaller one is.
STILL, SURELY_STILL = 0.01, 0.001
#: Standard deviations of its samples that a meter's zero lies within.
_SCATTER = 3.0


@dataclass(frozen=True)
class Clock:
    """How a logger's file tells time.

    Parameters
    ----------
    begin : float
        The first time of the file: in s from the file's zero, of timestamps in s since 1970 (in UTC where they have a zone).
    unit : str
        Unit that the file counts time in; empty for timestamps.
    per_unit : float
        Seconds in that unit, s.
    zone : float or None
        Offset of the first timestamp from UTC, s; None where timestamps have no zone, and for plain numbers.
    """

    begin: float
    unit: str = ""
    per_unit: float = 1.0
    zone: float | None = None

    def told(self, seconds: float) -> str:
        """Return a time as the file tells it.

        Parameters
        ----------
        seconds : float
            From the beginning of the record, s.

        Returns
        -------
        str
            A number with its unit, or a timestamp of ISO 8601.

        Examples
        --------
        >>> Clock(0.0, "min", 60.0).told(90.0)
        '1.5 min'
        >>> Clock(1772359200.0, zone=7200.0).told(60.0)
        '2026-03-01T12:01:00+02:00'
        """
        at = self.begin + seconds
        if self.unit:
            return f"{round(at / self.per_unit, 6):.12g} {self.unit}"
        zone = datetime.timezone(datetime.timedelta(seconds=self.zone or 0.0))
        stamp = datetime.datetime(1970, 1, 1, tzinfo=datetime.UTC) + datetime.timedelta(seconds=round(at, 3))
        shown = stamp.astimezone(zone)
        if self.zone is None:
            shown = shown.replace(tzinfo=None)
        return shown.isoformat(timespec="milliseconds" if shown.microsecond else "seconds")


@dataclass(frozen=True)
class Window:
    """A stretch of a record whose mean is a run.

    Parameters
    ----------
    run : str
        Label of the run.
    start : float
        Its first moment, s from the beginning of the record.
    end : float
        The moment after its last, s.
    given : bool
        Whether ``runs.csv`` gives it; otherwise it was found.
    """

    run: str
    start: float
    end: float
    given: bool = True


@dataclass(frozen=True)
class Target:
    """What the means of a column are to a survey.

    Parameters
    ----------
    kind : {"run", "reading", "level", "flow reading"}
        A column of the runs, an observation, a level of a compound manometer, or what the flow's method reads.
    name : str
        Its name there.
    """

    kind: Literal["run", "reading", "level", "flow reading"]
    name: str


@dataclass(frozen=True)
class Record:
    """A logger's record in B blocks of C columns, SI.

    Parameters
    ----------
    file : str
        Name of the file.
    clock : Clock
        How it tells time.
    names : tuple of str
        Columns as in the file, without their units; of a gauge whose limbs were logged, its name.
    units : tuple of str
        As in the file.
    targets : tuple of Target
        What the column is to the survey.
    time_start, time_end : (B,) array
        First sample of each block, and the last with one interval behind it, s from the beginning of the record.
    count : (B, C) array
        Samples.
    mean, low, high : (B, C) array
        SI; NaN without samples.
    squares : (B, C) array
        Sum of squared deviations from the block's mean.
    window : (B,) int array
        Index of the window that holds the block, -1 outside all of them.
    windows : tuple of Window
        In the order of time; empty where they are still to be found.
    interval : float
        Usual time between two samples, s.
    gaps : tuple of (float, float)
        Where samples are missing: the last moment before and the first one after, s.
    drift : float
        Limit of the drift of the flow over a window that is to be found, dimensionless.
    least_length : float
        Of a window that is to be found, s.
    settle : float
        Left out after a change, s.
    rows : int
        Rows of the file.
    read : bool
        Whether the runs of the survey were worked out of it; what follows is empty until then.
    statistics : DataFrame
        For each window and column: ``window``, ``run``, ``column`` (index), ``mean``, ``u`` (of Student's t with
        ``dof``), ``widened_u`` (its normal equivalent), ``scatter``, ``samples``, ``effective``, ``batch_u``, ``reason``, SI.
    faults : DataFrame
        ``column`` (None: all), ``kind``, ``start``, ``end`` (s), ``size`` (SI).
    refused : tuple of str
        Stretches that are no steady windows, and why.
    """

    file: str
    clock: Clock
    names: tuple[str, ...]
    units: tuple[str, ...]
    targets: tuple[Target, ...]
    time_start: Array
    time_end: Array
    count: Array
    mean: Array
    low: Array
    high: Array
    squares: Array
    window: NDArray[np.intp]
    windows: tuple[Window, ...]
    interval: float
    gaps: tuple[tuple[float, float], ...]
    drift: float
    least_length: float
    settle: float
    rows: int
    read: bool = False
    statistics: pd.DataFrame = field(default_factory=pd.DataFrame)
    faults: pd.DataFrame = field(default_factory=pd.DataFrame)
    refused: tuple[str, ...] = ()


def still(mean: Array, scatter: Array) -> NDArray[np.bool_]:
    """Return in which windows nothing flows: a meter's zero is seldom 0.

    Parameters
    ----------
    mean : (W,) array
        Mean of the flow, or of what it is read from, over each window, in one unit.
    scatter : (W,) array
        Standard deviation of its samples there.

    Returns
    -------
    (W,) bool array
        Within 1 % of the greatest mean and three standard deviations of 0, or within 0.1 % of the greatest.

    Examples
    --------
    >>> still(np.array([0.002, 1.0, -0.0001]), np.array([0.003, 0.01, 0.0]))
    array([ True, False,  True])
    """
    size = np.abs(np.nan_to_num(mean))
    greatest = size.max(initial=0.0)
    near = (size <= STILL * greatest) & (size <= _SCATTER * np.nan_to_num(scatter))
    return np.asarray((near | (size <= SURELY_STILL * greatest)) & np.isfinite(mean))
