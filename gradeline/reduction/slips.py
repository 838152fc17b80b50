"""Slips of the pen behind the flags: what was written, what the others expect, and which slip would explain it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from itertools import chain, islice
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gradeline.fitting.slips import Swap, Written, rank_repairs
from gradeline.fitting.wall import inverse_covariance, law_log_slope
from gradeline.reduction.corrections import Corrections
from gradeline.reduction.flags import AT_REST, LOOK_UP
from gradeline.reduction.runs import Flowing
from gradeline.reduction.slip_words import Explained, Number
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate import frame
from gradeline.reduction.walls import Wall
from gradeline.reduction.written import FileColumn, column_of, flow_column, limb_columns
from gradeline.survey import Survey

__all__ = ["Explained", "slip_table", "slips_of", "with_slips"]

Array = NDArray[np.float64]

#: A neighbour this many standard deviations off may have changed places with a flagged reading.
_ALSO_OFF = 3.0
#: So many flags are looked into: beyond that something else is wrong with the survey.
_MOST, _MOST_RUNS = 200, 50
#: How `gradeline.reduction.flags` calls them.
_RISES = "the head rises downstream"


def slips_of(
    survey: Survey, corrections: Corrections, flowing: Flowing, walls: tuple[Wall, ...]
) -> tuple[Explained, ...]:
    """Look for slips of the pen behind flagged readings, runs off the law and offsets that a static run left.

    Parameters
    ----------
    survey, corrections, flowing, walls
        What was read and what the fits say.

    Returns
    -------
    tuple of Explained
        One for each flag that some slip fits.
    """
    finder = _Finder(survey, corrections, flowing)
    found: list[Explained] = []
    names = tuple(str(name) for name in survey.runs["run"])
    suspect = chain(finder.static(), finder.off_law(walls), finder.readings())
    for flag, run, tap, numbers in islice(suspect, _MOST):
        repairs = rank_repairs([one.written for one in numbers])
        if repairs:
            found.append(Explained(flag, names[run], tap, tuple(numbers), repairs, names))
    return tuple(found)


_Found = tuple[str, int, str | None, list[Number]]


class _Finder:
    """Collects the numbers behind each flag."""

    def __init__(self, survey: Survey, corrections: Corrections, flowing: Flowing) -> None:
        self.survey, self.corrections, self.flowing = survey, corrections, flowing
        self._columns: dict[int, FileColumn] = {}

    def column(self, i: int) -> FileColumn:
        if i not in self._columns:
            self._columns[i] = column_of(self.survey, i)
        return self._columns[i]

    def gain(self, run: int, i: int) -> float:
        """Change of the head for one unit of the reading as written."""
        per_si = float(self.corrections.heads.gain[run, i])
        return per_si * self.column(i).unit.difference_to_si(1.0)

    def readings(self) -> Iterable[_Found]:
        """Flagged readings, each by what the rest of its run expects."""
        fits = self.flowing.fits
        for row, i in np.argwhere(fits.flagged):
            run, score = int(self.flowing.rows[row]), float(fits.score[row, i])
            if not (np.isfinite(score) and score != 0):
                continue
            error = float(fits.error[row, i]) / self.gain(run, i)
            yield (
                "reading",
                run,
                self.survey.observations[i].label,
                self.written(run, int(i), error, abs(error / score), self.swaps(int(row), int(i))),
            )

    def swaps(self, row: int, i: int) -> tuple[Swap, ...]:
        """Neighbouring taps of the same gauge and unit that are off in the same run as well."""
        fits, run = self.flowing.fits, int(self.flowing.rows[row])
        mine, found = self.survey.observations[i], []
        for j in (i - 1, i + 1):
            if not 0 <= j < len(self.survey.observations) or run in self.column(i).repeats:
                continue
            other, score = self.survey.observations[j], float(fits.score[row, j])
            if other.gauge != mine.gauge or other.tap_2 or mine.tap_2 or not abs(score) > _ALSO_OFF:
                continue
            error, value = float(fits.error[row, j]) / self.gain(run, j), float(self.column(j).values[run])
            if self.column(j).unit == self.column(i).unit:
                found.append(Swap(other.label, value, value - error, abs(error / score)))
        return tuple(found)

    def written(self, run: int, i: int, error: float, u: float, swaps: tuple[Swap, ...] = ()) -> list[Number]:
        """List the numbers that an observation was made of, where it is `error` ± `u` too large, in its unit."""
        one = self.survey.observations[i]
        signed = "limbs swapped" if one.tap_2 is not None else "sign"
        limbs = limb_columns(self.survey, i)
        if limbs is not None:
            numbers = [
                number
                for column, side in zip(limbs, (1.0, -1.0), strict=True)
                for number in self.numbers(column, run, side * error, u, "sign")
            ]
            return [*numbers, self.deflection(self.column(i), run, error, u)]
        if one.read_twice:
            return []  # less a reference: nobody wrote that down
        return self.numbers(self.column(i), run, error, u, signed, swaps)

    def deflection(self, column: FileColumn, run: int, error: float, u: float) -> Number:
        """The difference of two limbs, which changes its sign where they are swapped."""
        value = float(column.values[run])
        written = Written(column.name, value, None, value - error, u, signed="limbs swapped", only="sign")
        return Number(column, run, written)

    def numbers(
        self,
        column: FileColumn,
        run: int,
        error: float,
        u: float,
        signed: str,
        swaps: tuple[Swap, ...] = (),
        *,
        is_flow: bool = False,
    ) -> list[Number]:
        """List what was written in a column for a run: one number, or its repeats."""
        above: tuple[float, ...] = ()
        if column.varies(run):
            above = tuple(float(column.values[run - back]) if run >= back else np.nan for back in (1, 2))
        single = column.repeats.get(run)
        if single is None:
            single = column.values[run : run + 1]
        count = len(single)
        found = []
        for place, value in enumerate(single.tolist(), 1):
            # One of several repeats moves their mean by its share only.
            written = Written(
                column.name if count == 1 else f"{column.name}, reading {place} of {count}",
                value,
                column.digits(value),
                value - error * count,
                float(np.hypot(u * count, column.rounding if is_flow else 0.0)),
                column.factors,
                above,
                swaps,
                signed,
                column.step,
            )
            found.append(Number(column, run, written, is_flow))
        return found

    def off_law(self, walls: tuple[Wall, ...]) -> Iterable[_Found]:
        """Runs off the law, and runs in which the head rises: their flow, or readings that nothing else checks."""
        for wall in walls:
            if wall.fit.used.sum() < 2:
                continue
            off = wall.fit.off_law | (wall.turbulent & ~wall.fit.used & (wall.data.slope < 0))
            expected = {
                (int(row), int(k)): _expected(wall, row, k) for row, k in np.argwhere(off)[:_MOST_RUNS]
            }
            flow = flow_column(self.survey) if expected else None
            flows = {}
            if flow is not None:
                flows = {place: _flow_of(wall, *place, about[0]) for place, about in expected.items()}
            for (row, k), about in expected.items():
                run = int(self.flowing.rows[row])
                numbers = self.lone(wall, row, k, *about)
                if (
                    flow is not None
                    and np.isfinite(flows[row, k][0])
                    and not self.survey.runs["repeats"].iloc[run] > 1
                ):
                    numbers = [*self.flow(flow, flows, row, k), *numbers]
                yield "run" if wall.data.slope[row, k] > 0 else "law", run, None, numbers

    def flow(
        self, column: FileColumn, flows: dict[tuple[int, int], tuple[float, float]], row: int, k: int
    ) -> list[Number]:
        """The flow of a run, by what its slope makes it; neighbours off the law as well may have changed places."""

        def about(row: int) -> tuple[float, float, float]:
            ratio, relative = flows[row, k]
            value = float(column.values[self.flowing.rows[row]])
            return value, value * ratio, float(np.hypot(value * ratio * relative, column.rounding))

        value, expected, u = about(row)
        swaps = tuple(
            Swap(str(self.survey.runs["run"].iloc[self.flowing.rows[other]]), *about(other))
            for other in (row - 1, row + 1)
            if (other, k) in flows and np.isfinite(flows[other, k][0])
        )
        run = int(self.flowing.rows[row])
        return self.numbers(column, run, value - expected, u, "", swaps, is_flow=True)

    def lone(self, wall: Wall, row: int, k: int, expected: float, u: float) -> list[Number]:
        """The readings of a run that has no more of them than its line needs."""
        flowing, shared = self.flowing, self.flowing.fits.lines.projectors
        used, pattern = np.flatnonzero(flowing.used[row]), int(shared.index[row])
        if len(used) > shared.rank[pattern]:
            return []
        run, column = int(flowing.rows[row]), 1 + int(wall.reaches[k])
        found: list[Number] = []
        for i in used:
            by_reading = float(shared.gain[pattern, column, i]) * self.gain(run, int(i))
            if abs(by_reading) < 1e-12:
                continue
            error = (float(wall.data.slope[row, k]) - expected) / by_reading
            if self.column(int(i)).usual(run, float(self.column(int(i)).values[run]) - error):
                found += self.written(run, int(i), error, abs(expected * u / by_reading))
        ends = [int(i) for i in used if self.survey.observations[i].tap_2 is None]
        if len(ends) == 2 and self.column(ends[0]).unit == self.column(ends[1]).unit:
            found += self.both_ends(run, ends, (float(wall.data.slope[row, k]), expected, u))
        return found

    def both_ends(self, run: int, ends: list[int], slopes: tuple[float, float, float]) -> list[Number]:
        """The fall between two taps, which changes its sign where they are swapped."""
        first, last = (self.column(i) for i in ends)
        value = float(first.values[run] - last.values[run])
        slope, expected, u = slopes
        if run in first.repeats or run in last.repeats or slope == 0:
            return []
        name, meant = f"{first.name} and {last.name}", value * expected / slope
        written = Written(name, value, None, meant, abs(meant) * u, signed="swapped", only="sign")
        return [Number(replace(first, name=name), run, written)]

    def static(self) -> Iterable[_Found]:
        """Static readings of taps that are off by the same amount in all flowing runs since."""
        if not self.corrections.applied:
            return
        readings = self.survey.readings.to_numpy(float)
        at_rest = np.flatnonzero(self.survey.runs["flow"].to_numpy(float) == 0)
        for one in self.flowing.ailments.taps:
            seen = [
                i for i, other in enumerate(self.survey.observations) if one.label in (other.label, other.tap)
            ]
            if "datum offset" not in one.name or not seen or not self.corrections.known[seen[0]]:
                continue
            i = seen[0]
            runs = [int(run) for run in at_rest if np.isfinite(readings[run, i])]
            base = float(self.flowing.fits.scatter[0].base)
            for run in runs:
                # The correction is the mean over the static runs: one of them moves it by its share.
                gain = self.gain(run, i) / len(runs)
                u = float(np.hypot(np.nan_to_num(one.what.offset_u), np.nan_to_num(base)))
                yield "tap", run, one.label, self.written(run, i, -one.what.offset / gain, u / abs(gain))


def _expected(wall: Wall, row: int, k: int) -> tuple[float, float]:
    """S of a run by the law as the other runs show it, and its relative standard uncertainty.

    The deletion residual of ln S, ε profiled out: with P = C⁻¹ − C⁻¹g g'C⁻¹/(g'C⁻¹g) the run is off by (P r)_i / P_ii
    with variance 1/P_ii.
    """
    data, fit = wall.data, wall.fit
    used = fit.used.copy()
    used[row, k] = True
    law = law_log_slope(data, fit.roughness)
    residual = np.where(fit.used, np.log(np.where(fit.used, data.slope, 1.0)) - law, 0.0)
    solve = inverse_covariance(data, fit, used)
    unit = np.zeros(law.shape)
    unit[row, k] = 1.0
    column, turned = solve(unit), solve(residual)
    here, there = float(column[row, k]), float(turned[row, k])
    if fit.roughness > 0:
        step = 1e-4
        gradient = np.where(used, (law_log_slope(data, fit.roughness * (1 + step)) - law) / step, 0.0)
        of_gradient = solve(gradient)
        total = float((gradient * of_gradient).sum())
        if total > 0:
            share = float(of_gradient[row, k]) / total
            here -= share * float(of_gradient[row, k])
            there -= share * float((gradient * turned).sum())
    if not here > 0:
        return float("nan"), float("nan")
    return float(np.exp(law[row, k] - there / here)), float(here**-0.5)


def _flow_of(wall: Wall, row: int, k: int, expected: float) -> tuple[float, float]:
    """By what factor the flow of a run has to change for its slope to follow the law, and its relative uncertainty."""
    data, slope = wall.data, float(wall.data.slope[row, k])
    if not (slope > 0 and expected > 0):
        return float("nan"), float("nan")
    velocity, factor, by_reynolds = data.velocity.copy(), 0.0, -0.2
    relative = wall.fit.roughness / data.diameter
    for _ in range(30):
        step = float(np.log(slope / expected)) / (2.0 + by_reynolds)
        factor += step
        velocity[row] = data.velocity[row] * np.exp(factor)
        moved = replace(data, velocity=velocity)
        # At that flow the scatter of the readings counts for what it is against the measured slope.
        expected, u = _expected(replace(wall, data=moved), row, k)
        if not (expected > 0 and abs(step) > 1e-9):
            break
        by_reynolds = float(data.law.sensitivities(moved.reynolds, relative)[1][row, k])
    return float(np.exp(factor)), u / (2.0 + by_reynolds)


def slip_table(explained: tuple[Explained, ...]) -> pd.DataFrame:
    """Return the table ``slips``: for each flag the repairs that fit, best first."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["slips"]}
    for one in explained:
        for repair in one.repairs:
            number = one.number_of(repair)
            entry = {
                "flag": one.flag,
                "run": one.run,
                "tap": None if number.is_flow else repair.name,
                "kind": repair.kind,
                "written": number.written.value,
                "repaired": repair.value,
                "expected": number.written.expected,
                "expected_u": number.written.u,
                "score": repair.score,
                "chance": repair.chance,
                "unit": number.column.unit.text,
                "named": repair.named,
                "words": one.words(repair),
            }
            for name, value in entry.items():
                rows[name].append(value)
    return frame("slips", rows)


def _in_place(kind: str, words: str, text: str, *, several: bool) -> str:
    """The words on a slip in place of what else a flag suggests."""
    if kind == "run":
        reach, fate = text.partition(" S is ")[0], text.rpartition("; ")[2]
        return f"{words}; {f'{reach} ' if several else ''}{fate}"
    if kind == "tap":
        leave_out = text.partition(AT_REST)[2].rpartition("; ")[2]
        return (
            f"{text.partition('. ')[0]}. The static reading: {words}{f'; {leave_out}' if leave_out else ''}"
        )
    return f"{words}; {text.removesuffix(LOOK_UP)}"


def with_slips(flags: pd.DataFrame, explained: tuple[Explained, ...]) -> pd.DataFrame:
    """Return the flags with the slip that would explain them in place of other hints; what became of them stays.

    Runs in which the head rises have one flag together: there it stands behind, with its run.
    """
    words = {
        (one.flag, one.run if one.flag in ("reading", "run") else None, one.tap): text
        for one in reversed(explained)
        if one.flag != "law" and (text := one.words()) is not None
    }
    rising = "".join(
        f"; run {one.run}: {text}"
        for one in explained
        if one.flag == "law" and (text := one.words()) is not None
    )
    if not words and not rising:
        return flags
    suggestion = [
        _in_place(kind, words[key], text, several=(flags["run"] == run).sum() > 1)
        if (key := (kind, run, tap)) in words
        else f"{text}{rising if _RISES in text else ''}"
        for kind, run, tap, text in zip(
            flags["kind"], flags["run"], flags["tap"], flags["suggestion"], strict=True
        )
    ]
    return flags.assign(suggestion=pd.Series(suggestion, dtype=object, index=flags.index))
