"""The tables of a reduction, filled from what the fits say."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.fitting.exponent import fit_exponent
from gradeline.fitting.losses import fit_loss_coefficient
from gradeline.fitting.straightness import FEWEST_TAPS, run_straightness, shared_curve
from gradeline.hydraulics.friction import roughness_reynolds
from gradeline.hydraulics.gradelines import grade_lines, stations
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.friction import Friction
from gradeline.reduction.heads import observation_kinds
from gradeline.reduction.line import Line
from gradeline.reduction.media import Media
from gradeline.reduction.runs import Flowing
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES, Column
from gradeline.reduction.walls import Wall, bore_variants
from gradeline.survey import Survey

__all__ = [
    "bore_table",
    "exponent_table",
    "fitting_table",
    "frame",
    "grade_line_table",
    "head_table",
    "layout_table",
    "reach_table",
    "run_table",
    "scatter_table",
    "tap_table",
    "wall_table",
]

Array = NDArray[np.float64]
Values = Sequence[Any] | NDArray[Any]

_LATER = "not estimated in this version"
#: Changes of the bore for which the roughness is worked out again.
_BORE_CHANGES = (-0.05, -0.02, -0.01, 0.0, 0.01, 0.02, 0.05)


def frame(table: str, columns: Mapping[str, Values]) -> pd.DataFrame:
    """Make a table with exactly the columns that its specification names, each of its kind.

    Parameters
    ----------
    table : str
        Name of a table in `RESULT_TABLES` or `DRAWING_TABLES`.
    columns : mapping of str to values
        One sequence a column, all of one length.

    Returns
    -------
    DataFrame
        Numbers as float with NaN, text as object with None, booleans nullable.

    Examples
    --------
    >>> frame("flags", {name: [] for name in RESULT_TABLES["flags"]}).shape
    (0, 7)
    """
    specification = RESULT_TABLES.get(table) or DRAWING_TABLES[table]
    return pd.DataFrame({name: _column(columns[name], kind) for name, kind in specification.items()})


def _column(values: Values, column: Column) -> pd.Series[Any]:
    if column.kind == "number":
        return pd.Series(np.asarray(values, dtype=float), dtype=float)
    if column.kind == "truth":
        return pd.Series(pd.array(list(values), dtype="boolean"))
    return pd.Series([None if value in (None, "") else str(value) for value in values], dtype=object)


def run_table(survey: Survey, media: Media, line: Line, flowing: Flowing, friction: Friction) -> pd.DataFrame:
    """Return the table of runs: a row for each run and reach, static runs too."""
    runs, reaches = len(survey.runs), len(line.diameter)

    def spread(values: Array, fill: float = np.nan) -> Array:
        whole = np.full((runs, reaches), fill)
        whole[flowing.rows] = values
        return whole.ravel()

    names = survey.runs["run"].to_numpy(object)
    reasons = np.full((runs, reaches), None, dtype=object)
    static = survey.runs["flow"].to_numpy(float) == 0
    reasons[static] = "static run"
    reasons[flowing.rows] = _run_reasons(flowing, friction)
    regimes = np.full((runs, reaches), "static", dtype=object)
    regimes[flowing.rows] = friction.regime
    positive = friction.roughness_signed >= 0
    used = np.zeros((runs, reaches))
    in_reach = _in_reach(flowing, line)
    used[flowing.rows] = flowing.used.astype(float) @ in_reach
    straight = np.full((runs, reaches), np.nan)
    for k in range(reaches):
        curve = _curve(flowing, line, k)
        if curve is not None:
            straight[flowing.rows, k] = run_straightness(flowing.fits.lines, curve, flowing.fits.pooled_dof or np.inf)
    return frame(
        "runs",
        {
            "run": np.repeat(names, reaches),
            "reach": np.tile([reach.name for reach in survey.reaches], runs),
            "flow": np.repeat(survey.runs["flow"].to_numpy(float), reaches),
            "velocity": spread(flowing.velocity, 0.0),
            "temperature": np.repeat(survey.runs["temperature"].to_numpy(float), reaches),
            "density": np.repeat(media.density, reaches),
            "kinematic_viscosity": np.repeat(media.kinematic_viscosity, reaches),
            "reynolds": spread(flowing.reynolds, 0.0),
            "regime": regimes.ravel(),
            "slope": spread(friction.slope),
            "slope_u": spread(friction.slope_u),
            "slope_u_random": spread(friction.slope_u_random),
            "slope_dof": spread(np.where(np.isfinite(friction.slope), friction.slope_dof, np.nan)),
            "slope_low": spread(friction.slope_low),
            "slope_high": spread(friction.slope_high),
            "friction_factor": spread(friction.factor),
            "friction_factor_u": spread(friction.factor_u),
            "friction_factor_low": spread(friction.factor_low),
            "friction_factor_high": spread(friction.factor_high),
            "roughness": spread(np.where(positive, friction.roughness_signed, np.nan)),
            "roughness_low": spread(np.where(positive, friction.roughness_low, np.nan)),
            "roughness_high": spread(np.where(positive, friction.roughness_high, np.nan)),
            "roughness_signed": spread(friction.roughness_signed),
            "observations_used": used.ravel(),
            "straightness_p": straight.ravel(),
            "reason": reasons.ravel(),
        },
    )


def _run_reasons(flowing: Flowing, friction: Friction) -> NDArray[np.object_]:
    """Say why a value is missing in a run and reach."""
    reasons = np.full(friction.slope.shape, None, dtype=object)
    kinds = {
        "laminar": "laminar: the friction does not depend on the wall",
        "critical": "critical zone: no law holds between laminar and turbulent flow",
    }
    for kind, text in kinds.items():
        reasons[friction.regime == kind] = text
    below = friction.roughness_signed < 0
    reasons[below] = "f lies below that of a smooth wall: no roughness of zero or more gives it"
    unknown = np.isfinite(friction.slope) & ~np.isfinite(friction.slope_u)
    reasons[unknown] = "one line through as many readings as it has parameters: no uncertainty without a stated one"
    reasons[friction.slope <= 0] = "no loss of head could be measured: S is not above zero"
    missing = ~np.isfinite(friction.slope)
    reasons[missing] = "fewer than two usable taps that determine the slope of this reach"
    empty = ~flowing.used.any(axis=1)
    reasons[missing & empty[:, None]] = "no usable reading in this run"
    return reasons


def _in_reach(flowing: Flowing, line: Line) -> Array:
    """Which observations touch each reach (n, K): of a differential gauge both taps count."""
    span = np.abs(flowing.design[:, 1 : 1 + len(line.diameter)])
    sees = flowing.design[:, 0] != 0
    taps = np.zeros((len(sees), len(line.diameter)))
    if sees.all():
        # Single taps: the reach in which the tap lies.
        lengths = span[:, :, None] > 0
        last = np.where(lengths[:, :, 0].any(axis=1), lengths[:, ::-1, 0].argmax(axis=1), len(line.diameter) - 1)
        taps[np.arange(len(sees)), len(line.diameter) - 1 - last] = 1.0
        return taps
    return (span > 0).astype(float)


def _curve(flowing: Flowing, line: Line, k: int) -> Array | None:
    """Return the quadratic column of a reach, None where fewer than three of its taps are read."""
    position = -flowing.design[:, 1 + k]
    inside = _in_reach(flowing, line)[:, k] > 0
    if inside.sum() < 3 or (flowing.design[:, 0] == 0).any():
        return None
    length = line.bounds[k + 1] - line.bounds[k]
    return np.where(inside, position * (position - length), 0.0)


def reach_table(survey: Survey, line: Line, flowing: Flowing) -> pd.DataFrame:
    """Return the table of reaches, with the test of a curve that all runs share."""
    slopes, values, reasons = flowing.slopes(), [], []
    residuals = np.where(flowing.used, flowing.fits.lines.residuals, np.nan)
    for k in range(len(line.diameter)):
        inside = _in_reach(flowing, line)[:, k] > 0
        curve = _curve(flowing, line, k)
        value = np.nan
        if curve is not None and len(slopes):
            value = shared_curve(residuals[:, inside], slopes[:, k], -flowing.design[inside, 1 + k])
        values.append(value)
        reasons.append(
            None
            if np.isfinite(value)
            else f"a curve is not told from tap errors with fewer than {FEWEST_TAPS} usable taps in the reach"
        )
    return frame(
        "reaches",
        {
            "reach": [reach.name for reach in survey.reaches],
            "wall": [reach.wall for reach in survey.reaches],
            "length": [reach.length for reach in survey.reaches],
            "diameter": line.diameter,
            "shared_curve_p": values,
            "reason": reasons,
        },
    )


def wall_table(walls: tuple[Wall, ...]) -> pd.DataFrame:
    """Return the table of walls."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["walls"]}
    for wall in walls:
        fit, known = wall.fit, np.isfinite(wall.fit.roughness)
        rows["wall"].append(wall.name)
        rows["roughness"].append(fit.roughness)
        rows["roughness_low"].append(fit.low)
        rows["roughness_high"].append(fit.high)
        rows["roughness_upper95"].append(fit.upper95)
        rows["roughness_resolved"].append(fit.low > 0 if known else None)
        plus, plus_upper = _fastest(wall)
        rows["hydraulically_smooth"].append(bool(plus_upper < 5.0) if np.isfinite(plus_upper) else None)
        rows["roughness_reynolds"].append(plus)
        rows["law_trend"].append(fit.trend)
        rows["law_trend_u"].append(fit.trend_u)
        rows["runs_used"].append(int(fit.used.any(axis=1).sum()))
        rows["hazen_williams_c"].append(np.nan)
        rows["manning_n"].append(np.nan)
        rows["reason"].append("; ".join(_wall_reasons(wall)))
    return frame("walls", rows)


def _wall_reasons(wall: Wall) -> list[str]:
    fit, reasons = wall.fit, []
    if not np.isfinite(fit.roughness):
        if not wall.turbulent.any():
            return ["no turbulent run: only turbulent friction depends on the wall"]
        if wall.faint.any():
            return ["in no turbulent run does the slope exceed twice its uncertainty"]
        return ["no turbulent run has a slope above zero"]
    if not np.isfinite(fit.high):
        reasons.append("the readings set no upper bound to the roughness")
    if fit.roughness == 0:
        reasons.append("f lies at or below that of a smooth wall: the roughness is not told from zero")
    elif fit.low == 0:
        reasons.append("the roughness is not told from zero: the upper bound is what the readings say")
    if wall.faint.any():
        reasons.append(f"{int(wall.faint.any(axis=1).sum())} runs left out: S does not exceed twice its uncertainty")
    if not np.isfinite(fit.trend):
        reasons.append("no trend over Re: too few turbulent runs")
    reasons.append(f"Hazen–Williams C and Manning n: {_LATER}")
    return reasons


def _fastest(wall: Wall) -> tuple[float, float]:
    """ε⁺ of the roughness and of its upper bound at the fastest run that entered."""
    fit = wall.fit
    if not np.isfinite(fit.roughness):
        return float("nan"), float("nan")
    reynolds = np.where(fit.used, wall.data.reynolds, -1.0)
    run, k = np.unravel_index(int(reynolds.argmax()), reynolds.shape)
    velocity, viscosity = float(wall.data.velocity[run, k]), float(wall.data.kinematic_viscosity[run])
    slope = float(fit.expected_slope[run, k])
    factor = 2 * wall.data.gravity * float(wall.data.diameter[k]) * slope / velocity**2
    values = [float(roughness_reynolds(size, velocity, factor, viscosity)) for size in (fit.roughness, fit.upper95)]
    return values[0], values[1]


def fitting_table(
    survey: Survey, line: Line, media: Media, flowing: Flowing, friction: Friction, *, level: float
) -> pd.DataFrame:
    """Return the table of fittings: fitted ones over all runs, given ones as they were given."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["fittings"]}
    column = 1 + len(line.diameter)
    fastest = int(flowing.flow.argmax()) if len(flowing.flow) else None
    for m, fitting in enumerate(line.fittings):
        k = line.reference[m]
        if fitting.loss_coefficient is not None:
            given = fitting.loss_coefficient
            value, u, low, high = given.value, np.nan if given.u is None else given.u, np.nan, np.nan
            reason = "given, not fitted"
        else:
            head = flowing.velocity[:, k] ** 2 / (2 * media.gravity)
            estimate = flowing.fits.lines.parameters[:, column] / head
            own = flowing.own[:, column] / head - 2 * estimate * flowing.flow_u
            effect = flowing.effect[:, column] / head[:, None] + estimate[:, None] * _head_effects(flowing, k)
            fit = fit_loss_coefficient(
                estimate,
                flowing.random[:, column, column] / head**2 + own**2,
                effect,
                level=level,
                dof=flowing.fits.pooled_dof or np.inf,
            )
            value, u, low, high = fit.coefficient, fit.u, fit.low, fit.high
            reason = None if np.isfinite(value) else _no_coefficient(flowing, line, m, estimate)
            column += 1
        length = np.nan
        if fastest is not None and np.isfinite(value) and np.isfinite(friction.factor[fastest, k]):
            length = value * line.diameter[k] / friction.factor[fastest, k]
        for name, entry in zip(rows, (fitting.name, value, u, low, high, length, reason), strict=True):
            rows[name].append(entry)
    return frame("fittings", rows)


def _head_effects(flowing: Flowing, k: int) -> Array:
    """Relative change of K by the velocity head it is counted in, for each shared input."""
    return np.array(
        [(0.0 if one.diameter is None else 4.0 * float(one.diameter[k])) - 2.0 * one.flow for one in flowing.inputs]
    )


def _no_coefficient(flowing: Flowing, line: Line, m: int, estimate: Array) -> str:
    if not len(estimate):
        return "no flowing run"
    if np.isfinite(estimate).any():
        return "one line through as many readings as it has parameters: no weight without a stated uncertainty"
    at = line.fittings[m].at
    same = [other.name for i, other in enumerate(line.fittings) if i != m and line.fitted[i]]
    between = f", and {' and '.join(same)} may lie between the same taps" if same else ""
    return f"the usable taps do not separate the loss at {at:g} m from the friction of the reaches beside it{between}"


def tap_table(survey: Survey, corrections: Corrections, base: Array) -> pd.DataFrame:
    """Return the table of taps, with their offsets in the static runs."""
    rows: dict[str, list[Any]] = {name: [] for name in RESULT_TABLES["taps"]}
    noise = np.sqrt(
        np.einsum("ij,j->i", corrections.spread**2, np.nan_to_num(base) ** 2 / np.maximum(corrections.times, 1.0))
    )
    own = {one.tap: i for i, one in enumerate(survey.observations) if one.tap_2 is None}
    for tap in survey.taps:
        i = own.get(tap.name)
        offset = np.nan if i is None else corrections.offset[i]
        known = i is not None and np.isfinite(offset) and base[i] > 0
        why = (
            "read only through differential gauges"
            if i is None
            else "no static run read this tap"
            if not np.isfinite(offset)
            else "offset against the mean of the taps in the static runs"
            if corrections.applied
            else "offset in the static runs, not taken off"
        )
        values = (
            tap.name, offset, noise[i] if known else np.nan, np.nan, np.nan, None,
            f"{why}; edge coefficient and diagnosis: {_LATER}",
        )
        for name, entry in zip(rows, values, strict=True):
            rows[name].append(entry)
    return frame("taps", rows)


def head_table(survey: Survey, line: Line, corrections: Corrections, flowing: Flowing, excluded: Array) -> pd.DataFrame:
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
    undetermined = ~np.isfinite(lines.parameters).all(axis=1)[:, None] & (lines.dof == 0)[:, None] & ~flowing.used
    fitted[rows] = np.where(undetermined, np.nan, fitted[rows])
    score[rows] = flowing.fits.score if flowing.fits.score.size else np.nan
    used[rows] = flowing.used
    static = np.setdiff1d(np.arange(shape[0]), rows)
    for run in static:
        mine = np.isfinite(head[run]) & ~excluded[run].astype(bool)
        sees = corrections.heads.taps.sum(axis=1)
        fitted[run] = sees * (head[run][mine & (sees != 0)].mean() if (mine & (sees != 0)).any() else 0.0)
        used[run] = mine
    part = np.full((len(rows), shape[1]), None, dtype=object)
    why = part.copy()
    place = {tap.name: i for i, tap in enumerate(survey.taps)}
    for i, one in enumerate(survey.observations):
        both = [flowing.reasons[place[name]] for name in (one.tap, one.tap_2) if name is not None]
        part[flowing.disturbed[:, i], i] = "disturbed"
        why[flowing.disturbed[:, i], i] = "; ".join(filter(None, both))
    part[flowing.excluded], why[flowing.excluded] = "excluded", "left out by hand"
    part[flowing.fits.flagged] = "outlier"
    why[flowing.fits.flagged] = "outlying against the other taps of the run"
    flag[rows], reason[rows] = part, why
    flag[static] = np.where(excluded[static].astype(bool), "excluded", None)
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


def grade_line_table(survey: Survey, line: Line, media: Media, flowing: Flowing) -> pd.DataFrame:
    """Return the fitted lines of every flowing run at the places where they bend, and at the taps."""
    at = np.array([fitting.at for fitting in line.fittings])
    chainage, side = stations(line.bounds, at, line.chainage)
    parameters = flowing.fits.lines.parameters
    reaches = len(line.diameter)
    loss_head = flowing.velocity[:, line.reference] ** 2 / (2 * media.gravity)
    losses = np.zeros_like(loss_head)
    column = 1 + reaches
    for m, fitting in enumerate(line.fittings):
        if fitting.loss_coefficient is not None:
            losses[:, m] = fitting.loss_coefficient.value * loss_head[:, m]
        else:
            losses[:, m] = parameters[:, column]
            column += 1
    drawn = grade_lines(
        chainage,
        side,
        start_energy=parameters[:, 0],
        reach_bounds=line.bounds,
        slopes=parameters[:, 1 : 1 + reaches],
        velocity_heads=flowing.velocity_heads,
        loss_chainages=at,
        loss_heads=losses,
    )
    lengths = np.clip(chainage[:, None], line.bounds[:-1], line.bounds[1:]) - line.bounds[:-1]
    past = (chainage[:, None] > at) | ((side[:, None] > 0) & (chainage[:, None] == at))
    rows = np.column_stack([np.ones(len(chainage)), -lengths, -past[:, line.fitted].astype(float)])
    random = np.nan_to_num(flowing.random, nan=0.0) + flowing.own[:, :, None] * flowing.own[:, None, :]
    shared = np.einsum("mp,fpq->fmq", rows, flowing.effect)
    variance = np.einsum("mp,fpr,mr->fm", rows, random, rows) + np.einsum("fmq,fmq->fm", shared, shared)
    known = np.isfinite(flowing.random).all(axis=(1, 2))[:, None]
    axis = np.interp(chainage, line.chainage, line.elevation)
    reach = np.clip(
        np.where(side < 0, np.searchsorted(line.bounds, chainage), np.searchsorted(line.bounds, chainage, "right")) - 1,
        0,
        reaches - 1,
    )
    count = len(flowing.rows)
    names = survey.runs["run"].to_numpy(object)[flowing.rows]
    return frame(
        "grade_lines",
        {
            "run": np.repeat(names, len(chainage)),
            "chainage": np.tile(chainage, count),
            "energy_head": drawn.energy_head.ravel(),
            "energy_head_u": np.where(known, np.sqrt(variance), np.nan).ravel(),
            "piezometric_head": drawn.piezometric_head.ravel(),
            "velocity_head": drawn.velocity_head.ravel(),
            "elevation": np.tile(axis, count),
            "crown": np.tile(axis + line.diameter[reach] / 2, count),
        },
    )


def layout_table(survey: Survey, line: Line) -> pd.DataFrame:
    """Return the places along the line: taps, fittings and the ends of reaches."""
    rows: list[tuple[str, str, float, str]] = [("tap", tap.name, tap.chainage, tap.gauge or "") for tap in survey.taps]
    rows += [("fitting", one.name, one.at, "change of bore" if one.change_of_bore else "") for one in line.fittings]
    rows += [("reach", reach.name, reach.start, reach.wall) for reach in survey.reaches]
    at = np.array([row[2] for row in rows])
    return frame(
        "layout",
        {
            "what": [row[0] for row in rows],
            "name": [row[1] for row in rows],
            "chainage": at,
            "elevation": np.interp(at, line.chainage, line.elevation),
            "note": [row[3] for row in rows],
        },
    )


def exponent_table(survey: Survey, flowing: Flowing, friction: Friction, *, level: float) -> pd.DataFrame:
    """Return the exponent of S against V for each reach, laminar and turbulent runs apart."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["exponents"]}
    for k, reach in enumerate(survey.reaches):
        for kind in ("laminar", "turbulent"):
            mine = (friction.regime[:, k] == kind) & np.isfinite(friction.slope[:, k])
            if not mine.any():
                continue
            slope = friction.slope[mine, k]
            safe = np.where(slope > 0, slope, np.nan)
            spread = np.hypot(friction.slope_u_random[mine, k] / safe, 2 * flowing.flow_u[mine])
            fit = fit_exponent(flowing.velocity[mine, k], np.nan_to_num(safe), spread, level=level)
            reason = None if np.isfinite(fit.exponent) else "fewer than two runs of different flow"
            values = (reach.name, kind, fit.exponent, fit.u, fit.low, fit.high, fit.runs, reason)
            for name, entry in zip(rows, values, strict=True):
                rows[name].append(entry)
    return frame("exponents", rows)


def scatter_table(survey: Survey, flowing: Flowing, floor: Array) -> pd.DataFrame:
    """Return how the readings of each gauge kind scatter."""
    kind, names = observation_kinds(survey)
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["scatter"]}
    for i, (name, part) in enumerate(zip(names, flowing.fits.scatter, strict=True)):
        stated = float(floor[kind == i].min())
        note = (
            "no freedom left in the runs"
            if not np.isfinite(part.pooled)
            else f"found {1000 * part.pooled:.2g} mm over all runs; the stated one holds"
            if stated > part.pooled
            else "found over all runs"
        )
        values = (name, part.base, part.surge, stated or np.nan, part.dof, note)
        for key, entry in zip(rows, values, strict=True):
            rows[key].append(entry)
    return frame("scatter", rows)


def bore_table(walls: tuple[Wall, ...]) -> pd.DataFrame:
    """Return each wall's roughness if its bore were a little different; f goes as the fifth power of the bore."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["bore_sensitivity"]}
    for wall in walls:
        if not np.isfinite(wall.fit.roughness):
            continue
        for change, roughness in zip(_BORE_CHANGES, bore_variants(wall, _BORE_CHANGES), strict=True):
            for name, entry in zip(rows, (wall.name, change, (1 + change) ** 5 - 1, roughness), strict=True):
                rows[name].append(entry)
    return frame("bore_sensitivity", rows)
