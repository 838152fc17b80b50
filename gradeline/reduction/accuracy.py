"""The accuracy class of a pressure gauge as errors that all its readings share."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gradeline.quantities import Measured
from gradeline.quantities.phrases import told_once
from gradeline.survey import Gauge, Survey

__all__ = ["accuracy_errors", "accuracy_sentences"]

Array = NDArray[np.float64]


def _number(gauge: Gauge, key: str) -> float | None:
    given = gauge.settings.get(key)
    return given.value if isinstance(given, Measured) else None


def accuracy_errors(gauge: Gauge, readings: Array) -> list[tuple[str, Array]]:
    """Return independent errors of standard size that a gauge's accuracy class allows.

    Parameters
    ----------
    gauge : Gauge
        Its ``accuracy_of_full_scale`` with ``full_scale``, or its ``accuracy_of_reading``.
    readings : (R, m) array
        Its readings, Pa.

    Returns
    -------
    list of (str, array)
        The name of each error and the change of the readings, Pa. A class is a limit of error a, taken as a
        rectangular distribution, u = a/√3 (JCGM 100, 4.3.7). Of full scale, half of the variance at full scale is the
        gauge's zero, which cancels between taps that it reads, and half its span.
    """
    found: list[tuple[str, Array]] = []
    full, of_full = _number(gauge, "full_scale"), _number(gauge, "accuracy_of_full_scale")
    if full is not None and of_full is not None:
        half = of_full / np.sqrt(6.0)
        found.append(("gauge zero", np.full_like(readings, half * full)))
        found.append(("gauge scale", half * readings))
    of_reading = _number(gauge, "accuracy_of_reading")
    if of_reading is not None:
        found.append(("gauge scale", of_reading / np.sqrt(3.0) * readings))
    return found


def accuracy_sentences(survey: Survey) -> list[str]:
    """Return what is assumed of the accuracy classes."""
    return told_once(
        (
            gauge.name,
            "The accuracy class of {gauge} is a limit of error: u is the limit over √3"
            + (
                ", half of its variance an error of the zero and half one of the span."
                if "accuracy_of_full_scale" in gauge.settings
                else ", an error of the scale."
            ),
        )
        for gauge in survey.gauges
        if {"accuracy_of_full_scale", "accuracy_of_reading"} & set(gauge.settings)
    )
