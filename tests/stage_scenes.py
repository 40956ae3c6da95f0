"""A scene in which every input varies from pixel to pixel, and the stage commands one after the other."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from command_line import Finished, groundglow
from invented_scene import InventedScene, paint_scene, scene_text, write_raster

# Air over two ground heights, so that the elevation matters at every pixel.
AIR = """
[atmosphere]
source = "explicit"
reference = "invented for the tests"
sky_flux = [350.0, 320.0]
[[atmosphere.air]]
band = "1"
ground_height = [200, 700]
transmittance = [0.80, 0.86]
path_radiance = [1.5, 1.1]
sky_radiance = [2.4, 1.9]
"""
GROUND = '[emissivity]\nsource = "raster"\n'
EVERY_LAYER = """
[quality]
cloud_buffer = 90.0
[layers]
write = ["surface_temperature", "surface_temperature_uncertainty", "surface_temperature_uncertainty_pixel",
         "surface_temperature_uncertainty_class", "surface_temperature_uncertainty_scene", "emitted_flux",
         "emitted_flux_uncertainty", "leaving_flux", "net_longwave_flux", "sky_flux", "brightness_temperature",
         "emissivity", "broadband_emissivity", "transmittance", "path_radiance"]
"""
_EMISSIVITY = '\n[[emissivity]]\nband = "1"\npath = "emissivity.tif"\nuncertainty = 0.015\n'


def varied_scene(folder: Path, height: int = 530, width: int = 600) -> InventedScene:
    """More than one tile each way, with elevation and emissivity rasters, a swath edge and a hole in both."""
    scene = paint_scene(folder, height, width, noise=0.02)
    y, x = np.mgrid[0:height, 0:width]
    elevation = (300.0 + 200.0 * np.sin(x / 90.0) * np.cos(y / 70.0)).astype(np.float32)
    elevation[100:103, 200:204] = np.nan
    emissivity = (0.95 + 0.04 * np.sin(y / 25.0)).astype(np.float32)
    emissivity[300:305, 20:30] = np.nan
    write_raster(folder / "elevation.tif", elevation, scene.transform, nodata=np.nan)
    write_raster(folder / "emissivity.tif", emissivity, scene.transform, nodata=np.nan)
    text = scene_text(more=_EMISSIVITY).replace("elevation = 400.0", 'elevation = { path = "elevation.tif" }')
    scene.scene_file.write_text(text)
    scene.write_job(EVERY_LAYER, air=AIR, ground=GROUND)
    return scene


def stage(
    scene: InventedScene, command: str, output: str, *given: object, job: Path | None = None
) -> Finished:
    """Run one stage command on a scene; its output goes to ``work/OUTPUT`` beside the scene."""
    return groundglow(
        command, job or scene.job_file, *given, "--scene", scene.scene_file, "--output", work(scene) / output
    )


def work(scene: InventedScene) -> Path:
    """Where the stages' outputs are."""
    return scene.folder / "work"


def stage_by_stage(scene: InventedScene, job: Path | None = None, *, air: bool = True) -> Path:
    """All stage commands, one after the other (without air: for the water-vapour method); the finished folder."""
    at = work(scene)
    names = ("radiance", "brightness-temperature", "emissivity", *(("atmosphere",) if air else ()))
    surface = [f"--{name}={at / name}" for name in names]
    fluxes = [f"--{name}={at / name}" for name in ("surface-temperature", "emissivity")]
    folders = [at / name for name in ("brightness-temperature", "emissivity", "surface-temperature", "flux")]
    for command, given in {
        "radiance": [],
        "brightness-temperature": surface[:1],
        "emissivity": [],
        "atmosphere": [],
        "surface-temperature": surface,
        "flux": fluxes,
        "layers": folders,
    }.items():
        if not air and command == "atmosphere":
            continue
        finished = stage(scene, command, command, *given, "--quiet", job=job)
        assert (finished.code, finished.err) == (0, ""), f"{command}: {finished.err}"
    return at / "layers"
