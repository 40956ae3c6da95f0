"""An area of interest: polygons that cut a grid and mask its pixels, block by block."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from affine import Affine
from numpy.typing import NDArray
from rasterio.crs import CRS
from rasterio.errors import CRSError, RasterioError
from rasterio.warp import transform as transform_points

from groundglow.errors import InputError
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Block, Grid, apply, compose

Ring = NDArray[np.float64]
_LONGEST_EDGE = 4.0  # pixels between points that are carried into the grid one by one


@dataclass(frozen=True, eq=False)
class Area:
    """Polygons as rings of points; a point is inside where an odd number of rings holds it.

    Attributes
    ----------
    crs : rasterio CRS
    rings : tuple of arrays (n, 2)
        Outer and inner rings alike, as x and y; closed or not.
    where : str
        Where it came from, for messages.
    """

    crs: CRS
    rings: tuple[Ring, ...]
    where: str = ""


@dataclass(frozen=True, eq=False)
class AreaOnGrid:
    """An area in the pixel coordinates of one grid.

    Attributes
    ----------
    start, end : arrays (edges, 2)
        Column and row of the two ends of every edge.
    """

    start: NDArray[np.float64]
    end: NDArray[np.float64]

    def mask(self, block: Block) -> NDArray[np.bool_]:
        """True where a pixel's centre lies inside; the same for a pixel whatever the block.

        Parameters
        ----------
        block : Block
            Of the grid.
        """
        inside = np.zeros((block.height, block.width), dtype=np.bool_)
        centres = np.arange(block.column, block.column + block.width) + 0.5
        low, high = np.minimum(self.start[:, 1], self.end[:, 1]), np.maximum(self.start[:, 1], self.end[:, 1])
        near = (low < block.row + block.height) & (high > block.row)
        start, end, low, high = self.start[near], self.end[near], low[near], high[near]
        for row in range(block.height):
            y = block.row + row + 0.5
            crossed = (low <= y) & (high > y)
            if not crossed.any():
                continue
            a, b = start[crossed], end[crossed]
            at = np.sort(a[:, 0] + (y - a[:, 1]) * (b[:, 0] - a[:, 0]) / (b[:, 1] - a[:, 1]))
            inside[row] = np.searchsorted(at, centres, side="right") % 2 == 1
        return inside


def area_of_bounds(left: float, bottom: float, right: float, top: float, crs: CRS) -> Area:
    """A rectangle; in longitudes left may exceed right, where it crosses the date line."""
    if crs.is_geographic and right < left:
        right += 360.0
    corners = [(left, bottom), (right, bottom), (right, top), (left, top)]
    return Area(
        crs, (np.array(corners, dtype=np.float64),), f"bounds {left:g}, {bottom:g}, {right:g}, {top:g}"
    )


def place_area(area: Area, grid: Grid) -> AreaOnGrid:
    """An area in the pixel coordinates of a grid.

    Parameters
    ----------
    area : Area
        In any reference system.
    grid : Grid
        The target grid.

    Raises
    ------
    InputError
        If it cannot be carried into the grid's reference system, or has no area there.
    """
    edges = [edge for ring in area.rings for edge in _placed(ring, area, grid)]
    if not edges:
        raise InputError("the area has no polygon", where=area.where)
    start, end = np.concatenate([a for a, _ in edges]), np.concatenate([b for _, b in edges])
    return AreaOnGrid(start, end)


def clip_to_area(grid: Grid, area: Area) -> Grid:
    """The smallest piece of a grid, along its own pixels, that holds an area's part of it.

    Raises
    ------
    InputError
        If the area lies outside the grid.
    """
    placed = place_area(area, grid)
    points = np.concatenate([placed.start, placed.end])
    (left, top), (right, bottom) = np.floor(points.min(axis=0)), np.ceil(points.max(axis=0))
    first_column, last_column = max(int(left), 0), min(int(right), grid.width)
    first_row, last_row = max(int(top), 0), min(int(bottom), grid.height)
    if first_column >= last_column or first_row >= last_row:
        raise InputError(
            "the area of interest lies outside the scene",
            where=area.where,
            remedy="Check its reference system and the order of its coordinates (longitude first)",
        )
    moved = compose(grid.transform, Affine.translation(first_column, first_row))
    return Grid(grid.crs, moved, last_column - first_column, last_row - first_row)


def _placed(ring: Ring, area: Area, grid: Grid) -> Sequence[tuple[Ring, Ring]]:
    """Edges of one ring in pixel coordinates, once for each turn of longitude that reaches the grid."""
    points = ring if (ring[0] == ring[-1]).all() else np.concatenate([ring, ring[:1]])
    corners = _in_grid(points, area, grid)
    lengths = np.hypot(*np.diff(corners, axis=0).T) if grid.crs != area.crs else np.zeros(len(points) - 1)
    finite = np.where(np.isfinite(lengths), lengths, 1e6)
    pieces = np.clip(np.ceil(finite / _LONGEST_EDGE), 1, 2000).astype(np.int64)
    dense = np.concatenate(
        [
            *(a + (b - a) * np.arange(n)[:, np.newaxis] / n
              for a, b, n in zip(points[:-1], points[1:], pieces, strict=True)),
            points[-1:],
        ]
    )  # fmt: skip
    placed = _in_grid(dense, area, grid)
    if not np.isfinite(placed).all():
        raise InputError(
            f"the area cannot be placed in {grid.crs.to_string()}",
            where=area.where,
            remedy="Part of it has no coordinates there; use an area near the scene",
        )
    turns = _turns(placed, grid)
    return [(placed[:-1] + turn, placed[1:] + turn) for turn in turns]


def _in_grid(points: Ring, area: Area, grid: Grid) -> Ring:
    """Points as column and row of a grid."""
    x, y = points[:, 0], points[:, 1]
    if area.crs != grid.crs:
        try:
            with gdal_environment():
                x, y = (np.asarray(part) for part in transform_points(area.crs, grid.crs, x, y))
        except (RasterioError, CRSError) as error:
            raise InputError(
                f"no way is known from {area.crs.to_string()} to {grid.crs.to_string()}", where=area.where
            ) from error
    if grid.crs.is_geographic and area.crs != grid.crs and np.isfinite(x).all():
        x = np.unwrap(x, period=360.0)
    return np.stack(apply(~grid.transform, x, y), axis=1)


def _turns(placed: Ring, grid: Grid) -> list[NDArray[np.float64]]:
    """Shifts in pixels that bring a ring of longitudes over the grid."""
    if not grid.crs.is_geographic:
        return [np.zeros(2)]
    inverse = ~grid.transform
    shifts = [np.array([inverse.a, inverse.d]) * turn for turn in (-720.0, -360.0, 0.0, 360.0, 720.0)]
    low, high = placed.min(axis=0), placed.max(axis=0)
    size = np.array([grid.width, grid.height])
    meeting = [s for s in shifts if ((low + s < size) & (high + s > 0.0)).all()]
    return meeting or [np.zeros(2)]
