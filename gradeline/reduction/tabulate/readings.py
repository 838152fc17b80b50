"""Heads, taps and the scatter of the gauges."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.reduction.ailment_sentences import static_offset_words, tap_sentence
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.heads import observation_kinds
from gradeline.reduction.line import Line
from gradeline.reduction.runs import Flowing
from gradeline.reduction.static_offsets import standing_offsets
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.survey import Survey

__all__ = ["head_table", "scatter_table", "tap_table"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def head_table(
    survey: Survey, line: Line, corrections: Corrections, flowing: Flowing, excluded: Mask
) -> pd.DataFrame:
    """Return the table of heads: a row for each run and observation, unread ones too."""
    shape = corrections.heads.observed.shape
    head = corrections.heads.observed
    energy, fitted, score = head.copy(), np.full(shape, np.nan), np.full(shape, np.nan)
    used = np.zeros(shape, dtype=bool)
    flag, reason = np.full(shape, None, dtype=object), np.full(shape, None, dtype=object)
    rows = flowing.rows
    energy[rows] = flowing.energy - flowing.given
    lines = flowing.fits.lines
    fitted[rows] = energy[rows] - lines.residuals
    whole = np.asarray(np.isfinite(lines.parameters).all(axis=1))
    undetermined = ~whole[:, None] & (lines.dof == 0)[:, None] & ~flowing.used
    fitted[rows] = np.where(undetermined, np.nan, fitted[rows])
    score[rows] = flowing.fits.score if flowing.fits.score.size else np.nan
    used[rows] = flowing.used
    static = np.setdiff1d(np.arange(shape[0]), rows)
    for run in static:
        mine = np.isfinite(head[run]) & ~excluded[run]
        fitted[run] = _at_rest(head[run], mine, corrections.heads.levels)
        used[run] = mine
    part = np.full((len(rows), shape[1]), None, dtype=object)
    why = part.copy()
    place = {tap.name: i for i, tap in enumerate(survey.taps)}
    for i, one in enumerate(survey.observations):
        both = [flowing.reasons[place[name]] for name in (one.tap, one.tap_2) if name is not None]
        part[flowing.disturbed[:, i], i] = "disturbed"
        why[flowing.disturbed[:, i], i] = "; ".join(filter(None, both))
    for i, text in enumerate(flowing.ailments.why):
        if text:
            left = flowing.ailments.left_out[i] & ~flowing.disturbed[:, i]
            part[left, i], why[left, i] = "excluded", text
    part[flowing.excluded], why[flowing.excluded] = "excluded", "left out by hand"
    part[flowing.fits.flagged] = "outlier"
    why[flowing.fits.flagged] = "outlying against the other taps of the run"
    flag[rows], reason[rows] = part, why
    at_rest = np.isin(np.arange(shape[0]), static)[:, None]
    flag[at_rest & excluded], reason[at_rest & excluded] = "excluded", "left out by hand"
    unread = ~np.isfinite(head)
    flag[unread], reason[unread] = None, "not read"
    chainage = [line.chainage[place[one.tap]] for one in survey.observations]
    count = shape[0]
    return frame(
        "heads",
        {
            "run": np.repeat(survey.runs["run"].to_numpy(object), shape[1]),
            "gauge": np.tile([one.gauge for one in survey.observations], count),
            "tap": np.tile([one.tap for one in survey.observations], count),
            "tap_2": np.tile(np.array([one.tap_2 for one in survey.observations], dtype=object), count),
            "chainage": np.tile(chainage, count),
            "head": head.ravel(),
            "energy_head": energy.ravel(),
            "fitted_head": fitted.ravel(),
            "residual": (energy - fitted).ravel(),
            "standardized_residual": score.ravel(),
            "used": used.ravel(),
            "flag": flag.ravel(),
            "reason": reason.ravel(),
        },
    )


def _at_rest(head: Array, used: Mask, levels: Array) -> Array:
    """What a static run's levels give for each observation, m: the mean of the heads, 0 for a difference."""
    if levels.shape[1] == 1:
        seen = used & (levels[:, 0] != 0)
        return np.asarray(levels[:, 0] * (head[seen].mean() if seen.any() else 0.0))
    return np.asarray(levels @ np.linalg.lstsq(levels[used], head[used], rcond=None)[0])


def tap_table(
    survey: Survey, corrections: Corrections, flowing: Flowing, base: Array, excluded: Mask
) -> pd.DataFrame:
    """Return the table of taps: offsets, in the static runs or else over the others, edge coefficients, what ails them."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["taps"]}
    noise = np.nan_to_num(base) * np.sqrt(np.diagonal(corrections.covariance))
    own = {one.tap: i for i, one in enumerate(survey.observations) if one.tap_2 is None}
    ailments = flowing.ailments
    found, place = (
        ailments.diagnosis,
        {name: s for s, (name, is_tap) in enumerate(ailments.subjects) if is_tap},
    )
    standing = standing_offsets(survey, corrections, noise, flowing.fits.pooled_dof)
    named = {
        survey.observations[i].tap: static_offset_words(corrections.offset[i], noise[i])
        for i in np.flatnonzero(standing)
    }
    named |= {one.label: tap_sentence(one) for one in ailments.taps if one.is_tap}
    for tap in survey.taps:
        i, s = own.get(tap.name), place.get(tap.name)
        offset = np.nan if i is None else corrections.offset[i]
        offset_u = noise[i] if i is not None and np.isfinite(offset) and base[i] > 0 else np.nan
        edge = edge_u = np.nan
        why = (
            "read only through differential gauges"
            if i is None
            else "left out by hand"
            if excluded[:, i].all()
            else "offset against the mean of the taps in the static runs"
            if np.isfinite(offset) and corrections.applied
            else "offset in the static runs, not taken off"
            if np.isfinite(offset)
            else "no static run read this tap"
        )
        if found is None or not found.done or s is None:
            reason = None if found is None else found.reason
            why += f"; edge coefficient and diagnosis: {reason or 'no reading of its own'}"
        else:
            edge, edge_u = found.edge[s], found.edge_u[s]
            if not np.isfinite(offset) and np.isfinite(found.offset[s]):
                offset, offset_u = found.offset[s], found.offset_u[s]
                why += ": offset over the flowing runs, if all other taps are sound; not taken off"
            if not np.isfinite(edge):
                why += "; edge coefficient: the runs do not tell it from the line and the offset"
        values = (tap.name, offset, offset_u, edge, edge_u, named.get(tap.name), why)
        for name, entry in zip(rows, values, strict=True):
            rows[name].append(entry)
    return frame("taps", rows)


def scatter_table(survey: Survey, flowing: Flowing, floor: Array) -> pd.DataFrame:
    """Return how the readings of each gauge kind scatter."""
    kind, names = observation_kinds(survey)
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["scatter"]}
    for i, (name, part) in enumerate(zip(names, flowing.fits.scatter, strict=True)):
        stated = float(floor[kind == i].min())
        note = (
            "no freedom left in the runs"
            if not np.isfinite(part.pooled)
            else f"as stated; the runs themselves show no more than that ({1000 * part.pooled:.2g} mm)"
            if stated > part.pooled
            else "found over all runs"
        )
        values = (name, part.base, part.surge, stated or np.nan, part.dof, note)
        for key, entry in zip(rows, values, strict=True):
            rows[key].append(entry)
    return frame("scatter", rows)
