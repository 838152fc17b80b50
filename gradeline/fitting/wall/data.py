"""The slopes of a wall and what they depend on, what a fit makes of them, and ln S by the friction law."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.friction_laws import COLEBROOK_WHITE, FrictionLaw

__all__ = [
    "ROUGHEST",
    "WallData",
    "WallFit",
    "example_wall",
    "law_gradient",
    "law_log_slope",
    "log_residual",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Largest relative roughness that is looked at; the law itself is not claimed beyond it.
ROUGHEST = 0.1


@dataclass(frozen=True)
class WallData:
    """Friction slopes of a wall, R runs by K reaches.

    Every effect is the change for one standard uncertainty of its input, so that U of the covariance is the identity.

    Parameters
    ----------
    slope : (R, K) array
        S, dimensionless; NaN where there is none.
    slope_covariance : (R, K, K) array
        Random covariance of the slopes of a run, dimensionless; NaN where the scatter is not known.
    velocity : (R, K) array
        Mean velocity, m/s.
    diameter : (K,) array
        Bore, m.
    kinematic_viscosity : (R,) array
        m²/s.
    gravity : float
        m/s².
    flow_u : (R,) or (R, K) array
        Relative standard uncertainty of each run's own flow, dimensionless; 0 where none was stated. It is one error
        in all reaches of the run.
    own_slope_effect : (R, K) array
        Change of S with the run's own flow error, dimensionless; 0 where the bore does not change.
    viscosity_u : (R,) array
        Relative standard uncertainty of each run's own viscosity, dimensionless.
    slope_effect : (R, K, q) array
        Change of S with each shared input, dimensionless.
    diameter_effect : (K, q) array
        Relative change of the bore, dimensionless.
    flow_effect : (q,) or (R, K, q) array
        Relative change of the flow, dimensionless.
    viscosity_effect : (R, q) array
        Relative change of the kinematic viscosity, dimensionless.
    gravity_effect : (q,) array
        Relative change of gravity, dimensionless.
    slope_spread : (R, K) array or None
        Change of S for readings that scatter by one metre, 1/m: what tells the scatter of readings that nobody stated
        from that of the flows. None: as if all were relative.
    static_effect : (R, K, s) array or None
        Change of S with the errors of static readings that scatter by one metre, 1/m.
    law : FrictionLaw
        That the slopes are held against.
    """

    slope: Array
    slope_covariance: Array
    velocity: Array
    diameter: Array
    kinematic_viscosity: Array
    gravity: float
    flow_u: Array
    own_slope_effect: Array
    viscosity_u: Array
    slope_effect: Array
    diameter_effect: Array
    flow_effect: Array
    viscosity_effect: Array
    gravity_effect: Array
    slope_spread: Array | None = None
    static_effect: Array | None = None
    law: FrictionLaw = COLEBROOK_WHITE

    @property
    def reynolds(self) -> Array:
        """Re of each run and reach, (R, K), dimensionless."""
        return np.asarray(self.velocity * self.diameter / self.kinematic_viscosity[:, None])


@dataclass(frozen=True)
class WallFit:
    """The roughness of a wall.

    Parameters
    ----------
    roughness, low, high, upper95 : float
        ε, its interval and its one-sided 95 % upper bound, m; NaN where it could not be had. A single slope of unknown
        scatter gives ε alone.
    level : float
        Coverage of the interval, dimensionless.
    used : (R, K) bool array
        Slopes that entered.
    off_law : (R, K) bool array
        Slopes off the fitted law beyond their uncertainty, left out.
    score : (R, K) array
        Signed studentised deletion residual of ln S, dimensionless; NaN where there is no slope.
    expected_slope : (R, K) array
        S by the fitted law, the shared errors as the other runs show them, dimensionless.
    relative_scatter : float
        Scatter of S from run to run off the law beyond the runs' own stated flow and temperature errors,
        dimensionless, where the readings of a run leave none; else NaN.
    reading_scatter : float
        The part of that scatter that is the same in all readings, m; 0 where the runs do not ask for it.
    dof : float
        Degrees of freedom of the interval, dimensionless; infinite where the scatter is known.
    trend, trend_u : float
        Change of ln f against the law per decade of Re, and its standard uncertainty, dimensionless.
    trend_dof : float
        Degrees of freedom of that uncertainty, dimensionless.
    offset, offset_u : float
        Mean of ln f against the fitted law, and its standard uncertainty with the shared errors, dimensionless.
    chi_square : float
        Weighted sum of squares at the minimum, dimensionless.
    """

    roughness: float
    low: float
    high: float
    upper95: float
    level: float
    used: Mask
    off_law: Mask
    score: Array
    expected_slope: Array
    relative_scatter: float
    reading_scatter: float
    dof: float
    trend: float
    trend_u: float
    trend_dof: float
    offset: float
    offset_u: float
    chi_square: float


def law_log_slope(data: WallData, roughness: float | Array) -> Array:
    """Return ln S by the friction law.

    Parameters
    ----------
    data : WallData
        Velocities, bores, viscosities.
    roughness : float or (G, 1, 1) array
        ε, m, at least 0.

    Returns
    -------
    array
        ln(f V² / 2 g D), (R, K) or (G, R, K), dimensionless.

    Examples
    --------
    >>> data = example_wall()
    >>> bool(np.allclose(law_log_slope(data, 1e-4), np.log(data.slope)))
    True
    """
    factor = data.law.factor(data.reynolds, roughness / data.diameter)
    return np.asarray(np.log(factor * data.velocity**2 / (2 * data.gravity * data.diameter)))


def law_gradient(data: WallData, used: Mask, roughness: float) -> Array:
    """Return ∂ ln S_law / ∂ε.

    Parameters
    ----------
    data : WallData
        Velocities, bores, viscosities.
    used : (R, K) bool array
        Slopes in use.
    roughness : float
        ε, m, at least 0.

    Returns
    -------
    (R, K) array
        1/m; 0 where not used.

    Examples
    --------
    >>> data = example_wall()
    >>> gradient = law_gradient(data, np.isfinite(data.slope), 1e-4)
    >>> change = law_log_slope(data, 1.001e-4) - law_log_slope(data, 1e-4)
    >>> bool(np.allclose(gradient * 1e-7, change, rtol=1e-3))
    True
    """
    _, _, by_roughness = data.law.sensitivities(data.reynolds, roughness / data.diameter)
    return np.where(used, by_roughness / data.diameter, 0.0)


def log_residual(data: WallData, used: Mask, roughness: float | Array) -> Array:
    """Return ln S less that of the law.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    used : (R, K) bool array
        Slopes in use, all above 0.
    roughness : float or (G, 1, 1) array
        ε, m, at least 0.

    Returns
    -------
    array
        (R, K) or (G, R, K), dimensionless; 0 where not used.

    Examples
    --------
    >>> data = example_wall()
    >>> log_residual(data, np.isfinite(data.slope), 1e-4).round(9).any()
    np.False_
    """
    safe = np.log(np.where(used, data.slope, 1.0))
    return np.where(used, safe - law_log_slope(data, roughness), 0.0)


def example_wall() -> WallData:
    """Return eight exact runs of a rough pipe, as the examples take them.

    Returns
    -------
    WallData
        ε = 0.1 mm in a bore of 50 mm, 0.8 to 3 m/s. The bore is uncertain by 0.1 %, the calibration of the flow by
        0.3 %, each run's flow by 0.4 %.

    Examples
    --------
    >>> example_wall().reynolds[[0, -1], 0].round().tolist()
    [40000.0, 150000.0]
    """
    velocity = np.linspace(0.8, 3.0, 8)[:, None]
    data = WallData(
        slope=np.full((8, 1), np.nan),
        slope_covariance=np.full((8, 1, 1), 1e-10),
        velocity=velocity,
        diameter=np.array([0.05]),
        kinematic_viscosity=np.full(8, 1.0e-6),
        gravity=9.81,
        flow_u=np.full(8, 0.004),
        own_slope_effect=np.zeros((8, 1)),
        viscosity_u=np.zeros(8),
        slope_effect=np.zeros((8, 1, 2)),
        diameter_effect=np.array([[0.001, 0.0]]),
        flow_effect=np.array([0.0, 0.003]),
        viscosity_effect=np.zeros((8, 2)),
        gravity_effect=np.zeros(2),
    )
    return replace(data, slope=np.exp(law_log_slope(data, 1e-4)))
