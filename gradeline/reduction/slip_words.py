"""What is said of a slip of the pen: a question, with what was written and what was meant."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gradeline.fitting.slips import Repair, Written
from gradeline.reduction.written import FileColumn

__all__ = ["Explained", "Number"]

_PHRASES = {
    "transposed": "two digits transposed",
    "one digit": "one digit wrong",
    "sign": "the sign",
    "limbs swapped": "the limbs swapped",
}


@dataclass(frozen=True)
class Number:
    """A written number with its column and the place of its run."""

    column: FileColumn
    run: int
    written: Written
    is_flow: bool = False


@dataclass(frozen=True)
class Explained:
    """What may explain one flag.

    Parameters
    ----------
    flag : str
        Kind of the flag.
    run : str
        Label of the run that the number stands in.
    tap : str or None
        Of a flagged reading or tap.
    numbers : tuple of Number
        The numbers that may hold the slip.
    repairs : tuple of Repair
        Ranked.
    runs : tuple of str
        Labels of all runs in the order of the file.
    """

    flag: str
    run: str
    tap: str | None
    numbers: tuple[Number, ...]
    repairs: tuple[Repair, ...]
    runs: tuple[str, ...]

    def number_of(self, repair: Repair) -> Number:
        """Return the number that a repair is of."""
        return next(one for one in self.numbers if one.written.name == repair.name)

    def words(self, repair: Repair | None = None) -> str | None:
        """Return what is to be said of a repair, by default of the best one; None where none deserves a word."""
        if repair is None:
            repair = next((one for one in self.repairs if one.named), None)
        return None if repair is None else _words(self, repair)


def _words(explained: Explained, repair: Repair) -> str:
    """What a repair would mean, as a question."""
    number = explained.number_of(repair)
    written, column, unit = number.written, number.column, number.column.unit.label
    shown = column.shown
    if repair.kind == "copied":
        above = explained.runs[number.run - 1]
        about = f"{_figure(written.expected, written.u)} {unit}"
        return (
            f"{_subject(number)}copied from the run above? {shown(written.value)} {unit} stands in run {above} as "
            f"well, {about} is expected; nothing of the true value is left"
        )
    away = f"{abs(repair.score):.1f} standard deviations"
    fit, within = f"{away} from what the others expect", f"within {away} of what the others expect"
    if repair.kind == "swapped" and written.only == "sign":
        taps = column.name
        return f"taps {taps} swapped? The other way round their difference would lie {fit}"
    if repair.kind == "swapped":
        what = (
            f"runs {explained.run} and {repair.detail}"
            if number.is_flow
            else (f"taps {written.name} and {repair.detail}")
        )
        other = "the flows of " if number.is_flow else ""
        return (
            f"{other}{what} swapped? {shown(repair.value)} {unit} here and {shown(written.value)} {unit} there would "
            f"lie {within}"
        )
    if repair.kind == "limbs swapped" and written.only == "sign":
        return f"the limbs of {column.name} swapped? The other way round the deflection would lie {fit}"
    if repair.kind == "copied in part":
        above = explained.runs[number.run - int(repair.detail)]
        before = written.above[int(repair.detail) - 1]
        phrase = f"it begins as run {above} does ({shown(before)})"
    elif repair.kind == "decimal point":
        _, _, other = repair.detail.partition(" or ")
        phrase = f"decimal point, or {other} for {unit}" if other else "decimal point"
    elif repair.kind == "unit":
        phrase = f"{repair.detail} for {unit}"
    else:
        phrase = _PHRASES[repair.kind]
    value = float(f"{repair.value:.6g}") if repair.kind == "unit" else repair.value
    return (
        f"{_subject(number)}{shown(written.value)} written for {shown(value)}? {phrase}: {shown(value)} {unit} would "
        f"lie {fit}"
    )


def _subject(number: Number) -> str:
    return "the flow: " if number.is_flow else f"{number.written.name}: "


def _figure(value: float, u: float) -> str:
    """A value and its standard uncertainty, to two digits of it."""
    place = max(1 - int(np.floor(np.log10(u))), 0) if u > 0 else 3
    return f"{value:.{place}f} ± {u:.{place}f}".replace("-", "−")
