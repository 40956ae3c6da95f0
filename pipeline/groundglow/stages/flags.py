"""Asking a Dataset's quality for flags by name."""

from __future__ import annotations

import xarray as xr

from groundglow.errors import ConfigError
from groundglow.quantities import FLAG
from groundglow.stages import schema


def flagged(dataset: xr.Dataset, *names: str) -> xr.DataArray:
    """Where any of some flags is set.

    Parameters
    ----------
    dataset : Dataset
        Holds ``quality`` (y, x).
    *names : str
        Names of :data:`groundglow.quantities.FLAGS`.

    Returns
    -------
    bool DataArray (y, x)
        Lazy where the quality is.

    Raises
    ------
    ConfigError
        If there is no flag of that name.
    InputError
        If the Dataset has no quality.
    """
    schema.require(dataset, quality="1")
    for name in names:
        if name not in FLAG:
            raise ConfigError(f"there is no flag {name!r}", remedy=f"Choose from: {', '.join(FLAG)}")
    bits = sum(FLAG[name].mask for name in set(names))
    return (dataset["quality"] & bits) != 0
