"""The line as the fits see it: which reaches and losses lie between the taps, and which taps are disturbed."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gradeline.hydraulics.friction import entrance_length
from gradeline.hydraulics.gradelines import passed, path_lengths
from gradeline.hydraulics.local_losses import change_of_bore_loss_coefficient, change_of_bore_sensitivity
from gradeline.quantities import Measured
from gradeline.reduction.sections import area_of, laminar_constant_of, section_assumptions
from gradeline.survey import Fitting, Reach, Survey

__all__ = ["Line", "disturbed_taps", "line_of"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Taps nearer than this many bores downstream of a fitting are used, with a caution.
CAUTIOUS_RECOVERY = 30.0


@dataclass(frozen=True)
class Line:
    """Geometry of the line.

    Parameters
    ----------
    bounds : (K + 1,) array
        Chainages of the reaches' ends, m.
    diameter : (K,) array
        Bores, m.
    chainage, elevation : (T,) array
        Of the taps, m.
    reach_of_tap : (T,) int array
        Reach in which each tap lies; a tap at a boundary belongs to the reach upstream.
    fittings : tuple of Fitting
        Local losses in order of chainage, changes of bore among them.
    reference : (M,) int array
        Reach whose velocity head each loss coefficient refers to.
    fitted : (M,) bool array
        Whether its loss coefficient is to be fitted.
    lengths : (T, K) array
        Length of each reach passed on the way to each tap, m.
    passed : (T, M) array
        1 where a local loss lies upstream of a tap.
    assumptions : tuple of str
        Loss coefficients taken from the literature, and what stands for other sections than circles.
    area : (K,) array
        Cross-sections, m².
    laminar_constant : (K,) array
        f·Re of laminar flow, dimensionless: 64 for a circle, NaN where the shape is not known.
    column : (M,) int array
        Parameter of the runs' fits that is each fitted loss; −1 where its coefficient is given.
    """

    bounds: Array
    diameter: Array
    chainage: Array
    elevation: Array
    reach_of_tap: NDArray[np.intp]
    fittings: tuple[Fitting, ...]
    reference: NDArray[np.intp]
    fitted: Mask
    lengths: Array
    passed: Array
    assumptions: tuple[str, ...]
    area: Array
    laminar_constant: Array
    column: NDArray[np.intp]


def line_of(survey: Survey) -> Line:
    """Lay out the line of a survey.

    Parameters
    ----------
    survey : Survey
        Its reaches, fittings and taps.

    Returns
    -------
    Line
        With an implicit fitting at each change of bore that no fitting stands for.
    """
    reaches = survey.reaches
    bounds = np.array([reaches[0].start, *(reach.end for reach in reaches)])
    diameter = np.array([reach.diameter.value for reach in reaches])
    bore = np.array([_bore(reach) for reach in reaches])
    fittings, assumptions = list(survey.fittings), []
    for before, after in itertools.pairwise(reaches):
        changes = _bore(before) != _bore(after)
        given = any(fitting.change_of_bore and abs(fitting.at - before.end) < 1e-6 for fitting in fittings)
        if changes and not given:
            coefficient = float(change_of_bore_loss_coefficient(_bore(before), _bore(after)))
            what = "contraction" if _bore(after) < _bore(before) else "expansion"
            name = f"{what} {before.name} to {after.name}"
            fittings.append(Fitting(name, before.end, Measured(coefficient), change_of_bore=True))
            assumptions.append(
                f"The change of bore at {before.end:g} m is taken as a sudden {what}: K = {coefficient:.3g} of the "
                "velocity head in the smaller bore (Borda–Carnot for an expansion, 0.5 (1 − β²) for a contraction)."
            )
    for offtake in survey.offtakes:
        if not any(abs(fitting.at - offtake.at) < 1e-6 for fitting in survey.fittings):
            fittings.append(Fitting(f"off-take {offtake.name}", offtake.at, Measured(0.0)))
            assumptions.append(
                f"The flow downstream of off-take {offtake.name!r} is less by what it takes; the flow that goes straight on "
                "loses nothing there (K = 0). A fitting at the same chainage gives or fits a K."
            )
    assumptions += section_assumptions(reaches)
    fittings.sort(key=lambda fitting: fitting.at)
    chainage = np.array([tap.chainage for tap in survey.taps])
    at = np.array([fitting.at for fitting in fittings])
    fitted = np.array([fitting.loss_coefficient is None for fitting in fittings], dtype=bool)
    reach_of_tap = np.clip(np.searchsorted(bounds, chainage, side="left") - 1, 0, len(reaches) - 1)
    return Line(
        bounds=bounds,
        diameter=diameter,
        chainage=chainage,
        elevation=np.array([tap.elevation for tap in survey.taps]),
        reach_of_tap=reach_of_tap.astype(np.intp),
        fittings=tuple(fittings),
        reference=np.array([_reference(fitting, bounds, bore) for fitting in fittings], dtype=np.intp),
        fitted=fitted,
        lengths=path_lengths(chainage, bounds),
        passed=passed(chainage, at).reshape(len(chainage), len(at)),
        assumptions=tuple(assumptions),
        area=np.array([area_of(reach) for reach in reaches]),
        laminar_constant=np.array([laminar_constant_of(reach) for reach in reaches]),
        # E₀ and the reaches' slopes stand before them.
        column=np.where(fitted, len(reaches) + np.cumsum(fitted), -1).astype(np.intp),
    )


def _bore(reach: Reach) -> float:
    """Bore of the circle that has a reach's area, m: what counts where the section changes."""
    return reach.diameter.value if reach.section is None else float(np.sqrt(4 * area_of(reach) / np.pi))


def change_of_bore_gains(survey: Survey, line: Line) -> Array:
    """Return how the K that follows from the bores goes with each bore, ∂K/∂ ln D (M, K); 0 where K was given or is fitted."""
    gains = np.zeros((len(line.fittings), len(survey.reaches)))
    for m, fitting in enumerate(line.fittings):
        if not fitting.change_of_bore or fitting.loss_coefficient is None or fitting in survey.fittings:
            continue
        after = int(np.searchsorted(line.bounds, fitting.at + 1e-6, side="right") - 1)
        bores = [_bore(survey.reaches[k]) for k in (after - 1, after)]
        by_ratio = float(change_of_bore_sensitivity(*bores))
        small = after - 1 if bores[0] < bores[1] else after
        gains[m, small], gains[m, 2 * after - 1 - small] = by_ratio, -by_ratio
    return gains


def _reference(fitting: Fitting, bounds: Array, diameter: Array) -> int:
    last = len(diameter) - 1
    upstream = int(np.clip(np.searchsorted(bounds, fitting.at, side="left") - 1, 0, last))
    downstream = int(np.clip(np.searchsorted(bounds, fitting.at, side="right") - 1, 0, last))
    if fitting.velocity == "upstream":
        return upstream
    if fitting.velocity == "downstream":
        return downstream
    return upstream if diameter[upstream] <= diameter[downstream] else downstream


def disturbed_taps(survey: Survey, line: Line, reynolds: Array) -> tuple[Mask, list[str], list[str]]:
    """Tell which taps lie where the flow is not yet, or no longer, that of a straight pipe.

    Parameters
    ----------
    survey : Survey
        Its reaches.
    line : Line
        Its layout.
    reynolds : (R, K) array
        Re of each run and reach, dimensionless.

    Returns
    -------
    disturbed : (R, T) bool array
        Taps to leave out.
    reasons : list of str
        One for each tap; empty where it is never disturbed.
    cautions : list of str
        Taps that are near a fitting, but used.
    """
    count = len(line.chainage)
    disturbed = np.zeros((len(reynolds), count), dtype=bool)
    reasons, cautions = [""] * count, []
    last = len(line.diameter) - 1
    for k, reach in enumerate(survey.reaches):
        if not reach.inlet:
            continue
        length = entrance_length(reynolds[:, k], line.diameter[k])
        inside = (line.reach_of_tap == k) & (line.chainage - reach.start < np.asarray(length)[:, None])
        disturbed |= inside
        for tap in np.flatnonzero(inside.any(axis=0)):
            reasons[tap] = f"inside the entrance length of reach {reach.name!r}"
    for fitting in line.fittings:
        upstream = int(np.clip(np.searchsorted(line.bounds, fitting.at, side="left") - 1, 0, last))
        downstream = int(np.clip(np.searchsorted(line.bounds, fitting.at, side="right") - 1, 0, last))
        before = (fitting.at - fitting.length / 2 - line.chainage) / line.diameter[upstream]
        after = (line.chainage - fitting.at - fitting.length / 2) / line.diameter[downstream]
        # A tap at the very place of a loss is upstream of it, and in the midst of its disturbance.
        above = line.chainage <= fitting.at
        near = (above & (before < fitting.approach)) | (~above & (after < fitting.recovery))
        disturbed[:, near] = True
        for tap in np.flatnonzero(near):
            bores, side = (before[tap], "upstream") if above[tap] else (after[tap], "downstream")
            reasons[tap] = (
                f"between the ends of {fitting.name!r}"
                if bores < 0
                else f"{bores:.1f} bores {side} of {fitting.name!r}"
            )
        soon = (after >= fitting.recovery) & (after < CAUTIOUS_RECOVERY)
        cautions += [
            f"Tap {survey.taps[tap].name} lies {after[tap]:.0f} bores downstream of {fitting.name!r}: used, but flow may "
            f"not have recovered within {CAUTIOUS_RECOVERY:.0f} bores."
            for tap in np.flatnonzero(soon & ~near)
        ]
    return disturbed, reasons, cautions
