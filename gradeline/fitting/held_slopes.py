"""The slopes of a wall with one covariance held fixed: χ² of a law, at its best roughness, with or without a column."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar
from scipy.special import stdtrit

from gradeline.fitting.wall import WallData, WallFit, inverse_covariance, law_log_slope
from gradeline.fitting.wall.minimum import roughness_steps

__all__ = [
    "HeldSlopes",
    "held_slopes",
    "student_point",
    "told_by_runs",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: An intercept may take this much of the law's S and no more.
_LEAST = 0.1
#: A change of ln ε that moves χ² by less than the square of this is none; columns this much alike are one.
_TELLS_NOTHING, _ALIKE = 1e-6, 1e10


@dataclass(frozen=True)
class HeldSlopes:
    """Slopes in use with one covariance, so that laws and columns are compared on equal terms.

    Parameters
    ----------
    data : WallData
        Slopes, what they depend on, and the law that they are held against.
    used : (R, K) bool array
        Slopes in use.
    solve : callable
        Applies the inverse covariance of ln S.
    grid : (G,) array
        Roughnesses that are looked at, m.
    shift : float
        An intercept that the law has beside its own S, dimensionless.
    """

    data: WallData
    used: Mask
    solve: Callable[[Array], Array]
    grid: Array
    shift: float = 0.0

    def slope(self, roughness: float | Array) -> Array:
        """S of the law and the intercept, kept above zero."""
        law = np.exp(law_log_slope(self.data, roughness))
        return np.maximum(law + self.shift, _LEAST * law)

    def residual(self, roughness: float | Array) -> Array:
        """Return ln S less that of the law, 0 where not used."""
        safe = np.log(np.where(self.used, self.data.slope, 1.0))
        return np.where(self.used, safe - np.log(self.slope(roughness)), 0.0)

    def product(self, left: Array, solved: Array) -> Array:
        """Return the sum over runs and reaches of one column times another, the covariance already in the second."""
        return np.asarray((left * solved).sum(axis=(-2, -1)))

    def squares(
        self, roughness: float | Array, column: Callable[[float | Array], Array] | None = None
    ) -> Array:
        """χ² at one roughness or at several (G, 1, 1), a column's best multiple taken out."""
        residual = self.residual(roughness)
        solved = self.solve(residual)
        squares = self.product(residual, solved)
        if column is None:
            return squares
        along = column(roughness)
        size = self.product(along, self.solve(along))
        return np.asarray(squares - self.product(along, solved) ** 2 / np.maximum(size, 1e-300))

    def best(self, column: Callable[[float | Array], Array] | None = None) -> tuple[float, float]:
        """(roughness, χ²) of the minimum over ε >= 0."""
        at_grid = self.squares(self.grid[:, None, None], column)
        if not self.data.law.rough:
            return 0.0, float(at_grid[0])
        place = int(np.argmin(at_grid))
        ends = self.grid[max(place - 1, 0)], self.grid[min(place + 1, len(self.grid) - 1)]
        found = minimize_scalar(
            lambda value: float(self.squares(float(value), column)),
            bounds=(float(ends[0]), float(ends[1])),
            method="bounded",
            options={"xatol": 1e-9 * float(ends[1])},
        )
        if float(found.fun) < float(at_grid[place]):
            return float(found.x), float(found.fun)
        return float(self.grid[place]), float(at_grid[place])

    def gradient(self, roughness: float) -> Array:
        """∂ ln S / ∂ ln ε of the law."""
        relative = roughness / self.data.diameter
        _, _, by_roughness = self.data.law.sensitivities(self.data.reynolds, relative)
        return np.where(self.used, by_roughness * relative, 0.0)

    def coefficient(self, column: Callable[[float | Array], Array], roughness: float) -> tuple[float, float]:
        """The column's multiple and its standard uncertainty, ε beside it where it is inside its range."""
        columns = [column(roughness)]
        if roughness > 0:
            columns.append(self.gradient(roughness))
        turned = [self.solve(one) for one in columns]
        normal = np.array([[float(self.product(a, b)) for b in turned] for a in columns])
        size = np.sqrt(np.diagonal(normal))
        if not np.isfinite(normal).all() or not size[0] > 0:
            return float("nan"), float("nan")
        if len(size) > 1 and not size[1] > _TELLS_NOTHING:
            normal, size, turned = normal[:1, :1], size[:1], turned[:1]
        if np.linalg.cond(normal / np.outer(size, size)) > _ALIKE:
            return float("nan"), float("nan")
        inverse = np.linalg.inv(normal / np.outer(size, size)) / np.outer(size, size)
        right = np.array([float(self.product(self.residual(roughness), one)) for one in turned])
        return float((inverse @ right)[0]), float(np.sqrt(inverse[0, 0]))

    def ones(self) -> Callable[[float | Array], Array]:
        """The same change of ln S in all runs: what an error of the bore or of the flow's scale does."""
        column = self.used.astype(float)
        return lambda roughness: np.broadcast_to(column, np.shape(roughness)[:1] + column.shape)

    def decades(self) -> Callable[[float | Array], Array]:
        """log₁₀ Re about its weighted mean."""
        ones = self.used.astype(float)
        decades = np.where(self.used, np.log10(np.where(self.used, self.data.reynolds, 1.0)), 0.0)
        solved = self.solve(ones)
        mean = float(self.product(solved, decades) / self.product(solved, ones))
        centred = np.where(self.used, decades - mean, 0.0)
        return lambda roughness: np.broadcast_to(centred, np.shape(roughness)[:1] + centred.shape)

    def inverse_slope(self) -> Callable[[float | Array], Array]:
        """1/S: what a constant error of S does to ln S."""
        return lambda roughness: np.where(self.used, 1.0 / self.slope(roughness), 0.0)


def held_slopes(data: WallData, fit: WallFit, used: Mask) -> HeldSlopes:
    """Return the slopes of a wall with the covariance of its fit held fixed.

    Parameters
    ----------
    data : WallData
        Slopes and what they depend on.
    fit : WallFit
        Of that data.
    used : (R, K) bool array
        Slopes in use.

    Returns
    -------
    HeldSlopes
        Held against the law of `data`.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> round(held_slopes(data, fit, fit.used).best()[0], 6)
    0.0001
    """
    return HeldSlopes(data, used, inverse_covariance(data, fit, used), roughness_steps(data))


def told_by_runs(fit: WallFit) -> bool:
    """Whether nothing but the runs themselves tells how they scatter.

    Parameters
    ----------
    fit : WallFit
        Of a wall.

    Returns
    -------
    bool
        False where readings or a statement tell it.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> told_by_runs(fit_wall(data, np.isfinite(data.slope)))
    False
    """
    return bool(np.isfinite(fit.relative_scatter))


def student_point(dof: float, probability: float) -> float:
    """Return a point of Student's t, or of the normal distribution.

    Parameters
    ----------
    dof : float
        Degrees of freedom, dimensionless; infinite for the normal distribution.
    probability : float
        Below the point, dimensionless, 0 to 1.

    Returns
    -------
    float
        The point, dimensionless.

    Examples
    --------
    >>> round(student_point(10.0, 0.975), 3), round(student_point(np.inf, 0.975), 2)
    (2.228, 1.96)
    """
    return float(stdtrit(dof if np.isfinite(dof) else 1e9, probability))
