"""Standard uncertainties as a survey states them."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["Stated", "StatedUncertainties"]


@dataclass(frozen=True)
class Stated:
    """A stated standard uncertainty, absolute (SI) or relative to the value.

    Examples
    --------
    >>> Stated(0.004, relative=True).of(0.5)
    0.002
    """

    value: float
    relative: bool = False

    def of(self, value: float) -> float:
        """Return the standard uncertainty of `value`, in the unit of `value`."""
        return abs(value) * self.value if self.relative else self.value


@dataclass(frozen=True)
class StatedUncertainties:
    """The table ``[uncertainty]``: standard uncertainties, None where nobody stated one.

    ``reading`` (m or Pa by the gauge; one reading, random), ``chainage`` and ``elevation`` (m; one tap, the same in
    all runs), ``flow`` (one run, random), ``flow_scale`` (relative; all runs alike), ``temperature`` (K; all runs
    alike), ``temperature_run`` (K; random), ``friction_law`` (relative, of f). A reading uncertainty has a length
    and a pressure, since one survey may hold gauges of both kinds; the table states one of them.
    """

    reading: float | None = None
    reading_pressure: float | None = None
    chainage: float | None = None
    elevation: float | None = None
    flow: Stated | None = None
    flow_scale: float | None = None
    temperature: float | None = None
    temperature_run: float | None = None
    friction_law: float | None = None
