"""The physics of a simulated line whose truth is known: heads at any chainage, at any flow."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gradeline.hydraulics.friction import colebrook_white

Floats = NDArray[np.float64]

LAMINAR_UNTIL, TURBULENT_FROM = 2000.0, 4000.0


def friction_factor(reynolds: ArrayLike, relative_roughness: float) -> Floats:
    """Darcy f: 64/Re, Colebrook-White, and between Re 2000 and 4000 a straight line; NaN where Re = 0."""
    re = np.asarray(reynolds, dtype=float)
    with np.errstate(divide="ignore"):
        laminar = np.where(re > 0, 64 / re, np.nan)
    turbulent = colebrook_white(np.maximum(re, TURBULENT_FROM), relative_roughness)
    share = np.clip((re - LAMINAR_UNTIL) / (TURBULENT_FROM - LAMINAR_UNTIL), 0, 1)
    critical = (1 - share) * 64 / LAMINAR_UNTIL + share * turbulent
    return np.where(re <= LAMINAR_UNTIL, laminar, critical)


def kinetic_energy_factor(reynolds: ArrayLike, relative_roughness: float) -> Floats:
    """Factor α of the velocity head: 2, 1 + 2.7 f, and between Re 2000 and 4000 a straight line."""
    re = np.asarray(reynolds, dtype=float)
    share = np.clip((re - LAMINAR_UNTIL) / (TURBULENT_FROM - LAMINAR_UNTIL), 0, 1)
    turbulent = 1 + 2.7 * friction_factor(np.maximum(re, TURBULENT_FROM), relative_roughness)
    return 2 * (1 - share) + share * turbulent


@dataclass(frozen=True)
class TrueReach:
    """A length of one bore, all in metres."""

    start: float
    end: float
    diameter: float
    roughness: float

    def velocity(self, flow: Floats) -> Floats:
        """Mean velocity, m/s."""
        return flow / (np.pi * self.diameter**2 / 4)

    def reynolds(self, flow: Floats, viscosity: Floats) -> Floats:
        """Reynolds number of each run."""
        return self.velocity(flow) * self.diameter / viscosity

    def friction_factor(self, flow: Floats, viscosity: Floats) -> Floats:
        """Darcy f of each run."""
        return friction_factor(self.reynolds(flow, viscosity), self.roughness / self.diameter)

    def slope(self, flow: Floats, viscosity: Floats, gravity: float) -> Floats:
        """Friction slope of each run, 0 without flow."""
        f = np.nan_to_num(self.friction_factor(flow, viscosity))
        return f * self.velocity(flow) ** 2 / (2 * gravity * self.diameter)


@dataclass(frozen=True)
class TrueLoss:
    """A local loss at chainage `at` (m); the coefficient refers to the smaller bore there."""

    at: float
    coefficient: float


@dataclass(frozen=True)
class TrueLine:
    """Reaches in flow order, local losses and gravity (m/s²)."""

    reaches: tuple[TrueReach, ...]
    losses: tuple[TrueLoss, ...] = ()
    gravity: float = 9.80665

    def heads(self, chainage: ArrayLike, flow: ArrayLike, viscosity: ArrayLike) -> Floats:
        """Piezometric heads (runs × points, m), counted from the energy head at the start of the line.

        A point on a boundary between two reaches belongs to the reach upstream of it; the losses stand downstream
        of a point at the same chainage.
        """
        x, q = np.asarray(chainage, dtype=float), np.asarray(flow, dtype=float)
        nu = np.broadcast_to(np.asarray(viscosity, dtype=float), q.shape)
        head = np.zeros((q.size, x.size))
        for number, reach in enumerate(self.reaches):
            lengths = np.clip(x, reach.start, reach.end) - reach.start
            head -= reach.slope(q, nu, self.gravity)[:, None] * lengths
            inside = (x <= reach.end) & ((x > reach.start) | (number == 0))
            alpha = kinetic_energy_factor(reach.reynolds(q, nu), reach.roughness / reach.diameter)
            velocity_head = alpha * reach.velocity(q) ** 2 / (2 * self.gravity)
            head -= velocity_head[:, None] * inside
        for loss in self.losses:
            bore = min(reach.diameter for reach in self.reaches if reach.start <= loss.at <= reach.end)
            velocity = q / (np.pi * bore**2 / 4)
            fall = loss.coefficient * velocity**2 / (2 * self.gravity)
            head -= fall[:, None] * (x > loss.at)
        return head
