"""Spreads blocks over threads of this process or over a Dask cluster.

The unit of work is one block: a function of the scene's work and the block that gives back encoded
tiles. Its result goes to ``sink`` in this process as soon as it is there, so that memory is bounded
by the blocks in flight, whatever the raster's size.
"""

from __future__ import annotations

import os
import threading
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from typing import Any, Protocol, TypeVar

import dask.threaded

from groundglow.errors import GroundglowError, InputError

Work = TypeVar("Work")
Item = TypeVar("Item")
Result = TypeVar("Result")

# Blocks submitted ahead to each thread of a cluster: enough to hide the way there and back.
_AHEAD = 3
_RETRIES = 2


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


class Threads:
    """Dask's threaded scheduler in this process.

    Parameters
    ----------
    workers : int, optional
        Number of threads; default: the cores this process may use.
    """

    def __init__(self, workers: int | None = None) -> None:
        self.workers = workers or available_cores()

    def spread(
        self,
        function: Callable[[Work, Item], Result],
        work: Work,
        items: Sequence[Item],
        sink: Callable[[Result], None],
    ) -> None:
        """See :class:`Scheduler`."""
        lock = threading.Lock()
        stopped = threading.Event()

        def guarded(item: Item) -> Result | None:
            # After a failure or an interrupt the tasks still queued must end at once.
            return None if stopped.is_set() else function(work, item)

        def deliver(result: Result | None) -> None:
            if result is not None:
                with lock:
                    sink(result)

        graph: dict[tuple[str, int], tuple[Callable[..., object], object]] = {}
        for index, item in enumerate(items):
            graph["block", index] = (partial(guarded, item),)  # type: ignore[assignment]
            graph["sink", index] = (deliver, ("block", index))
        pool = ThreadPoolExecutor(self.workers, thread_name_prefix="groundglow")
        try:
            dask.threaded.get(graph, [("sink", index) for index in range(len(items))], pool=pool)
        finally:
            stopped.set()
            pool.shutdown(wait=True, cancel_futures=True)


class Cluster:
    """An existing Dask cluster, or one of local processes.

    Parameters
    ----------
    address : str
        ``tcp://host:port`` of a running scheduler, or ``processes`` / ``processes:N`` for a
        local cluster of N single-thread processes, started by spawning.

    Raises
    ------
    InputError
        If there is no scheduler at the address, or the cluster's package is not installed.
    """

    def __init__(self, address: str) -> None:
        try:
            from distributed import Client, LocalCluster  # noqa: PLC0415  (costs a second to import)
        except ImportError as error:
            raise InputError(
                "a Dask cluster needs the package 'distributed'",
                where="--scheduler",
                remedy="Install it with: pip install 'groundglow[cluster]'",
            ) from error
        self._local = None
        if address.split(":")[0] == "processes":
            count = int(address.partition(":")[2] or available_cores())
            self._local = LocalCluster(n_workers=count, threads_per_worker=1, dashboard_address=None)
            address = self._local.scheduler_address
        try:
            self.client = Client(address, timeout=15)
        except (OSError, TimeoutError, ValueError) as error:
            raise InputError(
                f"no Dask scheduler answers at {address}",
                where="--scheduler",
                remedy="Check the address and that the scheduler is running",
            ) from error

    @property
    def workers(self) -> int:
        """Threads of the cluster now."""
        return max(1, sum(self.client.nthreads().values()))

    def spread(
        self,
        function: Callable[[Work, Item], Result],
        work: Work,
        items: Sequence[Item],
        sink: Callable[[Result], None],
    ) -> None:
        """See :class:`Scheduler`."""
        from distributed import as_completed  # noqa: PLC0415  (see above)
        from distributed.scheduler import KilledWorker  # noqa: PLC0415  (see above)

        waiting = iter(items)
        shared = self.client.scatter(work, broadcast=True, hash=False)
        running = as_completed(with_results=True, raise_errors=True)

        def submit() -> None:
            for item in waiting:
                running.add(self.client.submit(function, shared, item, pure=False, retries=_RETRIES))
                return

        for _ in range(_AHEAD * self.workers):
            submit()
        try:
            for future, result in running:
                sink(result)
                future.release()
                submit()
        except KilledWorker as error:
            raise GroundglowError(
                "a worker of the cluster died again and again on the same block",
                where="--scheduler",
                remedy="Give the workers more memory or set a smaller run.block",
            ) from error

    def close(self) -> None:
        """Leave the cluster; a local one ends."""
        self.client.close()
        if self._local is not None:
            self._local.close()
