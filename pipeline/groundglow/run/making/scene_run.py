"""Builds one planned scene in a folder: blocks out, encoded tiles in, layers, styles, preview, last the Item."""

from __future__ import annotations

import time
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, NamedTuple

from groundglow.errors import InputError, OutputError
from groundglow.layers.geotiff import LayerSummary, LayerWriter
from groundglow.layers.tags import text_of
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Block
from groundglow.run.blocks.worker import BlockResult, ErrorSums, work_block
from groundglow.run.making.budget import uncertainty_budget
from groundglow.run.making.companions import write_companions
from groundglow.run.making.outcome import SceneOutcome, outcome_of
from groundglow.run.making.progress import Progress
from groundglow.run.making.scheduler import Scheduler
from groundglow.run.placing.publish import free_bytes
from groundglow.run.planning.fingerprint import SceneFingerprint
from groundglow.run.planning.plan import ScenePlan


class Walk(NamedTuple):
    """What makes the layers of one block: a function, and what it needs to know of the scene."""

    function: Callable[[Any, Block], BlockResult]
    work: object


def build_scene(
    plan: ScenePlan,
    fingerprint: SceneFingerprint,
    folder: Path,
    scheduler: Scheduler,
    progress: Progress,
    *,
    place: str,
    durable: bool = False,
    walk: Walk | None = None,
) -> SceneOutcome:
    """Make all layers of one scene and what stands beside them.

    Parameters
    ----------
    plan : ScenePlan
    fingerprint : SceneFingerprint
        Of everything that decides the result; written into the Item.
    folder : Path
        An empty folder that no reader looks into yet.
    scheduler : Scheduler
    progress : Progress
    place : str
        Where the folder's content will be in the end, for the outcome.
    durable : bool
        Flush the Item to disk before it counts as written.
    walk : Walk, optional
        What makes the layers of a block; default: the fused chain.

    Returns
    -------
    SceneOutcome

    Raises
    ------
    GroundglowError
        If an input cannot be read or the output not written.
    """
    began = time.perf_counter()
    refuse_a_full_disk(plan, folder.parent)
    summaries, errors = _make_layers(plan, folder, scheduler, progress, walk or Walk(work_block, plan.work))
    outcome = outcome_of(
        plan.name, plan.work.grid, summaries, errors,
        folder=place, seconds=time.perf_counter() - began, notes=plan.scene.notes,
    )  # fmt: skip
    outcome = replace(outcome, uncertainty=uncertainty_budget(plan))
    write_companions(plan, folder, summaries, outcome, fingerprint, durable=durable)
    return outcome


def refuse_a_full_disk(plan: ScenePlan, output: Path) -> None:
    """Refuse before spending.

    Raises
    ------
    OutputError
        If the disk has less space than the scene needs in passing.
    """
    needed, free = plan.disk_bytes(), free_bytes(output)
    if needed > free:
        raise OutputError(
            f"the disk has {free / 2**20:.0f} MiB left, and the scene needs about {needed / 2**20:.0f} MiB in passing",
            where=str(output),
            remedy="Free some space, write fewer layers, or choose another folder",
        )


def _make_layers(
    plan: ScenePlan, folder: Path, scheduler: Scheduler, progress: Progress, walk: Walk
) -> tuple[dict[str, LayerSummary], list[ErrorSums]]:
    errors: list[ErrorSums] = []
    tally = _EmissivityTally()
    work = plan.work
    with ExitStack() as open_writers, gdal_environment():
        writers = {
            name: open_writers.enter_context(
                LayerWriter(folder / f"{name}.tif", work.grid, layer_format, text_of(name))
            )
            for name, layer_format in work.formats.items()
        }

        def sink(result: BlockResult) -> None:
            for name, encoded in result.layers.items():
                writers[name].add(encoded)
            errors.extend(result.errors)
            tally.add(result)
            progress.advance(plan.name, result.block.height * result.block.width)

        progress.start(plan.name, work.grid.height * work.grid.width)
        try:
            scheduler.spread(walk.function, walk.work, plan.blocks, sink)
            tally.refuse_if_mostly_impossible(plan)
            return {name: writer.finish() for name, writer in writers.items()}, errors
        finally:
            progress.end(plan.name)


@dataclass
class _EmissivityTally:
    """How many pixels have an emissivity that no surface can have."""

    seen: int = 0
    impossible: int = 0

    def add(self, result: BlockResult) -> None:
        """Take in one block."""
        self.seen += result.seen
        self.impossible += result.impossible_emissivity

    def refuse_if_mostly_impossible(self, plan: ScenePlan) -> None:
        """A few such pixels are flagged; most of a scene is a wrong raster."""
        if 2 * self.impossible > self.seen and plan.work.emissivity is not None:
            paths = ", ".join(source.path for source in plan.work.emissivity.rasters())
            raise InputError(
                f"the emissivity is not above 0 and at most 1 in {self.impossible} of {self.seen} pixels",
                where=paths or "emissivity",
                remedy="Check the raster's scale and offset: an emissivity in percent needs scale = 0.01",
            )
