"""Tiles and the overviews above them, built in whatever order the tiles come."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from groundglow.layers import encode_kernels as kernels
from groundglow.layers.layer_format import LayerFormat, codec
from groundglow.raster.grid import TILE

Pixels = NDArray[Any]


class EncodedTile(NamedTuple):
    """One compressed tile: level 0 is full resolution, ``row`` and ``column`` count tiles."""

    level: int
    row: int
    column: int
    data: bytes


class OverviewPart(NamedTuple):
    """Halved pixels of tile (row, column) of the level below, part of a tile of ``level``."""

    level: int
    row: int
    column: int
    pixels: Pixels


def level_shapes(height: int, width: int) -> list[tuple[int, int]]:
    """Rows and columns of full resolution and of every overview, halved (up) until one tile suffices."""
    shapes = [(height, width)]
    while max(shapes[-1]) > TILE:
        rows, columns = shapes[-1]
        shapes.append(((rows + 1) // 2, (columns + 1) // 2))
    return shapes


def tile_counts(shape: tuple[int, int]) -> tuple[int, int]:
    """Tile rows and tile columns of a level of that shape."""
    return -(-shape[0] // TILE), -(-shape[1] // TILE)


class TileEncoder:
    """Rounds, predicts and compresses tiles of one format; for one thread at a time."""

    def __init__(self, layer_format: LayerFormat) -> None:
        self.layer_format = layer_format
        self.dtype = np.dtype(layer_format.dtype)
        self._tile: Pixels = np.empty((TILE, TILE), self.dtype)
        predicted = ((TILE, TILE), np.uint16) if layer_format.flags else ((TILE, 4 * TILE), np.uint8)
        self._predicted: Pixels = np.empty(*predicted)
        self._compress = codec(layer_format)

    def stored(self, pixels: Pixels, corner: tuple[int, int], shape: tuple[int, int]) -> Pixels:
        """A window of pixels as it is stored: rounded, padded to a whole tile (NaN; 0 for flags).

        The array is reused by the next call.
        """
        if self.layer_format.flags:
            (row, column), (height, width) = corner, shape
            self._tile[:height, :width] = pixels[row : row + height, column : column + width]
            self._tile[height:] = 0
            self._tile[:, width:] = 0
        else:
            dropped = 23 - self.layer_format.kept_bits
            bits = self._tile.view(np.uint32)
            kernels.round_tile(pixels.view(np.uint32), corner, shape, dropped, bits)
        return self._tile

    def compress(self, tile: Pixels) -> bytes:
        """A stored tile as the bytes of the file."""
        if self.layer_format.flags:
            kernels.predict_uint16(tile, self._predicted)
        else:
            kernels.predict_float32(tile.view(np.uint32), self._predicted)
        return self._compress(self._predicted.data)

    def halve(self, tile: Pixels, shape: tuple[int, int], target: Pixels, corner: tuple[int, int]) -> None:
        """Write the overview of a tile's window into ``target``, from ``corner`` on."""
        reduce = kernels.halve_by_majority if self.layer_format.flags else kernels.halve_by_mean
        reduce(tile, shape, target, corner)


@dataclass
class _Unfinished:
    """An overview tile that waits for the rest of its quarters."""

    pixels: Pixels
    quarters: set[tuple[int, int]] = field(default_factory=set)


class Pyramid:
    """Builds overview tiles from the tiles below them, in whatever order these come.

    Parameters
    ----------
    shape : tuple of int
        Rows and columns of the layer at full resolution.
    encoder : TileEncoder
        For the finished tiles.

    Attributes
    ----------
    tiles : list of EncodedTile
        What is finished; the user of the pyramid takes them out.
    """

    def __init__(self, shape: tuple[int, int], encoder: TileEncoder) -> None:
        self.tiles: list[EncodedTile] = []
        self._encoder = encoder
        self._shapes = level_shapes(*shape)
        self._unfinished: dict[tuple[int, int, int], _Unfinished] = {}

    def window(self, level: int, row: int, column: int) -> tuple[int, int]:
        """Rows and columns of a tile that lie within its level."""
        height, width = self._shapes[level]
        return min(TILE, height - row * TILE), min(TILE, width - column * TILE)

    def take_tile(self, level: int, row: int, column: int, pixels: Pixels, stored: Pixels) -> None:
        """Compress a whole tile, and hand its halved pixels to the tile above.

        Parameters
        ----------
        level, row, column : int
            Which tile.
        pixels, stored : arrays (512, 512)
            Before and after rounding; overviews are made from ``pixels``.
        """
        self.tiles.append(EncodedTile(level, row, column, self._encoder.compress(stored)))
        if level + 1 < len(self._shapes):
            above = self._above(level + 1, row, column)
            self._encoder.halve(pixels, self.window(level, row, column), above.pixels, _quarter(row, column))
            self._complete(level + 1, row, column, above)

    def take_part(self, part: OverviewPart) -> None:
        """Put a piece that another pyramid could not complete into its tile."""
        above = self._above(part.level, part.row, part.column)
        top, left = _quarter(part.row, part.column)
        height, width = part.pixels.shape
        above.pixels[top : top + height, left : left + width] = part.pixels
        self._complete(part.level, part.row, part.column, above)

    def parts(self) -> tuple[OverviewPart, ...]:
        """The pieces of all unfinished tiles, in a fixed order."""
        pieces = []
        for (level, _, _), above in sorted(self._unfinished.items(), key=lambda item: item[0]):
            for row, column in sorted(above.quarters):
                height, width = self.window(level - 1, row, column)
                top, left = _quarter(row, column)
                piece = above.pixels[top : top + (height + 1) // 2, left : left + (width + 1) // 2]
                pieces.append(OverviewPart(level, row, column, piece.copy()))
        return tuple(pieces)

    def _above(self, level: int, row: int, column: int) -> _Unfinished:
        """The unfinished tile that holds the halved tile (row, column) of the level below."""
        key = (level, row // 2, column // 2)
        if key not in self._unfinished:
            self._unfinished[key] = _Unfinished(np.zeros((TILE, TILE), self._encoder.dtype))
        return self._unfinished[key]

    def _complete(self, level: int, row: int, column: int, above: _Unfinished) -> None:
        """Note that a quarter has come; compress the tile if it was the last."""
        above.quarters.add((row, column))
        rows_below, columns_below = tile_counts(self._shapes[level - 1])
        first_row, first_column = row // 2 * 2, column // 2 * 2
        expected = min(2, rows_below - first_row) * min(2, columns_below - first_column)
        if len(above.quarters) == expected:
            tile_row, tile_column = row // 2, column // 2
            del self._unfinished[level, tile_row, tile_column]
            shape = self.window(level, tile_row, tile_column)
            stored = self._encoder.stored(above.pixels, (0, 0), shape)
            self.take_tile(level, tile_row, tile_column, above.pixels, stored)


def _quarter(row: int, column: int) -> tuple[int, int]:
    """Where the halved pixels of tile (row, column) begin in the tile above."""
    return row % 2 * (TILE // 2), column % 2 * (TILE // 2)
