"""The scatter that is left when every tap may have its own steady error: what no persistent fault can inflate."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.model import Model
from gradeline.fitting.scatter import Scatter, estimate_scatter, runs_that_tell, scatter_variance
from gradeline.fitting.slope import project

__all__ = ["SteadyScatter", "steady_scatter"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Readings further off than this many standard deviations do not speak of the scatter.
_FAR = 4.0
#: Never more than this share of them is set aside.
_MOST_SHARE = 0.25
#: Passes at most.
_PASSES = 12
#: A reading that the fit follows closer than this says nothing.
_BOUND = 0.02
#: Information below this share of the greatest is none; from so many steady errors on it is looked at by a short way.
_NOTHING, _MANY = 1e-10, 150
#: From so many runs on each observation may have three steady errors, from so many two.
_THREE, _TWO = 6, 4
#: Scatter is at least this, m: no gauge tells heads apart that differ by less.
_ROUNDING = 2e-5


@dataclass(frozen=True)
class SteadyScatter:
    """Scatter of each kind of gauge.

    Parameters
    ----------
    parts : tuple of Scatter
        One for each kind.
    variance : (F, n) array
        Of each observation, m².
    dof : float
        Degrees of freedom behind it, dimensionless; infinite where statements stand.
    """

    parts: tuple[Scatter, ...]
    variance: Array
    dof: float


def steady_scatter(
    observations: Array, used: Mask, model: Model, slope: Array, free: Array
) -> SteadyScatter | None:
    """Judge the scatter with each observation's steady errors taken out.

    Parameters
    ----------
    observations : (F, n) array
        m.
    used : (F, n) bool array
        Which enter.
    model : Model
        Of the observations; persistent errors are not used.
    slope : (F,) array
        Friction slope of each run, dimensionless.
    free : (n, d) array
        Directions along which each run is free, m per m.

    Returns
    -------
    SteadyScatter or None
        None where nothing tells the scatter.

    Notes
    -----
    An error that is constant over the runs, grows with S or with V²/2g is fitted to each observation, with the
    freedom that this costs; readings that do not follow are set aside, the worst of each run at a time.

    Examples
    --------
    >>> rng = np.random.default_rng(8)
    >>> x, slope = np.arange(10.0), np.linspace(0.1, 1.0, 12)
    >>> heads = 9.0 - slope[:, None] * x + 0.001 * rng.standard_normal((12, 10))
    >>> heads[:, 4] += 0.05 + 0.2 * slope
    >>> model = Model(np.column_stack([np.ones(10), -x]), slope, np.zeros(10, int), np.zeros(10))
    >>> found = steady_scatter(heads, np.isfinite(heads), model, slope, np.zeros((10, 0)))
    >>> 0.0008 < found.parts[0].base < 0.0012
    True
    """
    runs, n = observations.shape
    y = np.where(used, np.nan_to_num(observations), 0.0)
    design = np.hstack([model.design, free])
    patterns = [np.ones(runs), np.nan_to_num(slope), model.velocity_head]
    patterns = patterns[: 3 if runs >= _THREE else 2 if runs >= _TWO else 0]
    columns = np.zeros((runs, n, n * len(patterns)))
    for g, pattern in enumerate(patterns):
        columns[:, np.arange(n), g * n + np.arange(n)] = pattern[:, None] / max(np.abs(pattern).max(), 1e-300)
    start = np.where(model.floor > 0, model.floor, 1e-3) if model.kinds > 1 else 1e-3 * model.multiplier()
    variance = np.broadcast_to(start**2, used.shape).copy()
    if model.repeats is not None:
        variance = variance / np.maximum(model.repeats, 1)
    sound = used & _in_line(y, used, design, variance, model)[:, None]
    aside = int((used & ~sound).sum())
    parts: tuple[Scatter, ...] = ()
    for turn in range(_PASSES):
        # Common errors have a size in metres: they are weighed once the scatter is known.
        shared = project(design, variance, sound, model.common if turn else None)
        weight = shared.weight[shared.index] / shared.scale[:, None, None]
        residual, redundancy = _left(y, weight, variance, columns)
        standing = sound & (redundancy > _BOUND)
        score = np.where(standing, residual / np.sqrt(variance * np.where(standing, redundancy, 1.0)), 0.0)
        parts = _parts(residual, redundancy, standing, model, score)
        if not any(part.is_known for part in parts):
            return None
        new = _variance(parts, model, used.shape)
        score = score * np.sqrt(variance / new)
        worst = np.abs(score).argmax(axis=1)
        gone = np.abs(score[np.arange(runs), worst]) > _FAR
        room = int(_MOST_SHARE * used.sum()) - int((used & ~sound).sum()) + aside
        settled = bool(np.allclose(new, variance, rtol=0.01))
        variance = new
        if turn and ((not gone.any() and settled) or room < gone.sum()):
            break
        sound[np.flatnonzero(gone), worst[gone]] = False
    judged = [part.dof for part in parts if not part.stands]
    return SteadyScatter(parts, variance, float(sum(judged)) if judged else float("inf"))


def _in_line(y: Array, used: Mask, design: Array, variance: Array, model: Model) -> Mask:
    """Runs whose readings scatter about their line as those of the others do, steady errors and all.

    With few runs the steady errors would take up part of what one run alone has wrong, and spread it over the others.
    """
    shared = project(design, variance, used)
    weight = shared.weight[shared.index] / shared.scale[:, None, None]
    freedom = np.einsum("rii,ri->r", weight, variance)
    squares = np.einsum("ri,rij,rj->r", y, weight, y)
    tells = freedom > _BOUND
    found = np.ones(len(y), dtype=bool)
    found[tells] = runs_that_tell(squares[tells] / freedom[tells], freedom[tells], model.velocity_head[tells])
    return found


def _left(y: Array, weight: Array, variance: Array, columns: Array) -> tuple[Array, Array]:
    """Residuals with lines and steady errors taken out, and the redundancy of each."""
    flat = y.size
    turned = weight @ columns
    inner = columns.reshape(flat, -1).T @ turned.reshape(flat, -1)
    inverse = _inverse(inner)
    sizes = inverse @ (turned.reshape(flat, -1).T @ y.reshape(flat))
    rest = y - columns @ sizes
    residual = np.einsum("rij,rj->ri", weight, rest) * variance
    own = np.einsum("rii->ri", weight) - ((turned @ inverse) * turned).sum(axis=2)
    return residual, np.clip(own * variance, 0.0, 1.0)


def _inverse(inner: Array) -> Array:
    """Inverse of the information on the steady errors, which the lines take the rest of.

    What the lines take does not matter: `inner` and all that meets its inverse are zero along it. So where there are many,
    a ridge of the size of what counts as nothing stands for leaving it out, at a fraction of the work.
    """
    if len(inner) <= _MANY:
        return np.asarray(np.linalg.pinv(inner, rcond=_NOTHING, hermitian=True))
    ridge = _NOTHING * float(np.diagonal(inner).max()) * np.eye(len(inner))
    return np.asarray(np.linalg.inv(inner + ridge))


def _parts(
    residual: Array, redundancy: Array, standing: Mask, model: Model, score: Array
) -> tuple[Scatter, ...]:
    times = 1.0 / model.multiplier() ** 2 * (1.0 if model.repeats is None else np.maximum(model.repeats, 1))
    # Bounded at first, so that what is set aside later does not set the scale now.
    scale = max(float(np.median(np.abs(score[standing]))) * 1.4826, 1e-12) if standing.any() else 1.0
    bounded = np.where(
        np.abs(score) > _FAR * scale, residual * _FAR * scale / np.maximum(np.abs(score), 1e-300), residual
    )
    squares = np.where(standing, bounded**2 * times, 0.0)
    free = np.where(standing, redundancy, 0.0)
    found = []
    for kind in range(model.kinds):
        mine = model.kind == kind
        expected = free[:, mine].sum(axis=1)
        resolution = 0.0 if model.resolution is None else float(model.resolution[mine].min())
        found.append(
            estimate_scatter(
                squares[:, mine].sum(axis=1),
                expected,
                expected,
                model.velocity_head,
                stated=float(model.floor[mine].min()),
                resolution=resolution,
            )
        )
    return tuple(found)


def _variance(parts: tuple[Scatter, ...], model: Model, shape: tuple[int, int]) -> Array:
    each = [
        scatter_variance(part if np.isfinite(part.base) else replace(part, base=1e-3), model.velocity_head)
        for part in parts
    ]
    variance = np.column_stack(each)[:, model.kind] * model.multiplier() ** 2
    if model.repeats is not None:
        variance = variance / np.maximum(model.repeats, 1)
    return np.maximum(np.broadcast_to(variance, shape), _ROUNDING**2)
