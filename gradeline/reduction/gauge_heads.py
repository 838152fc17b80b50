"""The head of each gauge as a function of its inputs, for any kind: arguments are handed over by name."""

from __future__ import annotations

import inspect
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.fluid import STANDARD_PRESSURE, standard_atmosphere_pressure
from gradeline.hydraulics.manometry import HEADS
from gradeline.quantities import Measured
from gradeline.reduction.chains import Chain
from gradeline.reduction.fluids import flowing_properties
from gradeline.reduction.media import Media, fluid_density
from gradeline.survey import Fluid, Gauge, Pressure, Survey

__all__ = ["STEP", "HeadFunction", "gas_pressure_of", "gauge_fluid_density", "head_function"]

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
HeadFunction = Callable[[Mapping[str, Any]], Complex]

#: Complex step: the derivative of an analytic function, exact to rounding.
STEP = 1e-30
#: Half the step of the central difference by a temperature, K.
_HALF = 0.25
#: At which the density of a gauge fluid is stated, K.
_STATED_AT = 293.15


def gas_pressure_of(survey: Survey, gauge: Gauge) -> float | Array | None:
    """Return the pressure of a gauge's trapped gas against the local atmosphere, Pa; None where it is not known.

    Where it was read in each run it is an array (R, 1).
    """
    if gauge.gas_read:
        return survey.runs[gauge.gas_column_of(gauge.name)].to_numpy(float)[:, None]
    given = gauge.settings.get("gas_pressure")
    if not isinstance(given, Measured):
        return None
    if isinstance(given, Pressure) and given.absolute:
        return given.value - float(standard_atmosphere_pressure(survey.site.altitude or 0.0))
    return given.value


def _number(gauge: Gauge, key: str) -> float | None:
    given = gauge.settings.get(key)
    return given.value if isinstance(given, Measured) else None


def _named_density(
    name: str, at: float | None, temperature: Array, key: str, steps: Mapping[str, Any]
) -> Complex:
    """Density of a named fluid at its own or the run's temperature, with its step by that temperature.

    The density formulas take no complex temperature: their step is a central difference.
    """
    there = temperature if at is None else np.full_like(temperature, at)
    value = np.asarray(fluid_density(name, there), complex)
    step = steps.get("run_temperature" if at is None else key, 0.0)
    if np.any(step):
        inside = np.clip(there, 273.151 + _HALF, 373.15 - _HALF) if name == "water" else there
        rate = (fluid_density(name, inside + _HALF) - fluid_density(name, inside - _HALF)) / (2 * _HALF)
        value = value + 1j * STEP * np.asarray(step) * rate
    return value


def _own_density(fluid: Fluid, at: float, temperature: Array, key: str, steps: Mapping[str, Any]) -> Complex:
    """Density of the flowing fluid at another temperature than the run's, with its step."""
    there = np.full_like(temperature, at)
    low, high = (-np.inf, np.inf) if fluid.span is None else fluid.span
    inside = np.clip(there, low + _HALF, high - _HALF)
    below, above = (flowing_properties(fluid, inside + step)[0] for step in (-_HALF, _HALF))
    rate = (above - below) / (2 * _HALF)
    density, _ = flowing_properties(fluid, there)
    return np.asarray(density + 1j * STEP * np.asarray(steps.get(key, 0.0)) * rate)


def gauge_fluid_density(
    survey: Survey, gauge: Gauge, temperature: Array, steps: Mapping[str, Any] | None = None
) -> Complex:
    """Return the density of the fluid in a gauge.

    Parameters
    ----------
    survey : Survey
        Its site, for the atmosphere.
    gauge : Gauge
        Its gauge fluid; air where it names none.
    temperature : array
        Of the runs, K, where the gauge states none of its own.
    steps : mapping of str to array, optional
        Sizes of the complex steps by name.

    Returns
    -------
    array
        kg/m³. A trapped gas is compressed by its pressure.
    """
    steps = steps or {}
    own, at = _number(gauge, "gauge_fluid_density"), _number(gauge, "gauge_temperature")
    if own is not None:
        there = temperature if at is None else np.full_like(temperature, at)
        kelvin = np.asarray(there, complex) + 1j * STEP * np.asarray(
            steps.get("run_temperature" if at is None else "gauge_temperature", 0.0)
        )
        density = own + 1j * STEP * np.asarray(steps.get("gauge_fluid_density", 0.0))
        rate = _number(gauge, "gauge_fluid_expansion")
        if rate is None:
            return np.asarray(np.broadcast_to(density, temperature.shape), complex)
        expansion = rate + 1j * STEP * np.asarray(steps.get("gauge_fluid_expansion", 0.0))
        return np.asarray(density / (1.0 + expansion * (kelvin - _STATED_AT)), complex)
    name = str(gauge.settings.get("gauge_fluid", "air"))
    value = _named_density(name, at, temperature, "gauge_temperature", steps)
    if name == "air":
        outside = float(standard_atmosphere_pressure(survey.site.altitude or 0.0))
        gas = gas_pressure_of(survey, gauge)
        inside = outside + (0.0 if gas is None else gas)
        pressed = inside + 1j * STEP * np.asarray(steps.get("gas_pressure", 0.0))
        value = np.asarray(value * pressed / STANDARD_PRESSURE)
    return value


def head_function(
    survey: Survey, media: Media, gauge: Gauge, mine: list[int], readings: Array, chain: Chain
) -> HeadFunction:
    """Return a function from the inputs to step by (name: size) to the complex heads of a gauge's observations.

    Parameters
    ----------
    survey, media
        Taps, runs and fluids.
    gauge : Gauge
        Whose head it is.
    mine : list of int
        Its observations.
    readings : (R, m) array
        Of these observations, calibrated, SI.
    chain : Chain
        Its legs.

    Returns
    -------
    callable
        What a kind's function asks for by the name of its parameters, it gets.
    """
    function = HEADS[gauge.kind]
    wanted = set(inspect.signature(function).parameters)
    observations = [survey.observations[i] for i in mine]
    tap = [survey.tap(one.tap) for one in observations]
    far = [0.0 if one.tap_2 is None else survey.tap(one.tap_2).elevation for one in observations]
    temperature = survey.runs["temperature"].to_numpy(float)[:, None]
    settings = {key: value.value for key, value in gauge.settings.items() if isinstance(value, Measured)}
    column = settings.pop("column_temperature", None)
    line = settings.pop("line_temperature", None)
    gas = gas_pressure_of(survey, gauge)
    line_fluid = gauge.settings.get("line_fluid")

    def beside(at: float | None, name: object, key: str, steps: Mapping[str, Any]) -> Complex | None:
        """Density of a column or a line that is not at the run's temperature or not of the flowing fluid."""
        if (at is None and name is None) or (name is None and not survey.fluid.follows_temperature):
            return None
        if at is not None and name is None and not survey.fluid.is_water:
            return _own_density(survey.fluid, at, temperature, key, steps)
        return _named_density(str(name or "water"), at, temperature, key, steps)

    given: dict[str, object] = {
        "tap_elevation": np.array([t.elevation for t in tap]),
        "tap_2_elevation": np.array(far),
        "gauge_elevation": np.array(
            [t.elevation if t.gauge_elevation is None else t.gauge_elevation for t in tap]
        ),
        "density": media.density[:, None],
        "air_density": media.air,
        "gravity": media.gravity,
        "surface_tension": media.surface_tension[:, None],
        **settings,
        **({} if gas is None else {"gas_pressure": gas}),
        **chain.arguments,
    }

    def head(steps: Mapping[str, Any]) -> Complex:
        stepped = {
            name: np.asarray(value, complex) + 1j * STEP * np.asarray(steps.get(name, 0.0))
            for name, value in given.items()
        }
        apart = {
            "column_density": beside(column, None, "column_temperature", steps),
            "line_density": beside(line, line_fluid, "line_temperature", steps),
        }
        # What is filled with the flowing fluid goes with it.
        stepped |= {name: stepped["density"] if value is None else value for name, value in apart.items()}
        if "gauge_density" in wanted:
            stepped["gauge_density"] = gauge_fluid_density(survey, gauge, temperature, steps)
        if "leg_density" in stepped:
            stepped["leg_density"] = stepped["leg_density"] + 1j * stepped["density"].imag * chain.flowing
        reading = readings + 1j * STEP * np.asarray(steps.get("reading", 0.0))
        return np.asarray(
            function(reading, **{name: v for name, v in stepped.items() if name in wanted}), complex
        )

    return head
