"""What ails taps and line, run by run: what its figures need."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.fitting.diagnosis import Ailment
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.survey import Survey

__all__ = ["ailment_run_table", "break_head_table"]

Array = NDArray[np.float64]


def ailment_run_table(
    survey: Survey, line: Line, media: Media, flowing: Flowing, heads: Array
) -> pd.DataFrame:
    """Return the error of each ailing tap or gauge in every run that was looked at, and what each pattern gives.

    Parameters
    ----------
    survey, line, media, flowing
        What was fitted.
    heads : (R, n) array
        Heads as observed, m.

    Returns
    -------
    DataFrame
        The table ``ailment_runs``. Patterns that were not fitted are NaN.
    """
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["ailment_runs"]}
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    place = {tap.name: t for t, tap in enumerate(survey.taps)}
    slopes = flowing.slopes()
    for one in flowing.ailments.taps:
        what = one.what
        sees = next(
            i
            for i, other in enumerate(survey.observations)
            if one.label in ((other.tap, other.tap_2) if one.is_tap else (other.label,))
        )
        tap = one.label if one.is_tap else survey.observations[sees].tap
        reach = line.reach_of_tap[place[tap]]
        # Of long records a part was looked at, evenly spread.
        pick = np.unique(np.linspace(0, len(names) - 1, len(what.error)).round().astype(int))
        velocity_head = flowing.velocity[pick, reach] ** 2 / (2.0 * media.gravity)
        slope = slopes[pick, reach]
        # Of a tap that is seen in differences alone there is no head of its own.
        alone = not one.is_tap or survey.observations[sees].tap_2 is None
        expected = heads[flowing.rows[pick], sees] - what.error if alone else np.full(len(pick), np.nan)
        for n, run in enumerate(pick):
            values = (
                one.label,
                names[run],
                velocity_head[n],
                slope[n],
                expected[n],
                what.error[n],
                what.error_u[n],
                what.offset if what.pattern == "offset" else np.nan,
                *(pattern[n] for pattern in _grown(what, velocity_head, slope)),
            )
            for name, entry in zip(rows, values, strict=True):
                rows[name].append(entry)
    return frame("ailment_runs", rows)


def _grown(what: Ailment, velocity_head: Array, slope: Array) -> tuple[Array, Array]:
    """Errors that grow with the velocity head and with the slope, each with the constant part that suits it."""
    found = []
    for size in (what.edge * velocity_head, -what.chainage * slope):
        if what.pattern in ("offset", "unsteady") or not np.isfinite(size).any():
            found.append(np.full(len(slope), np.nan))
            continue
        left, weight = what.error - size, 1.0 / what.error_u**2
        sound = np.isfinite(left) & np.isfinite(weight)
        constant = float(np.average(left[sound], weights=weight[sound])) if "offset" in what.pattern else 0.0
        found.append(size + constant)
    return found[0], found[1]


def break_head_table(survey: Survey, line: Line, media: Media, flowing: Flowing) -> pd.DataFrame:
    """Return what the energy heads lie above the line carried on from upstream of a break, over what scales it.

    Parameters
    ----------
    survey, line, media, flowing
        What was fitted.

    Returns
    -------
    DataFrame
        The table ``break_heads``: over V²/2g for a step, over S for a kink or a curve; a row for each tap read by itself.
    """
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["break_heads"]}
    unlisted = flowing.ailments.names
    first = flowing.design.shape[1] - len(unlisted)
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    parameters, residuals = flowing.fits.lines.parameters, flowing.fits.lines.residuals
    place = {tap.name: t for t, tap in enumerate(survey.taps)}
    slopes = flowing.slopes()
    for number, broken in enumerate(dict.fromkeys(one for one, _ in unlisted)):
        mine = [first + n for n, (one, _) in enumerate(unlisted) if one == broken]
        fitted = parameters[:, mine] @ flowing.design[:, mine].T
        k = int(np.clip(np.searchsorted(line.bounds, broken.at) - 1, 0, slopes.shape[1] - 1))
        scale = flowing.velocity[:, k] ** 2 / (2.0 * media.gravity) if broken.kind == "step" else slopes[:, k]
        scale = np.where(scale > 0, scale, np.nan)[:, None]
        departure, line_of = (residuals + fitted) / scale, fitted / scale
        for i, one in enumerate(survey.observations):
            if one.tap_2 is not None:
                continue
            for run in np.flatnonzero(np.isfinite(departure[:, i])):
                values = (
                    number,
                    names[run],
                    one.tap,
                    line.chainage[place[one.tap]],
                    departure[run, i],
                    line_of[run, i],
                    flowing.used[run, i],
                )
                for name, entry in zip(rows, values, strict=True):
                    rows[name].append(entry)
    return frame("break_heads", rows)
