"""One scene of a batch, start to end: open, select, compare, build. Runs here or on a cluster's worker.

Nothing that goes wrong with the scene leaves this module as an exception: the reply says what
happened, so that one bad scene never stops the others, wherever it ran.
"""

from __future__ import annotations

import time
import traceback
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any
from uuid import uuid4

from groundglow.errors import ConfigError, GroundglowError
from groundglow.raster.fingerprint import container
from groundglow.run.access.retry import ChangedInputError, StoppedError, may_pass
from groundglow.run.batch.entry import SceneEntry
from groundglow.run.batch.memory import Seen
from groundglow.run.batch.select import left_out, place_of_scene
from groundglow.run.config.job import Job
from groundglow.run.making.outcome import SceneOutcome, describe_grid
from groundglow.run.making.progress import Progress, Quiet
from groundglow.run.making.scene_run import build_scene
from groundglow.run.making.scheduler import InTurn, Scheduler
from groundglow.run.placing.place import Place
from groundglow.run.placing.state import Stamp, description_files, stamp, stamps, why_changed
from groundglow.run.planning.fingerprint import SceneFingerprint, scene_fingerprint, tag_now
from groundglow.run.planning.plan import ScenePlan, plan_scene
from groundglow.scene.open import open_scene
from groundglow.scene.stac import read_item


@dataclass(frozen=True)
class SceneRequest:
    """What is asked for.

    Attributes
    ----------
    entry : SceneEntry
    job : Job
    folder : Path
        Folder of the job file, from which its relative paths start.
    place : Place
        Where results go.
    token : str
        Unique to this attempt.
    job_digest : str
    force : bool
        Make it again even if it is up to date.
    """

    entry: SceneEntry
    job: Job
    folder: Path
    place: Place
    token: str
    job_digest: str
    force: bool = False


@dataclass(frozen=True)
class SceneReply:
    """What became of it.

    Attributes
    ----------
    outcome : SceneOutcome or None
        None where the scene was too large to be made in one piece.
    built : str
        Token of the built scene that waits to be put in place; empty without one.
    seen : Seen or None
        What to remember; the outputs' stamps are still missing.
    may_pass : bool
        Whether trying again may help.
    usage : bool
        Whether the description or the job is at fault, not the data.
    events : tuple of mapping
        What happened, for the log.
    """

    outcome: SceneOutcome | None
    built: str = ""
    seen: Seen | None = None
    may_pass: bool = False
    usage: bool = False
    events: tuple[dict[str, Any], ...] = ()


@dataclass
class _Account:
    """Collects the events of one scene."""

    name: str
    events: list[dict[str, Any]] = field(default_factory=list)
    began: float = field(default_factory=time.perf_counter)
    step: float = field(default_factory=time.perf_counter)

    def tell(self, event: str, **more: object) -> None:
        """Note that a step has ended."""
        now = time.perf_counter()
        self.events.append(
            {"event": event, "time": time.time(), "seconds": round(now - self.step, 4), **more}
        )
        self.step = now

    @property
    def seconds(self) -> float:
        """Since the beginning."""
        return time.perf_counter() - self.began


def make_scene(
    request: SceneRequest, scheduler: Scheduler, progress: Progress, *, largest: int | None = None
) -> SceneReply:
    """Make one scene, unless its outputs are up to date.

    Parameters
    ----------
    request : SceneRequest
    scheduler : Scheduler
        Over which its blocks are spread.
    progress : Progress
    largest : int, optional
        Pixels from which on the scene is handed back untouched.

    Returns
    -------
    SceneReply

    Raises
    ------
    StoppedError
        If the run was asked to end.
    """
    account = _Account(request.entry.label)
    try:
        return _made(request, scheduler, progress, account, largest)
    except StoppedError:
        raise
    except GroundglowError as error:
        return _failed(
            request, account, str(error), transient=may_pass(error), usage=isinstance(error, ConfigError)
        )
    except Exception as error:  # The one place where a defect must not end the night for all other scenes.
        account.tell("defect", trace=traceback.format_exc())
        reason = f"a defect of Groundglow met this scene ({type(error).__name__}: {error}); the log holds its trace"
        return _failed(request, account, reason, transient=may_pass(error), usage=False)


def make_scene_on_worker(request: SceneRequest, largest: int) -> SceneReply:
    """Make one scene of at most so many pixels within the calling thread of a cluster's worker.

    A cluster may run the same work twice, when it believes a worker dead that is not: each run builds in a
    folder of its own, and the reply says in which.
    """
    own = replace(request, token=f"{request.token}-{uuid4().hex[:8]}")
    return make_scene(own, InTurn(), Quiet(), largest=largest)


def _made(
    request: SceneRequest,
    scheduler: Scheduler,
    progress: Progress,
    account: _Account,
    largest: int | None,
) -> SceneReply:
    job, place, entry = request.job, request.place, request.entry
    described = stamps(description_files(entry.address)) if entry.item is None else {}
    scene = open_scene(entry.address) if entry.item is None else read_item(entry.item, entry.list_address)
    account.name = scene.name
    if not job.select.wants_everything:
        reason = left_out(job.select, entry.known_better(scene.acquired, place_of_scene(scene)))
        if reason is not None:
            account.tell("left out", reason=reason)
            outcome = SceneOutcome(scene.name, "left out", reason, address=entry.address)
            return SceneReply(outcome, events=tuple(account.events))
    plan = plan_scene(job, request.folder, scene)
    pixels = plan.work.grid.height * plan.work.grid.width
    if largest is not None and pixels > largest:
        return SceneReply(None)
    account.tell("planned", grid=describe_grid(plan.work.grid), blocks=len(plan.blocks))
    before = _input_stamps(plan)
    fingerprint = scene_fingerprint(job, plan)
    account.tell("inputs read for checksums", fingerprint=fingerprint.digest)
    seen = None
    if all(one.sha256 is not None for one in fingerprint.inputs) and (described or entry.item is not None):
        seen = Seen(plan.name, request.job_digest + entry.digest, described | before, {}, pixels)
    reason = _why(request, plan.name, fingerprint)
    if reason is None:
        account.tell("found up to date")
        return SceneReply(up_to_date(request, plan.name, pixels), seen=seen, events=tuple(account.events))
    account.tell("to be made", reason=reason)
    outcome = _built(request, plan, fingerprint, scheduler, progress, before)
    account.tell("layers made")
    if place.put_by_maker:
        place.put(plan.name, request.token, durable=job.run.durable)
        account.tell("put in place")
    outcome = replace(outcome, address=request.entry.address, seconds=account.seconds)
    return SceneReply(
        outcome, built="" if place.put_by_maker else request.token, seen=seen, events=tuple(account.events)
    )


def _why(request: SceneRequest, name: str, fingerprint: SceneFingerprint) -> str | None:
    """Why the scene has to be made; None where it has not."""
    item = request.place.item(name)
    if item is None:
        return "not made before"
    if request.force:
        return "asked for (--force)"
    return why_changed(item, fingerprint) or request.place.fault(name, item)


def up_to_date(request: SceneRequest, name: str, pixels: int) -> SceneOutcome:
    """The outcome of a scene that need not be made."""
    return SceneOutcome(
        name, "up to date", folder=request.place.folder(name), address=request.entry.address, pixels=pixels
    )


def _built(
    request: SceneRequest,
    plan: ScenePlan,
    fingerprint: SceneFingerprint,
    scheduler: Scheduler,
    progress: Progress,
    before: dict[str, Stamp | None],
) -> SceneOutcome:
    place = request.place
    folder = place.building(plan.name, request.token)
    try:
        outcome = build_scene(
            plan, fingerprint, folder, scheduler, progress,
            place=place.folder(plan.name), durable=request.job.run.durable,
        )  # fmt: skip
        _refuse_changed_inputs(before, fingerprint)
    except BaseException:
        # Interrupts included: a reader must never find half a scene.
        place.discard(plan.name, request.token)
        raise
    return outcome


def _input_stamps(plan: ScenePlan) -> dict[str, Stamp | None]:
    """Stamps of the local files that hold the scene's rasters."""
    files = {str(file) for _, source in plan.inputs() if (file := container(source.path)) is not None}
    return stamps(sorted(files))


def _refuse_changed_inputs(before: dict[str, Stamp | None], fingerprint: SceneFingerprint) -> None:
    """The checksums that go into the provenance must be those of what was read."""
    changed = [path for path, known in before.items() if stamp(path) != known]
    changed += [one.path for one in fingerprint.inputs if one.tag is not None and tag_now(one) != one.tag]
    if changed:
        raise ChangedInputError("was replaced while the scene was made", where=changed[0])


def _failed(
    request: SceneRequest, account: _Account, reason: str, *, transient: bool, usage: bool
) -> SceneReply:
    account.tell("failed", reason=reason)
    outcome = SceneOutcome(
        account.name, "failed", reason, seconds=account.seconds, address=request.entry.address
    )
    return SceneReply(outcome, may_pass=transient, usage=usage, events=tuple(account.events))
