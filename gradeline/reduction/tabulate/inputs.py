"""What was put in: the statements of the survey, the choices of the caller, the readings as they were read."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd

from gradeline.quantities import Measured
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.flow import flow_rows
from gradeline.reduction.tabulate.frames import frame
from gradeline.survey import GAUGE_KINDS, Gauge, Pressure, Stated, Survey

__all__ = ["input_table", "raw_reading_table", "stated_reach_table", "stated_tap_table"]

_Row = tuple[str, str, str, str | None, str | None, float | None, float | None]

#: A dimension of `gradeline.quantities` and how values of it are shown.
_SHOWN = {
    "length": "length",
    "pressure": "pressure",
    "gas pressure": "pressure",
    "angle": "angle",
    "temperature": "temperature",
    "density": "density",
    "dimensionless": "relative",
}
_UNITS = {"surface tension": ", N/m", "thermal expansion": ", 1/K"}
#: A small length is shown in a smaller unit than a long one.
_SMALL = {"length": "small head", "pressure": "pressure"}


def input_table(
    survey: Survey,
    *,
    level: float,
    correct: str,
    keep_all: bool,
    exclude: Sequence[str],
    unjudged: str | None,
    line_unjudged: str | None,
) -> pd.DataFrame:
    """Return what the survey and the caller stated, a missing value where nobody stated one.

    Parameters
    ----------
    survey : Survey
        Its fluid, site, fittings, gauges and ``[uncertainty]``.
    level, correct, keep_all, exclude
        As `gradeline.reduce` was called.
    unjudged : str or None
        Why single readings were not judged; None where they were.
    line_unjudged : str or None
        Why taps and line were not judged over all runs; None where they were.
    """
    rows = [
        *_medium(survey),
        *_fittings(survey),
        *_side_valves(survey),
        *(row for gauge in (*survey.gauges, *survey.flow_gauges) for row in _gauge(gauge)),
        *flow_rows(survey.flow),
        *_stated(survey),
        ("options", "", "level of the intervals", None, "relative", level, None),
        (
            "options",
            "",
            "correction by static runs",
            {
                "static": "tap offsets",
                "offsets": "tap offsets, those of the flowing runs too",
                "none": "none",
            }[correct],
            None,
            None,
            None,
        ),
        ("options", "", "left out by hand", ", ".join(exclude) or "nothing", None, None, None),
        (
            "options",
            "",
            "flagged single readings",
            "kept in the fits" if keep_all else "left out",
            None,
            None,
            None,
        ),
        (
            "options",
            "",
            "single readings",
            f"not judged: {unjudged}" if unjudged else "judged",
            None,
            None,
            None,
        ),
        (
            "options",
            "",
            "taps and line over all runs",
            f"not judged: {line_unjudged}" if line_unjudged else "judged",
            None,
            None,
            None,
        ),
    ]
    columns = list(DRAWING_TABLES["inputs"])
    return frame("inputs", {name: [row[n] for row in rows] for n, name in enumerate(columns)})


def _measured(group: str, name: str, what: str, quantity: str, value: Measured) -> _Row:
    return group, name, what, None, quantity, value.value, value.u


def _medium(survey: Survey) -> list[_Row]:
    fluid, site = survey.fluid, survey.site
    rows: list[_Row] = [("fluid", fluid.name, "name", fluid.name, None, None, None)]
    for what, quantity, value in (
        ("density", "density", fluid.density),
        ("viscosity", "viscosity", fluid.viscosity),
        ("kinematic viscosity", "kinematic viscosity", fluid.kinematic_viscosity),
    ):
        if value is not None:
            rows.append(_measured("fluid", fluid.name, what, quantity, value))
    for at, value in fluid.viscosity_at:
        what = f"kinematic viscosity at {at - 273.15:g} °C"
        rows.append(_measured("fluid", fluid.name, what, "kinematic viscosity", value))
    if fluid.expansion is not None and fluid.density_temperature is not None:
        rows.append(_measured("fluid", fluid.name, "expansion, 1/K", "number", fluid.expansion))
        rows.append(("fluid", fluid.name, "density at", None, "temperature", fluid.density_temperature, None))
    if fluid.line_pressure is not None:
        rows.append(
            _measured("fluid", fluid.name, "line pressure, absolute", "pressure", fluid.line_pressure)
        )
    if fluid.table is not None:
        rows.append(("fluid", fluid.name, "properties", fluid.table.file, None, None, None))
    if site.gravity is not None:
        rows.append(_measured("site", "", "gravity", "gravity", site.gravity))
    if site.latitude is not None:
        rows.append(("site", "", "latitude", None, "angle", site.latitude, None))
    if site.altitude is not None:
        rows.append(("site", "", "altitude", None, "length", site.altitude, None))
    return rows


def _fittings(survey: Survey) -> list[_Row]:
    rows: list[_Row] = []
    for fitting in survey.fittings:
        if fitting.kind is not None:
            rows.append(("fitting", fitting.name, "kind", fitting.kind, None, None, None))
        rows.append(("fitting", fitting.name, "at", None, "chainage", fitting.at, None))
        if fitting.length:
            rows.append(("fitting", fitting.name, "length", None, "length", fitting.length, None))
        if fitting.loss_coefficient is None:
            rows.append(("fitting", fitting.name, "loss coefficient", "to be fitted", None, None, None))
        else:
            rows.append(
                _measured("fitting", fitting.name, "loss coefficient", "number", fitting.loss_coefficient)
            )
    return rows


def _side_valves(survey: Survey) -> list[_Row]:
    rows: list[_Row] = []
    for valve in survey.side_valves:
        rows.append(("side valve", valve.name, "where", valve.where, None, None, None))
        rows.append(("side valve", valve.name, "state", valve.state, None, None, None))
    return rows


def _gauge(gauge: Gauge) -> list[_Row]:
    kind = GAUGE_KINDS[gauge.kind]
    rows: list[_Row] = [("gauge", gauge.name, "kind", gauge.kind, None, None, None)]
    for key, value in gauge.settings.items():
        what = key.replace("_", " ")
        if isinstance(value, str):
            rows.append(("gauge", gauge.name, what, value, None, None, None))
            continue
        known = kind.keys.get(key)
        quantity = _SHOWN.get(known.dimension, "number") if known is not None else "number"
        dimension = known.dimension if known is not None else ""
        what += " (absolute)" if isinstance(value, Pressure) and value.absolute else _UNITS.get(dimension, "")
        rows.append(
            _measured("gauge", gauge.name, what, "diameter" if key.endswith("bore") else quantity, value)
        )
    if gauge.calibration is not None:
        rows.append(("gauge", gauge.name, "calibration", gauge.calibration.file, None, None, None))
    for place, leg in enumerate(gauge.legs, start=1):
        ends = [
            end if isinstance(end, str) else f"{end:g} m" + (f" ± {1000 * u:.2g} mm" if u else "")
            for end, u in ((leg.start, leg.start_u), (leg.end, leg.end_u))
        ]
        text = f"{leg.fluid} from {ends[0]} to {ends[1]}"
        rows.append(("gauge", gauge.name, f"leg {place}", text, None, None, None))
    small = _SMALL[kind.reading]
    if gauge.span is not None:
        rows += [
            ("gauge", gauge.name, f"range, {end}", None, small, value, None)
            for end, value in zip(("from", "to"), gauge.span, strict=True)
        ]
    for what, quantity, u in (
        ("u of a reading", small, gauge.reading_u),
        ("resolution", small, gauge.resolution),
        ("u of the zero", small, gauge.zero_u),
        ("u of the scale", "relative", gauge.scale_u),
    ):
        rows.append(("gauge", gauge.name, what, None, quantity, u, None))
    return rows


def _stated(survey: Survey) -> list[_Row]:
    stated = survey.stated
    kinds = {GAUGE_KINDS[gauge.kind].reading for gauge in survey.gauges}
    rows: list[tuple[str, str, float | Stated | None]] = []
    if stated.reading is not None or "length" in kinds:
        rows.append(("one reading, random", "small head", stated.reading))
    if stated.reading_pressure is not None or "pressure" in kinds:
        rows.append(("one reading of pressure, random", "pressure", stated.reading_pressure))
    rows += [
        ("chainage of a tap", "small head", stated.chainage),
        ("elevation of a tap", "small head", stated.elevation),
        ("flow of a run, random", "flow", stated.flow),
        ("flow, all runs alike", "relative", stated.flow_scale),
        ("temperature, all runs alike", "temperature difference", stated.temperature),
        ("temperature of a run, random", "temperature difference", stated.temperature_run),
        ("friction factor by the law", "relative", stated.friction_law),
    ]
    found: list[_Row] = []
    for what, quantity, u in rows:
        if isinstance(u, Stated):
            found.append(("stated", "", what, None, "relative" if u.relative else quantity, u.value, None))
        else:
            found.append(("stated", "", what, None, quantity, u, None))
    return found


def stated_reach_table(survey: Survey) -> pd.DataFrame:
    """Return the reaches as the survey states them."""
    rows: dict[str, list[Any]] = {
        "reach": [reach.name for reach in survey.reaches],
        "start": [reach.start for reach in survey.reaches],
        "end": [reach.end for reach in survey.reaches],
        "diameter": [reach.diameter.value for reach in survey.reaches],
        "diameter_u": [reach.diameter.u for reach in survey.reaches],
        "wall": [reach.wall for reach in survey.reaches],
    }
    return frame("stated_reaches", rows)


def stated_tap_table(survey: Survey) -> pd.DataFrame:
    """Return the taps as the survey states them, with their own uncertainties alone."""
    keys = {"tap": "name"}
    return frame(
        "stated_taps",
        {
            column: [getattr(tap, keys.get(column, column)) for tap in survey.taps]
            for column in DRAWING_TABLES["stated_taps"]
        },
    )


def raw_reading_table(survey: Survey) -> pd.DataFrame:
    """Return every reading as it was read (the mean of its repeats), SI, and how many repeats it has."""
    labels = np.array([one.label for one in survey.observations], dtype=object)
    names = survey.runs["run"].to_numpy(object)
    return frame(
        "raw_readings",
        {
            "run": np.repeat(names, len(labels)),
            "tap": np.tile(labels, len(names)),
            "reading": survey.readings.to_numpy(float).ravel(),
            "repeats": survey.repeats.to_numpy(float).ravel(),
        },
    )
