"""The fitted walls as they stand in memory, for what is worked out from several reductions at once."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from gradeline.fitting.wall import WallData, WallFit
from gradeline.reduction.heads import Input
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["FittedWall", "SharedInput", "fitted_walls_of"]

#: Errors of the pipe as it lies, whoever measures on it.
_DIMENSIONS = frozenset(
    {"bore", "width", "height", "outer diameter", "inner diameter", "area", "perimeter", "tap chainage"}
)
_PIPE = _DIMENSIONS | {"tap elevation", "gravity", "given loss coefficient"}
#: Errors that change a metered flow as well and belong to no meter.
_MEDIA = frozenset({"temperature", "density", "viscosity", "line pressure", "off-take flow"})


@dataclass(frozen=True)
class SharedInput:
    """What is told of an input that all runs of a survey share.

    Parameters
    ----------
    name, subject : str
        As in the budget.
    belongs : {"pipe", "meter", "gauges", "other"}
        What carries the error from one survey to another.
    value : float
        The stated value in SI, by which an input of the pipe is told from one that was measured anew; NaN for others.
    """

    name: str
    subject: str
    belongs: str
    value: float


@dataclass(frozen=True)
class FittedWall:
    """A wall, what was fitted to it, and what its shared errors are.

    Parameters
    ----------
    name : str
        Its label.
    data : WallData
        What was fitted; its shared effects in the order of `inputs`.
    fit : WallFit
        The outcome.
    inputs : tuple of SharedInput
        The errors that all runs share.
    implausible : str or None
        Why no wall can have the friction that was found.
    """

    name: str
    data: WallData
    fit: WallFit
    inputs: tuple[SharedInput, ...]
    implausible: str | None


def fitted_walls_of(
    survey: Survey, media: Media, flowing: Flowing, walls: tuple[Wall, ...]
) -> tuple[FittedWall, ...]:
    """Return the walls of a survey with what is told of their shared inputs.

    Parameters
    ----------
    survey, media, flowing, walls
        The survey and what its runs say.

    Returns
    -------
    tuple of FittedWall
        In order of first appearance.
    """
    values = _stated_values(survey, media.gravity)
    inputs = tuple(
        SharedInput(
            one.name,
            one.subject,
            belongs := _belongs(one),
            values.get((one.name, one.subject), float("nan")) if belongs == "pipe" else float("nan"),
        )
        for one in flowing.inputs
    )
    return tuple(FittedWall(wall.name, wall.data, wall.fit, inputs, wall.implausible()) for wall in walls)


def _belongs(one: Input) -> str:
    if one.name in _PIPE:
        return "pipe"
    if one.name.startswith("gauge"):
        return "gauges"
    return "meter" if np.any(one.flow) and one.name not in _MEDIA else "other"


def _stated_values(survey: Survey, gravity: float) -> Mapping[tuple[str, str], float]:
    found = {("gravity", ""): gravity}
    for tap in survey.taps:
        found["tap chainage", tap.name] = tap.chainage
        found["tap elevation", tap.name] = tap.elevation
    for reach in survey.reaches:
        for name in _DIMENSIONS:
            found[name, reach.name] = reach.diameter.value
    for fitting in survey.fittings:
        if fitting.loss_coefficient is not None:
            found["given loss coefficient", fitting.name] = fitting.loss_coefficient.value
    return MappingProxyType(found)
