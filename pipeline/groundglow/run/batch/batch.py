"""Runs many scenes: skips what is up to date, tries again what may pass, and lets no scene stop another."""

from __future__ import annotations

import heapq
import itertools
import time
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ThreadPoolExecutor, wait
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Protocol
from uuid import uuid4

from groundglow.errors import GroundglowError
from groundglow.run.access.retry import pause
from groundglow.run.batch.entry import SceneEntry
from groundglow.run.batch.interruption import Interruption
from groundglow.run.batch.memory import Memory, Seen
from groundglow.run.batch.report import EventLog
from groundglow.run.batch.scene import SceneReply, SceneRequest, make_scene, up_to_date
from groundglow.run.config.job import Job
from groundglow.run.making.outcome import SceneOutcome
from groundglow.run.making.progress import Progress
from groundglow.run.making.scheduler import Threads
from groundglow.run.placing.catalogue import Catalogue
from groundglow.run.placing.place import Place


class Runner(Protocol):
    """Makes scenes, several at once."""

    workers: int
    # Scenes under way at once.
    at_once: int
    # Whether a worker that dies leaves what it built.
    may_leave: bool

    def make(self, request: SceneRequest, progress: Progress) -> SceneReply:
        """Make one scene; called from several threads."""

    def stop(self) -> None:
        """Let everything under way end soon."""

    def close(self) -> None:
        """Give back what was taken."""


class LocalRunner:
    """Scenes of this process, which share its threads.

    Parameters
    ----------
    workers : int, optional
        Threads; default: the cores this process may use.
    """

    def __init__(self, workers: int | None) -> None:
        self._threads = Threads(workers)
        self.workers = self._threads.workers
        # While one scene's last blocks are made, the next one is planned and its inputs are read.
        self.at_once = min(2, self.workers)
        self.may_leave = False

    def make(self, request: SceneRequest, progress: Progress) -> SceneReply:
        """See :class:`Runner`."""
        return make_scene(request, self._threads, progress)

    def stop(self) -> None:
        """See :class:`Runner`."""
        self._threads.stop()

    def close(self) -> None:
        """See :class:`Runner`."""
        self._threads.close()


@dataclass(frozen=True)
class BatchSettings:
    """What a batch needs to know besides its scenes.

    Attributes
    ----------
    job : Job
    folder : Path
        Folder of the job file.
    place : Place
        Where results go; locked by this process.
    job_digest : str
    force : bool
        Make again what is up to date.
    """

    job: Job
    folder: Path
    place: Place
    job_digest: str
    force: bool = False


@dataclass(order=True)
class _Attempt:
    """A scene to be tried, and from when on."""

    due: float
    order: int
    entry: SceneEntry = field(compare=False)
    number: int = field(compare=False, default=1)


class Batch:
    """One run over many scenes.

    Parameters
    ----------
    settings : BatchSettings
    runner : Runner
    log : EventLog
    memory : Memory
    catalogue : Catalogue
    progress : Progress
    interruption : Interruption
        Put off while a scene is being put in place.
    on_failure : callable
        Told of each scene that is given up.
    """

    def __init__(
        self,
        settings: BatchSettings,
        runner: Runner,
        log: EventLog,
        memory: Memory,
        catalogue: Catalogue,
        progress: Progress,
        interruption: Interruption,
        on_failure: Callable[[SceneOutcome], None],
    ) -> None:
        self._settings = settings
        self._runner = runner
        self._log = log
        self._memory = memory
        self._catalogue = catalogue
        self._progress = progress
        self._interruption = interruption
        self._on_failure = on_failure
        self._waiting: list[_Attempt] = []
        self._orders = itertools.count()
        self._owners: dict[str, str] = {}
        self._ended: list[tuple[int, SceneOutcome]] = []
        self.all_usage = True

    @property
    def outcomes(self) -> list[SceneOutcome]:
        """Of the scenes that have ended, in the job's order."""
        return [outcome for _, outcome in sorted(self._ended, key=lambda one: one[0])]

    def run(self, entries: Iterable[SceneEntry]) -> None:
        """Bring every scene to an outcome.

        Raises
        ------
        KeyboardInterrupt
            Passed on once everything under way has ended and left nothing half-written.
        """
        fresh = iter(entries)
        pool = ThreadPoolExecutor(self._runner.at_once, thread_name_prefix="scene")
        under_way: dict[Future[SceneReply], tuple[_Attempt, SceneRequest]] = {}
        try:
            while True:
                while len(under_way) < self._runner.at_once and (
                    attempt := self._next(fresh, bool(under_way))
                ):
                    request = self._request(attempt)
                    under_way[pool.submit(self._runner.make, request, self._progress)] = (attempt, request)
                if not under_way:
                    return
                finished, _ = wait(under_way, timeout=self._patience(), return_when=FIRST_COMPLETED)
                for future in finished:
                    with self._interruption.put_off():
                        self._settle(future.result(), *under_way.pop(future))
        except BaseException:
            self._runner.stop()
            raise
        finally:
            with self._interruption.put_off():
                pool.shutdown(wait=True, cancel_futures=True)
                for attempt, request in under_way.values():
                    self._log.tell("stopped", scene=attempt.entry.label, address=attempt.entry.address)
                    self._settings.place.discard(None, request.token)
                if self._runner.may_leave:
                    self._settings.place.recover()
                self._catalogue.write(always=True)

    def _next(self, fresh: Iterator[SceneEntry], busy: bool) -> _Attempt | None:
        """The next attempt to begin now; None where there is none, or none yet."""
        now = time.monotonic()
        if self._waiting and self._waiting[0].due <= now:
            return heapq.heappop(self._waiting)
        for entry in fresh:
            seen = None if self._settings.force else self._memory.recall(entry.address)
            if seen is None or not seen.still_true(self._settings.job_digest + entry.digest):
                return _Attempt(0.0, next(self._orders), entry)
            with self._interruption.put_off():
                self._found_unchanged(entry, seen)
        if self._waiting and not busy:
            time.sleep(max(self._waiting[0].due - now, 0.0))
            return heapq.heappop(self._waiting)
        return None

    def _patience(self) -> float | None:
        """How long to wait for scenes under way before looking at those to be tried again."""
        return max(self._waiting[0].due - time.monotonic(), 0.01) if self._waiting else None

    def _request(self, attempt: _Attempt) -> SceneRequest:
        settings = self._settings
        self._log.tell(
            "began", scene=attempt.entry.label, address=attempt.entry.address, attempt=attempt.number
        )
        return SceneRequest(
            attempt.entry, settings.job, settings.folder, settings.place, uuid4().hex[:12], settings.job_digest,
            force=settings.force,
        )  # fmt: skip

    def _found_unchanged(self, entry: SceneEntry, seen: Seen) -> None:
        attempt = _Attempt(0.0, next(self._orders), entry)
        request = self._request(attempt)
        self._log.tell("found up to date", scene=seen.name, address=entry.address)
        self._keep(self._owned(up_to_date(request, seen.name, seen.pixels)), attempt.order)

    def _settle(self, reply: SceneReply, attempt: _Attempt, request: SceneRequest) -> None:
        """Put a made scene in place, or decide what becomes of one that failed."""
        settings, entry = self._settings, attempt.entry
        if reply.outcome is None:
            raise AssertionError("a runner gave back a scene unmade")
        outcome = replace(reply.outcome, attempts=attempt.number)
        for event in reply.events:
            more = {key: value for key, value in event.items() if key not in ("event", "time")}
            self._log.tell(event["event"], at=event["time"], **({"scene": outcome.name} | more))
        if outcome.status == "failed" and reply.may_pass and attempt.number < settings.job.retry.attempts:
            again = pause(attempt.number, settings.job.retry.delay)
            self._log.tell("to be tried again", scene=outcome.name, reason=outcome.reason, pause=again)
            due = time.monotonic() + again
            heapq.heappush(self._waiting, _Attempt(due, attempt.order, entry, attempt.number + 1))
            return
        outcome = self._owned(outcome)
        if reply.built:
            outcome = self._put(outcome, reply.built)
        self.all_usage &= outcome.status != "failed" or reply.usage
        if reply.seen is not None and outcome.status not in ("failed", "left out"):
            self._memory.keep(
                entry.address, replace(reply.seen, outputs=settings.place.outputs(outcome.name))
            )
        self._keep(outcome, attempt.order)

    def _owned(self, outcome: SceneOutcome) -> SceneOutcome:
        """The outcome, or a failure where another description of this run has the scene's name."""
        if outcome.status in ("failed", "left out"):
            return outcome
        owner = self._owners.setdefault(outcome.name, outcome.address)
        if owner == outcome.address:
            return outcome
        return replace(
            outcome, status="failed", folder="",
            reason=f"its name {outcome.name!r} is that of another scene of this job ({owner})",
        )  # fmt: skip

    def _put(self, outcome: SceneOutcome, token: str) -> SceneOutcome:
        place = self._settings.place
        if outcome.status == "failed":
            place.discard(outcome.name, token)
            return outcome
        try:
            place.put(outcome.name, token, durable=self._settings.job.run.durable)
        except GroundglowError as error:
            return replace(outcome, status="failed", reason=str(error), folder="")
        self._log.tell("put in place", scene=outcome.name, folder=outcome.folder)
        return outcome

    def _keep(self, outcome: SceneOutcome, order: int) -> None:
        self._ended.append((order, outcome))
        if outcome.status in ("done", "nothing valid"):
            self._catalogue.add(outcome.name)
        if outcome.status == "failed":
            self._on_failure(outcome)
        self._log.tell(
            "ended", scene=outcome.name, status=outcome.status, reason=outcome.reason,
            seconds=round(outcome.seconds, 3), valid_percent=outcome.valid_percent, address=outcome.address,
            attempts=outcome.attempts,
        )  # fmt: skip
