"""Spreads blocks over threads of this process.

The unit of work is one block: a function of the scene's work and the block that gives back encoded
tiles. Its result goes to ``sink`` in this process as soon as it is there, so that memory is bounded
by the blocks in flight, whatever the raster's size. Several scenes may share the threads.
"""

from __future__ import annotations

import os
import threading
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from typing import Any, Protocol, TypeVar

import dask.threaded

from groundglow.run.access.retry import StoppedError

Work = TypeVar("Work")
Item = TypeVar("Item")
Result = TypeVar("Result")


class Scheduler(Protocol):
    """Runs ``function(work, item)`` for every item and hands each result to ``sink``, one at a time."""

    def spread(
        self,
        function: Callable[[Any, Any], Any],
        work: object,
        items: Sequence[Any],
        sink: Callable[[Any], None],
    ) -> None:
        """Return when every result has been handed over; the first error is raised."""


def available_cores() -> int:
    """Cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


class InTurn:
    """One item after another in the calling thread, as a worker of a cluster does it."""

    workers = 1

    def spread(
        self,
        function: Callable[[Work, Item], Result],
        work: Work,
        items: Sequence[Item],
        sink: Callable[[Result], None],
    ) -> None:
        """See :class:`Scheduler`."""
        for item in items:
            sink(function(work, item))


class Threads:
    """Dask's threaded scheduler in this process.

    Parameters
    ----------
    workers : int, optional
        Number of threads; default: the cores this process may use.
    """

    def __init__(self, workers: int | None = None) -> None:
        self.workers = workers or available_cores()
        self._pool = ThreadPoolExecutor(self.workers, thread_name_prefix="groundglow")
        self._stopped = threading.Event()

    def spread(
        self,
        function: Callable[[Work, Item], Result],
        work: Work,
        items: Sequence[Item],
        sink: Callable[[Result], None],
    ) -> None:
        """See :class:`Scheduler`.

        Raises
        ------
        StoppedError
            After :meth:`stop`.
        """
        lock = threading.Lock()
        failed = threading.Event()

        def guarded(item: Item) -> Result | None:
            # After a failure or a stop the blocks still queued must end at once.
            return None if failed.is_set() or self._stopped.is_set() else function(work, item)

        def deliver(result: Result | None) -> None:
            if result is not None and not failed.is_set():
                with lock:
                    sink(result)

        graph: dict[tuple[str, int], tuple[Callable[..., object], object]] = {}
        for index, item in enumerate(items):
            graph["block", index] = (partial(guarded, item),)  # type: ignore[assignment]
            graph["sink", index] = (deliver, ("block", index))
        try:
            dask.threaded.get(graph, [("sink", index) for index in range(len(items))], pool=self._pool)
        finally:
            failed.set()
            with lock:
                # Whoever delivers now has finished before the caller closes what the sink writes to.
                pass
        if self._stopped.is_set():
            raise StoppedError("the run was stopped")

    def stop(self) -> None:
        """Let everything under way end at its next block."""
        self._stopped.set()

    def close(self) -> None:
        """Wait for the blocks under way and end the threads."""
        self._stopped.set()
        self._pool.shutdown(wait=True, cancel_futures=True)
