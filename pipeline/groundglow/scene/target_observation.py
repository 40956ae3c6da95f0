"""What the sensor reports of targets of known temperature, beside what must have come from them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from groundglow.errors import InputError
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.raster.band import Convert, RasterSource
from groundglow.raster.grid import Block, Grid, apply
from groundglow.raster.source import read_block, source_grid
from groundglow.scene.model import KnownTarget
from groundglow.scene.targets import TargetRadiance, expected_radiance


@dataclass(frozen=True)
class Observation:
    """What the sensor reports over a target.

    Attributes
    ----------
    radiance : float
        Mean. [W m-2 sr-1 um-1]
    standard_error : float
        Of the mean, from the scatter of the pixels; 0 for a single pixel.
    pixels : int
    """

    radiance: float
    standard_error: float
    pixels: int


def observe(source: RasterSource, target: KnownTarget, convert: Convert | None) -> Observation:
    """Mean radiance over a target.

    Parameters
    ----------
    source : RasterSource
        The band.
    target : KnownTarget
        The place.
    convert : callable or None
        What leads from the band's pixels to radiance.

    Returns
    -------
    Observation
        Over the pixels near the target's centre, at least the one that holds it.

    Raises
    ------
    InputError
        If the target lies outside the raster, or over pixels that have no value or are saturated.
    """
    grid = source_grid(source)
    block, near = _pixels_near(grid, target)
    read = read_block(source, grid, block, convert=convert)
    if read.saturated is not None and (read.saturated & near).any():
        raise _unusable(target, source, "the band is saturated there")
    values = read.values[near & np.isfinite(read.values)].astype(np.float64)
    if values.size == 0:
        raise _unusable(target, source, "there is no value there")
    error = float(values.std(ddof=1) / math.sqrt(values.size)) if values.size > 1 else 0.0
    return Observation(float(values.mean()), error, int(values.size))


def target_radiance(
    target: KnownTarget,
    seen: Observation,
    response: SpectralResponse,
    *,
    transmittance: float = 1.0,
    path_radiance: float = 0.0,
    sky_radiance: float = 0.0,
    noise: float = 0.0,
) -> TargetRadiance:
    """What was seen of a target beside what must have come from it.

    Parameters
    ----------
    target : KnownTarget
        Its temperature and emissivity.
    seen : Observation
        What the sensor reports.
    response : SpectralResponse
        Of the band.
    transmittance, path_radiance, sky_radiance : float
        Of the air between target and sensor. [1, W m-2 sr-1 um-1]
    noise : float
        Noise of one pixel, for targets of so few pixels that their scatter says little. [W m-2 sr-1 um-1]

    Returns
    -------
    TargetRadiance
        Its uncertainty from temperature, emissivity, scatter and noise.
    """
    blackbody = float(response.band_radiance(target.temperature))
    slope = float(response.band_radiance_slope(target.temperature))
    parts = (
        transmittance * target.emissivity * slope * target.temperature_uncertainty,
        transmittance * (blackbody - sky_radiance) * target.emissivity_uncertainty,
        max(seen.standard_error, noise / math.sqrt(seen.pixels)),
    )
    expected = expected_radiance(
        blackbody,
        target.emissivity,
        transmittance=transmittance,
        path_radiance=path_radiance,
        sky_radiance=sky_radiance,
    )
    return TargetRadiance(target.name, seen.radiance, expected, math.hypot(*parts))


def _pixels_near(grid: Grid, target: KnownTarget) -> tuple[Block, np.ndarray]:
    """The block around a target and its pixels that count."""
    column, row = apply(~grid.transform, target.x, target.y)
    if not (0.0 <= column < grid.width and 0.0 <= row < grid.height):
        raise InputError(
            f"the target {target.name!r} at {target.x:g}, {target.y:g} lies outside the raster",
            remedy="Its place is given in the reference system of the thermal raster",
        )
    t = grid.transform
    reach = target.radius / math.sqrt(abs(t.determinant)) + 1.0
    top, bottom = max(math.floor(row - reach), 0), min(math.ceil(row + reach) + 1, grid.height)
    left, right = max(math.floor(column - reach), 0), min(math.ceil(column + reach) + 1, grid.width)
    across, down = np.meshgrid(np.arange(left, right) + 0.5, np.arange(top, bottom) + 0.5)
    x, y = apply(t, across, down)
    near = np.hypot(x - target.x, y - target.y) <= target.radius
    near[math.floor(row) - top, math.floor(column) - left] = True
    return Block(top, left, bottom - top, right - left), near


def _unusable(target: KnownTarget, source: RasterSource, why: str) -> InputError:
    return InputError(
        f"the target {target.name!r} cannot be used: {why}",
        where=source.path,
        remedy="Correct its place or radius, or leave it out",
    )
