"""A logger's record into runs: windows found, their means with the uncertainty of a correlated record, faults told."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.errors import Problem, SurveyError
from gradeline.fitting.record import WindowMean, faults_of, stretches, window_means, without_spikes
from gradeline.flow_methods import FLOW_METHODS
from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.quantities import Measured
from gradeline.survey import Record, Survey, Target, Window, still

__all__ = ["with_record_read"]

Array = NDArray[np.float64]

_TOLD = 8
_FLOW, _TEMPERATURE = Target("run", "flow"), Target("run", "temperature")
#: What a fault is called in a sentence.
_WORDS = {
    "drift": "drift within a window",
    "step": "a step within a window",
    "stuck": "a reading that stood still",
}


def with_record_read(survey: Survey) -> Survey:
    """Return a survey with the readings that its logger's record gives; the same one where there is no record.

    Parameters
    ----------
    survey : Survey
        As read; one that was worked out already is returned as it is.

    Returns
    -------
    Survey
        A run for each window, given or found: its readings, flow and temperature are means over the window without
        spikes. The uncertainty of the mean flow, widened by Student's t, is that of
        the run's flow; the mean square over the runs of those of a tap
        (or gauge) is added to the square of what is stated for one reading of it. `Survey.record` has the windows with
        what was found of each (`statistics`) and the faults.

    Raises
    ------
    SurveyError
        Where no window is steady, or a window has no sample of what its run needs.
    """
    record = survey.record
    if record is None or record.read:
        return survey
    clean = without_spikes(record.count, record.mean, record.squares, record.low, record.high)
    spikes = clean.taken.sum(axis=0)
    whole = replace(record, count=clean.count, mean=clean.mean, squares=clean.squares)
    refused: list[str] = []
    if not record.windows:
        whole, refused = _with_windows(survey, whole)
    means = [
        window_means(whole.count[mine], whole.mean[mine], whole.squares[mine])
        if (mine := whole.window == k).any()
        else ()
        for k in range(len(whole.windows))
    ]
    statistics = _statistics(whole, means)
    faults = _faults(record, whole)
    done = replace(
        record,
        window=whole.window,
        windows=whole.windows,
        statistics=statistics,
        faults=faults,
        refused=tuple(refused),
        read=True,
    )
    filled = _filled(survey, done, statistics)
    return replace(
        filled,
        assumptions=(*filled.assumptions, *_told(done, statistics, spikes)),
        cautions=(*filled.cautions, *_cautions(done, statistics, faults)),
    )


def _with_windows(survey: Survey, record: Record) -> tuple[Record, list[str]]:
    """The record with the steady windows found in it, and why other stretches are none."""
    flows = [k for k, target in enumerate(record.targets) if _is_flow(survey, target)]
    heads = [k for k, target in enumerate(record.targets) if target.kind == "reading"]
    columns = [*flows, *heads]
    found = stretches(
        record.time_start,
        record.time_end,
        record.count[:, columns],
        record.mean[:, columns],
        record.squares[:, columns],
        np.array([k < len(flows) for k in range(len(columns))]),
        drift=record.drift,
        least_length=record.least_length,
        settle=record.settle,
    )
    tell = record.clock.told
    refused = [f"{tell(one.start)} to {tell(one.end)}: {one.reason}" for one in found if one.reason]
    steady = [one for one in found if not one.reason]
    if not steady:
        why = f" ({'; '.join(refused[:_TOLD])})" if refused else ""
        raise SurveyError(
            [
                Problem(
                    record.file,
                    None,
                    None,
                    f"no window of {record.least_length:g} s is steady within {100 * record.drift:.3g} % of the flow{why}; give "
                    "the windows in runs.csv (run, start, end), or change least_length, drift or settle of [logger]",
                )
            ]
        )
    window = np.full(len(record.time_start), -1, dtype=np.intp)
    for k, one in enumerate(steady):
        window[one.first_block : one.last_block + 1] = k
    windows = tuple(Window(str(k + 1), one.start, one.end, given=False) for k, one in enumerate(steady))
    return replace(record, window=window, windows=windows), refused


def _is_flow(survey: Survey, target: Target) -> bool:
    """Whether a column is the flow, or what it is read from in the first place."""
    if target.kind == "flow reading":
        primary = FLOW_METHODS[survey.flow.method].primary
        return target.name == primary or target.name.startswith(f"{primary} ")
    return target == _FLOW


def _statistics(record: Record, means: Sequence[Sequence[WindowMean]]) -> pd.DataFrame:
    """A row for each window and column."""
    rows = [
        {
            "window": k,
            "run": window.run,
            "column": column,
            "mean": one.mean,
            "u": one.u,
            "widened_u": one.normal_u,
            "scatter": _scatter(record, k, column),
            "samples": one.samples,
            "effective": one.effective,
            "batch_u": one.batch_u,
            "dof": one.dof,
            "reason": one.reason or None,
        }
        for k, window in enumerate(record.windows)
        for column, one in enumerate(means[k])
    ]
    return pd.DataFrame(rows)


def _scatter(record: Record, window: int, column: int) -> float:
    """Standard deviation of the samples of a column in a window."""
    mine = record.window == window
    count, mean = record.count[mine, column], np.nan_to_num(record.mean[mine, column])
    total = count.sum()
    if not total:
        return float("nan")
    middle = (count * mean).sum() / total
    return float(np.sqrt((record.squares[mine, column].sum() + (count * (mean - middle) ** 2).sum()) / total))


def _faults(raw: Record, record: Record) -> pd.DataFrame:
    """What is wrong with the record: column, kind, start, end (s) and size (SI)."""
    found = faults_of(
        raw.time_start,
        raw.time_end,
        raw.count,
        raw.mean,
        raw.low,
        raw.high,
        raw.squares,
        raw.interval,
        record.window,
        slow=np.array([target == _TEMPERATURE for target in raw.targets], dtype=bool),
        zero_is_rest=np.array(
            [target.kind == "flow reading" or target == _FLOW for target in raw.targets], dtype=bool
        ),
    )
    return pd.DataFrame(
        [
            {
                "column": None if one.column < 0 else raw.names[one.column],
                "kind": one.kind,
                "start": one.start,
                "end": one.end,
                "size": one.size,
            }
            for one in found
        ],
        columns=["column", "kind", "start", "end", "size"],
    )


def _filled(survey: Survey, record: Record, statistics: pd.DataFrame) -> Survey:
    """The survey with the means in their places."""
    labels = [window.run for window in record.windows]
    shape = (len(labels), len(record.targets))
    mean, u, widened, scatter = (np.full(shape, np.nan) for _ in range(4))
    place = (statistics["window"].to_numpy(int), statistics["column"].to_numpy(int))
    for table, name in ((mean, "mean"), (u, "u"), (widened, "widened_u"), (scatter, "scatter")):
        table[place] = statistics[name].to_numpy(float)
    for k, target in enumerate(record.targets):
        if _is_flow(survey, target):
            nothing = still(mean[:, k], scatter[:, k])
            mean[nothing, k], widened[nothing, k] = 0.0, np.nan
    if record.windows[0].given:
        order = [labels.index(name) for name in survey.runs["run"]]
        runs = survey.runs.reset_index(drop=True)
    else:
        order = list(range(len(labels)))
        runs = survey.runs.iloc[[0] * len(labels)].reset_index(drop=True)
        runs["run"] = pd.Series(labels, dtype=object)
    mean, u, widened = mean[order], u[order], widened[order]
    columns = {target: k for k, target in enumerate(record.targets)}
    assigned = {target.name: mean[:, k] for target, k in columns.items() if target.kind == "run"}
    if _FLOW in columns:
        assigned["flow_u"] = widened[:, columns[_FLOW]]
    runs = runs.assign(**assigned, repeats=1)
    index = pd.Index(runs["run"].to_numpy(object), dtype=object, name="run")
    readings = pd.DataFrame(
        {
            one.label: mean[:, columns[Target("reading", one.label)]]
            if Target("reading", one.label) in columns
            else np.full(len(runs), np.nan)
            for one in survey.observations
        },
        index=index,
        columns=list(survey.readings.columns),
    )
    levels = {target.name: mean[:, k] for target, k in columns.items() if target.kind == "level"}
    meters = {target.name: mean[:, k] for target, k in columns.items() if target.kind == "flow reading"}
    _check(survey, record, runs, readings)
    filled = replace(
        survey,
        runs=runs,
        readings=readings,
        repeats=readings.notna().astype(int),
        spreads=readings * np.nan,
        written=survey.written.iloc[:0],
        levels=survey.levels if not levels else pd.DataFrame(levels, index=index),
        flow_readings=survey.flow_readings
        if not meters
        else pd.DataFrame(
            {"run": runs["run"], "file": record.file, "line": range(1, len(runs) + 1), **meters}
        ),
        record=record,
    )
    return _with_uncertainties(filled, columns, u)


def _check(survey: Survey, record: Record, runs: pd.DataFrame, readings: pd.DataFrame) -> None:
    """Refuse runs without what every run needs."""
    told = {window.run: window for window in record.windows}
    problems = []
    needed = ["flow"] if survey.flow.method == "direct" else []
    needed += ["temperature"] if survey.fluid.follows_temperature else []
    for row, name in enumerate(runs["run"]):
        window = told[name]
        span = f"from {record.clock.told(window.start)} to {record.clock.told(window.end)}"
        missing = [each for each in needed if not np.isfinite(runs[each].iloc[row])]
        if not readings.iloc[row].notna().any():
            missing.append("any tap or gauge")
        problems += [
            Problem(
                record.file,
                None,
                each,
                f"there is no sample of it in run {name!r}, {span}; give other windows in runs.csv",
            )
            for each in missing
        ]
        if np.isfinite(runs["flow"].iloc[row]) and runs["flow"].iloc[row] < 0:
            problems.append(
                Problem(
                    record.file,
                    None,
                    "flow",
                    f"its mean in run {name!r}, {span}, is negative; chainage increases downstream, so turn the line round or "
                    "leave the window out",
                )
            )
    if problems:
        raise SurveyError(problems)


def _with_uncertainties(survey: Survey, columns: dict[Target, int], u: Array) -> Survey:
    """What the record says of a tap's (or gauge's) mean beside what is stated of one reading."""
    flows = survey.runs["flow"].to_numpy(float) != 0
    size = _mean_square(u)
    taps = {tap.name: tap for tap in survey.taps}
    gauges = {gauge.name: gauge for gauge in survey.gauges}
    general = {"length": survey.stated.reading, "pressure": survey.stated.reading_pressure}
    for one in survey.observations:
        k = columns.get(Target("reading", one.label))
        if k is None or not np.isfinite(size[k]):
            continue
        gauge = gauges[one.gauge]
        usual = gauge.reading_u if gauge.reading_u is not None else general[GAUGE_KINDS[gauge.kind].reading]
        if one.tap_2 is not None or gauge.legs:
            gauges[one.gauge] = replace(gauge, reading_u=float(np.hypot(usual or 0.0, size[k])))
        else:
            tap = taps[one.tap]
            own = usual if tap.reading_u is None else tap.reading_u
            taps[one.tap] = replace(tap, reading_u=float(np.hypot(own or 0.0, size[k])))
    setup = survey.flow
    settings = dict(setup.settings)
    for target, k in columns.items():
        method = FLOW_METHODS[setup.method]
        key = f"u_{target.name.replace(' ', '_')}"
        if target.kind == "flow reading" and key in method.keys and key not in setup.relative:
            own_u = _mean_square(u[flows][:, [k]])[0] if flows.any() else np.nan
            before = settings.get(key)
            if np.isfinite(own_u):
                stated = before.value if isinstance(before, Measured) else 0.0
                settings[key] = Measured(float(np.hypot(stated, own_u)))
    return replace(
        survey,
        taps=tuple(taps.values()),
        gauges=tuple(gauges.values()),
        flow=replace(setup, settings=settings),
    )


def _mean_square(u: Array) -> Array:
    """Root of the mean square over the runs of each column, NaN where no run has any."""
    known = np.isfinite(u)
    total = np.where(known, u, 0.0) ** 2
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.sqrt(total.sum(axis=0) / np.where(known.any(axis=0), known.sum(axis=0), np.nan)))


def _told(record: Record, statistics: pd.DataFrame, spikes: Array) -> list[str]:
    """How the runs were made of the record."""
    tell = record.clock.told
    windows = record.windows
    lengths = [window.end - window.start for window in windows]
    shown = "; ".join(
        f"{one.run}: {tell(one.start)} to {tell(one.end)} ({one.end - one.start:.4g} s)"
        for one in windows[:_TOLD]
    )
    more = f"; and {len(windows) - _TOLD} more" if len(windows) > _TOLD else ""
    ends = [f"{end(lengths):.4g} s" for end in (min, max)]
    spread = ends[0] if ends[0] == ends[1] else " to ".join(ends)
    how = "given" if windows[0].given else "found steady"
    sentences = [
        f"{len(windows)} window{'s' if len(windows) > 1 else ''} of {record.file} {how}, {spread} "
        f"long: {shown}{more}."
    ]
    effective = statistics["effective"].to_numpy(float)
    if np.isfinite(effective).any():
        samples = statistics["samples"].to_numpy(float)
        part = np.nanmedian(effective / np.maximum(samples, 1.0))
        sentences.append(
            "The uncertainty of a window's mean comes from the correlation of its samples: they count for "
            f"{100 * part:.2g} % of their number, in the median. Of the mean flow it is that of the run's flow; of a tap its mean "
            "square over the runs is added to the square of what is stated of one reading."
        )
    if spikes.any():
        named = ", ".join(
            f"{name} ({int(number)})" for name, number in zip(record.names, spikes, strict=True) if number
        )
        sentences.append(f"Single samples far off are taken out of the means: {named}.")
    if record.refused:
        sentences.append(
            f"{len(record.refused)} other stretch{'es' if len(record.refused) > 1 else ''} of {record.file} "
            f"{'are' if len(record.refused) > 1 else 'is'} not steady: {'; '.join(record.refused[:_TOLD])}."
        )
    return sentences


def _cautions(record: Record, statistics: pd.DataFrame, faults: pd.DataFrame) -> list[str]:
    """What a reader should know of the record."""
    found = []
    tell = record.clock.told
    telling = faults[~faults["kind"].isin(["gap", "spike"])]
    for kind, rows in telling.groupby("kind", sort=True):
        ends = zip(*(rows[name].tolist()[:_TOLD] for name in ("column", "start", "end")), strict=True)
        listed = [f"{column} {tell(start)} to {tell(end)}" for column, start, end in ends]
        more = f" and {len(rows) - _TOLD} more" if len(rows) > _TOLD else ""
        found.append(f"{record.file}, {_WORDS.get(str(kind), str(kind))}: {', '.join(listed)}{more}.")
    used = [k for k, target in enumerate(record.targets) if target != _TEMPERATURE]
    unknown = statistics[
        statistics["u"].isna()
        & (statistics["mean"] != 0)
        & (statistics["samples"] > 0)
        & statistics["column"].isin(used)
    ]
    for reason, rows in unknown.groupby("reason", sort=True):
        pairs = zip(rows["column"].to_numpy(int)[:_TOLD].tolist(), rows["run"].tolist(), strict=False)
        named = [f"{record.names[column]} in run {run!r}" for column, run in pairs]
        more = f" and {len(rows) - _TOLD} more" if len(rows) > _TOLD else ""
        found.append(
            f"The uncertainty of the mean is not known, and contributes nothing, of {', '.join(named)}{more}: {reason}."
        )
    return found
