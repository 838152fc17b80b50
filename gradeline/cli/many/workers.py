"""Surveys in worker processes: as many at once as there are cores, each told in its turn."""

from __future__ import annotations

import contextlib
import os
import signal
import threading
import time
from collections import deque
from collections.abc import Generator, Iterator, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from dataclasses import replace
from multiprocessing import active_children, get_context, parent_process
from multiprocessing.connection import wait as wait_for
from typing import Any

from gradeline.cli.many.leaving import leave
from gradeline.cli.many.one import carry_out, failed, load
from gradeline.cli.many.orders import Done, Order, Watcher

__all__ = ["cores", "in_turn", "in_workers"]

#: Surveys that may be done ahead of the one that is told next, for each worker: what bounds the lines that wait.
_AHEAD = 16
#: How long a worker may take to put away what it was at, s.
_GRACE = 10.0
_CRASHED = (
    "the process that reduced it ended without a word, and again when it was tried once more alone (killed, or out of "
    "memory); nothing was written. Reduce it by itself on a machine with more memory, or look what is unusual about it"
)


def cores() -> int:
    """Return how many processor cores this process may use."""
    count = getattr(os, "process_cpu_count", None)  # from Python 3.13 on
    if count is not None:
        return count() or 1
    allowed = getattr(os, "sched_getaffinity", None)
    return len(allowed(0)) if allowed is not None else os.cpu_count() or 1


def in_turn(orders: Sequence[Order], watcher: Watcher) -> Generator[Done, None, None]:
    """Carry out orders one after the other in this process."""
    for order in orders:
        watcher.begin(order.source.name)
        done = carry_out(order)
        watcher.end()
        yield done


def in_workers(orders: Sequence[Order], jobs: int, watcher: Watcher) -> Generator[Done, None, None]:
    """Carry out orders in worker processes; what became of each comes in the order given.

    A worker that dies takes nobody with it: the surveys that were under way are tried once more, each alone, and one
    whose worker dies again is told so.

    Parameters
    ----------
    orders : sequence of Order
        Any number; only a few more than there are workers are under way at any time.
    jobs : int
        How many workers.
    watcher : Watcher
        Hears what is begun and done.

    Yields
    ------
    Done
        One an order.
    """
    free = [order.is_free for order in orders]
    done: dict[int, Done] = {}
    waiting = deque(range(len(orders)))
    told = 0
    with _Pool(jobs) as pool, _Pool(1) as lone:
        running: dict[Future[Done], int] = {}
        while told < len(orders):
            while waiting and len(running) < jobs and waiting[0] - told < _AHEAD * jobs:
                place = waiting.popleft()
                watcher.begin(orders[place].source.name)
                running[pool.submit(orders[place])] = place
            ready, _ = wait(running, return_when=FIRST_COMPLETED)
            if any(isinstance(future.exception(), BrokenProcessPool) for future in ready):
                ready, _ = wait(running)  # the others under way are lost with it, or were done just before
            lost = []
            for future in ready:
                place = running.pop(future)
                if isinstance(future.exception(), BrokenProcessPool):
                    lost.append(place)
                else:
                    done[place] = future.result()
                    watcher.end()
            for place in sorted(lost):
                done[place] = lone.alone(orders[place], overwrite=free[place])
                watcher.end()
            while told in done:
                yield done.pop(told)
                told += 1


class _Pool:
    """Worker processes that are started when first needed, replaced when one dies, and gone at the end.

    Parameters
    ----------
    jobs : int
        How many.
    """

    def __init__(self, jobs: int) -> None:
        self._jobs = jobs
        self._executor: ProcessPoolExecutor | None = None

    def __enter__(self) -> _Pool:
        return self

    def submit(self, order: Order) -> Future[Done]:
        """Hand an order to a worker."""
        try:
            return self._submit(order)
        except BrokenProcessPool:  # found out only now; whoever was under way hears of it from its own future
            self._executor = None
            return self._submit(order)

    def _submit(self, order: Order) -> Future[Done]:
        if self._executor is None:
            # spawn: a forked copy of a process with threads may lock up, and not every system can fork
            self._executor = ProcessPoolExecutor(
                self._jobs, mp_context=get_context("spawn"), initializer=_begin_worker
            )
        with _deaf_to_interrupts():
            return self._executor.submit(_work, order)

    def alone(self, order: Order, *, overwrite: bool) -> Done:
        """Carry out an order once more, with no other beside it."""
        again = replace(order, overwrite=order.overwrite or overwrite)
        try:
            return self.submit(again).result()
        except BrokenProcessPool:
            self._executor = None
            return failed(order, _CRASHED)

    def __exit__(self, kind: Any, error: Any, trace: Any) -> None:
        if self._executor is None:
            return
        if kind is not None:  # interrupted: what is under way is put away, nothing more is begun
            self._executor.shutdown(wait=False, cancel_futures=True)
            _end_workers()
        self._executor.shutdown(wait=True, cancel_futures=True)


def _end_workers() -> None:
    """Ask the workers to leave, and end those that do not."""
    children = active_children()
    for child in children:
        child.terminate()
    until = time.monotonic() + _GRACE
    while time.monotonic() < until and any(child.is_alive() for child in children):
        time.sleep(0.02)
    for child in children:
        if child.is_alive():
            child.kill()


@contextlib.contextmanager
def _deaf_to_interrupts() -> Iterator[None]:
    """Start processes that Ctrl-C does not reach: it goes to all of a terminal's, and this one deals with it."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)


def _begin_worker() -> None:
    """What a worker does first: heed who started it, and import once what every survey needs."""
    os.environ.setdefault(
        "OPENBLAS_NUM_THREADS", "1"
    )  # read when numpy is loaded: the workers are the threads
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGTERM, leave)
    threading.Thread(target=_leave_with_parent, daemon=True).start()
    load()


def _work(order: Order) -> Done:
    """Carry out an order; asked to leave, leave when what was being written is whole."""
    try:
        return carry_out(order)
    except SystemExit:
        os._exit(1)  # nobody waits for an answer


def _leave_with_parent() -> None:
    """End with the process that started this one, however that ended."""
    parent = parent_process()
    if parent is None:
        return
    wait_for([parent.sentinel])
    os.kill(os.getpid(), signal.SIGTERM)
    time.sleep(_GRACE)
    os._exit(1)
