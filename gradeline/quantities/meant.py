"""Numbers that no survey can mean.

Beyond these sizes a unit or an exponent is wrong, and the arithmetic that follows would overflow: so they are refused where
they are read.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

__all__ = ["LARGEST", "beyond_meaning"]

#: Largest size of a value or an uncertainty, SI (own choice): a length of 10⁸ m is twice the Earth's circumference, a
#: flow of 10⁶ m³/s five times that of the largest river, a pressure of 10¹⁰ Pa far beyond any vessel's.
LARGEST: Mapping[str, float] = MappingProxyType(
    {"length": 1e8, "pressure": 1e10, "flow": 1e6, "temperature": 1e4, "temperature difference": 1e4}
)
_OTHERS = 1e12


def beyond_meaning(size: float, dimension: str) -> bool:
    """Return whether a value is too large to be meant.

    Parameters
    ----------
    size : float
        The value, SI; its sign does not matter.
    dimension : str
        A key of `DIMENSIONS`; one that is not in `LARGEST` may be up to 10¹².

    Returns
    -------
    bool
        True also for what is no number.

    Examples
    --------
    >>> beyond_meaning(6e6, "length"), beyond_meaning(-1e30, "length"), beyond_meaning(float("nan"), "flow")
    (False, True, True)
    """
    return not abs(size) <= LARGEST.get(dimension, _OTHERS)
