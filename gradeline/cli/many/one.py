"""One survey of many, in whatever process: reduced, written, and put into the few words that go back."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from gradeline.cli.many.choices import reduced
from gradeline.cli.many.leaving import held
from gradeline.cli.many.orders import Done, Order
from gradeline.cli.outcome import UNKNOWN, Outcome, attempt

if TYPE_CHECKING:
    from gradeline.reduction import Reduction

__all__ = ["carry_out", "failed", "load"]

#: A survey done: what is told of it, its reduction as JSON, its rows of the summary.
_Words = tuple[str | None, str | None, tuple[Mapping[str, Any], ...]]


def load() -> None:
    """Import what every survey needs, once, so that the first is no slower than the others."""
    import gradeline.loader  # noqa: PLC0415 (loaded when asked for: start-up time)
    import gradeline.reduction  # noqa: PLC0415 (loaded when asked for: start-up time)
    import gradeline.report.output  # noqa: F401, PLC0415 (loaded when asked for: start-up time)


def carry_out(order: Order) -> Done:
    """Reduce a survey, write its results, and say what became of it.

    Parameters
    ----------
    order : Order
        What is asked.

    Returns
    -------
    Done
        Never an exception of gradeline's own; of several surveys never any.
    """
    outcome = attempt(lambda: _words(order), order.source, contain=order.several)
    if outcome.code:
        return _failure(order, outcome)
    told, reduction, rows = outcome.result
    record = None
    if order.as_json:
        written = None if order.target is None else str(order.target)
        record = _record(outcome, written, json.loads(reduction))
    return Done(order.source, 0, told=told, record=record, rows=rows)


def failed(order: Order, message: str, code: int = UNKNOWN) -> Done:
    """Return what is told of a survey that never came back."""
    return _failure(order, Outcome(order.source, code, message=message))


def _failure(order: Order, outcome: Outcome) -> Done:
    rows: tuple[Mapping[str, Any], ...] = ()
    if order.summary:
        from gradeline.report import failed_row  # noqa: PLC0415 (loaded when asked for: start-up time)

        problem = outcome.message or "; ".join(map(str, outcome.problems))
        rows = (failed_row(str(order.source), outcome.code, problem),)
    record = _record(outcome, None, None) if order.as_json else None
    return Done(order.source, outcome.code, tuple(outcome.lines()), record=record, rows=rows)


def _words(order: Order) -> _Words:
    reduction = reduced(
        order.at(order.source),
        order.choices,
        named=None if order.folder is None else order.source,
        results_alone=order.results_alone,
        several=order.several,
    )
    if order.target is not None:
        from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.report import write  # noqa: PLC0415 (loaded when asked for: start-up time)

        with held():
            write(
                reduction,
                order.at(order.target),
                formats=order.formats,
                overwrite=order.overwrite,
                display=DISPLAYS[order.units],
                paper=order.paper,
            )
    rows: tuple[Mapping[str, Any], ...] = ()
    if order.summary:
        from gradeline.report import summary_rows  # noqa: PLC0415 (loaded when asked for: start-up time)

        rows = summary_rows(reduction, str(order.source))
    if order.as_json:
        from gradeline.report.output import program_version  # noqa: PLC0415 (loaded when asked for: start-up time)
        from gradeline.report.record import as_json  # noqa: PLC0415 (loaded when asked for: start-up time)

        return None, as_json(reduction, program_version()).decode("utf-8"), rows
    return _told(reduction, order), None, rows


def _told(reduction: Reduction, order: Order) -> str:
    from gradeline.quantities.printing import DISPLAYS  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report import one_line, terminal_summary  # noqa: PLC0415 (loaded when asked for: start-up time)

    display = DISPLAYS[order.units]
    if order.several:
        return f"{order.source}: {one_line(reduction, display)}"
    return terminal_summary(reduction, display)


def _record(outcome: Outcome, written_to: str | None, reduction: Any) -> str:
    from gradeline.cli.plain import outcome_record  # noqa: PLC0415 (loaded when asked for: start-up time)

    record = outcome_record(outcome, written_to=written_to, reduction=reduction)
    return json.dumps(record, indent=1, allow_nan=False)
