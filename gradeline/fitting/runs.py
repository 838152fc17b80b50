"""All runs at once: lines, scatter, shared misfit, outlying readings, in the order in which they may be judged."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.misfit import SharedMisfit, shared_misfit
from gradeline.fitting.null import MANY_RUNS, critical_falls, scale_moments
from gradeline.fitting.outliers import (
    MOST_OUTLIERS,
    deletion_residuals,
    most_removable,
    search_outliers,
    subset_falls,
    trimming,
)
from gradeline.fitting.scatter import Scatter, estimate_scatter, scatter_variance
from gradeline.fitting.slope import LineFits, fit_lines, project, replace_runs

__all__ = ["Model", "RunFits", "Search", "fit_runs"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: The scatter is judged on at most so many runs, evenly spread over them: it is then known to 1 %.
_SCATTER_RUNS = 2000
#: Pooled scatter above this many times the stated one is not a scale to judge single readings by.
_SUSPECT_SCATTER = 3.0

#: Passes at most to tell the scatter of several gauge kinds apart.
_KIND_PASSES = 8
#: From so many runs on, each is judged by the others.
_FEW_RUNS = 4


@dataclass(frozen=True)
class Model:
    """What is known of the observations before any is judged.

    Parameters
    ----------
    design : (n, p) array
        A of y = A θ; unit of y per unit of θ.
    velocity_head : (R,) array
        V²/2g of each run (of the narrowest bore), m.
    kind : (n,) int array
        Group whose scatter an observation shares.
    floor : (n,) array
        Stated uncertainty of one reading with its resolution, m; 0 where nothing was stated.
    repeats : (R, n) array, optional
        How many readings each observation is the mean of, dimensionless.
    persistent : (R, n) array, optional
        Standard uncertainty of each observation from stated errors that are the same in all runs (position,
        elevation, zero), m.
    flow_effect : (R, n) array, optional
        Change of each observation for one standard uncertainty of the run's own flow, m.
    stated : bool or None
        Whether an uncertainty of one reading was stated for every observation, and not its resolution alone; None:
        wherever `floor` is above 0.
    slope_column : int
        Column of A whose parameter is the (first) friction slope.
    """

    design: Array
    velocity_head: Array
    kind: NDArray[np.intp]
    floor: Array
    repeats: Array | None = None
    persistent: Array | None = None
    flow_effect: Array | None = None
    stated: bool | None = None
    slope_column: int = 1

    @property
    def is_stated(self) -> bool:
        """Whether the floor is a statement to hold the scatter against."""
        return bool((self.floor > 0).all()) if self.stated is None else self.stated

    def multiplier(self) -> Array:
        """Standard deviation of each observation relative to the best of its kind, (n,): as stated tap by tap."""
        relative = np.ones(len(self.floor))
        for kind in np.unique(self.kind):
            mine = self.kind == kind
            if (self.floor[mine] > 0).all():
                relative[mine] = self.floor[mine] / self.floor[mine].min()
        return relative


@dataclass(frozen=True)
class Search:
    """How single readings were judged.

    Parameters
    ----------
    done : bool
        Whether they were judged at all.
    reason : str or None
        Why not.
    most : int
        Most readings that could be taken from any run.
    critical : tuple of float
        Critical values of the added fall for the fullest runs, in σ², dimensionless.
    runs : int
        Runs in which at least one reading could have been flagged.
    """

    done: bool
    reason: str | None
    most: int = 0
    critical: tuple[float, ...] = ()
    runs: int = 0


@dataclass(frozen=True)
class RunFits:
    """What the readings of all runs say.

    Parameters
    ----------
    lines : LineFits
        The fits to the readings that stand.
    variance : (R, n) or (R, 1) array
        Scatter of each observation, m²: random alone.
    scatter : tuple of Scatter
        Of each kind.
    flagged : (R, n) bool array
        Outlying readings.
    error : (R, n) array
        Reading minus what the others predict, m; NaN where they do not determine it.
    score : (R, n) array
        The same in standard deviations, dimensionless (signed studentised deletion residual).
    misfit : SharedMisfit or None
        Whether most runs share a misfit; None where neither a search nor details were asked for.
    search : Search
        How single readings were judged.
    pooled_dof : float
        Degrees of freedom behind the scatter, dimensionless; 0 where the readings of a run leave none.
    """

    lines: LineFits
    variance: Array
    scatter: tuple[Scatter, ...]
    flagged: Mask
    error: Array
    score: Array
    misfit: SharedMisfit | None
    search: Search
    pooled_dof: float

    def random_covariance(self) -> Array:
        """Return the (R, p, p) covariance of the parameters from the scatter of the readings."""
        shared = self.lines.projectors
        if self.variance.shape[1] == 1 and len(shared.gain) == 1:
            return np.asarray(shared.covariance[0] * self.variance[:, 0][:, None, None])
        gain = shared.gain[shared.index]
        return np.asarray(
            np.einsum("rpn,rn,rqn->rpq", gain, np.broadcast_to(self.variance, gain.shape[::2]), gain)
        )


def fit_runs(
    observations: Array,
    used: Mask,
    model: Model,
    *,
    search: bool = True,
    keep_all: bool = False,
    details: bool = True,
) -> RunFits:
    """Fit all runs and judge their readings.

    Parameters
    ----------
    observations : (R, n) array
        Energy heads or differences of them, m; NaN where not read.
    used : (R, n) bool array
        Observations that may enter (read, not disturbed, not excluded).
    model : Model
        What is known of them.
    search : bool
        Whether to look for outlying readings.
    keep_all : bool
        Whether flagged readings enter the fits all the same.
    details : bool
        Whether to work out deletion residuals and their scores for every reading.

    Returns
    -------
    RunFits
        Arrays over runs and observations.

    Notes
    -----
    In this order: the lines; the scatter over all runs, robustly; whether most runs share a misfit (then no single
    reading is judged); the single readings; the scatter again without them; the lines again.

    Examples
    --------
    >>> rng = np.random.default_rng(3)
    >>> x = np.linspace(0.0, 4.0, 9)
    >>> heads = 1.0 - np.array([[0.05], [0.1], [0.2]]) * x + 0.001 * rng.standard_normal((3, 9))
    >>> heads[1, 4] += 0.02
    >>> model = Model(np.column_stack([np.ones(9), -x]), np.array([0.05, 0.1, 0.2]), np.zeros(9, int), np.zeros(9))
    >>> fits = fit_runs(heads, np.isfinite(heads), model)
    >>> np.argwhere(fits.flagged).tolist()
    [[1, 4]]
    """
    known = used & np.isfinite(observations)
    first = _pooled_scatter(observations, known, model)
    variance = _variances(first, model, len(observations))
    every = _fit(observations, known, variance, model)
    misfit, verdict, flagged = None, Search(False, "not asked for"), np.zeros(known.shape, dtype=bool)
    if search or details:
        misfit = _misfit(every, variance, model)
    if search:
        verdict = _may_search(first, misfit, model, every)
        if verdict.done:
            verdict, flagged = _search(every, verdict, model, np.ones(len(observations)), independent=False)
    kept = _without(every, observations, known & ~flagged, flagged, variance, model)
    scatter = _final_scatter(kept, known & ~flagged, variance, model)
    renewed = _variances(scatter, model, len(observations))
    every = _renew(every, observations, known, variance, renewed, model)
    if verdict.done and _FEW_RUNS <= len(observations) <= MANY_RUNS:
        # Once more, each run by the scatter of the others: its own outliers no longer pass for scatter.
        scale = _scale_of_others(
            _renew(kept, observations, known & ~flagged, variance, renewed, model), model
        )
        verdict, flagged = _search(every, verdict, model, scale, independent=True)
        kept = _without(every, observations, known & ~flagged, flagged, renewed, model)
        scatter = _final_scatter(kept, known & ~flagged, renewed, model)
        variance, renewed = renewed, _variances(scatter, model, len(observations))
        every = _renew(every, observations, known, variance, renewed, model)
    if keep_all or not flagged.any():
        kept = every
    else:
        kept = _renew(kept, observations, known & ~flagged, variance, renewed, model)
    error = score = np.empty((0, 0))
    if details:
        shared = every.projectors
        unit = np.sqrt(shared.scale)[:, None]
        error, score = deletion_residuals(
            every.weighted_residuals * unit, shared.weight, shared.index, flagged
        )
        error = error * unit
    return RunFits(
        lines=kept,
        variance=renewed,
        scatter=scatter,
        flagged=flagged,
        error=error,
        score=score,
        misfit=misfit,
        search=verdict,
        pooled_dof=float(sum(part.dof for part in scatter)),
    )


def _fit(observations: Array, used: Mask, variance: Array, model: Model) -> LineFits:
    total = variance if model.persistent is None else variance + model.persistent**2
    return fit_lines(observations, model.design, project(model.design, total, used, model.flow_effect))


def _weights_settled(model: Model, variance: Array) -> bool:
    """Whether a new scatter only rescales a run's variances, so that its estimates stay."""
    return variance.shape[1] == 1 and model.persistent is None and model.flow_effect is None


def _renew(
    lines: LineFits, observations: Array, used: Mask, variance: Array, renewed: Array, model: Model
) -> LineFits:
    """Fit again with the final variances, or rescale where that is all they do."""
    if not _weights_settled(model, variance):
        return _fit(observations, used, renewed, model)
    ratio = variance[:, 0] / renewed[:, 0]
    if (ratio == 1.0).all():
        return lines
    return replace(
        lines,
        weighted_residuals=lines.weighted_residuals * ratio[:, None],
        sum_of_squares=lines.sum_of_squares * ratio,
        projectors=replace(lines.projectors, scale=renewed[:, 0]),
    )


def _without(
    lines: LineFits, observations: Array, used: Mask, flagged: Mask, variance: Array, model: Model
) -> LineFits:
    """Fit the runs with flagged readings again without them; the others stay as they are."""
    runs = np.flatnonzero(flagged.any(axis=1))
    if len(runs) == 0:
        return lines
    part = Model(
        design=model.design,
        velocity_head=model.velocity_head[runs],
        kind=model.kind,
        floor=model.floor,
        persistent=None if model.persistent is None else model.persistent[runs],
        flow_effect=None if model.flow_effect is None else model.flow_effect[runs],
    )
    return replace_runs(lines, runs, _fit(observations[runs], used[runs], variance[runs], part))


def _variances(scatter: tuple[Scatter, ...], model: Model, runs: int) -> Array:
    """Variance of each observation, in one column where a run's observations share it."""
    # Without scatter and without a statement the size does not matter: uncertainties are then not given.
    parts = [
        scatter_variance(part if np.isfinite(part.base) else replace(part, base=1e-3), model.velocity_head)
        for part in scatter
    ]
    if not parts:
        return np.ones((runs, 1))
    relative = model.multiplier()
    if len(parts) == 1 and model.repeats is None and (relative == 1.0).all():
        return parts[0][:, None]
    variance = np.column_stack(parts)[:, model.kind] * relative**2
    return np.asarray(variance if model.repeats is None else variance / np.maximum(model.repeats, 1))


def _sample(model: Model, runs: int) -> tuple[slice, Model]:
    """Evenly spread runs to judge the scatter on."""
    pick = slice(None, None, max(1, -(-runs // _SCATTER_RUNS)))
    return pick, replace(
        model,
        velocity_head=model.velocity_head[pick],
        repeats=None if model.repeats is None else model.repeats[pick],
        persistent=None if model.persistent is None else model.persistent[pick],
        flow_effect=None if model.flow_effect is None else model.flow_effect[pick],
    )


def _pooled_scatter(observations: Array, known: Mask, model: Model) -> tuple[Scatter, ...]:
    """Scatter of each kind over the runs, each run trimmed of its worst readings."""
    pick, part = _sample(model, len(observations))
    y, used = observations[pick], known[pick]
    # Before the scatter is known: readings of one kind alike, of several as they were stated.
    several = len(np.unique(model.kind)) > 1
    start = np.where(model.floor > 0, model.floor, 1e-3) if several else 1e-3 * model.multiplier()
    alike = not several and (start == start[0]).all()
    variance = np.full((len(y), 1), 1e-6) if alike else np.broadcast_to(start**2, used.shape)
    if part.repeats is not None:
        variance = np.broadcast_to(variance, used.shape) / np.maximum(part.repeats, 1)
    found: tuple[Scatter, ...] = ()
    for _ in range(_KIND_PASSES if several else 1):
        new = _trimmed_scatter(y, used, variance, part)
        settled = bool(found) and all(
            abs(one.base - other.base) <= 0.01 * other.base for one, other in zip(new, found, strict=True)
        )
        found = new
        if settled:
            break
        # The scatter of one kind is only seen apart from the other's once the weights are about right.
        variance = _variances(found, part, len(y))
    return found


def _trimmed_scatter(y: Array, used: Mask, variance: Array, model: Model) -> tuple[Scatter, ...]:
    """Scatter of each kind by the fits with these variances, each run trimmed of its worst readings."""
    plain = replace(model, persistent=None)
    lines = _fit(y, used, variance, plain)
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
    trimmed = _fit(y, used & ~removed, variance, plain) if removed.any() else lines
    return _by_kind(trimmed, used & ~removed, variance, ratio, shape, model)


def _final_scatter(lines: LineFits, used: Mask, variance: Array, model: Model) -> tuple[Scatter, ...]:
    """Scatter of each kind of the readings that stand."""
    pick, part = _sample(model, len(used))
    shared = replace(lines.projectors, index=lines.projectors.index[pick], scale=lines.projectors.scale[pick])
    sample = replace(lines, residuals=lines.residuals[pick], dof=lines.dof[pick], projectors=shared)
    total = variance[pick] if part.persistent is None else variance[pick] + part.persistent**2
    found = _by_kind(sample, used[pick], total, np.ones(len(used[pick])), sample.dof.astype(float), part)
    if len(sample.dof) == len(used):
        return found
    return tuple(replace(scatter, dof=scatter.dof * len(used) / len(sample.dof)) for scatter in found)


def _redundancy(lines: LineFits, used: Mask, variance: Array) -> Array:
    """1 − leverage of each observation, zero where it did not enter."""
    shared = lines.projectors
    own = np.einsum("unn->un", shared.weight)[shared.index]
    return np.where(used, own * variance / shared.scale[:, None], 0.0)


def _by_kind(
    lines: LineFits, used: Mask, variance: Array, ratio: Array, shape: Array, model: Model
) -> tuple[Scatter, ...]:
    """Split the runs' sums of squares over the kinds and fit each kind's scatter."""
    redundancy = _redundancy(lines, used, variance)
    times = (
        np.ones(used.shape) if model.repeats is None else np.maximum(model.repeats, 1)
    ) / model.multiplier() ** 2
    squares = np.where(used, np.nan_to_num(lines.residuals) ** 2 * times, 0.0)
    known = np.zeros(used.shape) if model.persistent is None else redundancy * model.persistent**2 * times
    total = np.maximum(redundancy.sum(axis=1), 1e-12)
    found = []
    for kind in range(int(model.kind.max(initial=-1)) + 1):
        mine = model.kind == kind
        part = redundancy[:, mine].sum(axis=1)
        found.append(
            estimate_scatter(
                squares[:, mine].sum(axis=1),
                part * ratio,
                shape * part / total,
                model.velocity_head,
                known=known[:, mine].sum(axis=1) / np.maximum(part, 1e-12),
                floor=float(model.floor[mine].min()),
            )
        )
    return tuple(found)


def _misfit(lines: LineFits, variance: Array, model: Model) -> SharedMisfit:
    pick, part = _sample(model, len(lines.residuals))
    shared = replace(lines.projectors, index=lines.projectors.index[pick], scale=lines.projectors.scale[pick])
    used = shared.used[shared.index]
    total = variance[pick] if part.persistent is None else variance[pick] + part.persistent**2
    sample = replace(lines, residuals=lines.residuals[pick], projectors=shared)
    redundancy = _redundancy(sample, used, total)
    return shared_misfit(
        np.where(used, sample.residuals, np.nan),
        np.sqrt(np.maximum(redundancy, 0.0) * variance[pick]),
        np.nan_to_num(lines.parameters[pick, model.slope_column]),
        part.velocity_head,
        np.zeros(used.shape)
        if part.persistent is None
        else part.persistent * np.sqrt(np.maximum(redundancy, 0.0)),
    )


def _may_search(
    scatter: tuple[Scatter, ...], misfit: SharedMisfit | None, model: Model, lines: LineFits
) -> Search:
    """Whether single readings can be judged in this survey, and if not, why."""
    shared = lines.projectors
    if not len(shared.index):
        return Search(False, "there is no flowing run")
    most = most_removable(shared.used.sum(axis=1), shared.rank)
    if int(most.max(initial=0)) == 0:
        return Search(
            False, "too few readings a run: at least two more than the line's parameters must be left"
        )
    if misfit is not None and misfit.shared:
        return Search(False, "most runs share a misfit, and single readings cannot be told from it")
    for kind, part in enumerate(scatter if model.is_stated else ()):
        stated = float(model.floor[model.kind == kind].max(initial=0.0))
        if stated > 0 and part.pooled > _SUSPECT_SCATTER * stated:
            return Search(
                False,
                f"the readings scatter {part.pooled / stated:.1f} times as much as was stated, "
                "which is no scale to judge single readings by",
            )
    return Search(True, None, int(most.max()), runs=int((most[shared.index] > 0).sum()))


def _scale_of_others(kept: LineFits, model: Model) -> Array:
    """Variance of each run's readings relative to the model, judged by the other runs."""
    squares, dof = kept.sum_of_squares, kept.dof
    others = np.maximum(dof.sum() - dof, 1)
    scale = (squares.sum() - squares) / others
    return np.asarray(np.maximum(scale, 1.0 if model.is_stated else 1e-12))


def _search(
    lines: LineFits, verdict: Search, model: Model, scale: Array, *, independent: bool
) -> tuple[Search, Mask]:
    shared = lines.projectors
    counts = shared.used.sum(axis=1)
    most = most_removable(counts, shared.rank)
    stated = model.is_stated
    critical = np.full((len(counts), MOST_OUTLIERS), np.inf)
    for pattern in np.flatnonzero(most > 0):
        critical[pattern] = critical_falls(
            int(counts[pattern]),
            int(shared.rank[pattern]),
            len(scale),
            stated=stated,
            independent=independent,
        )
    found = search_outliers(
        lines.weighted_residuals * np.sqrt(shared.scale / scale)[:, None],
        shared.weight,
        shared.index,
        shared.used,
        most,
        critical,
        lines.sum_of_squares / scale,
    )
    fullest = int(counts.argmax())
    return replace(verdict, critical=tuple(critical[fullest])), found.flagged
