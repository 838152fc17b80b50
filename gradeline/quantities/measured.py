"""A value in SI units with its standard uncertainty."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["Measured"]


@dataclass(frozen=True)
class Measured:
    """A value in SI units and its standard uncertainty (k = 1).

    Parameters
    ----------
    value : float
        In SI units.
    u : float or None
        Standard uncertainty in the same unit; None where nobody stated one, which is not the same as zero.

    Examples
    --------
    >>> Measured(0.02664, 0.00003).relative_u
    0.0011261261261261261
    """

    value: float
    u: float | None = None

    @property
    def relative_u(self) -> float | None:
        """Standard uncertainty relative to the value; None where none was stated or the value is zero."""
        return None if self.u is None or self.value == 0 else self.u / abs(self.value)
