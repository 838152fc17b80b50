"""The engine that reads loggers' files: DuckDB, held to little memory, away from the network and from the disk."""

from __future__ import annotations

import os
import tempfile
import threading
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

__all__ = ["MEMORY", "Progress", "cores", "engine", "fetched", "plain_path", "quoted"]

#: What the engine may take of memory.
MEMORY = "500MB"

#: Is told the share of the file that was read, 0 to 1.
Progress = Callable[[float], None]

_PATTERN = frozenset("*?[]{}")
_LOOK = 0.1


def cores() -> int:
    """Return how many cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else (os.cpu_count() or 1)


@contextmanager
def engine(threads: int | None = None) -> Iterator[DuckDBPyConnection]:
    """Open an engine of its own that fetches nothing and writes nothing.

    Parameters
    ----------
    threads : int or None
        Cores that it may use; None: all that this process may.
    """
    import duckdb  # noqa: PLC0415 (loaded when asked for: start-up time)

    connection = duckdb.connect(
        config={
            "memory_limit": MEMORY,
            "threads": threads or cores(),
            "temp_directory": "",
            "autoinstall_known_extensions": False,
            "autoload_known_extensions": False,
            "allow_community_extensions": False,
        }
    )
    try:
        for setting in (
            "enable_progress_bar = true",
            "enable_progress_bar_print = false",
            "TimeZone = 'UTC'",
        ):
            connection.execute(f"SET {setting}")
        yield connection
    finally:
        connection.close()


def fetched(
    connection: DuckDBPyConnection, query: str, progress: Progress | None = None
) -> Mapping[str, Any]:
    """Return the columns of a query as arrays, NaN or 0 for a missing number, and tell how far it is."""
    found: dict[str, Any] = {}
    failed: list[BaseException] = []

    def run() -> None:
        try:
            found.update(connection.execute(query).fetchnumpy())
        except BaseException as error:  # handed on to the caller's thread
            failed.append(error)

    worker = threading.Thread(target=run, daemon=True)
    worker.start()
    try:
        while worker.is_alive():
            worker.join(_LOOK)
            share = connection.query_progress()
            if progress is not None and share >= 0:
                progress(min(share / 100.0, 1.0))
    except BaseException:
        connection.interrupt()
        worker.join()
        raise
    if failed:
        raise failed[0]
    return found


@contextmanager
def plain_path(path: Path) -> Iterator[str]:
    """Give the path of a file without signs that the engine would take for a pattern."""
    whole = str(path.resolve())
    if not _PATTERN & set(whole):
        yield whole
        return
    with tempfile.TemporaryDirectory() as folder:
        link = Path(folder) / f"record{path.suffix}"
        link.symlink_to(whole)
        yield str(link)


def quoted(text: str, mark: str = "'") -> str:
    """Return a text as one literal (or, with another mark, one name) of a query.

    Examples
    --------
    >>> quoted("it's")
    "'it''s'"
    """
    return mark + text.replace(mark, mark * 2) + mark
