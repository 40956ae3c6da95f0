"""What each cause of error does to the surface temperature of pixels, one at a time through the chain itself."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from groundglow.retrieval import chain
from groundglow.retrieval.chain_water_vapour import invert_with_column
from groundglow.retrieval.single_channel_water_vapour import METHOD_UNCERTAINTY
from groundglow.run.blocks.column import ColumnAndGround
from groundglow.run.blocks.worker import AirAndGround, SceneWork

Pixels = NDArray[np.float32]


@dataclass(frozen=True)
class Causes:
    """Change of the temperature for one standard uncertainty of each cause; float32 arrays of one shape. [K]

    Attributes
    ----------
    noise, calibration : array
    emissivity : array
        Signed: an emissivity too high lowers the temperature.
    air : mapping of str to array
        The causes in the air, and what the method itself adds.
    """

    noise: Pixels
    calibration: Pixels
    emissivity: Pixels
    air: Mapping[str, Pixels]

    def at(self, row: int, column: int) -> PixelCauses:
        """The causes of one pixel."""
        return PixelCauses(
            float(self.noise[row, column]),
            float(self.calibration[row, column]),
            float(self.emissivity[row, column]),
            {name: float(change[row, column]) for name, change in self.air.items()},
        )


@dataclass(frozen=True)
class PixelCauses:
    """The same for one pixel, in plain numbers. [K]"""

    noise: float
    calibration: float
    emissivity: float
    air: Mapping[str, float]


def causes_with_air(work: SceneWork, ground: AirAndGround, radiance: Pixels) -> Causes:
    """Causes of the single-channel method at the pixels of a small block.

    Parameters
    ----------
    work : SceneWork
    ground : AirAndGround
        Of the block.
    radiance : float32 array (rows, columns), C-contiguous
        [W m-2 sr-1 um-1]
    """
    settings = work.settings
    size = settings.weighting.size + 3
    rows, columns = _whole(radiance)
    air = ground.air(rows, columns)
    fields = ground.emissivity.window(rows, columns)

    def alone(cause: int | None, calibration: float) -> chain.Inversion:
        parts = [air[:size]] if cause is None else [air[:size], air[(cause + 1) * size : (cause + 2) * size]]
        return chain.invert(
            radiance,
            np.zeros(radiance.shape, np.uint16),
            fields.band,
            fields.band_uncertainty,
            air=np.ascontiguousarray(np.concatenate(parts)),
            settings=replace(settings, causes=len(parts) - 1, calibration=calibration),
        )

    sensor = alone(None, settings.calibration)
    return Causes(
        noise=sensor.pixel,
        calibration=sensor.scene,
        emissivity=sensor.surface_class,
        air={name: alone(index, 0.0).scene for index, name in enumerate(ground.stack.causes)},
    )


def causes_with_column(
    work: SceneWork, ground: ColumnAndGround, radiance: Pixels, brightness: Pixels
) -> Causes:
    """Causes of the water-vapour method at the pixels of a small block.

    Parameters
    ----------
    work : SceneWork
    ground : ColumnAndGround
        Of the block.
    radiance, brightness : float32 arrays (rows, columns), C-contiguous
        [W m-2 sr-1 um-1], [K]
    """
    rows, columns = _whole(radiance)

    def alone(calibration: float, water: float) -> chain.Inversion:
        return invert_with_column(
            radiance,
            brightness,
            np.zeros(radiance.shape, np.uint16),
            ground.emissivity.window(rows, columns),
            ground.water_of(rows, columns),
            settings=replace(work.settings, calibration=calibration),
            method=replace(ground.method, relative_uncertainty=water),
        )

    def beyond_method(found: chain.Inversion) -> Pixels:
        squares = found.scene.astype(np.float64) ** 2 - METHOD_UNCERTAINTY**2
        return np.sqrt(np.maximum(squares, 0.0)).astype(np.float32)

    sensor = alone(work.settings.calibration, 0.0)
    method = np.where(np.isfinite(sensor.temperature), np.float32(METHOD_UNCERTAINTY), np.float32(np.nan))
    return Causes(
        noise=sensor.pixel,
        calibration=beyond_method(sensor),
        emissivity=sensor.surface_class,
        air={
            "column_water_vapour": beyond_method(alone(0.0, ground.method.relative_uncertainty)),
            "method": method,
        },
    )


def _whole(pixels: Pixels) -> tuple[slice, slice]:
    return slice(0, pixels.shape[0]), slice(0, pixels.shape[1])
