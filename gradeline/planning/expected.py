"""The survey that a plan is expected to bring home: readings without noise, by the law at an assumed roughness."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.errors import ReductionError
from gradeline.hydraulics.friction import (
    LAMINAR_LIMIT,
    TURBULENT_LIMIT,
    colebrook_white,
    kinetic_energy_coefficient,
    velocity_head,
)
from gradeline.reduction.chains import level_names
from gradeline.reduction.flow import metered_flow
from gradeline.reduction.heads import heads_of
from gradeline.reduction.line import Line, line_of
from gradeline.reduction.media import Media, media_of
from gradeline.reduction.offtakes import reach_flows
from gradeline.survey import GAUGE_KINDS, Gauge, Survey

__all__ = ["Expected", "Flow", "expected_survey", "flow_of", "span_of"]

Array = NDArray[np.float64]

#: Above the lowest head that is allowed, where no scale sets an upper limit, m.
_ABOVE = 0.1
#: Heads and readings are straight lines of each other within a kind; calibrations are too. Two rounds meet rounding.
_ROUNDS = 3
_ROUNDING = 1e-9


@dataclass(frozen=True)
class Flow:
    """The flow of all runs by the law.

    Parameters
    ----------
    velocity, reynolds, factor, slope : (R, K) array
        m/s; dimensionless; Darcy friction factor, NaN without flow; m/m.
    piezometric : (R, T) array
        Piezometric head at each tap less the energy head at the start of the line, m.
    """

    velocity: Array
    reynolds: Array
    factor: Array
    slope: Array
    piezometric: Array


@dataclass(frozen=True)
class Expected:
    """The survey with its expected readings.

    Parameters
    ----------
    survey : Survey
        Its readings are those of the law; empty where a column lies beyond its scale and cannot be read.
    readings : (R, n) array
        All readings, also those beyond a scale, SI.
    media : Media
        Of its runs.
    line : Line
        Its layout.
    flow : Flow
        Of its runs.
    level : (R,) array
        Piezometric head at the last tap, m.
    window : (R, 2) array
        Lowest and highest such head that keeps every column on its scale and above the crown, m; −inf and inf where
        nothing sets a limit. The first above the second: none does.
    heads : (R, T) array
        Piezometric heads at the taps, m.
    low, high : (n,) array
        Lowest and highest reading that each observation's gauge shows, SI; −inf and inf where none is stated.
    ends : (2, R, n) array
        The heads at those readings, the lower one first, m.
    tells_level : bool
        Whether any gauge tells the level of the line, not only differences.
    """

    survey: Survey
    readings: Array
    media: Media
    line: Line
    flow: Flow
    level: Array
    window: Array
    heads: Array
    low: Array
    high: Array
    ends: Array
    tells_level: bool

    @property
    def on_scale(self) -> NDArray[np.bool_]:
        """Whether each reading lies on its scale (R, n)."""
        return _on_scale(self.readings, self.low, self.high)

    @property
    def fits(self) -> NDArray[np.bool_]:
        """Whether each run can be set so that every tap, or pair of taps, has a gauge that can be read (R,)."""
        inside = self.on_scale
        places: dict[tuple[str, str | None], list[int]] = {}
        for n, one in enumerate(self.survey.observations):
            places.setdefault((one.tap, one.tap_2), []).append(n)
        read = np.stack([inside[:, mine].any(axis=1) for mine in places.values()], axis=1).all(axis=1)
        pressed = (self.heads >= self.crown - _ROUNDING).all(axis=1) | (not self.tells_level)
        return np.asarray(read & pressed)

    @property
    def crown(self) -> Array:
        """Elevation of the pipe's crown at each tap (T,), m."""
        return np.asarray(self.line.elevation + 0.5 * self.line.diameter[self.line.reach_of_tap])


def _on_scale(readings: Array, low: Array, high: Array) -> NDArray[np.bool_]:
    room = _ROUNDING * (1.0 + np.abs(readings))
    return np.asarray((readings >= low - room) & (readings <= high + room))


def flow_of(
    survey: Survey, line: Line, media: Media, roughness: Mapping[str, float], loss: Mapping[str, float]
) -> Flow:
    """Work out heads along the line by the law.

    Parameters
    ----------
    survey, line, media
        The line and its runs.
    roughness : mapping of str to float
        ε of each wall, m.
    loss : mapping of str to float
        K of each fitting whose K is to be fitted, dimensionless.

    Returns
    -------
    Flow
        f is that of the shape's laminar law below Re 2000, Colebrook–White's above 4000, and a straight line between,
        as α is: nobody can tell what flow does there.
    """
    runs = len(survey.runs)
    flowing = np.flatnonzero(survey.runs["flow"].to_numpy(float) > 0)
    velocity = np.zeros((runs, len(line.diameter)))
    velocity[flowing] = reach_flows(survey, flowing) / line.area
    reynolds = velocity * line.diameter / media.kinematic_viscosity[:, None]
    rough = np.array([roughness[reach.wall] for reach in survey.reaches]) / line.diameter
    constant = np.where(np.isfinite(line.laminar_constant), line.laminar_constant, 64.0)
    safe = np.maximum(reynolds, 1.0)
    turbulent = colebrook_white(safe, rough)
    share = np.clip((reynolds - LAMINAR_LIMIT) / (TURBULENT_LIMIT - LAMINAR_LIMIT), 0.0, 1.0)
    at_ends = constant / LAMINAR_LIMIT, colebrook_white(TURBULENT_LIMIT, rough)
    between = (1 - share) * at_ends[0] + share * at_ends[1]
    factor = np.where(share <= 0, constant / safe, np.where(share >= 1, turbulent, between))
    plain = velocity_head(velocity, media.gravity)
    slope = factor * plain / line.diameter
    kinetic = np.asarray(kinetic_energy_coefficient(safe, turbulent)) * plain
    coefficient = np.array(
        [
            loss[one.name] if one.loss_coefficient is None else one.loss_coefficient.value
            for one in line.fittings
        ]
    )
    lost = (plain[:, line.reference] * coefficient) @ line.passed.T if len(coefficient) else 0.0
    piezometric = -slope @ line.lengths.T - lost - kinetic[:, line.reach_of_tap]
    still = reynolds <= 0
    return Flow(velocity, reynolds, np.where(still, np.nan, factor), slope, np.asarray(piezometric))


def span_of(gauge: Gauge, *, twice: bool) -> tuple[float, float]:
    """Return the lowest and highest reading that a gauge shows, SI; −inf and inf where none is stated.

    A deflection is a difference of two places on the scale; `twice` says that both limbs are read. A scale beside open
    columns whose range is not stated begins at 0.
    """
    kind = GAUGE_KINDS[gauge.kind]
    span = gauge.span
    if span is None:
        full = gauge.settings.get("full_scale")
        if full is None or isinstance(full, str):
            begins = kind.reading == "length" and not kind.differential and not gauge.floats
            return (0.0 if begins and gauge.kind != "head" else -np.inf), np.inf
        span = (-full.value if kind.differential else 0.0), full.value
    if (
        kind.differential
        and kind.reading == "length"
        and not kind.legs
        and "area_ratio" not in gauge.settings
    ):
        wide = span[1] - span[0]
        return (-wide, wide) if twice or kind.limbs else span
    return span


def expected_survey(
    survey: Survey,
    roughness: Mapping[str, float],
    loss: Mapping[str, float],
    *,
    head: float | None = None,
) -> Expected:
    """Return a survey with the readings that its plan is expected to bring home, without any noise.

    Parameters
    ----------
    survey : Survey
        The plan; its readings are not looked at.
    roughness : mapping of str to float
        ε of each wall, m.
    loss : mapping of str to float
        K of each fitting whose K is to be fitted, dimensionless.
    head : float or None
        Piezometric head at the last tap in all runs, m above datum; None: in each run the middle of what keeps all columns on
        their scales and above the crown.

    Returns
    -------
    Expected
        The readings are found by inverting each gauge's own head function.

    Raises
    ------
    ReductionError
        Where a gauge's head does not go with its reading.
    """
    blank = _still(survey)
    media, line = media_of(survey), line_of(survey)
    flow = flow_of(metered_flow(blank).survey, line, media, roughness, loss)
    base = heads_of(blank, media)
    gain = _gain(blank, media, base.observed)
    if not (np.isfinite(gain) & (gain != 0)).all():
        raise ReductionError(
            "the head of a gauge does not go with its reading; look at its densities and legs"
        )
    twice = [one.read_twice for one in survey.observations]
    spans = [
        span_of(survey.gauge(one.gauge), twice=two)
        for one, two in zip(survey.observations, twice, strict=True)
    ]
    low, high = np.array([span[0] for span in spans]), np.array([span[1] for span in spans])
    ends = np.sort(np.stack([base.observed + gain * low, base.observed + gain * high]), axis=0)
    sight = base.taps
    crown = line.elevation + 0.5 * line.diameter[line.reach_of_tap]
    relative = flow.piezometric - flow.piezometric[:, -1:]
    tells = np.array([not survey.gauge(one.gauge).floats for one in survey.observations]) & (
        sight.sum(axis=1) > 0
    )
    seen = relative @ sight.T
    under = np.where(tells, ends[0] - seen, -np.inf).max(axis=1, initial=-np.inf)
    over = np.where(tells, ends[1] - seen, np.inf).min(axis=1, initial=np.inf)
    window = np.stack([np.maximum(under, (crown - relative).max(axis=1)), over], axis=1)
    if head is None:
        top = np.where(np.isfinite(over), over, window[:, 0] + 2 * _ABOVE)
        level = 0.5 * (window[:, 0] + top)
    else:
        level = np.full(len(window), head)
    heads = relative + level[:, None]
    target = heads @ sight.T
    # Columns under a gas of unknown pressure stand where it holds them: in the middle of their scale.
    for gauge in {one.gauge for one in survey.observations if survey.gauge(one.gauge).floats}:
        mine = np.array([one.gauge == gauge for one in survey.observations])
        middle = np.where(np.isfinite(ends[:, :, mine]), ends[:, :, mine], 0.0).mean(axis=0)
        shift = middle.mean(axis=1) - 0.5 * (target[:, mine].max(axis=1) + target[:, mine].min(axis=1))
        target[:, mine] += shift[:, None]
    readings = np.zeros(target.shape)
    observed = base.observed
    for _ in range(_ROUNDS):
        readings = readings + (target - observed) / gain
        observed = heads_of(_with_readings(blank, readings), media).observed
    taken = np.where(_on_scale(readings, low, high), readings, np.nan)
    return Expected(
        _with_readings(blank, taken),
        readings,
        media,
        line,
        flow,
        level,
        window,
        heads,
        low,
        high,
        ends,
        bool(tells.any()),
    )


def _still(survey: Survey) -> Survey:
    """The survey with readings of zero everywhere, each taken as often as its run is repeated."""
    labels = [one.label for one in survey.observations]
    index = pd.Index(survey.runs["run"].tolist(), dtype=object, name="run")
    shape = (len(index), len(labels))
    count = np.repeat(survey.runs["repeats"].to_numpy(int)[:, None], len(labels), axis=1)

    def table(values: NDArray[np.generic]) -> pd.DataFrame:
        return pd.DataFrame(values, index=index, columns=labels)

    return _with_readings(
        replace(
            survey,
            readings=table(np.zeros(shape)),
            repeats=table(np.maximum(count, 1)),
            spreads=table(np.full(shape, np.nan)),
            written=pd.DataFrame(),
        ),
        np.zeros(shape),
    )


def _with_readings(survey: Survey, readings: Array) -> Survey:
    """The survey with other readings; the levels of a compound manometer move up and down by turns from their rest."""
    frame = pd.DataFrame(readings, index=survey.readings.index, columns=survey.readings.columns)
    levels = survey.levels
    if levels is not None:
        moved = {}
        taps = {tap.name for tap in survey.taps}
        for place, one in enumerate(survey.observations):
            legs = survey.gauge(one.gauge).legs
            for turn, name in enumerate(level_names(legs, taps)):
                moved[f"{one.gauge} {name}"] = (-1.0) ** turn * readings[:, place]
        levels = pd.DataFrame(moved, index=survey.readings.index)
    return replace(survey, readings=frame, levels=levels)


def _gain(survey: Survey, media: Media, still: Array) -> Array:
    """Change of each observed head with its reading, all levels of a compound manometer moving with it."""
    return np.asarray(heads_of(_with_readings(survey, np.ones(still.shape)), media).observed - still)
