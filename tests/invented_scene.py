"""A small invented scene that knows its answer: ground painted, physics run forwards, files written."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import rasterio
from affine import Affine
from numpy.typing import NDArray

from groundglow.physics.constants import FIRST_RADIATION_CONSTANT, SECOND_RADIATION_CONSTANT

CRS = "EPSG:32633"
CORNER = (412_345.0, 5_338_765.0)
PIXEL = 30.0
TRANSMITTANCE, PATH_RADIANCE, SKY_RADIANCE, SKY_FLUX = 0.82, 1.44, 2.38, 345.0
EMISSIVITY = 0.97
# The sensor is one narrow top-hat, so that its band radiance is integrated here in three lines.
BAND = (10.6, 11.2)
SCALE, OFFSET = 3.0e-4, 0.1

SENSOR = """
name = "narrow"
title = "An invented narrow radiometer"
source = "invented for the tests"
native_footprint = 30.0
calibration_correlation = 0.5
[[band]]
number = "1"
response = { top_hat = [10.6, 11.2] }
noise = { temperature_difference = 0.1, at = 300.0, source = "invented" }
calibration = { uncertainty = 0.3, at = 300.0, source = "invented" }
"""

AIR = f"""
[atmosphere]
source = "explicit"
reference = "invented for the tests"
sky_flux = {SKY_FLUX}
[[atmosphere.air]]
band = "1"
transmittance = {TRANSMITTANCE}
path_radiance = {PATH_RADIANCE}
sky_radiance = {SKY_RADIANCE}
"""

GROUND = f"""
[emissivity]
source = "constant"
value = {EMISSIVITY}
"""


def band_radiance(temperature: NDArray[np.float64]) -> NDArray[np.float64]:
    """Planck's law averaged over the invented band: its own sum, not the package's."""
    wavelength = np.linspace(*BAND, 401)
    weight = np.full(401, 1.0 / 400)
    weight[[0, -1]] *= 0.5
    total = np.zeros_like(temperature)
    for w, share in zip(wavelength, weight, strict=True):
        total += (
            share * FIRST_RADIATION_CONSTANT / w**5 / np.expm1(SECOND_RADIATION_CONSTANT / (w * temperature))
        )
    return total


def painted_temperature(height: int, width: int) -> NDArray[np.float64]:
    """Smooth hills of temperature with a sharp warm corner, so that flips and shifts would show."""
    y, x = np.mgrid[0:height, 0:width]
    field_ = 295.0 + 8.0 * np.sin(x / 37.0) * np.cos(y / 29.0) + 0.01 * x + 0.02 * y
    field_[: height // 5, : width // 7] += 12.0
    return field_


@dataclass
class InventedScene:
    """Files of one scene in a folder, and what is true of it.

    Attributes
    ----------
    folder : Path
    temperature : array
        True surface temperature. [K]
    counts : uint16 array
    transform : Affine
    """

    folder: Path
    temperature: NDArray[np.float64]
    counts: NDArray[np.uint16]
    transform: Affine
    words: NDArray[np.uint16] = field(default_factory=lambda: np.zeros((0, 0), np.uint16))

    @property
    def scene_file(self) -> Path:
        return self.folder / "scene.toml"

    @property
    def job_file(self) -> Path:
        return self.folder / "job.toml"

    def write_job(
        self, text: str = "", *, name: str = "job.toml", air: str = AIR, ground: str = GROUND
    ) -> Path:
        """A job on this scene; ``text`` holds further tables."""
        path = self.folder / name
        path.write_text(f'scenes = "scene.toml"\noutput = "maps"\n{ground}\n{air}\n{text}\n')
        return path


def write_raster(
    path: Path, pixels: NDArray[np.generic], transform: Affine, *, crs: str | None = CRS, **options: object
) -> Path:
    """A plain tiled GeoTIFF of one band."""
    profile: dict[str, object] = {
        "driver": "GTiff", "height": pixels.shape[0], "width": pixels.shape[1], "count": 1,
        "dtype": pixels.dtype.name, "transform": transform, "crs": crs,
    }  # fmt: skip
    with rasterio.open(path, "w", **(profile | options)) as raster:
        raster.write(pixels, 1)
    return path


def paint_scene(
    folder: Path, height: int = 90, width: int = 110, *, noise: float = 0.0, more: str = "", seed: int = 11
) -> InventedScene:
    """Paint a scene with a swath edge, a cloud and saturated pixels, and write its files.

    Parameters
    ----------
    folder : Path
    height, width : int
    noise : float
        Noise of the radiance, 1 sigma. [W m-2 sr-1 um-1]
    more : str
        Lines added to the scene file.
    seed : int
    """
    temperature = painted_temperature(height, width)
    steps = np.linspace(temperature.min(), temperature.max(), 20_001)
    black = np.interp(temperature, steps, band_radiance(steps))
    through = TRANSMITTANCE * (EMISSIVITY * black + (1 - EMISSIVITY) * SKY_RADIANCE)
    radiance = through + PATH_RADIANCE
    radiance += np.random.default_rng(seed).normal(0.0, 1.0, radiance.shape) * noise
    counts = np.rint((radiance - OFFSET) / SCALE).astype(np.uint16)
    words = np.zeros(counts.shape, np.uint16)
    counts[-3:, :5] = 0
    words[40:50, 60:75] |= 1 << 3
    counts[7, 9] = 65535
    transform = Affine(PIXEL, 0.0, CORNER[0], 0.0, -PIXEL, CORNER[1])
    folder.mkdir(parents=True, exist_ok=True)
    write_raster(folder / "thermal.tif", counts, transform)
    write_raster(folder / "quality.tif", words, transform)
    (folder / "narrow.toml").write_text(SENSOR)
    (folder / "scene.toml").write_text(scene_text(more=more))
    scene = InventedScene(folder, temperature, counts, transform, words)
    scene.write_job()
    return scene


def scene_text(*, name: str = "invented", thermal: Mapping[str, object] | None = None, more: str = "") -> str:
    """The scene file, with keys of the thermal band replaced or (None) left out."""
    keys: dict[str, object] = {
        "band": "1", "path": "thermal.tif", "quantity": "counts", "scale": SCALE, "offset": OFFSET, "nodata": 0,
        "saturation": 65535,
    } | dict(thermal or {})  # fmt: skip
    lines = [f"{key} = {_toml(value)}" for key, value in keys.items() if value is not None]
    return (
        f'[scene]\nname = "{name}"\nacquired = 2026-07-14T10:32:00+02:00\nsensor = "narrow.toml"\n'
        "view_zenith_angle = 0.0\nelevation = 400.0\n\n[[thermal]]\n" + "\n".join(lines) + "\n\n"
        '[quality]\npath = "quality.tif"\n[[quality.rule]]\nflag = "cloud"\nbits = [3]\n' + more
    )


def _toml(value: object) -> str:
    return f'"{value}"' if isinstance(value, str) else str(value)
