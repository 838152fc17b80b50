"""The walls of a survey: which slopes each is fitted to, and what came of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.wall import WallData, WallFit, best_roughness, fit_wall
from gradeline.hydraulics.friction import TURBULENT_LIMIT, colebrook_white
from gradeline.quantities.printing import format_number
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.faint_flows import faint_flows
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media, run_temperature_u
from gradeline.reduction.runs import Flowing
from gradeline.survey import Survey

__all__ = ["Wall", "bore_variants", "runs_off_law", "slope_uncertainty", "wall_data", "walls_of"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A slope below this many of its standard uncertainties says nothing of the wall.
_FAINT = 2.0
#: Beyond these no wall is to blame: f of a relative roughness of about 0.25, and f against the smooth law.
_HIGHEST_FACTOR = 0.2
_LOWEST_RATIO = 0.6


@dataclass(frozen=True)
class Wall:
    """A wall and its fit.

    Parameters
    ----------
    name : str
        Its label.
    reaches : (k,) int array
        The reaches that have it.
    data : WallData
        What was fitted.
    fit : WallFit
        The outcome.
    faint : (F, k) bool array
        Slopes left out since they do not exceed twice their uncertainty.
    turbulent : (F, k) bool array
        Slopes of turbulent runs.
    dof : float
        Degrees of freedom of the scatter.
    unmoved : (F,) bool array
        Runs left out since their flow is not told from zero.
    """

    name: str
    reaches: NDArray[np.intp]
    data: WallData
    fit: WallFit
    faint: Mask
    turbulent: Mask
    dof: float
    unmoved: Mask

    def scatter_of_slopes(self, slope: Array) -> Array:
        """Scatter of slopes (F, k) as the runs show it about the law, where the readings of a run leave none."""
        reading = 0.0 if self.data.slope_spread is None else self.fit.reading_scatter * self.data.slope_spread
        return np.asarray(np.hypot(np.abs(slope) * self.fit.relative_scatter, reading))

    def implausible(self) -> str | None:
        """Say why no wall can have the friction that was found, if so; None where one can."""
        if not self.fit.used.any():
            return None
        factor = 2 * self.data.gravity * self.data.diameter * self.data.slope / self.data.velocity**2
        smooth = colebrook_white(self.data.reynolds, 0.0)
        typical = float(np.median(factor[self.fit.used]))
        ratio = float(np.median((factor / smooth)[self.fit.used]))
        if typical > _HIGHEST_FACTOR:
            return (
                f"f = {format_number(typical, 2)}, more than any wall gives (the roughest about {_HIGHEST_FACTOR:g}): look at the units of "
                "bore, flow and chainage"
            )
        if ratio < _LOWEST_RATIO:
            return (
                f"f is {format_number(ratio, 2)} times that of a smooth wall, less than any wall gives: look at the units of bore, flow "
                "and readings"
            )
        return None


def runs_off_law(walls: Sequence[Wall], reach: int, runs: int) -> Mask:
    """Return which of the flowing runs lie off the law of a reach's wall, (F,): a slip of the flow, as a rule."""
    off = np.zeros(runs, dtype=bool)
    for wall in walls:
        off |= wall.fit.off_law[:, wall.reaches == reach].any(axis=1)
    return off


def slope_uncertainty(flowing: Flowing, reaches: int) -> tuple[Array, Array]:
    """Return (standard uncertainty of S with shared inputs, random alone), each (F, K); NaN where not known."""
    part = slice(1, 1 + reaches)
    random = np.einsum("fpp->fp", flowing.random)[:, part] + flowing.own[:, part] ** 2
    shared = np.einsum("fpq,fpq->fp", flowing.effect, flowing.effect)[:, part]
    return np.sqrt(random + shared), np.sqrt(random)


def walls_of(
    survey: Survey, line: Line, media: Media, flowing: Flowing, corrections: Corrections, *, level: float
) -> tuple[Wall, ...]:
    """Fit every wall of a survey.

    Parameters
    ----------
    survey, line, media, flowing, corrections
        The survey and what its runs say.
    level : float
        Coverage of the intervals.

    Returns
    -------
    tuple of Wall
        In order of first appearance.
    """
    slopes = flowing.slopes()
    total, _ = slope_uncertainty(flowing, len(line.diameter))
    unmoved = faint_flows(survey, flowing)
    found = []
    for name in dict.fromkeys(reach.wall for reach in survey.reaches):
        mine = np.array([k for k, reach in enumerate(survey.reaches) if reach.wall == name], dtype=np.intp)
        data = wall_data(survey, line, media, flowing, corrections, mine)
        turbulent = flowing.reynolds[:, mine] > TURBULENT_LIMIT
        there = turbulent & np.isfinite(slopes[:, mine]) & ~unmoved[:, None]
        with np.errstate(invalid="ignore"):
            faint = there & ~(
                slopes[:, mine] > np.where(np.isfinite(total[:, mine]), _FAINT * total[:, mine], 0.0)
            )
        dof = flowing.fits.pooled_dof or np.inf
        fit = fit_wall(data, there & ~faint, level=level, dof=dof)
        found.append(Wall(name, mine, data, fit, faint, turbulent, dof, unmoved))
    return tuple(found)


def wall_data(
    survey: Survey,
    line: Line,
    media: Media,
    flowing: Flowing,
    corrections: Corrections,
    mine: NDArray[np.intp],
) -> WallData:
    """Return the slopes of some reaches, and all that moves them, as the fits take them.

    Parameters
    ----------
    survey, line, media, flowing, corrections
        The survey, its line and what its runs say.
    mine : (k,) int array
        Places of the reaches.

    Returns
    -------
    WallData
        Of these reaches, in their order.
    """
    count = len(flowing.rows)
    columns = 1 + mine
    zero, none = np.zeros(len(line.diameter)), np.zeros(count)
    inputs = flowing.inputs
    by_temperature = media.viscosity_by_temperature[flowing.rows]
    bore = [zero if one.diameter is None else one.diameter for one in inputs]
    viscosity = [none if one.viscosity is None else one.viscosity for one in inputs]
    flow = [np.broadcast_to(one.flow, (count, len(line.diameter)))[:, mine] for one in inputs]
    shared = flowing.fits.lines.projectors
    gain = shared.gain[shared.index][:, columns]
    # The readings of a static run scatter as the others do, and what they do is the same in all runs.
    axes = None
    if corrections.applied:
        variances, vectors = np.linalg.eigh(corrections.covariance)
        whole = variances > 1e-9 * max(float(variances[-1]), 1e-300)
        axes = vectors[:, whole] * np.sqrt(variances[whole])
    return WallData(
        slope=flowing.slopes()[:, mine],
        slope_covariance=flowing.random[:, columns[:, None], columns],
        velocity=flowing.velocity[:, mine],
        diameter=line.diameter[mine],
        kinematic_viscosity=media.kinematic_viscosity[flowing.rows],
        gravity=media.gravity,
        flow_u=flowing.reach_flow_u[:, mine],
        own_slope_effect=flowing.own[:, columns],
        viscosity_u=by_temperature * run_temperature_u(survey)[flowing.rows],
        slope_effect=flowing.effect[:, columns],
        diameter_effect=np.stack(bore, axis=1)[mine] if bore else np.zeros((len(mine), 0)),
        flow_effect=np.stack(flow, axis=2) if flow else np.zeros((count, len(mine), 0)),
        viscosity_effect=np.stack(viscosity, axis=1) if viscosity else np.zeros((count, 0)),
        gravity_effect=np.array([one.gravity for one in inputs]),
        slope_spread=np.sqrt(np.einsum("fpn,fpn->fp", gain, gain)),
        static_effect=None if axes is None else -np.einsum("fpn,ns->fps", gain, axes),
    )


def bore_variants(wall: Wall, changes: tuple[float, ...]) -> list[float]:
    """Return the roughness that would be found if every bore of the wall were larger by each relative change."""
    found = []
    for change in changes:
        diameter = wall.data.diameter * (1.0 + change)
        # The same flow through another bore.
        data = replace(wall.data, diameter=diameter, velocity=wall.data.velocity / (1.0 + change) ** 2)
        found.append(best_roughness(data, wall.fit))
    return found
