"""Stage: spectral radiance to brightness temperature."""

from __future__ import annotations

from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.retrieval import chain
from groundglow.stages import schema
from groundglow.stages.pixels import Output, contiguous, over_pixels, own_flags


def brightness_temperature(dataset: xr.Dataset, settings: chain.ChainSettings) -> xr.Dataset:
    """Brightness temperature at the sensor, and the flags that follow from it.

    Parameters
    ----------
    dataset : Dataset
        Holds ``radiance`` (y, x) [W m-2 sr-1 um-1] and ``quality``.
    settings : ChainSettings
        Of the band: ``plan.work.settings``.

    Returns
    -------
    Dataset
        With ``brightness_temperature`` [K], NaN where the radiance is NaN or no blackbody's, and
        ``quality``.

    Raises
    ------
    InputError
        If a variable is missing or in another unit.
    """
    schema.require(dataset, radiance="W m-2 sr-1 um-1", quality="1")
    found = over_pixels(
        partial(_brightness, settings=settings),
        [dataset["radiance"], dataset["quality"]],
        [Output("brightness_temperature"), Output("quality", np.uint16)],
        origin="radiance through the band's table of Planck's law",
    )
    return dataset.assign(found)


def _brightness(
    radiance: NDArray[Any], quality: NDArray[Any], settings: chain.ChainSettings
) -> tuple[NDArray[Any], NDArray[Any]]:
    flags = own_flags(quality)
    return chain.brightness_temperature(contiguous(radiance), flags, settings), flags
