"""What the runs together say of taps and line, and what the fits make of it."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from gradeline.fitting.diagnosis import NOT_TOLD_APART, Ailment, Break, Diagnosis, diagnose, picked_runs
from gradeline.fitting.diagnosis.following import Following, following
from gradeline.fitting.diagnosis.suspects import Suspects, bulge, curves_of, gaps_between
from gradeline.fitting.model import Model
from gradeline.reduction.heads import Input
from gradeline.reduction.line import Line
from gradeline.survey import Survey

__all__ = ["Ailments", "TapAilment", "ailment_name", "look_for_ailments", "unlisted_fall"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A reading that makes less than this part of the head's change does not follow it.
_FOLLOWS = 0.5
#: A lag or a stuck reading must explain this part of the errors to be named.
_EXPLAINS = 0.6
#: Air comes and goes: right in at least, and at most, this share of the runs.
_GOES, _COMES = 0.1, 0.9


@dataclass(frozen=True)
class TapAilment:
    """An ailment with its name.

    Parameters
    ----------
    label : str
        Tap or gauge.
    is_tap : bool
        Whether it is a tap.
    name : str
        What ails it.
    what : Ailment
        The figures.
    follows : Following
        How its reading goes with the head.
    corrected : bool
        Whether it was taken off, the tap used; else the tap is left out of the fits.
    """

    label: str
    is_tap: bool
    name: str
    what: Ailment
    follows: Following
    corrected: bool


@dataclass(frozen=True)
class Ailments:
    """What was found, and what the fits make of it.

    Parameters
    ----------
    diagnosis : Diagnosis or None
        None where nobody looked.
    taps : tuple of TapAilment
        Of taps and gauges.
    subjects : tuple of (str, bool)
        Label of each subject looked at, and whether it is a tap.
    left_out : (n,) bool array
        Observations that do not enter the fits.
    why : list of str
        The reason for each, empty where there is none.
    columns : (n, e) array
        Columns of the design for losses and slopes that nobody listed.
    names : tuple of (Break, str)
        The break behind each of the columns, and ``"step"``, ``"kink"`` or ``"curve"``.
    taken_off : (n,) array
        Offsets that are taken off all runs, m.
    inputs : tuple of Input
        What they are uncertain by, shared.
    """

    diagnosis: Diagnosis | None
    taps: tuple[TapAilment, ...]
    subjects: tuple[tuple[str, bool], ...]
    left_out: Mask
    why: list[str]
    columns: Array
    names: tuple[tuple[Break, str], ...]
    taken_off: Array
    inputs: tuple[Input, ...] = field(default=())

    @property
    def found(self) -> bool:
        """Whether anything was found."""
        return bool(self.taps) or bool(self.names)

    @classmethod
    def none(cls, n: int) -> Ailments:
        """Return what stands before anybody has looked."""
        return cls(None, (), (), np.zeros(n, bool), [""] * n, np.zeros((n, 0)), (), np.zeros(n))

    def same_as(self, other: Ailments) -> bool:
        """Whether the fits would make the same of both, the size of what is taken off apart."""
        return (
            bool((self.left_out == other.left_out).all())
            and self.columns.shape == other.columns.shape
            and bool((self.columns == other.columns).all())
            and not self.taken_off.any()
            and not other.taken_off.any()
        )


def look_for_ailments(
    survey: Survey,
    line: Line,
    model: Model,
    sight: Array,
    energy: Array,
    heads: Array,
    used: Mask,
    slopes: Array,
    velocity_heads: Array,
    stated: Array,
    *,
    correct_offsets: bool,
) -> Ailments:
    """Look for what ails taps and line over all runs.

    Parameters
    ----------
    survey, line
        The survey and its layout.
    model : Model
        Of the observations.
    sight : (n, T) array
        Which taps each observation sees.
    energy, heads : (F, n) array
        Observed energy heads and piezometric heads, m.
    used : (F, n) bool array
        Observations that may enter.
    slopes, velocity_heads : (F, K) array
        Friction slopes; V²/2g, m.
    stated : (F, n, q) array
        Change for one standard uncertainty of each stated error that the runs share, m.
    correct_offsets : bool
        Whether offsets are taken off; else ailing taps are left out.

    Returns
    -------
    Ailments
        Named.
    """
    n = len(model.design)
    subjects, columns, grows, reach = _subjects(survey, line, sight, used)
    slopes = np.maximum(np.nan_to_num(slopes), 0.0)
    read = np.asarray(used.any(axis=0))
    gaps = gaps_between(line.chainage, sight, line.reach_of_tap, read) if read.any() else ()
    of_gap = np.array([gap.reach for gap in gaps], dtype=np.intp)
    curves = curves_of(line.chainage, sight, line.reach_of_tap, line.bounds, read) if read.any() else ()
    of_curve = np.array([curve.reach for curve in curves], dtype=np.intp)
    suspects = Suspects(
        columns,
        grows,
        slopes[:, reach],
        velocity_heads[:, reach],
        gaps,
        slopes[:, of_gap],
        velocity_heads[:, of_gap],
        curves,
        slopes[:, of_curve],
    )
    found = diagnose(energy, used, model, suspects, stated)
    left_out, why, taken_off = np.zeros(n, bool), [""] * n, np.zeros(n)
    taps, inputs = [], []
    for one in found.taps:
        label, is_tap = subjects[one.subject]
        sees = columns[:, one.subject]
        which = int(np.flatnonzero(sees)[0])
        follows = _follows(one, heads[:, which] * sees[which], picked_runs(len(energy), n, suspects))
        name = ailment_name(one, follows, is_tap=is_tap)
        corrected = correct_offsets and one.pattern == "offset"
        taps.append(TapAilment(label, is_tap, name, one, follows, corrected))
        if corrected:
            taken_off += sees * one.offset
            inputs.append(
                Input("inferred offset", label, heads=np.tile(-sees * one.offset_u, (len(energy), 1)))
            )
            continue
        for i in np.flatnonzero(sees):
            left_out[i], why[i] = True, f"left out: {name}"
    extra, names = [], []
    for broken in found.breaks:
        if broken.kind == "curve":
            extra.append(-curves[broken.gap].fall)
            names.append((broken, "curve"))
            continue
        gap = gaps[broken.gap]
        extra.append(-gap.step)
        names.append((broken, "step"))
        if broken.kind == "kink":
            extra.append(-gap.kink)
            names.append((broken, "kink"))
    return Ailments(
        found,
        tuple(taps),
        subjects,
        left_out,
        why,
        np.column_stack(extra) if extra else np.zeros((n, 0)),
        tuple(names),
        taken_off,
        tuple(inputs),
    )


def unlisted_fall(one: Break, what: str, chainage: Array, past: Mask) -> Array:
    """Fall of the line at any place for one unit of what nobody listed.

    Parameters
    ----------
    one : Break
        What was found.
    what : {"step", "kink", "curve"}
        Which of its columns.
    chainage : array
        m.
    past : bool array
        Places downstream of it.

    Returns
    -------
    array
        m per m of loss, m per unit of slope.
    """
    if what == "step":
        return np.asarray(past, dtype=float)
    if what == "kink":
        return np.maximum(chainage - one.at, 0.0)
    return bulge(chainage, one.low, one.high)


def ailment_name(one: Ailment, follows: Following, *, is_tap: bool) -> str:
    """Say what ails a tap or gauge, no more than the readings carry.

    Parameters
    ----------
    one : Ailment
        The figures.
    follows : Following
        How its reading goes with the head.
    is_tap : bool
        A gauge between taps has neither an edge nor a chainage.

    Returns
    -------
    str
        Such as ``"datum offset"`` or ``"edge or chainage, not distinguishable"``.
    """
    if one.pattern == "offset":
        return "datum offset"
    stuck = follows.share < _FOLLOWS and follows.stuck > _EXPLAINS
    if stuck or (one.pattern == "unsteady" and follows.memory > 1 - _COMES and follows.slow > _EXPLAINS):
        return "sluggish or blocked line"
    if one.pattern == "unsteady":
        if _GOES <= follows.sound <= _COMES:
            return "air in line"
        return "unsteady: sluggish or blocked line, or air in it"
    if not is_tap:
        return "error that grows with the flow"
    grows = (
        "edge error"
        if one.preference > NOT_TOLD_APART
        else "chainage error"
        if one.preference < -NOT_TOLD_APART
        else "edge or chainage, not distinguishable"
    )
    return f"datum offset and {grows}" if "offset" in one.pattern else grows


def _subjects(
    survey: Survey, line: Line, sight: Array, used: Mask
) -> tuple[tuple[tuple[str, bool], ...], Array, Mask, NDArray[np.intp]]:
    """Taps that are seen by themselves or twice, and the gauges between taps."""
    names: list[tuple[str, bool]] = []
    columns, grows, reach = [], [], []
    read = np.asarray(used.any(axis=0))
    alone = np.count_nonzero(sight, axis=1) == 1
    for t, tap in enumerate(survey.taps):
        sees = (sight[:, t] != 0) & read
        if (sees & alone).any() or sees.sum() > 1:
            names.append((tap.name, True))
            columns.append(np.where(read, sight[:, t], 0.0))
            grows.append(True)
            reach.append(line.reach_of_tap[t])
    for i, one in enumerate(survey.observations):
        if one.tap_2 is not None and read[i]:
            names.append((one.label, False))
            columns.append(np.eye(len(sight))[:, i])
            grows.append(False)
            reach.append(line.reach_of_tap[int(np.flatnonzero(sight[i])[0])])
    if not columns:
        return (), np.zeros((len(sight), 0)), np.zeros(0, bool), np.zeros(0, np.intp)
    return tuple(names), np.column_stack(columns), np.array(grows), np.array(reach, dtype=np.intp)


def _follows(one: Ailment, head: Array, pick: NDArray[np.intp]) -> Following:
    before = np.concatenate([[np.nan], head[:-1]])
    return following(head[pick], one.error, one.error_u, before[pick])
