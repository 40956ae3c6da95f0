"""Runs one planned scene: blocks out, encoded tiles in, layers, styles, preview, and last the Item."""

from __future__ import annotations

import time
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path

from groundglow.errors import InputError, OutputError
from groundglow.layers.geotiff import LayerSummary, LayerWriter
from groundglow.layers.tags import text_of
from groundglow.raster.environment import gdal_environment
from groundglow.run.companions import write_companions
from groundglow.run.fingerprint import SceneFingerprint
from groundglow.run.outcome import SceneOutcome, outcome_of
from groundglow.run.plan import ScenePlan
from groundglow.run.progress import Progress
from groundglow.run.publish import building_folder, discard, free_bytes, publish
from groundglow.run.scheduler import Scheduler
from groundglow.run.worker import BlockResult, ErrorSums, work_block


def run_scene(
    plan: ScenePlan,
    fingerprint: SceneFingerprint,
    output: Path,
    scheduler: Scheduler,
    progress: Progress,
    *,
    durable: bool = False,
) -> SceneOutcome:
    """Make all layers of one scene and put them in place.

    Parameters
    ----------
    plan : ScenePlan
    fingerprint : SceneFingerprint
        Of everything that decides the result; written into the Item.
    output : Path
        The locked output folder.
    scheduler : Scheduler
    progress : Progress
    durable : bool
        Flush everything to disk before the scene counts as done.

    Returns
    -------
    SceneOutcome

    Raises
    ------
    GroundglowError
        If an input cannot be read or the output not written; nothing is left behind then.
    """
    began = time.perf_counter()
    _refuse_a_full_disk(plan, output)
    folder = building_folder(output, plan.name)
    try:
        summaries, errors = _make_layers(plan, folder, scheduler, progress)
        outcome = outcome_of(
            plan.name, plan.work.grid, summaries, errors,
            folder=str(output / plan.name), seconds=time.perf_counter() - began, notes=plan.scene.notes,
        )  # fmt: skip
        write_companions(plan, folder, summaries, outcome, fingerprint, durable=durable)
        publish(output, plan.name, durable=durable)
    except BaseException:
        # Interrupts included: a reader must never find half a scene.
        discard(output, plan.name)
        raise
    return outcome


def _make_layers(
    plan: ScenePlan, folder: Path, scheduler: Scheduler, progress: Progress
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
            progress.advance(result.block.height * result.block.width)

        progress.start(plan.name, work.grid.height * work.grid.width)
        try:
            scheduler.spread(work_block, work, plan.blocks, sink)
            tally.refuse_if_mostly_impossible(plan)
            return {name: writer.finish() for name, writer in writers.items()}, errors
        finally:
            progress.end()


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


def _refuse_a_full_disk(plan: ScenePlan, output: Path) -> None:
    needed, free = plan.disk_bytes(), free_bytes(output)
    if needed > free:
        raise OutputError(
            f"the disk has {free / 2**20:.0f} MiB left, and the scene needs about {needed / 2**20:.0f} MiB in passing",
            where=str(output),
            remedy="Free some space, write fewer layers, or choose another folder",
        )
