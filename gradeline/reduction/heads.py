"""Readings to heads, and how each head goes with every input that all runs share."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.quantities import Measured
from gradeline.reduction.accuracy import accuracy_errors
from gradeline.reduction.calibrations import calibrated
from gradeline.reduction.chains import chain_of
from gradeline.reduction.fluids import fluid_inputs
from gradeline.reduction.gauge_heads import STEP, head_function
from gradeline.reduction.levels import level_columns
from gradeline.reduction.media import Media
from gradeline.survey import GAUGE_KINDS, Survey

__all__ = ["Heads", "Input", "heads_of", "observation_kinds"]

Array = NDArray[np.float64]

#: An effect of an elevation below this is none, m per m.
_NO_EFFECT = 1e-12


@dataclass(frozen=True)
class Input:
    """An input that all runs share, by what one standard uncertainty of it changes.

    Parameters
    ----------
    name : str
        What it is, as the budget calls it.
    subject : str
        Which tap, gauge, reach or fitting; empty where there is only one.
    heads : (R, n) array or None
        Change of the observed heads, m.
    diameter : (K,) array or None
        Relative change of the bores.
    flow : float or array
        Relative change of the flow: of all runs and reaches alike, or an array that broadcasts to (R, K).
    viscosity : (R,) array or None
        Relative change of the kinematic viscosity.
    gravity : float
        Relative change of gravity.
    laminar_constant : (K,) array or None
        Relative change of f·Re of laminar flow.
    rectangular : bool
        Whether a limit of error was stated: a rectangular distribution, else a normal one.
    """

    name: str
    subject: str = ""
    heads: Array | None = None
    diameter: Array | None = None
    flow: float | Array = 0.0
    viscosity: Array | None = None
    gravity: float = 0.0
    laminar_constant: Array | None = None
    rectangular: bool = False


@dataclass(frozen=True)
class Heads:
    """Observed heads of all runs, static ones included.

    Parameters
    ----------
    observed : (R, n) array
        Piezometric head above datum, or for differential gauges the difference upstream less downstream, m.
    gain : (R, n) array
        Change of head for one unit of the reading, m per m or m per Pa.
    spread : (R, n) array
        The same for one unit of the random error of a reading: larger where an observation is read from several places.
    taps : (n, T) array
        Which taps an observation sees: +1, and −1 for the downstream tap of a differential gauge.
    levels : (n, m) array
        Which free levels an observation stands on, that of the line first.
    inputs : tuple of Input
        Shared inputs of the heads that have a stated uncertainty.
    """

    observed: Array
    gain: Array
    spread: Array
    taps: Array
    levels: Array
    inputs: tuple[Input, ...]


def heads_of(survey: Survey, media: Media) -> Heads:
    """Turn the readings of a survey into heads.

    Parameters
    ----------
    survey : Survey
        Readings, taps, gauges and what is stated of them.
    media : Media
        Its fluids and site.

    Returns
    -------
    Heads
        In the order of the runs and observations.
    """
    corrected = calibrated(survey)
    readings = corrected.readings
    observed, gain = np.full(readings.shape, np.nan), np.full(readings.shape, np.nan)
    spread, by_zero = np.full(readings.shape, np.nan), np.full(readings.shape, np.nan)
    by_scale = np.full(readings.shape, np.nan)
    by_elevation, by_elevation_2 = np.zeros(readings.shape), np.zeros(readings.shape)
    by_temperature = np.zeros(readings.shape)
    by_density, by_gravity = np.zeros(readings.shape), np.zeros(readings.shape)
    names = [tap.name for tap in survey.taps]
    taps = np.zeros((readings.shape[1], len(names)))
    for column, observation in enumerate(survey.observations):
        taps[column, names.index(observation.tap)] = 1.0
        if observation.tap_2 is not None:
            taps[column, names.index(observation.tap_2)] = -1.0
    stated: list[Input] = []
    for gauge in survey.gauges:
        mine = [i for i, observation in enumerate(survey.observations) if observation.gauge == gauge.name]
        if not mine:
            continue
        first = survey.observations[mine[0]]
        chain = chain_of(survey, media, gauge, first.tap, first.tap_2)
        head = head_function(survey, media, gauge, mine, readings[:, mine], chain)
        observed[:, mine] = head({}).real
        of_reading = head({"reading": 1.0}).imag / STEP
        gain[:, mine] = of_reading * corrected.rate[mine]
        others = [(head({"leg_rise": share}).imag / STEP, level) for share, level in chain.other_levels]
        twice = np.array([1.0 + survey.observations[i].read_twice for i in mine])
        spread[:, mine] = np.sqrt(twice * gain[:, mine] ** 2 + sum(one**2 for one, _ in others))
        by_zero[:, mine] = of_reading + sum(one for one, _ in others)
        by_scale[:, mine] = of_reading * readings[:, mine] + sum(one * level for one, level in others)
        by_elevation[:, mine] = head({"tap_elevation": 1.0, "gauge_elevation": 1.0}).imag / STEP
        by_elevation_2[:, mine] = head({"tap_2_elevation": 1.0}).imag / STEP
        by_density[:, mine] = head({"density": media.density[:, None]}).imag / STEP
        warmer = {"density": media.density_by_temperature[:, None], "run_temperature": 1.0}
        by_temperature[:, mine] = head(warmer).imag / STEP
        by_gravity[:, mine] = head({"gravity": media.gravity}).imag / STEP
        effects = [
            (f"gauge {key.replace('_', ' ')}", head({key: setting.u}).imag / STEP)
            for key, setting in gauge.settings.items()
            if isinstance(setting, Measured) and setting.u
        ]
        effects += [
            (f"density of {fluid} in the legs", head({"leg_density": change}).imag / STEP)
            for fluid, change in chain.density_errors
        ]
        gas_u = gauge.settings.get("u_gas_pressure")
        if gauge.gas_read and isinstance(gas_u, Measured):
            # Read by one instrument in all runs: its error is that of a stated pressure.
            effects.append(("gauge gas pressure", head({"gas_pressure": gas_u.value}).imag / STEP))
        effects += [
            ("gauge leg elevation", head({"leg_rise": change}).imag / STEP)
            for change in chain.elevation_errors
        ]
        limits = [(name, of_reading * change) for name, change in accuracy_errors(gauge, readings[:, mine])]
        effects += [
            ("gauge calibration", of_reading * change[:, mine])
            for name, change in corrected.errors
            if name == gauge.name
        ]
        for place, (name, change) in enumerate([*effects, *limits]):
            if np.any(np.nan_to_num(change)):
                whole = np.zeros(readings.shape)
                whole[:, mine] = change
                stated.append(Input(name, gauge.name, heads=whole, rectangular=place >= len(effects)))
    effects_of = _Effects(
        by_zero, by_scale, by_elevation, by_elevation_2, by_temperature, by_density, by_gravity
    )
    found = [*stated, *_inputs(survey, media, effects_of)]
    return Heads(
        observed,
        gain,
        spread,
        taps,
        level_columns(survey),
        tuple(one if one.heads is None else replace(one, heads=np.nan_to_num(one.heads)) for one in found),
    )


@dataclass(frozen=True)
class _Effects:
    zero: Array  # per unit of the reading
    scale: Array  # per relative change
    elevation: Array  # per m, of the (upstream) tap and its gauge
    elevation_2: Array  # per m, of the downstream tap
    temperature: Array  # per K
    density: Array  # per relative change
    gravity: Array  # per relative change


def _inputs(survey: Survey, media: Media, effects: _Effects) -> list[Input]:
    """List the shared inputs of the heads that have a stated uncertainty."""
    stated = survey.stated
    found = []
    tap_of = np.array([observation.tap for observation in survey.observations], dtype=object)
    far_of = np.array([observation.tap_2 for observation in survey.observations], dtype=object)
    for gauge in survey.gauges:
        mine = np.array([observation.gauge == gauge.name for observation in survey.observations])
        if not mine.any():
            continue
        if gauge.zero_u:
            found.append(
                Input("gauge zero", gauge.name, heads=np.where(mine, effects.zero * gauge.zero_u, 0.0))
            )
        if gauge.scale_u:
            found.append(
                Input("gauge scale", gauge.name, heads=np.where(mine, effects.scale * gauge.scale_u, 0.0))
            )
    for tap in survey.taps:
        size = stated.elevation if tap.elevation_u is None else tap.elevation_u
        moved = np.where(tap_of == tap.name, effects.elevation, 0.0)
        moved = moved + np.where(far_of == tap.name, effects.elevation_2, 0.0)
        # What is left of elevations that cancel is rounding.
        if size and np.nanmax(np.abs(moved), initial=0.0) > _NO_EFFECT:
            found.append(Input("tap elevation", tap.name, heads=moved * size))
    if stated.temperature:
        found.append(
            Input(
                "temperature",
                heads=effects.temperature * stated.temperature,
                viscosity=media.viscosity_by_temperature * stated.temperature,
            )
        )
    found += [
        Input(
            one.name,
            one.subject,
            heads=effects.density * one.density[:, None] if one.density.any() else None,
            viscosity=one.viscosity,
        )
        for one in fluid_inputs(survey.fluid, survey.runs["temperature"].to_numpy(float))
    ]
    if media.gravity_u:
        found.append(Input("gravity", heads=effects.gravity * media.gravity_u, gravity=media.gravity_u))
    return found


def observation_kinds(survey: Survey) -> tuple[NDArray[np.intp], list[str]]:
    """Return the group whose scatter each observation shares, and the groups' names.

    A group is a gauge kind, and where gauges of one kind differ in their gauge fluid, that fluid's gauges: a
    millimetre of mercury is another head than one of oil.
    """
    gauges = [survey.gauge(observation.gauge) for observation in survey.observations]
    groups = [(gauge.kind, str(gauge.settings.get("gauge_fluid", ""))) for gauge in gauges]
    order = list(GAUGE_KINDS)
    distinct = sorted(dict.fromkeys(groups), key=lambda group: order.index(group[0]))
    kinds = [kind for kind, _ in distinct]
    names = [kind if kinds.count(kind) == 1 else f"{kind}, {fluid}" for kind, fluid in distinct]
    return np.array([distinct.index(group) for group in groups], dtype=np.intp), names
