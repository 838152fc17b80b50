"""Orifice plates, nozzles and venturi tubes by ISO 5167: SI in, SI out, arrays throughout.

What the standard allows (ratio of bores, bore, Reynolds number) is told by `meter_limits`; beyond it the equations are
worked out all the same.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gradeline.errors import ReductionError

__all__ = [
    "METER_TYPES",
    "differential_meter_flow",
    "discharge_coefficient",
    "discharge_coefficient_u",
    "expansibility",
    "meter_limits",
]

Array = NDArray[np.float64]

#: Kinds of differential meter; what stands after the dot is the pressure tapping of an orifice plate or the make.
METER_TYPES = (
    "orifice plate, corner",
    "orifice plate, flange",
    "orifice plate, D and D/2",
    "nozzle, ISA 1932",
    "nozzle, long radius",
    "nozzle, venturi",
    "venturi, machined",
    "venturi, as cast",
    "venturi, rough welded",
)
_VENTURI = {"machined": 0.995, "as cast": 0.984, "rough welded": 0.985}
_VENTURI_U = {"machined": 0.005, "as cast": 0.0035, "rough welded": 0.0075}
_PASSES = 30
#: Re_D below which an orifice plate's coefficient is less certain.
_SLOW = 1e4


def expansibility(
    meter: str,
    pipe_bore: float,
    throat_bore: float,
    upstream_pressure: ArrayLike,
    differential_pressure: ArrayLike,
    isentropic_exponent: float = 1.4,
) -> Array:
    """Return the expansibility factor of a gas.

    Parameters
    ----------
    meter : str
        One of `METER_TYPES`.
    pipe_bore, throat_bore : float
        D and d, m, d < D.
    upstream_pressure : array_like
        Absolute, Pa.
    differential_pressure : array_like
        Pa, below a quarter of it.
    isentropic_exponent : float
        κ, dimensionless.

    Returns
    -------
    array
        ε, dimensionless (ISO 5167-2 for orifice plates, ISO 5167-3 and -4 for nozzles and venturis), by `fluids`.

    Raises
    ------
    ReductionError
        For an unknown meter, or a throat that is not smaller than the pipe.

    Examples
    --------
    >>> expansibility("orifice plate, corner", 0.0739, 0.0222, 1e5, 1e3).round(4).item()
    0.9975
    """
    from fluids.flow_meter import nozzle_expansibility, orifice_expansibility  # noqa: PLC0415 (loaded when asked for: start-up time)

    _check_meter(meter, pipe_bore, throat_bore)
    formula = orifice_expansibility if meter.startswith("orifice") else nozzle_expansibility

    def one(pressure: float, differential: float) -> float:
        if not differential > 0:
            return 1.0
        return float(formula(pipe_bore, throat_bore, pressure, pressure - differential, isentropic_exponent))

    return np.asarray(np.vectorize(one, otypes=[float])(upstream_pressure, differential_pressure))


def discharge_coefficient(meter: str, pipe_bore: float, throat_bore: float, reynolds: ArrayLike) -> Array:
    """Return the discharge coefficient C of ISO 5167.

    Parameters
    ----------
    meter : str
        One of `METER_TYPES`.
    pipe_bore, throat_bore : float
        D and d, m, d < D.
    reynolds : array_like
        Of the pipe, Re_D, dimensionless, above 0.

    Returns
    -------
    array
        C, dimensionless: Reader-Harris and Gallagher for orifice plates (ISO 5167-2), ISO 5167-3 for nozzles, the
        constants of ISO 5167-4 for venturis. The equations are those of `fluids`, held against an independent writing
        of each in the tests. Below Re 3700, outside the standard, the orifice's goes on by terms of Reader-Harris
        (2015).

    Raises
    ------
    ReductionError
        For an unknown meter, or a throat that is not smaller than the pipe.

    Examples
    --------
    >>> discharge_coefficient("orifice plate, corner", 0.1, 0.05, [1e4, 1e6]).round(4).tolist()
    [0.6186, 0.6038]
    """
    _check_meter(meter, pipe_bore, throat_bore)
    kind, _, make = meter.partition(", ")
    at = np.asarray(reynolds, float)
    if kind == "venturi":
        return np.full(at.shape, _VENTURI[make])
    if make == "venturi":
        from fluids.flow_meter import C_venturi_nozzle  # noqa: PLC0415 (loaded when asked for: start-up time)

        return np.full(at.shape, float(C_venturi_nozzle(pipe_bore, throat_bore)))
    formula = _coefficient_formula(kind, make)
    # The formulas ask for density, viscosity and mass flow, of which only Re = 4 m/(π D μ) counts.
    mass = at * np.pi * pipe_bore / 4.0
    return np.asarray(
        np.vectorize(lambda m: formula(pipe_bore, throat_bore, 1.0, 1.0, m), otypes=[float])(mass)
    )


def _coefficient_formula(kind: str, make: str) -> Callable[[float, float, float, float, float], float]:
    from fluids import flow_meter  # noqa: PLC0415 (loaded when asked for: start-up time)

    if kind == "orifice plate":
        formula = flow_meter.C_Reader_Harris_Gallagher
        taps = {
            "corner": flow_meter.ORIFICE_CORNER_TAPS,
            "flange": flow_meter.ORIFICE_FLANGE_TAPS,
            "D and D/2": flow_meter.ORIFICE_D_AND_D_2_TAPS,
        }[make]
        return lambda D, d, rho, mu, m: float(formula(D, d, rho, mu, m, taps=taps))
    nozzle = flow_meter.C_ISA_1932_nozzle if make == "ISA 1932" else flow_meter.C_long_radius_nozzle
    return lambda D, d, rho, mu, m: float(nozzle(D, d, rho, mu, m))


def differential_meter_flow(
    differential_pressure: ArrayLike,
    density: ArrayLike,
    kinematic_viscosity: ArrayLike,
    pipe_bore: float,
    throat_bore: float,
    meter: str,
    *,
    coefficient: float | None = None,
    expansibility_factor: ArrayLike = 1.0,
) -> Array:
    """Return the flow through an orifice plate, a nozzle or a venturi tube.

    Parameters
    ----------
    differential_pressure : array_like
        Between the tappings, their difference of elevation taken out, Pa, at least 0.
    density : array_like
        Upstream, kg/m³, above 0.
    kinematic_viscosity : array_like
        m²/s, above 0.
    pipe_bore, throat_bore : float
        D and d, m, d < D.
    meter : str
        One of `METER_TYPES`.
    coefficient : float, optional
        A known C, dimensionless, in place of the standard's.
    expansibility_factor : array_like
        ε, dimensionless; 1 for a liquid.

    Returns
    -------
    array
        m³/s, Q = C ε (π/4) d² √(2 Δp/ρ) / √(1 − β⁴) with β = d/D (ISO 5167-1), C iterated on Re_D.

    Raises
    ------
    ReductionError
        For an unknown meter, or β not below 1.

    Examples
    --------
    >>> differential_meter_flow(17e3, 999.1, 1.138e-6, 0.07366, 0.05, "orifice plate, D and D/2").round(6).item()
    0.007939
    """
    _check_meter(meter, pipe_bore, throat_bore)
    _above_zero("density", density)
    _above_zero("kinematic viscosity", kinematic_viscosity)
    pressure, rho, nu = np.broadcast_arrays(
        *(np.asarray(value, float) for value in (differential_pressure, density, kinematic_viscosity))
    )
    beta = throat_bore / pipe_bore
    ideal = np.pi / 4 * throat_bore**2 * np.sqrt(2.0 * pressure / rho) / np.sqrt(1.0 - beta**4)
    ideal = np.asarray(ideal * expansibility_factor)
    if coefficient is not None:
        return np.asarray(coefficient * ideal)
    flow = 0.6 * ideal if meter.startswith("orifice") else 0.98 * ideal
    for _ in range(_PASSES):
        reynolds = np.where(flow > 0, 4.0 * flow / (np.pi * pipe_bore * nu), 1e6)
        new = discharge_coefficient(meter, pipe_bore, throat_bore, reynolds) * ideal
        settled = np.all(np.abs(new - flow) <= 1e-13 * np.abs(new))
        flow = new
        if settled:
            break
    return flow


def discharge_coefficient_u(
    meter: str, pipe_bore: float, throat_bore: float, reynolds: ArrayLike = np.inf
) -> Array:
    """Return the relative standard uncertainty of the discharge coefficient.

    Parameters
    ----------
    meter : str
        One of `METER_TYPES`.
    pipe_bore, throat_bore : float
        D and d, m, d < D.
    reynolds : array_like
        Of the pipe, Re_D, dimensionless, above 0: below 10 000 the orifice plate's is larger by 0.5 % where β > 0.5.

    Returns
    -------
    array
        Dimensionless, half of what ISO 5167-2, -3 and -4 state at 95 % (from memory), within their limits. What an orifice
        plate has to add, for a small pipe and for a small Re_D, is added arithmetically (ISO 5167-2, 5.3.3.1).

    Raises
    ------
    ReductionError
        For an unknown meter, or a throat that is not smaller than the pipe.

    Examples
    --------
    >>> discharge_coefficient_u("orifice plate, corner", 0.1, 0.06, [8e3, 2e4]).round(5).tolist()
    [0.005, 0.0025]
    """
    _check_meter(meter, pipe_bore, throat_bore)
    beta = throat_bore / pipe_bore
    kind, _, make = meter.partition(", ")
    at = np.asarray(reynolds, float)
    added = np.zeros(at.shape)
    if kind == "venturi":
        percent = 200.0 * _VENTURI_U[make]
    elif make == "ISA 1932":
        percent = 0.8 if beta <= 0.6 else 2.0 * beta - 0.4
    elif make == "long radius":
        percent = 2.0
    elif make == "venturi":
        percent = 1.2 + 1.5 * beta**4
    else:
        percent = 0.7 - beta if beta < 0.2 else 0.5 if beta <= 0.6 else 1.667 * beta - 0.5
        if pipe_bore < 0.07112:
            percent += 0.9 * (0.75 - beta) * (2.8 - pipe_bore / 0.0254)
        if beta > 0.5:
            added = np.where(at < _SLOW, 0.5, 0.0)
    return np.asarray((percent + added) / 200.0)


def meter_limits(meter: str, pipe_bore: float, throat_bore: float, reynolds: ArrayLike) -> list[str]:
    """Return the limits of ISO 5167 that a meter or its flows lie outside of.

    Parameters
    ----------
    meter : str
        One of `METER_TYPES`.
    pipe_bore, throat_bore : float
        D and d, m, d < D.
    reynolds : array_like
        Re_D of the flowing runs, dimensionless.

    Returns
    -------
    list of str
        One phrase for each, with the value found and the limit; empty where all is within (limits from memory).

    Raises
    ------
    ReductionError
        For an unknown meter, or a throat that is not smaller than the pipe.

    Examples
    --------
    >>> meter_limits("orifice plate, corner", 0.04, 0.02, [3e4])
    ['D = 40 mm, where the standard holds from 50 to 1000 mm']
    """
    _check_meter(meter, pipe_bore, throat_bore)
    beta = throat_bore / pipe_bore
    bore, ratio, low, high = _range_of(meter, pipe_bore, beta)
    found = []
    if not bore[0] <= pipe_bore * (1 + 1e-9) or not pipe_bore <= bore[1] * (1 + 1e-9):
        found.append(
            f"D = {1000 * pipe_bore:.4g} mm, where the standard holds from {1000 * bore[0]:g} to {1000 * bore[1]:g} mm"
        )
    if not ratio[0] - 1e-9 <= beta <= ratio[1] + 1e-9:
        found.append(f"β = {beta:.4g}, where the standard holds from {ratio[0]:g} to {ratio[1]:g}")
    if meter.startswith("orifice") and throat_bore < 0.0125:
        found.append(f"d = {1000 * throat_bore:.4g} mm, where the standard holds from 12.5 mm")
    at = np.atleast_1d(np.asarray(reynolds, float))
    at = at[at > 0]
    if len(at) and at.min() < low:
        found.append(f"Re = {_apart(at.min())}, where the standard holds from {_apart(low)}")
    if len(at) and at.max() > high:
        found.append(f"Re = {_apart(at.max())}, where the standard holds to {_apart(high)}")
    return found


def _apart(reynolds: float) -> str:
    """Three digits, thousands apart."""
    value = float(f"{reynolds:.3g}")
    return f"{value:,.0f}".replace(",", "\u202f") if value >= 1000 else f"{value:g}"


def _range_of(
    meter: str, bore: float, beta: float
) -> tuple[tuple[float, float], tuple[float, float], float, float]:
    """Limits of (D, β, least Re, largest Re) of ISO 5167-2 to -4."""
    if meter.startswith("orifice"):
        if meter.endswith("flange"):
            low = max(5000.0, 170e3 * beta**2 * bore)
        else:
            low = 5000.0 if beta <= 0.559 else 16000.0 * beta**2
        return (0.05, 1.0), (0.1, 0.75), low, np.inf
    return {
        "nozzle, ISA 1932": ((0.05, 0.5), (0.3, 0.8), 7e4 if beta < 0.44 else 2e4, 1e7),
        "nozzle, long radius": ((0.05, 0.63), (0.2, 0.8), 1e4, 1e7),
        "nozzle, venturi": ((0.065, 0.5), (0.316, 0.775), 1.5e5, 2e6),
        "venturi, machined": ((0.05, 0.25), (0.4, 0.75), 2e5, 1e6),
        "venturi, as cast": ((0.1, 0.8), (0.3, 0.75), 2e5, 2e6),
        "venturi, rough welded": ((0.2, 1.2), (0.4, 0.7), 2e5, 2e6),
    }[meter]


def _check_meter(meter: str, pipe_bore: float, throat_bore: float) -> None:
    if meter not in METER_TYPES:
        raise ReductionError(f"unknown meter {meter!r}; known are {'; '.join(METER_TYPES)}")
    if not 0 < throat_bore < pipe_bore:
        raise ReductionError(
            f"the throat ({throat_bore:g} m) must be smaller than the pipe ({pipe_bore:g} m): β = "
            f"{throat_bore / pipe_bore:.3g} must be below 1"
        )


def _above_zero(name: str, value: ArrayLike) -> None:
    if not (np.asarray(value, float) > 0).all():
        raise ReductionError(f"every {name} must be above 0; found {float(np.min(np.asarray(value))):g}")
