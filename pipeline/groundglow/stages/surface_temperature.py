"""Stage: surface temperature and its standard uncertainty."""

from __future__ import annotations

from dataclasses import replace
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.retrieval.chain import ChainSettings, invert
from groundglow.stages import schema
from groundglow.stages.pixels import Output, contiguous, over_pixels, own_flags
from groundglow.stages.variables import AIR_TERMS, CAUSE, WEIGHTING

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
