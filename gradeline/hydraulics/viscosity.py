"""Properties of fluids other than water: oils by two viscosities, any liquid by a table, air.

Temperatures are in kelvin. NaN passes through.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["air_viscosity", "expanded_density", "interpolated_properties", "two_point_viscosity"]

Array = npt.NDArray[np.float64]

#: m²/s: the equation of the standard is stated for these.
_THINNEST, _THICKEST = 0.21e-6, 2e1


def _refuse(wrong: npt.NDArray[np.bool_], values: Array, what: str, rule: str) -> None:
    if wrong.any():
        raise ValueError(f"{what} {rule}: {values[wrong].flat[0]:.6g}")


def _transformed(viscosity: Array) -> Array:
    """Z of ASTM D341: ν in mm²/s + 0.7 + what counts below 2 mm²/s."""
    nu = viscosity * 1e6
    return np.asarray(nu + 0.7 + np.exp(-1.47 - 1.84 * nu - 0.51 * nu**2))


def two_point_viscosity(
    temperature: npt.ArrayLike,
    first_temperature: float,
    first_viscosity: float,
    second_temperature: float,
    second_viscosity: float,
) -> Array:
    """Return the kinematic viscosity of a petroleum liquid from two known ones by ASTM D341.

    Parameters
    ----------
    temperature : array_like
        K, above 0.
    first_temperature : float
        K.
    first_viscosity : float
        At the first temperature, m²/s, from 2.1e-7 to 20.
    second_temperature : float
        K, not the first one.
    second_viscosity : float
        At the second temperature, m²/s; of the two the warmer one is the smaller.

    Returns
    -------
    ndarray
        m²/s; NaN where the equation gives a viscosity below 2.1e-7 m²/s.

    Raises
    ------
    ValueError
        Where a temperature is not above 0, a viscosity out of range, or the warmer one not the smaller.

    Notes
    -----
    log₁₀ log₁₀ Z = A − B log₁₀ T with Z = ν + 0.7 + exp(−1.47 − 1.84 ν − 0.51 ν²), ν in mm²/s. Z is solved for ν by
    Newton's method, so that both given points are met to rounding. Between the points it is as good as they are;
    beyond them it holds for oils without wax or polymer, not below the cloud point.

    References
    ----------
    ASTM D341, Standard Practice for Viscosity-Temperature Equations and Charts for Liquid Petroleum Products (from
    memory; held against a handbook's table of an engine oil in the tests).

    Examples
    --------
    >>> nu = two_point_viscosity([293.15, 313.15, 373.15], 313.15, 46e-6, 373.15, 6.8e-6)
    >>> print((1e6 * nu).round(2))
    [133.84  46.     6.8 ]
    """
    kelvin = np.asarray(temperature, dtype=np.float64)
    ends, given = (
        np.array([first_temperature, second_temperature]),
        np.array([first_viscosity, second_viscosity]),
    )
    _refuse(kelvin <= 0, kelvin, "the temperature", "must be above 0 K")
    _refuse(ends <= 0, ends, "the temperature of a given viscosity", "must be above 0 K")
    _refuse(
        ~((given >= _THINNEST) & (given <= _THICKEST)),
        given,
        "a given viscosity",
        "lies outside 2.1e-7 to 20 m2/s",
    )
    if not (ends[1] - ends[0]) * (given[1] - given[0]) < 0:
        raise ValueError("of two viscosities the warmer one must be the smaller")
    high, low = np.log10(np.log10(_transformed(given)))
    slope = (high - low) / np.log10(ends[1] / ends[0])
    with np.errstate(over="ignore"):
        z = 10.0 ** (10.0 ** (high - slope * np.log10(kelvin / ends[0])))
    z = np.where(np.isfinite(z) & (z >= _transformed(np.array(_THINNEST))), z, np.nan)
    nu = np.maximum(z - 0.7, _THINNEST * 1e6)
    for _ in range(60):
        more = np.exp(-1.47 - 1.84 * nu - 0.51 * nu**2)
        step = (nu + 0.7 + more - z) / (1.0 - (1.84 + 1.02 * nu) * more)
        nu = np.maximum(nu - step, 0.5 * nu)
        if not (np.abs(step) > 1e-14 * nu).any():
            break
    return np.asarray(nu * 1e-6)


def interpolated_properties(
    temperature: npt.ArrayLike,
    table_temperature: npt.ArrayLike,
    table_density: npt.ArrayLike,
    table_viscosity: npt.ArrayLike,
) -> tuple[Array, Array]:
    """Return density and kinematic viscosity between the entries of a table.

    Parameters
    ----------
    temperature : array_like
        K, within the table.
    table_temperature : (n,) array_like
        K, strictly rising, two entries at least.
    table_density : (n,) array_like
        kg/m³, above 0.
    table_viscosity : (n,) array_like
        Kinematic, m²/s, above 0.

    Returns
    -------
    density, viscosity : ndarray
        kg/m³ and m²/s.

    Raises
    ------
    ValueError
        Where a temperature lies outside the table, or the table does not rise or has a value that is not above 0.

    Notes
    -----
    The density and ln ν follow a monotone cubic: no wave between two entries that the entries do not show.

    References
    ----------
    F. N. Fritsch, J. Butland, SIAM J. Sci. Stat. Comput. 5 (1984) 300–304, by `scipy.interpolate.PchipInterpolator`.

    Examples
    --------
    >>> density, viscosity = interpolated_properties(300.0, [290, 310], [880, 868], [80e-6, 20e-6])
    >>> print(density.round(6), (1e6 * viscosity).round(6))
    874.0 40.0
    """
    from scipy.interpolate import PchipInterpolator  # noqa: PLC0415 (loaded when asked for: start-up time)

    kelvin = np.asarray(temperature, dtype=np.float64)
    at, rho, nu = (
        np.asarray(one, dtype=np.float64) for one in (table_temperature, table_density, table_viscosity)
    )
    if at.ndim != 1 or len(at) < 2 or not (np.diff(at) > 0).all():
        raise ValueError("the temperatures of the table must rise, with two entries at least")
    _refuse(~(rho > 0), rho, "a density of the table", "must be above 0 kg/m3")
    _refuse(~(nu > 0), nu, "a viscosity of the table", "must be above 0 m2/s")
    _refuse(
        (kelvin < at[0]) | (kelvin > at[-1]),
        kelvin,
        "the temperature",
        f"lies outside the table, {at[0]:g} to {at[-1]:g} K",
    )
    known = np.isfinite(kelvin)
    safe = np.where(known, kelvin, at[0])
    density, log_viscosity = PchipInterpolator(at, rho)(safe), PchipInterpolator(at, np.log(nu))(safe)
    return np.where(known, density, np.nan), np.where(known, np.exp(log_viscosity), np.nan)


def expanded_density(
    temperature: npt.ArrayLike, density: npt.ArrayLike, at: float, expansion: npt.ArrayLike
) -> Array:
    """Return a density at another temperature by the coefficient of cubic expansion.

    Parameters
    ----------
    temperature : array_like
        K.
    density : array_like
        At the temperature `at`, kg/m³.
    at : float
        K.
    expansion : array_like
        Coefficient of cubic expansion, 1/K.

    Returns
    -------
    ndarray
        ρ/(1 + β (T − T₀)), kg/m³.

    References
    ----------
    The definition of the mean coefficient: V = V₀ (1 + β (T − T₀)).

    Examples
    --------
    >>> print(expanded_density(303.15, 868.0, 288.15, 0.0007).round(2))
    858.98
    """
    warmer = np.asarray(temperature, dtype=np.float64) - at
    return np.asarray(np.asarray(density) / (1.0 + np.asarray(expansion) * warmer))


def air_viscosity(temperature: npt.ArrayLike) -> Array:
    """Return the dynamic viscosity of air by Sutherland's formula.

    Parameters
    ----------
    temperature : array_like
        K, from 170 to 1900.

    Returns
    -------
    ndarray
        Pa s; it does not depend on the pressure at a few bar, and falls by less than 0.5 % in humid air at 20 °C.

    Raises
    ------
    ValueError
        Where a temperature is out of range.

    References
    ----------
    U.S. Standard Atmosphere, 1976: μ = 1.458e-6 T^1.5/(T + 110.4) (from memory; its value at 288.15 K is held in the
    tests).

    Examples
    --------
    >>> print(f"{air_viscosity(288.15):.4e}")
    1.7894e-05
    """
    kelvin = np.asarray(temperature, dtype=np.float64)
    _refuse(
        (kelvin < 170.0) | (kelvin > 1900.0), kelvin, "the temperature of air", "lies outside 170 to 1900 K"
    )
    return np.asarray(1.458e-6 * kelvin**1.5 / (kelvin + 110.4))
