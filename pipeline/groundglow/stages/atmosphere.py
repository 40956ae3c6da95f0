"""Stage: the air at each pixel, from a packed table over place, ground height and view angle."""

from __future__ import annotations

import math
from collections.abc import Mapping
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from affine import Affine
from numpy.typing import NDArray

from groundglow.atmosphere.interpolate import AirStack, interpolate, interpolate_anywhere
from groundglow.atmosphere.view import secant
from groundglow.quantities import FLAG
from groundglow.stages import schema
from groundglow.stages.grid import GRID_MAPPING, grid_of, is_rotated
from groundglow.stages.pixels import Output, contiguous, over_pixels, own_flags
from groundglow.stages.variables import AIR_TERMS, CAUSE, WEIGHTING

_OUTSIDE_VALIDITY = np.uint16(FLAG["atmosphere_outside_validity"].mask)


def atmosphere(
    dataset: xr.Dataset, air: AirStack, weighting: NDArray[np.float32], origin: str = ""
) -> xr.Dataset:
    """Transmittance, path radiance, transmitted sky radiance and sky flux at each pixel.

    Parameters
    ----------
    dataset : Dataset
        Holds ``quality`` (y, x); ``elevation`` [m] and ``view_zenith_angle`` [degree], per pixel or as
        one number, where the air depends on them.
    air : AirStack
        The band's air: ``plan.work.air``.
    weighting : float32 array (1,) or (3,)
        Surface temperatures at which the air's transmittance is weighted [K]:
        ``plan.work.settings.weighting``.
    origin : str
        Where the air is from, for the attributes.

    Returns
    -------
    Dataset
        With ``transmittance`` (weighting_temperature, y, x), ``path_radiance``,
        ``transmitted_sky_radiance``, ``sky_flux``, and each of them with ``_change`` behind its name:
        its change for one standard uncertainty of every cause (cause, ..., y, x).

    Raises
    ------
    InputError
        If a variable that the air depends on is missing or in another unit.
    """
    needed = {"quality": "1"}
    if air.height.size > 1:
        needed["elevation"] = "m"
    if air.secant.size > 1:
        needed["view_zenith_angle"] = "degree"
    schema.require(dataset, **needed)
    fixed, varying = {"elevation": 0.0, "view_zenith_angle": 0.0}, {}
    for name in needed.keys() & fixed.keys():
        if dataset[name].ndim:
            varying[name] = dataset[name]
        else:
            # One number for all pixels stays one: the air is settled along that axis at once.
            fixed[name] = float(dataset[name])
    # Coordinate variables of a Dataset are indexes; the function wants their numbers as plain arrays.
    y, x = (xr.DataArray(dataset.coords[axis].values, dims=axis) for axis in ("y", "x"))
    transform = _transform(dataset)
    function = partial(
        _air,
        stack=air,
        transform=transform if is_rotated(transform) else None,
        varying=tuple(varying),
        fixed=fixed,
    )
    found = over_pixels(
        function,
        [dataset["quality"], y, x, *varying.values()],
        [
            *(Output(name, np.float32, _beside(name)) for name in AIR_TERMS),
            *(Output(f"{name}_change", np.float32, (CAUSE, *_beside(name))) for name in AIR_TERMS),
            Output("quality", np.uint16),
        ],
        sizes={WEIGHTING: air.temperatures, CAUSE: len(air.causes)},
        origin=origin,
    )
    kelvin = xr.Variable(
        (WEIGHTING,), np.asarray(weighting, np.float32),
        {"units": "K", "long_name": "surface temperature for which the transmittance is weighted"},
    )  # fmt: skip
    causes = xr.Variable(
        (CAUSE,), np.array(air.causes, dtype=str), {"long_name": "cause of uncertainty in the air"}
    )
    return dataset.assign(found).assign_coords({WEIGHTING: kelvin, CAUSE: causes})


def _transform(dataset: xr.Dataset) -> Affine:
    """The transform of the whole grid: on a rotated grid, coordinates count its pixels."""
    grid_of(dataset)
    c, a, b, f, d, e = (float(word) for word in dataset.coords[GRID_MAPPING].attrs["GeoTransform"].split())
    return Affine(a, b, c, d, e, f)


def _beside(name: str) -> tuple[str, ...]:
    return (WEIGHTING,) if name == "transmittance" else ()


def _air(
    quality: NDArray[Any],
    y: NDArray[Any],
    x: NDArray[Any],
    *pixels: NDArray[Any],
    stack: AirStack,
    transform: Affine | None,
    varying: tuple[str, ...],
    fixed: Mapping[str, float],
) -> tuple[NDArray[Any], ...]:
    """All terms at the pixels of one chunk, causes and weighting temperatures behind (y, x)."""
    given = dict(zip(varying, pixels, strict=True))
    height = contiguous(given["elevation"]) if "elevation" in given else fixed["elevation"]
    if "view_zenith_angle" in given:
        slant: NDArray[np.float32] | float = secant(contiguous(given["view_zenith_angle"]))
    else:
        slant = 1.0 / math.cos(math.radians(fixed["view_zenith_angle"]))
    if transform is None:
        air = interpolate(stack, x.ravel(), y.ravel(), height, slant)
    else:
        columns, rows = np.meshgrid(x.ravel(), y.ravel())
        a, b, c, d, e, f = tuple(transform)[:6]
        air = interpolate_anywhere(
            stack, c + a * columns + b * rows, f + d * columns + e * rows, height, slant
        )
    flags = own_flags(quality)
    # Where the ground height or the angle is not known, neither is the air.
    flags[np.isnan(air[0])] |= _OUTSIDE_VALIDITY
    count = stack.temperatures
    groups = air.reshape(1 + len(stack.causes), count + 3, *air.shape[1:])
    best, changes = np.moveaxis(groups[0], 0, -1), np.moveaxis(groups[1:], (0, 1), (-2, -1))
    return (
        best[..., :count],
        *(best[..., count + k] for k in range(3)),
        changes[..., :count],
        *(changes[..., count + k] for k in range(3)),
        flags,
    )
