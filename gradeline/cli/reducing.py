"""`gradeline reduce`: every survey, and what is told of each."""

from __future__ import annotations

from collections.abc import Generator, Mapping, Sequence
from contextlib import closing, nullcontext
from pathlib import Path
from typing import Any, Literal

import typer

from gradeline.cli.many.choices import Choices, reduced
from gradeline.cli.many.orders import Done, Order
from gradeline.cli.many.printed import Records
from gradeline.cli.outcome import INTERRUPTED, NOT_WRITTEN, WRONG_USE
from gradeline.cli.progress import Bar, bar
from gradeline.errors import OutputError, UsageError

__all__ = ["Choices", "reduce_surveys", "reduced", "targets_of"]


def reduce_surveys(
    surveys: Sequence[Path],
    targets: Sequence[Path | None],
    choices: Choices,
    *,
    formats: tuple[str, ...],
    overwrite: bool,
    as_json: bool,
    units: Literal["si", "us"] = "si",
    paper: Literal["a4", "letter"] = "a4",
    jobs: int | None = None,
    scheduler: str | None = None,
    summary: Path | None = None,
) -> int:
    """Reduce surveys, write their reports and tell what was found.

    Parameters
    ----------
    surveys : sequence of Path
        One is told in full, several in a line each, in the order given.
    targets : sequence of Path or None
        Where the results of each go; None: nowhere.
    choices : Choices
        How to reduce.
    formats, overwrite, paper
        As `gradeline.report.write` takes them.
    as_json : bool
        Whether the results go to stdout as JSON instead.
    units : {"si", "us"}
        Units of the reader.
    jobs : int, optional
        Surveys at once, a process each where it is above 1; by default one for each core that may be used.
    scheduler : str, optional
        Address of a Dask scheduler that hands them to its workers instead.
    summary : Path, optional
        Where the summary over all surveys goes, .csv or .parquet.

    Returns
    -------
    int
        The highest exit code.
    """
    several = len(surveys) > 1
    orders = [
        Order(
            source,
            target,
            choices,
            formats,
            overwrite=overwrite,
            units=units,
            paper=paper,
            several=several,
            as_json=as_json,
            summary=summary is not None,
        )
        for source, target in zip(surveys, targets, strict=True)
    ]
    codes: list[int] = []
    rows: list[Mapping[str, Any]] = []
    with bar(len(surveys)) as shown, Records() if as_json else nullcontext() as records:
        try:
            if summary is not None:
                from gradeline.cli.many.summary import check_summary, write_summary  # noqa: PLC0415 (seldom needed)

                check_summary(summary, overwrite=overwrite)
            with closing(_carried_out(orders, jobs, scheduler, shown)) as all_done:
                for order, done in zip(orders, all_done, strict=True):
                    _tell(shown, order, done)
                    if records is not None and done.record is not None:
                        records.add(done.record)
                    codes.append(done.code)
                    rows.extend(done.rows)
            if summary is not None:
                write_summary(summary, rows)
        except KeyboardInterrupt:
            shown.tell(_interrupted(codes, len(surveys), several=several), err=True)
            return INTERRUPTED
        except (UsageError, OutputError) as error:
            shown.tell(str(error), err=True)
            codes.append(NOT_WRITTEN if isinstance(error, OutputError) else WRONG_USE)
        else:
            if several:
                count = codes.count(0)
                where = _where(targets, summary) if count else ""
                shown.tell(f"{count} of {len(surveys)} surveys reduced{where}", err=True)
    return max(codes)


def _carried_out(
    orders: Sequence[Order], jobs: int | None, scheduler: str | None, shown: Bar
) -> Generator[Done, None, None]:
    """What became of each, by whichever way was asked for."""
    if scheduler is not None:
        from gradeline.cli.many.cluster import on_cluster  # noqa: PLC0415 (loaded when asked for: start-up time)

        return on_cluster(orders, scheduler, shown)
    from gradeline.cli.many.workers import cores, in_turn, in_workers  # noqa: PLC0415 (loaded when asked for: start-up time)

    at_once = min(jobs if jobs is not None else cores(), len(orders))
    return in_workers(orders, at_once, shown) if at_once > 1 else in_turn(orders, shown)


def _tell(shown: Bar, order: Order, done: Done) -> None:
    for line in done.messages:
        shown.tell(line, err=True)
    if done.told is not None:
        shown.tell(done.told)
    if done.code == 0 and order.target is not None and not order.several:
        shown.tell(f"Written to {_page(order.target, order.formats)}", err=True)


def _interrupted(codes: Sequence[int], count: int, *, several: bool) -> str:
    if not several:
        return "interrupted; nothing was written"
    return (
        f"interrupted: {codes.count(0)} of {count} surveys told above are reduced, each written whole or not at all; the "
        "others were left as they were, and no summary was written"
    )


def _where(targets: Sequence[Path | None], summary: Path | None) -> str:
    folders = {target.parent for target in targets if target is not None}
    said = f"; summary in {summary}" if summary is not None else ""
    if not folders:
        return said
    return (f"; results in {folders.pop()}" if len(folders) == 1 else "; results beside each") + said


def _page(target: Path, formats: tuple[str, ...]) -> Path:
    for name in ("html", "pdf"):
        if name in formats:
            return target / f"report.{name}"
    return target


def targets_of(surveys: Sequence[Path], out: Path | None) -> list[Path]:
    """Return where the results of each survey go.

    Raises
    ------
    typer.BadParameter
        Where two surveys of one name would go to one folder.
    """
    if out is None:
        return [
            source.with_name(f"{source.stem}_reduction") if source.is_file() else source / "reduction"
            for source in surveys
        ]
    if len(surveys) == 1:
        return [out]
    targets = [out / (source.stem if source.is_file() else source.resolve().name) for source in surveys]
    taken: set[Path] = set()
    for target in targets:
        if target in taken:
            raise typer.BadParameter(
                f"two surveys are called {target.name!r}; reduce them to different --out"
            )
        taken.add(target)
    return targets
