"""What keeps the parts of a survey from fitting together."""

from __future__ import annotations

import itertools
from collections import Counter
from typing import TYPE_CHECKING

import numpy as np

from gradeline.gauge_kinds import GAUGE_KINDS

if TYPE_CHECKING:
    from gradeline.survey.whole import Survey

__all__ = ["faults"]


def faults(survey: Survey) -> list[str]:
    """Return what keeps the parts of a survey from fitting together.

    Parameters
    ----------
    survey : Survey
        Whose fields are set.

    Returns
    -------
    list of str
        A sentence for each fault; empty where the survey is valid.
    """
    found: list[str] = []
    found += [
        f"two {plural} are called {name!r}; give each its own name"
        for plural, names in (
            ("reaches", [reach.name for reach in survey.reaches]),
            ("fittings", [fitting.name for fitting in survey.fittings]),
            ("taps", [tap.name for tap in survey.taps]),
            ("gauges", [gauge.name for gauge in survey.gauges]),
            ("runs", list(survey.runs["run"])),
        )
        for name, count in sorted(Counter(names).items())
        if count > 1
    ]
    if not survey.reaches:
        return [*found, "there is no reach; give at least one"]
    for reach in survey.reaches:
        if not reach.end > reach.start:
            found.append(
                f"reach {reach.name!r} ends at {reach.end} m, not after its start at {reach.start} m"
            )
        if not reach.diameter.value > 0:
            found.append(f"reach {reach.name!r} has a bore of {reach.diameter.value} m; it must be above 0")
    for before, after in itertools.pairwise(survey.reaches):
        if not np.isclose(before.end, after.start, rtol=0, atol=1e-9):
            found.append(
                f"reach {after.name!r} starts at {after.start} m but {before.name!r} ends at {before.end} m; "
                "reaches follow each other without a gap"
            )
    first, last = survey.reaches[0].start, survey.reaches[-1].end
    for what, name, at in [("tap", tap.name, tap.chainage) for tap in survey.taps] + [
        ("fitting", fitting.name, fitting.at) for fitting in survey.fittings
    ]:
        if not first <= at <= last:
            found.append(f"{what} {name!r} at {at} m lies outside every reach ({first} m to {last} m)")
    found += _offtake_faults(survey)
    chainages = [tap.chainage for tap in survey.taps]
    if any(after <= before for before, after in itertools.pairwise(chainages)):
        found.append("the chainages of the taps do not increase")
    known = {tap.name for tap in survey.taps}
    kinds = {gauge.name: gauge.kind for gauge in survey.gauges}
    found += [
        f"gauge {name!r} is of unknown kind {kind!r}; known are {', '.join(GAUGE_KINDS)}"
        for name, kind in kinds.items()
        if kind not in GAUGE_KINDS
    ]
    for observation in survey.observations:
        if observation.gauge not in kinds:
            found.append(f"readings name the gauge {observation.gauge!r}, which is not described")
        if not {observation.tap, observation.tap_2} <= known | {None}:
            found.append(f"readings name a tap that is not described: {observation.label!r}")
    shape = (len(survey.runs), len(survey.observations))
    for table in ("readings", "repeats", "spreads"):
        if getattr(survey, table).shape != shape:
            found.append(
                f"{table} has the shape {getattr(survey, table).shape}, not {shape} (runs, observations)"
            )
    if (survey.runs["flow"].to_numpy(float) < 0).any():
        found.append("a flow is negative; chainage increases downstream")
    return found


def _offtake_faults(survey: Survey) -> list[str]:
    """Off-takes that do not lie between two reaches, that take nothing known, or that take it all."""
    boundaries = [reach.start for reach in survey.reaches[1:]]
    found = [
        f"off-take {one.name!r} at {one.at} m lies at no boundary between two reaches; split the reach there"
        for one in survey.offtakes
        if not any(abs(one.at - at) <= 1e-6 for at in boundaries)
    ]
    missing = [one.name for one in survey.offtakes if one.column not in survey.runs.columns]
    found += [f"the runs do not tell what off-take {name!r} takes" for name in missing]
    if survey.offtakes and not missing:
        flow = survey.runs["flow"].to_numpy(float)
        taken = survey.runs[[one.column for one in survey.offtakes]].to_numpy(float).sum(axis=1)
        if ((flow > 0) & ~(taken < flow)).any():
            found.append("the off-takes of a run take as much as flows, or more")
    return found
