"""Many simulated runs of one straight bore, as arrays, with their truth: for speed and for false-alarm rates."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from tests.simulate.line import Floats, TrueLine, TrueReach
from tests.simulate.water import kinematic_viscosity

TAIL_HEAD = 0.2


@dataclass(frozen=True)
class BenchRuns:
    """Readings and truth; arrays are (runs, taps) or (runs,), SI.

    `sigma` is the standard deviation with which each run's heads were scattered.
    """

    chainage: Floats
    heads: Floats
    true_heads: Floats
    flow: Floats
    viscosity: Floats
    velocity: Floats
    reynolds: Floats
    slope: Floats
    friction_factor: Floats
    sigma: Floats
    diameter: float
    roughness: float
    gravity: float


def simulate_runs(
    rng: np.random.Generator,
    *,
    runs: int,
    chainage: ArrayLike,
    diameter: float,
    roughness: float,
    flow_range: tuple[float, float],
    temperature: float | tuple[float, float],
    sigma: float,
    surge: float = 0.0,
    gravity: float = 9.80665,
) -> BenchRuns:
    """Heads of `runs` runs of water at flows spread evenly on a log scale over `flow_range` (m³/s).

    Heads scatter with σ² = sigma² + (surge V²/2g)² (m). `temperature` (K) is one for all runs, or a range from
    which each run draws its own. Nothing but the heads is in error.
    """
    x = np.asarray(chainage, dtype=float)
    flow = np.exp(rng.uniform(*np.log(flow_range), runs))
    low, high = temperature if isinstance(temperature, tuple) else (temperature, temperature)
    viscosity = kinematic_viscosity(rng.uniform(low, high, runs))
    reach = TrueReach(float(x[0]), float(x[-1]), diameter, roughness)
    heads = TrueLine((reach,), gravity=gravity).heads(x, flow, viscosity)
    heads += TAIL_HEAD - heads[:, -1:]
    velocity = reach.velocity(flow)
    scatter = np.hypot(sigma, surge * velocity**2 / (2 * gravity))
    return BenchRuns(
        chainage=x,
        heads=heads + scatter[:, None] * rng.standard_normal(heads.shape),
        true_heads=heads,
        flow=flow,
        viscosity=viscosity,
        velocity=velocity,
        reynolds=reach.reynolds(flow, viscosity),
        slope=reach.slope(flow, viscosity, gravity),
        friction_factor=reach.friction_factor(flow, viscosity),
        sigma=scatter,
        diameter=diameter,
        roughness=roughness,
        gravity=gravity,
    )
