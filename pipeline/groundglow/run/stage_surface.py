"""The stages at the surface, file to file: surface temperature, then fluxes."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path

import numpy as np

from groundglow.atmosphere.interpolate import pack
from groundglow.errors import ConfigError
from groundglow.quantities import FLAG
from groundglow.raster.grid import Block
from groundglow.retrieval.chain import Inversion, emitted_flux, invert, surface_fluxes
from groundglow.run.plan import ScenePlan
from groundglow.run.stage_atmosphere import read_air
from groundglow.run.stage_emissivity import StoredEmissivity
from groundglow.run.stage_output import StageBlock, encoded, make_rasters
from groundglow.run.stage_radiance import read_flags, read_variable
from groundglow.run.stage_record import StageFolder, StageRecord, record_of
from groundglow.run.stage_setting import Setting, StageCall
from groundglow.run.worker import AirAndGround, SceneWork, tiles

_OUTSIDE_VALIDITY = np.uint16(FLAG["atmosphere_outside_validity"].mask)
_TEMPERATURE = "surface_temperature"
_PIXEL, _SCENE = "surface_temperature_uncertainty_pixel", "surface_temperature_uncertainty_scene"
_EFFECT = "surface_temperature_emissivity_effect"
TEMPERATURES = (
    _TEMPERATURE, "surface_temperature_uncertainty", _PIXEL, "surface_temperature_uncertainty_class", _SCENE, _EFFECT,
)  # fmt: skip


@dataclass(frozen=True)
class SurfaceInputs:
    """The folders that the surface temperature is made from."""

    radiance: Path
    brightness_temperature: Path
    emissivity: Path
    atmosphere: Path


def make_surface_temperature(call: StageCall, inputs: SurfaceInputs) -> StageRecord:
    """Inversion of the radiative transfer equation, with the uncertainty by what errors share.

    Raises
    ------
    GroundglowError
        If an input is missing or not what it should be, or the output cannot be written.
    """
    setting = Setting.read(call)
    plan = setting.plan_of_ground()
    radiance = setting.given(inputs.radiance, "radiance", plan)
    brightness = setting.given(inputs.brightness_temperature, "brightness-temperature", plan)
    emissivity = setting.given(inputs.emissivity, "emissivity", plan)
    atmosphere = setting.given(inputs.atmosphere, "atmosphere", plan)
    work = _work_with(plan, setting, emissivity, atmosphere)
    sky = bool(np.isfinite(read_air(atmosphere).terms.sky_flux).any())
    names = (*TEMPERATURES, "transmittance", "path_radiance", *(("sky_flux",) if sky else ()))
    sources = {"radiance": radiance, "brightness-temperature": brightness, "emissivity": emissivity}
    identities = {name: folder.identity() for name, folder in {**sources, "atmosphere": atmosphere}.items()}
    return make_rasters(
        call.output,
        plan.work.grid,
        (*names, "quality"),
        partial(_surface_block, _SurfaceWork(plan, work, radiance, brightness, names)),
        lambda files: record_of(
            plan, "surface-temperature", files, identities, {"method": setting.job.temperature.method}
        ),
        workers=call.workers,
    )


def make_flux(call: StageCall, surface_temperature: Path, emissivity: Path) -> StageRecord:
    """Emitted flux with its uncertainty; leaving and net longwave flux where the sky's flux is known.

    Raises
    ------
    GroundglowError
        If an input is missing or not what it should be, or the output cannot be written.
    """
    setting = Setting.read(call)
    plan = setting.plan_of_ground()
    temperature = setting.given(surface_temperature, "surface-temperature", plan)
    ground = setting.given(emissivity, "emissivity", plan)
    sky = "sky_flux" in temperature.record.variables
    names = (
        "emitted_flux",
        "emitted_flux_uncertainty",
        *(("leaving_flux", "net_longwave_flux") if sky else ()),
    )
    identities = {"surface-temperature": temperature.identity(), "emissivity": ground.identity()}
    return make_rasters(
        call.output,
        plan.work.grid,
        (*names, "quality"),
        partial(_flux_block, plan, temperature, StoredEmissivity(ground)),
        lambda files: record_of(
            plan, "flux", files, identities, {"formula": "broadband emissivity x sigma x T^4"}
        ),
        workers=call.workers,
    )


def _work_with(
    plan: ScenePlan, setting: Setting, emissivity: StageFolder, atmosphere: StageFolder
) -> SceneWork:
    """The scene's work with the ground and the air of earlier stages."""
    grid = read_air(atmosphere)
    elevation = setting.scene.elevation
    if elevation is None and grid.height.size > 1:
        raise ConfigError(
            f"the air is given over ground heights, and the scene {setting.scene.name} names no elevation",
            where=setting.call.scene,
            remedy="Add elevation to the scene file (a raster or a number in m)",
        )
    settings = replace(
        plan.work.settings, weighting=grid.surface_temperature.astype(np.float32), causes=len(grid.causes)
    )
    return replace(
        plan.work,
        elevation=0.0 if elevation is None else elevation,
        emissivity=StoredEmissivity(emissivity),
        air=pack(grid),
        settings=settings,
    )


@dataclass(frozen=True)
class _SurfaceWork:
    """What a block of the surface temperature needs."""

    plan: ScenePlan
    work: SceneWork
    radiance: StageFolder
    brightness: StageFolder
    names: tuple[str, ...]


def _surface_block(given: _SurfaceWork, block: Block) -> StageBlock:
    plan, work, settings = given.plan, given.work, given.work.settings
    radiance = read_variable(given.radiance, "radiance", plan, block)
    flags = read_flags(given.radiance, plan, block) | read_flags(given.brightness, plan, block)
    ground = AirAndGround.read(work, block)
    assert ground is not None
    maps = {name: np.empty((block.height, block.width), np.float32) for name in given.names}
    for rows, columns in tiles(block):
        air = ground.air(rows, columns)
        own = np.ascontiguousarray(flags[rows, columns]) | ground.emissivity.flags[rows, columns]
        own[np.isnan(air[0])] |= _OUTSIDE_VALIDITY
        here = ground.emissivity.window(rows, columns)
        found = invert(
            np.ascontiguousarray(radiance[rows, columns]),
            own,
            here.band,
            here.band_uncertainty,
            air=air,
            settings=settings,
        )
        flags[rows, columns] = own
        count = settings.weighting.size
        for name, values in {
            **temperatures_of(found),
            "transmittance": air[count // 2],
            "path_radiance": air[count],
            "sky_flux": air[count + 2],
        }.items():
            if name in maps:
                maps[name][rows, columns] = values
    return encoded({**maps, "quality": flags}, block, work.grid)


def temperatures_of(found: Inversion) -> dict[str, np.ndarray]:
    """An inversion by the names of its variables."""
    parts = (
        found.temperature,
        found.total,
        found.pixel,
        np.abs(found.surface_class),
        found.scene,
        found.surface_class,
    )
    return dict(zip(TEMPERATURES, parts, strict=True))


def _flux_block(
    plan: ScenePlan, temperature: StageFolder, ground: StoredEmissivity, block: Block
) -> StageBlock:
    emissivity = ground.read(plan.work.grid, block)
    t, pixel, effect, scene = (
        read_variable(temperature, name, plan, block) for name in (_TEMPERATURE, _PIXEL, _EFFECT, _SCENE)
    )
    # The flux looks at the temperature and the parts of its uncertainty only.
    found = Inversion(t, blackbody=t, response=t, pixel=pixel, surface_class=effect, scene=scene, total=t)
    maps = dict(
        zip(("emitted_flux", "emitted_flux_uncertainty"), emitted_flux(found, emissivity), strict=True)
    )
    if "sky_flux" in temperature.record.variables:
        sky = read_variable(temperature, "sky_flux", plan, block)
        fluxes = surface_fluxes(maps["emitted_flux"], emissivity.broadband, sky)
        maps |= dict(zip(("leaving_flux", "net_longwave_flux"), fluxes, strict=True))
    return encoded({**maps, "quality": read_flags(temperature, plan, block)}, block, plan.work.grid)
