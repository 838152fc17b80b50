"""The legs of a compound manometer as the arguments of its head: which ends are fixed, which are read."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gradeline.reduction.media import Media, fluid_density
from gradeline.survey import Gauge, Leg, Survey

__all__ = ["Chain", "chain_of", "level_names"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Chain:
    """Arguments of `gradeline.hydraulics.chain.compound_manometer_head`; none for a gauge without legs.

    Parameters
    ----------
    arguments : mapping of str to array
        By parameter name.
    other_levels : tuple of (array, array)
        For each level but the first: how often it enters the rise of each leg, and its values in each run, m.
    flowing : (L, 1, 1) array
        1 for the legs of flowing fluid, whose density goes with it.
    density_errors : tuple of (str, array)
        For each fluid whose density has a stated uncertainty, the standard uncertainty in its legs, kg/m³.
    elevation_errors : tuple of array
        For each fixed elevation with a stated uncertainty, what it changes of the rise of the legs, m: where two legs
        meet it is one error of both.
    """

    arguments: Mapping[str, Any] = field(default_factory=lambda: MappingProxyType({}))
    other_levels: tuple[tuple[Array, Array], ...] = ()
    flowing: Array = field(default_factory=lambda: np.zeros((0, 1, 1)))
    density_errors: tuple[tuple[str, Array], ...] = ()
    elevation_errors: tuple[Array, ...] = ()


def level_names(legs: tuple[Leg, ...], taps: set[str]) -> list[str]:
    """Return the names of the levels that the legs are read at, in their order.

    Examples
    --------
    >>> level_names((Leg("water", None, "T1", "a"), Leg("mercury", None, "a", "b")), {"T1"})
    ['a', 'b']
    """
    ends = [end for leg in legs for end in (leg.start, leg.end)]
    return [end for end in dict.fromkeys(ends) if isinstance(end, str) and end not in taps]


def chain_of(survey: Survey, media: Media, gauge: Gauge, tap: str, tap_2: str | None) -> Chain:
    """Work out the chain of a gauge.

    Parameters
    ----------
    survey, media
        Its levels and fluids.
    gauge : Gauge
        With or without legs.
    tap, tap_2 : str or None
        Where the chain begins and ends; None where it ends open.

    Returns
    -------
    Chain
        An open end has a last leg of air down to the datum.
    """
    if not gauge.legs:
        return Chain()
    legs = gauge.legs
    if tap_2 is None:
        legs = (*legs, Leg("air", None, legs[-1].end, 0.0))
    names = level_names(legs, {tap.name for tap in survey.taps})
    levels = _levels(survey, gauge, names)
    count, runs = len(legs), len(survey.runs)

    def share(name: str | None) -> Array:
        return np.array([float(leg.end == name) - float(leg.start == name) for leg in legs])[:, None, None]

    rise = np.zeros((count, runs, 1))
    for place, leg in enumerate(legs):
        for end, sign in ((leg.end, 1.0), (leg.start, -1.0)):
            if isinstance(end, float | int):
                rise[place] += sign * end
            elif end in names[1:]:
                rise[place] += sign * levels[end]
    temperature = survey.runs["temperature"].to_numpy(float)[:, None]
    return Chain(
        arguments={
            "leg_density": np.stack([_density(survey, media, leg, temperature) for leg in legs]),
            "leg_rise": rise,
            "leg_reading": share(names[0] if names else None),
            "leg_tap": share(tap),
            "leg_tap_2": share(tap_2),
        },
        other_levels=tuple((share(name), levels[name]) for name in names[1:]),
        flowing=np.array([float(_flows(survey, leg)) for leg in legs])[:, None, None],
        density_errors=_density_errors(legs),
        elevation_errors=_elevation_errors(legs),
    )


def _density_errors(legs: Sequence[Leg]) -> tuple[tuple[str, Array], ...]:
    """The stated density errors by fluid: legs of one fluid are filled from one bottle and err together."""
    sizes: dict[str, Array] = {}
    for place, leg in enumerate(legs):
        if leg.density is not None and leg.density.u:
            change = sizes.setdefault(leg.fluid, np.zeros((len(legs), 1, 1)))
            change[place] = leg.density.u
    return tuple(sizes.items())


def _elevation_errors(legs: Sequence[Leg]) -> tuple[Array, ...]:
    """The stated errors of fixed elevations: the end of one leg is the start of the next."""
    found = []
    for place, leg in enumerate(legs):
        after = legs[place + 1] if place + 1 < len(legs) else None
        size = max(leg.end_u or 0.0, (after.start_u if after is not None else None) or 0.0)
        if size:
            change = np.zeros((len(legs), 1, 1))
            change[place] = size
            if after is not None:
                change[place + 1] = -size
            found.append(change)
    return tuple(found)


def _levels(survey: Survey, gauge: Gauge, names: list[str]) -> dict[str, Array]:
    """Return the levels of a gauge, (R, 1) each, m."""
    if survey.levels is None:
        return {name: np.full((len(survey.runs), 1), np.nan) for name in names}
    return {name: survey.levels[f"{gauge.name} {name}"].to_numpy(float)[:, None] for name in names}


def _flows(survey: Survey, leg: Leg) -> bool:
    """Whether a leg is full of the flowing fluid at its temperature."""
    return leg.density is None and leg.fluid == survey.fluid.name


def _density(survey: Survey, media: Media, leg: Leg, temperature: Array) -> Array:
    if leg.density is not None:
        return np.full_like(media.density[:, None], leg.density.value)
    if _flows(survey, leg):
        return media.density[:, None]
    if leg.fluid == "air":
        # The air beside the board, as for every other gauge of the survey.
        return np.full_like(media.density[:, None], media.air)
    return np.broadcast_to(fluid_density(leg.fluid, temperature), media.density[:, None].shape)
