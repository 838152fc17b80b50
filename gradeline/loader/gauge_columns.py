"""The columns of readings of gauges that read more than one tap: which there are, and how they make one reading."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.loader.document import NAME, GaugeTable
from gradeline.loader.gauge_keys import Span
from gradeline.loader.gauges import level_labels
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import RunTable
from gradeline.loader.tables import place_of
from gradeline.loader.taps import TapTable
from gradeline.survey import Observation

__all__ = ["Observed", "check_columns", "observe", "with_gauge_columns"]


@dataclass(frozen=True)
class Observed:
    """Observations with their readings, and the levels of compound manometers."""

    observations: tuple[Observation, ...]
    runs: RunTable
    levels: pd.DataFrame | None


def _parts(gauge: GaugeTable, taps: Mapping[str, object]) -> list[str]:
    """What a gauge is read at one by one: its limbs, or its levels."""
    kind = GAUGE_KINDS[gauge.kind or ""]
    return level_labels(gauge, taps) if kind.legs else list(kind.limbs)  # type: ignore[arg-type]  # a mapping serves as its names


def _differential(gauges: Mapping[str, GaugeTable]) -> list[GaugeTable]:
    """The differential gauges, also those with a key at fault: their columns are known all the same."""
    return [
        gauge for gauge in gauges.values() if gauge.kind is not None and GAUGE_KINDS[gauge.kind].differential
    ]


def _sound(gauges: Mapping[str, GaugeTable]) -> list[GaugeTable]:
    """The differential gauges that are described without a fault."""
    return [gauge for gauge in _differential(gauges) if gauge.values is not None]


def with_gauge_columns(taps: TapTable, gauges: Mapping[str, GaugeTable]) -> TapTable:
    """Return the taps that have a column of their own, and after them the columns of differential gauges."""
    known = {tap.name: tap for tap in taps.taps}
    differential = _differential(gauges)
    bare = frozenset(tap.name for tap in taps.taps if tap.gauge is None) if differential else frozenset()
    reads, gauge_of = dict(taps.reads), {tap.name: tap.gauge for tap in taps.taps}
    spans: dict[str, Span] = {}
    names = [name for name in taps.distinct if name not in bare]
    extra: list[str] = []
    for gauge in differential:
        kind = GAUGE_KINDS[gauge.kind or ""]
        whole = [] if kind.legs else [gauge.name]
        parts = [f"{gauge.name} {part}" for part in _parts(gauge, known)]
        extra += [*whole, *parts]
        for name in (*whole, *parts):
            reads[name], gauge_of[name] = kind.reading, gauge.name
        span = (gauge.values or {}).get("range")
        if span is not None:
            spans |= dict.fromkeys(parts, span)
            # One deflection is a difference of two places on the scale.
            wide = span[1] - span[0]
            both = span if kind.reading == "pressure" else Span((-wide, wide), span.unit)
            spans |= dict.fromkeys(whole, both)
    for tap in taps.taps:
        gauge_table = gauges.get(tap.gauge or "")
        span = (gauge_table.values or {}).get("range") if gauge_table is not None else None
        if span is not None:
            spans[tap.name] = span
    return replace(
        taps,
        names=(*names, *extra),
        reads=reads,
        optional=frozenset(extra),
        bare=bare,
        gauge_of=gauge_of,
        spans=spans,
    )


def check_columns(ledger: Ledger, gauges: Mapping[str, GaugeTable], taps: TapTable, runs: RunTable) -> None:
    """Note every differential gauge whose columns are missing or doubled, and readings beyond a scale."""
    known = {tap.name: tap for tap in taps.taps}
    file = place_of(ledger, "readings") or "readings.csv"
    for gauge in _sound(gauges):
        kind = GAUGE_KINDS[gauge.kind or ""]
        if gauge.name in known or (kind.legs and not _parts(gauge, known)):
            continue  # told already
        unit = "mm" if kind.reading == "length" else "kPa"
        parts = [f"{gauge.name} {part}" for part in _parts(gauge, known)]
        whole = gauge.name in runs.present
        read = [name for name in parts if name in runs.present]
        place = f"gauge.{gauge.name}"
        if whole and read:
            message = (
                f"{file} has the columns {gauge.name!r} and {read[0]!r}; keep the deflection or the limbs"
            )
            ledger.problem(NAME, None, place, message)
        elif not whole and len(read) < len(parts or [""]):
            wanted = [] if kind.legs else [f"'{gauge.name} [{unit}]'"]
            missing = [name for name in parts if name not in read]
            if read or kind.legs:
                wanted = [f"'{name} [{unit}]'" for name in missing]
            elif parts:
                wanted.append(" and ".join(f"'{name} [{unit}]'" for name in sorted(parts)))
            join = " and " if read or kind.legs else ", or "
            ledger.problem(
                NAME,
                None,
                place,
                f"{file} has no readings of the gauge; add the column {join.join(wanted)}",
            )
        if read and (gauge.values or {}).get("area_ratio") is not None:
            ledger.problem(
                NAME,
                None,
                f"{place}.area_ratio",
                "both limbs are read, so that the fall of a well is read as well; take the key away",
            )
        for key in ("upstream", "downstream"):
            name = (gauge.values or {}).get(key)
            if kind.legs and (gauge.values or {}).get("downstream") is None and key == "upstream":
                tap = known.get(name or "")
                if tap is not None and tap.gauge is not None:
                    ledger.problem(
                        NAME,
                        None,
                        f"{place}.upstream",
                        f"the tap {name!r} has the gauge {tap.gauge!r} already; leave its cell in {taps.file} empty",
                    )


def observe(taps: TapTable, gauges: Mapping[str, GaugeTable], runs: RunTable) -> Observed:
    """Return the observations: each tap with a gauge of its own, then each differential gauge.

    Limbs become one deflection, with the sign of the gauge's kind. A compound manometer has its first level as its
    reading; all of them stand in the levels.
    """
    known = {tap.name: tap for tap in taps.taps}
    bare = {tap.name for tap in taps.taps if tap.gauge is None}
    found = [
        Observation(tap.gauge or "", tap.name, read_twice=runs.referenced)
        for tap in taps.taps
        if tap.name not in bare
    ]
    tables = {
        name: [getattr(runs, name)[one.tap] for one in found] for name in ("readings", "repeats", "spreads")
    }
    levels: dict[str, pd.Series[float]] = {}
    limbs: list[pd.DataFrame] = []
    for gauge in _sound(gauges):
        kind = GAUGE_KINDS[gauge.kind or ""]
        parts = [f"{gauge.name} {part}" for part in _parts(gauge, known)]
        values = gauge.values or {}
        split = gauge.name not in runs.present
        one = Observation(
            gauge.name, values["upstream"], values.get("downstream"), read_twice=split and not kind.legs
        )
        if not split:
            parts = [gauge.name]
        reading, repeats, spread = (
            [getattr(runs, name)[part] for part in parts] for name in ("readings", "repeats", "spreads")
        )
        whole = pd.concat(reading, axis=1).notna().all(axis=1)
        if kind.legs:
            levels |= dict(zip(parts, reading, strict=True))
            # Of one level, pooled over all of them: they are read from one scale.
            made, scatter = reading[0], np.sqrt((pd.concat(spread, axis=1) ** 2).mean(axis=1, skipna=False))
        elif split:
            limbs += [_single(runs, part) for part in parts]
            made, scatter = reading[0] - reading[1], np.hypot(spread[0], spread[1])
        else:
            made, scatter = reading[0], spread[0]
        found.append(one)
        tables["readings"].append(made.where(whole))
        tables["repeats"].append(pd.concat(repeats, axis=1).min(axis=1).where(whole, 0))
        tables["spreads"].append(scatter.where(whole))
    labels = [one.label for one in found]
    frames = {
        name: pd.concat(columns, axis=1).set_axis(labels, axis=1) if columns else getattr(runs, name)
        for name, columns in tables.items()
    }
    units = dict(runs.units)
    for one in found:
        for name, unit in runs.units.items():
            if name.startswith(f"{one.gauge} ") and one.label not in units:
                units[one.label] = unit
    written = pd.concat([runs.written, *limbs], ignore_index=True) if limbs else runs.written
    return Observed(
        tuple(found),
        replace(runs, **frames, units=units, written=written),
        pd.DataFrame(levels) if levels else None,
    )


def _single(runs: RunTable, column: str) -> pd.DataFrame:
    """The readings of a column that were read once."""
    once = (runs.repeats[column] == 1).to_numpy(bool)
    values = runs.readings[column].to_numpy(float)[once]
    names = runs.runs["run"].to_numpy(object)[once]
    return pd.DataFrame({"run": names, "column": column, "reading": values})
