"""Slips of the pen: how often the true repair comes first, and how often a wrong value that no slip made gets one.

Run by hand: ``python -m tests.calibration.slips --surveys 400``. A small seeded version runs with the tests.

A survey is 12 runs of 10 open columns with a scatter of 1 mm, written to 1 mm (or to 0.5 mm; or read by pressure gauges
in kPa with two decimals, 0.1 kPa scatter). One reading of it holds a slip that puts it 6 scatters off or more; or an error
that no slip made, its size even in the logarithm from 6 to 300 scatters, of either sign. What is counted are the flagged.

Where the last digit written counts as much as the scatter (1 mm, 0.01 kPa), a slip in that digit cannot be told by anybody:
the values to either side of the true one fit as well, and the nearest of three is the true one in 38 % (|z| < 1/2).
"""

from __future__ import annotations

import argparse
from collections.abc import Callable
from dataclasses import asdict, dataclass, replace
from itertools import pairwise

import numpy as np
import pandas as pd

from gradeline.reduction.corrections import static_corrections
from gradeline.reduction.heads import heads_of
from gradeline.reduction.line import line_of
from gradeline.reduction.media import media_of
from gradeline.reduction.runs import fit_survey
from gradeline.reduction.slips import slip_table, slips_of
from gradeline.survey import Survey
from tests.reduction.benches import on_pressure_gauges
from tests.simulate.surveys import NominalReach, make_survey

RUNS, TAPS = 12, np.linspace(0.2, 5.3, 10)
REACH = NominalReach(0.0, 5.5, 0.02664, 1e-4)
FLOWS = np.linspace(2.5e-4, 1.2e-3, RUNS)
LEAST, MOST = 6.0, 300.0


@dataclass(frozen=True)
class Setting:
    """How readings are written: unit, SI units in it, digits behind the point, step and scatter in that unit."""

    unit: str
    si: float
    decimals: int
    step: float
    sigma: float


SETTINGS = {
    "1 mm": Setting("mm", 1e-3, 0, 1.0, 1.0),
    "0.5 mm": Setting("mm", 1e-3, 1, 0.5, 1.0),
    "0.1 cm": Setting("cm", 1e-2, 1, 0.1, 0.1),
    "0.01 kPa": Setting("kPa", 1e3, 2, 0.01, 0.01),
}


def bench(rng: np.random.Generator, setting: Setting) -> tuple[Survey, np.ndarray]:
    """Return a sound survey and its readings as written, (runs, taps) in the unit of the file."""
    pressure = setting.unit == "kPa"
    sigma = 1e-9 if pressure else setting.sigma * setting.si
    survey, truth = make_survey(
        rng, chainage=TAPS, reaches=[REACH], flows=FLOWS, temperature=288.0, sigma=sigma, draw=False
    )
    if pressure:
        survey = on_pressure_gauges(survey, truth, np.zeros(len(TAPS)), np.zeros(len(TAPS)), lift=3.0)
    values = survey.readings.to_numpy(float) / setting.si
    if pressure:
        values = values + setting.sigma * rng.standard_normal(values.shape)
    values = np.round(np.round(values / setting.step) * setting.step, setting.decimals)
    survey = replace(survey, units=dict.fromkeys(survey.readings.columns, setting.unit))
    return survey, values


def with_readings(survey: Survey, values: np.ndarray, setting: Setting) -> Survey:
    """Return the survey with other readings, as written."""
    table = pd.DataFrame(values * setting.si, index=survey.readings.index, columns=survey.readings.columns)
    return replace(survey, readings=table)


# Written out anew as text, apart from the catalogue that is measured.
def transposed(rng: np.random.Generator, text: str) -> str:
    """Two neighbouring digits in each other's place."""
    places = [i for i, (a, b) in enumerate(pairwise(text)) if "." not in (a, b)]
    places += [i for i in range(len(text) - 2) if text[i + 1] == "."]
    at = int(rng.choice(places))
    other = at + (2 if text[at + 1] == "." else 1)
    letters = list(text)
    letters[at], letters[other] = letters[other], letters[at]
    return "".join(letters)


def one_digit(rng: np.random.Generator, text: str) -> str:
    """One digit another."""
    at = int(rng.choice([i for i, letter in enumerate(text) if letter != "."]))
    return text[:at] + str((int(text[at]) + int(rng.integers(1, 10))) % 10) + text[at + 1 :]


def decimal_point(rng: np.random.Generator, text: str) -> str:
    """The point one or two places off."""
    shift = int(rng.choice([-2, -1, 1, 2]))
    decimals = len(text.partition(".")[2])
    return f"{float(text) * 10.0**shift:.{max(decimals - shift, 0)}f}"


SLIPS: dict[str, Callable[[np.random.Generator, str], str]] = {
    "transposed": transposed,
    "one digit": one_digit,
    "decimal point": decimal_point,
}


@dataclass
class Found:
    """Counts of one case: readings planted and flagged, true repair first, and named, a wrong one named."""

    planted: int = 0
    flagged: int = 0
    first: int = 0
    named: int = 0
    false: int = 0

    def share(self, name: str) -> float:
        """Share of the flagged."""
        return float(getattr(self, name)) / max(self.flagged, 1)

    def add(self, other: Found) -> None:
        """Count those of another case as well."""
        for name, count in asdict(other).items():
            setattr(self, name, getattr(self, name) + count)


def row(title: str, kind: str, found: Found) -> str:
    """One line of the table."""
    first, named, false = (100 * found.share(name) for name in ("first", "named", "false"))
    return f"{title:12}{kind:16}{found.flagged:8d}{first:12.1f}{named:12.1f}{false:13.1f}"


def repairs_of(survey: Survey) -> tuple[pd.DataFrame, set[tuple[str, str]]]:
    """Return the table of slips, and which readings were flagged."""
    media, line = media_of(survey), line_of(survey)
    nothing = np.zeros(survey.readings.shape, dtype=bool)
    static = np.zeros(len(survey.runs), dtype=bool)
    heads = heads_of(survey, media)
    repeats = survey.repeats.to_numpy(float)
    corrections = static_corrections(heads, static, repeats, apply=True, excluded=nothing)
    # What ails a tap over all runs is looked for apart: one wrong reading is none of it, and the search takes most time.
    flowing = fit_survey(survey, media, line, corrections, nothing, keep_all=False, look=False)
    names = survey.readings.columns
    flagged = {
        (str(survey.runs["run"].iloc[flowing.rows[row]]), str(names[i]))
        for row, i in np.argwhere(flowing.fits.flagged)
    }
    return slip_table(slips_of(survey, corrections, flowing, ())), flagged


def plant(
    rng: np.random.Generator, values: np.ndarray, setting: Setting, kind: str
) -> tuple[np.ndarray, int, list[int]] | None:
    """Return the readings with one error, its run and its taps; None where it does not put them far enough off."""
    run, tap = int(rng.integers(RUNS)), int(rng.integers(len(TAPS)))
    changed, taps = values.copy(), [tap]
    if kind == "swapped":
        tap = min(tap, len(TAPS) - 2)
        taps = [tap, tap + 1]
        changed[run, taps] = values[run, taps[::-1]]
    elif kind == "no slip":
        size = setting.sigma * np.exp(rng.uniform(np.log(LEAST), np.log(MOST)))
        wrong = values[run, tap] + rng.choice([-1.0, 1.0]) * size
        changed[run, tap] = np.round(np.round(wrong / setting.step) * setting.step, setting.decimals)
    else:
        text = SLIPS[kind](rng, f"{values[run, tap]:.{setting.decimals}f}")
        changed[run, tap] = float(text)
    far = np.abs(changed - values)[run, taps].min() >= LEAST * setting.sigma
    return (changed, run, taps) if far else None


def measure(kind: str, setting: Setting, *, surveys: int, seed: int) -> Found:
    """Plant one error a survey and count what is said of it."""
    rng = np.random.default_rng([seed, len(kind), setting.decimals, len(setting.unit)])
    found = Found()
    while found.planted < surveys:
        survey, values = bench(rng, setting)
        planted = plant(rng, values, setting, kind)
        if planted is None:
            continue
        changed, run, taps = planted
        found.planted += 1
        slips, flagged = repairs_of(with_readings(survey, changed, setting))
        name, labels = str(run + 1), [f"T{tap + 1}" for tap in taps]
        if not all((name, label) in flagged for label in labels):
            continue
        found.flagged += 1
        right = named = wrong = 0
        for label, tap in zip(labels, taps, strict=True):
            mine = slips[(slips["run"] == name) & (slips["tap"] == label)]
            if not len(mine):
                continue
            best = mine.iloc[0]
            true = kind != "no slip" and abs(best["repaired"] - values[run, tap]) < setting.step / 4
            right += true
            named += true and bool(best["named"])
            wrong += bool(best["named"]) and not true
        found.first += right == len(labels)
        found.named += named == len(labels)
        found.false += wrong > 0
    return found


KINDS = ("transposed", "one digit", "decimal point", "swapped", "no slip")


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("--surveys", type=int, default=400)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--only", help="settings or kinds whose name holds this text")
    asked = parser.parse_args()
    print(f"{asked.surveys} surveys a row, seed {asked.seed}; shares of the flagged in %")
    print(
        f"{'written to':12}{'planted':16}{'flagged':>8}{'true first':>12}{'true named':>12}{'other named':>13}"
    )
    pooled = {kind: Found() for kind in KINDS}
    for title, setting in SETTINGS.items():
        for kind in KINDS:
            if asked.only and asked.only not in f"{title} {kind}":
                continue
            found = measure(kind, setting, surveys=asked.surveys, seed=asked.seed)
            pooled[kind].add(found)
            print(row(title, kind, found), flush=True)
    for kind, found in pooled.items():
        if found.planted:
            print(row("all", kind, found))


if __name__ == "__main__":
    main()
