"""Stage: longwave fluxes of the surface."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.retrieval import chain
from groundglow.stages import schema
from groundglow.stages.pixels import Output, contiguous, over_pixels

_NEEDED = (
    "surface_temperature",
    "surface_temperature_uncertainty_pixel",
    "surface_temperature_emissivity_effect",
    "surface_temperature_uncertainty_scene",
    "broadband_emissivity",
    "broadband_emissivity_shared_uncertainty",
    "broadband_emissivity_own_uncertainty",
)


def flux(dataset: xr.Dataset) -> xr.Dataset:
    """Emitted flux with its uncertainty; leaving and net longwave flux where the sky's flux is given.

    Parameters
    ----------
    dataset : Dataset
        Holds what the stages surface temperature and emissivity give; ``sky_flux`` [W m-2] if known.

    Returns
    -------
    Dataset
        With ``emitted_flux``, ``emitted_flux_uncertainty`` and, where the sky's flux is given,
        ``leaving_flux`` and ``net_longwave_flux`` (downward positive). [W m-2]

    Raises
    ------
    InputError
        Listing every variable that is missing or in another unit.
    """
    schema.require_variables(dataset, _NEEDED)
    names = ["emitted_flux", "emitted_flux_uncertainty"]
    inputs = [dataset[name] for name in _NEEDED]
    if "sky_flux" in dataset:
        schema.require_variables(dataset, ("sky_flux",))
        names += ["leaving_flux", "net_longwave_flux"]
        inputs.append(dataset["sky_flux"])
    found = over_pixels(
        _fluxes, inputs, [Output(name) for name in names], origin="broadband emissivity x sigma x T^4"
    )
    return dataset.assign(found)


def _fluxes(
    temperature: NDArray[Any],
    pixel: NDArray[Any],
    effect: NDArray[Any],
    scene: NDArray[Any],
    broadband: NDArray[Any],
    shared: NDArray[Any],
    own: NDArray[Any],
    *sky: NDArray[Any],
) -> tuple[NDArray[Any], ...]:
    t = contiguous(temperature)
    # The flux looks at the temperature and the parts of its uncertainty only.
    found = chain.Inversion(t, t, t, contiguous(pixel), contiguous(effect), contiguous(scene), t)
    ground = chain.EmissivityFields(
        band=contiguous(broadband),
        band_uncertainty=contiguous(own),
        broadband=contiguous(broadband),
        broadband_shared=contiguous(shared),
        broadband_own=contiguous(own),
        flags=np.zeros(t.shape, np.uint16),
    )
    emitted, uncertainty = chain.emitted_flux(found, ground)
    if not sky:
        return emitted, uncertainty
    return (emitted, uncertainty, *chain.surface_fluxes(emitted, ground.broadband, contiguous(sky[0])))
