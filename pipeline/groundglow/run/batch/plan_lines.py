"""What a run would do and why, from file statuses, Items and headers; nothing is written, no pixel is read."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from groundglow.errors import GroundglowError
from groundglow.run.batch.entry import SceneEntry
from groundglow.run.batch.memory import Memory
from groundglow.run.batch.select import left_out, place_of_scene
from groundglow.run.config.job import Job
from groundglow.run.making.outcome import describe_grid
from groundglow.run.placing.place import Place
from groundglow.run.placing.state import why_changed_by_headers
from groundglow.run.planning.plan import ScenePlan, plan_scene
from groundglow.scene.open import open_scene
from groundglow.scene.stac import read_item

# Measured with four layers, typed-in air and a preview (docs/scaling.md); a run's report replaces both from then on.
DEFAULT_SECONDS_PER_MEGAPIXEL = 0.2
DEFAULT_SECONDS_PER_SCENE = 0.2


@dataclass(frozen=True)
class PlanSettings:
    """What a plan is made with.

    Attributes
    ----------
    job : Job
    folder : Path
        Folder of the job file.
    place : Place
    job_digest : str
    workers : int
    measured : float or None
        Worker seconds per megapixel of the last run; None takes a default.
    detailed : int
        Scenes to be made that are opened; the others are counted.
    """

    job: Job
    folder: Path
    place: Place
    job_digest: str
    workers: int
    measured: float | None
    detailed: int


def plan_batch(entries: Iterable[SceneEntry], settings: PlanSettings, memory: Memory) -> dict[str, Any]:
    """Plan many scenes.

    Parameters
    ----------
    entries : iterable of SceneEntry
    settings : PlanSettings
    memory : Memory

    Returns
    -------
    dict
        ``scenes`` (those looked at in detail and those known to be up to date), ``counts`` by state,
        ``estimate`` (seconds, memory, disk) with where its constant comes from.
    """
    scenes: list[dict[str, Any]] = []
    counts: dict[str, int] = {}
    opened = 0
    for entry in entries:
        seen = memory.recall(entry.address)
        if seen is not None and seen.still_true(settings.job_digest + entry.digest):
            found: dict[str, Any] = {
                "scene": seen.name,
                "address": entry.address,
                "state": "up to date",
                "why": "",
            }
        elif opened < settings.detailed:
            found = _looked_at(entry, settings)
            opened += found["state"] not in ("left out", "cannot be read")
        else:
            found = {"scene": entry.label, "address": entry.address, "state": "not looked at", "why": ""}
        counts[found["state"]] = counts.get(found["state"], 0) + 1
        scenes.append(found)
    return {"scenes": scenes, "counts": counts, "estimate": _estimate(scenes, settings)}


def _looked_at(entry: SceneEntry, settings: PlanSettings) -> dict[str, Any]:
    try:
        scene = open_scene(entry.address) if entry.item is None else read_item(entry.item, entry.list_address)
        if not settings.job.select.wants_everything:
            reason = left_out(settings.job.select, entry.known_better(scene.acquired, place_of_scene(scene)))
            if reason is not None:
                return {"scene": scene.name, "address": entry.address, "state": "left out", "why": reason}
        plan = plan_scene(settings.job, settings.folder, scene)
        state, why = _state(plan, settings)
    except GroundglowError as error:
        return {"scene": entry.label, "address": entry.address, "state": "cannot be read", "why": str(error)}
    return {"scene": plan.name, "address": entry.address, "state": state, "why": why} | plan_as_json(
        plan, settings.workers
    )


def _state(plan: ScenePlan, settings: PlanSettings) -> tuple[str, str]:
    item = settings.place.item(plan.name)
    if item is None:
        return "new", "not made before"
    reason = why_changed_by_headers(item, settings.job) or settings.place.fault(plan.name, item)
    if reason is not None:
        return "changed", reason
    return "to be compared", "made before; the checksums of its inputs decide"


def plan_as_json(plan: ScenePlan, workers: int) -> dict[str, Any]:
    """A scene's plan in plain values."""
    return {
        "grid": describe_grid(plan.work.grid),
        "pixels": plan.work.grid.height * plan.work.grid.width,
        "band": plan.band.number,
        "blocks": len(plan.blocks),
        "layers": list(plan.work.formats),
        "peak_memory_mib": round(plan.peak_mebibytes(workers)),
        "disk_mib": round(plan.disk_bytes() / 2**20, 1),
        "method": plan.method,
        "notes": list(plan.scene.notes),
    }


def _estimate(scenes: list[dict[str, Any]], settings: PlanSettings) -> dict[str, Any]:
    """Time, memory and disk; scenes not looked at count as the mean of those that were."""
    due = [one for one in scenes if one["state"] in ("new", "changed", "to be compared")]
    unknown = sum(one["state"] == "not looked at" for one in scenes)
    factor = (len(due) + unknown) / len(due) if due else 0.0
    constant = settings.measured or DEFAULT_SECONDS_PER_MEGAPIXEL
    fixed = 0.0 if settings.measured else DEFAULT_SECONDS_PER_SCENE
    seconds = factor * sum(one["pixels"] / 1e6 * constant + fixed for one in due) / settings.workers
    return {
        "seconds": round(seconds, 1),
        "peak_memory_mib": max((one["peak_memory_mib"] for one in due), default=0),
        # Every scene needs twice its layers in passing, and leaves them once.
        "disk_mib": round(factor * sum(one["disk_mib"] for one in due) / 2, 1),
        "workers": settings.workers,
        "worker_seconds_per_megapixel": constant,
        "constant_from": "the last run here"
        if settings.measured
        else "a default, until a run here has measured it",
    }
