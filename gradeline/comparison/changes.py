"""What the surveys of a wall say of its friction together: f of each, each one's change, and whether there is any."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtrc, stdtr, stdtrit

from gradeline.fitting.joint import JointLevels, Part, freedom_of

__all__ = ["MARGIN", "tell_changes", "tell_factors", "unchanged", "with_left_out"]

Array = NDArray[np.float64]

_MANY = 1e9
#: Chance alone hardly puts a sound run further off the law than this many standard uncertainties.
_BY_CHANCE = 4.0
#: A change is called real at this share of the chance that the level leaves, 3 % for 95 %: with few runs to tell the scatter,
#: and runs off the law left out, tests at 5 % were wrong in 5 to 6.5 % of simulated pairs (`tests/calibration/comparisons.py`).
MARGIN = 0.6


def _quantile(level: float, dof: float) -> float:
    return float(stdtrit(min(dof, _MANY), 0.5 + level / 2.0))


def _size(levels: JointLevels, n: int, log_factor: float) -> float:
    """ε of an ln f near that of a survey, m: along the law's own bend, of second order in ε."""
    return float(levels.roughness[n] + (log_factor - levels.log_factor[n]) / levels.by_roughness[n])


def with_left_out(part: Part) -> Part:
    """Return a survey with the runs that chance alone may have put off the law.

    Parameters
    ----------
    part : Part
        The wall in a survey.

    Returns
    -------
    Part
        A run is left out for its distance from the others, and so the more often the more the others err to the other side:
        of six sound runs a change is then called real in twelve of a hundred cases (simulated) and not in five. Runs within
        four standard uncertainties of the law are taken back, and where the runs alone tell the scatter it grows by what
        they add, (ν + Σ z²)/(ν + m). The part itself where there are none.
    """
    fit = part.fit
    with np.errstate(invalid="ignore"):
        back = fit.off_law & (np.abs(fit.score) < _BY_CHANCE)
    if not back.any():
        return part
    wider, dof = 1.0, fit.dof
    if np.isfinite(fit.relative_scatter) and np.isfinite(dof):
        added = int(back.sum())
        wider = float(np.sqrt((dof + (fit.score[back] ** 2).sum()) / (dof + added)))
        dof += added
    fit = replace(
        fit,
        used=fit.used | back,
        relative_scatter=wider * fit.relative_scatter,
        reading_scatter=wider * fit.reading_scatter,
        dof=dof,
    )
    return replace(part, fit=fit)


def tell_factors(
    rows: Sequence[dict[str, Any]],
    levels: JointLevels,
    parts: Sequence[Part],
    reynolds: float,
    diameter: float,
    level: float,
) -> None:
    """Add f at the common Re, and ε without what all surveys share.

    Parameters
    ----------
    rows : sequence of dict
        One a survey; added to.
    levels : JointLevels
        Of the parts.
    parts : sequence of Part
        The wall in each survey; f is told in their bores.
    reynolds, diameter : float
        At which `levels` are told.
    level : float
        Coverage of the intervals.
    """
    for n, (row, part) in enumerate(zip(rows, parts, strict=True)):
        weights = np.eye(len(rows))[n]
        u, dof = float(np.sqrt(levels.covariance[n, n])), freedom_of(levels, weights)
        t = _quantile(level, dof)
        law = part.data.law.factor
        own = np.log(law(reynolds, levels.roughness[n] / part.data.diameter[0])) - np.log(
            law(reynolds, levels.roughness[n] / diameter)
        )
        factor = float(np.exp(levels.log_factor[n] + own))
        row |= {
            "friction_factor": factor,
            "friction_factor_u": factor * u,
            "friction_factor_low": factor * float(np.exp(-t * u)),
            "friction_factor_high": factor * float(np.exp(t * u)),
        }
        if levels.resolved[n]:
            apart = t * float(np.sqrt(max(levels.apart[n, n], 0.0)))
            row["roughness_apart_low"] = max(_size(levels, n, levels.log_factor[n] - apart), 0.0)
            row["roughness_apart_high"] = _size(levels, n, levels.log_factor[n] + apart)


def tell_changes(
    rows: Sequence[dict[str, Any]],
    levels: JointLevels,
    whole: JointLevels,
    level: float,
    tests: int,
    *,
    of_roughness: bool,
) -> None:
    """Add each survey's change against the first.

    Parameters
    ----------
    rows : sequence of dict
        One a survey; added to.
    levels, whole : JointLevels
        Of the surveys, in one bore; and `with_left_out`. A change is real where both say so.
    level : float
        Coverage of the intervals.
    tests : int
        Walls that share the chance of a false alarm.
    of_roughness : bool
        Whether the change may be told as one of ε.
    """
    alarm = MARGIN * (1.0 - level) / (tests * max(len(rows) - 1, 1))
    if of_roughness:
        for row, size, told in zip(rows, levels.roughness, levels.resolved, strict=True):
            row["roughness_together"] = float(size) if told else None
    for n, row in enumerate(rows[1:], 1):
        weights = np.zeros(len(rows))
        weights[0], weights[n] = -1.0, 1.0
        change = float(weights @ levels.log_factor)
        u, dof = float(np.sqrt(weights @ levels.covariance @ weights)), freedom_of(levels, weights)
        t = _quantile(level, dof)
        p = max(_chance(levels, weights), _chance(whole, weights))
        row |= {
            "log_factor_change": change,
            "log_factor_change_u": u,
            "log_factor_change_dof": dof if np.isfinite(dof) else None,
            "log_factor_change_low": change - t * u,
            "log_factor_change_high": change + t * u,
            "change_p": p,
            "changed": bool(p < alarm),
        }
        if of_roughness and levels.resolved[0] and levels.resolved[n]:
            by = weights / levels.by_roughness
            grown = float(levels.roughness[n] - levels.roughness[0])
            wide = _quantile(level, freedom_of(levels, by)) * float(np.sqrt(by @ levels.covariance @ by))
            row |= {
                "roughness_change": grown,
                "roughness_change_low": grown - wide,
                "roughness_change_high": grown + wide,
            }


def _chance(levels: JointLevels, weights: Array) -> float:
    """How often chance alone gives as large a difference."""
    change = float(weights @ levels.log_factor)
    u = float(np.sqrt(weights @ levels.covariance @ weights))
    if u == 0:
        return float(change == 0)
    return 2.0 * float(stdtr(min(freedom_of(levels, weights), _MANY), -abs(change) / u))


def unchanged(levels: JointLevels, whole: JointLevels, level: float, tests: int) -> dict[str, Any]:
    """Return whether all surveys found one friction: the F test of their contrasts.

    Parameters
    ----------
    levels, whole : JointLevels
        Of the surveys, in one bore; and `with_left_out`. A change is real where both say so.
    level : float
        One less the chance of a false alarm, which is held with a margin.
    tests : int
        Walls that share it.

    Returns
    -------
    dict
        Columns for the table of walls; `by_left_out` where the change rests on runs that were left out.
    """
    count = len(levels.log_factor)
    contrasts = np.column_stack([-np.ones(count - 1), np.eye(count - 1)])
    alone, p = (_one_friction(one, contrasts) for one in (levels, whole))
    alarm = MARGIN * (1.0 - level) / tests
    p_both, dof = max(alone, p), min(freedom_of(levels, row) for row in contrasts)
    last = contrasts[-1]
    needed = float(stdtrit(min(dof, _MANY), 1.0 - alarm / 2.0))
    return {
        "unchanged_p": p_both,
        "changed": bool(p_both < alarm),
        "by_left_out": bool(alone < alarm <= p),
        "least_log_factor_change": needed * float(np.sqrt(last @ levels.covariance @ last)),
    }


def _one_friction(levels: JointLevels, contrasts: Array) -> float:
    apart = contrasts @ levels.log_factor
    covariance = contrasts @ levels.covariance @ contrasts.T
    dof = min(freedom_of(levels, row) for row in contrasts)
    square = float(apart @ np.linalg.pinv(covariance, hermitian=True) @ apart)
    return float(fdtrc(len(contrasts), min(dof, _MANY), square / len(contrasts)))
