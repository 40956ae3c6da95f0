"""Stage: stored numbers to spectral radiance."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.errors import DomainError
from groundglow.quantities import FLAG
from groundglow.raster.decode import decode_reference
from groundglow.stages import schema
from groundglow.stages.pixels import Output, described, over_pixels, own_flags

_SATURATED = np.uint16(FLAG["saturated"].mask)


@dataclass(frozen=True)
class Calibration:
    """What a band's stored numbers mean: radiance = scale * counts + offset.

    Attributes
    ----------
    scale : float
        [W m-2 sr-1 um-1]
    offset : float
        [W m-2 sr-1 um-1]
    nodata : float or None
        Stored number without a value.
    saturation : float or None
        Stored number from which on the band is saturated.
    """

    scale: float
    offset: float
    nodata: float | None = None
    saturation: float | None = None

    def __post_init__(self) -> None:
        if not (np.isfinite(self.scale) and self.scale != 0.0 and np.isfinite(self.offset)):
            raise DomainError(f"a calibration needs a scale other than 0 and finite numbers, not {self}")


def radiance(dataset: xr.Dataset, calibration: Calibration) -> xr.Dataset:
    """Spectral radiance of counts, for pixels that did not come through a scene description.

    Parameters
    ----------
    dataset : Dataset
        Holds ``counts`` (y, x) [1]; ``quality`` where flags are known already.
    calibration : Calibration

    Returns
    -------
    Dataset
        With ``radiance`` [W m-2 sr-1 um-1], NaN where there is no value, and ``quality``.

    Raises
    ------
    InputError
        If counts are missing, or not plain numbers.
    """
    schema.require(dataset, counts="1")
    if "quality" not in dataset:
        none = xr.zeros_like(dataset["counts"], dtype=np.uint16)
        dataset = dataset.assign(quality=described(none, "quality", "none known"))
    schema.require(dataset, quality="1")
    found = over_pixels(
        partial(_radiance, calibration=calibration),
        [dataset["counts"], dataset["quality"]],
        [Output("radiance"), Output("quality", np.uint16)],
        origin=f"{calibration.scale!r} * counts + {calibration.offset!r}",
    )
    return dataset.assign(found)


def _radiance(
    counts: NDArray[Any], quality: NDArray[Any], calibration: Calibration
) -> tuple[NDArray[Any], NDArray[Any]]:
    values, saturated = decode_reference(
        counts,
        calibration.scale,
        calibration.offset,
        np.nan if calibration.nodata is None else calibration.nodata,
        np.inf if calibration.saturation is None else calibration.saturation,
    )
    flags = own_flags(quality)
    flags[saturated] |= _SATURATED
    return values, flags
