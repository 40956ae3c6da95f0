"""The grid of a Dataset: coordinates from a grid, and the grid back from coordinates."""

from __future__ import annotations

import math

import numpy as np
import xarray as xr
from affine import Affine
from rasterio.crs import CRS
from rasterio.errors import CRSError

from groundglow.errors import InputError
from groundglow.raster.grid import Grid, compose

GRID_MAPPING = "spatial_ref"
_TOLERANCE = 1e-3  # of a pixel


def coordinates(grid: Grid) -> dict[str, xr.Variable]:
    """Coordinates of a grid's pixel centres, and its place on the Earth as CF has it.

    Parameters
    ----------
    grid : Grid

    Returns
    -------
    dict
        ``x`` and ``y`` in map units, or, on a rotated grid, in pixels from its corner; and
        ``spatial_ref``, which odc-geo and other libraries read.
    """
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    columns, rows = np.arange(grid.width) + 0.5, np.arange(grid.height) + 0.5
    if is_rotated(grid.transform):
        names = ("pixel centres from the left edge", "pixel centres from the upper edge")
        across, down = ({"long_name": name, "units": "1"} for name in names)
        x, y = columns, rows
    else:
        across, down = _axis_attributes(grid.crs)
        x, y = c + a * columns, f + e * rows
    numbers = " ".join(repr(float(value)) for value in (c, a, b, f, d, e))
    place = {**_mapping(grid.crs), "crs_wkt": grid.crs.to_wkt(), "GeoTransform": numbers}
    return {
        "y": xr.Variable(("y",), y, {"axis": "Y", **down}),
        "x": xr.Variable(("x",), x, {"axis": "X", **across}),
        GRID_MAPPING: xr.Variable((), np.int32(0), place),
    }


def grid_of(dataset: xr.Dataset) -> Grid:
    """The grid of a Dataset, or of a part cut out of one.

    Raises
    ------
    InputError
        If it has no place on the Earth, or its coordinates do not lie on its grid.
    """
    place = dataset.coords[GRID_MAPPING].attrs if GRID_MAPPING in dataset.coords else {}
    if "crs_wkt" not in place or "GeoTransform" not in place:
        raise InputError(
            f"it has no coordinate {GRID_MAPPING} with crs_wkt and GeoTransform",
            where="Dataset",
            remedy="Open it with open_scene_dataset, or keep its coordinates",
        )
    try:
        c, a, b, f, d, e = (float(word) for word in str(place["GeoTransform"]).split())
        crs = CRS.from_wkt(str(place["crs_wkt"]))
    except (ValueError, CRSError) as error:
        raise InputError(f"its {GRID_MAPPING} cannot be read ({error})", where="Dataset") from error
    transform = Affine(a, b, c, d, e, f)
    rotated = is_rotated(transform)
    column = _first_pixel(dataset, "x", 0.0 if rotated else c, 1.0 if rotated else a)
    row = _first_pixel(dataset, "y", 0.0 if rotated else f, 1.0 if rotated else e)
    shifted = compose(transform, Affine.translation(column, row))
    return Grid(crs, shifted if (row or column) else transform, dataset.sizes["x"], dataset.sizes["y"])


def is_rotated(transform: Affine) -> bool:
    """Whether rows and columns run along neither map axis."""
    return bool(transform.b != 0.0 or transform.d != 0.0)


def _first_pixel(dataset: xr.Dataset, axis: str, origin: float, step: float) -> int:
    """Which pixel of the grid the first coordinate is the centre of."""
    if axis not in dataset.coords:
        raise InputError(f"it has no coordinate {axis}", where="Dataset")
    values = dataset.coords[axis].values
    pixels = (values - origin) / step - 0.5
    first = round(float(pixels[0]))
    if not np.abs(pixels - first - np.arange(values.size)).max() <= _TOLERANCE:
        raise InputError(
            f"its {axis} coordinates are not the centres of consecutive pixels of its grid",
            where="Dataset",
            remedy="Cut out whole rows and columns, without steps; regrid through the scene file",
        )
    return first


def _axis_attributes(crs: CRS) -> tuple[dict[str, str], dict[str, str]]:
    if crs.is_geographic:
        return (
            {"standard_name": "longitude", "units": "degrees_east"},
            {"standard_name": "latitude", "units": "degrees_north"},
        )
    unit = "m" if math.isclose(float(crs.linear_units_factor[1]), 1.0) else str(crs.linear_units)
    return (
        {"standard_name": "projection_x_coordinate", "units": unit},
        {"standard_name": "projection_y_coordinate", "units": unit},
    )


def _mapping(crs: CRS) -> dict[str, object]:
    """Attributes of the CF grid mapping, where CF knows the projection."""
    import pyproj  # noqa: PLC0415  (a coordinate library that only Datasets need)

    found: dict[str, object] = pyproj.CRS.from_wkt(crs.to_wkt()).to_cf()
    return found
