"""Groundglow from Python: a scene as a lazy Dataset, each stage as a function, the whole chain, layers.

Example
-------
>>> from groundglow import api
>>> plan = api.plan("configs/demo.toml")
>>> scene = api.open_scene_dataset(plan)
>>> maps = api.run_chain(scene, plan)
>>> api.write_layers(maps, "maps")  # doctest: +SKIP

The stages between ``scene`` and ``maps`` are functions of their own, so that yours may stand between two.
"""

from __future__ import annotations

from pathlib import Path

import xarray as xr

from groundglow.errors import ConfigError
from groundglow.quantities import FLAGS
from groundglow.run.config.job import Job, read_job
from groundglow.run.planning.plan import ScenePlan, plan_scene
from groundglow.run.stage.scene_dataset import open_scene_dataset, write_layers
from groundglow.scene.open import open_scene
from groundglow.stages.atmosphere import atmosphere
from groundglow.stages.brightness_temperature import brightness_temperature
from groundglow.stages.emissivity import emissivity
from groundglow.stages.flags import flagged
from groundglow.stages.flux import flux
from groundglow.stages.layers import layers
from groundglow.stages.radiance import Calibration, radiance
from groundglow.stages.schema import require
from groundglow.stages.surface_temperature import surface_temperature, surface_temperature_from_column

__all__ = [
    "Calibration",
    "Job",
    "ScenePlan",
    "atmosphere",
    "brightness_temperature",
    "emissivity",
    "flagged",
    "flux",
    "layers",
    "open_scene_dataset",
    "plan",
    "radiance",
    "require",
    "run_chain",
    "surface_temperature",
    "surface_temperature_from_column",
    "write_layers",
]


def plan(job: Path | str, scene: Path | str | None = None) -> ScenePlan:
    """Resolve a job for one scene: every choice made, headers read, no pixel yet.

    Parameters
    ----------
    job : path
        Job file.
    scene : path, optional
        Scene description; default: the one that the job names.

    Returns
    -------
    ScenePlan
        ``plan.work`` holds what the stages need: ``settings``, ``emissivity``, ``air``.

    Raises
    ------
    ConfigError
        If job or scene cannot be followed, or the job names several scenes and none is chosen.
    InputError
        If a raster cannot be read.
    """
    file = Path(job)
    described = read_job(file)
    if scene is None:
        if len(described.scenes) != 1 or any(mark in described.scenes[0] for mark in "*?["):
            raise ConfigError(
                "the job names several scenes", where=str(file), remedy="Say which one: plan(job, scene)"
            )
        scene = file.parent / described.scenes[0]
    return plan_scene(described, file.parent, open_scene(str(scene)))


def run_chain(dataset: xr.Dataset, plan: ScenePlan) -> xr.Dataset:
    """All stages that the job asks for, one after the other, to the layers that it writes.

    Parameters
    ----------
    dataset : Dataset
        From :func:`open_scene_dataset`, or your own with ``radiance`` and ``quality``.
    plan : ScenePlan

    Returns
    -------
    Dataset
        The job's layers, masked, lazy where the input is.

    Raises
    ------
    InputError
        Listing every variable that is missing or in another unit.
    """
    work = plan.work
    found = brightness_temperature(dataset, work.settings)
    if work.emissivity is not None:
        found = emissivity(found, work.emissivity)
    if work.column is not None:
        found = flux(surface_temperature_from_column(found, work.settings, work.column.settings))
    elif work.air is not None:
        account = plan.air.account if plan.air is not None else {}
        found = atmosphere(found, work.air, work.settings.weighting, origin=str(account.get("source", "")))
        found = flux(surface_temperature(found, work.settings))
    return layers(found, list(work.formats), mask_names(plan))


def mask_names(plan: ScenePlan) -> list[str]:
    """Names of the flags whose pixels carry no number in the job's layers."""
    return [flag.name for flag in FLAGS if plan.work.mask & flag.mask]
