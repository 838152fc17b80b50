"""What a reduction assumes of its gauges, and what its reader must know of them."""

from __future__ import annotations

import numpy as np

from gradeline.quantities.phrases import told_once
from gradeline.reduction.accuracy import accuracy_sentences
from gradeline.reduction.calibrations import calibration_sentences
from gradeline.reduction.heads import Heads
from gradeline.reduction.levels import is_relative
from gradeline.survey import GAUGE_KINDS, Pressure, Survey

__all__ = ["gauge_assumptions", "gauge_cautions"]

#: With fewer flowing runs the sign of a deflection tells nothing of the limbs.
_FEWEST_RUNS = 2


def gauge_assumptions(survey: Survey) -> list[str]:
    """Return the sentences on what stands behind the readings of the gauges."""
    said: list[str] = []
    fluids = {str(gauge.settings.get("gauge_fluid", "")) for gauge in survey.gauges}
    fluids |= {leg.fluid for gauge in survey.gauges for leg in gauge.legs}
    if "mercury" in fluids:
        said.append(
            "Mercury: density by its volume's polynomial in temperature, 13 595.08 kg/m³ at 0 °C, at the gauge's own or "
            "the run's temperature."
        )
    said += [
        GAUGE_KINDS[gauge.kind].assumption.format(gauge=gauge.name)
        for gauge in survey.gauges
        if GAUGE_KINDS[gauge.kind].assumption
    ]
    each: list[tuple[str, str]] = []
    for gauge in survey.gauges:
        pressure = gauge.settings.get("gas_pressure")
        if isinstance(pressure, Pressure) and pressure.absolute:
            each.append(
                (
                    gauge.name,
                    "The gas pressure of {gauge} is absolute: the atmosphere beside it is taken as the standard one at the "
                    "site's altitude, which the weather changes by some 3 %.",
                )
            )
        if "gauge_fluid_density" in gauge.settings and "gauge_fluid_expansion" not in gauge.settings:
            each.append(
                (
                    gauge.name,
                    "The density of the gauge fluid of {gauge} is taken as the same at all temperatures.",
                )
            )
    said += told_once(each)
    assumed, _ = calibration_sentences(survey)
    return [*said, *accuracy_sentences(survey), *assumed]


def gauge_cautions(survey: Survey, heads: Heads) -> list[str]:
    """Return the cautions: levels that nobody knows, limbs the wrong way round, calibrations carried too far.

    Parameters
    ----------
    survey : Survey
        Its gauges and runs.
    heads : Heads
        Corrected by the static runs.
    """
    said: list[str] = []
    floats = [gauge.name for gauge in survey.gauges if gauge.floats]
    if floats:
        names = " and ".join(map(repr, floats))
        said.append(
            f"The gas pressure over the columns of gauge {names} is not known: the level of its columns is free in each "
            "run. Slopes and differences stand but for the gas's own weight, taken as that of the air outside (0.12 % for "
            "each bar above it); heads above datum do not."
        )
    if is_relative(survey):
        why = "under trapped gas of unknown pressure" if floats else "between two taps"
        said.append(
            f"Every gauge reads {why}, so no absolute head can be had: the grade lines are drawn from their fall alone, "
            "and pressures below atmospheric are not looked for. One open column or pressure gauge would tell the level."
        )
    said += _swapped(survey, heads)
    _, beyond = calibration_sentences(survey)
    return [*said, *beyond]


def _swapped(survey: Survey, heads: Heads) -> list[str]:
    """Differential gauges that show a fall upstream in every flowing run."""
    flowing = survey.runs["flow"].to_numpy(float) > 0
    found = []
    for i, one in enumerate(survey.observations):
        difference = heads.observed[flowing, i]
        difference = difference[np.isfinite(difference)]
        level_bore = one.tap_2 is not None and _same_bore(survey, one.tap, one.tap_2)
        if not level_bore or len(difference) < _FEWEST_RUNS or (difference >= 0).any():
            continue
        limbs = GAUGE_KINDS[survey.gauge(one.gauge).kind].limbs
        what = "limbs" if limbs else "two sides"
        found.append(
            f"Gauge {one.gauge!r} shows a higher head at the downstream tap {one.tap_2} in every flowing run: its {what} "
            f"look swapped. If {one.tap_2} is joined to its {'left limb' if limbs else 'high side'}, change the sign of its "
            "readings, or exchange the names of the limbs."
        )
    return found


def _same_bore(survey: Survey, tap: str, tap_2: str) -> bool:
    """Whether no change of bore lies between two taps, so that the head can only fall."""
    ends = sorted((survey.tap(tap).chainage, survey.tap(tap_2).chainage))
    passed = [one.diameter.value for one in survey.reaches if one.end > ends[0] and one.start < ends[1]]
    return len(set(passed)) <= 1
