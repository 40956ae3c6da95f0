"""The stages at the sensor, file to file: spectral radiance, then brightness temperature."""

from __future__ import annotations

from functools import partial
from pathlib import Path

import numpy as np

from groundglow.raster.band import RasterSource
from groundglow.raster.fingerprint import belonging_files, fingerprint
from groundglow.raster.grid import Block
from groundglow.raster.source import read_block, read_codes
from groundglow.retrieval.chain import Flags, Pixels, brightness_temperature
from groundglow.run.blocks.worker import radiance_and_flags, tiles
from groundglow.run.planning.plan import ScenePlan
from groundglow.run.stage.output import StageBlock, encoded, make_rasters
from groundglow.run.stage.record import StageFolder, StageRecord, record_of
from groundglow.run.stage.setting import Setting, StageCall


def make_radiance(call: StageCall) -> StageRecord:
    """Counts to spectral radiance; fill, saturation and the agency's quality words to flags.

    Raises
    ------
    GroundglowError
        If job, scene or a raster cannot be read, or the output not written.
    """
    setting = Setting.read(call)
    plan = setting.plan_before_ground()
    account = {
        key: plan.method[key] for key in ("noise", "calibration", "quantisation_step") if key in plan.method
    }
    return make_rasters(
        call.output,
        plan.work.grid,
        ("radiance", "quality"),
        partial(_radiance_block, plan),
        lambda files: record_of(plan, "radiance", files, checksums(plan.inputs()), account),
        workers=call.workers,
    )


def make_brightness_temperature(call: StageCall, radiance: Path) -> StageRecord:
    """Radiance to brightness temperature through the band's spectral response; more flags.

    Raises
    ------
    GroundglowError
        If an input is missing or not what it should be, or the output cannot be written.
    """
    setting = Setting.read(call)
    plan = setting.plan_before_ground()
    given = setting.given(radiance, "radiance", plan)
    return make_rasters(
        call.output,
        plan.work.grid,
        ("brightness_temperature", "quality"),
        partial(_brightness_block, plan, given),
        lambda files: record_of(
            plan,
            "brightness-temperature",
            files,
            {"radiance": given.identity()},
            {"radiometry": setting.job.temperature.radiometry},
        ),
        workers=call.workers,
    )


def checksums(inputs: list[tuple[str, RasterSource]]) -> dict[str, str]:
    """SHA-256 of each input file, by what it is used for; its address where it is not a file here."""
    found: dict[str, str] = {}
    for role, source in inputs:
        for one in (fingerprint(path) for path in belonging_files(source.path, indirect=source.indirect)):
            key = role if role not in found else f"{role} ({Path(one.path).name})"
            found[key] = one.sha256 or one.path
    return found


def read_variable(folder: StageFolder, name: str, plan: ScenePlan, block: Block) -> Pixels:
    """A variable of an earlier stage, as it was stored."""
    return read_block(folder.source(name), plan.work.grid, block).values


def read_flags(folder: StageFolder, plan: ScenePlan, block: Block) -> Flags:
    """The flags that earlier stages set."""
    return np.asarray(read_codes(folder.source("quality"), plan.work.grid, block).codes, dtype=np.uint16)


def _radiance_block(plan: ScenePlan, block: Block) -> StageBlock:
    radiance, flags = radiance_and_flags(plan.work, block)
    return encoded({"radiance": radiance, "quality": flags}, block, plan.work.grid)


def _brightness_block(plan: ScenePlan, given: StageFolder, block: Block) -> StageBlock:
    radiance, flags = read_variable(given, "radiance", plan, block), read_flags(given, plan, block)
    result = np.empty_like(radiance)
    for rows, columns in tiles(block):
        own = np.ascontiguousarray(flags[rows, columns])
        result[rows, columns] = brightness_temperature(
            np.ascontiguousarray(radiance[rows, columns]), own, plan.work.settings
        )
        flags[rows, columns] = own
    return encoded({"brightness_temperature": result, "quality": flags}, block, plan.work.grid)
