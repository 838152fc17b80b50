"""What a reduction took for granted and what its reader must know, in sentences."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.misfit import PATTERNS
from gradeline.fitting.null import FALSE_ALARM
from gradeline.quantities.printing import thousands
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.faint_flows import faint_flow_cautions
from gradeline.reduction.fluids import fluid_assumptions
from gradeline.reduction.gauge_sentences import gauge_assumptions, gauge_cautions
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["assumptions_of", "cautions_of"]

Array = NDArray[np.float64]


def assumptions_of(
    survey: Survey,
    media: Media,
    line: Line,
    corrections: Corrections,
    flowing: Flowing,
    *,
    level: float,
    correct: str,
    keep_all: bool,
    exclude: Sequence[str] = (),
) -> tuple[str, ...]:
    """List every default and choice made by the reduction, after those of the loader."""
    said = list(survey.assumptions)
    said += fluid_assumptions(survey.fluid)
    if survey.site.gravity is None and survey.site.latitude is not None:
        said.append(
            f"Gravity {media.gravity:.5f} m/s² by the WGS 84 formula at the site's latitude and altitude."
        )
    neither = survey.site.gravity is None and survey.site.latitude is None
    if neither and not any("9.80665" in text for text in said):
        said.append("Gravity 9.80665 m/s², since neither gravity nor latitude was given.")
    said.append(
        f"Air beside columns and gauges: {media.air:.3f} kg/m³ (20 °C, 50 % humidity, standard atmosphere)."
    )
    said += gauge_assumptions(survey)
    said += line.assumptions
    if corrections.applied:
        runs = int((survey.runs["flow"] == 0).sum())
        said.append(
            f"The offsets of the taps in {'the static run' if runs == 1 else f'the {runs} static runs'} are taken off the "
            "readings of all flowing runs (--correct none switches this off)."
        )
        bare = [
            one.label for one, known in zip(survey.observations, corrections.known, strict=True) if not known
        ]
        if bare:
            said.append(f"Not read in a static run, and so not corrected: {', '.join(bare)}.")
    elif (survey.runs["flow"] == 0).any():
        why = "switched off" if correct == "none" else "no static reading was usable"
        said.append(f"The static runs do not correct the others: {why}.")
    said.append(
        "Velocity heads carry the kinetic-energy coefficient α: 2 in laminar flow, 1 + 2.7 f in turbulent flow, linear "
        "in Re between."
    )
    said.append(
        "Regimes: laminar below Re 2000, critical to 4000, turbulent above. The wall's roughness comes from the turbulent "
        "runs by the Colebrook–White law (2.51, 3.7)."
    )
    said.append(_search_sentence(flowing, keep_all=keep_all))
    if exclude:
        said.append(f"Left out by hand: {', '.join(exclude)}.")
    said.append(f"Uncertainties are standard uncertainties (k = 1); intervals cover {100 * level:g} %.")
    return tuple(dict.fromkeys(said))


def _search_sentence(flowing: Flowing, *, keep_all: bool) -> str:
    search = flowing.fits.search
    if not search.done:
        return f"Single readings were not judged: {search.reason}."
    whole = 1 - (1 - FALSE_ALARM) ** search.runs
    kept = (
        " Flagged readings were kept in the fits of their runs, as asked; a run off the friction law is left out of the "
        "wall's fit all the same."
        if keep_all
        else ""
    )
    return (
        f"Up to {search.most} outlying readings a run were looked for among all sets of readings. In a sound run one is "
        f"flagged by chance in about {100 * FALSE_ALARM:.0f} of 100 runs; over the {search.runs} flowing run{'' if search.runs == 1 else 's'} the "
        f"probability of at least one false flag is {100 * whole:.0f} %.{kept}"
    )


def cautions_of(
    survey: Survey,
    line: Line,
    corrections: Corrections,
    flowing: Flowing,
    walls: tuple[Wall, ...],
    piezometric: Array,
    crown: Array,
    base: Array,
) -> tuple[str, ...]:
    """List what a reader must know, after what the loader says.

    Parameters
    ----------
    survey, line, corrections, flowing, walls
        What the fits say.
    piezometric, crown : (F, m) array
        Hydraulic grade line and crown of the pipe at the places of the drawn line, m.
    base : (n,) array
        Standard deviation of one reading of each observation, m.
    """
    said = [*survey.cautions, *flowing.cautions]
    said += faint_flow_cautions(survey, flowing)
    said += gauge_cautions(survey, corrections.heads)
    said += _misfit(survey, flowing)
    said += _scatter(flowing)
    said += _offsets(survey, corrections, base, {one.label for one in flowing.ailments.taps})
    said += _few_taps(flowing)
    said += _sub_atmospheric(survey, line, flowing, piezometric, crown)
    search, runs = flowing.fits.search, len(flowing.rows)
    if search.done and search.critical and runs <= 2 and not (flowing.fits.search.critical[0] < 10.5):
        size = np.sqrt(search.critical[0])
        said.append(
            f"With {runs} flowing run{'s' if runs > 1 else ''} and no stated reading uncertainty, the search for outlying "
            f"readings can find only errors above about {size:.0f} times the scatter."
        )
    for wall in walls:
        share = wall.fit.off_law.sum() / max((wall.fit.off_law | wall.fit.used).sum(), 1)
        if share > 0.25:
            said.append(
                f"Wall {wall.name!r}: {100 * share:.0f} % of the slopes lie off the fitted law; take its roughness with care."
            )
    return tuple(dict.fromkeys(said))


def _misfit(survey: Survey, flowing: Flowing) -> list[str]:
    misfit = flowing.fits.misfit
    if misfit is None or not misfit.shared:
        return []
    worst = np.abs(misfit.score).max(axis=1)
    taps = [survey.observations[i].label for i in np.argsort(-worst) if worst[i] > misfit.critical][:4]
    return [
        f"Most runs share a misfit, {PATTERNS[misfit.pattern]}, clearest at {', '.join(taps)}: a tap with an error of its "
        "own, an unlisted local loss or a change of slope. No single reading is flagged in this survey; the slopes and "
        "all that follows from them may be biased until the cause is found."
    ]


def _scatter(flowing: Flowing) -> list[str]:
    search = flowing.fits.search
    if search.done or search.reason is None or "stated" not in search.reason:
        return []
    return [f"The stated reading uncertainty is doubtful: {search.reason}. No single reading is flagged."]


def _offsets(survey: Survey, corrections: Corrections, base: Array, ailing: set[str]) -> list[str]:
    """Offsets so large that a unit, an elevation or a label is the likelier cause; of what ails a tap its own words tell."""
    offset = corrections.offset
    known = np.isfinite(offset)
    if not corrections.applied or known.sum() < 3:
        return []
    offset = offset - np.median(offset[known])
    usual = 1.4826 * float(np.median(np.abs(offset[known])))
    with np.errstate(invalid="ignore"):
        large = known & (np.abs(offset) > 20 * base) & (np.abs(offset) > 10 * usual)
    return [
        f"Tap {survey.observations[i].label} differs from the others by {thousands(1000 * offset[i], 4)} mm in the static runs, and that is "
        "taken off: look at its unit, its elevation and its label."
        for i in np.flatnonzero(large)
        if not ailing & {survey.observations[i].label, survey.observations[i].tap}
    ]


def _few_taps(flowing: Flowing) -> list[str]:
    search = flowing.fits.search
    if search.done or search.reason is None or "too few readings" not in search.reason:
        return []
    return ["With so few taps a wrong reading cannot be told from a right one: none was looked for."]


def _sub_atmospheric(
    survey: Survey, line: Line, flowing: Flowing, piezometric: Array, crown: Array
) -> list[str]:
    # Nobody gave elevations: nothing can be said of the pressure.
    given = np.any(line.elevation) or "taps.csv elevation" in survey.units
    if not len(flowing.rows) or not given:
        return []
    with np.errstate(invalid="ignore"):
        below = piezometric < crown
    runs = survey.runs["run"].to_numpy(object)[flowing.rows[below.any(axis=1)]]
    if not len(runs):
        return []
    names = ", ".join(map(str, runs[:6])) + (" and others" if len(runs) > 6 else "")
    return [
        f"The hydraulic grade line falls below the pipe's crown in run{'s' if len(runs) > 1 else ''} {names}: the pressure "
        "there is below that of the atmosphere, air or dirty water can be drawn in, and the column can part."
    ]
