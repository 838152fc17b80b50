"""One wall in several surveys at once: the friction of each, or one line of ε over the years, shared errors common.

Two surveys of one pipe share the error of its bore. In the difference of what they find it all but cancels, and the
runs weigh otherwise than in either survey alone; so the runs of all surveys are fitted together.
"""

from __future__ import annotations

from collections.abc import Hashable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import block_diag

from gradeline.fitting.wall.covariance import log_slope_errors, scatter_of
from gradeline.fitting.wall.data import WallData, WallFit, law_gradient, law_log_slope

__all__ = ["JointLevels", "JointLine", "Part", "freedom_of", "joint_levels", "joint_line"]

Array = NDArray[np.float64]

_STEPS = 40
_SETTLED = 1e-10
#: A step leaves at least this share of a roughness.
_LEAST = 0.2


@dataclass(frozen=True)
class Part:
    """A wall in one survey.

    Parameters
    ----------
    data : WallData
        Its slopes.
    fit : WallFit
        Which of them are in use, their scatter, and the roughness by this survey alone.
    keys : tuple of hashable
        One for each shared input of `data`: an error with the same key in two parts is one error.
    resolved : bool
        Whether this survey alone tells ε from zero.
    """

    data: WallData
    fit: WallFit
    keys: tuple[Hashable, ...]
    resolved: bool


@dataclass(frozen=True)
class JointLevels:
    """The friction of a wall in each of n surveys, all fitted together.

    Parameters
    ----------
    log_factor : (n,) array
        ln f at the common Re in the reference bore, dimensionless.
    covariance : (n, n) array
        Of `log_factor`, dimensionless.
    apart : (n, n) array
        The part of it that is not an error common to all surveys, dimensionless.
    gain : (n, N) array
        By which each `log_factor` follows ln S of all slopes, dimensionless.
    scatter_covariance : tuple of (N_i, N_i) array
        The covariance of ln S of each survey's slopes that `dof` belongs to, dimensionless: what readings show of it, or,
        where the runs alone tell their scatter about the law, that with the runs' own errors.
    dof : (n,) array
        Degrees of freedom of each survey's scatter, dimensionless; infinite where it is known.
    roughness : (n,) array
        ε, m; where a survey does not tell it from zero, that by which its slopes were held against the law.
    by_roughness : (n,) array
        ∂ ln f/∂ε at the common Re in the reference bore, 1/m.
    resolved : (n,) bool array
        Whether `log_factor` is that of ε; else the mean excess over the law at `roughness`.
    """

    log_factor: Array
    covariance: Array
    apart: Array
    gain: Array
    scatter_covariance: tuple[Array, ...]
    dof: Array
    roughness: Array
    by_roughness: Array
    resolved: NDArray[np.bool_]


@dataclass(frozen=True)
class JointLine:
    """ε = level + rate (t − t₀) of a wall over n surveys.

    Parameters
    ----------
    level : float
        ε at the mean date, m.
    rate : float
        Growth of ε, m per unit of time.
    middle : float
        t₀, the mean of the dates, in their unit of time.
    covariance : (2, 2) array
        Of level and rate, m², m² per unit of time and m² per its square.
    roughness : (n,) array
        ε of the line at each survey, m.
    gain : (2, N) array
        By which level and rate follow ln S of all slopes, m and m per unit of time.
    scatter_covariance : tuple of (N_i, N_i) array
        The covariance of ln S of each survey's slopes that `dof` belongs to, dimensionless: what readings show of it, or,
        where the runs alone tell their scatter about the law, that with the runs' own errors.
    dof : (n,) array
        Degrees of freedom of each survey's scatter, dimensionless.
    settled : bool
        Whether the fit came to rest.
    """

    level: float
    rate: float
    middle: float
    covariance: Array
    roughness: Array
    gain: Array
    scatter_covariance: tuple[Array, ...]
    dof: Array
    settled: bool


@dataclass(frozen=True)
class _Stack:
    """All slopes in use, one under the other."""

    index: tuple[NDArray[np.intp], ...]  # slopes in use of each part, flat
    scatter: tuple[Array, ...]  # covariance of ln S that readings or runs of each part show
    block: Array  # B (N, N)
    effect: Array  # J (N, Q)
    to_all: NDArray[np.bool_]  # errors common to all parts (Q,)
    turned: Array  # B⁻¹ J (N, Q)
    inverse: Array  # B⁻¹ (N, N)
    core: Array  # (I + J' B⁻¹ J)⁻¹ (Q, Q)

    def solve(self, values: Array) -> Array:
        """C⁻¹ values, for (N, p), by Woodbury's identity."""
        return np.asarray(self.inverse @ values - self.turned @ (self.core @ (self.turned.T @ values)))


def _stack(parts: Sequence[Part], roughness: Array) -> _Stack:
    index, scatters, blocks, inverses = [], [], [], []
    names: dict[Hashable, int] = {}
    effects: list[tuple[Array, list[int]]] = []
    seen: dict[int, set[int]] = {}
    for number, (part, size) in enumerate(zip(parts, roughness, strict=True)):
        data, used = part.data, part.fit.used
        errors = log_slope_errors(data, float(size), scatter_of(part.fit))
        runs, reaches = data.slope.shape
        pick = np.flatnonzero(used.ravel())
        same = (pick[:, None] // reaches) == (pick[None, :] // reaches)
        at = (pick[:, None] // reaches, pick[:, None] % reaches, pick[None, :] % reaches)
        random = np.where(same, errors.random[at], 0.0)
        own, thin = errors.own.ravel()[pick], errors.thin.ravel()[pick]
        block = random + np.where(same, np.outer(own, own) + np.outer(thin, thin), 0.0)
        index.append(pick)
        # What the runs show about the law is their scatter with their own errors, not the scatter alone.
        scatters.append(block if np.isfinite(part.fit.relative_scatter) else random)
        blocks.append(block)
        inverses.append(np.linalg.inv(block))
        flat = errors.effect.reshape(runs * reaches, -1)[pick]
        # Static readings whose scatter is that about the law stand last, and are this survey's alone.
        keys = [*part.keys, *((number, "static", n) for n in range(flat.shape[1] - len(part.keys)))]
        columns = [names.setdefault(key, len(names)) for key in keys]
        for column in columns:
            seen.setdefault(column, set()).add(number)
        effects.append((flat, columns))
    effect = np.zeros((sum(map(len, index)), len(names)))
    start = 0
    for flat, columns in effects:
        effect[start : start + len(flat), columns] = flat
        start += len(flat)
    inverse = block_diag(*inverses)
    turned = inverse @ effect
    core = np.asarray(np.linalg.pinv(np.eye(effect.shape[1]) + effect.T @ turned, hermitian=True), float)
    to_all = np.array([len(seen[column]) == len(parts) for column in range(len(names))], dtype=bool)
    return _Stack(tuple(index), tuple(scatters), block_diag(*blocks), effect, to_all, turned, inverse, core)


def _residual(part: Part, roughness: float) -> Array:
    """Return ln S less that of the law; below zero the law goes on as its tangent there."""
    edge = max(roughness, 0.0)
    law = law_log_slope(part.data, edge)
    if roughness < 0:
        law = law + law_gradient(part.data, part.fit.used, 0.0) * roughness
    used = part.fit.used
    return np.asarray((np.log(np.where(used, part.data.slope, 1.0)) - law)[used])


def _gradient(part: Part, roughness: float) -> Array:
    return np.asarray(law_gradient(part.data, part.fit.used, max(roughness, 0.0))[part.fit.used])


def _fitted(stack: _Stack, design: Array, residual: Array) -> tuple[Array, Array, Array]:
    """Generalised least squares: coefficients, their covariance, their gain."""
    turned = stack.solve(design)
    covariance = np.asarray(np.linalg.inv(design.T @ turned), float)
    gain = covariance @ turned.T
    return gain @ residual, covariance, gain


def _reference(
    parts: Sequence[Part], roughness: Array, reynolds: float, diameter: float
) -> tuple[Array, Array]:
    """Return ln f and ∂ ln f/∂ε at a Reynolds number in a bore."""
    factors, slopes = [], []
    for part, size in zip(parts, roughness, strict=True):
        factor, _, by = part.data.law.sensitivities(reynolds, float(size) / diameter)
        factors.append(float(np.log(factor)))
        slopes.append(float(by) / diameter)
    return np.array(factors), np.array(slopes)


def joint_levels(parts: Sequence[Part], reynolds: float, diameter: float) -> JointLevels:
    """Return ln f of a wall at a common Re in each survey, with the covariance between the surveys.

    Parameters
    ----------
    parts : sequence of Part
        One wall in n surveys, each with a roughness and a scatter.
    reynolds : float
        Common Reynolds number, turbulent, dimensionless.
    diameter : float
        Reference bore, m: that in which ln f of an ε is told, so that unlike bores can be compared.

    Returns
    -------
    JointLevels
        In the order of the parts.

    Notes
    -----
    ln S = ln S_law(ε_i) + error, all surveys at once, with C = B + J J' in which an error that surveys share has one column
    of J. The parameters are ln f at the common Re, of which a survey's likelihood is nearly a parabola where that of ε is
    not. A survey that tells ε from zero moves along the law of its ε; one that does not is measured by its mean excess over
    the law at its own ε, so that f below the smooth law counts as well.

    Examples
    --------
    The bore, uncertain by 0.1 %, is common to both; the calibration of the flow is not.

    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> both = [Part(data, fit, ("bore", (n, "flow")), True) for n in range(2)]
    >>> found = joint_levels(both, 1e5, 0.05)
    >>> difference = np.array([-1.0, 1.0])
    >>> u = np.sqrt(difference @ found.covariance @ difference)
    >>> bool(u < np.sqrt(found.covariance[0, 0] + found.covariance[1, 1]))
    True
    """
    own = np.array([part.fit.roughness for part in parts])
    stack = _stack(parts, own)
    roughness = own.copy()
    resolved = np.array([part.resolved and part.fit.roughness > 0 for part in parts])
    for _ in range(_STEPS):
        factor, by = _reference(parts, roughness, reynolds, diameter)
        columns = [
            _gradient(part, size) / slope if mine else np.ones(len(pick))
            for part, size, slope, mine, pick in zip(parts, roughness, by, resolved, stack.index, strict=True)
        ]
        residual = np.concatenate(
            [_residual(part, size) for part, size in zip(parts, roughness, strict=True)]
        )
        step, covariance, gain = _fitted(stack, block_diag(*[one[:, None] for one in columns]), residual)
        moved = np.where(resolved, step / by, 0.0)
        # Together with the others a survey may no longer tell ε from zero.
        gone = resolved & (roughness + moved < _LEAST**4 * own)
        if gone.any():
            resolved, roughness = resolved & ~gone, np.where(gone, own, roughness)
            continue
        roughness = np.maximum(roughness + moved, _LEAST * roughness)
        if np.abs(np.where(resolved, step, 0.0)).max(initial=0.0) < _SETTLED:
            break
    common = gain @ stack.effect[:, stack.to_all]
    return JointLevels(
        log_factor=factor + step,
        covariance=covariance,
        apart=covariance - common @ common.T,
        gain=gain,
        scatter_covariance=stack.scatter,
        dof=np.array([part.fit.dof for part in parts]),
        roughness=roughness,
        by_roughness=by,
        resolved=resolved,
    )


def freedom_of(found: JointLevels | JointLine, weights: Array) -> float:
    """Return the effective degrees of freedom of a weighted sum of what was fitted.

    Parameters
    ----------
    found : JointLevels or JointLine
        What was fitted.
    weights : (n,) or (2,) array
        Of each fitted value, dimensionless.

    Returns
    -------
    float
        u⁴ / Σ u_i⁴/ν_i over the scatter of each survey (Welch and Satterthwaite, JCGM 100, G.4.1); infinite where every
        scatter is known.

    Examples
    --------
    Two surveys whose scatter is all there is, each with 7 degrees of freedom, have 14 together in their difference.

    >>> from dataclasses import replace
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = replace(example_wall(), flow_u=np.zeros(8), diameter_effect=np.zeros((1, 2)), flow_effect=np.zeros(2))
    >>> fit = replace(fit_wall(data, np.isfinite(data.slope)), dof=7.0)
    >>> both = [Part(data, fit, ("bore", "flow"), True)] * 2
    >>> round(freedom_of(joint_levels(both, 1e5, 0.05), np.array([-1.0, 1.0])), 6)
    14.0
    """
    total = float(weights @ found.covariance @ weights)
    row = weights @ found.gain
    start, below = 0, 0.0
    for scatter, dof in zip(found.scatter_covariance, found.dof, strict=True):
        mine = row[start : start + len(scatter)]
        start += len(scatter)
        if np.isfinite(dof):
            below += float(mine @ scatter @ mine) ** 2 / dof
    return float(total**2 / below) if below > 0 else float("inf")


def joint_line(parts: Sequence[Part], times: Array) -> JointLine:
    """Return the line of ε over the time of the surveys that suits all their runs best.

    Parameters
    ----------
    parts : sequence of Part
        One wall in n surveys, at least two.
    times : (n,) array
        When each was, in one unit of time of the caller's choice; not all the same.

    Returns
    -------
    JointLine
        Least squares in ln S with the covariance of all slopes, errors that surveys share once.

    Notes
    -----
    ε = ε₀ + α t: the law of ageing of Colebrook and White (1937), The reduction of carrying capacity of pipes with age,
    J. Instn Civ. Engrs 7 (1), 99–118 (from memory). Below zero, where no roughness can be, the friction law is carried on
    as its tangent at zero, so that readings of a smooth wall may scatter to either side.

    Examples
    --------
    >>> from gradeline.fitting.wall import example_wall, fit_wall
    >>> data = example_wall()
    >>> fit = fit_wall(data, np.isfinite(data.slope))
    >>> found = joint_line([Part(data, fit, ("bore", "flow"), True)] * 3, np.array([0.0, 1.0, 4.0]))
    >>> round(found.level, 9), abs(found.rate) < 1e-12
    (0.0001, True)
    """
    own = np.array([part.fit.roughness for part in parts])
    stack = _stack(parts, own)
    middle = float(times.mean())
    away = times - middle
    slope, level = np.polyfit(away, own, 1)
    values = np.array([level, slope])
    settled = False
    for _ in range(_STEPS):
        roughness = values[0] + values[1] * away
        design = np.concatenate(
            [
                _gradient(part, size)[:, None] * np.array([1.0, when])
                for part, size, when in zip(parts, roughness, away, strict=True)
            ]
        )
        residual = np.concatenate(
            [_residual(part, size) for part, size in zip(parts, roughness, strict=True)]
        )
        step, covariance, gain = _fitted(stack, design, residual)
        # No step is longer than what is there: the law bends most near zero.
        longest = float(np.abs(step[0] + step[1] * away).max())
        step = step * min(1.0, max(float(np.abs(roughness).max()), 1e-9) / max(longest, 1e-300))
        values = values + step
        if longest <= _SETTLED * max(float(np.abs(roughness).max()), 1e-9):
            settled = True
            break
    return JointLine(
        level=float(values[0]),
        rate=float(values[1]),
        middle=middle,
        covariance=covariance,
        roughness=values[0] + values[1] * away,
        gain=gain,
        scatter_covariance=stack.scatter,
        dof=np.array([part.fit.dof for part in parts]),
        settled=settled,
    )
