"""The scatter of each gauge kind, pooled over the runs from the residuals of their lines."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.model import Model
from gradeline.fitting.null import scale_moments
from gradeline.fitting.outliers import most_removable, trimming
from gradeline.fitting.scatter import Scatter, estimate_scatter, scatter_variance
from gradeline.fitting.slope import LineFits, fit_lines, project
from gradeline.fitting.subsets import subset_falls

__all__ = ["fit_model", "reading_variance", "redundancy", "robust_scatter", "sample_of", "scatter_of"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: The scatter is judged on at most so many runs, evenly spread over them: it is then known to 1 %.
_SCATTER_RUNS = 2000
#: Passes at most to tell the scatter of several gauge kinds apart.
_KIND_PASSES = 8
#: With fewer degrees of freedom in the residuals, the spread of repeats is counted too.
_FEW_DOF = 8.0


def fit_model(observations: Array, used: Mask, variance: Array, model: Model) -> LineFits:
    """Fit the lines of all runs with given reading variances and the model's other errors.

    Parameters
    ----------
    observations : (R, n) array
        m.
    used : (R, n) bool array
        Which enter.
    variance : (R, n) or (R, 1) array
        Of the readings, m².
    model : Model
        Design, persistent and common errors.

    Returns
    -------
    LineFits
        Weighted by all of them.

    Examples
    --------
    >>> x = np.arange(4.0)
    >>> model = Model(np.column_stack([np.ones(4), -x]), np.zeros(1), np.zeros(4, int), np.zeros(4))
    >>> fits = fit_model(5.0 - 0.5 * x[None], np.ones((1, 4), dtype=bool), np.ones((1, 1)), model)
    >>> fits.parameters.round(6).tolist()
    [[5.0, 0.5]]
    """
    total = variance if model.persistent is None else variance + model.persistent**2
    return fit_lines(observations, model.design, project(model.design, total, used, model.common))


def reading_variance(scatter: tuple[Scatter, ...], model: Model) -> Array:
    """Return the variance of each observation from the scatter of its readings.

    Parameters
    ----------
    scatter : tuple of Scatter
        Of each kind.
    model : Model
        Kinds, repeats and relative uncertainties.

    Returns
    -------
    (R, n) or (R, 1) array
        m²; one column where a run's observations share it.

    Examples
    --------
    >>> model = Model(np.ones((3, 1)), np.zeros(2), np.zeros(3, int), np.zeros(3))
    >>> reading_variance((Scatter(0.002, 0.0, 0.002, 10.0),), model).tolist()
    [[4e-06], [4e-06]]
    """
    # Without scatter and without a statement the size does not matter: uncertainties are then not given.
    parts = [
        scatter_variance(part if np.isfinite(part.base) else replace(part, base=1e-3), model.velocity_head)
        for part in scatter
    ]
    if not parts:
        return np.ones((len(model.velocity_head), 1))
    relative = model.multiplier()
    if len(parts) == 1 and model.repeats is None and (relative == 1.0).all():
        return parts[0][:, None]
    variance = np.column_stack(parts)[:, model.kind] * relative**2
    return np.asarray(variance if model.repeats is None else variance / np.maximum(model.repeats, 1))


def sample_of(model: Model, runs: int) -> tuple[slice, Model]:
    """Return evenly spread runs to judge the scatter on, and their model.

    Parameters
    ----------
    model : Model
        Of all runs.
    runs : int
        How many there are, dimensionless count.

    Returns
    -------
    slice, Model
        The runs picked and what is known of them.

    Examples
    --------
    >>> model = Model(np.ones((3, 1)), np.zeros(5000), np.zeros(3, int), np.zeros(3))
    >>> pick, part = sample_of(model, 5000)
    >>> pick.step, len(part.velocity_head)
    (3, 1667)
    """
    pick = slice(None, None, max(1, -(-runs // _SCATTER_RUNS)))
    return pick, model.of_runs(pick)


def robust_scatter(observations: Array, known: Mask, model: Model) -> tuple[Scatter, ...]:
    """Judge the scatter of each kind before any reading is: each run trimmed of its worst readings.

    Parameters
    ----------
    observations : (R, n) array
        m.
    known : (R, n) bool array
        Which may enter.
    model : Model
        What is known of them.

    Returns
    -------
    tuple of Scatter
        One for each kind; errors that persist over the runs are still in it.

    Examples
    --------
    >>> rng = np.random.default_rng(5)
    >>> x = np.arange(10.0)
    >>> heads = 5.0 - 0.1 * x + 0.001 * rng.standard_normal((40, 10))
    >>> heads[::4, 3] += 0.5
    >>> model = Model(np.column_stack([np.ones(10), -x]), np.zeros(40), np.zeros(10, int), np.zeros(10))
    >>> scatter = robust_scatter(heads, np.isfinite(heads), model)
    >>> 0.0009 < scatter[0].base < 0.0011
    True
    """
    pick, part = sample_of(model, len(observations))
    y, used = observations[pick], known[pick]
    several = len(np.unique(model.kind)) > 1
    # Before the scatter is known: readings of one kind alike, of several as they were stated.
    start = np.where(model.floor > 0, model.floor, 1e-3) if several else 1e-3 * model.multiplier()
    alike = not several and (start == start[0]).all() if len(start) else True
    variance = np.full((len(y), 1), 1e-6) if alike else np.broadcast_to(start**2, used.shape)
    if part.repeats is not None:
        variance = np.broadcast_to(variance, used.shape) / np.maximum(part.repeats, 1)
    found: tuple[Scatter, ...] = ()
    for turn in range(_KIND_PASSES if several else 2 if part.common is not None else 1):
        # Common errors have a size in metres: they are weighed once the scatter is known.
        new = _trimmed_scatter(y, used, variance, part if turn else replace(part, common=None))
        settled = bool(found) and all(
            abs(one.base - other.base) <= 0.01 * other.base for one, other in zip(new, found, strict=True)
        )
        found = new
        if settled:
            break
        # The scatter of one kind is only seen apart from the other's once the weights are about right.
        variance = reading_variance(found, part)
    return found


def _trimmed_scatter(y: Array, used: Mask, variance: Array, model: Model) -> tuple[Scatter, ...]:
    """Scatter of each kind by the fits with these variances, each run trimmed of its worst readings."""
    plain = replace(model, persistent=None)
    lines = fit_model(y, used, variance, plain)
    shared = lines.projectors
    unit = np.sqrt(shared.scale)[:, None]
    counts = shared.used.sum(axis=1)
    most = most_removable(counts, shared.rank)
    removed = np.zeros(used.shape, dtype=bool)
    ratio, shape = np.ones(len(y)), lines.dof.astype(float)
    for pattern, cut in enumerate(trimming(most)):
        if cut == 0:
            continue
        runs = np.flatnonzero(shared.index == pattern)
        weighted = (lines.weighted_residuals * unit)[runs]
        best = subset_falls(weighted, shared.weight[pattern], shared.used[pattern], int(cut))
        removed[runs[:, None], best.members[:, cut - 1, :cut]] = True
        expected, freedom = scale_moments(int(counts[pattern]), int(shared.rank[pattern]))
        ratio[runs] = expected / (counts[pattern] - shared.rank[pattern] - cut)
        shape[runs] = freedom
    trimmed = fit_model(y, used & ~removed, variance, plain) if removed.any() else lines
    free = redundancy(trimmed, used & ~removed, variance)
    return _by_kind(
        np.nan_to_num(trimmed.residuals), free, ratio, shape, model, trimmed=(True,) * model.kinds
    )


def scatter_of(
    lines: LineFits, used: Mask, variance: Array, model: Model, robust: tuple[Scatter, ...]
) -> tuple[Scatter, ...]:
    """Judge the scatter of each kind from the readings that stand.

    Errors that are the same in all runs, or grow with the slope, are first taken out of each observation's residuals
    over the runs, with the degrees of freedom that this costs: one survey has a single draw of them, so their stated
    size says nothing of how much of the residuals they make up.

    Parameters
    ----------
    lines : LineFits
        Fitted with `variance`.
    used : (R, n) bool array
        Readings that entered.
    variance : (R, n) or (R, 1) array
        Of the readings, m².
    model : Model
        What is known of them.
    robust : tuple of Scatter
        Of `robust_scatter`: a surge that it saw needs no further witness.

    Returns
    -------
    tuple of Scatter
        One for each kind.

    Examples
    --------
    >>> rng = np.random.default_rng(6)
    >>> x = np.arange(10.0)
    >>> heads = 5.0 - 0.1 * x + 0.001 * rng.standard_normal((40, 10)) + 0.01 * rng.standard_normal(10)
    >>> model = Model(np.column_stack([np.ones(10), -x]), np.zeros(40), np.zeros(10, int), np.zeros(10), steady=True)
    >>> used, variance = np.isfinite(heads), np.full((40, 1), 1e-6)
    >>> scatter = scatter_of(fit_model(heads, used, variance, model), used, variance, model, ())
    >>> 0.0009 < scatter[0].base < 0.0011
    True
    """
    pick, part = sample_of(model, len(used))
    shared = replace(lines.projectors, index=lines.projectors.index[pick], scale=lines.projectors.scale[pick])
    sample = replace(lines, residuals=lines.residuals[pick], projectors=shared)
    mine = used[pick]
    total = variance[pick] if part.persistent is None else variance[pick] + part.persistent**2
    free = redundancy(sample, mine, total)
    residuals = np.where(mine, np.nan_to_num(sample.residuals), 0.0)
    patterns = _patterns(lines.parameters[pick], model)
    if len(patterns) and len(mine) > len(patterns):
        residuals, free = _without_patterns(residuals, free, mine, variance[pick], patterns)
    witness = tuple(one.surge > 0 for one in robust) or (False,) * model.kinds
    found = _by_kind(residuals, free, np.ones(len(mine)), free.sum(axis=1), part, trimmed=witness)
    if len(mine) == len(used):
        return found
    return tuple(replace(scatter, dof=scatter.dof * len(used) / len(mine)) for scatter in found)


def _patterns(parameters: Array, model: Model) -> Array:
    """How the persistent errors go over the runs: (g, R)."""
    found = [np.ones(len(parameters))] if model.steady else []
    if model.along_slope:
        found.append(np.nan_to_num(parameters[:, model.slope_column]))
    return np.array(found[: max(len(parameters) - 1, 0)])


def _without_patterns(
    residuals: Array, free: Array, used: Mask, variance: Array, patterns: Array
) -> tuple[Array, Array]:
    """Take the patterns out of each observation's residuals over the runs, and the freedom that costs."""
    weight = np.where(used, 1.0 / variance, 0.0)
    normal = np.einsum("rn,gr,hr->ngh", weight, patterns, patterns)
    inverse = np.linalg.pinv(normal, hermitian=True)
    along = np.einsum("rn,gr,rn->ng", weight, patterns, residuals)
    fitted = np.einsum("gr,ngh,nh->rn", patterns, inverse, along)
    leverage = weight * np.einsum("gr,ngh,hr->rn", patterns, inverse, patterns)
    return np.where(used, residuals - fitted, 0.0), free * np.clip(1.0 - leverage, 0.0, 1.0)


def redundancy(lines: LineFits, used: Mask, variance: Array) -> Array:
    """Return 1 − leverage of each observation, zero where it did not enter.

    Parameters
    ----------
    lines : LineFits
        Fitted with `variance`.
    used : (R, n) bool array
        Readings that entered.
    variance : (R, n) or (R, 1) array
        Total variance they were weighted by, m².

    Returns
    -------
    (R, n) array
        Dimensionless; a run's sum is its degrees of freedom where no common error is in play.

    Examples
    --------
    >>> x = np.arange(4.0)
    >>> model = Model(np.column_stack([np.ones(4), -x]), np.zeros(1), np.zeros(4, int), np.zeros(4))
    >>> used, variance = np.ones((1, 4), dtype=bool), np.ones((1, 1))
    >>> redundancy(fit_model(5.0 - x[None], used, variance, model), used, variance).round(3).tolist()
    [[0.3, 0.7, 0.7, 0.3]]
    """
    shared = lines.projectors
    own = np.einsum("unn->un", shared.weight)[shared.index]
    return np.where(used, np.clip(own * variance / shared.scale[:, None], 0.0, 1.0), 0.0)


def _by_kind(
    residuals: Array, free: Array, ratio: Array, shape: Array, model: Model, *, trimmed: tuple[bool, ...]
) -> tuple[Scatter, ...]:
    """Split the runs' sums of squares over the kinds and fit each kind's scatter."""
    times = 1.0 / model.multiplier() ** 2
    if model.repeats is not None:
        times = times * np.maximum(model.repeats, 1)
    squares = np.where(free > 0, residuals**2 * times, 0.0)
    total = np.maximum(free.sum(axis=1), 1e-12)
    found = []
    for kind in range(model.kinds):
        mine = model.kind == kind
        part = free[:, mine].sum(axis=1)
        rows = [squares[:, mine].sum(axis=1), part * ratio, shape * part / total, model.velocity_head]
        if float(rows[2].sum()) < _FEW_DOF and model.spreads is not None and model.repeats is not None:
            # Little freedom in the lines: the spread of repeats tells the scatter as well.
            freedom = np.where(np.isfinite(model.spreads), model.repeats - 1.0, 0.0)[:, mine]
            spread = np.nan_to_num(model.spreads[:, mine]) ** 2 / model.multiplier()[mine] ** 2
            again = freedom.sum(axis=1)
            rows = [
                np.concatenate(pair)
                for pair in zip(
                    rows, [(freedom * spread).sum(axis=1), again, again, model.velocity_head], strict=True
                )
            ]
        resolution = 0.0 if model.resolution is None else float(model.resolution[mine].min())
        stated = float(model.floor[mine].min())
        found.append(estimate_scatter(*rows, stated=stated, resolution=resolution, trimmed=trimmed[kind]))
    return tuple(found)
