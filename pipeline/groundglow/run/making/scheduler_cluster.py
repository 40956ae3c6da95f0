"""Spreads scenes or blocks over a Dask cluster.

A small scene is one piece of work: a worker plans it, makes its layers and writes its folder, and what
comes back is a few hundred bytes. A large one is spread by blocks, whose encoded tiles come back
to the one writer. Either way no worker needs anything but the inputs, and results are the same bytes.
"""

from __future__ import annotations

import contextlib
import threading
import weakref
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import CancelledError
from typing import Any, TypeVar

from groundglow.errors import ConfigError, InputError
from groundglow.run.access.retry import LostWorkerError, StoppedError
from groundglow.run.making.scheduler import available_cores

Work = TypeVar("Work")
Item = TypeVar("Item")
Result = TypeVar("Result")

# Blocks submitted ahead to each thread of a cluster: enough to hide the way there and back.
_AHEAD = 3
_RETRIES = 2
_TIMEOUT = 15
# A worker makes and drops arrays of a megabyte all the time. Dask's default hands each back to the system at
# once, and the same scene takes a third more processor time.
_MEMORY = {"MALLOC_TRIM_THRESHOLD_": str(256 << 20), "MALLOC_MMAP_THRESHOLD_": str(32 << 20)}


class Cluster:
    """An existing Dask cluster, or one of local processes.

    Parameters
    ----------
    address : str
        ``tcp://host:port`` of a running scheduler, or ``processes`` / ``processes:N`` for a
        local cluster of N single-thread processes, started by spawning.

    Raises
    ------
    ConfigError
        If the number of processes is not one.
    InputError
        If there is no scheduler at the address, or the cluster's package is not installed.
    """

    def __init__(self, address: str) -> None:
        try:
            from distributed import Client  # noqa: PLC0415  (costs a second to import)
        except ImportError as error:
            raise InputError(
                "a Dask cluster needs the package 'distributed'",
                where="--scheduler",
                remedy="Install it with: pip install 'groundglow[cluster]'",
            ) from error
        self._local = _local_cluster(address) if address.split(":", maxsplit=1)[0] == "processes" else None
        self._stopped = threading.Event()
        self._live: weakref.WeakSet[Any] = weakref.WeakSet()
        try:
            self.client = Client(self._local or address, timeout=_TIMEOUT)
        except (OSError, TimeoutError, ValueError) as error:
            raise InputError(
                f"no Dask scheduler answers at {address}",
                where="--scheduler",
                remedy="Check the address and that the scheduler is running",
            ) from error

    @property
    def workers(self) -> int:
        """Threads of the cluster now; at least one."""
        return max(1, sum(int(threads) for threads in self.client.nthreads().values()))

    def call(self, function: Callable[..., Result], *arguments: object) -> Result:
        """Run one function on any worker and wait for it.

        Raises
        ------
        LostWorkerError
            If worker after worker dies over it.
        StoppedError
            After :meth:`stop`.
        """
        with self._losses():
            result: Result = self._submit(function, *arguments).result()
        return result

    def spread(
        self,
        function: Callable[[Work, Item], Result],
        work: Work,
        items: Sequence[Item],
        sink: Callable[[Result], None],
    ) -> None:
        """See :class:`groundglow.run.making.scheduler.Scheduler`.

        Raises
        ------
        LostWorkerError
            If worker after worker dies over the same block.
        StoppedError
            After :meth:`stop`.
        """
        from distributed import as_completed  # noqa: PLC0415  (see above)

        waiting = iter(items)
        with self._losses():
            shared = self.client.scatter(work, broadcast=True, hash=False)
            running = as_completed(with_results=True, raise_errors=True)

            def submit() -> None:
                for item in waiting:
                    running.add(self._submit(function, shared, item))
                    return

            for _ in range(_AHEAD * self.workers):
                submit()
            for future, result in running:
                if self._stopped.is_set():
                    raise StoppedError("the run was stopped")
                sink(result)
                future.release()
                submit()

    def stop(self) -> None:
        """Give up everything under way."""
        self._stopped.set()
        self.client.cancel(list(self._live), force=True)

    def close(self) -> None:
        """Leave the cluster; a local one ends."""
        self.client.close()
        if self._local is not None:
            self._local.close()

    def _submit(self, function: Callable[..., Any], *arguments: object) -> Any:
        if self._stopped.is_set():
            raise StoppedError("the run was stopped")
        future = self.client.submit(function, *arguments, pure=False, retries=_RETRIES)
        self._live.add(future)
        return future

    @contextlib.contextmanager
    def _losses(self) -> Iterator[None]:
        """Say in our words what becomes of work whose workers die, or that is given up."""
        from distributed.scheduler import KilledWorker  # noqa: PLC0415  (see above)

        try:
            yield
        except KilledWorker as error:
            raise LostWorkerError(
                "worker after worker of the cluster died over the same piece of work",
                where="--scheduler",
                remedy="Most likely memory ran out: give the workers more, or set a smaller run.block",
            ) from error
        except CancelledError as error:
            if self._stopped.is_set():
                raise StoppedError("the run was stopped") from error
            raise LostWorkerError("the cluster gave the work up", where="--scheduler") from error
        except OSError as error:
            raise LostWorkerError(
                f"the connection to the cluster broke ({error})", where="--scheduler"
            ) from error


def _local_cluster(address: str) -> Any:
    from distributed import LocalCluster  # noqa: PLC0415  (see above)

    text = address.partition(":")[2]
    if text and (not text.isdecimal() or not 1 <= int(text) <= 256):
        raise ConfigError(
            f"{text!r} is not a number of processes", where="--scheduler", remedy="For example: processes:4"
        )
    count = int(text) if text else available_cores()
    return LocalCluster(
        n_workers=count, threads_per_worker=1, dashboard_address="127.0.0.1:0", processes=True, env=_MEMORY
    )
