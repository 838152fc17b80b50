"""All runs at once: lines, scatter, shared misfit, outlying readings, in the order in which they may be judged."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.misfit import SharedMisfit, shared_misfit
from gradeline.fitting.model import Model
from gradeline.fitting.null import MANY_RUNS, critical_falls
from gradeline.fitting.outliers import deletion_residuals, most_removable, search_outliers
from gradeline.fitting.pooled import (
    fit_model,
    reading_variance,
    redundancy,
    robust_scatter,
    sample_of,
    scatter_of,
)
from gradeline.fitting.scatter import Scatter
from gradeline.fitting.slope import LineFits, replace_runs
from gradeline.fitting.subsets import MOST_OUTLIERS

__all__ = ["Model", "RunFits", "Search", "fit_runs"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Pooled scatter above this many times the stated one is not a scale to judge single readings by.
_SUSPECT_SCATTER = 3.0
#: From so many runs on, each is judged by the others.
_FEW_RUNS = 4


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
        Degrees of freedom behind the scatter, dimensionless; infinite where statements stand that the readings do not
        contradict, 0 where there is neither.
    known : (n,) bool array
        Observations whose scatter is known.
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
    known: Mask

    def random_covariance(self) -> Array:
        """Return the (R, p, p) covariance of the parameters from the scatter of the readings, NaN where not known."""
        shared = self.lines.projectors
        if self.variance.shape[1] == 1:
            square = np.einsum("upn,uqn->upq", shared.gain, shared.gain)
            covariance = square[shared.index] * self.variance[:, 0][:, None, None]
        else:
            gain = shared.gain[shared.index]
            covariance = np.einsum("rpn,rn,rqn->rpq", gain, self.variance, gain)
        if self.known.all():
            return np.asarray(covariance)
        # A parameter that leans on a reading of unknown scatter is not known itself.
        unknown = np.asarray((np.abs(shared.gain[:, :, ~self.known]) > 1e-12).any(axis=2))[shared.index]
        return np.where(unknown[:, :, None] | unknown[:, None, :], np.nan, covariance)


def fit_runs(
    observations: Array,
    used: Mask,
    model: Model,
    *,
    search: bool = True,
    keep_all: bool = False,
    details: bool = True,
    together: Mask | None = None,
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
    together : (R, n) bool array, optional
        Readings that are known to be wrong two in a run: flagged beforehand, even where the run has too few of them for
        a search.

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
    read = used & np.isfinite(observations)
    known = read if together is None else read & ~together
    runs = len(observations)
    first = robust_scatter(observations, known, model)
    variance = reading_variance(first, model)
    # What persists over the runs is still in that scatter: not counted twice.
    plain = replace(model, persistent=None)
    every = fit_model(observations, known, variance, plain)
    misfit, verdict, flagged = None, Search(False, "not asked for"), np.zeros(known.shape, dtype=bool)
    if search or details:
        misfit = _misfit(every, variance, model)
    if search:
        verdict = _may_search(first, misfit, model, every)
        if verdict.done:
            verdict, flagged = _search(every, verdict, model, np.ones(runs), independent=False)
    kept = _without(every, observations, known & ~flagged, flagged, variance, plain)
    scatter = scatter_of(kept, known & ~flagged, variance, plain, first)
    renewed = reading_variance(scatter, model)
    every = _renew(every, observations, known, variance, renewed, model)
    if verdict.done and _FEW_RUNS <= runs <= MANY_RUNS:
        # Once more, each run by the scatter of the others: its own outliers no longer pass for scatter.
        scale = _scale_of_others(
            _renew(kept, observations, known & ~flagged, variance, renewed, model), model
        )
        verdict, flagged = _search(every, verdict, model, scale, independent=True)
        kept = _without(every, observations, known & ~flagged, flagged, renewed, model)
        scatter = scatter_of(kept, known & ~flagged, renewed, model, first)
        variance, renewed = renewed, reading_variance(scatter, model)
        every = _renew(every, observations, known, variance, renewed, model)
    if known is not read and not np.array_equal(known, read):
        every = fit_model(observations, read, renewed, model)
        flagged = flagged | (read & ~known)
        kept = _without(every, observations, read & ~flagged, flagged, renewed, model)
        known = read
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
        pooled_dof=_pooled_dof(scatter),
        known=np.array([part.is_known for part in scatter], dtype=bool)[model.kind],
    )


def _pooled_dof(scatter: tuple[Scatter, ...]) -> float:
    judged = [part.dof for part in scatter if not part.stands]
    return float(sum(judged)) if judged else float("inf")


def _renew(
    lines: LineFits, observations: Array, used: Mask, variance: Array, renewed: Array, model: Model
) -> LineFits:
    """Fit again with the final variances, or rescale where that is all they do."""
    if variance.shape[1] > 1 or model.persistent is not None or model.common is not None:
        return fit_model(observations, used, renewed, model)
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
    return replace_runs(
        lines, runs, fit_model(observations[runs], used[runs], variance[runs], model.of_runs(runs))
    )


def _misfit(lines: LineFits, variance: Array, model: Model) -> SharedMisfit:
    """Whether most runs share a misfit beyond what stated errors of taps and gauges may do."""
    pick, part = sample_of(model, len(lines.residuals))
    shared = replace(lines.projectors, index=lines.projectors.index[pick], scale=lines.projectors.scale[pick])
    used = shared.used[shared.index]
    sample = replace(lines, residuals=lines.residuals[pick], projectors=shared)
    free = redundancy(sample, used, variance[pick])
    # What is left of an error when the lines have taken their share of it.
    left = (np.eye(used.shape[1]) - model.design @ shared.gain)[shared.index]
    persistent = np.zeros(used.shape)
    if part.persistent is not None:
        persistent += np.einsum("rij,rj->ri", left**2, np.where(used, part.persistent, 0.0) ** 2)
    if part.common is not None:
        rest = np.einsum("rij,rjk->rik", left, np.where(used[:, :, None], part.common, 0.0))
        persistent += (rest**2).sum(axis=2)
    return shared_misfit(
        np.where(used, sample.residuals, np.nan),
        np.sqrt(free * variance[pick]),
        np.nan_to_num(lines.parameters[pick, model.slope_column]),
        part.velocity_head,
        np.sqrt(persistent),
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
    for kind, part in enumerate(scatter):
        stated = float(model.floor[model.kind == kind].min(initial=np.inf))
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
    # Of several kinds the one with the fewest readings is known the least: it sets how many runs the scale rests on.
    readings = np.bincount(model.kind[shared.used.any(axis=0)]) if len(counts) else np.ones(1)
    share = 1.0 if stated else readings[readings > 0].min() / readings.sum()
    for pattern in np.flatnonzero(most > 0):
        critical[pattern] = critical_falls(
            int(counts[pattern]),
            int(shared.rank[pattern]),
            max(round(len(scale) * share), 1),
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
