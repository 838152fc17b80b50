"""What ``[wall.NAME]`` says of a wall beforehand: a published roughness, or one that was found earlier."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict

from gradeline.loader.cells import nearest
from gradeline.loader.keys import Text, measured_reader, written
from gradeline.loader.ledger import Ledger
from gradeline.loader.toml import DOCUMENT
from gradeline.survey import Reach, WallHistory

__all__ = ["WallTable", "build_wall_histories", "read_walls"]

#: No wall is rougher, m: it would be a mistaken unit.
_ROUGHEST = 0.1

Roughness = Annotated[
    Any, BeforeValidator(measured_reader("length", "0.12 mm +/- 0.02 mm", 0.0, _ROUGHEST, strict=True))
]


class WallTable(BaseModel):
    """One ``[wall.NAME]``."""

    model_config = ConfigDict(extra="forbid", frozen=True, arbitrary_types_allowed=True)

    published_roughness: Roughness | None = None
    published_source: Text | None = None
    earlier_roughness: Roughness | None = None
    earlier_source: Text | None = None


def read_walls(
    ledger: Ledger, data: object, validate: Callable[[Ledger, Any, object, str], Any]
) -> dict[str, WallTable]:
    """Return the tables ``[wall.NAME]`` by their name; those at fault are left out and noted."""
    if data is None:
        return {}
    if not isinstance(data, dict):
        ledger.problem(
            DOCUMENT, None, "wall", f"{written(data)} stands here; describe each wall with [wall.NAME]"
        )
        return {}
    found: dict[str, WallTable] = {}
    for key, table in data.items():
        name, path = key.strip(), f"wall.{key}"
        if name in found:
            ledger.problem(
                DOCUMENT, None, path, f"another wall is called {name!r}; describe each of them once"
            )
            continue
        checked = validate(ledger, WallTable, table, path)
        if checked is None:
            continue
        for which in ("published", "earlier"):
            if getattr(checked, f"{which}_source") and getattr(checked, f"{which}_roughness") is None:
                ledger.problem(
                    DOCUMENT,
                    None,
                    f"{path}.{which}_source",
                    f"the source has no roughness beside it; give {which}_roughness, or take the source away",
                )
        found[name] = checked
    return found


def build_wall_histories(
    ledger: Ledger, tables: Mapping[str, WallTable], reaches: Sequence[Reach] | None
) -> tuple[WallHistory, ...]:
    """Return what is said of the walls that the reaches have; other names are noted as faults.

    Parameters
    ----------
    ledger : Ledger
        Takes problems and cautions.
    tables : mapping of str to WallTable
        The tables ``[wall.NAME]`` by their name.
    reaches : sequence of Reach or None
        None where any of them is at fault: then no name is judged.
    """
    found = []
    known = list(dict.fromkeys(reach.wall for reach in reaches or ()))
    for name, table in tables.items():
        if reaches is not None and name not in known:
            ledger.problem(
                DOCUMENT, None, f"wall.{name}", f"no reach has the wall {name!r}; {nearest(name, known)}"
            )
            continue
        earlier = table.earlier_roughness
        if earlier is not None and earlier.u is None:
            ledger.cautions.append(
                f"The uncertainty of the earlier roughness of wall {name!r} is not stated: the comparison takes it as exact."
            )
        found.append(
            WallHistory(
                name, table.published_roughness, table.published_source, earlier, table.earlier_source
            )
        )
    return tuple(found)
