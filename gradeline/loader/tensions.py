"""Whether the surface tension is known wherever a capillary rise is worked out from a bore."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from gradeline.gauge_kinds import GaugeKind
from gradeline.loader.document import NAME, GaugeTable
from gradeline.loader.ledger import Ledger
from gradeline.survey import Fluid

__all__ = ["check_tension"]

#: A fluid above the limbs that is lighter, kg/m³, is a gas, and water stands against it as against air.
_GAS = 20.0
_REMEDY = 'add it, such as surface_tension = "0.03 N/m"'


def check_tension(ledger: Ledger, gauge: GaugeTable, kind: GaugeKind, fluid: Fluid | None) -> None:
    """Note a bore whose capillary rise goes with a surface tension that nobody stated: only that of water is known.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    gauge : GaugeTable
        Its keys.
    kind : GaugeKind
        What they mean.
    fluid : Fluid or None
        The flowing fluid; None where it is at fault.
    """
    values = gauge.values or {}
    if fluid is None or values.get("surface_tension") is not None:
        return
    # what columns and limbs hold
    held = str(values.get("line_fluid") or fluid.name)
    if values.get("bore") is not None and held != "water":
        ledger.problem(
            NAME,
            None,
            f"gauge.{gauge.name}.bore",
            f"the capillary rise in the tube goes with the surface tension of {held}, which is not known; {_REMEDY}, or take "
            "bore away where the rise is taken off already or is too small to count",
        )
    if kind.fluid_side != "lighter" or not _unequal(values):
        return
    above = str(values.get("gauge_fluid") or "air")
    density = values.get("gauge_fluid_density")
    gas = above == "air" if density is None else density.value < _GAS
    if held != "water" or not gas:
        ledger.problem(
            NAME,
            None,
            f"gauge.{gauge.name}.left_bore",
            f"with unequal bores the capillary rises do not cancel, and the surface tension between {held} and {above} is not "
            f"known; {_REMEDY}",
        )


def _unequal(values: Mapping[str, Any]) -> bool:
    """Whether the limbs have two bores."""
    bores = [values.get(key) for key in ("left_bore", "right_bore")]
    return all(one is not None for one in bores) and bores[0].value != bores[1].value  # type: ignore[union-attr]  # none is None here
