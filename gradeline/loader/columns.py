"""The columns of a table by name: which there are, in which unit, and their values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from gradeline.errors import QuantityError
from gradeline.loader.cells import Cells, Heading, column_index, nearest, numbers, round_brackets
from gradeline.loader.ledger import PLACEHOLDER, Ledger
from gradeline.quantities import DIMENSIONS, Unit, parse_unit

__all__ = ["Columns", "Known"]

#: How a plain number is headed where one is asked for.
_PLAIN = ("1", "count", "counts")


@dataclass(frozen=True)
class Known:
    """A column that a table may have.

    Parameters
    ----------
    dimensions : tuple of str
        What its unit may measure; empty for text.
    required : bool
        Whether the table needs it.
    difference : bool
        Whether it holds uncertainties.
    remedy : str
        What to do about a cell that is no number.
    own_unit : bool
        Whether its unit stands in its heading; otherwise the caller looks after it.
    """

    dimensions: tuple[str, ...] = ()
    required: bool = False
    difference: bool = False
    remedy: str = "leave the cell empty where there is no value"
    own_unit: bool = True


class Columns:
    """The known columns of a table of cells.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    cells : Cells
        The table.
    known : mapping of str to Known
        Every column that the table may have.
    others : bool
        Whether columns of other names are left for the caller; otherwise each of them is a problem.
    """

    def __init__(
        self, ledger: Ledger, cells: Cells, known: Mapping[str, Known], *, others: bool = False
    ) -> None:
        self.ledger, self.cells, self.known = ledger, cells, known
        self.units: dict[str, Unit | None] = {}
        self._values: dict[str, np.ndarray] = {}
        #: Headings of known columns whose unit stands in round brackets: a problem each, and no column.
        self.misnamed: dict[str, Heading] = {}
        measured = [name for name, column in known.items() if column.dimensions]
        for heading in cells.headings:
            found = round_brackets(heading, measured)
            if found is not None:
                self.misnamed[found[0]] = heading
                ledger.problem(
                    cells.file,
                    cells.heading_line,
                    heading.text,
                    f"units stand in square brackets; write {f'{found[0]} [{found[1]}]'!r}",
                )
        present = {heading.name for heading in cells.headings} | set(self.misnamed)
        for name, column in known.items():
            if column.required and name not in present:
                unit = f" [{DIMENSIONS[column.dimensions[0]].units[0]}]" if column.dimensions else ""
                ledger.problem(
                    cells.file, cells.heading_line, None, f"the column '{name}{unit}' is missing; add it"
                )
        for heading in cells.headings:
            if heading.name in known:
                self.units[heading.name] = self._unit(heading.name)
            elif not others and heading not in self.misnamed.values():
                ledger.problem(
                    cells.file,
                    cells.heading_line,
                    heading.text,
                    f"unknown column {heading.name!r}; {nearest(heading.name, known)}",
                )

    def __contains__(self, name: str) -> bool:
        return name in self.units

    def _unit(self, name: str) -> Unit | None:
        heading = self.cells.headings[self._index(name)]
        dimensions = self.known[name].dimensions
        if not self.known[name].own_unit:
            return None
        if not dimensions:
            if heading.unit is not None:
                self.ledger.problem(
                    self.cells.file,
                    self.cells.heading_line,
                    heading.text,
                    f"the column holds text; take away [{heading.unit}]",
                )
            return None
        return read_unit(self.ledger, self.cells, self._index(name), dimensions)

    def _index(self, name: str) -> int:
        index = column_index(self.cells, name)
        assert index is not None
        return index

    def raw(self, name: str) -> list[str]:
        """Return the cells of a column as text; empty texts where there is no such column."""
        return self.cells.columns[self._index(name)] if name in self else [""] * len(self.cells)

    def labels(self, name: str) -> list[str]:
        """Return a column of labels; one that is empty or still to be filled in is a problem."""
        found = self.raw(name)
        if name in self:
            for row, label in enumerate(found):
                if not label:
                    self.problem(row, name, f"the {name} has no label; name it")
                elif label.startswith(PLACEHOLDER):
                    self.problem(row, name, "the value is still to be filled in; name it")
                elif len(label.splitlines()) > 1:
                    self.problem(row, name, f"{label!r} has more than one line; write it in one")
        return found

    def values(self, name: str) -> np.ndarray:
        """Return a column in SI units, NaN where empty, at fault or without a usable unit."""
        if name not in self._values:
            unit = self.units.get(name)
            if unit is None:
                self._values[name] = np.full(len(self.cells), np.nan)
            else:
                known = self.known[name]
                self._values[name] = numbers(
                    self.ledger,
                    self.cells,
                    self._index(name),
                    unit,
                    remedy=known.remedy,
                    difference=known.difference,
                )
        return self._values[name]

    def problem(self, row: int, name: str, message: str) -> None:
        """Note a problem of one cell."""
        self.ledger.problem(
            self.cells.file, self.cells.lines[row], self.cells.headings[self._index(name)].text, message
        )


def read_unit(ledger: Ledger, cells: Cells, index: int, dimensions: tuple[str, ...]) -> Unit | None:
    """Return the unit of a heading, of the first of `dimensions` that it fits; None with a problem noted."""
    heading = cells.headings[index]
    if heading.unit in _PLAIN and "dimensionless" in dimensions:
        return Unit(heading.unit, "dimensionless", 1.0)
    first: QuantityError | None = None
    for dimension in dimensions:
        try:
            return parse_unit(heading.unit or "", dimension)
        except QuantityError as error:
            first = first or error
    told = str(first)
    if heading.unit and len(dimensions) > 1 and "dimensionless" in dimensions:
        *nouns, last = (DIMENSIONS[dimension].noun for dimension in dimensions)
        units = ", ".join(DIMENSIONS[dimension].units[0] for dimension in dimensions[:-1])
        told = (
            f"the unit {heading.unit!r} is not one of {', '.join(nouns)} or {last}; give a unit such as {units}, %, or [1] "
            "for divisions of a scale, in the readings and in the meter's table alike"
        )
    ledger.problem(cells.file, cells.heading_line, heading.text, told)
    return None
