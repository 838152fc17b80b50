"""What a formula may be given: only values above zero."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["positive"]

Array = npt.NDArray[np.float64]


def positive(value: npt.ArrayLike) -> Array:
    """Return float64 with NaN in place of what is not above zero, so that no later step warns.

    Parameters
    ----------
    value : array_like
        In any SI unit.

    Returns
    -------
    ndarray
        In the same unit.

    Examples
    --------
    >>> print(positive([-1, 0, 2]))
    [nan nan  2.]
    """
    array = np.asarray(value, dtype=np.float64)
    return np.where(array > 0, array, np.nan)
