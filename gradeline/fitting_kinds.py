"""The kinds of fittings that a survey may name, and what was published of the loss coefficient of each.

The values lie in ``published/loss_coefficients.csv``. A kind has one there only where two sources that do not depend on
each other agree, or where a worked example that uses it comes out; the column `seen` says which.
"""

from __future__ import annotations

import csv
import functools
import io
from collections.abc import Mapping
from dataclasses import dataclass
from importlib.resources import files
from types import MappingProxyType

__all__ = ["CHANGES_OF_BORE", "FittingKind", "fitting_kinds"]

#: Kinds that stand for a change of bore between two reaches: 1 where the line widens, −1 where it narrows, 0 either way.
CHANGES_OF_BORE: Mapping[str, int] = MappingProxyType(
    {"change of bore": 0, "sudden expansion": 1, "sudden contraction": -1}
)


@dataclass(frozen=True)
class FittingKind:
    """A kind of fitting.

    Parameters
    ----------
    name : str
        As a survey writes it.
    described : str or None
        What exactly the published K is of; None where none is held.
    coefficient : float or None
        The published K, dimensionless; None where a rule gives it or where none is held.
    rule : str or None
        The rule by which K follows from the bores: ``"sudden change of bore"``, ``"sudden expansion"``, ``"sudden
        contraction"``, or ``"8 f_T"``, a multiple of the friction factor of clean steel pipe in fully rough flow.
    variation : float or None
        How far fittings of this kind and handbooks differ from it either way, relative: common practice, from memory.
    source : str or None
        Where it was published.
    """

    name: str
    described: str | None
    coefficient: float | None
    rule: str | None
    variation: float | None
    source: str | None


@functools.cache
def fitting_kinds() -> Mapping[str, FittingKind]:
    """Return the kinds of fittings by name.

    Returns
    -------
    mapping of str to FittingKind

    Examples
    --------
    >>> fitting_kinds()["sharp entrance"].coefficient
    0.5
    """
    text = (files("gradeline") / "published" / "loss_coefficients.csv").read_text(encoding="utf-8")

    def number(cell: str) -> float | None:
        return float(cell) if cell else None

    return MappingProxyType(
        {
            row["kind"]: FittingKind(
                row["kind"],
                row["described"] or None,
                number(row["loss_coefficient"]),
                row["rule"] or None,
                number(row["variation"]),
                row["source"] or None,
            )
            for row in csv.DictReader(io.StringIO(text))
        }
    )
