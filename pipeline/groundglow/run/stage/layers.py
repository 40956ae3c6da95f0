"""The last stage, file to file: what earlier stages left becomes a scene's folder of finished layers.

Masking and the rounding to an honest step happen here, once; layers, companions and Item are those of
the fused run.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import reduce
from pathlib import Path

import numpy as np

from groundglow.errors import InputError
from groundglow.layers.encode import encode_block
from groundglow.quantities import FLAG
from groundglow.raster.grid import Block
from groundglow.retrieval.chain import mask_flagged
from groundglow.run.blocks.worker import BlockResult, reference_errors
from groundglow.run.making.outcome import SceneOutcome
from groundglow.run.making.progress import progress_for
from groundglow.run.making.scene_run import Walk, build_scene
from groundglow.run.making.scheduler import Threads
from groundglow.run.planning.fingerprint import scene_fingerprint
from groundglow.run.planning.plan import ScenePlan
from groundglow.run.stage.output import stage_folder
from groundglow.run.stage.radiance import read_flags, read_variable
from groundglow.run.stage.record import StageFolder, agree, open_stage
from groundglow.run.stage.setting import Setting, StageCall

_NO_DATA = np.uint16(FLAG["no_data"].mask)


def make_layers(call: StageCall, inputs: Sequence[Path], *, quiet: bool = True) -> SceneOutcome:
    """Finished layers, what stands beside them, and the Item, in one folder.

    Parameters
    ----------
    call : StageCall
        Its output is the scene's own folder.
    inputs : sequence of Path
        Folders of earlier stages; together they must hold every layer that the job writes.
    quiet : bool
        Show no progress.

    Raises
    ------
    GroundglowError
        If a layer is missing, an input is not what it should be, or the output cannot be written.
    """
    setting = Setting.read(call)
    plan = setting.plan()
    folders = [open_stage(path) for path in inputs]
    agree(folders, plan)
    work = _LayersWork(plan, _providers(folders, plan), _with_flags(folders))
    scheduler = Threads(call.workers)
    with stage_folder(call.output) as folder:
        return build_scene(
            plan,
            scene_fingerprint(setting.job, plan),
            folder,
            scheduler,
            progress_for(quiet=quiet),
            place=str(call.output),
            durable=setting.job.run.durable,
            walk=Walk(_layers_block, work),
        )


@dataclass(frozen=True, eq=False)
class _LayersWork:
    """Where each layer comes from, and who set flags."""

    plan: ScenePlan
    providers: Mapping[str, StageFolder]
    flags: tuple[StageFolder, ...]


def _providers(folders: Sequence[StageFolder], plan: ScenePlan) -> dict[str, StageFolder]:
    """The folder that holds each layer wanted."""
    stages = [folder.record.stage for folder in folders]
    for stage in stages:
        if stages.count(stage) > 1:
            raise InputError(f"two outputs of the stage {stage!r} are given", remedy="Give each stage once")
    found: dict[str, StageFolder] = {}
    missing = []
    for name in plan.work.formats:
        if name == "quality":
            continue
        holders = [folder for folder in folders if name in folder.record.variables]
        if holders:
            found[name] = holders[0]
        else:
            missing.append(name)
    if missing:
        raise InputError(
            f"no stage given holds {', '.join(missing)}",
            where="layers.write",
            remedy=f"Give the output of the stage that makes it, or write other layers (given: {', '.join(stages)})",
        )
    return found


def _with_flags(folders: Sequence[StageFolder]) -> tuple[StageFolder, ...]:
    return tuple(folder for folder in folders if "quality" in folder.record.variables)


def _layers_block(given: _LayersWork, block: Block) -> BlockResult:
    plan, work = given.plan, given.plan.work
    flags = reduce(np.bitwise_or, (read_flags(folder, plan, block) for folder in given.flags))
    maps = {name: read_variable(folder, name, plan, block) for name, folder in given.providers.items()}
    for values in maps.values():
        mask_flagged(values, flags, work.mask)
    errors = tuple(reference_errors(work, block, maps, flags))
    layers = {
        name: encode_block(values, block, work.grid, work.formats[name]) for name, values in maps.items()
    }
    layers["quality"] = encode_block(flags, block, work.grid, work.formats["quality"])
    seen = int(np.count_nonzero((flags & _NO_DATA) == 0))
    return BlockResult(block, layers, errors, seen, 0)
