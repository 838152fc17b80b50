"""A run's line: weighted least squares of observations y = A θ + noise, batched over runs.

Runs whose observations have the same pattern (which were read, their relative variances, how the run's flow error
enters them) share one projector, so that ten thousand runs of a sound survey cost one matrix product.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["LineFits", "Projectors", "fit_lines", "project", "replace_runs"]

Array = NDArray[np.float64]

#: Eigenvalues of the scaled normal matrix below this are taken as zero: parameters that the taps cannot separate.
_RANK_TOLERANCE = 1e-10
#: Runs handled at once where every run needs its own matrix; keeps the temporary arrays in the cache.
_CHUNK = 4096


@dataclass(frozen=True)
class Projectors:
    """What depends on a run's pattern alone, one entry for each distinct pattern.

    Variances are relative: the variance of observation i in run r is ``scale[r] * variance[u, i]`` plus the
    low-rank part of the common errors, with ``u = index[r]``.

    Parameters
    ----------
    index : (R,) int array
        Pattern of each run.
    scale : (R,) array
        Variance that the run's relative variances refer to, m².
    gain : (U, p, n) array
        Estimates from observations, θ = gain @ y; unit of θ per m.
    covariance : (U, p, p) array
        Covariance of θ for unit `scale` when the variances are the true ones, in units of θ²/m².
    weight : (U, n, n) array
        Q = W − W A (A'WA)⁺ A'W with W the inverse covariance for unit `scale`, dimensionless: y'Qy / scale is the
        weighted sum of squares.
    estimable : (U, p) bool array
        Whether the pattern determines each parameter.
    used : (U, n) bool array
        Which observations enter.
    rank : (U,) int array
        Number of parameters determined.
    """

    index: NDArray[np.intp]
    scale: Array
    gain: Array
    covariance: Array
    weight: Array
    estimable: NDArray[np.bool_]
    used: NDArray[np.bool_]
    rank: NDArray[np.intp]


@dataclass(frozen=True)
class LineFits:
    """The fitted lines of R runs with p parameters and n observations.

    Parameters
    ----------
    parameters : (R, p) array
        NaN where the run's observations do not determine a parameter; unit of the parameter.
    residuals : (R, n) array
        Observation minus fitted value, m, also of observations that did not enter; NaN where there was none.
    weighted_residuals : (R, n) array
        q = Q y / scale, 1/m; zero where an observation did not enter.
    sum_of_squares : (R,) array
        Weighted sum of squares y'Qy / scale, dimensionless: chi-square with `dof` if the variances are true.
    dof : (R,) int array
        Degrees of freedom.
    projectors : Projectors
        What the runs share.
    """

    parameters: Array
    residuals: Array
    weighted_residuals: Array
    sum_of_squares: Array
    dof: NDArray[np.intp]
    projectors: Projectors

    def parameter_covariance(self) -> Array:
        """Return the (R, p, p) covariance of the parameters for the stated variances."""
        shared = self.projectors
        return shared.covariance[shared.index] * shared.scale[:, None, None]


def project(
    design: Array,
    variance: Array,
    used: NDArray[np.bool_],
    common: Array | None = None,
) -> Projectors:
    """Work out the projectors of all runs.

    Parameters
    ----------
    design : (n, p) array
        A of y = A θ, common to the runs; unit of y per unit of θ.
    variance : (R, n) or (R, 1) array
        Variance of each observation, m², > 0 where used; one column where a run's observations share it.
    used : (R, n) bool array
        Which observations enter.
    common : (R, n, k) array, optional
        Change of each observation for one standard uncertainty of k errors that several observations of a run share
        (the run's flow, the zero of a gauge), m: nuisances, marginalised (their covariance is B B').

    Returns
    -------
    Projectors
        One entry for each distinct pattern.

    Notes
    -----
    Generalised least squares, θ = (A'WA)⁺ A'W y with W = (diag(variance) + B B')⁻¹ and B the common errors; the
    inverse of the low-rank update by Woodbury. The normal matrix is scaled to a unit diagonal before its
    rank is judged, and a parameter is estimable where it has no part in the null space (Å. Björck, *Numerical
    Methods for Least Squares Problems*, SIAM 1996, ch. 1 and 2).

    Examples
    --------
    >>> design = np.column_stack([np.ones(4), -np.arange(4.0)])
    >>> shared = project(design, np.full((5, 4), 1e-6), np.ones((5, 4), dtype=bool))
    >>> shared.gain.shape, int(shared.rank[0])
    ((1, 2, 4), 2)
    """
    n = used.shape[1]
    if variance.shape[1] == 1:
        scale = variance[:, 0].copy()
        relative = used
    else:
        masked = np.where(used, variance, np.inf)
        scale = masked.min(axis=1, initial=np.inf)
        scale[~np.isfinite(scale)] = 1.0
        relative = masked / scale[:, None]
    effect = None
    if common is not None and np.any(common):
        effect = np.where(used[:, :, None], common, 0.0) / np.sqrt(scale)[:, None, None]
    index, first = _patterns(relative, effect)
    inverse = relative[first].astype(float) if variance.shape[1] == 1 else 1.0 / relative[first]
    weight = np.zeros((len(first), n, n))
    weight[:, np.arange(n), np.arange(n)] = inverse
    if effect is not None:
        turned = inverse[:, :, None] * effect[first]
        core = np.eye(effect.shape[2]) + np.einsum("unk,unl->ukl", turned, effect[first])
        weight -= np.einsum("unk,ukl,uml->unm", turned, np.linalg.inv(core), turned)
    half = np.einsum("np,unm->upm", design, weight)
    normal = half @ design
    diagonal = np.sqrt(np.maximum(np.einsum("upp->up", normal), 0.0))
    unit = np.where(diagonal > 0, diagonal, 1.0)
    values, vectors = np.linalg.eigh(normal / (unit[:, :, None] * unit[:, None, :]))
    kept = values > _RANK_TOLERANCE
    inverted = np.where(kept, 1.0 / np.where(kept, values, 1.0), 0.0)
    covariance = np.einsum("upk,uk,uqk->upq", vectors, inverted, vectors) / (
        unit[:, :, None] * unit[:, None, :]
    )
    null_part = np.einsum("upk,uk->up", vectors**2, ~kept)
    gain = covariance @ half
    return Projectors(
        index=index,
        scale=scale,
        gain=gain,
        covariance=covariance,
        weight=weight - half.transpose(0, 2, 1) @ gain,
        estimable=(null_part < 1e-8) & (diagonal > 0),
        used=used[first],
        rank=kept.sum(axis=1),
    )


def _patterns(
    relative: NDArray[np.float64 | np.bool_], effect: Array | None
) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Tell which runs share a pattern: (index of the pattern per run, a run that has it)."""
    key = relative if effect is None else np.hstack([relative, effect.reshape(len(effect), -1)])
    if len(key) == 0:
        return np.zeros(0, dtype=np.intp), np.zeros(0, dtype=np.intp)
    if (key == key[0]).all():
        return np.zeros(len(key), dtype=np.intp), np.zeros(1, dtype=np.intp)
    # One number a row instead of sorting whole rows: rows that differ agree in it by a chance of 1 in 10^15.
    mixed = np.where(np.isfinite(key), key, -1.0) @ np.random.default_rng(0).uniform(1.0, 2.0, key.shape[1])
    _, first, index = np.unique(mixed, return_index=True, return_inverse=True)
    return index.astype(np.intp), first.astype(np.intp)


def fit_lines(observations: Array, design: Array, projectors: Projectors) -> LineFits:
    """Fit the lines of all runs.

    Parameters
    ----------
    observations : (R, n) array
        y, m; NaN where not read.
    design : (n, p) array
        A; unit of y per unit of θ.
    projectors : Projectors
        Of `project` for the same design.

    Returns
    -------
    LineFits
        Estimates, residuals and weighted sums of squares.

    Examples
    --------
    >>> x = np.array([0.0, 1.0, 2.0, 3.0])
    >>> design = np.column_stack([np.ones(4), -x])
    >>> heads = 2.0 - 0.1 * x + np.array([[0.0, 0.001, -0.001, 0.0]])
    >>> fits = fit_lines(heads, design, project(design, np.full((1, 4), 1e-6), np.ones((1, 4), dtype=bool)))
    >>> fits.parameters.round(6)
    array([[2.0003, 0.1002]])
    """
    used = projectors.used
    known = np.isfinite(observations)
    whole = bool(known.all())
    y = observations if whole else np.where(known, observations, 0.0)
    parameters = _each(projectors.gain, projectors.index, y)
    residuals = y - parameters @ design.T
    if not whole:
        residuals[~known] = 0.0
    # Q y = Q e, since Q A = 0: by the residuals, no digits are lost to large heads.
    weighted = _each(projectors.weight, projectors.index, residuals)
    weighted /= projectors.scale[:, None]
    squares = np.einsum("rn,rn->r", weighted, residuals)
    dof = np.maximum(used.sum(axis=1) - projectors.rank, 0)[projectors.index]
    estimable = projectors.estimable if len(used) == 1 else projectors.estimable[projectors.index]
    if not whole:
        residuals[~known] = np.nan
    if not projectors.estimable.all():
        parameters = np.where(estimable, parameters, np.nan)
    return LineFits(
        parameters=parameters,
        residuals=residuals,
        weighted_residuals=weighted,
        sum_of_squares=np.maximum(squares, 0.0),
        dof=dof,
        projectors=projectors,
    )


def _each(matrices: Array, index: NDArray[np.intp], vectors: Array) -> Array:
    """Multiply each row of `vectors` by the matrix of its pattern."""
    if len(matrices) == 1:
        return np.asarray(vectors @ matrices[0].T)
    product = np.empty((len(vectors), matrices.shape[1]))
    for start in range(0, len(vectors), _CHUNK):
        part = slice(start, start + _CHUNK)
        product[part] = np.einsum("rpn,rn->rp", matrices[index[part]], vectors[part])
    return product


def replace_runs(lines: LineFits, runs: NDArray[np.intp], part: LineFits) -> LineFits:
    """Put new fits in the place of some runs.

    Parameters
    ----------
    lines : LineFits
        Of all runs.
    runs : (k,) int array
        Runs to replace, indices.
    part : LineFits
        The new fits of these runs, in the same order.

    Returns
    -------
    LineFits
        A new object; `lines` stays as it is.

    Examples
    --------
    >>> design = np.column_stack([np.ones(4), -np.arange(4.0)])
    >>> heads = np.array([[4.0, 3, 2, 1], [4.0, 3, 9, 1]])
    >>> used = np.ones((2, 4), dtype=bool)
    >>> fits = fit_lines(heads, design, project(design, np.ones((2, 1)), used))
    >>> used[1, 2] = False
    >>> again = fit_lines(heads[1:], design, project(design, np.ones((1, 1)), used[1:]))
    >>> replace_runs(fits, np.array([1]), again).parameters.round(6).tolist()
    [[4.0, 1.0], [4.0, 1.0]]
    """
    old, new = lines.projectors, part.projectors
    index, scale = old.index.copy(), old.scale.copy()
    index[runs] = new.index + len(old.gain)
    scale[runs] = new.scale
    arrays = {}
    for name in ("parameters", "residuals", "weighted_residuals", "sum_of_squares", "dof"):
        arrays[name] = getattr(lines, name).copy()
        arrays[name][runs] = getattr(part, name)
    joined = {
        name: np.concatenate([getattr(old, name), getattr(new, name)])
        for name in ("gain", "covariance", "weight", "estimable", "used", "rank")
    }
    return LineFits(projectors=Projectors(index=index, scale=scale, **joined), **arrays)
