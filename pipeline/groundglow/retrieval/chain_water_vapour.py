"""The chain's second method on one tile: surface temperature from the column water vapour alone."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.quantities import FLAG
from groundglow.retrieval.chain import ChainSettings, EmissivityFields, Inversion, Pixels
from groundglow.retrieval.single_channel_water_vapour import (
    METHOD_UNCERTAINTY,
    invert_tile_with_water_vapour,
)

Flags = NDArray[np.uint16]
Float = NDArray[np.float64]

_IMPOSSIBLE = np.uint16(FLAG["impossible"].mask)


@dataclass(frozen=True)
class WaterVapourSettings:
    """What the method needs to know once per scene.

    Attributes
    ----------
    packed : float64 array (10,)
        Coefficients, see ``single_channel_water_vapour.WaterVapourCoefficients.packed``.
    relative_uncertainty : float
        1 sigma of the column, one error per scene. [1]
    """

    packed: Float
    relative_uncertainty: float


def invert_with_column(
    radiance: Pixels,
    brightness: Pixels,
    flags: Flags,
    emissivity: EmissivityFields,
    water: Pixels,
    *,
    settings: ChainSettings,
    method: WaterVapourSettings,
) -> Inversion:
    """Surface temperature of one tile and its uncertainty.

    Parameters
    ----------
    radiance, brightness : float32 arrays (rows, columns), C-contiguous
        At the sensor. [W m-2 sr-1 um-1], [K]
    flags : uint16 array (rows, columns), C-contiguous
        Gains "atmosphere outside validity" and "impossible".
    emissivity : EmissivityFields
    water : float32 array (rows, columns), C-contiguous
        Column water vapour; above 30 kg m-2 there is no result. [kg m-2]
    settings : ChainSettings
        Noise, calibration, and the range of possible temperatures.
    method : WaterVapourSettings

    Returns
    -------
    Inversion
        ``blackbody`` is NaN, which the method does not know.
    """
    temperature, per_radiance, per_emissivity, per_water = (np.empty_like(radiance) for _ in range(4))
    invert_tile_with_water_vapour(
        radiance, brightness, emissivity.band, water, method.packed,
        temperature, per_radiance, per_emissivity, per_water, flags,
    )  # fmt: skip
    low, high = settings.possible_range
    impossible = (temperature < np.float32(low)) | (temperature > np.float32(high))
    flags[impossible] |= _IMPOSSIBLE
    temperature[impossible] = np.nan
    pixel = np.abs(per_radiance) * np.float32(settings.noise)
    surface_class = per_emissivity * emissivity.band_uncertainty
    common = (per_radiance * np.float32(settings.calibration)) ** 2 + np.float32(METHOD_UNCERTAINTY**2)
    common += (per_water * water * np.float32(method.relative_uncertainty)) ** 2
    scene, total = np.sqrt(common), np.sqrt(pixel**2 + surface_class**2 + common)
    for part in (pixel, surface_class, scene, total):
        part[impossible] = np.nan
    nothing = np.full(radiance.shape, np.nan, np.float32)
    response = np.divide(np.float32(1.0), per_radiance)
    return Inversion(temperature, nothing, response, pixel, surface_class, scene, total)
