"""What the loader took for granted and what a reader should know, in sentences."""

from __future__ import annotations

import numpy as np

from gradeline.loader.document import Document
from gradeline.loader.gas_pressures import unstated_gas
from gradeline.loader.gauge_statements import (
    holds_mercury,
    state_gauge_assumptions,
    unstated_elevations,
)
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import RunTable
from gradeline.loader.taps import TapTable
from gradeline.quantities import Measured
from gradeline.quantities.phrases import told_once
from gradeline.survey import GAUGE_KINDS, Fluid, Gauge, Reach, StatedUncertainties, Tap

__all__ = ["state_assumptions", "state_cautions"]

_SHORT_SPAN = 0.05


def _listed(names: list[str]) -> str:
    """Names as a phrase; a long list is cut.

    Examples
    --------
    >>> _listed(["T1", "T2", "T3"])
    'T1, T2 and T3'
    """
    if len(names) > 8:
        return f"{', '.join(names[:7])} and {len(names) - 7} more"
    return " and ".join(([", ".join(names[:-1])] if len(names) > 1 else []) + names[-1:])


def state_assumptions(
    ledger: Ledger,
    document: Document,
    *,
    taps: TapTable,
    gauges: tuple[Gauge, ...],
    fluid: Fluid,
    runs: RunTable,
) -> None:
    """Note every default that the loader put in place of a value that is not in the files."""
    note = ledger.assumptions.append
    if "fluid" not in ledger.order:
        note("The survey names no fluid: it is taken as water.")
    if not fluid.follows_temperature:
        note(
            f"The density and the viscosity of {fluid.name} are taken as constant: run temperatures do not change them."
        )
    site = document.site
    if site is not None and site.gravity is None and site.latitude is None:
        note("Neither latitude nor gravity is given: gravity is taken as 9.80665 m/s².")
    elif site is not None and site.gravity is not None and site.latitude is not None:
        note("Gravity is given as well as the latitude: the given gravity is used.")
    if "elevation" not in taps.columns:
        note(
            "The elevation of the taps is not given: the pipe's axis is taken as level at the datum, so pressures "
            "below atmospheric are not looked for."
        )
    pressure = {gauge.name for gauge in gauges if GAUGE_KINDS[gauge.kind].reading == "pressure"}
    at_axis = [tap.name for tap in taps.taps if tap.gauge in pressure and tap.gauge_elevation is None]
    if at_axis:
        note(
            f"The elevation of the gauge is not given at {_listed(at_axis)}: "
            "it is taken to be at the pipe's axis."
        )
    said: list[tuple[str, str]] = []
    for gauge in gauges:
        if "zero" not in GAUGE_KINDS[gauge.kind].keys:
            continue  # its readings are no heights above datum
        if "zero" not in gauge.settings:
            said.append((gauge.name, "The zero of {gauge} is not given: it is taken to be at the datum."))
        if "inclination" not in gauge.settings:
            said.append(
                (gauge.name, "The inclination of {gauge} is not given: its scale is taken as upright.")
            )
        if "bore" not in gauge.settings:
            said.append(
                (gauge.name, "The tube bore of {gauge} is not given: no capillary rise is taken off.")
            )
    ledger.assumptions.extend(told_once(said))
    state_gauge_assumptions(ledger, gauges, runs)
    if len(gauges) == 1 and "gauge" not in taps.columns and not GAUGE_KINDS[gauges[0].kind].differential:
        note(f"The gauge {gauges[0].name!r} is the only one: it is taken to read every tap.")
    _state_repeats(ledger, runs)
    if document.survey is not None and document.survey.date is None:
        note("The survey states no date.")


def _state_repeats(ledger: Ledger, runs: RunTable) -> None:
    """Note what was averaged: runs of several rows, and readings listed more than once."""
    note = ledger.assumptions.append
    repeated = runs.runs.loc[runs.runs["repeats"] > 1]
    if len(repeated):
        listed = _listed(
            [f"{run} ({n} rows)" for run, n in zip(repeated["run"], repeated["repeats"], strict=True)]
        )
        note(f"Rows with one run label are averaged as repeats: run {listed}.")
    if runs.listed:
        counts = runs.repeats.to_numpy()
        listed = _listed(
            [
                f"run {runs.repeats.index[run]} at {runs.repeats.columns[tap]} ({counts[run, tap]} rows)"
                for run, tap in np.argwhere(counts > 1)
            ]
        )
        if listed:
            note(f"Rows of readings with one run and one tap are averaged as repeats: {listed}.")


def _gauge_cautions(
    stated: StatedUncertainties, gauges: tuple[Gauge, ...], taps: tuple[Tap, ...]
) -> list[str]:
    """What nobody stated of the gauges, and what of them is not used: gauges of which the same is said in one sentence."""
    pressure = {gauge.name for gauge in gauges if GAUGE_KINDS[gauge.kind].reading == "pressure"}
    told: list[tuple[str, str]] = []
    for gauge in gauges:
        read = [tap for tap in taps if tap.gauge == gauge.name]
        differential = GAUGE_KINDS[gauge.kind].differential
        if not read and not differential:
            told.append((gauge.name, f"The gauge {gauge.name!r} reads no tap and is not used."))
            continue
        general = stated.reading_pressure if gauge.name in pressure else stated.reading
        if (
            gauge.reading_u is None
            and general is None
            and (differential or any(tap.reading_u is None for tap in read))
        ):
            told.append(
                (
                    gauge.name,
                    "The uncertainty of a reading of {gauge} is not stated: it is estimated from the "
                    "scatter where there are taps and runs enough, and otherwise contributes nothing.",
                )
            )
        zero = gauge.settings.get("zero")  # its own ± states the uncertainty as well
        zero_u = zero.u if isinstance(zero, Measured) and zero.u is not None else gauge.zero_u
        unstated = [word for word, value in (("zero", zero_u), ("scale", gauge.scale_u)) if value is None]
        if unstated:
            one = len(unstated) == 1
            noun, verb = ("uncertainty", "is") if one else ("uncertainties", "are")
            they = "it contributes" if one else "they contribute"
            told.append(
                (
                    gauge.name,
                    f"The {noun} of the {' and the '.join(unstated)} of {{gauge}} {verb} not stated: "
                    f"{they} nothing to the results.",
                )
            )
        if gauge.name not in pressure and any(tap.gauge_elevation is not None for tap in read):
            told.append(
                (
                    gauge.name,
                    "A gauge elevation is given for taps of {gauge}, which has its elevation from its zero: "
                    "it is not used.",
                )
            )
    return told_once(told)


def state_cautions(
    ledger: Ledger,
    stated: StatedUncertainties,
    *,
    fluid: Fluid,
    reaches: tuple[Reach, ...],
    taps: tuple[Tap, ...],
    gauges: tuple[Gauge, ...],
    runs: RunTable,
) -> None:
    """Note every uncertainty that matters and that nobody stated, and what is dangerous or of no use."""
    note = ledger.cautions.append
    nothing = "it contributes nothing to the results"
    bores = [reach.name for reach in reaches if reach.diameter.u is None]
    if bores:
        note(f"The uncertainty of the bore is not stated for {_listed(bores)}: {nothing}. f grows as D⁵.")
    given = runs.flow_readings.empty  # otherwise the reduction tells what the flow's readings lack
    if stated.flow is None and given:
        note(f"The random uncertainty of the flow is not stated: {nothing}.")
    if stated.flow_scale is None and given:
        note(f"The calibration uncertainty of the flow (flow_scale) is not stated: {nothing}.")
    if stated.chainage is None and any(tap.chainage_u is None for tap in taps):
        own = any(tap.chainage_u is not None for tap in taps)
        note(f"The uncertainty of the chainage is not stated{' for every tap' if own else ''}: {nothing}.")
    pressure = {gauge.name for gauge in gauges if GAUGE_KINDS[gauge.kind].reading == "pressure"}
    if stated.elevation is None and any(tap.gauge in pressure and tap.elevation_u is None for tap in taps):
        note(f"The uncertainty of the elevation is not stated: {nothing}.")
    ledger.cautions.extend(_gauge_cautions(stated, gauges, taps))
    ledger.cautions.extend(unstated_elevations(gauges))
    ledger.cautions.extend(unstated_gas(gauges))
    for reach in reaches:
        inside = [tap.chainage for tap in taps if reach.start <= tap.chainage <= reach.end]
        span = max(inside, default=0.0) - min(inside, default=0.0)
        if len(inside) > 1 and span < _SHORT_SPAN * reach.length:
            counted = "both" if len(inside) == 2 else f"all {len(inside)}"
            shown = f"{1000 * span:.3g} mm" if span < 1 else f"{span:.3g} m"
            note(
                f"In reach {reach.name!r} {counted} taps lie within {shown} of a reach of {reach.length:g} m: is the unit "
                "of chainage right?"
            )
    ledger.cautions.extend(runs.doubtful)
    has_temperature = bool(np.isfinite(runs.runs["temperature"].to_numpy(float)).any())
    if has_temperature and fluid.follows_temperature and stated.temperature is None:
        note(f"The uncertainty of the temperature is not stated: {nothing}.")
    if "mercury" in fluid.name.casefold() or any(holds_mercury(gauge) for gauge in gauges):
        note(
            "Mercury is poisonous, as a vapour too: fill and bleed such lines over a tray, in moving air, "
            "and have a spill kit at hand."
        )
