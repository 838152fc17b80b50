"""Whether the gauges that ``[flow]`` names go with its meter, its fluids and the line."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

from gradeline.loader.document import NAME, Document
from gradeline.loader.flow_gauges import TAPPINGS
from gradeline.loader.gauges import check_gauges
from gradeline.loader.ledger import Ledger
from gradeline.loader.line import check_gauge_temperatures, check_given_fluid
from gradeline.survey import Fluid, Tap

__all__ = ["check_flow_gauges"]


def check_flow_gauges(
    ledger: Ledger,
    document: Document,
    fluid: Fluid | None,
    taps: Iterable[Tap],
    temperatures: list[float],
) -> None:
    """Note every key of the flow's gauges that does not fit the tappings, the fluids or the other keys.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    document : Document
        With the gauges that ``[flow]`` names.
    fluid : Fluid or None
        The flowing fluid; None where it is at fault.
    taps : iterable of Tap
        Of the line.
    temperatures : list of float
        Of the runs, K.
    """
    if not document.flow_gauges:
        return
    rise = 0.0 if document.flow is None or document.flow.gauges is None else document.flow.gauges.rise.value
    apart = replace(document, gauges=document.flow_gauges)
    tappings = [Tap(TAPPINGS[0], 0.0), Tap(TAPPINGS[1], 1.0, elevation=rise)]
    check_gauges(ledger, apart, fluid, tappings, temperatures)
    if fluid is not None:
        check_gauge_temperatures(ledger, apart, fluid, temperatures)
        check_given_fluid(ledger, apart, fluid)
    named = {tap.name for tap in taps}
    columns = {} if document.flow is None or document.flow.gauges is None else document.flow.gauges.columns
    for name in sorted((named & set(columns)) | (named & set(document.flow_gauges))):
        ledger.problem(
            NAME,
            None,
            f"gauge.{columns[name].name if name in columns else name}",
            f"a tap is called {name!r}, which names a column of the flow's gauge as well; call one of them otherwise",
        )
