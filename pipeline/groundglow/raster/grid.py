"""One immutable grid: coordinate reference system, affine transform and size travel together."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from affine import Affine
from numpy.typing import NDArray
from rasterio.crs import CRS

TILE = 512

Coordinate = TypeVar("Coordinate", float, NDArray[np.float64])


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
        shifted = compose(self.transform, Affine.translation(block.column, block.row))
        return Grid(self.crs, shifted, block.width, block.height)


def compose(outer: Affine, inner: Affine) -> Affine:
    """The transform that applies ``inner`` first, then ``outer``.

    Written out because versions of the affine package disagree about the operator.
    """
    return Affine(
        outer.a * inner.a + outer.b * inner.d,
        outer.a * inner.b + outer.b * inner.e,
        outer.a * inner.c + outer.b * inner.f + outer.c,
        outer.d * inner.a + outer.e * inner.d,
        outer.d * inner.b + outer.e * inner.e,
        outer.d * inner.c + outer.e * inner.f + outer.f,
    )


def apply(transform: Affine, x: Coordinate, y: Coordinate) -> tuple[Coordinate, Coordinate]:
    """A transform of a point, or of arrays of points."""
    return (
        transform.a * x + transform.b * y + transform.c,
        transform.d * x + transform.e * y + transform.f,
    )
