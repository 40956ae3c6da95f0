"""A layer laid out on a small page: north-up pixels, the length of a metre, where north is."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio._err import CPLE_BaseError  # what rasterio raises for points has no public name
from rasterio.crs import CRS
from rasterio.errors import RasterioError
from rasterio.warp import transform as transform_points

from groundglow.errors import OutputError
from groundglow.layers.pyramid import level_shapes
from groundglow.raster.grid import Grid

_EARTH_RADIUS = 6_371_008.8  # m, mean radius of GRS 80 (Moritz, J. Geod. 74, 2000)
_WGS84 = CRS.from_epsg(4326)


@dataclass(frozen=True)
class SmallMap:
    """A layer as few pixels, rows running down the page.

    Attributes
    ----------
    pixels : float32 array (height, width)
        NaN for no value and outside the layer.
    metres : float or None
        Width of one of its pixels at the middle of the map; None where the place is not on Earth. [m]
    north : float or None
        Direction of north at the middle, clockwise from the top of the page. [deg]
    """

    pixels: NDArray[np.float32]
    metres: float | None
    north: float | None


def small_map(path: Path, grid: Grid, box: int) -> SmallMap:
    """Read a finished layer from the smallest overview that fills a box.

    Parameters
    ----------
    path : Path
        The layer.
    grid : Grid
        Its grid; rotated and south-up ones are turned.
    box : int
        The longer side of the result. [pixel]

    Returns
    -------
    SmallMap

    Raises
    ------
    OutputError
        If the layer cannot be read back.
    """
    pixels = _read(path, sufficient_level(grid.shape, box))
    west, south, east, north = _extent(grid)
    squeeze = math.cos(math.radians((south + north) / 2)) if grid.crs.is_geographic else 1.0
    across, down = (east - west) * squeeze, north - south
    width = max(1, round(box * min(1.0, across / down)))
    height = max(1, round(box * min(1.0, down / across)))
    x = west + (np.arange(width) + 0.5) * (east - west) / width
    y = north - (np.arange(height) + 0.5) * (north - south) / height
    back = ~grid.transform
    column = np.floor((back.a * x[None, :] + back.b * y[:, None] + back.c) * pixels.shape[1] / grid.width)
    row = np.floor((back.d * x[None, :] + back.e * y[:, None] + back.f) * pixels.shape[0] / grid.height)
    inside = (column >= 0) & (column < pixels.shape[1]) & (row >= 0) & (row < pixels.shape[0])
    page = np.full((height, width), np.nan, np.float32)
    page[inside] = pixels[row[inside].astype(int), column[inside].astype(int)]
    middle = ((west + east) / 2, (south + north) / 2)
    metres = _metres_a_unit(grid, middle)
    return SmallMap(
        page, None if metres is None else metres * (east - west) / width, _north(grid, middle, squeeze)
    )


def sufficient_level(shape: tuple[int, int], box: int) -> int:
    """The smallest overview whose longer side is at least ``box``; 0 is full resolution."""
    levels = [level for level, sides in enumerate(level_shapes(*shape)) if max(sides) >= box]
    return max(levels, default=0)


def _read(path: Path, level: int) -> NDArray[np.float32]:
    """All pixels of one level."""
    options = {"overview_level": level - 1} if level else {}
    try:
        with rasterio.open(path, **options) as layer:
            pixels: NDArray[np.float32] = layer.read(1)
    except RasterioError as error:
        raise OutputError(f"the finished layer cannot be read back: {error}", where=str(path)) from error
    return pixels


def _extent(grid: Grid) -> tuple[float, float, float, float]:
    """West, south, east, north of the box around a grid, in its CRS."""
    place = grid.transform
    corners = [(column, row) for row in (0, grid.height) for column in (0, grid.width)]
    x = [place.a * column + place.b * row + place.c for column, row in corners]
    y = [place.d * column + place.e * row + place.f for column, row in corners]
    return min(x), min(y), max(x), max(y)


def _metres_a_unit(grid: Grid, middle: tuple[float, float]) -> float | None:
    """Ground length of one unit of the map's x axis, along a great circle. [m]"""
    step = 100.0 * math.hypot(grid.transform.a, grid.transform.d)
    ends = _geographic(grid.crs, [(middle[0] - step, middle[1]), (middle[0] + step, middle[1])])
    if ends is None:
        return None
    (east1, north1), (east2, north2) = np.radians(ends)
    # The haversine formula keeps its precision at small distances.
    half = math.sin((north2 - north1) / 2) ** 2
    half += math.cos(north1) * math.cos(north2) * math.sin((east2 - east1) / 2) ** 2
    return 2.0 * _EARTH_RADIUS * math.asin(math.sqrt(half)) / (2.0 * step)


def _north(grid: Grid, middle: tuple[float, float], squeeze: float) -> float | None:
    """Direction in which latitude grows, clockwise from the map's y axis. [deg]"""
    place = _geographic(grid.crs, [middle])
    if place is None:
        return None
    longitude, latitude = place[0]
    step = 0.01 if latitude < 89.0 else -0.01
    try:
        x, y = transform_points(_WGS84, grid.crs, [longitude], [latitude + step])
    except CPLE_BaseError:
        return None
    across, up = (x[0] - middle[0]) * squeeze * np.sign(step), (y[0] - middle[1]) * np.sign(step)
    return math.degrees(math.atan2(across, up))


def _geographic(crs: CRS, points: list[tuple[float, float]]) -> list[tuple[float, float]] | None:
    """Longitude and latitude of points of a map; None where they have none."""
    x, y = zip(*points, strict=True)
    try:
        longitude, latitude = transform_points(crs, _WGS84, x, y)
    except CPLE_BaseError:
        return None
    found = list(zip(longitude, latitude, strict=True))
    return found if np.isfinite(found).all() else None
