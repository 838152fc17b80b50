"""Whether the grade line of a reach is straight: per run against scatter, over all runs against what taps do."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtr

from gradeline.fitting.slope import LineFits

__all__ = ["FEWEST_TAPS", "run_straightness", "shared_curve"]

Array = NDArray[np.float64]

#: Taps in a reach below which a shared curve is not told from tap errors.
FEWEST_TAPS = 6


def run_straightness(lines: LineFits, curve: Array, dof: float) -> Array:
    """Test a quadratic term in each run's line.

    Parameters
    ----------
    lines : LineFits
        The fits.
    curve : (n,) array
        The quadratic column at each observation, m²; zero outside the reach.
    dof : float
        Degrees of freedom of the pooled scatter, dimensionless.

    Returns
    -------
    (R,) array
        p of the term (two-sided), dimensionless; NaN where the run's taps do not determine it.

    Notes
    -----
    The added-variable test: with q = Qy, the term's t is c'q / sqrt(c'Qc) (Cook and Weisberg, *Residuals and Influence
    in Regression*, 1982, sec. 2.3).

    Examples
    --------
    >>> from gradeline.fitting.slope import fit_lines, project
    >>> x = np.arange(8.0)
    >>> design = np.column_stack([np.ones(8), -x])
    >>> heads = np.vstack([5.0 - x, 5.0 - x + 0.1 * x**2])
    >>> fits = fit_lines(heads, design, project(design, np.full((2, 1), 0.01), np.ones((2, 8), dtype=bool)))
    >>> (run_straightness(fits, x**2, 50.0) > 0.05).tolist()
    [True, False]
    """
    shared = lines.projectors
    along = lines.weighted_residuals @ curve
    size = np.einsum("n,unm,m->u", curve, shared.weight, curve)
    scale = (
        float(np.einsum("n,unn,n->u", curve, np.abs(shared.weight), curve).max(initial=0.0))
        if len(size)
        else 0.0
    )
    size = np.where(size > 1e-9 * max(scale, 1e-300), size, np.nan)[shared.index] / shared.scale
    statistic = np.abs(along) / np.sqrt(size)
    freedom = max(dof, 1.0) if np.isfinite(dof) else 1e9
    return np.asarray(2.0 * stdtr(freedom, -statistic))


def shared_curve(residuals: Array, slope: Array, position: Array) -> float:
    """Test a curve that the runs of a reach share against what its taps do.

    Parameters
    ----------
    residuals : (R, m) array
        Residuals of the reach's observations, m; NaN where one did not enter.
    slope : (R,) array
        Friction slope of the reach in each run, dimensionless.
    position : (m,) array
        Chainage of the observations, m.

    Returns
    -------
    float
        p of the quadratic term (two-sided), dimensionless; NaN for fewer than six taps or no slope.

    Notes
    -----
    Over the runs each tap's residual is reduced to its part that grows with S, by least squares. Tap errors (offset,
    chainage, burr) scatter these parts from tap to tap; the quadratic term through them is tested against that
    scatter, with m − 3 degrees of freedom, not against the much smaller scatter of the readings.

    Examples
    --------
    >>> x = np.linspace(0.0, 5.0, 10)
    >>> bent = 0.01 * (x - 2.5) ** 2
    >>> slope = np.array([0.1, 0.2, 0.4])
    >>> rng = np.random.default_rng(4)
    >>> shared_curve(slope[:, None] * (bent + 0.002 * rng.standard_normal(10)), slope, x) < 0.01
    True
    """
    known = np.isfinite(residuals) & np.isfinite(slope)[:, None] & (slope > 0)[:, None]
    weight = np.where(known, slope[:, None], 0.0)
    total = np.einsum("rm,rm->m", weight, weight)
    seen = total > 0
    if seen.sum() < FEWEST_TAPS:
        return float("nan")
    part = np.einsum("rm,rm->m", weight, np.where(known, residuals, 0.0))[seen] / total[seen]
    x = position[seen] - position[seen].mean()
    columns = np.column_stack([np.ones(len(x)), x, x**2])
    estimate, _, rank, _ = np.linalg.lstsq(columns, part, rcond=None)
    freedom = len(x) - 3
    if rank < 3 or freedom < 1:
        return float("nan")
    rest = part - columns @ estimate
    variance = float(rest @ rest) / freedom * np.linalg.inv(columns.T @ columns)[2, 2]
    if variance <= 0:
        return float("nan")
    return float(2.0 * stdtr(freedom, -abs(estimate[2]) / np.sqrt(variance)))
