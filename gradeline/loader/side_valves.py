"""Side valves: whether the branches of ``[[side_valve]]`` were shut, so that all that was measured ran along the line."""

from __future__ import annotations

from collections.abc import Sequence

from gradeline.loader.document import NAME, Document
from gradeline.loader.ledger import Ledger
from gradeline.survey import SideValve, Tap

__all__ = ["build_side_valves", "state_side_valves"]

#: A method whose flow leaves by hydrants: every other way out of the line has to be shut.
_BY_HYDRANTS = "hydrant pitot"
_SAME_PLACE = 1e-6


def build_side_valves(
    ledger: Ledger, document: Document, taps: Sequence[Tap] | None
) -> tuple[SideValve, ...]:
    """Return the side valves in the order of the file; those at fault are left out and noted.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    document : Document
        Its side valves.
    taps : sequence of Tap or None
        In order of chainage, as the file gives it; None where their table is at fault.
    """
    found: list[SideValve] = []
    for place, table in enumerate(document.side_valves, start=1):
        if table is None:
            continue
        if any(table.name == other.name for other in found):
            ledger.problem(
                NAME,
                None,
                f"side_valve[{place}].name",
                f"another side valve is called {table.name!r}; give each its own name",
            )
            continue
        found.append(SideValve(table.name, table.state, _where(table.at, taps or ())))  # type: ignore[arg-type]  # the state was validated
    return tuple(found)


def _where(at: float | None, taps: Sequence[Tap]) -> str:
    """Where flow can leave, by the taps beside it."""
    if not taps:
        return ""
    if at is None:
        return f"between {taps[0].name} and {taps[-1].name}" if len(taps) > 1 else f"by {taps[0].name}"
    before = [tap.name for tap in taps if tap.chainage <= at + _SAME_PLACE]
    after = [tap.name for tap in taps if tap.chainage > at + _SAME_PLACE]
    if not before and not after:
        return ""  # no tap's chainage could be read, which is told
    if not before:
        return f"upstream of {after[0]}"
    return f"between {before[-1]} and {after[0]}" if after else f"downstream of {before[-1]}"


def state_side_valves(ledger: Ledger, valves: Sequence[SideValve], *, method: str) -> None:
    """Note which side valves were shut, and what follows where one was not, or where nobody said.

    Parameters
    ----------
    ledger : Ledger
        Takes assumptions and cautions.
    valves : sequence of SideValve
        As stated.
    method : str
        By which the flow was measured.
    """
    shut = [valve.name for valve in valves if valve.state == "shut"]
    if shut:
        ledger.assumptions.append(
            f"Side valves stated shut: {', '.join(shut)}; no flow is taken to leave the line there."
        )
    for valve in valves:
        if valve.state == "open":
            ledger.cautions.append(
                f"Side valve {valve.name!r} was open: flow may have left the line {valve.where}, and no off-take is reckoned "
                "for it. Shut it and repeat, or measure what it takes and state it as [[offtake]]."
            )
        elif valve.state == "unknown":
            ledger.cautions.append(
                f"Whether side valve {valve.name!r} was shut is not known: flow may have left the line {valve.where}. See to "
                "it and state it."
            )
    if method == _BY_HYDRANTS and not valves:
        ledger.cautions.append(
            "The flow was measured at hydrants: were all side valves shut? None is stated ([[side_valve]]); flow that left "
            "the line elsewhere is not in the measured one."
        )
