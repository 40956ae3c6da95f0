"""Stage: surface temperature and its standard uncertainty."""

from __future__ import annotations

from dataclasses import replace
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.quantities import FLAG
from groundglow.retrieval.chain import ChainSettings, EmissivityFields, invert
from groundglow.retrieval.chain_water_vapour import WaterVapourSettings, invert_with_column
from groundglow.stages import schema
from groundglow.stages.pixels import Output, contiguous, over_pixels, own_flags
from groundglow.stages.variables import AIR_TERMS, CAUSE, WEIGHTING

_OUTSIDE_VALIDITY = np.uint16(FLAG["atmosphere_outside_validity"].mask)
# The sky's flux takes no part in the inversion.
_TERMS = AIR_TERMS[:3]
_NAMES = (
    "surface_temperature",
    "surface_temperature_uncertainty",
    "surface_temperature_uncertainty_pixel",
    "surface_temperature_uncertainty_class",
    "surface_temperature_uncertainty_scene",
    "surface_temperature_emissivity_effect",
)


def surface_temperature(dataset: xr.Dataset, settings: ChainSettings) -> xr.Dataset:
    """Surface temperature by inverting the radiative transfer equation, with its uncertainty.

    Parameters
    ----------
    dataset : Dataset
        Holds ``radiance``, ``brightness_temperature`` (whose stage sets the sensor's flags),
        ``emissivity``, ``emissivity_uncertainty``, ``quality`` and what the atmosphere stage gives.
    settings : ChainSettings
        Of the band: ``plan.work.settings``. Weighting temperatures and causes are the Dataset's own.

    Returns
    -------
    Dataset
        With ``surface_temperature`` [K]; its standard uncertainty, the parts of it that differ from pixel
        to pixel, are shared within a class of ground, and by the whole scene [K]; the signed effect of
        the emissivity's error, which the flux needs [K]; and ``quality``.

    Raises
    ------
    InputError
        Listing every variable that is missing or in another unit.
    """
    changes = tuple(f"{name}_change" for name in _TERMS)
    needed = ("radiance", "brightness_temperature", "emissivity", "emissivity_uncertainty", *_TERMS, *changes)
    schema.require_variables(dataset, (*needed, "quality"))
    inputs = [dataset[name] for name in needed if name != "brightness_temperature"]
    chosen = replace(
        settings,
        weighting=np.array(dataset[WEIGHTING].values, dtype=np.float32),
        causes=dataset.sizes[CAUSE],
    )
    found = over_pixels(
        partial(_invert, settings=chosen),
        [dataset["quality"], *inputs],
        [*(Output(name) for name in _NAMES), Output("quality", np.uint16)],
        origin="inversion of the radiative transfer equation in one band",
    )
    return dataset.assign(found)


def surface_temperature_from_column(
    dataset: xr.Dataset, settings: ChainSettings, method: WaterVapourSettings
) -> xr.Dataset:
    """Surface temperature by the published water-vapour form, which needs the column alone.

    Parameters
    ----------
    dataset : Dataset
        Holds ``radiance``, ``brightness_temperature``, ``emissivity``, ``emissivity_uncertainty``,
        ``quality``, and ``column_water_vapour`` [kg m-2] per pixel or as one number.
    settings : ChainSettings
        Of the band: ``plan.work.settings``.
    method : WaterVapourSettings
        Coefficients and the column's uncertainty: ``plan.work.column.settings``.

    Returns
    -------
    Dataset
        As :func:`surface_temperature`.

    Raises
    ------
    InputError
        Listing every variable that is missing or in another unit.
    """
    needed = (
        "radiance",
        "brightness_temperature",
        "emissivity",
        "emissivity_uncertainty",
        "column_water_vapour",
    )
    schema.require_variables(dataset, (*needed, "quality"))
    water = dataset["column_water_vapour"]
    if not water.ndim:
        water = xr.full_like(dataset["quality"], np.float32(float(water)), dtype=np.float32)
    found = over_pixels(
        partial(_invert_with_column, settings=settings, method=method),
        [dataset["quality"], *(dataset[name] for name in needed[:-1]), water],
        [*(Output(name) for name in _NAMES), Output("quality", np.uint16)],
        origin="the published form with the column water vapour",
    )
    return dataset.assign(found)


def _invert(
    quality: NDArray[Any],
    radiance: NDArray[Any],
    emissivity: NDArray[Any],
    uncertainty: NDArray[Any],
    *air: NDArray[Any],
    settings: ChainSettings,
) -> tuple[NDArray[Any], ...]:
    flags = own_flags(quality)
    found = invert(
        contiguous(radiance),
        flags,
        contiguous(emissivity),
        contiguous(uncertainty),
        air=_fields(air, settings, radiance.shape),
        settings=settings,
    )
    effect = found.surface_class
    return found.temperature, found.total, found.pixel, np.abs(effect), found.scene, effect, flags


def _invert_with_column(
    quality: NDArray[Any],
    radiance: NDArray[Any],
    brightness: NDArray[Any],
    emissivity: NDArray[Any],
    uncertainty: NDArray[Any],
    water: NDArray[Any],
    settings: ChainSettings,
    method: WaterVapourSettings,
) -> tuple[NDArray[Any], ...]:
    flags, column, band = own_flags(quality), contiguous(water), contiguous(emissivity)
    # Where the column is not known, neither is the air.
    flags[np.isnan(column)] |= _OUTSIDE_VALIDITY
    nothing = np.zeros(band.shape, np.float32)
    ground = EmissivityFields(
        band, contiguous(uncertainty), band, nothing, nothing, np.zeros(band.shape, np.uint16)
    )
    found = invert_with_column(
        contiguous(radiance), contiguous(brightness), flags, ground, column, settings=settings, method=method
    )
    effect = found.surface_class
    return found.temperature, found.total, found.pixel, np.abs(effect), found.scene, effect, flags


def _fields(
    air: tuple[NDArray[Any], ...], settings: ChainSettings, shape: tuple[int, ...]
) -> NDArray[np.float32]:
    """The air's terms as the inversion wants them: field by field, first the estimate, then each cause."""
    transmittance, path, sky, *changes = air
    count = settings.weighting.size
    fields = np.zeros((1 + settings.causes, count + 3, *shape), np.float32)
    fields[0, :count] = np.moveaxis(transmittance, -1, 0)
    fields[0, count], fields[0, count + 1] = path, sky
    fields[1:, :count] = np.moveaxis(changes[0], (-2, -1), (0, 1))
    fields[1:, count], fields[1:, count + 1] = (np.moveaxis(change, -1, 0) for change in changes[1:])
    return fields.reshape(-1, *shape)
