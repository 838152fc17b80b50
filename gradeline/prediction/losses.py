"""Head losses of a line at one flow, and how they go with every error that belongs to the pipe. Pure functions."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.friction import (
    LAMINAR_LIMIT,
    TURBULENT_LIMIT,
    colebrook_white,
    colebrook_white_sensitivities,
    kinetic_energy_coefficient,
)
from gradeline.prediction.carried import Carried

__all__ = [
    "LAMINAR_IN_ZONE",
    "TURBULENT_IN_ZONE",
    "ZONE",
    "Conditions",
    "Parts",
    "friction_parts",
    "loss_parts",
    "velocity_head_parts",
]

Array = NDArray[np.float64]


#: Re at which laminar flow ends and turbulent flow begins: by the laws themselves, and where one of them stands in between,
#: both ends of the zone included.
ZONE = (LAMINAR_LIMIT, TURBULENT_LIMIT)
TURBULENT_IN_ZONE = (LAMINAR_LIMIT, math.nextafter(LAMINAR_LIMIT, 0.0))
LAMINAR_IN_ZONE = (math.nextafter(TURBULENT_LIMIT, math.inf), TURBULENT_LIMIT)


@dataclass(frozen=True)
class Conditions:
    """What flows and where it goes.

    Parameters
    ----------
    density, kinematic_viscosity : float
        kg/m³, m²/s.
    taken : (K,) array
        Flow that off-takes have taken upstream of each reach, m³/s.
    """

    density: float
    kinematic_viscosity: float
    taken: Array

    def velocity(self, carried: Carried, flow: float) -> Array:
        """Mean velocity in each reach (K,), m/s, for a flow at the line's start, m³/s."""
        return np.asarray(np.maximum(flow - self.taken, 0.0) / carried.area)

    def reynolds(self, carried: Carried, flow: float) -> Array:
        """Re in each reach (K,), dimensionless."""
        return self.velocity(carried, flow) * carried.diameter / self.kinematic_viscosity


@dataclass(frozen=True)
class Parts:
    """Heads of N parts, for C sets of roughnesses.

    Parameters
    ----------
    head : (C, N) array
        m.
    gradient : (C, N, z) array
        Change with each error, m.
    """

    head: Array
    gradient: Array


def friction_parts(
    carried: Carried,
    conditions: Conditions,
    flow: float,
    roughness: Array,
    mean: Array,
    *,
    limits: tuple[float, float] = ZONE,
) -> tuple[Parts, Array]:
    """Return the friction loss of each reach, and f.

    Parameters
    ----------
    carried : Carried
        The line.
    conditions : Conditions
        What flows.
    flow : float
        At the line's start, m³/s.
    roughness : (C, K) array
        ε, m.
    mean : (C, z) array
        Errors that the runs show, dimensionless.
    limits : tuple of float
        Re below which flow is laminar and above which it is turbulent, dimensionless; NaN between the two, where no law
        holds. `ZONE` leaves the critical zone out; with `TURBULENT_IN_ZONE` and `LAMINAR_IN_ZONE` a law stands in there.

    Returns
    -------
    parts : Parts
        Of the K reaches, without the pipe whose friction is part of a K.
    factor : (C, K) array
        f by the law of the regime, dimensionless.

    Notes
    -----
    ln S = ln f + 2 ln Q − 5 ln D − ln 2g + const. With f = f(Re, ε/D), Re ∝ Q/(D ν): an error of the bore counts
    −5 − ∂ln f/∂ln Re − ∂ln f/∂ln(ε/D). In laminar flow f = const/Re. The flow of a prediction is the true one.
    """
    velocity, reynolds = conditions.velocity(carried, flow), conditions.reynolds(carried, flow)
    rough = roughness / carried.diameter
    turbulent = reynolds > limits[1]
    safe = np.where(turbulent, reynolds, 2 * TURBULENT_LIMIT)
    factor, by_reynolds, by_roughness = colebrook_white_sensitivities(
        np.broadcast_to(safe, rough.shape), np.where(np.isfinite(rough), rough, 0.0)
    )
    factor = np.where(np.isfinite(rough), factor, np.nan)
    flowing = np.where(reynolds > 0, reynolds, 1.0)
    laminar = np.where(reynolds > 0, carried.laminar_constant / flowing, 0.0)
    slow = ~turbulent & (reynolds < limits[0])
    factor = np.where(turbulent, factor, np.where(slow, laminar, np.nan))
    by_reynolds = np.where(turbulent, by_reynolds, -1.0)
    relative = np.where(turbulent, by_roughness * np.nan_to_num(rough), 0.0)
    by_bore, by_velocity = by_reynolds - relative - 1.0, 2.0 + by_reynolds
    relative_change = (
        (by_bore - 2.0 * by_velocity)[:, :, None] * carried.by_diameter.T
        + by_velocity[:, :, None] * carried.by_flow.T
        - by_reynolds[:, :, None] * carried.by_viscosity
        - carried.by_gravity
        + np.where(slow, 1.0, 0.0)[:, None] * carried.by_laminar.T
    )
    length = carried.end - carried.start - carried.taken_off.sum(axis=0)
    slope = factor * velocity**2 / (2 * carried.gravity * carried.diameter)
    head = slope * length * np.exp(np.einsum("ckz,cz->ck", relative_change, mean))
    return Parts(head, head[:, :, None] * relative_change), factor


def loss_parts(carried: Carried, conditions: Conditions, flow: float, mean: Array) -> Parts:
    """Return the loss of each fitting, K V²/2g (C, M), m; NaN where K is not known."""
    head, by_head = _velocity_heads(carried, conditions, flow)
    head, by_head = head[carried.reference], by_head[carried.reference]
    coefficient = carried.loss_coefficient + mean @ carried.by_loss
    loss = coefficient * head * np.exp(mean @ by_head.T)
    gradient = head[:, None] * carried.by_loss.T + loss[:, :, None] * by_head
    return Parts(loss, gradient)


def velocity_head_parts(
    carried: Carried, conditions: Conditions, flow: float, factor: Array, mean: Array
) -> Parts:
    """Return α V²/2g of each reach (C, K), m, for friction factors (K,)."""
    head, by_head = _velocity_heads(carried, conditions, flow)
    reynolds = conditions.reynolds(carried, flow)
    turbulent = colebrook_white(np.maximum(reynolds, 1.0), 0.0)
    alpha = kinetic_energy_coefficient(reynolds, np.where(np.isfinite(factor), factor, turbulent))
    whole = alpha * head * np.exp(mean @ by_head.T)
    return Parts(whole, whole[:, :, None] * by_head)


def _velocity_heads(carried: Carried, conditions: Conditions, flow: float) -> tuple[Array, Array]:
    """V²/2g of each reach (K,), m, and its relative change with each error (K, z)."""
    head = conditions.velocity(carried, flow) ** 2 / (2 * carried.gravity)
    return head, -4.0 * carried.by_diameter.T + 2.0 * carried.by_flow.T - carried.by_gravity
