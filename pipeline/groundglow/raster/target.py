"""The grid that results are wanted on: the source's own, one that the user names, or another raster's."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from affine import Affine
from rasterio.crs import CRS
from rasterio.errors import CRSError, RasterioError
from rasterio.warp import transform as transform_points
from rasterio.warp import transform_bounds

from groundglow.errors import ConfigError
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Grid, apply, compose

MOST_PIXELS = 1 << 34

Bounds = tuple[float, float, float, float]


@dataclass(frozen=True)
class TargetChoice:
    """What a user may say about the target grid; what is left out comes from the source.

    Attributes
    ----------
    crs : str or None
        Such as "EPSG:32632".
    resolution : float, pair of float or None
        Pixel width and height, above 0. [unit of the reference system]
    bounds : tuple of float or None
        Left, bottom, right, top. [unit of the reference system]. In longitudes, left may exceed right: the area
        then crosses the date line.
    origin : tuple of float or None
        A point that pixel corners must meet; default (0, 0), so that grids of one resolution meet.
    """

    crs: str | None = None
    resolution: float | tuple[float, float] | None = None
    bounds: Bounds | None = None
    origin: tuple[float, float] | None = None


def target_grid(source: Grid, choice: TargetChoice) -> Grid:
    """The grid that a choice means for a source.

    Parameters
    ----------
    source : Grid
        Of the thermal raster.
    choice : TargetChoice
        An empty one gives the source's grid itself; one that names bounds only cuts it along its own
        pixels.

    Returns
    -------
    Grid
        North up, unless it is the source's own; edges at whole pixels from the origin, grown outward to
        hold the bounds.

    Raises
    ------
    ConfigError
        If the choice cannot be followed.
    """
    if choice == TargetChoice():
        return source
    crs = _reference_system(choice.crs) if choice.crs is not None else source.crs
    if choice.bounds is not None and crs.is_geographic:
        choice = TargetChoice(choice.crs, choice.resolution, _unwound(choice.bounds), choice.origin)
    if (
        crs == source.crs
        and choice.resolution is None
        and choice.origin is None
        and choice.bounds is not None
    ):
        return cut(source, choice.bounds)
    width, height = _resolution(source, crs, choice)
    bounds = choice.bounds or bounds_in(source, crs)
    left, bottom, right, top = bounds
    if not (left < right and bottom < top):
        raise ConfigError(
            f"bounds must be left, bottom, right, top with left < right and bottom < top, found {bounds}"
        )
    x0, y0 = choice.origin or (0.0, 0.0)
    first_column, last_column = _outward(left, right, x0, width)
    first_row, last_row = _outward(-top, -bottom, -y0, height)
    columns, rows = last_column - first_column, last_row - first_row
    if columns * rows > MOST_PIXELS:
        raise ConfigError(
            f"a grid of {columns} x {rows} pixels of {width:g} x {height:g} is too large",
            remedy="Is the resolution in the unit of the reference system (degrees or metres)?",
        )
    transform = Affine(width, 0.0, x0 + first_column * width, 0.0, -height, y0 - first_row * height)
    return Grid(crs, transform, columns, rows)


def cut(source: Grid, bounds: Bounds) -> Grid:
    """The piece of a grid that holds bounds, along its own pixels.

    Raises
    ------
    ConfigError
        If the bounds lie outside the grid.
    """
    left, bottom, right, top = bounds
    inverse = ~source.transform
    corners = [apply(inverse, x, y) for x in (left, right) for y in (bottom, top)]
    columns, rows = [c for c, _ in corners], [r for _, r in corners]
    step = 1e-6  # of a pixel: bounds that name a pixel's edge mean that edge
    first_column, last_column = math.floor(min(columns) + step), math.ceil(max(columns) - step)
    first_row, last_row = math.floor(min(rows) + step), math.ceil(max(rows) - step)
    first_column, first_row = max(first_column, 0), max(first_row, 0)
    last_column, last_row = min(last_column, source.width), min(last_row, source.height)
    if first_column >= last_column or first_row >= last_row:
        raise ConfigError(
            f"the bounds {bounds} lie outside the scene",
            remedy=f"The scene covers {tuple(round(edge, 6) for edge in bounds_in(source, source.crs))}",
        )
    moved = compose(source.transform, Affine.translation(first_column, first_row))
    return Grid(source.crs, moved, last_column - first_column, last_row - first_row)


def bounds_in(source: Grid, crs: CRS) -> Bounds:
    """Bounds of a grid in another reference system; in longitudes right may exceed 180.

    Raises
    ------
    ConfigError
        If there is no way between the two systems.
    """
    corners = [
        apply(source.transform, float(x), float(y)) for x in (0, source.width) for y in (0, source.height)
    ]
    xs, ys = [x for x, _ in corners], [y for _, y in corners]
    own = (min(xs), min(ys), max(xs), max(ys))
    if crs == source.crs:
        return own
    try:
        with gdal_environment():
            found = transform_bounds(source.crs, crs, *own, densify_pts=51)
    except (RasterioError, CRSError) as error:
        raise ConfigError(f"no way is known from {source.crs.to_string()} to {crs.to_string()}") from error
    if not all(math.isfinite(edge) for edge in found):
        raise ConfigError(
            f"the scene cannot be placed in {crs.to_string()}", remedy="Name bounds of your own"
        )
    return _unwound(found) if crs.is_geographic else found


def _unwound(bounds: Bounds) -> Bounds:
    """Longitudes that run on past the date line."""
    left, bottom, right, top = bounds
    return (left, bottom, right + 360.0, top) if right < left else bounds


def _reference_system(text: str) -> CRS:
    try:
        with gdal_environment():
            return CRS.from_user_input(text)
    except CRSError as error:
        raise ConfigError(
            f"there is no coordinate reference system {text!r}", remedy="Name one such as EPSG:32632"
        ) from error


def _resolution(source: Grid, crs: CRS, choice: TargetChoice) -> tuple[float, float]:
    """Pixel width and height: the user's, the source's, or what keeps the source's detail."""
    if choice.resolution is not None:
        pair = choice.resolution if isinstance(choice.resolution, tuple) else (choice.resolution,) * 2
        if not all(math.isfinite(size) and size > 0.0 for size in pair):
            raise ConfigError(f"a resolution must be above 0, found {choice.resolution}")
        return pair
    t = source.transform
    if crs == source.crs:
        return math.hypot(t.a, t.d), math.hypot(t.b, t.e)
    # A square pixel of the same area, in the middle of the scene.
    column, row = 0.5 * source.width, 0.5 * source.height
    x, y = apply(t, np.array([column, column + 1.0, column]), np.array([row, row, row + 1.0]))
    try:
        with gdal_environment():
            x, y = (np.asarray(part) for part in transform_points(source.crs, crs, x, y))
    except (RasterioError, CRSError) as error:
        raise ConfigError(f"no way is known from {source.crs.to_string()} to {crs.to_string()}") from error
    area = abs((x[1] - x[0]) * (y[2] - y[0]) - (x[2] - x[0]) * (y[1] - y[0]))
    if not (math.isfinite(area) and area > 0.0):
        raise ConfigError(
            f"the scene cannot be placed in {crs.to_string()}", remedy="Name a resolution of your own"
        )
    return math.sqrt(area), math.sqrt(area)


def _outward(low: float, high: float, origin: float, size: float) -> tuple[int, int]:
    """Whole pixels from the origin that hold an interval."""
    step = 1e-6
    return math.floor((low - origin) / size + step), math.ceil((high - origin) / size - step)
