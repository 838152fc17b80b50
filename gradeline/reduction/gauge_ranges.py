"""What each gauge can show, as head, and which gauge fluid would suit the survey's own differences."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.quantities import Measured
from gradeline.reduction.corrections import static_corrections
from gradeline.reduction.heads import Heads, heads_of
from gradeline.reduction.media import fluid_density, media_of
from gradeline.reduction.tappings import tapping_survey
from gradeline.survey import GAUGE_KINDS, Gauge, Survey

__all__ = ["FluidChoice", "GaugeRange", "gauge_ranges"]

Array = NDArray[np.float64]

#: Height of a board where the survey states none, m.
_BOARD = 1.0
_ROOM = 293.15
#: Gauge fluids to choose from beside what the survey names, kg/m³ at 20 °C: round densities of common ones.
_LIQUIDS = {"an oil of 800 kg/m³ above": 800.0, "a liquid of 1600 kg/m³ below": 1600.0}


@dataclass(frozen=True)
class FluidChoice:
    """A gauge fluid and what it makes of the survey's differences.

    Parameters
    ----------
    fluid : str
        Which one, and whether it lies above or below.
    largest, smallest : float
        Deflection for the largest and the smallest difference along the scale, m.
    step : float
        What one step of the scale is of the smallest difference, dimensionless; NaN where no resolution is known.
    fits : bool
        Whether the largest difference stays on the board.
    """

    fluid: str
    largest: float
    smallest: float
    step: float
    fits: bool


@dataclass(frozen=True)
class GaugeRange:
    """What a gauge can show.

    Parameters
    ----------
    gauge, kind : str
        Its name and kind.
    low, high : float
        Lowest and highest head (or difference) that its scale shows, m; NaN where no range is stated.
    resolution : float
        Its smallest step as head, m; NaN where none is stated.
    smallest, largest : float
        The differences of head over its taps in the flowing runs, offsets of the static runs taken off, m; NaN where there are none.
    board : float
        Height of the board that the fluids are judged by, m.
    choices : tuple of FluidChoice
        Gauge fluids, the one that suits first.
    """

    gauge: str
    kind: str
    low: float
    high: float
    resolution: float
    smallest: float
    largest: float
    board: float
    choices: tuple[FluidChoice, ...]


def gauge_ranges(survey: Survey) -> tuple[GaugeRange, ...]:
    """Work out what each gauge of a survey can show.

    Parameters
    ----------
    survey : Survey
        Its gauges and readings.

    Returns
    -------
    tuple of GaugeRange
        In the order of the gauges, those of the flow's meter last; those that read nothing are left out.
    """
    if survey.flow_gauges:
        run = survey.flow_readings["run"]
        flows = survey.runs.set_index("run")["flow"].reindex(run).to_numpy(float) != 0
        line = gauge_ranges(replace(survey, flow_gauges=()))
        return (*line, *gauge_ranges(tapping_survey(survey, flows))) if flows.any() else line
    media = media_of(survey)
    heads = heads_of(survey, media)
    corrected = static_corrections(
        heads,
        survey.runs["flow"].to_numpy(float) == 0,
        survey.repeats.to_numpy(float),
        apply=True,
        excluded=np.zeros(heads.observed.shape, dtype=bool),
    ).heads
    density = float(np.mean(media.density))
    return tuple(
        _range_of(survey, gauge, heads, corrected, density)
        for gauge in survey.gauges
        if any(one.gauge == gauge.name for one in survey.observations)
    )


def _range_of(survey: Survey, gauge: Gauge, heads: Heads, corrected: Heads, density: float) -> GaugeRange:
    mine = np.array([one.gauge == gauge.name for one in survey.observations])
    gain, observed = heads.gain[:, mine], heads.observed[:, mine]
    known = np.isfinite(gain)
    size = float(np.abs(gain[known]).mean()) if known.any() else np.nan
    span = _span(gauge)
    low = high = np.nan
    differential = GAUGE_KINDS[gauge.kind].differential
    if span is not None and np.isfinite(observed).any():
        if differential and GAUGE_KINDS[gauge.kind].reading == "length":
            high = size * (span[1] - span[0])
            low = 0.0 if "area_ratio" in gauge.settings else -high  # of a well-type one limb is read
        else:
            readings = survey.readings.to_numpy(float)[:, mine]
            ends = [observed + gain * (end - readings) for end in span]
            low, high = float(np.nanmean(ends[0])), float(np.nanmean(ends[1]))
    flowing = survey.runs["flow"].to_numpy(float) != 0  # one still to be worked out from its readings is NaN
    smallest, largest = _differences(corrected.observed[flowing][:, mine], differential=differential)
    steps = GAUGE_KINDS[gauge.kind].reading == "length"
    board = span[1] - span[0] if span is not None and steps else _BOARD
    step = gauge.resolution if gauge.resolution and steps else np.nan
    slope = gauge.settings.get("inclination")
    rise = float(np.sin(slope.value)) if isinstance(slope, Measured) else 1.0
    return GaugeRange(
        gauge=gauge.name,
        kind=gauge.kind,
        low=low,
        high=high,
        resolution=np.nan if gauge.resolution is None else gauge.resolution * size,
        smallest=smallest,
        largest=largest,
        board=board,
        choices=_choices(density, smallest, largest, board, step, rise),
    )


def _span(gauge: Gauge) -> tuple[float, float] | None:
    if gauge.span is not None:
        return gauge.span
    full = gauge.settings.get("full_scale")
    if not isinstance(full, Measured):
        return None
    return (-full.value if GAUGE_KINDS[gauge.kind].differential else 0.0), full.value


def _differences(observed: Array, *, differential: bool) -> tuple[float, float]:
    """Smallest and largest difference of head over the taps in any run, m; readings of 0 do not count."""
    if not observed.size:
        return np.nan, np.nan
    if differential:
        found = np.abs(observed)
    else:
        known = np.isfinite(observed)
        high = np.where(known, observed, -np.inf).max(axis=1)
        low = np.where(known, observed, np.inf).min(axis=1)
        found = np.where(known.sum(axis=1) > 1, high - low, np.nan)
    found = found[np.isfinite(found) & (found > 0)]
    return (float(found.min()), float(found.max())) if found.size else (np.nan, np.nan)


def _choices(
    density: float, smallest: float, largest: float, board: float, step: float, rise: float
) -> tuple[FluidChoice, ...]:
    """Gauge fluids in order: of those that keep the largest difference on the board the one that magnifies most."""
    if not np.isfinite(largest):
        return ()
    room = np.array([_ROOM])
    fluids = {
        "air above": float(fluid_density("air", room)[0]),
        "mercury below": float(fluid_density("mercury", room)[0]),
        **_LIQUIDS,
    }
    found = []
    for name, own in fluids.items():
        difference = density - own if name.endswith("above") else own - density
        if difference <= 0:
            continue
        deflection = density / difference / rise
        found.append(
            FluidChoice(
                fluid=name,
                largest=largest * deflection,
                smallest=smallest * deflection,
                step=step / (smallest * deflection),
                fits=largest * deflection <= board,
            )
        )
    return tuple(sorted(found, key=lambda one: (not one.fits, -one.largest if one.fits else one.largest)))
