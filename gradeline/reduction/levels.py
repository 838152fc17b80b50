"""The levels that are free in each run: that of the line, and that of each gauge whose columns stand under unknown pressure."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.survey import Survey

__all__ = ["is_relative", "level_columns"]

Array = NDArray[np.float64]


def _floating(survey: Survey) -> NDArray[np.object_]:
    """The gauge of each observation whose level is not known, None for the others."""
    floats = {gauge.name for gauge in survey.gauges if gauge.floats}
    return np.array([one.gauge if one.gauge in floats else None for one in survey.observations], dtype=object)


def is_relative(survey: Survey) -> bool:
    """Return whether no gauge tells the level of the line, so that only slopes and differences stand."""
    floating = _floating(survey)
    return not any(
        one.tap_2 is None and name is None for one, name in zip(survey.observations, floating, strict=True)
    )


def level_columns(survey: Survey) -> Array:
    """Return which free level each observation stands on.

    Parameters
    ----------
    survey : Survey
        Its observations and gauges.

    Returns
    -------
    (n, m) array
        First the line's level: 1 for a head, 0 for a difference. Then a column for each gauge that floats; where no
        gauge tells the line's level the first that floats stands for it and has no column of its own.
    """
    level = np.array([float(one.tap_2 is None) for one in survey.observations])
    floating = _floating(survey)
    names = [name for name in dict.fromkeys(floating) if name is not None]
    own = names[1:] if is_relative(survey) else names
    return np.column_stack([level, *((floating == name).astype(float) for name in own)])
