"""The search: the best explanation is taken up, what it explains is taken out, until nothing beats chance."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.diagnosis.candidates import State, alone, columns_of, of_runs
from gradeline.fitting.diagnosis.findings import Diagnosis
from gradeline.fitting.diagnosis.look import Look
from gradeline.fitting.diagnosis.suspects import Suspects
from gradeline.fitting.model import Model

__all__ = ["diagnose", "picked_runs"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: At most this many runs are looked at, evenly spread, and fewer where the columns would hold more numbers than this.
_MOST_RUNS, _MOST_NUMBERS = 200, 8e6
_FEWEST_RUNS = 3
#: Never more than this part of the subjects, and this many breaks, are at fault: then it is the model that is.
_MOST_SUBJECTS, _MOST_BREAKS = 1 / 3, 2


def diagnose(
    observations: Array,
    used: Mask,
    model: Model,
    suspects: Suspects,
    stated: Array,
    *,
    line: bool = True,
) -> Diagnosis:
    """Look for what ails a line.

    Parameters
    ----------
    observations : (F, n) array
        Energy heads or differences of them, m; NaN where not read.
    used : (F, n) bool array
        Which enter.
    model : Model
        What is known of them; its persistent errors are taken from `stated` instead.
    suspects : Suspects
        Subjects and gaps.
    stated : (F, n, q) array
        Change for one standard uncertainty of each stated error that all runs share, m.
    line : bool
        Whether steps and kinks are looked for beside errors of taps.

    Returns
    -------
    Diagnosis
        In order of their evidence.

    Notes
    -----
    Gains in χ² are exact for the model at hand (`evidence`). A candidate is taken up where its gain exceeds the point of
    χ² (of F, where the scatter is judged from few readings) at a probability shared out over all candidates of its kind
    (C. E. Bonferroni); the one that exceeds it by most goes first. Patterns with more unknowns pay for each. One run
    alone proves nothing: without the run that speaks loudest half of what it takes must remain, else its readings are set
    aside; where each run has a size of its own, a fifth of the runs must show one. Single readings, and any two of a run,
    are rivals of all that. When nothing more is found, each finding is tested once more beside the others.

    Examples
    --------
    >>> import gradeline.fitting.diagnosis.suspects as places
    >>> rng = np.random.default_rng(4)
    >>> x, slope = np.arange(8.0), np.geomspace(0.01, 0.5, 10)
    >>> heads = 9.0 - slope[:, None] * x + 0.001 * rng.standard_normal((10, 8))
    >>> heads[:, 3] += 0.006
    >>> used = np.isfinite(heads)
    >>> model = Model(np.column_stack([np.ones(8), -x]), slope, np.zeros(8, int), np.zeros(8))
    >>> gaps = places.gaps_between(x, np.eye(8), np.zeros(8, dtype=int), used[0])
    >>> each = np.repeat(slope[:, None], 8, axis=1)
    >>> suspects = places.Suspects(
    ...     np.eye(8), np.ones(8, bool), each, each, gaps, each[:, :7], each[:, :7], (), np.zeros((10, 0))
    ... )
    >>> found = diagnose(heads, used, model, suspects, np.zeros((10, 8, 0)))
    >>> [(one.subject, one.pattern, round(one.offset, 3)) for one in found.taps]
    [(3, 'offset', 0.006)]
    """
    every, n = observations.shape
    pick = picked_runs(every, n, suspects)
    y = np.where(used, np.nan_to_num(observations), 0.0)[pick]
    subjects = suspects.sight.shape[1]
    none = np.full(subjects, np.nan)
    nothing = Diagnosis(False, None, (), (), np.zeros(used.shape, bool), none, none, none, none, None)
    if every < _FEWEST_RUNS:
        return replace(nothing, reason=f"fewer than {_FEWEST_RUNS} flowing runs: nothing tells what persists")
    if not subjects or not used.any():
        return replace(nothing, reason="no reading that tells of a single tap")
    part = replace(model.of_runs(pick), persistent=None)
    some = of_runs(suspects, pick)
    columns, places = columns_of(some)
    look = Look(y, part, some, stated[pick], columns, places, line)
    state = State(used[pick].copy(), [], set())
    scatter = look.scatter(state)
    if scatter is None or scatter.dof < 6:
        return replace(
            nothing, reason="too few readings tell the scatter that a tap's error would be judged by"
        )
    # What every tap would show if all the others were sound.
    evidence = look.evidence(state, scatter)
    offset, offset_u, edge, edge_u = alone(evidence, places, subjects)
    room = max(3, int(0.1 * state.used.sum()))
    most = max(1, int(_MOST_SUBJECTS * subjects))
    for _ in range(room + 2 * (most + _MOST_BREAKS)):
        best = look.best(state, scatter, evidence)
        if best is None:
            break
        if best.kind == "readings":
            wrong = [best.place] if best.second is None else [best.place, best.second]
            state.used.flat[wrong] = False
            state.together |= set(wrong) if best.pattern else set()
        elif (run := look.lone_run(evidence, scatter, best)) is not None:
            if "tap" in best.kind:
                state.used[run] &= ~(some.sight[:, best.place] != 0)
            else:
                state.barred.add((best.kind.removeprefix("free "), best.place))
        else:
            state.found.append(best)
            at_taps = sum("tap" in one.kind for one in state.found)
            if at_taps > most or len(state.found) - at_taps > _MOST_BREAKS:
                return replace(
                    nothing,
                    done=True,
                    reason="more taps than a third would have to be wrong, or the line broken more than twice: no few causes "
                    "explain these readings",
                    offset=offset,
                    offset_u=offset_u,
                    edge=edge,
                    edge_u=edge_u,
                    scatter=scatter,
                )
        scatter = look.scatter(state) or scatter
        evidence = look.evidence(state, scatter)
    look.settle(state, scatter)
    look.prune(state, scatter)
    scatter = look.scatter(state) or scatter
    taps, breaks = look.describe(state, scatter)
    offset, offset_u, edge, edge_u = look.each(state, scatter)
    picked = np.zeros(state.used.shape, dtype=bool)
    picked.flat[list(state.together)] = True
    together = np.zeros(used.shape, dtype=bool)
    together[pick] = picked
    return Diagnosis(True, None, taps, breaks, together, offset, offset_u, edge, edge_u, scatter)


def picked_runs(runs: int, n: int, suspects: Suspects) -> NDArray[np.intp]:
    """Return the runs that are looked at: of long records a part tells enough, and the columns stay in bounds.

    Parameters
    ----------
    runs, n : int
        How many runs and observations there are, dimensionless counts.
    suspects : Suspects
        What is looked at.

    Returns
    -------
    (k,) int array
        Indices, evenly spread, at most 200.

    Examples
    --------
    >>> from gradeline.fitting.diagnosis.suspects import Suspects
    >>> none = np.zeros((0, 0))
    >>> suspects = Suspects(np.eye(4), np.ones(4, bool), none, none, (), none, none, (), none)
    >>> len(picked_runs(5000, 4, suspects))
    200
    """
    columns = 3 * suspects.sight.shape[1] + 2 * len(suspects.gaps) + len(suspects.curves)
    most = int(np.clip(_MOST_NUMBERS / max(n * columns, 1), 12, _MOST_RUNS))
    return np.unique(np.linspace(0, max(runs - 1, 0), min(runs, most)).round().astype(np.intp))
