"""Which columns of a logger's file a survey has use for, and what each is to it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from gradeline.errors import QuantityError
from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.loader.cells import Heading, round_brackets
from gradeline.loader.columns import Known
from gradeline.loader.document import Document
from gradeline.loader.flow_rows import flow_columns
from gradeline.loader.gas_pressures import gas_columns, known_gas
from gradeline.loader.logger.blocks import Channel
from gradeline.loader.logger.head import Head
from gradeline.loader.offtakes import Branch, branch_columns
from gradeline.loader.taps import TapTable
from gradeline.quantities import Unit, parse_unit
from gradeline.survey import Target

__all__ = ["Kept", "kept_columns", "number_of", "usual"]

_NOT_LOGGED = frozenset({"direction", "flow start", "flow end"})


@dataclass(frozen=True)
class Kept:
    """The columns of a logger's file that are read.

    Parameters
    ----------
    places : tuple of int
        Of the columns in the file; those of its headings that the survey's tables know.
    channels : tuple of Channel
        One for each place, then one for each gauge whose limbs were both logged.
    units : tuple of Unit or None
        Of each channel; None where it is at fault, which is told with the runs.
    targets : tuple of (int, str, Target)
        Channel, name and use of each column of the record.
    primary : frozenset of str
        Columns that show whether anything flows.
    left : tuple of str
        Headings of no use.
    """

    places: tuple[int, ...]
    channels: tuple[Channel, ...]
    units: tuple[Unit | None, ...]
    targets: tuple[tuple[int, str, Target], ...]
    primary: frozenset[str]
    left: tuple[str, ...]


def number_of(cell: str, *, comma: bool) -> float:
    """Return a cell as a number, NaN where it is none."""
    try:
        return float(cell.replace(",", ".") if comma else cell)
    except ValueError:
        return np.nan


def usual(head: Head, place: int) -> tuple[float, float]:
    """Return a value and a size, above 0, that a column has where its file was looked into."""
    rows = [number_of(row[place], comma=head.comma) for row in (*head.rows, *head.between)]
    values = np.array([one for one in rows if np.isfinite(one) and abs(one) < 1e100])
    if not len(values):
        return 0.0, 1.0
    return float(values[0]), float(np.abs(values).max()) or 1.0


def kept_columns(
    head: Head, time: int, document: Document, taps: TapTable, branches: Sequence[Branch]
) -> Kept:
    """Sort the columns of a logger's file."""
    flow, gauges = document.flow, document.gauges
    gas = gas_columns(gauges)
    names = [heading.name for heading in head.headings]
    flows = {name: one for name, one in flow_columns(flow, names).items() if name not in _NOT_LOGGED}
    known: dict[str, Known] = {
        **flows,
        "temperature": Known(("temperature",)),
        **branch_columns(branches),
        **known_gas(gas),
        **{
            name: Known((dimension,) if (dimension := taps.reads.get(name)) else ("length", "pressure"))
            for name in taps.distinct
        },
    }
    bare = {name for name in taps.bare if name not in known}
    places, left = [], []
    for place, heading in enumerate(head.headings):
        if place == time or heading.name.casefold().startswith("note") or not heading.name:
            continue
        if heading.name in known or heading.name in bare or round_brackets(heading, known):
            places.append(place)
        else:
            left.append(heading.text)
    channels, units = [], []
    for place in places:
        heading = head.headings[place]
        channels.append(Channel(((place, 1.0),), *usual(head, place)))
        units.append(_unit(heading, known[heading.name].dimensions) if heading.name in known else None)
    at = {head.headings[place].name: k for k, place in enumerate(places)}
    targets: list[tuple[int, str, Target]] = []

    def use(column: str, target: Target) -> None:
        if column in at:
            targets.append((at[column], column, target))

    direct = flow is None or flow.setup.method == "direct"
    for name in flows:
        use(name, Target("run", "flow") if direct else Target("flow reading", name))
    use("temperature", Target("run", "temperature"))
    for one in branches:
        use(one.column, Target("run", one.offtake.column))
    for column, gauge in gas.items():
        use(column, Target("run", f"gas pressure {gauge}"))
    for tap in taps.taps:
        if tap.name not in taps.bare:
            use(tap.name, Target("reading", tap.name))
    for gauge_table in gauges.values():
        kind = GAUGE_KINDS.get(gauge_table.kind or "")
        if kind is None or not kind.differential:
            continue
        name = gauge_table.name
        parts = [
            one for one in taps.distinct if one.startswith(f"{name} ") and taps.gauge_of.get(one) == name
        ]
        use(name, Target("reading", name))
        if kind.legs:
            for part in parts:
                use(part, Target("level", part))
            if parts:
                use(parts[0], Target("reading", name))
        elif name not in at and len(parts) == 2 and all(part in at for part in parts):
            made = _difference([(channels[at[part]], units[at[part]]) for part in parts])
            if made is not None:
                targets.append((len(channels), name, Target("reading", name)))
                channels.append(made)
                units.append(Unit("SI", kind.reading, 1.0))
    primary = {"flow"} if direct else set()
    if flow is not None and not direct:
        primary = {name for name, column in flow.column_names.items() if column == flow.method.primary}
    return Kept(tuple(places), tuple(channels), tuple(units), tuple(targets), frozenset(primary), tuple(left))


def _unit(heading: Heading, dimensions: Sequence[str]) -> Unit | None:
    if heading.unit in ("1", "count", "counts") and "dimensionless" in dimensions:
        return Unit(heading.unit, "dimensionless", 1.0)
    for dimension in dimensions:
        try:
            return parse_unit(heading.unit or "", dimension)
        except QuantityError:
            continue
    return None


def _difference(limbs: Sequence[tuple[Channel, Unit | None]]) -> Channel | None:
    """The reading of one limb less that of the other, SI."""
    (first, one), (second, other) = limbs
    if one is None or other is None:
        return None
    factors = (one.difference_to_si(1.0), -other.difference_to_si(1.0))
    origin = first.origin * factors[0] + second.origin * factors[1]
    size = abs(first.size * factors[0]) + abs(second.size * factors[1])
    return Channel(((first.parts[0][0], factors[0]), (second.parts[0][0], factors[1])), origin, size)
