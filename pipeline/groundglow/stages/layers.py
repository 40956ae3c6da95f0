"""Stage: from everything computed to the layers of a map: chosen, masked, one number a pixel."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.errors import ConfigError
from groundglow.quantities import DEFAULT_MASK, FLAG, QUANTITIES
from groundglow.retrieval import chain
from groundglow.stages import schema
from groundglow.stages.pixels import Output, over_pixels
from groundglow.stages.variables import WEIGHTING


def layers(dataset: xr.Dataset, names: Sequence[str], mask: Sequence[str] = DEFAULT_MASK) -> xr.Dataset:
    """The layers of a map, with NaN where a flag takes the number away.

    Parameters
    ----------
    dataset : Dataset
        Holds the variables named, and ``quality``.
    names : sequence of str
        Layers wanted; quality always comes along. Of a transmittance at several weighting temperatures
        the middle one becomes the layer.
    mask : sequence of str
        Names of the flags whose pixels carry no number.

    Returns
    -------
    Dataset
        These layers alone, (y, x), in full float32: rounding is left to writing.

    Raises
    ------
    ConfigError
        If there is no such layer or flag.
    InputError
        Listing every variable that is missing or in another unit.
    """
    for known, chosen, kind in ((QUANTITIES, names, "layer"), (FLAG, mask, "flag")):
        for name in chosen:
            if name not in known:
                raise ConfigError(f"there is no {kind} {name!r}", remedy=f"Choose from: {', '.join(known)}")
    wanted = [name for name in dict.fromkeys(names) if name != "quality"]
    schema.require_variables(dataset, (*wanted, "quality"))
    bits = sum(FLAG[name].mask for name in set(mask))
    found = {"quality": dataset["quality"]}
    for name in wanted:
        values = dataset[name]
        if WEIGHTING in values.dims:
            values = values.isel({WEIGHTING: values.sizes[WEIGHTING] // 2})
        origin = str(values.attrs.get("origin", ""))
        found |= over_pixels(
            partial(_masked, bits=bits), [values, dataset["quality"]], [Output(name)], origin=origin
        )
    coordinates = {name: one for name, one in dataset.coords.items() if set(one.dims) <= {"y", "x"}}
    return xr.Dataset(found, coords=coordinates, attrs=dataset.attrs).drop_vars(WEIGHTING, errors="ignore")


def _masked(values: NDArray[Any], quality: NDArray[Any], bits: int) -> tuple[NDArray[np.float32]]:
    kept = np.array(values, dtype=np.float32, order="C")
    chain.mask_flagged(kept, np.ascontiguousarray(quality, dtype=np.uint16), bits)
    return (kept,)
