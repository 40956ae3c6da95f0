"""What each cause of error does to one pixel's surface temperature, one at a time through the chain itself."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from groundglow.retrieval import chain
from groundglow.retrieval.chain_water_vapour import invert_with_column
from groundglow.retrieval.single_channel_water_vapour import METHOD_UNCERTAINTY
from groundglow.run.column import ColumnAndGround
from groundglow.run.worker import AirAndGround, SceneWork

Pixels = NDArray[np.float32]
_ONE = slice(0, 1)


@dataclass(frozen=True)
class Causes:
    """Change of the temperature for one standard uncertainty of each cause. [K]

    Attributes
    ----------
    noise, calibration : float
    emissivity : float
        Signed: an emissivity too high lowers the temperature.
    air : mapping of str to float
        The causes in the air, and what the method itself adds.
    """

    noise: float
    calibration: float
    emissivity: float
    air: Mapping[str, float]


def causes_with_air(work: SceneWork, ground: AirAndGround, radiance: Pixels) -> Causes:
    """Causes of the single-channel method at one pixel.

    Parameters
    ----------
    work : SceneWork
    ground : AirAndGround
        Of a block of one pixel.
    radiance : float32 array (1, 1)
        [W m-2 sr-1 um-1]
    """
    settings = work.settings
    size = settings.weighting.size + 3
    air = ground.air(_ONE, _ONE)
    fields = ground.emissivity.window(_ONE, _ONE)

    def alone(cause: int | None, calibration: float) -> chain.Inversion:
        parts = [air[:size]] if cause is None else [air[:size], air[(cause + 1) * size : (cause + 2) * size]]
        return chain.invert(
            radiance,
            np.zeros((1, 1), np.uint16),
            fields.band,
            fields.band_uncertainty,
            air=np.ascontiguousarray(np.concatenate(parts)),
            settings=replace(settings, causes=len(parts) - 1, calibration=calibration),
        )

    sensor = alone(None, settings.calibration)
    return Causes(
        noise=float(sensor.pixel[0, 0]),
        calibration=float(sensor.scene[0, 0]),
        emissivity=float(sensor.surface_class[0, 0]),
        air={name: float(alone(index, 0.0).scene[0, 0]) for index, name in enumerate(ground.stack.causes)},
    )


def causes_with_column(
    work: SceneWork, ground: ColumnAndGround, radiance: Pixels, brightness: Pixels
) -> Causes:
    """Causes of the water-vapour method at one pixel.

    Parameters
    ----------
    work : SceneWork
    ground : ColumnAndGround
        Of a block of one pixel.
    radiance, brightness : float32 arrays (1, 1)
        [W m-2 sr-1 um-1], [K]
    """

    def alone(calibration: float, water: float) -> chain.Inversion:
        return invert_with_column(
            radiance,
            brightness,
            np.zeros((1, 1), np.uint16),
            ground.emissivity.window(_ONE, _ONE),
            ground.water_of(_ONE, _ONE),
            settings=replace(work.settings, calibration=calibration),
            method=replace(ground.method, relative_uncertainty=water),
        )

    def beyond_method(found: chain.Inversion) -> float:
        return float(np.sqrt(np.maximum(np.float64(found.scene[0, 0]) ** 2 - METHOD_UNCERTAINTY**2, 0.0)))

    sensor = alone(work.settings.calibration, 0.0)
    valid = np.isfinite(sensor.temperature[0, 0])
    return Causes(
        noise=float(sensor.pixel[0, 0]),
        calibration=beyond_method(sensor),
        emissivity=float(sensor.surface_class[0, 0]),
        air={
            "column_water_vapour": beyond_method(alone(0.0, ground.method.relative_uncertainty)),
            "method": METHOD_UNCERTAINTY if valid else float("nan"),
        },
    )
