"""Readings to heads, and how each head goes with every input that all runs share."""

from __future__ import annotations

import inspect
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.manometry import HEADS
from gradeline.quantities import Measured
from gradeline.reduction.media import Media, fluid_density
from gradeline.survey import GAUGE_KINDS, Gauge, Survey

__all__ = ["Heads", "Input", "heads_of", "observation_kinds"]

Array = NDArray[np.float64]

#: Complex step: the derivative of an analytic function, exact to rounding.
_STEP = 1e-30


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
    flow : float
        Relative change of the flow.
    viscosity : (R,) array or None
        Relative change of the kinematic viscosity.
    gravity : float
        Relative change of gravity.
    """

    name: str
    subject: str = ""
    heads: Array | None = None
    diameter: Array | None = None
    flow: float = 0.0
    viscosity: Array | None = None
    gravity: float = 0.0


@dataclass(frozen=True)
class Heads:
    """Observed heads of all runs, static ones included.

    Parameters
    ----------
    observed : (R, n) array
        Piezometric head above datum, or for differential gauges the difference upstream less downstream, m.
    gain : (R, n) array
        Change of head for one unit of the reading, m per m or m per Pa.
    taps : (n, T) array
        Which taps an observation sees: +1, and −1 for the downstream tap of a differential gauge.
    inputs : tuple of Input
        Shared inputs of the heads that have a stated uncertainty.
    """

    observed: Array
    gain: Array
    taps: Array
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
    readings = survey.readings.to_numpy(float)
    observed, gain = np.full(readings.shape, np.nan), np.full(readings.shape, np.nan)
    by_elevation, by_temperature = np.zeros(readings.shape), np.zeros(readings.shape)
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
        head = _head_function(survey, media, gauge, mine)
        observed[:, mine] = head({}).real
        gain[:, mine] = head({"reading": 1.0}).imag / _STEP
        by_elevation[:, mine] = head({"tap_elevation": 1.0, "gauge_elevation": 1.0}).imag / _STEP
        by_density[:, mine] = head({"density": media.density[:, None]}).imag / _STEP
        by_temperature[:, mine] = head({"density": media.density_by_temperature[:, None]}).imag / _STEP
        by_gravity[:, mine] = head({"gravity": media.gravity}).imag / _STEP
        for key, setting in gauge.settings.items():
            if isinstance(setting, Measured) and setting.u:
                effect = np.zeros(readings.shape)
                effect[:, mine] = head({key: setting.u}).imag / _STEP
                stated.append(Input(f"gauge {key.replace('_', ' ')}", gauge.name, heads=effect))
    effects = _Effects(by_elevation, by_temperature, by_density, by_gravity)
    found = [*stated, *_inputs(survey, media, readings, gain, effects)]
    return Heads(
        observed,
        gain,
        taps,
        tuple(one if one.heads is None else replace(one, heads=np.nan_to_num(one.heads)) for one in found),
    )


@dataclass(frozen=True)
class _Effects:
    elevation: Array  # per m
    temperature: Array  # per K
    density: Array  # per relative change
    gravity: Array  # per relative change


def _head_function(
    survey: Survey, media: Media, gauge: Gauge, mine: list[int]
) -> Callable[[Mapping[str, Any]], NDArray[np.complex128]]:
    """Return a function from the inputs to step by (name: size) to the complex heads of a gauge's observations.

    The arguments are handed over by name: what a kind's function asks for, it gets.
    """
    function = HEADS[gauge.kind]
    wanted = set(inspect.signature(function).parameters)
    tap = [survey.tap(survey.observations[i].tap) for i in mine]
    elevation = np.array([t.elevation for t in tap])
    temperature = survey.runs["temperature"].to_numpy(float)[:, None]
    settings = {key: value.value for key, value in gauge.settings.items() if isinstance(value, Measured)}
    column = settings.pop("column_temperature", None)
    line = settings.pop("line_temperature", None)
    line_fluid = gauge.settings.get("line_fluid")

    def beside(at: float | None, name: object, step: float) -> NDArray[np.complex128] | None:
        """Density of a column or a line that is not at the run's temperature or not of the flowing fluid."""
        if (at is None and name is None) or (name is None and survey.fluid.density is not None):
            return None
        fluid = str(name or "water")
        if at is None:
            return np.asarray(fluid_density(fluid, temperature), complex)
        there = np.full_like(temperature, at)
        # The density formulas take no complex temperature: its own step is a central difference.
        by_temperature = (fluid_density(fluid, there + 0.25) - fluid_density(fluid, there - 0.25)) / 0.5
        return np.asarray(fluid_density(fluid, there) + 1j * _STEP * step * by_temperature)

    given: dict[str, object] = {
        "tap_elevation": elevation,
        "gauge_elevation": np.array(
            [t.elevation if t.gauge_elevation is None else t.gauge_elevation for t in tap]
        ),
        "density": media.density[:, None],
        "air_density": media.air,
        "gravity": media.gravity,
        "surface_tension": media.surface_tension[:, None],
        **settings,
    }
    readings = survey.readings.to_numpy(float)[:, mine]

    def head(steps: Mapping[str, Any]) -> NDArray[np.complex128]:
        stepped = {
            name: np.asarray(value, complex) + 1j * _STEP * np.asarray(steps.get(name, 0.0))
            for name, value in given.items()
        }
        apart = {
            "column_density": beside(column, None, float(steps.get("column_temperature", 0.0))),
            "line_density": beside(line, line_fluid, float(steps.get("line_temperature", 0.0))),
        }
        # What is filled with the flowing fluid goes with it.
        stepped |= {name: stepped["density"] if value is None else value for name, value in apart.items()}
        reading = readings + 1j * _STEP * np.asarray(steps.get("reading", 0.0))
        return np.asarray(
            function(reading, **{name: v for name, v in stepped.items() if name in wanted}), complex
        )

    return head


def _inputs(survey: Survey, media: Media, readings: Array, gain: Array, effects: _Effects) -> list[Input]:
    """List the shared inputs of the heads that have a stated uncertainty."""
    stated = survey.stated
    found = []
    tap_of = [observation.tap for observation in survey.observations]
    for gauge in survey.gauges:
        mine = np.array([observation.gauge == gauge.name for observation in survey.observations])
        if not mine.any():
            continue
        if gauge.zero_u:
            found.append(Input("gauge zero", gauge.name, heads=np.where(mine, gain * gauge.zero_u, 0.0)))
        if gauge.scale_u:
            found.append(
                Input("gauge scale", gauge.name, heads=np.where(mine, gain * readings * gauge.scale_u, 0.0))
            )
    for tap in survey.taps:
        size = stated.elevation if tap.elevation_u is None else tap.elevation_u
        mine = np.array([name == tap.name for name in tap_of])
        if size and np.any(effects.elevation[:, mine]):
            found.append(
                Input("tap elevation", tap.name, heads=np.where(mine, effects.elevation * size, 0.0))
            )
    if stated.temperature:
        found.append(
            Input(
                "temperature",
                heads=effects.temperature * stated.temperature,
                viscosity=media.viscosity_by_temperature * stated.temperature,
            )
        )
    fluid = survey.fluid
    if fluid.density is not None and fluid.density.relative_u:
        # A dynamic viscosity over an uncertain density is an uncertain kinematic one.
        thinner = 0.0 if fluid.kinematic_viscosity is not None else -fluid.density.relative_u
        found.append(
            Input(
                "density",
                heads=effects.density * fluid.density.relative_u,
                viscosity=np.full(len(readings), thinner),
            )
        )
    viscosity = fluid.kinematic_viscosity or fluid.viscosity
    if viscosity is not None and viscosity.relative_u:
        found.append(Input("viscosity", viscosity=np.full(len(readings), viscosity.relative_u)))
    if media.gravity_u:
        found.append(Input("gravity", heads=effects.gravity * media.gravity_u, gravity=media.gravity_u))
    return found


def observation_kinds(survey: Survey) -> tuple[NDArray[np.intp], list[str]]:
    """Return the group whose scatter each observation shares, and the groups' names (gauge kinds)."""
    kinds = [survey.gauge(observation.gauge).kind for observation in survey.observations]
    names = [name for name in GAUGE_KINDS if name in kinds]
    return np.array([names.index(kind) for kind in kinds], dtype=np.intp), names
