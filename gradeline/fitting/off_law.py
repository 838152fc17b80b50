"""The scatter of slopes about the law, where nothing else tells it: two taps, and nothing stated of the readings.

A run's own flow error is relative in S; the scatter of its readings is the same in metres, so that it is large in a
slow run and small in a fast one. A handful of runs does not tell the two apart, and a sound slow run would be called
off the law by a scatter that is relative alone. So a run is judged by all sizes of both that the other runs allow.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc, stdtrit

__all__ = ["OffLaw", "likely_scatter", "prediction_scores"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Sizes of each part that are looked at, and how far they go below and above the residuals'.
_STEPS, _BELOW, _ABOVE = 18, 1e-2, 6.0
#: The readings' part is taken up only where it improves twice the log-likelihood by this much (5 %, one-sided).
_EVIDENCE = 2.71
#: Runs judged one by one, the most suspicious first; the others are then sound too.
_JUDGED = 16
#: Slopes that the sizes are judged by, evenly spread over all: they are then known to a few per cent.
_MOST = 200
_SMALLEST = 1e-6


@dataclass(frozen=True)
class OffLaw:
    """Slopes against the law, N of them.

    Parameters
    ----------
    residual : (N,) array
        ln S less that of the law, dimensionless.
    gradient : (N,) array
        Change of ln S of the law with a parameter that is profiled out, of any scale, dimensionless; 0
        where there is none.
    own : (N,) array
        Variance from the runs' own stated errors, dimensionless.
    spread : (N,) array
        Relative change of S for one metre of scatter of the readings, 1/m.
    shared : (N, q) array
        Change of ln S with each shared input, for one standard uncertainty, dimensionless.
    static : (N, s) array
        Change of ln S with the errors of static readings that scatter by one metre, 1/m.
    """

    residual: Array
    gradient: Array
    own: Array
    spread: Array
    shared: Array
    static: Array

    def of(self, pick: Mask) -> OffLaw:
        """Those picked, or where they are many, evenly spread ones of them."""
        some = np.flatnonzero(pick)[:: max(1, -(-int(pick.sum()) // _MOST))]
        return OffLaw(
            *(
                getattr(self, name)[some]
                for name in ("residual", "gradient", "own", "spread", "shared", "static")
            )
        )


def _grid(data: OffLaw) -> tuple[Array, Array]:
    """Sizes (relative, in metres) of the two parts, all pairs, the first with none in metres."""
    size = max(float(np.median(np.abs(data.residual))), _SMALLEST)
    steps = np.geomspace(_BELOW, _ABOVE, _STEPS)
    spread = np.where(data.spread > 0, data.spread, np.nan)
    known = np.isfinite(spread).any()
    metres = float(np.nanmedian(np.abs(data.residual) / spread)) if known else 0.0
    # A relative part that no flow can have stays out: it would excuse anything.
    relative, absolute = np.meshgrid(size * steps, np.concatenate([[0.0], max(metres, 1e-9) * steps]))
    return relative.ravel(), absolute.ravel() * known


def _weights(data: OffLaw, relative: Array, absolute: Array) -> tuple[Array, Array, Array]:
    """Inverse variances (G, N), shared effects (G, N, q) and (I + J' W J)⁻¹ (G, q, q)."""
    weight = 1.0 / (data.own + relative[:, None] ** 2 + (absolute[:, None] * data.spread) ** 2)
    effect = np.concatenate(
        [
            np.broadcast_to(data.shared, (len(relative), *data.shared.shape)),
            absolute[:, None, None] * data.static,
        ],
        axis=2,
    )
    turned = effect * weight[:, :, None]
    core = np.linalg.inv(np.eye(effect.shape[2]) + turned.transpose(0, 2, 1) @ effect)
    return weight, effect, core


def _solve(weight: Array, effect: Array, core: Array, values: Array) -> Array:
    """C⁻¹ values, (G, N)."""
    along = np.einsum("gnq,gn->gq", effect, weight * values)
    return np.asarray(weight * (values - np.einsum("gnq,gqp,gp->gn", effect, core, along)))


def _log_likelihood(data: OffLaw, relative: Array, absolute: Array) -> tuple[Array, Array]:
    """Restricted log-likelihood of each pair of sizes (G,), and the profiled parameter (G,)."""
    parts = _weights(data, relative, absolute)
    solved = _solve(*parts, data.residual)
    squares = solved @ data.residual
    log_det = -np.log(parts[0]).sum(axis=1) - np.linalg.slogdet(parts[2])[1]
    if not data.gradient.any():
        return -0.5 * (log_det + squares), np.zeros(len(relative))
    turned = _solve(*parts, data.gradient)
    information = turned @ data.gradient
    step = (solved @ data.gradient) / information
    return -0.5 * (log_det + squares - step**2 * information + np.log(information)), step


def likely_scatter(data: OffLaw) -> tuple[float, float]:
    """Return the likeliest sizes of the two parts of the scatter.

    Parameters
    ----------
    data : OffLaw
        The slopes in use.

    Returns
    -------
    tuple of float
        Relative scatter, dimensionless, and that of a reading, m. The latter is 0 (and the former not meant) unless
        the likelihood asks for it.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> slope = np.geomspace(0.01, 0.3, 60)
    >>> none, nothing = np.zeros(60), np.zeros((60, 0))
    >>> data = OffLaw(rng.normal(0, 0.001 / slope), none, none, 1 / slope, nothing, nothing)
    >>> bool(0.0007 < likely_scatter(data)[1] < 0.0013)
    True
    """
    data = data.of(np.ones(len(data.residual), dtype=bool))
    relative, absolute = _grid(data)
    found, _ = _log_likelihood(data, relative, absolute)
    best, plain = int(found.argmax()), float(found[absolute == 0.0].max())
    if 2.0 * (found[best] - plain) <= _EVIDENCE:
        return float(relative[absolute == 0.0][found[absolute == 0.0].argmax()]), 0.0
    return float(relative[best]), float(absolute[best])


def prediction_scores(data: OffLaw, used: Mask, dof: float) -> Array:
    """Return how far each slope lies from what the others in use predict.

    Parameters
    ----------
    data : OffLaw
        All slopes.
    used : (N,) bool array
        Those in use.
    dof : float
        Degrees of freedom of the Student's t in whose quantiles the scores are told, dimensionless.

    Returns
    -------
    (N,) array
        Signed quantile of Student's t of the same two-sided probability, dimensionless.

    Notes
    -----
    The probability is that of the normal distribution at each size of the two parts, averaged over them by their
    restricted likelihood in the other slopes with a flat prior in the logarithms (with one part alone that is
    Student's t; G. E. P. Box and G. C. Tiao, *Bayesian Inference in Statistical Analysis*, 1973, ch. 2).

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> slope, none = np.geomspace(0.01, 0.3, 9), np.zeros(9)
    >>> off = rng.normal(0, 0.001 / slope)
    >>> off[4] += 0.5
    >>> data = OffLaw(off, none, none, 1 / slope, np.zeros((9, 0)), np.zeros((9, 0)))
    >>> scores = prediction_scores(data, np.ones(9, dtype=bool), 8.0)
    >>> int(np.abs(scores).argmax()), bool(scores[4] > 4.4)
    (4, True)
    """
    count = len(data.residual)
    relative, absolute = _grid(data.of(used))
    parts = [
        _predicted(data, used, np.arange(first, min(first + _MOST, count)), relative, absolute)
        for first in range(0, count, _MOST)
    ]
    chance, ahead = (np.concatenate(part) for part in zip(*parts, strict=True))
    order = np.argsort(chance)
    for i in order[:_JUDGED]:
        if not used[i] or used.sum() < 3:
            continue
        others = used & (np.arange(count) != i)
        one, step = _predicted(data, others, np.array([i]), *_grid(data.of(others)))
        chance[i], ahead[i] = one[0], step[0]
    return np.asarray(-np.sign(ahead) * stdtrit(dof, np.maximum(chance, 1e-300) / 2.0))


def _predicted(
    data: OffLaw, others: Mask, which: NDArray[np.intp], relative: Array, absolute: Array
) -> tuple[Array, Array]:
    """Two-sided chance of each of `which` given the others, and the mean of how far it lies ahead."""
    rest = data.of(others)
    likelihood, step = _log_likelihood(rest, relative, absolute)
    share = np.exp(likelihood - likelihood.max())
    share /= share.sum()
    weight, effect, core = _weights(rest, relative, absolute)
    rest_residual = rest.residual - step[:, None] * rest.gradient
    errors = np.einsum("gqp,gnp,gn->gq", core, effect, weight * rest_residual)
    mine = OffLaw(*(getattr(data, name)[which] for name in data.__dataclass_fields__))
    variance, there, _ = _weights(mine, relative, absolute)
    ahead = mine.residual - step[:, None] * mine.gradient - np.einsum("gmq,gq->gm", there, errors)
    total = 1.0 / variance + np.einsum("gmq,gqp,gmp->gm", there, core, there)
    if rest.gradient.any():
        turned = _solve(weight, effect, core, rest.gradient[None])
        along = np.einsum("gqp,gnp,gn->gq", core, effect, weight * rest.gradient)
        left = mine.gradient - np.einsum("gmq,gq->gm", there, along)
        total = total + left**2 / (turned @ rest.gradient)[:, None]
    chance = share @ erfc(np.abs(ahead) / np.sqrt(2.0 * total))
    return chance, share @ ahead
