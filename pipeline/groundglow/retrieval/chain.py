"""The chain on one tile: radiance to surface temperature, its uncertainty, and fluxes.

This is the order of the steps and nothing else: every step is a compiled kernel of
``chain_kernels``, every number comes in as an array or in :class:`ChainSettings`. The fused run,
the stage commands and the account of a single pixel all walk through here.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.physics.band_table import BandTable
from groundglow.retrieval import chain_kernels as kernels

Pixels = NDArray[np.float32]
Flags = NDArray[np.uint16]


@dataclass(frozen=True)
class ChainSettings:
    """What the chain needs to know once per scene.

    Attributes
    ----------
    table : BandTable
        Radiance to temperature of the band used.
    lowest_radiance, highest_radiance : float
        Blackbody radiances outside which a result is physically impossible. [W m-2 sr-1 um-1]
    possible_range : tuple of float
        The same as temperatures. [K]
    calibrated_range : tuple of float
        Brightness temperatures within which the sensor is calibrated. [K]
    saturation_temperature : float
        Brightness temperature from which on the sensor saturates; infinite where unknown. [K]
    weighting : float32 array (1 or 3,)
        Surface temperatures of the air's transmittance. [K]
    causes : int
        Causes of uncertainty carried by the air's fields.
    noise, calibration : float
        Standard uncertainties of the radiance: pixel to pixel, and of the whole scene.
        [W m-2 sr-1 um-1]
    """

    table: BandTable
    lowest_radiance: float
    highest_radiance: float
    possible_range: tuple[float, float]
    calibrated_range: tuple[float, float]
    saturation_temperature: float
    weighting: Pixels
    causes: int
    noise: float
    calibration: float


@dataclass(frozen=True)
class EmissivityFields:
    """Emissivity of one tile or block, float32 arrays of one shape, NaN where there is none.

    Attributes
    ----------
    band : array
        Emissivity in the thermal band used.
    band_uncertainty : array
        1 sigma.
    broadband : array
        Broadband emissivity for the flux.
    broadband_shared : array
        Part of the broadband error that moves with the band's error (signed, 1 sigma).
    broadband_own : array
        The broadband rule's own part (1 sigma).
    flags : uint16 array
        Quality bits that the method sets.
    """

    band: Pixels
    band_uncertainty: Pixels
    broadband: Pixels
    broadband_shared: Pixels
    broadband_own: Pixels
    flags: Flags

    def window(self, rows: slice, columns: slice) -> EmissivityFields:
        """A contiguous, writable copy of a part (one value spread over one pixel counts as contiguous)."""
        parts = (getattr(self, name)[rows, columns] for name in self.__dataclass_fields__)
        return EmissivityFields(*(np.require(part, requirements=["C", "W"]) for part in parts))


def brightness_temperature(radiance: Pixels, flags: Flags, settings: ChainSettings) -> Pixels:
    """Brightness temperature of a tile; ``flags`` gains the bits that follow from it.

    Parameters
    ----------
    radiance : float32 array (rows, columns), C-contiguous
        NaN where there is no value. [W m-2 sr-1 um-1]
    flags : uint16 array (rows, columns), C-contiguous
        Changed in place.
    settings : ChainSettings

    Returns
    -------
    float32 array (rows, columns)
        NaN where the radiance is NaN or no blackbody's between 150 K and 1,500 K. [K]
    """
    result = np.empty_like(radiance)
    _look_up(
        radiance, settings.table, settings.table.lowest_radiance, settings.table.highest_radiance, result
    )
    low, high = settings.calibrated_range
    kernels.flag_radiance(radiance, result, _f(low), _f(high), _f(settings.saturation_temperature), flags)
    return result


def surface_maps(
    radiance: Pixels,
    flags: Flags,
    emissivity: EmissivityFields,
    air: Pixels,
    settings: ChainSettings,
    wanted: Collection[str],
) -> Mapping[str, Pixels]:
    """Surface temperature and all that follows from it, for one tile.

    Parameters
    ----------
    radiance : float32 array (rows, columns), C-contiguous
        [W m-2 sr-1 um-1]
    flags : uint16 array (rows, columns), C-contiguous
        Gains the bits that the inversion sets.
    emissivity : EmissivityFields
    air : float32 array (fields, rows, columns), C-contiguous
        As ``atmosphere.interpolate`` gives it.
    settings : ChainSettings
    wanted : collection of str
        Names of :data:`groundglow.quantities.QUANTITIES`; more may come back.

    Returns
    -------
    mapping of str to float32 array
    """
    flags |= emissivity.flags
    found = invert(radiance, flags, emissivity.band, emissivity.band_uncertainty, air=air, settings=settings)
    maps = maps_of_inversion(found, emissivity)
    maps["transmittance"] = air[settings.weighting.size // 2]
    maps["path_radiance"] = air[settings.weighting.size]
    maps["sky_flux"] = air[settings.weighting.size + 2]
    if {"leaving_flux", "net_longwave_flux"} & set(wanted):
        maps["leaving_flux"], maps["net_longwave_flux"] = surface_fluxes(
            maps["emitted_flux"], emissivity.broadband, maps["sky_flux"]
        )
    return maps


def maps_of_inversion(found: Inversion, emissivity: EmissivityFields) -> dict[str, Pixels]:
    """Temperature, its uncertainties and the emitted flux by name, whatever the method that found them."""
    emitted, emitted_uncertainty = emitted_flux(found, emissivity)
    return {
        "surface_temperature": found.temperature,
        "surface_temperature_uncertainty": found.total,
        "surface_temperature_uncertainty_pixel": found.pixel,
        "surface_temperature_uncertainty_class": np.abs(found.surface_class),
        "surface_temperature_uncertainty_scene": found.scene,
        "emissivity": emissivity.band,
        "broadband_emissivity": emissivity.broadband,
        "emitted_flux": emitted,
        "emitted_flux_uncertainty": emitted_uncertainty,
    }


@dataclass(frozen=True)
class Inversion:
    """Surface temperature of one tile and its standard uncertainty, float32 arrays of one shape.

    Attributes
    ----------
    temperature : array
        [K]
    blackbody, response : array
        What the air lets through of the blackbody's radiance, and the change of the radiance at the
        sensor with temperature. [W m-2 sr-1 um-1, W m-2 sr-1 um-1 K-1]
    pixel, scene, total : array
        Standard uncertainties: noise; calibration and air; all. [K]
    surface_class : array
        Change of the temperature for an emissivity too high by one standard uncertainty (signed). [K]
    """

    temperature: Pixels
    blackbody: Pixels
    response: Pixels
    pixel: Pixels
    surface_class: Pixels
    scene: Pixels
    total: Pixels


def invert(
    radiance: Pixels,
    flags: Flags,
    emissivity: Pixels,
    uncertainty: Pixels,
    air: Pixels,
    settings: ChainSettings,
) -> Inversion:
    """Surface temperature of one tile, with its uncertainty by what errors share.

    Parameters
    ----------
    radiance : float32 array (rows, columns), C-contiguous
        [W m-2 sr-1 um-1]
    flags : uint16 array (rows, columns), C-contiguous
        Gains the bits that the inversion sets.
    emissivity, uncertainty : float32 arrays (rows, columns), C-contiguous
        In the thermal band, and its 1 sigma.
    air : float32 array (fields, rows, columns), C-contiguous
        As ``atmosphere.interpolate`` gives it.
    settings : ChainSettings
        Of the band.

    Returns
    -------
    Inversion
        NaN where there is no temperature.
    """
    shape = radiance.shape
    temperature, blackbody, response = (np.empty(shape, np.float32) for _ in range(3))
    table = settings.table
    kernels.surface_temperature(
        radiance, emissivity, air, settings.weighting, table.start, table.temperature, table.slope,
        np.int32(table.first_key), _f(settings.lowest_radiance), _f(settings.highest_radiance),
        temperature, blackbody, response, flags,
    )  # fmt: skip
    pixel, surface_class, scene, total = (np.empty(shape, np.float32) for _ in range(4))
    kernels.temperature_uncertainty(
        temperature, blackbody, response, emissivity, uncertainty, air,
        np.int32(settings.weighting.size), np.int32(settings.causes),
        np.full(shape, settings.noise, np.float32), _f(settings.calibration),
        pixel, surface_class, scene, total,
    )  # fmt: skip
    return Inversion(temperature, blackbody, response, pixel, surface_class, scene, total)


def emitted_flux(found: Inversion, emissivity: EmissivityFields) -> tuple[Pixels, Pixels]:
    """Emitted flux of one tile and its standard uncertainty, in W m-2."""
    emitted, uncertainty = (np.empty(found.temperature.shape, np.float32) for _ in range(2))
    kernels.emitted_flux(
        found.temperature, found.pixel, found.surface_class, found.scene, emissivity.broadband,
        emissivity.broadband_shared, emissivity.broadband_own, emitted, uncertainty,
    )  # fmt: skip
    return emitted, uncertainty


def surface_fluxes(emitted: Pixels, broadband_emissivity: Pixels, sky: Pixels) -> tuple[Pixels, Pixels]:
    """Leaving flux and net longwave flux (downward positive) of one tile, in W m-2."""
    leaving, net = (np.empty(emitted.shape, np.float32) for _ in range(2))
    kernels.surface_fluxes(emitted, broadband_emissivity, np.ascontiguousarray(sky), leaving, net)
    return leaving, net


def mask_flagged(values: Pixels, flags: Flags, mask: int) -> None:
    """Set to NaN, in place, every value whose flags meet the mask."""
    kernels.mask_flagged(values, flags, np.uint16(mask))


def _look_up(radiance: Pixels, table: BandTable, lowest: float, highest: float, result: Pixels) -> None:
    kernels.temperature_of_radiance(
        radiance, table.start, table.temperature, table.slope, np.int32(table.first_key),
        _f(lowest), _f(highest), result,
    )  # fmt: skip


def _f(value: float) -> np.float32:
    return np.float32(value)
