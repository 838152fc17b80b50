"""Rows of runs and of readings, and the repeats among them: averaged, and told where they do not agree."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from gradeline.loader.columns import Columns
from gradeline.loader.grouped import by_name
from gradeline.survey import Stated

__all__ = ["Rows", "RunTable", "averaged", "check_repeated_flows"]

_FLOWS_APART = 0.02
_FEWEST_OTHERS = 2
_TOLD = 8


@dataclass(frozen=True)
class RunTable:
    """Runs and readings as `gradeline.survey.Survey` holds them, with the units they came in.

    `doubtful` tells the repeats that lie much further apart than the rest; `listed` says that the readings were
    listed one a row, `present` which columns of readings there are, and `referenced` that the change of a reference
    gauge was taken out of them.
    """

    runs: pd.DataFrame
    readings: pd.DataFrame
    repeats: pd.DataFrame
    spreads: pd.DataFrame
    units: Mapping[str, str]
    doubtful: tuple[str, ...] = ()
    listed: bool = False
    present: frozenset[str] = frozenset()
    referenced: bool = False
    flow_readings: pd.DataFrame = field(default_factory=pd.DataFrame)
    written: pd.DataFrame = field(default_factory=pd.DataFrame)


@dataclass
class Rows:
    """Rows of runs and single readings, before they are averaged: one reading is (run, tap, value, given).

    `told` says how a reading stands in its file, by its place among the readings; `placed` its text, line and heading.
    """

    labels: list[str]
    lines: list[int]
    flow: np.ndarray
    temperature: np.ndarray
    columns: Columns
    run_codes: dict[str, int] = field(default_factory=dict)
    reading_runs: np.ndarray = field(default_factory=lambda: np.empty(0, int))
    reading_taps: np.ndarray = field(default_factory=lambda: np.empty(0, int))
    values: np.ndarray = field(default_factory=lambda: np.empty(0))
    given: np.ndarray = field(default_factory=lambda: np.empty(0, bool))
    present: frozenset[str] = frozenset()
    referenced: bool = False
    told: Callable[[int], str] = str
    placed: Callable[[int], tuple[str, int | None, str | None]] = lambda reading: (str(reading), None, None)


def check_repeated_flows(rows: Rows, flow_u: Stated | None) -> None:
    """Repeats of a run are one flow: apart by no more than 2 % or three stated uncertainties."""
    if len(rows.run_codes) == len(rows.labels) or "flow" not in rows.columns:
        return
    for label, places in by_name(rows.labels).items():
        flows = rows.flow[places]
        if len(places) < 2 or not label or np.isnan(flows).any():
            continue
        mean = float(flows.mean())
        allowed = max(_FLOWS_APART * mean, 3 * flow_u.of(mean) if flow_u is not None else 0.0)
        if np.ptp(flows) > allowed:
            raw = rows.columns.raw("flow")
            listed = ", ".join(f"{raw[row]} (row {rows.lines[row]})" for row in places[:6])
            rows.columns.problem(
                places[-1],
                "flow",
                f"the repeats of run {label!r} have the flows {listed}, further apart than 2 % or three times "
                "the stated uncertainty; give runs at different flows their own labels",
            )


def averaged(
    rows: Rows,
    names: Sequence[str],
    gauges: Sequence[str | None],
    units: Mapping[str, str],
    *,
    listed: bool,
) -> RunTable:
    """Means, counts and spreads over the repeats of each run; `gauges` has the gauge of each tap in `names`."""
    run_of_row = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    n_runs, n_taps = len(rows.run_codes), len(names)
    flow, flow_count, flow_spread = _statistics(run_of_row, rows.flow, n_runs)
    temperature, _, _ = _statistics(run_of_row, rows.temperature, n_runs)
    runs = pd.DataFrame(
        {
            "run": pd.Series(list(rows.run_codes), dtype=object),
            "flow": flow + 0.0,
            "flow_u": flow_spread / np.sqrt(np.maximum(flow_count, 1)),
            "temperature": temperature,
            "repeats": np.bincount(run_of_row, minlength=n_runs),
        }
    )
    place = rows.reading_runs * n_taps + rows.reading_taps
    tables = _statistics(place, rows.values, n_runs * n_taps)
    index = pd.Index(list(rows.run_codes), dtype=object, name="run")
    readings, repeats, spreads = (
        pd.DataFrame(table.reshape(n_runs, n_taps), index=index, columns=list(names)) for table in tables
    )
    doubtful = _doubtful(rows, place, tables[2], names, gauges)
    return RunTable(
        runs,
        readings,
        repeats,
        spreads,
        units,
        doubtful,
        listed,
        present=rows.present,
        referenced=rows.referenced,
        written=_written(rows, place, tables[1], names),
    )


def _written(rows: Rows, place: np.ndarray, count: np.ndarray, names: Sequence[str]) -> pd.DataFrame:
    """The repeats one by one: a slip of the pen sits in one of them, not in their mean."""
    mine = np.flatnonzero(np.isfinite(rows.values) & (count[place] > 1))
    if not len(mine):
        return pd.DataFrame()
    labels = np.array(list(rows.run_codes), dtype=object)
    return pd.DataFrame(
        {
            "run": labels[rows.reading_runs[mine]],
            "column": np.array(list(names), dtype=object)[rows.reading_taps[mine]],
            "reading": rows.values[mine],
        }
    )


def _statistics(
    groups: np.ndarray, values: np.ndarray, size: int
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Mean, count and standard deviation (n − 1; NaN below two) of the values of each group, NaN left out."""
    taken = ~np.isnan(values)
    groups, values = groups[taken], values[taken]
    count = np.bincount(groups, minlength=size)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.bincount(groups, weights=values, minlength=size) / count
        squares = np.bincount(groups, weights=(values - mean[groups]) ** 2, minlength=size)
        spread = np.where(count > 1, np.sqrt(squares / (count - 1)), np.nan)
    return mean, count, spread


def _doubtful(
    rows: Rows, place: np.ndarray, spread: np.ndarray, names: Sequence[str], gauges: Sequence[str | None]
) -> tuple[str, ...]:
    """Tell the repeats of one run and tap that lie much further apart than those of its gauge do elsewhere."""
    if not np.isfinite(spread).any():
        return ()
    labels = list(rows.run_codes)
    of_tap = np.array([list(dict.fromkeys(gauges)).index(gauge) for gauge in gauges], dtype=int)
    repeated = np.flatnonzero(np.isfinite(rows.values) & np.isfinite(spread[place]))
    found: list[str] = []
    for gauge in range(of_tap.max() + 1):
        members = repeated[of_tap[rows.reading_taps[repeated]] == gauge]
        if not len(members):
            continue
        # by group, and by value within it: the ends of each group are its lowest and highest reading
        members = members[np.lexsort((rows.values[members], place[members]))]
        values = rows.values[members]
        starts = np.flatnonzero(np.diff(place[members], prepend=-1))
        ends = np.append(starts[1:], len(members)) - 1
        for group, ratio in _far_apart(values, starts, ends, spread[place[members[starts]]]):
            low, high = sorted((int(members[starts[group]]), int(members[ends[group]])))
            run, tap = labels[rows.reading_runs[low]], names[rows.reading_taps[low]]
            found.append(
                f"The repeats of run {run!r} at tap {tap!r} lie far apart: {rows.told(low)} and {rows.told(high)}, "
                f"{ratio:.0f} times the usual spread of repeats. Look for a slip of the pen; as it stands, their "
                "mean is used."
            )
    more = len(found) - _TOLD
    return (
        *found[:_TOLD],
        *([f"The repeats of {more} more readings lie as far apart."] if more > 0 else []),
    )


def _far_apart(
    values: np.ndarray, starts: np.ndarray, ends: np.ndarray, spread: np.ndarray
) -> list[tuple[int, float]]:
    """Groups whose range exceeds 8 (1 + 4/k) times the spread pooled over the k groups that spread less.

    Half of all groups, and two at least, are taken as sound. The part with k keeps false alarms rare where there
    are few repeats: simulated with normal readings, 1 in 80 surveys of three or four pairs, 1 in 500 of eight.
    Readings have steps, so the pooled spread is no less than that of the smallest step.
    """
    count = len(starts)
    freedom = ends - starts
    order = np.argsort(spread, kind="stable")
    steps = np.diff(np.sort(values))
    steps = steps[steps > 1e-9 * np.abs(values).max(initial=0.0)]
    floor = float(steps.min()) / np.sqrt(12) if len(steps) else np.inf
    pooled = np.sqrt(np.cumsum((spread**2 * freedom)[order]) / np.cumsum(freedom[order]))
    others = np.arange(1, count)
    ratio = (values[ends] - values[starts])[order][1:] / np.maximum(pooled[:-1], floor)
    far = (ratio > 8 * (1 + 4 / others)) & (others >= max(_FEWEST_OTHERS, count / 2))
    if not far.any():
        return []
    # all that spread more than the first one are as far apart, measured by what is sound
    first = int(np.argmax(far))
    usual = max(float(pooled[first]), floor)
    return sorted(
        (int(group), float(values[ends[group]] - values[starts[group]]) / usual)
        for group in order[first + 1 :]
    )
