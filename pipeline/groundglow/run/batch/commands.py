"""What the commands do, once parsed: job file in, table or JSON and an exit code out."""

from __future__ import annotations

import json
import os
import sys
import time
from collections.abc import Iterable, Iterator
from contextlib import ExitStack, closing
from itertools import chain
from pathlib import Path

from groundglow.errors import ConfigError, InputError
from groundglow.run.access.retry import StoppedError
from groundglow.run.batch.batch import Batch, BatchSettings, LocalRunner, Runner
from groundglow.run.batch.entry import SceneEntry
from groundglow.run.batch.interruption import Interruption
from groundglow.run.batch.lists import wanted_scenes
from groundglow.run.batch.memory import Memory
from groundglow.run.batch.plan_lines import PlanSettings, plan_batch
from groundglow.run.batch.report import EventLog, begin_folder, last_measured, run_summary, write_report
from groundglow.run.batch.table import batch_plan_table, outcome_table
from groundglow.run.config.job import Job, read_job
from groundglow.run.making.outcome import SceneOutcome
from groundglow.run.making.progress import progress_for
from groundglow.run.making.scheduler import available_cores
from groundglow.run.placing.catalogue import Catalogue
from groundglow.run.placing.place import Place
from groundglow.run.placing.state import job_digest
from groundglow.run.placing.store import place_at

ALL_DONE, USAGE, NOTHING_DONE, SOME_FAILED = 0, 2, 3, 4
MEMORY = "seen.sqlite"


def run_job(
    path: Path,
    *,
    output: str | None,
    workers: int | None,
    scheduler: str,
    quiet: bool,
    as_json: bool,
    force: bool,
) -> int:
    """Run all scenes of a job and tell what came out.

    Parameters
    ----------
    path : Path
        The job file.
    output : str or None
        Where results go instead of the job's output.
    workers : int or None
        Threads instead of the job's.
    scheduler : str
        "threads", "processes[:N]" or the address of a Dask scheduler.
    quiet, as_json : bool
        No progress and no table; the report as JSON.
    force : bool
        Make again what is up to date.

    Returns
    -------
    int
        The exit code.

    Raises
    ------
    GroundglowError
        If the job cannot be followed, or nothing can be written; a :class:`StoppedError` if the run was
        asked to end, once nothing half-written is left and the report is written.
    """
    job = read_job(path)
    folder = path.parent if scheduler == "threads" else path.parent.absolute()
    entries = _first_known(wanted_scenes(job, folder))
    place = place_at(_output(job, folder, output))
    began = time.monotonic()
    interruption = Interruption()
    with ExitStack() as held:
        held.enter_context(place.locked())
        held.enter_context(interruption.heeded())
        runner = held.enter_context(closing(_runner(scheduler, workers or job.run.workers, place)))
        try:
            batch = _run_batch(
                held, job, folder, place, runner, interruption, entries, quiet=quiet, force=force, began=began
            )
        except KeyboardInterrupt:
            raise StoppedError("interrupted; nothing half-written was left") from None
    seconds = time.monotonic() - began
    outcomes = batch.outcomes
    if as_json:
        print(
            json.dumps(
                run_summary(outcomes, place.address, seconds, ended="complete", workers=runner.workers),
                indent=2,
            )
        )
    elif not quiet:
        print(outcome_table(outcomes, seconds) if outcomes else "no scene is wanted")
        print(f"\nLayers are in {place.address}")
    return _exit_code(outcomes, all_usage=batch.all_usage)


def plan_job(path: Path, *, output: str | None, as_json: bool, detailed: int) -> int:
    """Tell what a run of the job would do, and why.

    Parameters
    ----------
    path : Path
        The job file.
    output : str or None
        As for :func:`run_job`.
    as_json : bool
    detailed : int
        How many of the scenes to be made are opened for their grids; the others are counted.

    Returns
    -------
    int
        The exit code.

    Raises
    ------
    GroundglowError
        If the job or one of its scenes cannot be followed.
    """
    job = read_job(path)
    place = place_at(_output(job, path.parent, output))
    run_folder = place.run_folder()
    with closing(Memory(run_folder / MEMORY if run_folder else None, read_only=True)) as memory:
        settings = PlanSettings(
            job, path.parent, place, job_digest(job, path.parent), job.run.workers or available_cores(),
            last_measured(run_folder), detailed,
        )  # fmt: skip
        planned = plan_batch(wanted_scenes(job, path.parent), settings, memory)
    print(json.dumps(planned, indent=2) if as_json else batch_plan_table(planned))
    return ALL_DONE


def rebuild_catalogue(output: str) -> int:
    """Make the STAC collection of an output place anew from its folders.

    Returns
    -------
    int
        The exit code.

    Raises
    ------
    GroundglowError
        If the place does not exist, is in use, or cannot be written.
    """
    place = place_at(output)
    if "://" not in output and not Path(output).is_dir():
        raise InputError("there is no such folder", where=output)
    with place.locked():
        place.recover()
        count = Catalogue(place).rebuild()
    print(f"{count} scenes are in the collection of {place.address}")
    return ALL_DONE


def _run_batch(
    held: ExitStack,
    job: Job,
    folder: Path,
    place: Place,
    runner: Runner,
    interruption: Interruption,
    entries: Iterable[SceneEntry],
    *,
    quiet: bool,
    force: bool,
    began: float,
) -> Batch:
    """Run the batch and write its report, however it ends."""
    place.recover()
    run_folder = place.run_folder()
    if run_folder is not None:
        begin_folder(run_folder)
    log = held.enter_context(closing(EventLog(run_folder)))
    memory = held.enter_context(closing(Memory(run_folder / MEMORY if run_folder else None)))
    progress = held.enter_context(closing(progress_for(quiet=quiet)))
    catalogue = Catalogue(place)
    catalogue.refresh()
    settings = BatchSettings(job, folder, place, job_digest(job, folder), force)
    batch = Batch(settings, runner, log, memory, catalogue, progress, interruption, _say_failure)
    log.tell("run began", output=place.address, workers=runner.workers)
    ended = "stopped"
    try:
        batch.run(entries)
        ended = "complete"
    finally:
        with interruption.put_off():
            outcomes = batch.outcomes
            seconds = time.monotonic() - began
            log.tell("run ended", how=ended, seconds=round(seconds, 3), scenes=len(outcomes))
            if run_folder is not None:
                summary = run_summary(outcomes, place.address, seconds, ended=ended, workers=runner.workers)
                write_report(run_folder, summary, outcomes)
    return batch


def _exit_code(outcomes: list[SceneOutcome], *, all_usage: bool) -> int:
    failed = sum(outcome.status == "failed" for outcome in outcomes)
    if failed == 0:
        return ALL_DONE
    if failed == len(outcomes):
        return USAGE if all_usage else NOTHING_DONE
    return SOME_FAILED


def _say_failure(outcome: SceneOutcome) -> None:
    print(f"groundglow: {outcome.reason}", file=sys.stderr)


def _output(job: Job, folder: Path, output: str | None) -> str:
    if output is not None:
        return output
    # "configs/../out" is the same place as "out", and reads worse.
    return job.output if "://" in job.output else os.path.normpath(folder / job.output)


def _first_known(entries: Iterator[SceneEntry]) -> Iterator[SceneEntry]:
    """The same entries, the first one found before anything is locked or written."""
    for first in entries:
        return chain([first], entries)
    return iter(())


def _runner(scheduler: str, workers: int | None, place: Place) -> Runner:
    if scheduler == "threads":
        return LocalRunner(workers)
    if scheduler.split(":", maxsplit=1)[0] not in ("processes", "tcp", "tls"):
        raise ConfigError(
            f"there is no scheduler {scheduler!r}",
            where="--scheduler",
            remedy="Give 'threads', 'processes', 'processes:N', or tcp://host:port of a Dask scheduler",
        )
    from groundglow.run.batch.cluster import ClusterRunner  # noqa: PLC0415  (most runs need no cluster)

    return ClusterRunner(scheduler, place)
