"""The summary in sentences: what was found, how sure it is, what to look at, what is missing and why."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from gradeline.quantities.printing import (
    SI_DISPLAY,
    Display,
    format_interval,
    format_number,
    rounded,
    thousands,
)
from gradeline.reduction.friction import LAMINAR_FAR
from gradeline.reduction.tables import Reduction
from gradeline.report.cautions import further_cautions
from gradeline.report.converted import converted
from gradeline.report.laws import telling_laws
from gradeline.report.losses import is_unlisted, loss_sentence, not_told_from_zero
from gradeline.report.printed import known, percent, records
from gradeline.report.smoothness import smooth_sentence
from gradeline.report.tables import elevations_known, flagged_value, reading_names, reading_units
from gradeline.report.uncertainty import best_improvement

__all__ = ["JUDGEMENT", "Summary", "summarise"]

#: Stands at the end of every summary.
JUDGEMENT = (
    "These results support a judgement; they do not replace local codes or licensed practice, and they say nothing "
    "of what was not measured."
)

_MOST_NAMED = 6
#: Of f with nothing stated, an agreement of the laminar runs within this share is still called one.
_LAMINAR_ROOM = 0.02
#: An exponent less certain than this tells no regime from another; it stands in the table alone.
_VAGUE_EXPONENT = 0.25


@dataclass(frozen=True)
class Summary:
    """The summary of a reduction, each entry one or two sentences.

    Parameters
    ----------
    found : tuple of str
        Results with how sure they are.
    look : tuple of str
        What deserves a look: flags, misfits, cautions.
    missing : tuple of str
        What could not be determined, with the reason.
    close : str
        What the results are good for.
    """

    found: tuple[str, ...]
    look: tuple[str, ...]
    missing: tuple[str, ...]
    close: str = JUDGEMENT


def summarise(reduction: Reduction, display: Display = SI_DISPLAY) -> Summary:
    """Return the summary of a reduction, the same for page and terminal.

    Parameters
    ----------
    reduction : Reduction
        What was reduced.
    display : Display
        Units of the reader.

    Returns
    -------
    Summary
    """
    reduction = converted(reduction, display)
    walls, runs, fittings = (
        records(table) for table in (reduction.walls, reduction.runs, reduction.fittings)
    )
    flags = records(reduction.flags)
    laws = telling_laws(reduction, display)
    found = [
        _survey(reduction, runs),
        *(
            f"{_wall(wall, reduction.level, display)} {smooth_sentence(reduction, wall)}".rstrip()
            for wall in walls
            if known(wall["roughness"])
        ),
        *_friction(runs, flags),
        *_laminar(reduction),
        *_exponents(reduction),
        *laws[0],
        *_fittings(reduction, fittings, display),
        best_improvement(reduction, display),
    ]
    look = [
        *_law(walls, flags),
        *laws[1],
        *_readings(reduction, flags),
        *_runs(flags),
        *_taps(reduction, flags),
        *_static_offsets(reduction),
        *_unflagged(reduction, flags),
        *_by_hand(reduction),
        *_crown(reduction, display),
    ]
    look += _cautions(reduction, look)
    return Summary(tuple(filter(None, found)), tuple(look), tuple(_missing(walls, runs, fittings)))


def _plural(count: int, one: str, many: str | None = None) -> str:
    """Return a count with its noun.

    Examples
    --------
    >>> _plural(1, "run"), _plural(3, "run")
    ('1 run', '3 runs')
    """
    return f"{count} {one if count == 1 else many or one + 's'}"


def _list(items: Iterable[str]) -> str:
    """Return names as a list in words, long ones cut.

    Examples
    --------
    >>> _list(["R1", "R2", "R3"])
    'R1, R2 and R3'
    """
    names = list(items)
    if len(names) > _MOST_NAMED + 1:
        return f"{', '.join(names[:_MOST_NAMED])} and {len(names) - _MOST_NAMED} more"
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def _distinct(rows: Sequence[dict[str, Any]], key: str) -> list[str]:
    return list(dict.fromkeys(str(row[key]) for row in rows))


def _survey(reduction: Reduction, runs: Sequence[dict[str, Any]]) -> str:
    flowing = _distinct([row for row in runs if row["regime"] != "static"], "run")
    static = _distinct([row for row in runs if row["regime"] == "static"], "run")
    heads = reduction.heads
    at_rest = heads["run"].isin(set(static)).to_numpy(bool)
    read = np.isfinite(heads["head"].to_numpy(float, na_value=np.nan))
    used = heads["used"].fillna(False).to_numpy(bool)
    means = " (means of repeats where there are any)" if (reduction.raw_readings["repeats"] > 1).any() else ""
    parts = []
    if flowing:
        count = int((read & ~at_rest).sum())
        parts.append(
            f"{_plural(len(flowing), 'flowing run')} with {_plural(count, 'reading')}{means}, "
            f"{int((used & ~at_rest).sum())} of them used"
        )
    if static:
        parts.append(
            f"{_plural(len(static), 'static run')} with {_plural(int((read & at_rest).sum()), 'reading')}"
        )
    return _sentence("; ".join(parts)) if parts else ""


def _wall(wall: dict[str, Any], level: float, display: Display) -> str:
    name = wall["wall"]
    runs = (
        f"from {_plural(int(wall['runs_used']), 'turbulent run')}"
        if known(wall["runs_used"])
        else "from all runs"
    )
    ends = (wall["roughness_low"], wall["roughness_high"])
    upper = display.within("roughness", wall["roughness_upper95"], *ends, unit=True)
    if wall["roughness_resolved"]:
        value = display.within("roughness", wall["roughness"], *ends, unit=True)
        interval = display.interval("roughness", *ends, unit=True)
        words = f"The roughness of the wall {name} is {value} ({percent(level)} interval {interval}), {runs}."
    elif known(wall["roughness_upper95"]):
        words = (
            f"The roughness of the wall {name} is not resolved: it is smaller than {upper} (95 %), {runs}."
        )
    else:
        words = f"The roughness of the wall {name} is not resolved, {runs}."
    return words


def _friction(runs: Sequence[dict[str, Any]], flags: Sequence[dict[str, Any]]) -> Iterable[str]:
    """The range of f in turbulent flow, without the runs that lie off the law."""
    off = {flag["run"] for flag in flags if flag["kind"] == "run"}
    turbulent = [
        row
        for row in runs
        if row["regime"] == "turbulent" and known(row["friction_factor"]) and row["run"] not in off
    ]
    if not turbulent:
        return
    turbulent.sort(key=lambda row: row["reynolds"])

    def at(row: dict[str, Any]) -> str:
        return f"{rounded(row['friction_factor'], row['friction_factor_u'])} at Re {thousands(row['reynolds'], 3)}"

    if len(turbulent) == 1:
        yield f"The Darcy friction factor of the one turbulent run is {at(turbulent[0])}."
        return
    for reach in _distinct(turbulent, "reach"):
        own = [row for row in turbulent if row["reach"] == reach]
        where = f" in the reach {reach}" if len(_distinct(turbulent, "reach")) > 1 else ""
        if len(own) > 1:
            yield (
                f"In turbulent flow the Darcy friction factor{where} goes from {at(own[0])} to {at(own[-1])} "
                "(± one standard uncertainty)."
            )
        else:
            yield f"In turbulent flow the Darcy friction factor{where} is {at(own[0])}."


def _laminar(reduction: Reduction) -> Iterable[str]:
    rows = records(reduction.laminar)
    if not rows:
        return
    texts, off, unknown = [], [], False
    for row in rows:
        ratio, u = row["ratio"], row["ratio_u"]
        texts.append(f"{rounded(ratio, u)} (run {row['run']})")
        if not known(u):
            unknown = True
            if abs(ratio - 1) > _LAMINAR_ROOM:
                off.append(str(row["run"]))
        elif abs(ratio - 1) > 2 * u:
            off.append(str(row["run"]))
    constants = {f"{row['constant']:.4g}" for row in rows}
    over = f"f·Re/{constants.pop()}" if len(constants) == 1 else "f·Re over its value for the section's shape"
    words = f"In laminar flow {over}, which is 1 for the true bore and flow, is {_list(texts)}"
    far = [str(row["run"]) for row in rows if not 1 / LAMINAR_FAR < row["ratio"] < LAMINAR_FAR]
    if far:
        # No bore is so far off: its fourth root is no help.
        yield f"{words}. In run {_list(far)} that is far from 1: look at the units of bore, flow and chainage."
    elif off:
        yield (
            f"{words}. In run {_list(off)} that is not 1 within "
            f"{'2 %' if unknown else 'two standard uncertainties'}: check the bore (it enters as D⁴), the flow and "
            "the temperature."
        )
    else:
        yield f"{words}: no contradiction to the stated bore."


def _exponents(reduction: Reduction) -> Iterable[str]:
    rows = [
        row
        for row in records(reduction.exponents)
        if known(row["exponent"]) and not (known(row["exponent_u"]) and row["exponent_u"] > _VAGUE_EXPONENT)
    ]
    several = len(_distinct(rows, "reach")) > 1
    texts = [
        f"{rounded(row['exponent'], row['exponent_u'])} ({row['regime']}{', ' + row['reach'] if several else ''})"
        for row in rows
    ]
    if texts:
        yield f"The friction slope grows as Qⁿ with n = {_list(texts)}."


def _fittings(reduction: Reduction, fittings: Sequence[dict[str, Any]], display: Display) -> Iterable[str]:
    beside = {row["fitting"]: row for row in records(reduction.losses)}
    for fitting in fittings:
        # What nobody listed is told, with its K, among what deserves a look.
        if known(fitting["loss_coefficient_u"]) and not is_unlisted(fitting["fitting"]):
            words = _fitting(fitting, reduction.level)
            yield loss_sentence(fitting, beside.get(fitting["fitting"]), words, display)


def _fitting(fitting: dict[str, Any], level: float) -> str:
    value = rounded(fitting["loss_coefficient"], fitting["loss_coefficient_u"])
    untold = " not told from zero:" if not_told_from_zero(fitting) else ""
    words = f"The loss coefficient of {fitting['fitting']} is{untold} K = {value}"
    if known(fitting["loss_coefficient_low"]) and known(fitting["loss_coefficient_high"]):
        interval = format_interval(fitting["loss_coefficient_low"], fitting["loss_coefficient_high"])
        words += f" ({percent(level)} interval {interval})"
    return words


def _law(walls: Sequence[dict[str, Any]], flags: Sequence[dict[str, Any]]) -> Iterable[str]:
    """One sentence for each flag of the law: what the flag says, or else the trend over Re."""
    flagged = [flag for flag in flags if flag["kind"] == "law"]
    for flag in flagged:
        if flag["suggestion"]:
            # A wall's flag is of its law; the others (a break of the line, a rising head) speak for themselves.
            of_wall = flag["suggestion"].startswith("wall ")
            yield _sentence(f"{'The friction law does not fit: ' if of_wall else ''}{flag['suggestion']}")
    if not any(flag["suggestion"] is None for flag in flagged):
        return
    for wall in walls:
        trend, u = wall["law_trend"], wall["law_trend_u"]
        if known(trend) and known(u) and abs(trend) > 2 * u:
            yield (
                f"The friction law does not describe the wall {wall['wall']}: against it f "
                f"{'falls' if trend < 0 else 'rises'} with Re, by ({rounded(100 * trend, 100 * u)}) % per decade."
            )


def _readings(reduction: Reduction, flags: Sequence[dict[str, Any]]) -> Iterable[str]:
    flagged = [flag for flag in flags if flag["kind"] == "reading"]
    if not flagged:
        return
    units = reading_units(reduction)
    heads = reduction.heads
    wanted = {(flag["run"], flag["tap"]) for flag in flagged}
    kept = {
        (run, tap)
        for run, tap, used in zip(heads["run"], heads["tap"], heads["used"].fillna(False), strict=True)
        if used and (run, tap) in wanted
    }
    flagged.sort(key=lambda flag: -abs(flag["score"]) if known(flag["score"]) else 0.0)
    for flag in flagged[:_MOST_NAMED]:
        read, expected = (flagged_value(flag, key, units) for key in ("reading", "expected"))
        suggestion = flag["suggestion"] or ""
        fate = (
            "; it was kept in the fit"
            if (flag["run"], flag["tap"]) in kept
            else "; it was left out of the fit"
        )
        if "left out" in suggestion or "kept" in suggestion:
            fate = ""
        score = f" (score {format_number(flag['score'], 2)})" if known(flag["score"]) else ""
        words = f"Run {flag['run']}, tap {flag['tap']}: {read} was read, {expected} expected{score}{fate}."
        own = f"{flag['tap']}: "
        if suggestion.startswith(own) and " written for " in suggestion:  # what was read stands in it
            told = suggestion.removeprefix(own)
            yield f"Run {flag['run']}, tap {flag['tap']}: {expected} expected{score}{fate}: {_ended(told)}"
            continue
        yield f"{words} {_sentence(suggestion)}" if suggestion else words
    if len(flagged) > _MOST_NAMED:
        yield f"{_plural(len(flagged) - _MOST_NAMED, 'more reading')} were flagged; the table of flags names them."


def _ended(text: str) -> str:
    """Return words with a full stop where none ends them."""
    plain = text.strip()
    return plain + ("" if plain.endswith((".", "?", "!")) else ".")


def _sentence(text: str) -> str:
    """Return words as a sentence of their own."""
    plain = text.strip()
    return _ended(plain[:1].upper() + plain[1:])


def _runs(flags: Sequence[dict[str, Any]]) -> Iterable[str]:
    flagged = [flag for flag in flags if flag["kind"] == "run"]
    for flag in flagged[:_MOST_NAMED]:
        score = f" (score {format_number(flag['score'], 2)})" if known(flag["score"]) else ""
        suggestion = f" {_sentence(flag['suggestion'])}" if flag["suggestion"] else ""
        yield f"Run {flag['run']} lies off the friction law that the other runs follow{score}.{suggestion}"
    if len(flagged) > _MOST_NAMED:
        rest = [str(flag["run"]) for flag in flagged[_MOST_NAMED:]]
        yield f"So do {_list(rest)}."


def _taps(reduction: Reduction, flags: Sequence[dict[str, Any]]) -> Iterable[str]:
    gauges = set(reduction.ailments["name"][(reduction.ailments["what"] == "gauge").to_numpy(bool)])
    for flag in [flag for flag in flags if flag["kind"] == "tap"][:_MOST_NAMED]:
        suggestion = (
            f": {flag['suggestion']}"
            if flag["suggestion"]
            else " reads off the line in the same way in most runs"
        )
        yield _sentence(f"{'Gauge' if flag['tap'] in gauges else 'Tap'} {flag['tap']}{suggestion}")


def _static_offsets(reduction: Reduction) -> Iterable[str]:
    """Offsets that a static run measured and that stand out: taken off, no flag, but worth a look at the tap."""
    for tap in records(reduction.taps):
        words = str(tap["diagnosis"] or "")
        # The caution about one that is far too large says as much and more.
        told = any(
            text.startswith(f"Tap {tap['tap']} differs from the others") for text in reduction.cautions
        )
        if words.endswith("measured by the static run and taken off") and not told:
            yield f"Tap {tap['tap']}: {words}."


def _unflagged(reduction: Reduction, flags: Sequence[dict[str, Any]]) -> Iterable[str]:
    """That no reading and no run was flagged, and why, where readings were not judged at all."""
    if any(flag["kind"] in ("reading", "run") for flag in flags):
        return
    judged = [row["text"] for row in records(reduction.inputs) if row["what"] == "single readings"]
    if judged and str(judged[0]).startswith("not judged"):
        why = str(judged[0]).removeprefix("not judged").removeprefix(": ").rstrip(".")
        yield f"No run was flagged. Single readings were not judged{': ' + why if why else ''}."
    elif not flags:
        yield "No reading and no run was flagged."


def _by_hand(reduction: Reduction) -> Iterable[str]:
    """The readings left out by hand: by tap, with its runs where they are not all."""
    heads = reduction.heads
    # What was left out for an ailment is told with it.
    out = ((heads["flag"] == "excluded") & (heads["reason"] == "left out by hand")).to_numpy(bool)
    if not out.any():
        return
    read = np.isfinite(heads["head"].to_numpy(float, na_value=np.nan))
    names = np.array(reading_names(reduction), dtype=object)
    texts = []
    for name in dict.fromkeys(names):
        own = names == name
        if not (own & out).any():
            continue
        runs = [str(run) for run in heads["run"][own & out]]
        whole = len(runs) == int((own & read).sum())
        texts.append(
            f"{name} in all runs" if whole else f"{name} in run{'s' * (len(runs) > 1)} {_list(runs)}"
        )
    yield f"Left out by hand: {'; '.join(texts)}."


def _crown(reduction: Reduction, display: Display) -> Iterable[str]:
    """Where a hydraulic grade line falls below the pipe's crown."""
    lines = reduction.grade_lines
    if not elevations_known(reduction):
        return
    x, run_of = lines["chainage"].to_numpy(float), lines["run"].to_numpy(object)
    margin = lines["piezometric_head"].to_numpy(float) - lines["crown"].to_numpy(float)
    with np.errstate(invalid="ignore"):
        below = margin < 0
        # where a line crosses the crown between two of its places
        crossing = (
            (below[:-1] != below[1:]) & (run_of[:-1] == run_of[1:]) & np.isfinite(margin[:-1] + margin[1:])
        )
    if not below.any():
        return
    runs = list(dict.fromkeys(str(run) for run in run_of[below]))
    at = np.flatnonzero(crossing)
    ends = np.concatenate(
        [x[below], x[at] + (x[at + 1] - x[at]) * margin[at] / (margin[at] - margin[at + 1])]
    )
    first, last = (display.text("chainage", end, digits=3) for end in (ends.min(), ends.max()))
    unit = display.unit("chainage")
    place = f"at chainage {first} {unit}" if first == last else f"between chainage {first} and {last} {unit}"
    yield (
        f"In {'run' if len(runs) == 1 else 'runs'} {_list(runs)} the hydraulic grade line lies below the pipe's crown "
        f"{place}: the pressure there is below the atmosphere's, so that air or dirty water can be drawn in and the "
        "water column can part."
    )


def _cautions(reduction: Reduction, told: Sequence[str]) -> Iterable[str]:
    cautions, assumptions = len(further_cautions(reduction, told)), len(reduction.assumptions)
    parts = []
    if cautions:
        parts.append(_plural(cautions, "caution"))
    if assumptions:
        parts.append(_plural(assumptions, "assumption"))
    if parts:
        total = cautions + assumptions
        yield f"{' and '.join(parts)} {'is' if total == 1 else 'are'} listed (also in report.html and reduction.json); read them before a number is used."


def _missing(
    walls: Sequence[dict[str, Any]], runs: Sequence[dict[str, Any]], fittings: Sequence[dict[str, Any]]
) -> Iterable[str]:
    for wall in walls:
        if not known(wall["roughness"]):
            yield _because(f"The roughness of the wall {wall['wall']}", wall["reason"])
    for fitting in fittings:
        if not known(fitting["loss_coefficient"]):
            name = fitting["fitting"]
            quoted = repr(name) if is_unlisted(name) else name
            yield _because(f"The loss coefficient of {quoted}", fitting["reason"])
    without: dict[str | None, list[str]] = {}
    for row in runs:
        if not known(row["slope"]) and row["regime"] != "static":
            without.setdefault(row["reason"], []).append(str(row["run"]))
    for reason, names in without.items():
        yield _because(f"The friction slope of {_list(dict.fromkeys(names))}", reason)


def _because(what: str, reason: str | None) -> str:
    return f"{what} could not be determined" + (f": {reason.rstrip('.')}." if reason else ".")
