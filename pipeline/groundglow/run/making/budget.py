"""The uncertainty of a scene's surface temperature by cause, from a sample of its pixels."""

from __future__ import annotations

import math

import numpy as np

from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Block, Grid
from groundglow.retrieval.chain import brightness_temperature
from groundglow.run.blocks.column import ColumnAndGround
from groundglow.run.blocks.worker import SceneWork, ground_of, radiance_and_flags
from groundglow.run.making.causes import Causes, causes_with_air, causes_with_column
from groundglow.run.planning.plan import ScenePlan

# Edge of each of the nine windows that are looked at.
_WINDOW = 48


def uncertainty_budget(plan: ScenePlan) -> dict[str, float]:
    """Root mean square of each cause's 1-sigma effect over unmasked pixels of nine windows. [K]

    Parameters
    ----------
    plan : ScenePlan

    Returns
    -------
    dict of str to float
        "noise", "calibration", "emissivity", each cause of the air, and "total"; empty where no
        temperature was found in the windows, or none was wanted.

    Raises
    ------
    InputError
        If a raster cannot be read.
    """
    squares: dict[str, list[np.ndarray]] = {}
    with gdal_environment():
        for block in _windows(plan.work.grid):
            for cause, values in _effects(plan.work, block).items():
                squares.setdefault(cause, []).append(values**2)
    means = {cause: float(np.mean(np.concatenate(parts))) for cause, parts in squares.items()}
    found = {cause: mean for cause, mean in means.items() if math.isfinite(mean)}
    if not found:
        return {}
    return {cause: math.sqrt(mean) for cause, mean in found.items()} | {
        "total": math.sqrt(sum(found.values()))
    }


def _effects(work: SceneWork, block: Block) -> dict[str, np.ndarray]:
    """Effect of each cause at the pixels of one window that carry a temperature. [K]"""
    ground = ground_of(work, block)
    if ground is None:
        return {}
    radiance, flags = radiance_and_flags(work, block)
    radiance, flags = np.ascontiguousarray(radiance), np.ascontiguousarray(flags)
    brightness = brightness_temperature(radiance, flags, work.settings)
    causes: Causes
    if isinstance(ground, ColumnAndGround):
        causes = causes_with_column(work, ground, radiance, brightness)
    else:
        causes = causes_with_air(work, ground, radiance)
    known = np.isfinite(causes.noise) & ((flags & work.mask) == 0)
    named = {"noise": causes.noise, "calibration": causes.calibration, "emissivity": causes.emissivity}
    return {
        name: values[known].astype(np.float64)
        for name, values in (named | dict(causes.air)).items()
        if known.any()
    }


def _windows(grid: Grid) -> list[Block]:
    found = {}
    for row in (1, 5, 9):
        for column in (1, 5, 9):
            top = min(grid.height * row // 10, max(grid.height - _WINDOW, 0))
            left = min(grid.width * column // 10, max(grid.width - _WINDOW, 0))
            block = Block(top, left, min(_WINDOW, grid.height - top), min(_WINDOW, grid.width - left))
            found[top, left] = block
    return list(found.values())
