"""From a job and a scene to the work to be done: every choice resolved before a pixel is read."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from groundglow.atmosphere.interpolate import AirStack, pack
from groundglow.errors import ConfigError
from groundglow.layers.layer_format import LayerFormat, format_of
from groundglow.layers.scale import TemperatureUnit
from groundglow.quantities import FLAG
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Block, Grid
from groundglow.raster.open import describe_raster
from groundglow.retrieval.uncertainty import independent_footprints
from groundglow.run.blocks.worker import SceneWork
from groundglow.run.config.job import NEEDS_SKY_FLUX, Job
from groundglow.run.planning.air_source import Air, air_of_job
from groundglow.run.planning.column_choice import column_account, column_of_job
from groundglow.run.planning.emissivity_choice import emissivity_of_job
from groundglow.run.planning.grid_choice import grid_of_job
from groundglow.run.planning.ground_size import pixel_in_metres
from groundglow.run.planning.input_checks import check_inputs
from groundglow.run.planning.radiometry import chain_settings, radiance_conversion
from groundglow.scene.model import Scene, ThermalBand

# Bytes a pixel of one block in flight: inputs, air fields, tiles and encoded layers.
_BYTES_FIXED = 60
_BYTES_A_LAYER = 10
_BYTES_A_FIELD = 1
# What the interpreter, the libraries and the compiled kernels take before the first block.
_BASE_MEBIBYTES = 260
# Bytes a pixel of a finished layer, a cautious figure for noisy data.
_STORED_BYTES = {"float32": 3.0, "uint16": 0.5}


@dataclass(frozen=True, eq=False)
class ScenePlan:
    """What will be done for one scene.

    Attributes
    ----------
    scene : Scene
    band : ThermalBand
        The band used.
    work : SceneWork
        What the tasks need.
    blocks : tuple of Block
    air : Air or None
    method : mapping
        What was chosen, for the provenance.
    files : tuple of (str, Path)
        Files besides rasters that were read for the choices, each with what it is used for.
    temperature_unit : str
        "celsius" or "kelvin", for labels.
    preview : bool
        Whether a picture is drawn.
    """

    scene: Scene
    band: ThermalBand
    work: SceneWork
    blocks: tuple[Block, ...]
    air: Air | None
    method: Mapping[str, object]
    files: tuple[tuple[str, Path], ...]
    temperature_unit: TemperatureUnit
    preview: bool

    @property
    def name(self) -> str:
        """The scene's name, which is its output folder's."""
        return self.scene.name

    def inputs(self) -> list[tuple[str, RasterSource]]:
        """The rasters that a run reads, each with what it is used for."""
        work = self.work
        found: list[tuple[str, RasterSource]] = [("thermal", work.thermal)]
        if work.quality is not None:
            found.append(("quality", work.quality.source))
        others = [("elevation", work.elevation), ("view_zenith_angle", work.view_zenith_angle)]
        if work.column is not None:
            others.append(("water_vapour", work.column.water))
        for role, source in others:
            if isinstance(source, RasterSource):
                found.append((role, source))
        if work.emissivity is not None:
            found += [("emissivity", source) for source in work.emissivity.rasters()]
        return found

    def peak_mebibytes(self, workers: int) -> float:
        """Estimated peak memory of the process, with that many blocks in flight. [MiB]"""
        largest = max(block.height * block.width for block in self.blocks)
        fields = self.work.air.fields if self.work.air is not None else 0
        a_pixel = _BYTES_FIXED + _BYTES_A_LAYER * len(self.work.formats) + _BYTES_A_FIELD * fields
        return _BASE_MEBIBYTES + workers * largest * a_pixel / 2**20

    def disk_bytes(self) -> int:
        """Disk space needed in passing: the layers twice."""
        pixels = self.work.grid.height * self.work.grid.width
        return int(2 * pixels * sum(_STORED_BYTES[layer.dtype] for layer in self.work.formats.values()))


def plan_scene(job: Job, folder: Path, scene: Scene) -> ScenePlan:
    """Resolve a job for one scene.

    Parameters
    ----------
    job : Job
    folder : Path
        Folder of the job file: its relative paths start there.
    scene : Scene

    Returns
    -------
    ScenePlan

    Raises
    ------
    ConfigError
        If job and scene do not fit each other.
    InputError
        If the thermal raster cannot be read.
    """
    band = _chosen_band(job, scene)
    info = describe_raster(band.source.path, indirect=band.source.indirect)
    check_inputs([("thermal", band.source)], info.grid)
    grid, area = grid_of_job(job, folder, info.grid)
    wants_flux = any(name in NEEDS_SKY_FLUX for name in job.layers.write)
    air = air_of_job(job.atmosphere, scene, band, grid, folder, sky_flux=wants_flux)
    weighting = air.grid.surface_temperature if air is not None else np.array([300.0])
    step = _quantisation_step(band, info.dtypes[band.source.band - 1], info.scales[band.source.band - 1])
    causes = len(air.grid.causes) if air is not None else 0
    stack = pack(air.grid) if air is not None else None
    band, fitted = _adjusted(job, scene, band, air, stack, step)
    settings, account = chain_settings(band, job.temperature, weighting, causes, step)
    settings = replace(settings, noise=settings.noise / _averaging(scene, info.grid, grid))
    column = column_of_job(job.atmosphere, scene)
    emissivity = None
    if air is not None or column is not None:
        emissivity = emissivity_of_job(job.emissivity, scene, band, grid, folder)
    work = SceneWork(
        grid=grid,
        thermal=band.source,
        convert=radiance_conversion(band, job.temperature.radiometry),
        quality=scene.quality,
        elevation=air.elevation if air is not None else 0.0,
        view_zenith_angle=scene.view_zenith_angle,
        emissivity=emissivity,
        air=stack,
        column=column,
        settings=settings,
        formats=_formats(job),
        mask=sum(FLAG[name].mask for name in job.quality.mask),
        references=_references(job, folder),
        area=area,
        cloud_buffer=job.quality.cloud_buffer,
        pixel=pixel_in_metres(grid),
    )
    method = {
        "surface_temperature": job.temperature.method,
        "radiometry": job.temperature.radiometry,
        "band": band.number,
        "sensor": scene.sensor.name,
        **account,
    }
    if fitted is not None:
        method["radiance_adjustment"] = fitted
    if emissivity is not None:
        method["emissivity"] = emissivity.describe()
    if air is not None:
        method["atmosphere"] = air.account
    if column is not None:
        method["atmosphere"] = column_account(job.atmosphere, column)
    unit: TemperatureUnit = "celsius" if job.layers.celsius else "kelvin"
    blocks = tuple(grid.blocks(job.run.block))
    plan = ScenePlan(
        scene, band, work, blocks, air, method, _files(job, folder, air), unit, job.layers.preview
    )
    check_inputs(plan.inputs(), grid)
    return plan


def _files(job: Job, folder: Path, air: Air | None) -> tuple[tuple[str, Path], ...]:
    found = [("atmosphere", path) for path in air.files] if air is not None else []
    table = getattr(job.emissivity, "class_table", None)
    if table is not None:
        found.append(("class_table", folder / table))
    return tuple(found)


def _chosen_band(job: Job, scene: Scene) -> ThermalBand:
    wanted = job.temperature.band
    if wanted is None:
        return scene.thermal[0]
    for band in scene.thermal:
        if band.number == wanted:
            return band
    raise ConfigError(
        f"the scene {scene.name} has no thermal band {wanted!r}",
        where="temperature.band",
        remedy=f"Choose from: {', '.join(band.number for band in scene.thermal)}",
    )


def _adjusted(
    job: Job, scene: Scene, band: ThermalBand, air: Air | None, stack: AirStack | None, step: float
) -> tuple[ThermalBand, dict[str, object] | None]:
    """The band corrected to the scene's known targets, where it names any."""
    if not any(target.band == band.number for target in scene.targets):
        return band, None
    from groundglow.run.planning.target_fit import adjusted_to_targets  # noqa: PLC0415  (on request)

    plain, _ = chain_settings(band, job.temperature, np.array([300.0]), 0, step)
    return adjusted_to_targets(
        scene,
        band,
        radiance_conversion(band, job.temperature.radiometry),
        stack,
        elevation=air.elevation if air is not None else 0.0,
        noise=plain.noise,
    )


def _averaging(scene: Scene, source: Grid, target: Grid) -> float:
    """By what averaging onto a coarser grid reduces the noise: the root of the independent footprints."""
    height, width = pixel_in_metres(source)
    size = math.sqrt(height * width)
    ratio = math.prod(pixel_in_metres(target)) / (height * width)
    if ratio <= 1.0:
        return 1.0
    native = max(scene.sensor.native_footprint or size, size)
    return math.sqrt(float(independent_footprints(ratio, pixel_size=size, native_footprint=native)))


def _quantisation_step(band: ThermalBand, dtype: str, file_scale: float) -> float:
    """Radiance of one step of the stored numbers."""
    if not np.issubdtype(np.dtype(dtype), np.integer):
        return 0.0
    scale = band.source.scale if band.source.scale is not None else file_scale
    if band.quantity in ("counts", "radiance"):
        return abs(scale)
    return abs(scale) * float(band.sensor_band.response.band_radiance_slope(300.0))


def _formats(job: Job) -> dict[str, LayerFormat]:
    return {name: format_of(name, job.layers.compression, job.layers.level) for name in job.layers.write}


def _references(job: Job, folder: Path) -> dict[str, RasterSource]:
    found = {}
    for name, path in job.compare.items():
        source = RasterSource(str(folder / path))
        describe_raster(source.path)
        found[name] = source
    return found
