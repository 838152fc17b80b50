"""What a reduction is: its tables, with the columns of `columns` and `drawing_columns`."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import pandas as pd

from gradeline.quantities.printing import MISSING, SI_DISPLAY
from gradeline.quantities.shown import Shown, counted, rows_of, shown
from gradeline.reduction.columns import RECORD_TABLES, RESULT_TABLES, Column
from gradeline.reduction.drawing_columns import DRAWING_TABLES

if TYPE_CHECKING:
    from gradeline.reduction.fitted import FittedWall

__all__ = ["DRAWING_TABLES", "RECORD_TABLES", "RESULT_TABLES", "Column", "Reduction", "empty"]


def empty(table: str) -> pd.DataFrame:
    """Return a table of `DRAWING_TABLES` or `RECORD_TABLES` without rows.

    Parameters
    ----------
    table : str
        Its name.

    Examples
    --------
    >>> len(empty("likelihood"))
    0
    """
    kinds = {"text": "object", "number": "float", "truth": "boolean"}
    columns = RECORD_TABLES.get(table) or DRAWING_TABLES[table]
    return pd.DataFrame({name: pd.Series([], dtype=kinds[column.kind]) for name, column in columns.items()})


@dataclass(frozen=True, repr=False)
class Reduction:
    """All that was reduced from a survey: one DataFrame a table, in SI units.

    A missing number is NaN, a missing text None, a missing boolean ``pd.NA``; `reason` columns say why.

    Parameters
    ----------
    survey : mapping
        ``title``, ``date``, ``source`` and ``files`` (a mapping from each input file's name to its SHA-256).
    assumptions, cautions : tuple of str
        Every default and choice made; what a reader must know.
    reaches, runs, walls, fittings, taps, heads, flags, budget : DataFrame
        The tables of `RESULT_TABLES`, with exactly those columns.
    grade_lines, layout, laminar, reading_units, exponents, ailments, scatter, bore_sensitivity, losses, loss_runs : DataFrame
        Tables of `DRAWING_TABLES`: what figures need.
    inputs, stated_reaches, stated_taps, raw_readings : DataFrame
        Tables of `DRAWING_TABLES`: what was put in.
    level : float
        Coverage of the intervals, 0.95 unless asked otherwise.
    gravity : float
        Local gravity, m/s².
    friction_law_u : float
        Relative standard uncertainty of f by the friction law, for its band; NaN where not stated.
    transition, laws, departures, conveyance, wall_conveyance, surfaces, roughness_checks, zero_drift : DataFrame
        Tables of `DRAWING_TABLES`: the runs read as a hydraulics laboratory would.
    slips : DataFrame
        Table of `DRAWING_TABLES`: slips of the pen that would explain a flag.
    ailment_runs, break_heads : DataFrame
        Tables of `DRAWING_TABLES`: what ails taps and line, run by run.
    improvements, likelihood : DataFrame
        Tables of `DRAWING_TABLES`: what better inputs would do, and the likelihood of each wall's roughness.
    windows, record_flags : DataFrame
        The tables of `RECORD_TABLES`: the windows of a logger's record and what is wrong with it; no rows without one.
    record_trace : DataFrame
        Table of `DRAWING_TABLES`: the record, thinned.
    carried : mapping
        What `gradeline.predict` needs beside the tables: as it stands in ``carried.json``.
    fitted_walls : tuple of FittedWall
        What was fitted to each wall and its shared errors, in memory only: what `gradeline.compare` works from.
    """

    survey: Mapping[str, Any]
    assumptions: tuple[str, ...]
    cautions: tuple[str, ...]
    reaches: pd.DataFrame
    runs: pd.DataFrame
    walls: pd.DataFrame
    fittings: pd.DataFrame
    taps: pd.DataFrame
    heads: pd.DataFrame
    flags: pd.DataFrame
    budget: pd.DataFrame
    grade_lines: pd.DataFrame
    layout: pd.DataFrame
    laminar: pd.DataFrame
    reading_units: pd.DataFrame
    exponents: pd.DataFrame
    scatter: pd.DataFrame
    bore_sensitivity: pd.DataFrame
    losses: pd.DataFrame
    loss_runs: pd.DataFrame
    ailments: pd.DataFrame
    inputs: pd.DataFrame
    stated_reaches: pd.DataFrame
    stated_taps: pd.DataFrame
    raw_readings: pd.DataFrame
    level: float
    gravity: float
    friction_law_u: float
    transition: pd.DataFrame = field(default_factory=lambda: empty("transition"))
    laws: pd.DataFrame = field(default_factory=lambda: empty("laws"))
    departures: pd.DataFrame = field(default_factory=lambda: empty("departures"))
    conveyance: pd.DataFrame = field(default_factory=lambda: empty("conveyance"))
    wall_conveyance: pd.DataFrame = field(default_factory=lambda: empty("wall_conveyance"))
    surfaces: pd.DataFrame = field(default_factory=lambda: empty("surfaces"))
    roughness_checks: pd.DataFrame = field(default_factory=lambda: empty("roughness_checks"))
    zero_drift: pd.DataFrame = field(default_factory=lambda: empty("zero_drift"))
    slips: pd.DataFrame = field(default_factory=lambda: empty("slips"))
    ailment_runs: pd.DataFrame = field(default_factory=lambda: empty("ailment_runs"))
    break_heads: pd.DataFrame = field(default_factory=lambda: empty("break_heads"))
    improvements: pd.DataFrame = field(default_factory=lambda: empty("improvements"))
    likelihood: pd.DataFrame = field(default_factory=lambda: empty("likelihood"))
    windows: pd.DataFrame = field(default_factory=lambda: empty("windows"))
    record_flags: pd.DataFrame = field(default_factory=lambda: empty("record_flags"))
    record_trace: pd.DataFrame = field(default_factory=lambda: empty("record_trace"))
    carried: Mapping[str, Any] = field(default_factory=dict)
    fitted_walls: tuple[FittedWall, ...] = ()

    def __repr__(self) -> str:
        flowing = self.runs["run"][(self.runs["regime"] != "static").to_numpy(bool)].nunique()
        counts = ((flowing, "flowing run"), (len(self.walls), "wall"), (len(self.flags), "flag"))
        words = ", ".join(f"{count} {noun}{'' if count == 1 else 's'}" for count, noun in counts)
        return f"Reduction({self.survey.get('title')!r}, {words})"

    def _repr_html_(self) -> str:
        """Show the runs, and the roughness of each wall above them, for notebooks."""
        date = self.survey.get("date")
        flowing = self.runs["run"][(self.runs["regime"] != "static").to_numpy(bool)].nunique()
        lines = [
            counted((flowing, "flowing run"), (len(self.flags), "flag"), (len(self.cautions), "caution"))
        ]
        for wall in rows_of(self.walls):
            span = SI_DISPLAY.interval("roughness", wall["roughness_low"], wall["roughness_high"], unit=True)
            told = span if span != MISSING else wall["reason"] or "not told"
            lines.append(f"{wall['wall']}: roughness {100 * self.level:.4g} % interval {told}")
        return shown(
            f"{self.survey.get('title') or 'Survey'}{f', {date}' if date else ''}",
            lines,
            self.runs,
            (
                Shown("run", "run"),
                *([Shown("reach", "reach")] if len(self.reaches) > 1 else []),
                Shown("flow", "flow", "flow"),
                Shown("Re", "reynolds", "reynolds"),
                Shown("regime", "regime"),
                Shown("S", "slope", "slope"),
                Shown("f", "friction_factor", "number"),
            ),
        )
