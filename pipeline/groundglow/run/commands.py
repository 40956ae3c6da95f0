"""What the commands do, once parsed: job file in, table or JSON and an exit code out."""

from __future__ import annotations

import json
import signal
import sys
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from types import FrameType

from groundglow import __version__
from groundglow.errors import ConfigError, GroundglowError
from groundglow.run.config import Job, read_job
from groundglow.run.fingerprint import scene_fingerprint
from groundglow.run.outcome import SceneOutcome, describe_grid
from groundglow.run.plan import ScenePlan, plan_scene
from groundglow.run.progress import progress_for
from groundglow.run.publish import locked, recover
from groundglow.run.scene_run import run_scene
from groundglow.run.scheduler import Cluster, Threads, available_cores
from groundglow.run.table import outcome_table, plan_table
from groundglow.scene.open import open_scene

ALL_DONE, NOTHING_DONE, SOME_FAILED = 0, 3, 4


def run_job(
    path: Path, *, output: Path | None, workers: int | None, scheduler: str, quiet: bool, as_json: bool
) -> int:
    """Run all scenes of a job and tell what came out.

    Returns
    -------
    int
        The exit code.

    Raises
    ------
    GroundglowError
        If the job cannot be followed, or nothing can be written.
    """
    job = read_job(path)
    began = time.perf_counter()
    folder = output or path.parent / job.output
    outcomes = []
    with locked(folder), _terminable(), _scheduler(scheduler, workers or job.run.workers) as chosen:
        recover(folder)
        progress = progress_for(quiet=quiet)
        for scene_path in scene_paths(job, path.parent):
            try:
                plan = plan_scene(job, path.parent, open_scene(str(scene_path)))
                identity = scene_fingerprint(job, plan)
                outcome = run_scene(plan, identity, folder, chosen, progress, durable=job.run.durable)
            except ConfigError:
                raise
            except GroundglowError as error:
                outcome = SceneOutcome(name=scene_path.stem, status="failed", reason=str(error))
                print(f"groundglow: {error}", file=sys.stderr)
            outcomes.append(outcome)
    seconds = time.perf_counter() - began
    if as_json:
        print(json.dumps(_summary(outcomes, folder, seconds), indent=2))
    elif not quiet:
        print(outcome_table(outcomes, seconds))
        print(f"\nLayers are in {folder.resolve()}")
    failed = sum(outcome.status == "failed" for outcome in outcomes)
    if failed == len(outcomes):
        return NOTHING_DONE
    return SOME_FAILED if failed else ALL_DONE


def plan_job(path: Path, *, as_json: bool) -> int:
    """Tell what a run of the job would do.

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
    plans = [plan_scene(job, path.parent, open_scene(str(scene))) for scene in scene_paths(job, path.parent)]
    workers = job.run.workers or available_cores()
    if as_json:
        print(json.dumps({"scenes": [plan_as_json(plan, workers) for plan in plans]}, indent=2))
    else:
        print(plan_table([plan_as_json(plan, workers) for plan in plans]))
    return ALL_DONE


def plan_as_json(plan: ScenePlan, workers: int) -> dict[str, object]:
    """A plan in plain values."""
    return {
        "scene": plan.name,
        "grid": describe_grid(plan.work.grid),
        "band": plan.band.number,
        "blocks": len(plan.blocks),
        "layers": list(plan.work.formats),
        "peak_memory_mib": round(plan.peak_mebibytes(workers)),
        "disk_mib": round(plan.disk_bytes() / 2**20, 1),
        "method": plan.method,
        "notes": list(plan.scene.notes),
    }


def scene_paths(job: Job, folder: Path) -> list[Path]:
    """The scene descriptions a job names, each once, sorted within a pattern.

    Raises
    ------
    ConfigError
        If a name or pattern meets nothing.
    """
    found: dict[Path, None] = {}
    for name in job.scenes:
        if any(mark in name for mark in "*?["):
            absolute = Path(name).is_absolute()
            root = Path(Path(name).anchor) if absolute else folder
            pattern = str(Path(name).relative_to(root)) if absolute else name
            matches = sorted(root.glob(pattern))
        else:
            matches = [folder / name] if (folder / name).exists() else []
        if not matches:
            raise ConfigError(
                f"there is no scene {name!r}", where="scenes", remedy=f"Paths are relative to {folder.resolve()}"
            )
        found.update(dict.fromkeys(matches))
    return list(found)


def _summary(outcomes: Sequence[SceneOutcome], folder: Path, seconds: float) -> dict[str, object]:
    return {
        "groundglow": __version__,
        "output": str(folder.resolve()),
        "seconds": round(seconds, 3),
        "scenes": [outcome.as_json() for outcome in outcomes],
    }


@contextmanager
def _scheduler(name: str, workers: int | None) -> Iterator[Threads | Cluster]:
    if name == "threads":
        yield Threads(workers)
        return
    if name.split(":")[0] not in ("processes", "tcp", "tls"):
        raise ConfigError(
            f"there is no scheduler {name!r}",
            where="--scheduler",
            remedy="Give 'threads', 'processes', 'processes:N', or tcp://host:port of a Dask scheduler",
        )
    cluster = Cluster(name)
    try:
        yield cluster
    finally:
        cluster.close()


@contextmanager
def _terminable() -> Iterator[None]:
    """Let SIGTERM end the run as an interrupt does, cleaning up on the way."""

    def interrupt(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    try:
        before = signal.signal(signal.SIGTERM, interrupt)
    except ValueError:
        # Not the main thread: signals are not ours to handle there.
        yield
        return
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)
