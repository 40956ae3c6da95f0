"""One immutable grid: coordinate reference system, affine transform and size travel together."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from affine import Affine
from rasterio.crs import CRS

TILE = 512


@dataclass(frozen=True)
class Block:
    """A rectangle of pixels within a grid, in rows and columns.

    Attributes
    ----------
    row, column : int
        Upper left pixel.
    height, width : int
        Size in pixels.
    """

    row: int
    column: int
    height: int
    width: int


@dataclass(frozen=True)
class Grid:
    """Where the pixels of a raster lie.

    Attributes
    ----------
    crs : rasterio CRS
    transform : Affine
        Pixel corner to map coordinates; (0, 0) is the outer corner of the first pixel.
    width, height : int
        Size in pixels.
    """

    crs: CRS
    transform: Affine
    width: int
    height: int

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.height, self.width

    def blocks(self, size: int) -> Iterator[Block]:
        """The grid cut into squares of a multiple of the tile, row by row; the last are smaller."""
        for row in range(0, self.height, size):
            for column in range(0, self.width, size):
                yield Block(row, column, min(size, self.height - row), min(size, self.width - column))

    def window_grid(self, block: Block) -> Grid:
        """The grid of one block."""
        shifted = self.transform * Affine.translation(block.column, block.row)
        return Grid(self.crs, shifted, block.width, block.height)
