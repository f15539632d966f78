"""Several variants at once: one worker thread each, stopped within a block's time by Ctrl-C or by a failure."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import FIRST_EXCEPTION, Future, ThreadPoolExecutor, wait
from typing import TypeVar

Item = TypeVar("Item")
Made = TypeVar("Made")

Report = Callable[[float], None]
"""Called with the share of the work that is done, 0 to 1, from the thread that started it."""

LOOK_EVERY = 0.1
"""Seconds between two looks at the workers: how late a Ctrl-C or a progress bar may be."""


class HaltedError(Exception):
    """Raised in a worker when the work has been called off."""


class Tally:
    """Counts what workers have done, and lets them know when to stop."""

    def __init__(self, total: float) -> None:
        self._total, self._done = max(total, 1.0), 0.0
        self._lock = threading.Lock()
        self._halt = threading.Event()

    def advance(self, amount: float) -> None:
        """Called by a worker after each block; raises ``HaltedError`` when the work has been called off."""
        if self._halt.is_set():
            raise HaltedError
        with self._lock:
            self._done += amount

    def halt(self) -> None:
        """Call the work off."""
        self._halt.set()

    @property
    def share(self) -> float:
        """How much is done, 0 to 1."""
        return min(1.0, self._done / self._total)


def in_threads(
    work: Callable[[Item], Made], items: Iterable[Item], threads: int, tally: Tally, report: Report
) -> Sequence[Made]:
    """``work`` of every item, in the items' order; the first failure or an interrupt ends the rest and is raised."""
    pool = ThreadPoolExecutor(max_workers=threads, thread_name_prefix="variant")
    try:
        futures = [pool.submit(work, item) for item in items]
        _watch(futures, tally, report)
        return [future.result() for future in futures]
    finally:
        tally.halt()
        pool.shutdown(wait=True, cancel_futures=True)


def _watch(futures: Sequence[Future[Made]], tally: Tally, report: Report) -> None:
    """Report until every worker is done; raise what the first failing one raised."""
    waiting: set[Future[Made]] = set(futures)
    while waiting:
        done, waiting = wait(waiting, timeout=LOOK_EVERY, return_when=FIRST_EXCEPTION)
        for future in done:
            future.result()
        report(tally.share)
