"""Propagation of distributions by an adaptive Monte Carlo method (JCGM 101:2008, 7.9), many outputs at once.

Beside each value the same draws may give its first-order counterpart, whose distribution is known: what the two differ
by settles in a few blocks where the value itself would take a hundred (a control variate).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri

__all__ = ["Draw", "Propagation", "propagate", "tolerance_of"]

Array = NDArray[np.float64]

#: Values of a block; more where the level asks for it.
_BLOCK = 10_000
_MOST_BLOCKS = 150
_DIGITS = 2

#: Given a generator, how many draws and which outputs: their values (a, M), and those to first order or None.
Draw = Callable[[np.random.Generator, int, NDArray[np.intp]], tuple[Array, Array | None]]


@dataclass(frozen=True)
class Propagation:
    """What the draws say of m outputs.

    Parameters
    ----------
    mean, u, low, high : (m,) array
        Mean, standard deviation and the probabilistically symmetric interval, in the unit of each output.
    tolerance : (m,) array
        Numerical tolerance: half a unit in the second digit of u, in the unit of each output.
    trials : (m,) int array
        Draws that were made, dimensionless.
    settled : (m,) bool array
        Whether twice the standard deviation of each estimate fell below the tolerance.
    """

    mean: Array
    u: Array
    low: Array
    high: Array
    tolerance: Array
    trials: NDArray[np.intp]
    settled: NDArray[np.bool_]


def tolerance_of(u: ArrayLike, digits: int = _DIGITS) -> Array:
    """Return the numerical tolerance of a standard uncertainty.

    Parameters
    ----------
    u : array_like
        Standard uncertainties, above 0, in the unit of the result (dimensionless where that is).
    digits : int
        Significant digits that are meaningful, dimensionless.

    Returns
    -------
    ndarray
        δ = ½ 10^l where u = c × 10^l with an integer c of `digits` digits, in the unit of u; NaN where u is not above 0.

    References
    ----------
    JCGM 101:2008, 7.9.2: for u = 0.000 35 mm, two digits, δ = 0.000 005 mm; for u = 2 K, one digit, δ = 0.5 K.

    Examples
    --------
    >>> print(tolerance_of(0.00035), tolerance_of(2.0, 1))
    5e-06 0.5
    """
    given = np.asarray(u, dtype=np.float64)
    size = np.where(given > 0, given, np.nan)
    power = np.floor(np.log10(size)) - digits + 1
    # 0.0997 is 10 × 10⁻², not 100 × 10⁻³
    power = power + (np.rint(size / 10.0**power) >= 10**digits)
    return np.asarray(0.5 * 10.0**power)


def propagate(
    draw: Draw,
    outputs: int,
    *,
    level: float = 0.95,
    seed: int | np.random.SeedSequence = 0,
    control: tuple[Array, Array] | None = None,
    size: Array | None = None,
    share: float = 1.0,
) -> Propagation:
    """Draw until the results have settled.

    Parameters
    ----------
    draw : callable
        ``draw(generator, M, outputs)`` returns M values of the outputs asked for (a, M) and, with `control`, their
        first-order counterparts from the same draws.
    outputs : int
        How many there are, dimensionless.
    level : float
        Coverage of the interval, 0 to 1, dimensionless.
    seed : int or SeedSequence
        Of the generator, dimensionless: the same seed gives the same results.
    control : (mean (m,), u (m,)) or None
        Of the counterparts, which are normally distributed, in the unit of each output.
    size : (m,) array or None
        Standard uncertainties that the tolerance is taken from, in the unit of each output; None: that of the draws.
        Where it is given, u itself need not settle: the variance of Student's t with few degrees of freedom never does.
    share : float
        Share of the tolerance to which the results have to settle, above 0 to 1, dimensionless: less than 1 where they
        are to be compared with others (JCGM 101:2008, 8.2).

    Returns
    -------
    Propagation
        An output that has settled is drawn no more.

    Notes
    -----
    Blocks of M = max(10⁴, 100/(1 − level)) draws; after each the standard deviation of the mean over the blocks of y,
    u(y), y_low and y_high is compared with the tolerance. The estimates of all draws are the means over the blocks, so
    that no draw need be kept; u is that of all draws.

    References
    ----------
    JCGM 101:2008, 7.7 and 7.9.

    Examples
    --------
    The sum of four standard normal quantities, JCGM 101:2008, 9.2.2: u = 2.00, 95 % interval ± 3.92.

    >>> def draw(generator, count, outputs):
    ...     return generator.standard_normal((1, 4, count)).sum(axis=1), None
    >>> found = propagate(draw, 1, seed=1)
    >>> found.u.round(1).tolist(), found.high.round(1).tolist()
    ([2.0], [3.9])
    """
    generator = np.random.default_rng(seed)
    block = max(_BLOCK, math.ceil(100 / (1 - level)))
    inside = math.floor(level * block + 0.5)
    first = (block - inside) // 2 - 1
    places = (max(first, 0), max(first, 0) + inside)
    known = None if control is None else (*control, ndtri(0.5 + level / 2.0))
    # Sums are kept against the first block, so that no digits are lost.
    base, sums, squares = (np.zeros((4, outputs)) for _ in range(3))
    settled = np.zeros(outputs, dtype=bool)
    blocks = np.zeros(outputs, dtype=np.intp)
    tolerance = np.full(outputs, np.nan)
    mean, u, low, high = (np.full(outputs, np.nan) for _ in range(4))
    active = np.arange(outputs)
    while len(active) and blocks.max(initial=0) < _MOST_BLOCKS:
        values, counterparts = draw(generator, block, active)
        found = _block(values, places)
        if known is not None and counterparts is not None:
            at, spread = known[0][active], known[1][active]
            exact = np.stack([at, spread**2, at - known[2] * spread, at + known[2] * spread])
            found = found - _block(counterparts, places) + exact
        new = blocks[active] == 0
        base[:, active[new]] = found[:, new]
        away = found - base[:, active]
        sums[:, active] += away
        squares[:, active] += away**2
        blocks[active] += 1
        count = blocks[active].astype(float)
        middle = base[:, active] + sums[:, active] / count
        spread_of_blocks = np.maximum(squares[:, active] / count - (sums[:, active] / count) ** 2, 0.0)
        # Of the mean over the blocks.
        error = np.sqrt(spread_of_blocks / np.maximum(count - 1.0, 1.0))
        mean[active], low[active], high[active] = middle[0], middle[2], middle[3]
        u[active] = np.sqrt(np.maximum(middle[1] + (0.0 if known is not None else spread_of_blocks[0]), 0.0))
        error[1] = error[1] / np.maximum(2.0 * u[active], 1e-300)
        tolerance[active] = tolerance_of(u[active] if size is None else size[active])
        judged = error if size is None else error[2:]
        still = (2.0 * judged > share * tolerance[active]).any(axis=0) | (count < 2)
        settled[active] = ~((2.0 * judged > tolerance[active]).any(axis=0) | (count < 2))
        active = active[still]
    return Propagation(mean, u, low, high, tolerance, blocks * block, settled)


def _block(values: Array, places: tuple[int, int]) -> Array:
    """Mean, variance and the two quantiles of each row (4, a)."""
    mean = values.mean(axis=1)
    # about the mean, and in one pass over the values
    variance = np.einsum("am,am->a", values, values) / values.shape[1] - mean**2
    sharp = variance < 1e-6 * mean**2
    if sharp.any():
        variance[sharp] = values[sharp].var(axis=1)
    ends = np.partition(values, places, axis=1)[:, places]
    return np.stack([mean, variance, ends[:, 0], ends[:, 1]])
