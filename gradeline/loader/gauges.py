"""What the keys of a gauge must fit: its taps, its fluids, its legs, its calibration."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence

import numpy as np

from gradeline.gauge_kinds import GAUGE_KINDS, Calibration, GaugeKind
from gradeline.loader.cells import nearest, read_cells
from gradeline.loader.columns import Columns, Known
from gradeline.loader.document import LINE_FLUIDS, NAME, Document, GaugeTable
from gradeline.loader.gauge_keys import Elevation
from gradeline.loader.ledger import Ledger
from gradeline.loader.tables import place_of
from gradeline.loader.tensions import check_tension
from gradeline.survey import Fluid, Tap

__all__ = ["check_gauges", "level_labels", "read_calibration"]

#: Densities for telling heavier from lighter, kg/m³: of these fluids at 20 °C.
_ABOUT = {"air": 1.2, "mercury": 13546.0, "water": 998.2}
_FEWEST_POINTS = 3
#: Elevations that differ by less are the same, m.
_SAME = 1e-6


def check_gauges(
    ledger: Ledger,
    document: Document,
    fluid: Fluid | None,
    taps: Sequence[Tap] | None,
    temperatures: Sequence[float] = (),
) -> None:
    """Note every key of a gauge that does not fit the line, the fluids or the other keys.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    document : Document
        The gauges.
    fluid : Fluid or None
        The flowing fluid; None where it is at fault.
    taps : sequence of Tap or None
        The taps; None where their table is at fault.
    temperatures : sequence of float
        Of the runs, K, for the gauge fluids that state none.
    """
    for gauge in document.gauges.values():
        if gauge.kind is None or gauge.values is None:
            continue
        kind = GAUGE_KINDS[gauge.kind]
        _check_together(ledger, gauge, kind)
        _check_run_temperatures(ledger, gauge, kind, temperatures)
        check_tension(ledger, gauge, kind, fluid)
        if kind.fluid_side is not None:
            _check_fluid(ledger, gauge, kind, fluid, temperatures)
        if kind.differential and taps is not None:
            _check_taps(ledger, gauge, kind, {tap.name: tap for tap in taps})
        if kind.legs and taps is not None and None not in gauge.legs and gauge.legs:
            _check_chain(ledger, gauge, fluid, {tap.name: tap for tap in taps}, temperatures)


def _note(ledger: Ledger, gauge: GaugeTable, key: str, message: str) -> None:
    ledger.problem(NAME, None, f"gauge.{gauge.name}.{key}", message)


def _taps_file(ledger: Ledger) -> str:
    return place_of(ledger, "taps") or "taps.csv"


def _check_together(ledger: Ledger, gauge: GaugeTable, kind: GaugeKind) -> None:
    values = gauge.values or {}
    for key, *needed in kind.together:
        missing = [name for name in needed if values.get(name) is None]
        if values.get(key) is not None and missing:
            _note(ledger, gauge, key, f"the key needs {' and '.join(missing)} beside it; add {missing[0]}")


def _density_about(name: str, own: float | None, fluid: Fluid | None) -> float | None:
    """Density by which a fluid is told heavier or lighter, None where it is not known."""
    if own is not None:
        return own
    if fluid is not None and name == fluid.name:
        return fluid.density.value if fluid.density is not None else _ABOUT.get(name)
    return _ABOUT.get(name)


def _check_fluid(
    ledger: Ledger, gauge: GaugeTable, kind: GaugeKind, fluid: Fluid | None, temperatures: Sequence[float]
) -> None:
    """A gauge fluid is known, and heavier or lighter than what is in the lines."""
    values = gauge.values or {}
    name = values.get("gauge_fluid") or "air"
    own = values.get("gauge_fluid_density")
    if own is None and name not in LINE_FLUIDS:
        hint = nearest(name, LINE_FLUIDS).replace("?", "? Otherwise")
        _note(
            ledger,
            gauge,
            "gauge_fluid",
            f"no density is known for {name!r}; {hint} add gauge_fluid_density"
            if hint.startswith("did")
            else f"no density is known for {name!r}; add gauge_fluid_density, or choose from {', '.join(LINE_FLUIDS)}",
        )
        return
    if own is None:
        _check_temperature(ledger, gauge, "gauge_temperature", name, temperatures)
    line = values.get("line_fluid")
    beside = (
        _density_about(line, None, fluid)
        if line
        else _density_about(fluid.name, None, fluid)
        if fluid
        else None
    )
    here = _density_about(name, None if own is None else own.value, fluid)
    if beside is None or here is None:
        return
    if (kind.fluid_side == "heavier") == (here > beside) and here != beside:
        return
    other = next(
        each for each, known in GAUGE_KINDS.items() if known.fluid_side not in (None, kind.fluid_side)
    )
    _note(
        ledger,
        gauge,
        "gauge_fluid",
        f"{name!r} ({here:g} kg/m³) is not {kind.fluid_side} than the fluid in the lines ({beside:g} kg/m³), as in "
        f"kind {gauge.kind!r}; mend the fluid, or is it kind = {other!r}?",
    )


def _check_run_temperatures(
    ledger: Ledger, gauge: GaugeTable, kind: GaugeKind, temperatures: Sequence[float]
) -> None:
    """A density that goes with the runs' temperature needs one, also where the flowing fluid does without."""
    values = gauge.values or {}
    if not np.isnan(np.asarray(temperatures, dtype=float)).any():
        return
    if kind.level_key is not None:
        _note(
            ledger,
            gauge,
            "kind",
            "the weight of the trapped gas goes with the temperature, and that of a run is missing; give "
            "'temperature [degC]' with the runs",
        )
    elif values.get("gauge_fluid_expansion") is not None and values.get("gauge_temperature") is None:
        _note(
            ledger,
            gauge,
            "gauge_fluid_expansion",
            "the gauge fluid expands with its temperature, and that of a run is missing; add gauge_temperature",
        )


def _check_temperature(
    ledger: Ledger, gauge: GaugeTable, key: str, name: str, temperatures: Sequence[float]
) -> None:
    """A fluid's density is known at its temperature."""
    stated = (gauge.values or {}).get(key)
    low, high = LINE_FLUIDS[name]
    used = [stated.value] if stated is not None else list(temperatures)
    if all(low < value <= high for value in used):
        return
    whose = "its temperature" if stated is not None else "a run's temperature, as the gauge states none,"
    _note(
        ledger,
        gauge,
        key,
        f"{whose} is missing or does not lie above {low - 273.15:g} degC and up to {high - 273.15:g} degC, where the "
        f"density of {name} is known; "
        + ("mend the value or the unit" if stated is not None else f"add {key}"),
    )


def _check_taps(ledger: Ledger, gauge: GaugeTable, kind: GaugeKind, taps: Mapping[str, Tap]) -> None:
    """The two taps are there, and the first one lies upstream."""
    values = gauge.values or {}
    found = []
    for key in ("upstream", "downstream"):
        name = values.get(key)
        if name is None:
            continue
        if name not in taps:
            _note(
                ledger, gauge, key, f"there is no tap {name!r} in {_taps_file(ledger)}; {nearest(name, taps)}"
            )
            return
        found.append(taps[name])
    if gauge.name in taps:
        _note(
            ledger,
            gauge,
            "kind",
            f"a tap is called {gauge.name!r} as well, and both name a column of readings; rename the gauge",
        )
    if len(found) < 2:
        return
    first, second = found
    if first.name == second.name:
        _note(ledger, gauge, "downstream", f"the tap {first.name!r} stands for both ends; name the other tap")
    elif first.chainage > second.chainage:
        what = f"join the {kind.limbs[0]} limb" if kind.limbs else "count a reading positive"
        _note(
            ledger,
            gauge,
            "upstream",
            f"the tap {first.name!r} lies downstream of {second.name!r}; exchange the two, and {what} as they then stand"
            if not kind.limbs
            else f"the tap {first.name!r} lies downstream of {second.name!r}; exchange the two (the left limb is the one "
            "joined to the upstream tap)",
        )


def _check_chain(
    ledger: Ledger,
    gauge: GaugeTable,
    fluid: Fluid | None,
    taps: Mapping[str, Tap],
    temperatures: Sequence[float],
) -> None:
    """Each leg begins where the one before ends; the chain begins and ends at its taps; its fluids are known."""
    values, legs = gauge.values or {}, [leg for leg in gauge.legs if leg is not None]
    upstream, downstream = values.get("upstream"), values.get("downstream")
    if (
        not isinstance(upstream, str)
        or upstream not in taps
        or (downstream is not None and downstream not in taps)
    ):
        return

    def at(end: float | str) -> float | str:
        return taps[end].elevation if isinstance(end, str) and end in taps else end

    def same(one: float | str, other: float | str) -> bool:
        one, other = at(one), at(other)
        if isinstance(one, str) or isinstance(other, str):
            return one == other
        return abs(one - other) < _SAME

    def shown(end: float | str) -> str:
        return f"{end!r}" if isinstance(end, str) else f"{end:g} m"

    for place, (before, after) in enumerate(itertools.pairwise(legs), start=2):
        if not same(before.end, after.start):
            _note(
                ledger,
                gauge,
                f"leg[{place}].from",
                f"the chain does not close: this leg begins at {shown(after.start)}, but the one before ends at "
                f"{shown(before.end)}; begin it there",
            )
    if not same(legs[0].start, upstream):
        _note(
            ledger,
            gauge,
            "leg[1].from",
            f"the chain does not close: it begins at {shown(legs[0].start)}, not at the tap {upstream!r} "
            f"({taps[upstream].elevation:g} m); write from = {upstream!r}",
        )
    if downstream is not None and not same(legs[-1].end, downstream):
        _note(
            ledger,
            gauge,
            f"leg[{len(legs)}].to",
            f"the chain does not close: it ends at {shown(legs[-1].end)}, not at the tap {downstream!r} "
            f"({taps[downstream].elevation:g} m); write to = {downstream!r}",
        )
    for place, end, tap in ((1, legs[0].start, upstream), (len(legs), legs[-1].end, downstream)):
        if tap is not None and isinstance(end, Elevation) and end.u:
            _note(
                ledger,
                gauge,
                f"leg[{place}].{'from' if tap == upstream else 'to'}",
                f"it is the elevation of the tap {tap!r}, whose uncertainty stands in {_taps_file(ledger)}; write the tap's name here",
            )
    if not level_labels(gauge, taps):
        _note(
            ledger,
            gauge,
            "leg",
            "no end of a leg is read; name a level, such as to = 'a', for a column of its own",
        )
    for place, leg in enumerate(legs, start=1):
        if (
            leg.density is None
            and leg.fluid not in LINE_FLUIDS
            and (fluid is None or leg.fluid != fluid.name)
        ):
            _note(
                ledger,
                gauge,
                f"leg[{place}].fluid",
                f"no density is known for {leg.fluid!r}; add density, or choose from {', '.join(LINE_FLUIDS)}",
            )
        elif leg.density is None and leg.fluid in LINE_FLUIDS and (fluid is None or leg.fluid != fluid.name):
            low, high = LINE_FLUIDS[leg.fluid]
            if not all(low < value <= high for value in temperatures):
                _note(
                    ledger,
                    gauge,
                    f"leg[{place}].fluid",
                    f"the temperature of a run is missing or out of the range where the density of {leg.fluid} is known; "
                    "add density",
                )


def level_labels(gauge: GaugeTable, taps: Mapping[str, Tap]) -> list[str]:
    """Return the names of the levels at which a gauge's legs are read."""
    ends = [end for leg in gauge.legs if leg is not None for end in (leg.start, leg.end)]
    return [end for end in dict.fromkeys(ends) if isinstance(end, str) and end not in taps]


def read_calibration(ledger: Ledger, gauge: GaugeTable) -> Calibration | None:
    """Return the calibration of a gauge, None where it has none or its file is at fault."""
    name = (gauge.values or {}).get("calibration")
    if name is None or gauge.kind is None:
        return None
    place = ledger.folder / name
    if place.is_symlink() and place.resolve().parent != ledger.folder.resolve():
        _note(
            ledger,
            gauge,
            "calibration",
            f"{name!r} leads out of the survey's folder; put the file itself there",
        )
        return None
    cells = read_cells(ledger, name)
    if cells is None:
        return None
    dimension = GAUGE_KINDS[gauge.kind].reading
    known = Known((dimension,), required=True, remedy="give the value or take the row away")
    columns = Columns(ledger, cells, {"reading": known, "true": known})
    values = [columns.values(key) for key in ("reading", "true")]
    whole = np.isfinite(values).all(axis=0)
    for row in np.flatnonzero(~whole).tolist():
        for key in ("reading", "true"):
            if key in columns and not columns.raw(key)[row]:
                columns.problem(row, key, "the cell is empty; give the value or take the row away")
    if not whole.all():
        return None
    reading, true = (tuple(each.tolist()) for each in values)
    if len(reading) < _FEWEST_POINTS or len(set(reading)) < 2:
        ledger.problem(
            name,
            None,
            None,
            f"a straight line with its uncertainty takes {_FEWEST_POINTS} points or more at different readings; add points",
        )
        return None
    return Calibration(name, reading, true)
