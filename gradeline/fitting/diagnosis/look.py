"""One look at the readings of all runs: what explains them best, given what was found already."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.diagnosis.candidates import Candidate, Places, State, alike, alone, beyond
from gradeline.fitting.diagnosis.evidence import Evidence, freed, gather
from gradeline.fitting.diagnosis.findings import Ailment, Break
from gradeline.fitting.diagnosis.steady_scatter import SteadyScatter, steady_scatter
from gradeline.fitting.diagnosis.suspects import Suspects
from gradeline.fitting.model import Model
from gradeline.fitting.slope import project

__all__ = ["Look"]

Array = NDArray[np.float64]

#: Probability, over all suspicions of a kind, that a sound line gets one.
_TAP_ALARM, _LINE_ALARM, _READING_ALARM = 0.008, 0.004, 0.01
#: A second pattern, or one size a run in place of a pattern, must be worth this much more.
_FURTHER = 0.001
#: Gaps whose χ² lies within this of the best hold the place with 95 %.
_PLACE = 3.84
#: Evidence must stand, at this share of what it takes, when the run that gives most of it is left out.
_WITHOUT_ONE = 0.5


@dataclass(frozen=True)
class Look:
    """One look at the readings: what does not change while findings are taken up.

    Parameters
    ----------
    y : (F, n) array
        Observations, m; 0 where not used.
    model : Model
        Of the observations.
    suspects : Suspects
        Subjects, gaps and curves.
    stated : (F, n, q) array
        Stated errors that the runs share, m.
    columns : (F, n, c) array
        Patterns of all suspicions, m per size.
    places : Places
        Where each stands.
    line : bool
        Whether breaks of the line are looked for.
    """

    y: Array
    model: Model
    suspects: Suspects
    stated: Array
    columns: Array
    places: Places
    line: bool

    def free(self, state: State, without: Candidate | None = None) -> Array:
        """Directions that each run is free along, by what was found."""
        found = [
            self.directions(one) for one in state.found if one.kind.startswith("free") and one is not without
        ]
        return np.hstack(found) if found else np.zeros((self.y.shape[1], 0))

    def directions(self, one: Candidate) -> Array:
        """Return the directions (n, d) along which a free suspicion lets each run go."""
        if one.kind == "free tap":
            return self.suspects.sight[:, [one.place]]
        if one.kind == "free curve":
            return -self.suspects.curves[one.place].fall[:, None]
        gap = self.suspects.gaps[one.place]
        if one.kind == "free step":
            return -gap.step[:, None]
        return np.column_stack([-gap.step, -gap.kink])

    def accepted(self, state: State, without: Candidate | None = None) -> list[int]:
        """Return the columns of what was taken up."""
        return [c for one in state.found if one is not without for c in one.columns]

    def scatter(self, state: State) -> SteadyScatter | None:
        """Judge the scatter with what was taken up given free rein."""
        slope = (
            self.suspects.gap_slope.max(axis=1)
            if self.suspects.gaps
            else self.suspects.slope.max(axis=1, initial=0.0)
        )
        return steady_scatter(self.y, state.used, self.model, slope, self.free(state))

    def evidence(self, state: State, scatter: SteadyScatter, without: Candidate | None = None) -> Evidence:
        """Work out the evidence beside what was taken up, one of it left out if asked."""
        design = np.hstack([self.model.design, self.free(state, without)])
        shared = project(design, scatter.variance, state.used, self.model.common)
        weight = shared.weight[shared.index] / shared.scale[:, None, None]
        accepted = self.columns[:, :, self.accepted(state, without)]
        return gather(np.where(state.used, self.y, 0.0), weight, self.columns, accepted, self.stated)

    def candidates(self, state: State, scatter: SteadyScatter, evidence: Evidence) -> Iterator[Candidate]:
        """All suspicions with what they would explain, and what that takes."""
        places, suspects, runs = self.places, self.suspects, len(self.y)
        gains = evidence.gains()
        taken = {(one.kind.removeprefix("free "), one.place) for one in state.found} | state.barred
        tap = _TAP_ALARM / max(int((places.offset >= 0).sum() + 2 * (places.edge >= 0).sum()), 1)
        further = beyond(_FURTHER, 1, scatter.dof)
        one = beyond(tap, 1, scatter.dof)
        rooms = [g for g, gap in enumerate(suspects.gaps) if gap.few >= 2]
        for s in range(suspects.sight.shape[1]):
            if ("tap", s) in taken:
                continue
            columns: dict[str, tuple[np.intp, ...]] = {"offset": (places.offset[s],)}
            if suspects.grows[s]:
                columns |= {
                    "edge": (places.edge[s],),
                    "chainage": (places.chainage[s],),
                    "offset and edge": (places.offset[s], places.edge[s]),
                    "offset and chainage": (places.offset[s], places.chainage[s]),
                }
            for pattern, both in columns.items():
                pick = tuple(int(c) for c in both)
                gain = float(gains[pick[0]]) if len(pick) == 1 else evidence.sizes(pick)[2]
                yield Candidate("tap", s, pick, gain, one + further * (len(pick) - 1), pattern)
            gain, unknowns = freed(evidence, suspects.sight[:, [s]])
            if unknowns > 2:
                price = one + further + beyond(_FURTHER, unknowns - 2, scatter.dof)
                yield Candidate("free tap", s, (), gain, price, "unsteady")
        if not (self.line and rooms):
            return
        for c, curve in enumerate(suspects.curves):
            if ("curve", c) not in taken:
                pick = (int(places.curve[c]),)
                price = beyond(_LINE_ALARM / (2 * len(rooms)), 1, scatter.dof)
                yield Candidate("curve", c, pick, float(gains[pick[0]]), price)
                gain, unknowns = freed(evidence, -curve.fall[:, None])
                if unknowns > 1:
                    more = beyond(_FURTHER, unknowns - 1, scatter.dof)
                    yield Candidate("free curve", c, (), gain, price + more)
        price = beyond(_LINE_ALARM / (2 * len(rooms)), 1, scatter.dof)
        for g in rooms:
            columns_step = (int(places.step[g]),)
            if ("step", g) not in taken:
                yield Candidate("step", g, columns_step, float(gains[columns_step[0]]), price)
                gain, unknowns = freed(evidence, -suspects.gaps[g].step[:, None])
                if unknowns > 1:
                    more = beyond(_FURTHER, unknowns - 1, scatter.dof)
                    yield Candidate("free step", g, (), gain, price + more)
            if ("kink", g) not in taken and suspects.gaps[g].few >= 3:
                pick = (int(places.step[g]), int(places.kink[g]))
                yield Candidate("kink", g, pick, evidence.sizes(pick)[2], price + further)
                gain, unknowns = freed(
                    evidence, np.column_stack([-suspects.gaps[g].step, -suspects.gaps[g].kink])
                )
                if unknowns > runs:
                    more = beyond(_FURTHER, unknowns - 2, scatter.dof)
                    yield Candidate("free kink", g, (), gain, price + further + more)

    def best(self, state: State, scatter: SteadyScatter, evidence: Evidence) -> Candidate | None:
        """The suspicion that exceeds what it takes by most; None where none does."""
        best: Candidate | None = None
        for one in self.candidates(state, scatter, evidence):
            if one.gain > one.price and (best is None or one.gain - one.price > best.gain - best.price):
                best = one
        for one in self.readings(state, scatter, evidence):
            if one.gain > one.price and (best is None or one.gain - one.price > best.gain - best.price):
                best = one
        return best

    def readings(self, state: State, scatter: SteadyScatter, evidence: Evidence) -> Iterator[Candidate]:
        """The single reading, and the two of one run, that would explain most by being wrong.

        Two neighbours that changed places in one run look like a break of the line there, or like nothing one by one.
        """
        gains = evidence.reading_gains()
        place = int(gains.argmax())
        alarm = _READING_ALARM / max(int(state.used.sum()), 1)
        yield Candidate("readings", place, (), float(gains.flat[place]), beyond(alarm, 1, scatter.dof))
        # A run that two readings spoil stands out by what is left of it.
        left = np.einsum("ri,rij,rj->r", evidence.rest, evidence.weight, evidence.rest)
        run, n = int(left.argmax()), self.y.shape[1]
        pairs = evidence.pair_gains(run)
        first, second = divmod(int(pairs.argmax()), n)
        alarm *= 2.0 / max(n - 1, 1)
        price, further = beyond(alarm, 2, scatter.dof), beyond(_FURTHER, 1, scatter.dof)
        gain, pattern = float(pairs[first, second]), ""
        if (np.triu(pairs, 1) > gain - further).sum() == 1:
            pattern = "no other two"
        else:
            # Few readings: other pairs would do as well, but two neighbours that changed places are off by the same, one up
            # and one down.
            both = np.diagonal(pairs, 1)
            swapped = both - evidence.swap_gains(run) < beyond(0.01, 1, scatter.dof)
            swapped &= (both > max(gain - further, price)) & (self.model.kind[:-1] == self.model.kind[1:])
            if swapped.sum() == 1:
                first = int(swapped.argmax())
                second, pattern, gain = first + 1, "changed places", float(both[first])
        yield Candidate("readings", run * n + first, (), gain, price, pattern, run * n + second)

    def lone_run(self, evidence: Evidence, scatter: SteadyScatter, one: Candidate) -> int | None:
        """The run without which too little of the evidence would remain; None where there is no such run."""
        if one.columns:
            size, _, _ = evidence.sizes(one.columns)
            column = self.columns[:, :, list(one.columns)] @ size
        elif one.kind == "free tap":
            error, deviation = evidence.errors_along(self.suspects.sight[:, one.place])
            each = np.nan_to_num(error / deviation) ** 2
            far = each > beyond(0.002, 1, scatter.dof)
            return int(each.argmax()) if far.sum() < max(3, int(0.2 * len(each))) else None
        else:
            turned = np.einsum("rij,jd->rid", evidence.weight, self.directions(one))
            core = np.linalg.pinv(
                np.einsum("jd,rje->rde", self.directions(one), turned), rcond=1e-9, hermitian=True
            )
            along = np.einsum("rid,ri->rd", turned, evidence.rest)
            each = np.einsum("rd,rde,re->r", along, core, along)
            unknowns = self.directions(one).shape[1]
            # Each run has sizes of its own, which chance fills: the others have to show more than that.
            far = each > beyond(0.002, unknowns, scatter.dof)
            return int(each.argmax()) if far.sum() < max(3, int(0.2 * len(each))) else None
        turned = np.einsum("rij,rj->ri", evidence.weight, column)
        own = np.einsum("ri,ri->r", column, turned)
        along = np.einsum("ri,ri->r", evidence.rest, turned)
        without = (along.sum() - along) ** 2 / np.maximum(own.sum() - own, 1e-300)
        without = np.where(along.sum() - along > 0, without, 0.0)
        run = int(without.argmin())
        return run if without[run] < _WITHOUT_ONE * one.price else None

    def settle(self, state: State, scatter: SteadyScatter) -> None:
        """Give each finding the form that suits it best beside the others, of which the first ones knew nothing."""
        for _ in range(len(state.found) + 1):
            changed = False
            for n, one in enumerate(state.found):
                others = replace(state, found=[other for other in state.found if other is not one])
                evidence = self.evidence(others, scatter)
                best = max(
                    (two for two in self.candidates(others, scatter, evidence) if alike(two, one)),
                    key=lambda two: two.gain - two.price,
                    default=one,
                )
                same = (best.kind, best.place, best.pattern) == (one.kind, one.place, one.pattern)
                if not same and best.gain > best.price:
                    state.found[n], changed = best, True
            if not changed:
                return

    def prune(self, state: State, scatter: SteadyScatter) -> None:
        """Test each finding once more beside the others, the weakest first, and let go what no longer stands."""
        while state.found:
            again = []
            for one in state.found:
                evidence = self.evidence(state, scatter, without=one)
                again.append(self.gain_of(evidence, one) - one.price)
            weakest = int(np.argmin(again))
            if again[weakest] > 0:
                return
            state.found.pop(weakest)

    def gain_of(self, evidence: Evidence, one: Candidate) -> float:
        """Return what a suspicion is worth in χ² beside the evidence."""
        return evidence.sizes(one.columns)[2] if one.columns else freed(evidence, self.directions(one))[0]

    def describe(self, state: State, scatter: SteadyScatter) -> tuple[tuple[Ailment, ...], tuple[Break, ...]]:
        """Put everything found in figures, each beside the others."""
        taps, breaks = [], []
        for one in state.found:
            evidence = self.evidence(state, scatter, without=one)
            if one.kind.removeprefix("free ") == "tap":
                taps.append(self.ailment(evidence, one))
            else:
                breaks.append(self.break_of(evidence, one))
        return tuple(taps), tuple(breaks)

    def each(self, state: State, scatter: SteadyScatter) -> tuple[Array, Array, Array, Array]:
        """Offset and edge coefficient of every subject beside what was found of the others."""
        subjects = self.suspects.sight.shape[1]
        table = np.array(alone(self.evidence(state, scatter), self.places, subjects))
        for one in state.found:
            if one.kind.removeprefix("free ") == "tap":
                evidence = self.evidence(state, scatter, without=one)
                table[:, one.place] = np.array(alone(evidence, self.places, subjects))[:, one.place]
        return table[0], table[1], table[2], table[3]

    def ailment(self, evidence: Evidence, one: Candidate) -> Ailment:
        """Put the error of a tap in figures."""
        s, places = one.place, self.places
        error, error_u = evidence.errors_along(self.suspects.sight[:, s])
        offset = offset_u = edge = edge_u = chainage = chainage_u = preference = float("nan")
        has_offset = "offset" in one.pattern or one.pattern == "unsteady"
        base: tuple[int, ...] = (int(places.offset[s]),) if has_offset else ()
        if has_offset:
            size, covariance, _ = evidence.sizes(tuple(one.columns) or base)
            offset, offset_u = float(size[0]), float(covariance[0, 0] ** 0.5)
        if self.suspects.grows[s] and one.pattern != "offset":
            size, covariance, by_edge = evidence.sizes((*base, int(places.edge[s])))
            edge, edge_u = float(size[-1]), float(covariance[-1, -1] ** 0.5)
            size, covariance, by_chainage = evidence.sizes((*base, int(places.chainage[s])))
            chainage, chainage_u = float(size[-1]), float(covariance[-1, -1] ** 0.5)
            preference = by_edge - by_chainage
        return Ailment(
            s,
            one.pattern,
            offset,
            offset_u,
            edge,
            edge_u,
            chainage,
            chainage_u,
            preference,
            self.gain_of(evidence, one),
            error,
            error_u,
        )

    def break_of(self, evidence: Evidence, one: Candidate) -> Break:
        """Put a break of the line in figures, with the gaps that hold it."""
        gaps, places = self.suspects.gaps, self.places
        kind = one.kind.removeprefix("free ")
        gain = self.gain_of(evidence, one)
        if kind == "curve":
            curve, nan = self.suspects.curves[one.place], float("nan")
            size, covariance, _ = evidence.sizes((int(places.curve[one.place]),))
            middle = (curve.low + curve.high) / 2.0
            return Break(
                kind,
                one.place,
                middle,
                curve.low,
                curve.high,
                nan,
                nan,
                2.0 * float(size[0]),
                2.0 * float(covariance[0, 0] ** 0.5),
                gain,
                self.rival(evidence),
            )
        held = []
        for g, gap in enumerate(gaps):
            other = replace(
                one,
                place=g,
                columns=()
                if not one.columns
                else (int(places.step[g]),)
                if kind == "step"
                else (int(places.step[g]), int(places.kink[g])),
            )
            if gap.few >= (2 if kind == "step" else 3) and self.gain_of(evidence, other) >= gain - _PLACE:
                held.append(gap)
        pick = (
            (int(places.step[one.place]),)
            if kind == "step"
            else (int(places.step[one.place]), int(places.kink[one.place]))
        )
        size, covariance, _ = evidence.sizes(pick)
        change = float(size[1]) if kind == "kink" else float("nan")
        change_u = float(covariance[1, 1] ** 0.5) if kind == "kink" else float("nan")
        return Break(
            kind,
            one.place,
            gaps[one.place].middle,
            min(gap.low for gap in held),
            max(gap.high for gap in held),
            float(size[0]),
            float(covariance[0, 0] ** 0.5),
            change,
            change_u,
            gain,
            self.rival(evidence),
        )

    def rival(self, evidence: Evidence) -> float:
        """What the best error of a single tap is worth in χ²."""
        gains, best = evidence.gains(), 0.0
        for s in range(self.suspects.sight.shape[1]):
            if self.places.edge[s] >= 0:
                best = max(best, float(gains[self.places.edge[s]]), float(gains[self.places.chainage[s]]))
            best = max(
                best, float(gains[self.places.offset[s]]), freed(evidence, self.suspects.sight[:, [s]])[0]
            )
        return best
