"""Surveys on a Dask cluster: the same calls, handed to its scheduler."""

from __future__ import annotations

import logging
import threading
import uuid
import warnings
from collections import deque
from collections.abc import Generator, Sequence
from dataclasses import replace
from importlib import import_module
from pathlib import Path
from typing import Any

from gradeline.cli.many.one import carry_out, failed
from gradeline.cli.many.orders import Done, Order, Watcher
from gradeline.errors import UsageError

__all__ = ["on_cluster"]

#: How long a scheduler may take to answer, s.
_PATIENCE = 10
#: Surveys handed over for each thread of the cluster: one under way and one that waits beside it.
_EACH = 2
#: A worker may have several threads; drawing and the thread pools of the linear algebra are those of the process.
_ONE_AT_A_TIME = threading.Lock()


def on_cluster(orders: Sequence[Order], address: str, watcher: Watcher) -> Generator[Done, None, None]:
    """Carry out orders on a cluster; what became of each comes in the order given.

    The scheduler gives the surveys of a worker that dies to another. The workers must find the surveys, and the folder
    of the results, under the same paths as the caller.

    Parameters
    ----------
    orders : sequence of Order
        Any number; only twice as many as the cluster has threads are handed over at any time.
    address : str
        Of the scheduler, such as ``tcp://10.0.0.5:8786``.
    watcher : Watcher
        Hears what is begun and done.

    Yields
    ------
    Done
        One an order.

    Raises
    ------
    UsageError
        Where ``distributed`` is not installed, or nobody answers.
    """
    try:
        distributed: Any = import_module("distributed")  # an extra
    except ImportError:
        raise UsageError(
            "--scheduler needs the package distributed, which is not installed; run pip install 'gradeline[cluster]', or "
            "leave --scheduler out and use --jobs"
        ) from None
    here = Path.cwd()
    client = _client(distributed, address)
    try:
        waiting = deque(enumerate(orders))
        places: dict[str, int] = {}
        done: dict[int, Done] = {}
        told, call = 0, uuid.uuid4().hex

        def hand_over() -> Any:
            place, order = waiting.popleft()
            watcher.begin(order.source.name)
            key = f"gradeline-reduce-{call}-{place}"
            places[key] = place
            # A worker may die between putting its results in place and saying so.
            there = replace(order, folder=here, overwrite=order.overwrite or order.is_free)
            return client.submit(_carry_out_there, there, key=key, pure=False)

        threads = sum(client.nthreads().values())
        finished = distributed.as_completed(
            [hand_over() for _ in range(min(_EACH * threads, len(waiting)))], loop=client.loop
        )
        for future in finished:
            place = places.pop(future.key)
            done[place] = _result(future, orders[place], address)
            future.release()
            watcher.end()
            if waiting:
                finished.add(hand_over())
            while told in done:
                yield done.pop(told)
                told += 1
    finally:
        client.close(timeout=_PATIENCE)  # what was handed over and not begun goes with it


def _client(distributed: Any, address: str) -> Any:
    """A client of the scheduler that answers in time and has workers."""
    for name in [*logging.root.manager.loggerDict, "asyncio", "tornado"]:
        if name.partition(".")[0] in {
            "distributed",
            "asyncio",
            "tornado",
        }:  # each part of it has a level of its own
            logging.getLogger(name).setLevel(logging.CRITICAL)  # what matters is told in our own words
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        try:
            client = distributed.Client(address, timeout=_PATIENCE, set_as_default=False)
        except (OSError, ValueError, ImportError, TypeError) as error:
            said = " ".join(str(error).split())[:160] or type(error).__name__
            raise UsageError(
                f"--scheduler {address}: no Dask scheduler answers there within {_PATIENCE} s ({said}); start one with `dask "
                "scheduler` and give the address that it prints, such as tcp://10.0.0.5:8786"
            ) from None
        try:
            client.wait_for_workers(1, timeout=_PATIENCE)
        except TimeoutError:
            client.close(timeout=_PATIENCE)
            raise UsageError(
                f"--scheduler {address}: the scheduler answers but has no workers; start some with `dask worker {address} "
                "--nthreads 1`"
            ) from None
    return client


def _result(future: Any, order: Order, address: str) -> Done:
    if future.status == "finished":
        done: Done = future.result()
        return done
    error = future.exception() if future.status == "error" else None
    why = " ".join(str(error).split())[:200] if error is not None else "it was lost with the scheduler"
    kind = f"{type(error).__name__}: " if error is not None else ""
    return failed(
        order,
        f"the cluster at {address} gave no result ({kind}{why}); look at its workers (they need gradeline, and the survey "
        "under the same path), or reduce the survey without --scheduler",
    )


def _carry_out_there(order: Order) -> Done:
    """What a worker of the cluster does."""
    with _ONE_AT_A_TIME:
        return carry_out(order)
