"""How the kinetic correction α of the velocity heads follows the inputs, where the bore changes along the line.

α = 1 + 2.7 f is that of the law at the roughness that the slopes of a first fit show, so it goes with everything that
these slopes, the bore and the flow go with. Along one bore it moves all taps alike, and no slope feels it.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.friction import (
    LAMINAR_LIMIT,
    TURBULENT_LIMIT,
    colebrook_white,
    colebrook_white_sensitivities,
    darcy_friction_factor,
    relative_roughness,
)
from gradeline.reduction.heads import Input
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media

__all__ = ["law_roughness", "with_kinetic_correction"]

Array = NDArray[np.float64]

_ROUGHEST = 0.1


def law_roughness(
    slopes: Array, velocity: Array, reynolds: Array, line: Line, media: Media
) -> tuple[Array, Array]:
    """Return the relative roughness of each reach that the slopes of the first pass show.

    Parameters
    ----------
    slopes, velocity, reynolds : (F, K) array
        S and Re, dimensionless; V, m/s.
    line, media
        Bores and gravity.

    Returns
    -------
    rough : (K,) array
        Median of the turbulent runs, within 0 and 0.1; 0 where there are none.
    share : (F, K) array
        How much each run counts in that median: a half in each of the two in the middle, or 1 in one; 0 at the edges.
    """
    turbulent = (reynolds > TURBULENT_LIMIT) & (slopes > 0)
    factor = darcy_friction_factor(np.where(turbulent, slopes, 1.0), line.diameter, velocity, media.gravity)
    signed = np.where(turbulent, relative_roughness(factor, np.maximum(reynolds, 1.0)), np.nan)
    rough, share = np.zeros(len(line.diameter)), np.zeros(signed.shape)
    for k in range(len(rough)):
        mine = np.flatnonzero(np.isfinite(signed[:, k]))
        if not len(mine):
            continue
        middle = float(np.median(signed[mine, k]))
        rough[k] = np.clip(middle, 0.0, _ROUGHEST)
        if 0.0 < middle < _ROUGHEST:
            order = mine[np.argsort(signed[mine, k], kind="stable")]
            share[order[[(len(order) - 1) // 2]], k] += 0.5
            share[order[[len(order) // 2]], k] += 0.5
    return rough, share


def with_kinetic_correction(
    inputs: tuple[Input, ...],
    line: Line,
    media: Media,
    *,
    sight: Array,
    slopes: Array,
    gain: Array,
    velocity: Array,
    reynolds: Array,
    plain_head: Array,
) -> tuple[Input, ...]:
    """Add to each shared input what it does to the observed heads by way of α.

    Parameters
    ----------
    inputs : tuple of Input
        With α held.
    line, media
        Bores, reaches of the taps, gravity.
    sight : (n, T) array
        Which taps an observation sees.
    slopes : (F, K) array
        Of the first pass, dimensionless.
    gain : (F, K, n) array
        Slopes from observations in the first pass, 1/m.
    velocity, reynolds, plain_head : (F, K) array
        m/s; dimensionless; V²/2g without α, m.

    Returns
    -------
    tuple of Input
        The same where there is one reach.

    Notes
    -----
    In closed form: d ln f of a run is d ln S + d ln g + 5 d ln D − 2 d ln Q; ε/D = R(f, Re) of the Colebrook–White
    law solved for it; of the median runs' d(ε/D) and each run's d ln Re follows d ln f of the law, dα = 2.7 df, and in
    the critical zone the share of the turbulent profile moves too.
    """
    if len(line.diameter) < 2 or not len(reynolds):
        return inputs
    rough, share = law_roughness(slopes, velocity, reynolds, line, media)
    positive = np.where(share > 0, slopes, 1.0)
    root = darcy_friction_factor(positive, line.diameter, velocity, media.gravity) ** -0.5
    thin = 2.51 * root / reynolds
    by_factor = 3.7 * (0.25 * np.log(10.0) * root * 10.0 ** (-0.5 * root) + 0.5 * thin)
    by_reynolds = 3.7 * thin
    at = np.maximum(reynolds, 1.0)
    law = np.asarray(colebrook_white(at, rough))
    _, law_by_reynolds, law_by_roughness = colebrook_white_sensitivities(at, rough)
    mixed = np.clip((reynolds - LAMINAR_LIMIT) / (TURBULENT_LIMIT - LAMINAR_LIMIT), 0.0, 1.0)
    critical = (reynolds > LAMINAR_LIMIT) & (reynolds < TURBULENT_LIMIT)
    moving = np.where(critical, reynolds / (TURBULENT_LIMIT - LAMINAR_LIMIT) * (2.7 * law - 1.0), 0.0)
    found = []
    for one in inputs:
        bore = np.zeros(len(line.diameter)) if one.diameter is None else one.diameter
        viscosity = np.zeros(len(reynolds)) if one.viscosity is None else one.viscosity
        of_reynolds = one.flow - bore - viscosity[:, None]
        felt = 0.0 if one.heads is None else np.einsum("fkn,fn->fk", gain, np.nan_to_num(one.heads))
        of_factor = felt / positive + one.gravity + 5.0 * bore - 2.0 * one.flow
        of_roughness = (share * (by_factor * of_factor + by_reynolds * of_reynolds)).sum(axis=0)
        of_law = law_by_reynolds * of_reynolds + law_by_roughness * of_roughness
        change = (mixed * 2.7 * law * of_law + moving * of_reynolds) * plain_head
        heads = change[:, line.reach_of_tap] @ sight.T
        found.append(replace(one, heads=heads if one.heads is None else one.heads + heads))
    return tuple(found)
