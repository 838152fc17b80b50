"""One table of chainages and heads, with bore, flow and temperature given beside it, as a whole survey."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from gradeline.errors import Problem, QuantityError, UsageError
from gradeline.loader.cells import Cells, Heading, column_index, numbers
from gradeline.loader.columns import Columns, Known
from gradeline.loader.ledger import Ledger
from gradeline.quantities import Measured, parse_quantity, parse_unit
from gradeline.quantities.parsing import unit_of

__all__ = ["GIVEN", "TableOfHeads", "given_values"]

#: What has to be given beside the table: dimension and example of each.
GIVEN: Mapping[str, tuple[str, str]] = {
    "diameter": ("length", "26.6 mm"),
    "flow": ("flow", "0.84 L/s"),
    "temperature": ("temperature", "18 degC"),
}

_COLUMNS: Mapping[str, Known] = {
    "tap": Known(),
    "chainage": Known(("length",), required=True),
}
_AIR = (
    "are taken as the heights of open columns of the flowing water above one level, so the weight of the air beside them "
    "counts (0.12 %)"
)
#: What the heads may be headed, the gauge kind that each stands for, and how that is told.
_HEADS: Mapping[str, tuple[str, str]] = {
    "head": (
        "head",
        "its heads are taken as piezometric heads z + p/(ρ g) above one datum, worked out already; where they are the "
        "heights of open columns, head them 'column height'",
    ),
    "reading": ("piezometer", f"its readings {_AIR}; where they are piezometric heads, head them 'head'"),
    "column height": ("piezometer", f"its column heights {_AIR}"),
}
_SETTINGS: Mapping[str, Mapping[str, str]] = {"piezometer": {"zero": "0 m", "inclination": "90 deg"}}
_RUN = "1"
_GAUGES: Mapping[str, str] = {"head": "heads", "piezometer": "columns"}

Reader = Callable[[Ledger], Cells | None]


def given_values(given: Mapping[str, str | None]) -> dict[str, Measured]:
    """Return what was given beside a table of heads.

    Parameters
    ----------
    given : mapping of str to str or None
        By the names of `GIVEN`, such as ``"26.6 mm +/- 0.1 mm"``.

    Returns
    -------
    dict of str to Measured
        SI.

    Raises
    ------
    UsageError
        Where one is missing, is no quantity of its dimension, or is not above zero.

    Examples
    --------
    >>> given_values({"diameter": "26.6 mm", "flow": "0.84 L/s"})
    Traceback (most recent call last):
        ...
    gradeline.errors.UsageError: one table of heads needs the temperature beside it; add --temperature "18 degC" (in Python temperature="18 degC")
    """
    missing = [one for one in GIVEN if given.get(one) is None]
    if missing:
        said = ", ".join(f"the {one}" for one in missing[:-1]) + (" and " if missing[1:] else "")
        options = " ".join(f'--{one} "{GIVEN[one][1]}"' for one in missing)
        python = ", ".join(f'{one}="{GIVEN[one][1]}"' for one in missing)
        raise UsageError(
            f"one table of heads needs {said}the {missing[-1]} beside it; add {options} (in Python {python})"
        )
    values: dict[str, Measured] = {}
    for one, (dimension, example) in GIVEN.items():
        text = given[one] or ""
        try:
            values[one] = parse_quantity(text, dimension)
        except QuantityError as error:
            raise UsageError(f"--{one} {text!r}: {error}") from None
        if not values[one].value > 0:
            raise UsageError(f"--{one} {text!r}: it must be above 0; write it as {example!r}")
    return values


@dataclass
class TableOfHeads:
    """A survey of one run from one table: a `gradeline.loader.tables.Source`.

    Parameters
    ----------
    file : str
        What messages call the table.
    read : callable
        Reads it.
    given : mapping of str to str
        Diameter, flow and temperature as text.
    values : mapping of str to Measured
        The same, SI.
    """

    file: str
    read: Reader
    given: Mapping[str, str]
    values: Mapping[str, Measured]
    _cells: Cells | None = None
    _headed: str = "head"

    def data(self, ledger: Ledger) -> dict[str, Any] | None:
        """Return the line: one reach from the first tap to the last, read as its column is headed."""
        before = len(ledger.problems)
        cells = self.read(ledger)
        if cells is None:
            return None
        present = [heading.name for heading in cells.headings if heading.name in _HEADS]
        self._headed = present[0] if present else "head"
        heads = {name: Known(("length",), required=name == self._headed) for name in _HEADS}
        columns = Columns(ledger, cells, {**_COLUMNS, **heads})
        for name in present[1:]:
            ledger.problem(
                self.file,
                cells.heading_line,
                name,
                f"the column {self._headed!r} holds the heads already; keep one of the two",
            )
        unit = columns.units.get("chainage")
        if len(ledger.problems) > before or unit is None:
            return None
        # Faults of single cells are told when the tables of taps and readings are read.
        scratch = Ledger(ledger.folder)
        at = numbers(scratch, cells, column_index(cells, "chainage") or 0, unit, remedy="")
        sound = at[np.isfinite(at)]
        if len(np.unique(sound)) < 2:
            if not scratch.problems:
                ledger.problem(
                    self.file, None, None, "a friction slope needs taps at two chainages or more; add rows"
                )
            else:
                ledger.problems += scratch.problems
            return None
        self._cells = cells
        kind, told = _HEADS[self._headed]
        ledger.assumptions += [
            f"{self.file} is one run of water: {told}.",
            "The line is taken as one reach of one bore and one wall, from the first tap to the last, without "
            "fittings and not at an inlet.",
        ]
        if column_index(cells, "tap") is None:
            ledger.assumptions.append(
                f"The taps have no names: they are called T1 to T{len(cells)} in the order of the rows."
            )
        stated: dict[str, str] = {}
        if self.values["flow"].u is not None:
            stated["flow"] = f"{self.values['flow'].u!r} m^3/s"
        if self.values["temperature"].u is not None:
            stated["temperature"] = f"{self.values['temperature'].u!r} K"
        return {
            "survey": {"title": Path(self.file.partition(" sheet ")[0]).stem},
            "reach": [
                {
                    "name": "line",
                    "from": f"{float(sound.min())!r} m",
                    "to": f"{float(sound.max())!r} m",
                    "diameter": self.given["diameter"],
                    "wall": "pipe",
                }
            ],
            "gauge": {_GAUGES[kind]: {"kind": kind, **_SETTINGS.get(kind, {})}},
            "uncertainty": stated,
        }

    def table(self, ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:  # noqa: ARG002 (all sources are asked alike)
        """Return the part of the table that a survey has as ``taps``, ``readings`` or ``runs``."""
        cells = self._cells
        if cells is None:
            return None
        parts: Mapping[str, Callable[[Cells], Cells]] = {
            "taps": self._taps,
            "readings": self._readings,
            "runs": self._runs,
        }
        return parts[name](cells)

    def place_of(self, ledger: Ledger, name: str) -> str | None:  # noqa: ARG002 (all sources are asked alike)
        """Return what messages call a table of the survey."""
        return self.file

    def placed(self, problem: Problem) -> Problem:
        """Return a problem at its place in the table or at the option that it comes from."""
        if problem.column == "reach[1].diameter":
            return replace(problem, file="--diameter", row=None, column=None)
        if problem.column in {f"--{one}" for one in GIVEN}:
            return replace(problem, file=problem.column, row=None, column=None)
        return problem

    def _names(self, cells: Cells) -> list[str]:
        index = column_index(cells, "tap")
        return [f"T{row + 1}" for row in range(len(cells))] if index is None else cells.columns[index]

    def _column(self, cells: Cells, name: str) -> tuple[Heading, list[str]]:
        index = column_index(cells, name)
        assert index is not None
        return cells.headings[index], cells.columns[index]

    def _taps(self, cells: Cells) -> Cells:
        heading, chainages = self._column(cells, "chainage")
        return replace(
            cells,
            headings=(Heading("tap", "tap", None), heading),
            columns=(self._names(cells), chainages),
        )

    def _readings(self, cells: Cells) -> Cells:
        heading, heads = self._column(cells, self._headed)
        return replace(
            cells,
            headings=(
                Heading("run", "run", None),
                Heading("tap", "tap", None),
                replace(heading, name="reading"),
            ),
            columns=([_RUN] * len(cells), self._names(cells), heads),
        )

    def _runs(self, cells: Cells) -> Cells:
        headings, columns = [Heading("run", "run", None)], [[_RUN]]
        for one in ("flow", "temperature"):
            dimension, _ = GIVEN[one]
            unit = parse_unit(unit_of(self.given[one]), dimension)
            headings.append(Heading(f"--{one}", one, unit.text))
            columns.append([f"{unit.from_si(self.values[one].value):.15g}"])
        return Cells(cells.file, tuple(headings), tuple(columns), [1], None)
