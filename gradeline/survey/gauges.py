"""The gauges, and which taps each column of readings belongs to."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from gradeline.gauge_kinds import GAUGE_KINDS, Calibration, Leg
from gradeline.quantities import Measured

__all__ = ["Gauge", "Observation"]


@dataclass(frozen=True)
class Gauge:
    """An instrument that reads one or more taps.

    Parameters
    ----------
    name : str
        Its label, as in ``[gauge.NAME]``.
    kind : str
        A key of `GAUGE_KINDS`.
    settings : mapping
        The kind's own keys that were given, SI values as `Measured` or text.
    reading_u : float or None
        Standard uncertainty of one reading, random, in the unit of the reading (m or Pa).
    resolution : float or None
        Smallest step that can be read, in the unit of the reading.
    zero_u : float or None
        Standard uncertainty of the zero, the same in all runs, in the unit of the reading.
    scale_u : float or None
        Relative standard uncertainty of the scale, the same in all runs.
    span : tuple of float or None
        Lowest and highest reading of its scale, in the unit of the reading.
    legs : tuple of Leg
        Of a compound manometer, from the upstream tap on.
    calibration : Calibration or None
        What it showed at known values.
    gas_read : bool
        Whether the pressure of the gas over its columns was read in each run.
    """

    name: str
    kind: str
    settings: Mapping[str, Measured | str] = field(default_factory=dict)
    reading_u: float | None = None
    resolution: float | None = None
    zero_u: float | None = None
    scale_u: float | None = None
    span: tuple[float, float] | None = None
    legs: tuple[Leg, ...] = ()
    calibration: Calibration | None = None
    gas_read: bool = False

    @property
    def floats(self) -> bool:
        """Whether the level of its columns is not known, so that only their differences count."""
        key = GAUGE_KINDS[self.kind].level_key
        return key is not None and key not in self.settings and not self.gas_read

    @staticmethod
    def gas_column_of(name: str) -> str:
        """Return the column of `Survey.runs` with the gas pressure of the gauge called `name`."""
        return f"gas pressure {name}"


@dataclass(frozen=True)
class Observation:
    """One column of readings: a gauge at a tap, or between `tap` (upstream) and `tap_2` (downstream).

    `read_twice` says that each reading is the difference of two that were read from the scale one by one.
    """

    gauge: str
    tap: str
    tap_2: str | None = None
    read_twice: bool = False

    @property
    def label(self) -> str:
        """The tap, or the gauge of a differential reading: the name of its column of readings."""
        return self.tap if self.tap_2 is None else self.gauge
