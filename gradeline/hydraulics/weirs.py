"""Thin-plate weirs: discharge from the head upstream, and the limits of each equation."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gradeline.errors import ReductionError

__all__ = [
    "kindsvater_carter_flow",
    "kindsvater_shen_flow",
    "rectangular_weir_limits",
    "rehbock_flow",
    "v_notch_limits",
]

Array = NDArray[np.float64]

#: b/B against the constant and the slope of C_e over h/p, and against the addition k_b to the width, m.
_RATIO = np.array([0.0, 0.2, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0])
_CONSTANT = np.array([0.587, 0.589, 0.591, 0.592, 0.593, 0.595, 0.597, 0.599, 0.602])
_SLOPE = np.array([-0.0023, -0.0018, 0.0058, 0.011, 0.018, 0.030, 0.045, 0.064, 0.075])
_WIDENED_RATIO = np.array([0.0, 0.2, 0.4, 0.6, 0.8, 1.0])
_WIDENED = np.array([2.4e-3, 2.4e-3, 2.7e-3, 3.6e-3, 4.2e-3, -0.9e-3])


def kindsvater_shen_flow(head: ArrayLike, angle: ArrayLike, gravity: float = 9.80665) -> Array:
    """Return the discharge over a fully contracted V-notch.

    Parameters
    ----------
    head : array_like
        Above the vertex, m, at least 0.
    angle : array_like
        Of the notch θ, rad, 25 to 100 deg.
    gravity : float
        m/s².

    Returns
    -------
    array
        m³/s, Q = (8/15) C_e √(2g) tan(θ/2) (h + k_h)^2.5 (Kindsvater and Shen; ISO 1438). C_e and k_h follow the
        published curves over θ by polynomials (U.S. Bureau of Reclamation, Water Measurement Manual, read as fits of its
        figure; from memory): 0.578 and 0.9 mm at 90 deg.

    Raises
    ------
    ReductionError
        Where the angle is not between 0 and 180 deg.

    Examples
    --------
    >>> round(kindsvater_shen_flow(0.2, np.pi / 2).item(), 4)
    0.0247
    """
    theta = np.degrees(np.asarray(angle, float))
    if not ((theta > 0) & (theta < 180)).all():
        raise ReductionError(
            f"the angle of a notch lies between 0 and 180 deg; found {float(np.min(theta)):g} deg"
        )
    coefficient = 0.607165052 - 8.74466963e-4 * theta + 6.10393334e-6 * theta**2
    added = 0.3048 * (
        0.0144902648 - 3.3955535e-4 * theta + 3.29819003e-6 * theta**2 - 1.06215442e-8 * theta**3
    )
    h = np.asarray(head, float)
    flow = (
        8.0
        / 15.0
        * coefficient
        * np.sqrt(2.0 * gravity)
        * np.tan(np.radians(theta) / 2.0)
        * (h + added) ** 2.5
    )
    return np.asarray(np.where(h > 0, flow, 0.0))


def kindsvater_carter_flow(
    head: ArrayLike,
    crest_height: ArrayLike,
    width: ArrayLike,
    channel_width: ArrayLike,
    gravity: float = 9.80665,
) -> Array:
    """Return the discharge over a rectangular thin-plate weir, contracted or of full width.

    Parameters
    ----------
    head : array_like
        Above the crest, m, at least 0.
    crest_height : array_like
        p, of the crest above the channel's bed, m, above 0.
    width, channel_width : array_like
        b of the notch and B of the channel, m, b ≤ B.
    gravity : float
        m/s².

    Returns
    -------
    array
        m³/s, Q = (2/3) C_e √(2g) (b + k_b)(h + 0.001 m)^1.5, C_e = a + a' h/p with a, a' and k_b tabled over b/B
        (Kindsvater and Carter 1959; ISO 1438; the table from memory), straight between its
        points.

    Raises
    ------
    ReductionError
        Where the notch is wider than the channel or the crest is not above the bed.

    Examples
    --------
    >>> round(kindsvater_carter_flow(0.3, 0.4, 2.0, 2.0).item(), 4)
    0.6416
    """
    h, p, b, B = (np.asarray(value, float) for value in (head, crest_height, width, channel_width))
    _check_crest(p, b)
    if not (b <= B * (1 + 1e-9)).all():
        raise ReductionError(
            f"the notch ({float(np.max(b)):g} m) is wider than the channel ({float(np.min(B)):g} m)"
        )
    ratio = b / B
    coefficient = np.interp(ratio, _RATIO, _CONSTANT) + np.interp(ratio, _RATIO, _SLOPE) * h / p
    wide = b + np.interp(ratio, _WIDENED_RATIO, _WIDENED)
    flow = 2.0 / 3.0 * coefficient * np.sqrt(2.0 * gravity) * wide * (h + 0.001) ** 1.5
    return np.asarray(np.where(h > 0, flow, 0.0))


def rehbock_flow(
    head: ArrayLike, crest_height: ArrayLike, width: ArrayLike, gravity: float = 9.80665
) -> Array:
    """Return the discharge over a rectangular thin-plate weir of the channel's full width.

    Parameters
    ----------
    head : array_like
        Above the crest, m, at least 0.
    crest_height : array_like
        p, of the crest above the channel's bed, m, above 0.
    width : array_like
        m, above 0.
    gravity : float
        m/s².

    Returns
    -------
    array
        m³/s, Q = (2/3)(0.602 + 0.083 h/p) √(2g) b (h + 0.0012 m)^1.5 (Rehbock 1929; ISO 1438).

    Raises
    ------
    ReductionError
        Where the width is not above 0 or the crest is not above the bed.

    Examples
    --------
    >>> round(rehbock_flow(0.3, 0.4, 2.0).item(), 4)
    0.6484
    """
    h, p, b = (np.asarray(value, float) for value in (head, crest_height, width))
    _check_crest(p, b)
    flow = 2.0 / 3.0 * (0.602 + 0.083 * h / p) * np.sqrt(2.0 * gravity) * b * (h + 0.0012) ** 1.5
    return np.asarray(np.where(h > 0, flow, 0.0))


def v_notch_limits(
    head: ArrayLike,
    angle: float,
    crest_height: float | None = None,
    channel_width: float | None = None,
) -> list[str]:
    """Return the limits of the V-notch equation that a weir or its heads lie outside of.

    Parameters
    ----------
    head : array_like
        Of the flowing runs, m.
    angle : float
        rad.
    crest_height, channel_width : float, optional
        p and B, m; what is not given is not tested.

    Returns
    -------
    list of str
        One phrase for each, with the value found and the limit; empty where all is within (limits of full contraction by
        ISO 1438, from memory).

    Examples
    --------
    >>> v_notch_limits([0.04, 0.2], np.pi / 2)
    ['h = 0.04 m, where the equation holds from 0.06 to 0.38 m']
    """
    at = _positive(head)
    found = _outside("θ", float(np.degrees(angle)), 25.0, 100.0, "deg")
    found += _span("h", at, 0.06, 0.38)
    if crest_height is not None:
        found += _least("p", crest_height, 0.45)
        if len(at) and at.max() / crest_height > 0.4:
            found.append(f"h/p = {at.max() / crest_height:.3g}, where the equation holds up to 0.4")
    if channel_width is not None:
        found += _least("B", channel_width, 0.9)
        if len(at) and at.max() / channel_width > 0.2:
            found.append(f"h/B = {at.max() / channel_width:.3g}, where the equation holds up to 0.2")
    return found


def rectangular_weir_limits(
    equation: str, head: ArrayLike, crest_height: float, width: float, channel_width: float
) -> list[str]:
    """Return the limits of a rectangular weir's equation that it or its heads lie outside of.

    Parameters
    ----------
    equation : {"kindsvater-carter", "rehbock"}
        Which.
    head : array_like
        Of the flowing runs, m.
    crest_height, width, channel_width : float
        p, b and B, m.

    Returns
    -------
    list of str
        One phrase for each, with the value found and the limit; empty where all is within (ISO 1438, from memory).

    Examples
    --------
    >>> rectangular_weir_limits("rehbock", [0.3], 0.2, 0.5, 0.5)
    ['h/p = 1.5, where the equation holds up to 1']
    """
    at = _positive(head)
    rehbock = equation == "rehbock"
    found = _span("h", at, 0.03, 0.75 if rehbock else np.inf)
    found += _least("b", width, 0.3 if rehbock else 0.15) + _least("p", crest_height, 0.1)
    most = 1.0 if rehbock else 2.5
    if len(at) and at.max() / crest_height > most:
        found.append(f"h/p = {at.max() / crest_height:.3g}, where the equation holds up to {most:g}")
    side = (channel_width - width) / 2.0
    if not rehbock and 1e-9 < side < 0.1:
        found.append(f"(B − b)/2 = {side:.3g} m, where the equation holds from 0.1 m")
    return found


def _positive(head: ArrayLike) -> Array:
    at = np.atleast_1d(np.asarray(head, float))
    return at[at > 0]


def _span(name: str, at: Array, low: float, high: float) -> list[str]:
    upto = f"from {low:g} to {high:g} m" if np.isfinite(high) else f"from {low:g} m"
    ends = (
        [float(at.min())] * bool(at.min() < low) + [float(at.max())] * bool(at.max() > high)
        if len(at)
        else []
    )
    return [f"{name} = {value:.3g} m, where the equation holds {upto}" for value in ends]


def _outside(name: str, value: float, low: float, high: float, unit: str) -> list[str]:
    if low - 1e-9 <= value <= high + 1e-9:
        return []
    return [f"{name} = {value:.4g} {unit}, where the equation holds from {low:g} to {high:g} {unit}"]


def _least(name: str, value: float, low: float) -> list[str]:
    return [] if value >= low else [f"{name} = {value:.3g} m, where the equation holds from {low:g} m"]


def _check_crest(crest_height: Array, width: Array) -> None:
    if not (crest_height > 0).all() or not (width > 0).all():
        raise ReductionError("the crest lies above the bed and the notch has a width: both are above 0 m")
