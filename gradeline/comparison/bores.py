"""One bore for all surveys of a pipe: what each stated, whether the statements agree, and each survey brought to it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.wall import WallData, best_roughness
from gradeline.reduction.fitted import FittedWall

__all__ = ["ALIKE", "DIFFER", "ONE", "UNMATCHED", "OneBore", "one_bore", "slopes_at_bore"]

Array = NDArray[np.float64]

#: What became of the stated bores: the same statement; unlike ones of one bore; ones that cannot be of one bore; reaches
#: that are divided otherwise, so that no bore stands against another.
ALIKE, ONE, DIFFER, UNMATCHED = "alike", "one", "differ", "unmatched"
#: Stated values that differ by less than this share are the same statement.
_SAME = 1e-9
#: Bores that differ by less are one bore, whatever their stated uncertainty, relative (0.5 % of f).
_ROUNDING = 1e-3
#: Statements agree within this many standard uncertainties of their difference.
_COVERAGE = 2.0


@dataclass(frozen=True)
class OneBore:
    """A wall in n surveys, all in one bore.

    Parameters
    ----------
    kind : {"alike", "one", "differ", "unmatched"}
        What became of the stated bores.
    diameter : float
        The bore of the first reach that all are brought to, m: the mean of statements that agree, each weighed by its
        uncertainty, else that of the first survey.
    walls : tuple of FittedWall
        As brought to it.
    log_factor : (n,) array
        What the statement of its own bore adds to a survey's ln f, dimensionless.
    """

    kind: str
    diameter: float
    walls: tuple[FittedWall, ...]
    log_factor: Array


def one_bore(walls: Sequence[FittedWall]) -> OneBore:
    """Bring a wall of several surveys to one bore.

    Parameters
    ----------
    walls : sequence of FittedWall
        The same wall in n surveys.

    Returns
    -------
    OneBore
        The bores of two surveys agree where they differ by at most 2 √(u₁² + u₂²), or by 0.1 %. Unchanged walls where all
        state the same.

    Notes
    -----
    f = π² g D⁵ S / (8 Q²) holds the stated bore in its fifth power, while S and Q are measured whatever the bore. In one
    bore, f differs between surveys as S/Q² does: a statement alone makes no change of the wall.
    """
    bores = _by_reach(walls)
    first = float(walls[0].data.diameter[0])
    nothing = np.zeros(len(walls))
    if bores is None:
        return OneBore(UNMATCHED, first, tuple(walls), nothing)
    stated, u = bores
    if np.all(np.abs(stated / stated[0] - 1.0) < _SAME):
        return OneBore(ALIKE, first, tuple(walls), nothing)
    agree = all(
        np.all(
            np.abs(stated[a] - stated[b])
            <= np.maximum(_COVERAGE * np.hypot(u[a], u[b]), _ROUNDING * stated[a])
        )
        for a, b in combinations(range(len(walls)), 2)
    )
    target = (
        np.array([_mean(values, errors) for values, errors in zip(stated.T, u.T, strict=True)])
        if agree
        else stated[0]
    )
    # The error of the one bore is that of its surest statement: whether others are measurements of their own is not known.
    surest = np.min(np.where(u > 0, u, np.inf), axis=0)
    relative = np.where(np.isfinite(surest), surest / target, 0.0)
    brought, away = [], []
    for wall in walls:
        data = slopes_at_bore(wall.data, np.broadcast_to(target, wall.data.diameter.shape))
        scaled = _with_bore_error(
            wall, data, np.broadcast_to(relative, data.diameter.shape), target, walls[0]
        )
        brought.append(scaled)
        away.append(_mean_change(wall, data))
    return OneBore(ONE if agree else DIFFER, float(target[0]), tuple(brought), np.array(away))


def slopes_at_bore(data: WallData, diameter: Array) -> WallData:
    """Return what was measured as it stands in another bore.

    Parameters
    ----------
    data : WallData
        Slopes of k reaches.
    diameter : (k,) array
        Their bore, m.

    Returns
    -------
    WallData
        V falls with the square of the bore at a metered flow. Where the flow or S themselves follow the bore, as by a
        velocity that was measured, they are moved as the errors of the bore move them.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall
    >>> wider = slopes_at_bore(example_wall(), np.array([0.0505]))
    >>> round(float(wider.velocity[0, 0] / example_wall().velocity[0, 0]), 6), round(1 / 1.01**2, 6)
    (0.980296, 0.980296)
    """
    ratio = np.log(diameter / data.diameter)
    moves = np.linalg.pinv(data.diameter_effect) @ ratio
    flow = np.broadcast_to(data.flow_effect, (*data.slope.shape, len(moves))) @ moves
    steeper = np.where(np.isfinite(data.slope_effect), data.slope_effect, 0.0) @ moves
    with np.errstate(invalid="ignore", divide="ignore"):
        slope = data.slope * np.exp(np.where(steeper == 0, 0.0, steeper / data.slope))
    return replace(
        data, slope=slope, velocity=data.velocity * np.exp(flow - 2.0 * ratio), diameter=np.array(diameter)
    )


def _by_reach(walls: Sequence[FittedWall]) -> tuple[Array, Array] | None:
    """Stated bores (n, k) and their standard uncertainties, m; of a wall of one bore throughout, k = 1."""
    stated = [wall.data.diameter for wall in walls]
    u = [one * _relative_u(wall.data) for one, wall in zip(stated, walls, strict=True)]
    if len({len(one) for one in stated}) > 1:
        if any(np.ptp(one) > _SAME * one[0] for one in stated):
            return None
        stated, u = [one[:1] for one in stated], [one[:1] for one in u]
    return np.array(stated), np.array(u)


def _relative_u(data: WallData) -> Array:
    return np.asarray(np.sqrt((data.diameter_effect**2).sum(axis=1)))


def _mean(values: Array, u: Array) -> float:
    """Weighted mean of unlike statements: one that is repeated is no new measurement."""
    known = u > 0
    if not known.any():
        return float(values[0])
    once: dict[tuple[float, float], float] = {}
    for value, own in zip(values[known], u[known], strict=True):
        once.setdefault((round(float(value), 12), round(float(own), 12)), float(value))
    weights = np.array([own**-2.0 for _, own in once])
    return float(weights @ np.array(list(once.values())) / weights.sum())


def _with_bore_error(
    wall: FittedWall, data: WallData, relative: Array, target: Array, first: FittedWall
) -> FittedWall:
    """The error of the one bore in place of that of the survey's own statement, and the roughness in it."""
    own = _relative_u(wall.data)
    scale = np.ones(len(wall.inputs))
    inputs = list(wall.inputs)
    names = _bore_subjects(first)
    for q in np.flatnonzero(np.any(wall.data.diameter_effect != 0, axis=0)):
        k = int(np.argmax(np.abs(wall.data.diameter_effect[:, q])))
        if inputs[q].belongs == "pipe" and own[k] > 0:
            scale[q] = relative[k] / own[k]
            inputs[q] = replace(
                inputs[q],
                subject=names.get(k, inputs[q].subject),
                value=float(target[min(k, len(target) - 1)]),
            )
    data = replace(
        data,
        slope_effect=data.slope_effect * scale,
        diameter_effect=data.diameter_effect * scale,
        flow_effect=data.flow_effect * scale,
        viscosity_effect=data.viscosity_effect * scale,
        gravity_effect=data.gravity_effect * scale,
    )
    fit = wall.fit
    if np.isfinite(fit.roughness):
        fit = replace(fit, roughness=best_roughness(data, fit))
    return replace(wall, data=data, fit=fit, inputs=tuple(inputs))


def _bore_subjects(wall: FittedWall) -> dict[int, str]:
    """What a survey calls the reach of each of its bores."""
    found: dict[int, str] = {}
    for q in np.flatnonzero(np.any(wall.data.diameter_effect != 0, axis=0)):
        found.setdefault(int(np.argmax(np.abs(wall.data.diameter_effect[:, q]))), wall.inputs[q].subject)
    return found


def _mean_change(wall: FittedWall, brought: WallData) -> float:
    """By how much ln f lies higher in the survey's own bore than in the one bore."""
    used = wall.fit.used
    if not used.any():
        return 0.0

    def log_factor(data: WallData) -> Array:
        return np.asarray(np.log((data.diameter * data.slope / data.velocity**2)[used]))

    return float(np.mean(log_factor(wall.data) - log_factor(brought)))
