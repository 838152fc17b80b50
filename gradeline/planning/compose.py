"""From a survey without readings to its plan: the one place where expected readings, changes and advice meet."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.errors import ReductionError, UsageError
from gradeline.fitting.one_thread import one_thread
from gradeline.planning import tabulate
from gradeline.planning.accuracy import Accuracy, accuracy_of
from gradeline.planning.assumed import (
    Assumed,
    losses_assumed,
    roughness_assumed,
    with_reading_uncertainty,
)
from gradeline.planning.expected import Expected, expected_survey
from gradeline.planning.flows import spreads, with_flows
from gradeline.planning.improvements import Change, changes_of, evaluated
from gradeline.planning.layout import recommended_layout, with_places
from gradeline.planning.sentences import plan_assumptions, plan_cautions
from gradeline.planning.tables import Plan
from gradeline.reduction import reduce
from gradeline.reduction.line import line_of
from gradeline.survey import Survey

__all__ = ["plan"]

Array = NDArray[np.float64]
Expect = Callable[[Survey], Expected]

#: Flows tried between the ends of the range for the greatest that can be read.
_TRIED = 80
_UNSTATED_READING = "The uncertainty of a reading of gauge"
#: The slowest recommended run is this much faster than the onset of turbulence.
_CLEAR = 1.05


@dataclass(frozen=True)
class _Flows:
    """What is recommended of the flows."""

    recommended: Array | None
    spread: str | None
    reason: str | None
    greatest: float
    changes: tuple[Change, ...] = ()


@one_thread
def plan(
    survey: Survey,
    *,
    roughness: float | Mapping[str, float] | None = None,
    loss: Mapping[str, float] | None = None,
    reading: float | None = None,
    reading_pressure: float | None = None,
    head: float | None = None,
    spacing: float | None = None,
    fixed: Collection[str] = (),
    level: float = 0.95,
) -> Plan:
    """Tell what a survey is expected to bring home, and what would make it tell more, before anybody has read a tap.

    Parameters
    ----------
    survey : Survey
        Line, taps, gauges, flows and stated uncertainties, as `gradeline.read_plan` gives them; readings are not looked at.
    roughness : float, mapping of str to float, or None
        Assumed ε of all walls or by wall, m, at least 0; None: what the survey says of the wall, else a published surface.
    loss : mapping of str to float or None
        Assumed K of fittings whose K is to be fitted, dimensionless; None: of their kind, else 1.
    reading, reading_pressure : float or None
        Standard uncertainty of one reading of scales (m) and pressure gauges (Pa) that state none.
    head : float or None
        Piezometric head at the last tap in all runs, m above datum; None: the middle of what can be read.
    spacing : float or None
        Least distance between two taps in the recommended layout, m, above 0; None: ten bores.
    fixed : collection of str
        Taps that cannot be moved.
    level : float
        Coverage of the intervals, between 0 and 1.

    Returns
    -------
    Plan
        A frozen set of tables, SI units.

    Raises
    ------
    ReductionError
        Where nothing flows or nothing is read.
    UsageError
        For an argument that does not fit the survey.

    Notes
    -----
    The expected readings are those of the law at the assumed roughness, without noise, through the gauges' own functions
    inverted. They go through `gradeline.reduce`, so that expected uncertainties are those that it states of the real survey.

    Examples
    --------
    >>> import gradeline
    >>> told = gradeline.plan(gradeline.read_plan("data_demo/copper_bench"), roughness=1.5e-6)
    >>> told.walls["roughness"].tolist()
    [1.5e-06]
    """
    if not 0.0 < level < 1.0:
        raise UsageError(f"the level of the intervals is between 0 and 1, such as 0.95; found {level}")
    if spacing is not None and not spacing > 0:
        raise UsageError(f"spacing: {spacing} m is not above 0; give the least distance between two taps")
    _check(survey, fixed)
    survey, read = with_reading_uncertainty(survey, reading, reading_pressure)
    walls, wall_cautions = roughness_assumed(survey, roughness)
    losses = losses_assumed(line_of(survey), loss or {})

    def expect(changed: Survey) -> Expected:
        return expected_survey(changed, _values(walls), _values(losses), head=head)

    expected = expect(survey)
    now = accuracy_of(expected, level=level)
    reduction = reduce(expected.survey, level=level, monte_carlo=False)
    names = list(walls)
    layout = recommended_layout(survey, expected, spacing=spacing, fixed=fixed)
    flows = _flows(survey, expected, expect, names, now, level)
    after, later = _with(survey, flows, expect, level)
    changes = [*flows.changes]
    if layout.reason is None and np.abs(layout.recommended - layout.places).max() > 0:
        moved = with_places(survey, layout.recommended)
        then = expect(moved)
        alone = accuracy_of(then, level=level)
        changes.append(Change("taps at D-optimal chainages", alone, bool(then.fits.all())))
        # Taps further apart may ask for other flows: each layout is judged with those that suit it.
        its_flows = _flows(moved, then, expect, names, alone, level)
        its_after, its_later = _with(moved, its_flows, expect, level)
        why = _no_better(its_after, its_later, after, later, names)
        if why is None:
            flows = replace(its_flows, greatest=flows.greatest)
            after, later = its_after, its_later
        else:
            layout = replace(layout, recommended=layout.places, reason=why)
    changes += [evaluated(name, changed, expect, level=level) for name, changed in changes_of(survey)]
    return Plan(
        title=survey.title,
        source=survey.source,
        level=level,
        assumptions=plan_assumptions(survey, expected, walls, losses, read, layout, head=head),
        cautions=tuple(
            dict.fromkeys(
                (
                    *plan_cautions(survey, expected, reduction, layout, greatest=flows.greatest),
                    *wall_cautions,
                    # Where one is assumed, the loader's word that none is stated would mislead.
                    *(text for text in reduction.cautions if not text.startswith(_UNSTATED_READING)),
                )
            )
        ),
        spacing=layout.spacing,
        layout_efficiency=layout.efficiency,
        layout_reason=layout.reason,
        flows_reason=flows.reason,
        flows_spread=flows.spread,
        greatest_flow=flows.greatest,
        runs=tabulate.run_table(expected, reduction, _values(walls)),
        levels=tabulate.level_table(expected),
        columns=tabulate.column_table(expected, reduction),
        thresholds=tabulate.threshold_table(expected, _values(walls)),
        walls=tabulate.wall_table(reduction, walls),
        fittings=tabulate.fitting_table(reduction, losses),
        budget=reduction.budget.copy(),
        improvements=tabulate.improvement_table(
            sorted(changes, key=lambda one: _order(one.accuracy, names)),
            now,
            names,
            fits=bool(expected.fits.all()),
        ),
        layout=tabulate.layout_table(survey, expected.line, layout),
        flows=tabulate.flow_table(expected, flows.recommended),
        comparison=tabulate.comparison_table(expected, now, after, later, names),
        grade_lines=tabulate.grade_line_table(reduction),
        boards=tabulate.board_table(expected),
    )


def _values(assumed: Mapping[str, Assumed]) -> dict[str, float]:
    return {name: one.value for name, one in assumed.items()}


def _check(survey: Survey, fixed: Collection[str]) -> None:
    flowing = (survey.runs["flow"] != 0).to_numpy(bool)
    if not flowing.any():
        raise ReductionError(
            'nothing flows in any run; give --flows "0.2 to 1.5 L/s", or rows in readings.csv'
        )
    if not survey.observations:
        raise ReductionError("no gauge reads any tap; name the gauge of each tap in taps.csv")
    names = [tap.name for tap in survey.taps]
    for name in fixed:
        if name not in names:
            raise UsageError(f"fixed: there is no tap {name!r}; taps are {', '.join(names)}")


def _with(survey: Survey, flows: _Flows, expect: Expect, level: float) -> tuple[Expected, Accuracy]:
    """The plan with the recommended flows, and what it tells."""
    best = survey if flows.recommended is None else with_flows(survey, flows.recommended)
    after = expect(best)
    return after, accuracy_of(after, level=level)


def _no_better(
    after: Expected, later: Accuracy, before: Expected, now: Accuracy, walls: list[str]
) -> str | None:
    """Say why another layout is not recommended, each with the flows that suit it; None where it tells more."""
    if before.fits.all() and not after.fits.all():
        return "with the taps at D-optimal chainages not every run could be read; the present ones stay"
    if _order(later, walls) >= _order(now, walls):
        return "all errors counted, D-optimal chainages tell no more than the present ones, which stay"
    return None


def _score(accuracy: Accuracy, walls: Collection[str]) -> float:
    """How little a plan tells: the mean logarithm of the widths of ε; of u(f) where no run tells a wall."""
    widths = np.array([accuracy.width(wall) for wall in walls])
    if np.isfinite(widths).any():
        return float(np.log(np.clip(widths, 1e-12, 1.0)).mean())
    known = accuracy.factor_u[np.isfinite(accuracy.factor_u) & (accuracy.factor_u > 0)]
    return float(np.log(known).mean()) if known.size else 0.0


def _order(accuracy: Accuracy, walls: Collection[str]) -> tuple[float, float]:
    """What changes are sorted by: ε, and where they are alike u(f)."""
    known = accuracy.factor_u[np.isfinite(accuracy.factor_u)]
    return round(_score(accuracy, walls), 4), float(known.min()) if known.size else float("inf")


def _flows(
    survey: Survey, expected: Expected, expect: Expect, walls: list[str], now: Accuracy, level: float
) -> _Flows:
    """Spread the runs over the range of the plan so that ε is told best, as far as columns can be read."""
    flow = expected.survey.runs["flow"].to_numpy(float)
    if len(survey.flow_readings) or survey.offtakes:
        what = (
            f"they are worked out from the readings of the {survey.flow.method}"
            if len(survey.flow_readings)
            else "off-takes take a part of them"
        )
        greatest = np.where(expected.fits, tabulate.flows_of(expected), 0.0).max()
        return _Flows(
            None,
            None,
            f"the flows stay as they are: {what}",
            float(greatest) if greatest > 0 else float("nan"),
        )
    running = flow[flow > 0]
    low, high = float(running.min()), float(running.max())
    greatest = _greatest(survey, expect, low, high)
    if not np.isfinite(greatest):
        return _Flows(None, None, "no flow in the range of the plan can be read on its scales", greatest)
    area, viscosity = expected.line.area, expected.media.kinematic_viscosity
    turbulent = float((4000.0 * viscosity.max() / expected.line.diameter * area).max()) * _CLEAR
    if turbulent >= greatest:
        return _Flows(
            None,
            None,
            "no flow in the range of the plan is turbulent in every reach and can be read",
            greatest,
        )
    low = max(low, turbulent)
    if not greatest > low:
        return _Flows(None, None, "all runs have one flow; give a range", greatest)
    options = {f"flows: {name}": flows for name, flows in spreads(low, greatest, len(running)).items()}
    changes = [
        evaluated(name, with_flows(survey, each), expect, level=level) for name, each in options.items()
    ]
    sound = [one for one in changes if one.fits]
    best = min(sound, key=lambda one: _score(one.accuracy, walls), default=None)
    if best is None or (_score(best.accuracy, walls) >= _score(now, walls) and expected.fits.all()):
        return _Flows(None, None, "no other spread over the range tells more", greatest, tuple(changes))
    return _Flows(options[best.name], best.name.removeprefix("flows: "), None, greatest, tuple(changes))


def _greatest(survey: Survey, expect: Expect, low: float, high: float) -> float:
    """The greatest flow of a range at which all columns can be read, m³/s; NaN where there is none."""
    tried = np.linspace(low, high, _TRIED) if high > low else np.array([low])
    first = survey.runs[(survey.runs["flow"] > 0).to_numpy(bool)].iloc[[0]]
    runs = pd.concat([first] * len(tried), ignore_index=True)
    runs["run"] = [str(n) for n in range(len(tried))]
    runs["flow"] = tried
    blank = pd.DataFrame(
        np.ones((len(tried), len(survey.observations))),
        index=pd.Index(runs["run"].tolist(), dtype=object, name="run"),
        columns=survey.readings.columns,
    )
    levels = None
    if survey.levels is not None:
        levels = pd.DataFrame(0.0, index=blank.index, columns=survey.levels.columns)
    many = replace(survey, runs=runs, readings=blank, repeats=blank.astype(int), spreads=blank, levels=levels)
    fits = expect(many).fits
    return float(tried[fits].max()) if fits.any() else float("nan")
