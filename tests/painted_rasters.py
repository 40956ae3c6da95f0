"""Small rasters whose pixels are known, for tests of reading and regridding."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from affine import Affine
from numpy.typing import NDArray
from rasterio.crs import CRS

from groundglow.raster.grid import Block, Grid, compose
from groundglow.raster.source import BlockRead, RasterSource, read_block

UTM = CRS.from_epsg(32632)


def grid(width: int, height: int, *, pixel: float = 30.0, left: float = 600_000.0, top: float = 5_300_010.0,
         crs: CRS = UTM, rotation: float = 0.0) -> Grid:  # fmt: skip
    """A grid with square pixels, rotated about its upper left corner."""
    turned = compose(Affine.rotation(rotation), Affine.scale(pixel, -pixel))
    transform = compose(Affine.translation(left, top), turned)
    return Grid(crs, transform, width, height)


def write(path: Path, pixels: NDArray[Any], where: Grid, **profile: Any) -> str:
    """Write an array (rows, columns) or (bands, rows, columns) and give back its path."""
    bands = pixels if pixels.ndim == 3 else pixels[np.newaxis]
    options = {"driver": "GTiff", "count": bands.shape[0], "dtype": bands.dtype, **profile}
    with rasterio.open(
        path, "w", width=where.width, height=where.height, crs=where.crs, transform=where.transform, **options
    ) as dataset:
        dataset.write(bands)
    return str(path)


def pixel_centres(where: Grid) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Map coordinates of all pixel centres."""
    columns, rows = np.meshgrid(np.arange(where.width) + 0.5, np.arange(where.height) + 0.5)
    t = where.transform
    return t.a * columns + t.b * rows + t.c, t.d * columns + t.e * rows + t.f


def read_all(source: RasterSource, where: Grid, size: int = 10_000, **options: Any) -> BlockRead:
    """The whole target grid, read in blocks of a size and put together."""
    values = np.full(where.shape, -1.0, dtype=np.float32)
    mixed = np.zeros(where.shape, dtype=np.bool_)
    saturated = np.zeros(where.shape, dtype=np.bool_)
    for block in where.blocks(size):
        part = read_block(source, where, block, **options)
        at = np.s_[block.row : block.row + block.height, block.column : block.column + block.width]
        values[at] = part.values
        mixed[at] = False if part.mixed is None else part.mixed
        saturated[at] = False if part.saturated is None else part.saturated
    return BlockRead(values, mixed, saturated)


def whole(where: Grid) -> Block:
    """A grid as one block."""
    return Block(0, 0, where.height, where.width)
