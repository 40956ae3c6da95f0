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
from groundglow.retrieval.chain import (
    ChainSettings,
    Flags,
    Inversion,
    Pixels,
    emitted_flux,
    invert,
    surface_fluxes,
)
from groundglow.retrieval.chain_water_vapour import invert_with_column
from groundglow.run.blocks.column import ColumnAndGround
from groundglow.run.blocks.worker import AirAndGround, SceneWork, ground_of, tiles
from groundglow.run.planning.air_source import Air
from groundglow.run.planning.plan import ScenePlan
from groundglow.run.stage.atmosphere import read_air
from groundglow.run.stage.emissivity import StoredEmissivity
from groundglow.run.stage.output import StageBlock, encoded, make_rasters
from groundglow.run.stage.radiance import read_flags, read_variable
from groundglow.run.stage.record import StageFolder, StageRecord, record_of
from groundglow.run.stage.setting import Setting, StageCall

_OUTSIDE_VALIDITY = np.uint16(FLAG["atmosphere_outside_validity"].mask)
_TEMPERATURE = "surface_temperature"
_PIXEL, _SCENE = "surface_temperature_uncertainty_pixel", "surface_temperature_uncertainty_scene"
_EFFECT = "surface_temperature_emissivity_effect"
TEMPERATURES = (
    _TEMPERATURE, "surface_temperature_uncertainty", _PIXEL, "surface_temperature_uncertainty_class", _SCENE, _EFFECT,
)  # fmt: skip


@dataclass(frozen=True)
class SurfaceInputs:
    """The folders that the surface temperature is made from; no air for the water-vapour method."""

    radiance: Path
    brightness_temperature: Path
    emissivity: Path
    atmosphere: Path | None


def make_surface_temperature(call: StageCall, inputs: SurfaceInputs) -> StageRecord:
    """Surface temperature by the job's method, with the uncertainty by what errors share.

    Raises
    ------
    GroundglowError
        If an input is missing or not what it should be, or the output cannot be written.
    """
    setting = Setting.read(call)
    by_column = setting.job.atmosphere.source == "column"
    plan = setting.plan() if by_column else setting.plan_of_ground()
    given = {
        "radiance": setting.given(inputs.radiance, "radiance", plan),
        "brightness-temperature": setting.given(
            inputs.brightness_temperature, "brightness-temperature", plan
        ),
        "emissivity": setting.given(inputs.emissivity, "emissivity", plan),
    }
    names = TEMPERATURES
    work = replace(plan.work, emissivity=StoredEmissivity(given["emissivity"]))
    if not by_column:
        given["atmosphere"] = setting.given(_needed(inputs.atmosphere), "atmosphere", plan)
        air = read_air(given["atmosphere"], setting.scene)
        work = _with_air(work, air)
        sky = bool(np.isfinite(air.grid.terms.sky_flux).any())
        names = (*names, "transmittance", "path_radiance", *(("sky_flux",) if sky else ()))
    surface = _SurfaceWork(plan, work, given["radiance"], given["brightness-temperature"], names)
    return make_rasters(
        call.output,
        plan.work.grid,
        (*names, "quality"),
        partial(_surface_block, surface),
        lambda files: record_of(
            plan,
            "surface-temperature",
            files,
            {name: folder.identity() for name, folder in given.items()},
            {"method": setting.job.temperature.method},
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


def _needed(atmosphere: Path | None) -> Path:
    if atmosphere is None:
        raise ConfigError(
            "this job's method needs the air",
            where="--atmosphere",
            remedy="Give the folder that 'groundglow atmosphere' wrote",
        )
    return atmosphere


def _with_air(work: SceneWork, air: Air) -> SceneWork:
    """The scene's work with the air of an earlier stage."""
    grid = air.grid
    settings = replace(
        work.settings, weighting=grid.surface_temperature.astype(np.float32), causes=len(grid.causes)
    )
    return replace(work, elevation=air.elevation, air=pack(grid), settings=settings)


@dataclass(frozen=True)
class _SurfaceWork:
    """What a block of the surface temperature needs."""

    plan: ScenePlan
    work: SceneWork
    radiance: StageFolder
    brightness: StageFolder
    names: tuple[str, ...]


def _surface_block(given: _SurfaceWork, block: Block) -> StageBlock:
    plan, work = given.plan, given.work
    radiance = read_variable(given.radiance, "radiance", plan, block)
    brightness = read_variable(given.brightness, "brightness_temperature", plan, block)
    flags = read_flags(given.radiance, plan, block) | read_flags(given.brightness, plan, block)
    ground = ground_of(work, block)
    assert ground is not None
    flags |= ground.emissivity.flags
    maps = {name: np.empty((block.height, block.width), np.float32) for name in given.names}
    for rows, columns in tiles(block):
        tile = (rows, columns)
        at_sensor = [np.ascontiguousarray(values[tile]) for values in (radiance, brightness)]
        own = np.ascontiguousarray(flags[tile])
        if isinstance(ground, AirAndGround):
            found = _tile_with_air(ground, tile, at_sensor[0], own, work.settings)
        else:
            found = _tile_with_column(ground, tile, at_sensor, own, work.settings)
        flags[tile] = own
        for name, values in maps.items():
            values[tile] = found[name]
    return encoded({**maps, "quality": flags}, block, work.grid)


def _tile_with_air(
    ground: AirAndGround, tile: tuple[slice, slice], radiance: Pixels, flags: Flags, settings: ChainSettings
) -> dict[str, Pixels]:
    air = ground.air(*tile)
    # Where the ground height or the angle is not known, neither is the air.
    flags[np.isnan(air[0])] |= _OUTSIDE_VALIDITY
    here = ground.emissivity.window(*tile)
    found = invert(radiance, flags, here.band, here.band_uncertainty, air=air, settings=settings)
    count = settings.weighting.size
    return temperatures_of(found) | {
        "transmittance": air[count // 2],
        "path_radiance": air[count],
        "sky_flux": air[count + 2],
    }


def _tile_with_column(
    ground: ColumnAndGround,
    tile: tuple[slice, slice],
    at_sensor: list[Pixels],
    flags: Flags,
    settings: ChainSettings,
) -> dict[str, Pixels]:
    water = ground.water_of(*tile)
    flags[np.isnan(water)] |= _OUTSIDE_VALIDITY
    found = invert_with_column(
        at_sensor[0],
        at_sensor[1],
        flags,
        ground.emissivity.window(*tile),
        water,
        settings=settings,
        method=ground.method,
    )
    return temperatures_of(found)


def temperatures_of(found: Inversion) -> dict[str, Pixels]:
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
