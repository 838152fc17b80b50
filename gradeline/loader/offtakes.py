"""Off-takes: the branches of ``[[offtake]]`` and what each takes in every run."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from gradeline.loader.columns import Known
from gradeline.loader.document import NAME, Document
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import Rows
from gradeline.quantities import Measured
from gradeline.survey import Offtake, Reach, Stated

__all__ = ["Branch", "branch_columns", "build_branches", "check_branches", "with_branches"]

_SAME_PLACE = 1e-6
_RUN_COLUMNS = ("run", "flow", "temperature", "direction")


@dataclass(frozen=True)
class Branch:
    """An off-take with the flow that it takes in all runs (m³/s), None where the runs have a column of it."""

    offtake: Offtake
    flow: Measured | None
    place: int

    @property
    def column(self) -> str:
        """The name of its column in the table of runs."""
        return self.offtake.name


def build_branches(ledger: Ledger, document: Document, reaches: Sequence[Reach] | None) -> tuple[Branch, ...]:
    """Return the off-takes in the order of the file; those at fault are left out and noted."""
    found: list[Branch] = []
    for place, table in enumerate(document.offtakes, start=1):
        if table is None:
            continue
        path = f"offtake[{place}]"
        if table.name in _RUN_COLUMNS or any(table.name == other.offtake.name for other in found):
            whose = "a column of the runs" if table.name in _RUN_COLUMNS else "another off-take"
            ledger.problem(
                NAME,
                None,
                f"{path}.name",
                f"{whose} is called {table.name!r}; give the off-take its own name",
            )
            continue
        at = table.at
        if reaches is not None:
            boundaries = [reach.start for reach in reaches[1:]]
            near = [one for one in boundaries if abs(one - at) <= _SAME_PLACE]
            if not near:
                known = ", ".join(f"{one:g} m" for one in boundaries) or "none"
                ledger.problem(
                    NAME,
                    None,
                    f"{path}.at",
                    f"no reach ends at {at:g} m, and the flow may change only between two reaches (boundaries: {known}); split "
                    "the reach there into two with the same bore and wall",
                )
                continue
            at = near[0]
        if table.flow is not None and table.u_flow is not None:
            ledger.problem(
                NAME,
                None,
                f"{path}.u_flow",
                'the flow is given in survey.toml; state its uncertainty there, such as flow = "2 L/s +/- 0.1 L/s"',
            )
            continue
        u = table.u_flow
        if table.flow is not None and table.flow.u is not None:
            u = Stated(table.flow.u)
        if u is None:
            ledger.cautions.append(
                f"The uncertainty of what off-take {table.name!r} takes is not stated: it contributes nothing to the results."
            )
        if table.flow is not None:
            ledger.assumptions.append(
                f"Off-take {table.name!r} takes {1000 * table.flow.value:g} L/s in every flowing run, nothing in static ones."
            )
        found.append(Branch(Offtake(table.name, at, u), table.flow, place))
    return tuple(found)


def branch_columns(branches: Sequence[Branch]) -> dict[str, Known]:
    """Return the columns of the runs that tell what the off-takes take."""
    return {
        one.column: Known(("flow",), required=True, remedy="give what the off-take takes, 0 for nothing")
        for one in branches
        if one.flow is None
    }


def _taken(rows: Rows, branch: Branch) -> np.ndarray:
    if branch.flow is None:
        return rows.columns.values(branch.column)
    # A flow that is not known yet is no static one.
    return np.where(rows.flow == 0, 0.0, branch.flow.value)


def check_branches(ledger: Ledger, rows: Rows, branches: Sequence[Branch]) -> None:
    """Note off-takes with no value or a negative one in a row, and those that leave nothing in the line."""
    total = np.zeros(len(rows.labels))
    for one in branches:
        taken = _taken(rows, one)
        total = total + taken
        if one.flow is not None or one.column not in rows.columns:
            continue
        raw = rows.columns.raw(one.column)
        for row, cell in enumerate(raw):
            if not cell:
                rows.columns.problem(
                    row, one.column, "the cell is empty; give what the off-take takes, 0 for nothing"
                )
            elif taken[row] < 0:
                rows.columns.problem(
                    row,
                    one.column,
                    f"{cell} is negative; an off-take takes flow away, so give it as a positive number",
                )
    if not branches:
        return
    read = [one.column for one in branches if one.flow is None and one.column in rows.columns]
    only = next((one.text for one in rows.columns.cells.headings if [one.name] == read), None)
    for row in np.flatnonzero((total >= rows.flow) & (total > 0)).tolist():
        ledger.problem(
            rows.columns.cells.file,
            rows.lines[row],
            only,
            f"the off-takes take {1000 * total[row]:g} L/s of a flow of {1000 * rows.flow[row]:g} L/s; some must be left "
            "downstream: mend a flow or its unit, or end the line at the off-take",
        )


def with_branches(runs: pd.DataFrame, rows: Rows, branches: Sequence[Branch]) -> pd.DataFrame:
    """Add a column for each off-take, the mean over the repeats of a run, m³/s."""
    if not branches:
        return runs
    code = np.array([rows.run_codes[label] for label in rows.labels], dtype=int)
    count = np.bincount(code, minlength=len(runs))
    return runs.assign(
        **{
            one.offtake.column: np.bincount(code, weights=_taken(rows, one), minlength=len(runs)) / count
            for one in branches
        }
    )
