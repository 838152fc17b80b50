"""Densities and viscosities of water, mercury and air, and the pressure of the standard atmosphere.

Temperatures are in kelvin on ITS-90 throughout. NaN passes through.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

__all__ = [
    "STANDARD_PRESSURE",
    "air_density",
    "mercury_density",
    "standard_atmosphere_pressure",
    "water_density",
    "water_properties",
    "water_surface_tension",
    "water_viscosity",
]

Array = npt.NDArray[np.float64]

#: The standard atmosphere, Pa, exact by definition.
STANDARD_PRESSURE = 101325.0

_ICE_POINT = 273.15


def _refuse_outside(wrong: npt.NDArray[np.bool_], values: Array, what: str, bounds: str) -> None:
    """Raise ValueError with the first value that is out of range."""
    if wrong.any():
        raise ValueError(f"{what} lies outside {bounds}: {values[wrong].flat[0]:.6g}")


def _water_temperature(temperature: npt.ArrayLike) -> Array:
    kelvin = np.asarray(temperature, dtype=np.float64)
    _refuse_outside(
        (kelvin <= _ICE_POINT) | (kelvin > 373.15),
        kelvin,
        "the temperature of water",
        "273.15 K (excluded) to 373.15 K, 0 to 100 degC",
    )
    return kelvin


def _once_each(function: Callable[[float, float], float], *arguments: Array) -> Array:
    """Evaluate a scalar function once for each different pair of arguments; NaN where one is NaN."""
    pairs = np.stack([argument.ravel() for argument in np.broadcast_arrays(*arguments)], axis=-1)
    shape = np.broadcast_shapes(*(argument.shape for argument in arguments))
    result = np.full(len(pairs), np.nan)
    known = ~np.isnan(pairs).any(axis=1)
    if known.any():
        different, which = np.unique(pairs[known], axis=0, return_inverse=True)
        result[known] = np.array([function(first, second) for first, second in different.tolist()])[which]
    return result.reshape(shape)


def water_density(temperature: npt.ArrayLike, pressure: npt.ArrayLike = STANDARD_PRESSURE) -> Array:
    """Return the density of liquid water by IAPWS-95.

    Parameters
    ----------
    temperature : array_like
        K, above 273.15 up to 373.15.
    pressure : array_like
        Absolute pressure, Pa, from 100 to 1e8. 1 bar changes the density by 5e-5 relative.

    Returns
    -------
    ndarray
        kg/m³. Where water would boil at that pressure, the density of the saturated liquid.

    Raises
    ------
    ValueError
        Where a temperature or a pressure is out of range.

    Notes
    -----
    Each different pair of temperature and pressure is evaluated once, at about 40 µs.

    References
    ----------
    IAPWS R6-95(2018), Thermodynamic Properties of Ordinary Water Substance, by the package `chemicals`.

    Examples
    --------
    >>> print(water_density([277.15, 293.15]).round(4))
    [999.9749 998.2072]
    """
    from chemicals.iapws import iapws95_Psat, iapws95_rho, iapws95_rhol_sat  # noqa: PLC0415 (loaded when asked for: start-up time)

    kelvin, pascal = _water_temperature(temperature), np.asarray(pressure, dtype=np.float64)
    _refuse_outside((pascal < 100.0) | (pascal > 1e8), pascal, "the pressure of water", "100 to 1e8 Pa")

    def liquid(t: float, p: float) -> float:
        if t >= 273.16 and iapws95_Psat(t) >= p:  # type: ignore[no-untyped-call]  # the library has no types
            return float(iapws95_rhol_sat(t))  # type: ignore[no-untyped-call]  # the library has no types
        return float(iapws95_rho(t, p))  # type: ignore[no-untyped-call]  # the library has no types

    return _once_each(liquid, kelvin, pascal)


def water_viscosity(temperature: npt.ArrayLike, density: npt.ArrayLike) -> Array:
    """Return the dynamic viscosity of liquid water by IAPWS R12-08, without its critical enhancement.

    Parameters
    ----------
    temperature : array_like
        K, above 273.15 up to 373.15.
    density : array_like
        kg/m³, from 900 to 1100, as `water_density` gives it.

    Returns
    -------
    ndarray
        Pa s.

    Raises
    ------
    ValueError
        Where a temperature or a density is out of range.

    References
    ----------
    IAPWS R12-08, Viscosity of Ordinary Water Substance (2008), by the package `chemicals`.

    Examples
    --------
    >>> print(f"{water_viscosity(298.15, 998.0):.9f}")
    0.000889735
    """
    from chemicals.viscosity import mu_IAPWS  # noqa: PLC0415 (loaded when asked for: start-up time)

    kelvin, rho = _water_temperature(temperature), np.asarray(density, dtype=np.float64)
    _refuse_outside((rho < 900.0) | (rho > 1100.0), rho, "the density of liquid water", "900 to 1100 kg/m3")
    return _once_each(lambda t, d: float(mu_IAPWS(t, d)), kelvin, rho)


def water_properties(temperature: npt.ArrayLike) -> tuple[Array, Array]:
    """Return density and dynamic viscosity of liquid water at atmospheric pressure.

    Parameters
    ----------
    temperature : array_like
        K, above 273.15 up to 373.15.

    Returns
    -------
    density : ndarray
        kg/m³.
    viscosity : ndarray
        Dynamic viscosity, Pa s.

    Raises
    ------
    ValueError
        Where a temperature is out of range.

    References
    ----------
    `water_density` and `water_viscosity`.

    Examples
    --------
    >>> density, viscosity = water_properties(293.15)
    >>> print(f"{density:.3f} {1000 * viscosity:.4f}")
    998.207 1.0016
    """
    density = water_density(temperature)
    return density, water_viscosity(temperature, density)


def water_surface_tension(temperature: npt.ArrayLike) -> Array:
    """Return the surface tension of water against its vapour, in practice also against air.

    Parameters
    ----------
    temperature : array_like
        K, above 273.15 up to 373.15.

    Returns
    -------
    ndarray
        N/m. A trace of grease or detergent lowers it by a quarter or more.

    Raises
    ------
    ValueError
        Where a temperature is out of range.

    References
    ----------
    IAPWS R1-76(2014), Surface Tension of Ordinary Water Substance: σ = 0.2358 τ^1.256 (1 − 0.625 τ),
    τ = 1 − T/647.096 K.

    Examples
    --------
    >>> print(f"{water_surface_tension(293.15):.5f}")
    0.07274
    """
    tau = 1.0 - _water_temperature(temperature) / 647.096
    return np.asarray(0.2358 * tau**1.256 * (1.0 - 0.625 * tau))


def mercury_density(temperature: npt.ArrayLike) -> Array:
    """Return the density of mercury at atmospheric pressure.

    Parameters
    ----------
    temperature : array_like
        K, from 253.15 to 373.15.

    Returns
    -------
    ndarray
        kg/m³; within 3e-6 relative of the handbook's table from 0 to 40 °C.

    Raises
    ------
    ValueError
        Where a temperature is out of range.

    References
    ----------
    The thermal expansion of J. A. Beattie et al., Proc. Am. Acad. Arts Sci. 74 (1941) 371–388, on the density
    13595.076 kg/m³ at 0 °C. The coefficients are from memory and held against the CRC Handbook's table.

    Examples
    --------
    >>> print(mercury_density([273.15, 293.15]).round(2))
    [13595.08 13545.85]
    """
    kelvin = np.asarray(temperature, dtype=np.float64)
    _refuse_outside(
        (kelvin < 253.15) | (kelvin > 373.15), kelvin, "the temperature of mercury", "253.15 to 373.15 K"
    )
    t = kelvin - _ICE_POINT
    expansion = t * (1.815868e-4 + t * (5.45843e-9 + t * (3.498e-11 + t * 1.55576e-14)))
    return np.asarray(13595.076 / (1.0 + expansion))


def air_density(
    temperature: npt.ArrayLike,
    pressure: npt.ArrayLike,
    relative_humidity: npt.ArrayLike = 0.5,
    co2: npt.ArrayLike = 4e-4,
) -> Array:
    """Return the density of moist air by CIPM-2007.

    Parameters
    ----------
    temperature : array_like
        K. The equation is stated for 288.15 to 300.15 K (15 to 27 °C).
    pressure : array_like
        Absolute pressure, Pa. The equation is stated for 6e4 to 1.1e5 Pa.
    relative_humidity : array_like
        Dimensionless, from 0 to 1.
    co2 : array_like
        Mole fraction of carbon dioxide, dimensionless.

    Returns
    -------
    ndarray
        kg/m³, within 2.2e-5 relative in the stated range. Outside it the equation is used as an approximation:
        air enters heads as 0.12 % only, so that 1 % of it is 1e-5 of a head.

    Raises
    ------
    ValueError
        Where the temperature lies outside 223.15 to 373.15 K, where the pressure is not above 0 or the
        humidity outside 0 to 1.

    References
    ----------
    A. Picard, R. S. Davis, M. Gläser, K. Fujii, Revised formula for the density of moist air (CIPM-2007),
    Metrologia 45 (2008) 149–155, doi:10.1088/0026-1394/45/2/004.

    Examples
    --------
    >>> print(f"{air_density(293.15, 101325.0):.4f}")
    1.1993
    """
    kelvin, p = np.asarray(temperature, dtype=np.float64), np.asarray(pressure, dtype=np.float64)
    humidity = np.asarray(relative_humidity, dtype=np.float64)
    _refuse_outside(
        (kelvin < 223.15) | (kelvin > 373.15), kelvin, "the temperature of air", "223.15 to 373.15 K"
    )
    _refuse_outside(p <= 0.0, p, "the pressure of air", "the values above 0 Pa")
    _refuse_outside((humidity < 0.0) | (humidity > 1.0), humidity, "the relative humidity", "0 to 1")
    t = kelvin - _ICE_POINT
    saturation = np.exp((1.2378847e-5 * kelvin - 1.9121316e-2) * kelvin + 33.93711047 - 6.3431645e3 / kelvin)
    enhancement = 1.00062 + 3.14e-8 * p + 5.6e-7 * t**2
    vapour = humidity * enhancement * saturation / p
    compressibility = (
        1.0
        - p
        / kelvin
        * (
            1.58123e-6
            - 2.9331e-8 * t
            + 1.1043e-10 * t**2
            + (5.707e-6 - 2.051e-8 * t) * vapour
            + (1.9898e-4 - 2.376e-6 * t) * vapour**2
        )
        + (p / kelvin) ** 2 * (1.83e-11 - 0.765e-8 * vapour**2)
    )
    molar_mass = 28.96546e-3 + 12.011e-3 * (np.asarray(co2, dtype=np.float64) - 4e-4)
    return np.asarray(
        p
        * molar_mass
        / (compressibility * 8.314472 * kelvin)
        * (1.0 - vapour * (1.0 - 18.01528e-3 / molar_mass))
    )


def standard_atmosphere_pressure(altitude: npt.ArrayLike) -> Array:
    """Return the pressure of the standard atmosphere at an altitude in the troposphere.

    Parameters
    ----------
    altitude : array_like
        Geopotential altitude above sea level, m, from −2000 to 11 000.

    Returns
    -------
    ndarray
        Pa. The weather moves the true pressure by some 3 %.

    Raises
    ------
    ValueError
        Where an altitude is out of range.

    References
    ----------
    ISO 2533:1975, Standard Atmosphere: 288.15 K at sea level, falling by 6.5 K per km.

    Examples
    --------
    >>> print(f"{standard_atmosphere_pressure(1000.0):.1f}")
    89874.6
    """
    height = np.asarray(altitude, dtype=np.float64)
    _refuse_outside((height < -2000.0) | (height > 11_000.0), height, "the altitude", "-2000 to 11000 m")
    # g M/(R L) with the constants of the standard itself
    exponent = 9.80665 * 28.964420e-3 / (8.31432 * 6.5e-3)
    return np.asarray(STANDARD_PRESSURE * (1.0 - 6.5e-3 * height / 288.15) ** exponent)
