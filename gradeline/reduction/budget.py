"""The uncertainty budget: what each input adds to u(S), u(f), u(ε) and u(K), and which improvement pays most."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.fitting.wall import WallData, WallFit
from gradeline.fitting.wall_errors import WallErrors, expected_interval, halved, wall_errors
from gradeline.reduction.friction import Friction, factor_effects
from gradeline.reduction.heads import Input
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall, runs_off_law
from gradeline.survey import Survey

__all__ = [
    "Budget",
    "Improvement",
    "budget_sentences",
    "budgeted_runs",
    "run_budgets",
    "wall_budgets",
]

Array = NDArray[np.float64]

READING_SCATTER = "reading scatter"
LAW_SCATTER = "scatter about the law"
RUN_FLOW = "flow of each run"
RUN_TEMPERATURE = "temperature of each run"
RUN_DIFFERENCES = "differences between the runs"
_STATIC = "static reading"
#: A contribution below this share of the largest is left out.
_NEGLIGIBLE = 1e-4


@dataclass(frozen=True)
class Improvement:
    """What half the uncertainty of one input would do.

    Parameters
    ----------
    input : str
        The one that pays most.
    u, u_halved : float
        Standard uncertainty as it is, and with half of the input's; NaN where a bound is all there is.
    bound, bound_halved : float
        Upper bounds to be expected, the same; NaN where there is an uncertainty.
    """

    input: str
    u: float
    u_halved: float
    bound: float = float("nan")
    bound_halved: float = float("nan")


@dataclass(frozen=True)
class Budget:
    """The budget of one value.

    Parameters
    ----------
    quantity : {"slope", "friction_factor", "roughness", "roughness_upper95", "loss_coefficient"}
        Of what.
    subject : str
        Which run and reach, wall or fitting.
    value : float
        The value itself, in its unit.
    contributions : mapping of str to float
        Standard uncertainty that each input adds, in the unit of the value, in falling order.
    improvement : Improvement or None
        None where nothing adds anything.
    """

    quantity: str
    subject: str
    value: float
    contributions: Mapping[str, float]
    improvement: Improvement | None = field(default=None)

    @property
    def u(self) -> float:
        """Root sum of squares of all contributions."""
        return float(np.sqrt(sum(one**2 for one in self.contributions.values())))


def grouped(
    inputs: Sequence[Input], effects: Array, others: Mapping[str, float], scale: float = 1.0
) -> dict[str, float]:
    """Put contributions of one name together (root sum of squares), those that add nothing left out, largest first."""
    squares: dict[str, float] = {}
    for one, effect in zip(inputs, effects, strict=True):
        squares[one.name] = squares.get(one.name, 0.0) + float(effect) ** 2
    for name, value in others.items():
        squares[name] = squares.get(name, 0.0) + value**2
    found = {name: scale * float(np.sqrt(square)) for name, square in squares.items() if square > 0}
    largest = max(found.values(), default=0.0)
    # What is left of effects that cancel is rounding, and what adds nothing to eight digits of u is not told.
    return dict(
        sorted(
            ((name, value) for name, value in found.items() if value > _NEGLIGIBLE * largest),
            key=lambda item: -item[1],
        )
    )


def half_of_largest(contributions: Mapping[str, float]) -> Improvement | None:
    """Return what half of the largest contribution would leave of a root sum of squares."""
    if not contributions:
        return None
    name, largest = max(contributions.items(), key=lambda item: item[1])
    square = sum(one**2 for one in contributions.values())
    return Improvement(name, float(np.sqrt(square)), float(np.sqrt(square - 0.75 * largest**2)))


def budgeted_runs(flowing: Flowing, friction: Friction, reach: int, walls: Sequence[Wall] = ()) -> list[int]:
    """Return the runs of a reach that have a budget: the fastest, a middle and the slowest.

    Parameters
    ----------
    flowing, friction
        What the fits say.
    reach : int
        Which one.
    walls : sequence of Wall
        What is off the law of one, a slip of the flow as a rule, is not looked at.

    Returns
    -------
    list of int
        Of the turbulent runs with f and its uncertainty, else of all runs that have them, else of those with S and
        its uncertainty; a run between the others in flow where there are three.
    """
    with np.errstate(invalid="ignore"):
        has_factor = (friction.factor_u[:, reach] > 0) & np.isfinite(friction.factor[:, reach])
        has_slope = friction.slope_u[:, reach] > 0
    sound = ~runs_off_law(walls, reach, len(has_slope))
    for good in (has_factor & (friction.regime[:, reach] == "turbulent"), has_factor, has_slope):
        mine = np.flatnonzero(good & sound)
        if len(mine):
            mine = mine[np.argsort(flowing.flow[mine], kind="stable")]
            return [int(mine[n]) for n in sorted({len(mine) - 1, len(mine) // 2, 0}, reverse=True)]
    return []


def run_budgets(
    survey: Survey, flowing: Flowing, friction: Friction, walls: tuple[Wall, ...]
) -> list[Budget]:
    """Return the budgets of S and f of a few runs of each reach.

    Parameters
    ----------
    survey, flowing, friction, walls
        The survey and what its fits say.

    Returns
    -------
    list of Budget
        Their root sums of squares are the uncertainties in the table of runs.

    Notes
    -----
    ∂ ln f: 5 of the bore, −2 of the flow, 1 of gravity, and that of S, which is linear in the heads.
    """
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    loose = {int(k) for wall in walls if np.isfinite(wall.fit.relative_scatter) for k in wall.reaches}
    rising = np.where(friction.slope > 0, friction.slope, np.nan)
    effects = factor_effects(flowing, rising)
    slopes, factors = [], []
    for k, reach in enumerate(survey.reaches):
        scattered = LAW_SCATTER if k in loose else READING_SCATTER
        for run in budgeted_runs(flowing, friction, k, walls):
            subject = f"run {names[run]}, {reach.name}"
            slope, own = friction.slope[run, k], float(flowing.own[run, 1 + k])
            random = float(np.nan_to_num(friction.slope_u_random[run, k]))
            scatter = float(np.sqrt(max(random**2 - own**2, 0.0)))
            parts = grouped(flowing.inputs, flowing.effect[run, 1 + k], {scattered: scatter, RUN_FLOW: own})
            slopes.append(Budget("slope", subject, float(slope), parts, half_of_largest(parts)))
            factor = float(friction.factor[run, k])
            if not np.isfinite(factor):
                continue
            flow = own / slope - 2.0 * float(flowing.reach_flow_u[run, k])
            parts = grouped(
                flowing.inputs, effects[run, k], {scattered: scatter / slope, RUN_FLOW: flow}, factor
            )
            factors.append(Budget("friction_factor", subject, factor, parts, half_of_largest(parts)))
    return [*slopes, *factors]


def wall_budgets(flowing: Flowing, walls: tuple[Wall, ...], *, improve: bool = True) -> list[Budget]:
    """Return the budget of the roughness of each wall, of its upper bound where it is not told from zero.

    Parameters
    ----------
    flowing : Flowing
        Its inputs.
    walls : tuple of Wall
        The walls.
    improve : bool
        Whether to work out what pays most, which takes a fit for every input.

    Returns
    -------
    list of Budget
        None for a wall without an interval or a bound. What half an input would do is worked out with half of it in the
        covariance of the fit: the weights change with it.
    """
    found = []
    for wall in walls:
        fit = wall.fit
        if not np.isfinite(fit.low) or wall.implausible() is not None:
            continue
        resolved = fit.low > 0
        names = np.array([one.name for one in flowing.inputs], dtype=object)
        scattered = LAW_SCATTER if np.isfinite(fit.relative_scatter) else READING_SCATTER
        at = None if resolved else fit.upper95
        if at is not None and not np.isfinite(at):
            continue
        errors = wall_errors(wall.data, fit, at)
        parts = grouped(flowing.inputs, errors.shared, _others(errors, scattered))
        found.append(
            Budget(
                "roughness" if resolved else "roughness_upper95",
                wall.name,
                fit.roughness if resolved else fit.upper95,
                parts,
                _wall_improvement(wall, names, parts, scattered, resolved=bool(resolved))
                if improve
                else None,
            )
        )
    return found


def _others(errors: WallErrors, scattered: str) -> dict[str, float]:
    return {
        _STATIC: errors.static,
        RUN_FLOW: errors.own_flow,
        RUN_TEMPERATURE: errors.own_viscosity,
        scattered: errors.scatter,
    }


def _wall_improvement(
    wall: Wall, names: NDArray[np.object_], parts: Mapping[str, float], scattered: str, *, resolved: bool
) -> Improvement | None:
    if not parts:
        return None
    kinds = {RUN_FLOW: "own_flow", RUN_TEMPERATURE: "own_viscosity", scattered: "scatter"}

    def half(name: str) -> tuple[WallData, WallFit]:
        data, fit = halved(wall.data, wall.fit, kinds.get(name, names == name))
        if name == _STATIC:
            data, fit = halved(data, fit, "static")
        return data, fit

    nan, now = float("nan"), expected_interval(wall.data, wall.fit)
    if not resolved:
        bounds = {name: expected_interval(*half(name))[2] for name in parts}
        best = min(bounds, key=lambda name: np.nan_to_num(bounds[name], nan=np.inf))
        return Improvement(best, nan, nan, now[2], bounds[best])
    best = min(parts, key=lambda name: wall_errors(*half(name)).u)
    then = expected_interval(*half(best))
    # The interval is not symmetric: half its width, in standard uncertainties.
    times = float(stdtrit(min(wall.fit.dof, 1e9), 0.5 + wall.fit.level / 2.0))
    return Improvement(best, (now[1] - now[0]) / (2 * times), (then[1] - then[0]) / (2 * times))


def budget_sentences(budgets: Sequence[Budget]) -> list[str]:
    """Say what the budget is of, where that is not plain."""
    said = []
    if any(one.quantity in ("slope", "friction_factor") for one in budgets):
        said.append(
            "The uncertainty budget of S and f is that of the fastest, a middle and the slowest turbulent run of each reach."
        )
    bounds = [one.subject for one in budgets if one.quantity == "roughness_upper95"]
    if bounds:
        said.append(
            f"The roughness of {', '.join(bounds)} is not told from zero: its budget is that of the upper bound, the law "
            "taken as linear about it."
        )
    if any(one.quantity == "roughness" for one in budgets):
        said.append(
            "The budget of a roughness is linearised about its estimate; its interval, from the likelihood, is not symmetric."
        )
    return said
