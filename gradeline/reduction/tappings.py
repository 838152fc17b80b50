"""The difference of heads between the tappings of a flow's meter, by the gauges of the survey and the heads they give.

The meter is a line of its own with two taps, its rows are its runs: so every gauge kind, its calibration, its class, its
fluids and their errors enter by the same functions as those of the line.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.errors import Problem, SurveyError
from gradeline.quantities import Measured
from gradeline.reduction.accuracy import accuracy_sentences
from gradeline.reduction.calibrations import calibration_sentences
from gradeline.reduction.heads import heads_of
from gradeline.reduction.media import media_of
from gradeline.survey import GAUGE_KINDS, Observation, Reach, Survey, Tap

__all__ = ["Tappings", "tapping_heads", "tapping_survey"]

Array = NDArray[np.float64]

_UPSTREAM, _DOWNSTREAM = "upstream", "downstream"
#: A change of the difference below this part of it is rounding.
_NO_EFFECT = 1e-12


@dataclass(frozen=True)
class Tappings:
    """What the gauges show in N flowing rows.

    Parameters
    ----------
    head : (N,) array
        Upstream less downstream, m of flowing fluid, above 0.
    head_u : (N,) array
        Standard uncertainty of each from its single readings, random, m; 0 where nobody stated one.
    errors : tuple of (str, str, (N,) array)
        The name and the subject of each shared input, and what one standard uncertainty of it changes, m.
    assumptions, cautions : tuple of str
        What is to be said of the gauges.
    """

    head: Array
    head_u: Array
    errors: tuple[tuple[str, str, Array], ...] = ()
    assumptions: tuple[str, ...] = ()
    cautions: tuple[str, ...] = ()


def tapping_survey(survey: Survey, flows: NDArray[np.bool_]) -> Survey:
    """Return the meter as a line with two taps and a run for each flowing row.

    Parameters
    ----------
    survey : Survey
        With `flow_gauges`.
    flows : bool array
        Which rows of its `flow_readings` flow.
    """
    table = survey.flow_readings[flows]
    labels = _labels(table)
    temperature = survey.runs.set_index("run")["temperature"].reindex(table["run"]).to_numpy(float)
    rise = survey.flow.settings.get("tapping_rise")
    rise = rise if isinstance(rise, Measured) else Measured(0.0)
    observations, readings, levels = _observed(survey, table)
    count = np.ones(readings.shape, dtype=int)
    frames = [
        pd.DataFrame(values, index=labels, columns=[one.label for one in observations])
        for values in (readings, count, np.full(readings.shape, np.nan))
    ]
    return Survey(
        title=survey.title,
        source=survey.source,
        reaches=(Reach("meter", 0.0, 1.0, Measured(1.0), ""),),
        taps=(
            Tap(_UPSTREAM, 0.0, gauge=observations[0].gauge, elevation_u=0.0),
            Tap(_DOWNSTREAM, 1.0, rise.value, observations[-1].gauge, elevation_u=rise.u or 0.0),
        ),
        gauges=survey.flow_gauges,
        observations=observations,
        runs=pd.DataFrame(
            {"run": pd.Series(labels, dtype=object), "flow": np.nan, "temperature": temperature, "repeats": 1}
        ),
        readings=frames[0],
        repeats=frames[1],
        spreads=frames[2],
        fluid=survey.fluid,
        site=survey.site,
        stated=survey.stated,
        levels=None if levels is None else levels.set_axis(labels),
    )


def _labels(table: pd.DataFrame) -> list[str]:
    """A label for each row: its run, and where that is repeated its row as well."""
    again = table["run"].duplicated(keep=False)
    return [
        f"{run} (row {line})" if more else str(run)
        for run, line, more in zip(table["run"], table["line"], again, strict=True)
    ]


def _observed(
    survey: Survey, table: pd.DataFrame
) -> tuple[tuple[Observation, ...], Array, pd.DataFrame | None]:
    """The observations, a column of readings each, and the levels of a compound manometer."""
    gauges, settings = survey.flow_gauges, survey.flow.settings
    if "differential_gauge" not in settings:
        named = [str(settings[f"{tapping}_gauge"]) for tapping in (_UPSTREAM, _DOWNSTREAM)]
        pair = tuple(
            Observation(name, tapping) for name, tapping in zip(named, (_UPSTREAM, _DOWNSTREAM), strict=True)
        )
        return pair, table[[f"{one.tap} tapping" for one in pair]].to_numpy(float), None
    (gauge,) = gauges
    kind = GAUGE_KINDS[gauge.kind]
    one = Observation(gauge.name, _UPSTREAM, _DOWNSTREAM)
    if kind.legs:
        levels = table[[name for name in table.columns if name.startswith(f"{gauge.name} ")]]
        return (one,), levels.to_numpy(float)[:, :1], levels
    if gauge.name in table.columns:
        return (one,), table[[gauge.name]].to_numpy(float), None
    first, second = (table[f"{gauge.name} {limb}"].to_numpy(float) for limb in kind.limbs)
    return (replace(one, read_twice=True),), (first - second)[:, None], None


def tapping_heads(survey: Survey, flows: NDArray[np.bool_]) -> Tappings:
    """Work out the difference of heads between the tappings.

    Parameters
    ----------
    survey : Survey
        With `flow_gauges`.
    flows : bool array
        Which rows of its `flow_readings` flow.

    Returns
    -------
    Tappings
        For the flowing rows in their order.

    Raises
    ------
    SurveyError
        Where a row shows no higher head upstream.
    """
    if not flows.any():
        return Tappings(np.zeros(0), np.zeros(0))
    meter = tapping_survey(survey, flows)
    heads = heads_of(meter, media_of(meter))
    # Upstream less downstream, or the one observed difference as it is.
    sign = np.array([1.0, -1.0])[: len(meter.observations)]
    head = heads.observed @ sign
    _check_rise(survey, flows, head)
    sizes = np.array([_reading_u(meter, one.gauge) for one in meter.observations])
    errors = []
    for one in heads.inputs:
        if one.heads is None:
            continue
        change = one.heads @ sign
        # What is left of errors that cancel between the two is rounding.
        if np.any(np.abs(change) > _NO_EFFECT * np.abs(one.heads).max(initial=0.0)):
            errors.append((one.name, one.subject, change))
    assumed, beyond = calibration_sentences(meter)
    return Tappings(
        head=head,
        head_u=np.sqrt((heads.spread**2) @ sizes**2),
        errors=tuple(errors),
        assumptions=(*_said(meter), *accuracy_sentences(meter), *assumed),
        cautions=(*beyond, *_unstated(meter)),
    )


def _check_rise(survey: Survey, flows: NDArray[np.bool_], head: Array) -> None:
    """A meter's throat has the lower head: otherwise something is joined or read the wrong way round."""
    table = survey.flow_readings[flows]
    wrong = np.flatnonzero(~(head > 0))
    names = " and ".join(dict.fromkeys(repr(gauge.name) for gauge in survey.flow_gauges))
    swapped = len(wrong) == len(head)
    remedy = (
        "it does so in every flowing row: the two sides look swapped, so exchange them or change the sign of the readings"
        if swapped
        else "mend the reading or the gauge, or say flow 0 where the run is static"
    )
    if len(wrong):
        raise SurveyError(
            [
                Problem(
                    str(table["file"].iloc[place]),
                    int(table["line"].iloc[place]),
                    None,
                    f"the flow's gauge {names} shows {head[place]:.4g} m of head from the upstream to the downstream tapping, "
                    f"where a flow lowers it, so that the difference is above 0; {remedy}",
                )
                for place in wrong[: 1 if swapped else None]
            ]
        )


def _reading_u(meter: Survey, name: str) -> float:
    """Standard uncertainty of one reading as stated, with its resolution, in the unit of the reading; 0 if unstated."""
    gauge = meter.gauge(name)
    stated = gauge.reading_u
    if stated is None:
        of_length = GAUGE_KINDS[gauge.kind].reading == "length"
        stated = meter.stated.reading if of_length else meter.stated.reading_pressure
    return float(np.hypot(stated or 0.0, (gauge.resolution or 0.0) / np.sqrt(12.0)))


def _said(meter: Survey) -> list[str]:
    names = list(dict.fromkeys(one.gauge for one in meter.observations))
    kinds = " and ".join(dict.fromkeys(meter.gauge(name).kind for name in names))
    quoted = " and ".join(map(repr, names))
    rise = meter.tap(_DOWNSTREAM).elevation
    level = "at one level" if rise == 0 else f"the downstream one {1000 * rise:.4g} mm higher"
    said = [
        f"The flow's differential is read by gauge {quoted} ({kinds}) between the meter's tappings, {level}."
    ]
    if len(meter.observations) > 1 and GAUGE_KINDS[meter.gauge(names[0]).kind].reading == "pressure":
        said.append("The gauges at the meter's tappings are taken to stand at the level of their tappings.")
    return said


def _unstated(meter: Survey) -> list[str]:
    said = []
    nothing = "contributes nothing to the results"
    for gauge in meter.gauges:
        if not _reading_u(meter, gauge.name):
            said.append(
                f"The uncertainty of a reading of the flow's gauge {gauge.name!r} is not stated: it {nothing} beyond what "
                "repeats show."
            )
        classed = {"accuracy_of_full_scale", "accuracy_of_reading"} & set(gauge.settings)
        both = gauge.settings.get("zero_reading")
        zero = gauge.zero_u or classed or (isinstance(both, Measured) and both.u)
        scale = gauge.scale_u or classed or gauge.calibration is not None
        missing = [word for word, known in (("zero", zero), ("scale", scale)) if not known]
        if missing:
            said.append(
                f"The uncertainty of the {' and of the '.join(missing)} of the flow's gauge {gauge.name!r} is not stated: it "
                f"{nothing}."
            )
    filled = {gauge.settings.get(key) for gauge in meter.gauges for key in ("gauge_fluid", "line_fluid")}
    filled |= {leg.fluid for gauge in meter.gauges for leg in gauge.legs}
    if any("mercury" in str(name) for name in filled):
        said.append(
            "Mercury is poisonous, as a vapour too: fill and bleed such lines over a tray, in moving air, and have a spill kit "
            "at hand."
        )
    return said
