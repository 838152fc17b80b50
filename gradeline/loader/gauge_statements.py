"""What the loader takes for granted of gauges that hold a fluid of their own or read two taps, in sentences."""

from __future__ import annotations

import itertools
from collections.abc import Iterable

from gradeline.gauge_kinds import GAUGE_KINDS
from gradeline.loader.ledger import Ledger
from gradeline.loader.repeats import RunTable
from gradeline.quantities.phrases import told_once
from gradeline.survey import Gauge

__all__ = ["holds_mercury", "state_gauge_assumptions", "unstated_elevations"]


def state_gauge_assumptions(ledger: Ledger, gauges: tuple[Gauge, ...], runs: RunTable) -> None:
    """Note every default of such gauges, and what was made of their readings.

    Parameters
    ----------
    ledger : Ledger
        Takes the sentences.
    gauges : tuple of Gauge
        Of the survey.
    runs : RunTable
        Their readings.
    """
    said: list[tuple[str, str]] = []
    for gauge in gauges:
        kind = GAUGE_KINDS[gauge.kind]
        if not kind.differential:
            continue
        if "gauge_temperature" in kind.keys and not {"gauge_temperature", "gauge_fluid_density"} & set(
            gauge.settings
        ):
            fluid = gauge.settings.get("gauge_fluid", "air")
            said.append(
                (
                    gauge.name,
                    f"The temperature of the {fluid} in {{gauge}} is not given: it is taken as the run's.",
                )
            )
        airy = gauge.settings.get("gauge_fluid", "air") == "air"
        if airy and "gas_pressure" in kind.keys and "gas_pressure" not in gauge.settings:
            said.append(
                (
                    gauge.name,
                    "The pressure of the air in {gauge} is not given: its density is taken at that of the "
                    "atmosphere (at 1 bar above it, the difference of heads would be 0.12 % smaller).",
                )
            )
        if "line_temperature" in kind.keys and not {"line_temperature", "line_fluid"} & set(gauge.settings):
            said.append(
                (
                    gauge.name,
                    "The connecting lines of {gauge} are taken as full of the flowing fluid at the run's temperature.",
                )
            )
        if kind.limbs and not {"left_bore", "right_bore"} & set(gauge.settings):
            said.append(
                (
                    gauge.name,
                    "The limbs of {gauge} are taken as of one bore, so that their capillary rises cancel.",
                )
            )
    ledger.assumptions.extend(told_once(said))
    if runs.referenced:
        ledger.assumptions.append(
            "What the reference gauge read above its mean of the run was taken off every reading beside it, so that a change "
            "during the run does not bend the line; its own scatter counts in each."
        )


def unstated_elevations(gauges: Iterable[Gauge]) -> list[str]:
    """Return the cautions on fixed ends of legs whose elevation has no stated uncertainty."""
    said = []
    for gauge in gauges:
        # The end of one leg is the start of the next; the last one ends open, or at a tap.
        ends = list(itertools.pairwise(gauge.legs))
        bare = [leg.end for leg, after in ends if _fixed(leg.end) and not (leg.end_u or after.start_u)]
        if gauge.legs and "downstream" not in gauge.settings:
            bare += [leg.end for leg in gauge.legs[-1:] if _fixed(leg.end) and not leg.end_u]
        if bare:
            listed = " and ".join(f"{end:g} m" for end in bare)
            said.append(
                (
                    gauge.name,
                    f"The uncertainty of the fixed elevation{'s' * (len(bare) > 1)} of {{gauge}} ({listed}) is not stated: it "
                    "contributes nothing to the results.",
                )
            )
    return told_once(said)


def _fixed(end: float | str) -> bool:
    return not isinstance(end, str)


def holds_mercury(gauge: Gauge) -> bool:
    """Return whether there is mercury in a gauge or its lines."""
    named = {
        gauge.settings.get("line_fluid"),
        gauge.settings.get("gauge_fluid"),
        *(leg.fluid for leg in gauge.legs),
    }
    return any("mercury" in str(name).casefold() for name in named)
