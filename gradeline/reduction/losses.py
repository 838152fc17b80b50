"""The loss coefficient of every fitting that is fitted: run by run, over all runs, and against what was published."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from gradeline.fitting.losses import LossFit, LossTrend, fit_loss_coefficient, fit_loss_trend
from gradeline.hydraulics.friction import TURBULENT_LIMIT
from gradeline.quantities import rounded
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.published_losses import Published, compare, published_loss
from gradeline.reduction.run_losses import PerRun, per_run
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall

__all__ = ["Loss", "loss_assumptions", "loss_cautions", "losses_of"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Usable taps that a fitting needs on each side: the error of a single one would pass for a loss.
FEWEST_TAPS = 2
#: K depends on Re where a trend by chance is less likely than this.
_TREND_FALSE_ALARM = 0.01
#: Chance that a sound survey whose K are all zero is told of a rise, and the runs that are named.
_RISING, _NAMED_RISES = 0.01, 4
#: The velocity head's own errors depend on K: so often it is worked out with the K of all runs.
_PASSES = 3


@dataclass(frozen=True)
class Loss:
    """A fitting whose K is fitted, over F flowing runs.

    Parameters
    ----------
    place : int
        Which of the line's fittings.
    value, u : (F,) array
        K of each run and its standard uncertainty with the shared errors, dimensionless; NaN where there is none.
    reynolds : (F,) array
        In the bore whose velocity head K refers to, dimensionless.
    used : (F,) bool array
        Runs whose K entered the mean.
    why_not : tuple of str or None
        Why a run did not enter.
    taps : (F, 2) int array
        Usable taps upstream and downstream, as far as the next fitting that is fitted.
    fit : LossFit
        The mean over the runs; NaN throughout where `reason` says why.
    trend : LossTrend
        How K goes with Re.
    equivalent_length, equivalent_length_u : float
        Length of straight pipe that loses as much in the fastest run, and its standard uncertainty, m.
    published : Published or None
        What was published of its kind.
    verdict : str or None
        ``"above"``, ``"below"`` or ``"not distinguishable"`` from it.
    reason : str or None
        Why there is no K.
    notes : tuple of str
        What a reader must know of it.
    """

    place: int
    value: Array
    u: Array
    reynolds: Array
    used: Mask
    why_not: tuple[str | None, ...]
    taps: NDArray[np.intp]
    fit: LossFit
    trend: LossTrend
    equivalent_length: float
    equivalent_length_u: float
    published: Published | None
    verdict: str | None
    reason: str | None
    notes: tuple[str, ...]

    @property
    def depends_on_reynolds(self) -> bool | None:
        """Whether K changes with Re beyond chance (1 %), None where nothing can be said."""
        return bool(self.trend.p < _TREND_FALSE_ALARM) if np.isfinite(self.trend.p) else None


def losses_of(
    line: Line,
    media: Media,
    flowing: Flowing,
    friction: Friction,
    walls: tuple[Wall, ...],
    corrections: Corrections,
    *,
    level: float,
) -> tuple[Loss, ...]:
    """Work out the loss coefficient of every fitting that is fitted.

    Parameters
    ----------
    line, media, flowing, friction, walls, corrections
        The line and what its runs say.
    level : float
        Coverage of the intervals.

    Returns
    -------
    tuple of Loss
        In order of chainage.
    """
    taps = (flowing.used.astype(float) @ (corrections.heads.taps != 0)) > 0
    places = sorted(np.flatnonzero(line.fitted).tolist(), key=lambda m: line.fittings[m].at)
    return tuple(
        _loss(line, media, flowing, friction, walls, taps, places, number, level=level)
        for number in range(len(places))
    )


def _loss(
    line: Line,
    media: Media,
    flowing: Flowing,
    friction: Friction,
    walls: tuple[Wall, ...],
    taps: Mask,
    places: list[int],
    number: int,
    *,
    level: float,
) -> Loss:
    m = places[number]
    k = int(line.reference[m])
    reynolds = flowing.reynolds[:, k]
    run = per_run(line, media, flowing, m)
    counts = _taps_beside(line, taps, places, number)
    enough = (counts >= FEWEST_TAPS).all(axis=1)
    off = _off_law(line, walls, m, len(reynolds))
    known = np.isfinite(run.value) & np.isfinite(run.scatter) & (run.scatter > 0)
    eligible = known & enough & ~off
    turbulent = reynolds > TURBULENT_LIMIT
    slow = eligible & ~turbulent if (eligible & turbulent).any() else np.zeros(len(eligible), dtype=bool)
    used = eligible & ~slow
    dof = flowing.fits.pooled_dof or np.inf
    value = np.where(used, run.value, np.nan)
    # The weights must not follow the measured K of a run: a low one would weigh more for being low.
    variance, effect = run.moved(run.value)
    trend = LossTrend(np.nan, np.nan, np.nan, 1.0)
    fit = fit_loss_coefficient(value, variance, effect, level=level, dof=dof)
    for _ in range(_PASSES if fit.runs else 0):
        variance, effect = run.moved(fit.coefficient)
        trend = fit_loss_trend(value, variance, effect, reynolds, dof=dof)
        fit = fit_loss_coefficient(
            value, variance, effect, level=level, dof=dof, excess=trend.excess, excess_dof=trend.spread_dof
        )
    fast = int(np.where(off, -1.0, flowing.flow).argmax())
    length, length_u = _equivalent_length(line, flowing, friction, k, fast, run, fit, effect, trend.excess)
    total = np.sqrt(variance + np.einsum("fq,fq->f", effect, effect))
    published = published_loss(line, m)
    return Loss(
        place=m,
        value=run.value,
        u=np.where(np.isfinite(run.value), total, np.nan),
        reynolds=reynolds,
        used=used,
        why_not=tuple(_why_not(known[row], counts[row], off[row], slow[row]) for row in range(len(reynolds))),
        taps=counts,
        fit=fit,
        trend=trend,
        equivalent_length=length,
        equivalent_length_u=length_u,
        published=published,
        verdict=None if published is None else compare(fit.low, fit.high, published),
        reason=None if fit.runs else _no_coefficient(line, m, run, counts, off),
        notes=_notes(fit, trend, used & ~turbulent, off & known & enough, known & ~enough, slow),
    )


def _taps_beside(line: Line, taps: Mask, places: list[int], number: int) -> NDArray[np.intp]:
    """Usable taps of each run between a fitting and the next fitted one on either side (F, 2)."""
    at = [line.fittings[place].at for place in places]
    x, here = line.chainage, at[number]
    above = (x <= here) & (x > (at[number - 1] if number else -np.inf))
    below = (x > here) & (x <= (at[number + 1] if number + 1 < len(at) else np.inf))
    return np.stack([taps[:, above].sum(axis=1), taps[:, below].sum(axis=1)], axis=1)


def _off_law(line: Line, walls: tuple[Wall, ...], m: int, runs: int) -> Mask:
    """Runs whose friction beside the fitting lies off the law: a slip in their flow or readings moves K as well."""
    beside = np.searchsorted(line.bounds, line.fittings[m].at, side="left") - 1, line.reference[m]
    off = np.zeros(runs, dtype=bool)
    for wall in walls:
        off |= wall.fit.off_law[:, np.isin(wall.reaches, beside)].any(axis=1)
    return off


def _equivalent_length(
    line: Line,
    flowing: Flowing,
    friction: Friction,
    k: int,
    fast: int,
    run: PerRun,
    fit: LossFit,
    effect: Array,
    excess: float,
) -> tuple[float, float]:
    """K D / f at the fastest run on the law and its standard uncertainty: K and f share the flow, the bore and readings."""
    if not fit.runs:
        return float("nan"), float("nan")
    factor, slope, coefficient = friction.factor[fast, k], friction.slope[fast, k], fit.coefficient
    if not np.isfinite(factor):
        return float("nan"), float("nan")
    weight = fit.weight
    own_k = weight * np.where(weight > 0, run.own - 2.0 * coefficient * run.own_head, 0.0) / coefficient
    own_f = flowing.own[fast, 1 + k] / slope - 2.0 * flowing.reach_flow_u[fast, k]
    own = (own_k**2).sum() - own_k[fast] ** 2 + (own_k[fast] - own_f) ** 2
    scatter = float(weight**2 @ np.where(weight > 0, run.scatter + excess, 0.0)) / coefficient**2
    scatter += flowing.random[fast, 1 + k, 1 + k] / slope**2
    scatter -= 2 * float(weight[fast] * np.nan_to_num(run.with_slope[fast])) / (coefficient * slope)
    shared = weight @ np.where(weight[:, None] > 0, effect, 0.0) / coefficient
    shared = shared - flowing.effect[fast, 1 + k] / slope
    for q, one in enumerate(flowing.inputs):
        bore = 0.0 if one.diameter is None else -4.0 * float(one.diameter[k])
        flow = float(np.broadcast_to(one.flow, flowing.velocity.shape)[fast, k])
        shared[q] += bore + 2.0 * flow - one.gravity
    length = coefficient * line.diameter[k] / factor
    return float(length), float(abs(length) * np.sqrt(scatter + own + shared @ shared))


def _why_not(known: bool, taps: NDArray[np.intp], off: bool, slow: bool) -> str | None:
    if not known:
        return "the usable taps of this run give no K"
    if (taps < FEWEST_TAPS).any():
        return f"{taps[0]} usable taps upstream and {taps[1]} downstream: it takes {FEWEST_TAPS} on each side"
    if off:
        return "off the friction law"
    return "not turbulent" if slow else None


def _notes(
    fit: LossFit, trend: LossTrend, laminar: Mask, off: Mask, few: Mask, slow: Mask
) -> tuple[str, ...]:
    """What a reader must know of a K that there is."""
    if not fit.runs:
        return ()
    said = []
    if fit.low <= 0 <= fit.high:
        said.append("K is not told from zero")
    if laminar.any():
        said.append("no run is turbulent: K of laminar and critical flow falls with Re")
    if slow.any():
        said.append(f"{_runs(slow)} in laminar or critical flow left out")
    if off.any():
        said.append(f"{_runs(off)} off the friction law left out")
    if few.any():
        said.append(f"{_runs(few)} with fewer than {FEWEST_TAPS} usable taps on a side left out")
    if trend.spread > 1:
        said.append(
            f"the runs differ {trend.spread:.2g} times more than their uncertainties allow: that is part of u of K, "
            f"with {trend.spread_dof:.0f} degree{'' if trend.spread_dof == 1 else 's'} of freedom"
        )
    return tuple(said)


def _runs(which: Mask) -> str:
    count = int(which.sum())
    return f"{count} run{'' if count == 1 else 's'}"


def _no_coefficient(line: Line, m: int, run: PerRun, taps: NDArray[np.intp], off: Mask) -> str:
    if not len(run.value):
        return "no flowing run"
    determined = np.isfinite(run.value)
    known = determined & np.isfinite(run.scatter) & (run.scatter > 0)
    at = line.fittings[m].at
    if not determined.any():
        same = [other.name for i, other in enumerate(line.fittings) if i != m and line.fitted[i]]
        between = f", and {' and '.join(same)} may lie between the same taps" if same else ""
        return f"the usable taps do not separate the loss at {at:g} m from the friction of the reaches beside it{between}"
    most = taps.max(axis=0)
    if not (taps >= FEWEST_TAPS).all(axis=1).any():
        short = [
            f"{n or 'no'} usable tap{'' if n == 1 else 's'} {side}"
            for n, side in zip(most, ("upstream", "downstream"), strict=True)
            if n < FEWEST_TAPS
        ]
        fitted = " before the next fitted loss" if line.fitted.sum() > 1 else ""
        return (
            f"{' and '.join(short) or 'in no run two usable taps on either side'}{fitted}: K needs {FEWEST_TAPS} on each "
            "side, since the error of a single tap would pass for a loss; read another tap there, beyond the recovery length"
        )
    if not known.any():
        return (
            "one line through as many readings as it has parameters: no weight without a stated uncertainty"
        )
    return "every run that gives a K lies off the friction law" if off.any() else "no run gives a K"


def loss_assumptions(line: Line, losses: tuple[Loss, ...]) -> tuple[str, ...]:
    """Say what a fitted K holds of the straight pipe, and what published values stand beside it."""
    said = []
    for one in losses:
        fitting = line.fittings[one.place]
        if not one.fit.runs:
            continue
        if fitting.length:
            said.append(
                f"K of {fitting.name!r}: the loss between the taps less that of the straight pipe between them without the "
                f"fitting's own {fitting.length:g} m, whose friction is part of K."
            )
        else:
            said.append(
                f"K of {fitting.name!r}: the loss between the taps less that of the straight pipe all the way between them; "
                "a length of the fitting, where given, would leave its own friction in K."
            )
        if one.published is not None:
            found = one.published
            said.append(
                f"Published for a {found.described}, beside {fitting.name!r}: K = {found.value:.3g}, from "
                f"{found.low:.2g} to {found.high:.2g} (common practice; {found.source})."
            )
        elif fitting.kind is not None:
            said.append(
                f"No published K of a {fitting.kind} is held that could be checked: {fitting.name!r} stands alone."
            )
    return tuple(said)


def loss_cautions(line: Line, losses: tuple[Loss, ...], runs: Sequence[str]) -> tuple[str, ...]:
    """Say where the head rises at a loss, and where K depends on the Reynolds number; `runs` are the flowing ones, by name."""
    return (*_rising(line, losses, runs), *_with_reynolds(line, losses))


def _rising(line: Line, losses: tuple[Loss, ...], runs: Sequence[str]) -> Iterator[str]:
    """Runs whose K lies below zero by more than their uncertainty, were it zero: one false word in a hundred surveys."""
    tried = sum(int((np.isfinite(one.value) & (one.u > 0)).sum()) for one in losses)
    for one in losses:
        with np.errstate(invalid="ignore"):
            below = np.flatnonzero((one.u > 0) & (one.value < -ndtri(1 - _RISING / max(tried, 1)) * one.u))
        if not below.size:
            continue
        shown = [f"{runs[n]} (K = {rounded(one.value[n], one.u[n])})" for n in below[:_NAMED_RISES]]
        more = f" and {below.size - _NAMED_RISES} more" if below.size > _NAMED_RISES else ""
        yield (
            f"The head rises at {line.fittings[one.place].name!r} in run {', '.join(shown)}{more}, beyond its uncertainty, which "
            "no loss can do: look at the readings on either side, at the chainage of the fitting and at the static run."
        )


def _with_reynolds(line: Line, losses: tuple[Loss, ...]) -> tuple[str, ...]:
    return tuple(
        f"K of {line.fittings[one.place].name!r} {'falls' if one.trend.slope < 0 else 'rises'} with Re, by "
        f"{rounded(abs(one.trend.slope), one.trend.slope_u)} per decade: the value given is that of the fast runs, which "
        "weigh most, and not of slower ones; readings with an error that grows with the flow would look the same."
        for one in losses
        if one.depends_on_reynolds
    )
