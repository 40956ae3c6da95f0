"""From the pixels of a block to compressed tiles, overviews and partial statistics.

Everything here depends on the pixels of one tile at a time: a layer cut into blocks in another way
gives the same tiles, byte for byte.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from groundglow.errors import DomainError
from groundglow.layers import encode_kernels as kernels
from groundglow.layers.layer_format import LayerFormat, codec_versions, format_of
from groundglow.layers.pyramid import EncodedTile, OverviewPart, Pixels, Pyramid, TileEncoder
from groundglow.layers.statistics import BlockPartial, Histogram, TilePartial
from groundglow.raster.grid import TILE, Block, Grid

__all__ = ["EncodedBlock", "LayerFormat", "codec_versions", "encode_block", "format_of"]


@dataclass(frozen=True)
class EncodedBlock:
    """What one block gives to the writer of its layer. It can be pickled.

    Attributes
    ----------
    block : Block
        The block it was made from.
    tiles : tuple of EncodedTile
        The tiles of the block, and those overview tiles that lie wholly within it.
    parts : tuple of OverviewPart
        Pieces of overview tiles that other blocks complete.
    statistics : BlockPartial
        Of the stored full-resolution values.
    """

    block: Block
    tiles: tuple[EncodedTile, ...]
    parts: tuple[OverviewPart, ...]
    statistics: BlockPartial


def encode_block(pixels: Pixels, block: Block, grid: Grid, layer_format: LayerFormat) -> EncodedBlock:
    """Round, halve and compress the pixels of one block of a layer.

    Parameters
    ----------
    pixels : array (block.height, block.width)
        float32 (NaN for no value; infinity counts as none) or uint16, as ``layer_format`` says.
    block : Block
        Begins at a multiple of 512 pixels and ends at one, or at the edge of the grid.
    grid : Grid
        Grid of the whole layer.
    layer_format : LayerFormat
        How the layer is stored.

    Returns
    -------
    EncodedBlock

    Raises
    ------
    DomainError
        If the pixels do not fit the block or the format, or the block does not fit the tiles.

    Notes
    -----
    An overview pixel is the mean of those of its 2 x 2 pixels of the level below that are numbers,
    starting from the stored full-resolution values; between levels nothing is rounded, each level
    is when it is stored. Flags take the most frequent of the 2 x 2 values, and of equally frequent
    ones the first in reading order.
    """
    _check(pixels, block, grid, layer_format)
    pixels = np.ascontiguousarray(pixels)
    encoder = TileEncoder(layer_format)
    pyramid = Pyramid(grid.shape, encoder)
    collect = _ValueCounts() if layer_format.flags else _Summaries()
    for row in range(0, block.height, TILE):
        for column in range(0, block.width, TILE):
            shape = min(TILE, block.height - row), min(TILE, block.width - column)
            place = (block.row + row) // TILE, (block.column + column) // TILE
            tile = encoder.stored(pixels, (row, column), shape)
            collect.take(tile, place, shape)
            pyramid.take_tile(0, *place, tile, tile)
    return EncodedBlock(block, tuple(pyramid.tiles), pyramid.parts(), collect.result())


class _Summaries:
    """Partial statistics of the tiles of a block of numbers."""

    def __init__(self) -> None:
        self._tiles: list[TilePartial] = []
        self._histogram = Histogram()

    def take(self, tile: Pixels, place: tuple[int, int], shape: tuple[int, int]) -> None:
        summary = np.empty(5)
        kernels.summarise_tile(tile, shape, summary)
        kernels.count_magnitudes(tile.view(np.uint32), shape, self._histogram.bins)
        count, *rest = summary.tolist()
        self._tiles.append(TilePartial(*place, int(count), *rest))

    def result(self) -> BlockPartial:
        valid = [tile for tile in self._tiles if tile.count]
        if not valid:
            return BlockPartial(tuple(self._tiles), np.empty(0, np.int32), np.empty(0, np.int64))
        minimum, maximum = min(tile.minimum for tile in valid), max(tile.maximum for tile in valid)
        return BlockPartial(tuple(self._tiles), *self._histogram.occupied(minimum, maximum))


class _ValueCounts:
    """How often each value occurs in a block of flags."""

    def __init__(self) -> None:
        self._counts = np.zeros(1 << 16, np.int64)

    def take(self, tile: Pixels, _place: tuple[int, int], shape: tuple[int, int]) -> None:
        kernels.count_values(tile, shape, self._counts)

    def result(self) -> BlockPartial:
        keys = np.flatnonzero(self._counts)
        return BlockPartial((), keys.astype(np.int32), self._counts[keys])


def _check(pixels: Pixels, block: Block, grid: Grid, layer_format: LayerFormat) -> None:
    """Refuse pixels and blocks that do not fit."""
    if pixels.shape != (block.height, block.width) or pixels.dtype != np.dtype(layer_format.dtype):
        raise DomainError(
            f"the block needs {layer_format.dtype} pixels of shape {(block.height, block.width)}, "
            f"not {pixels.dtype} of {pixels.shape}",
            where=layer_format.name,
        )
    bottom, right = block.row + block.height, block.column + block.width
    if (
        min(block.row, block.column) < 0
        or block.row % TILE
        or block.column % TILE
        or not (bottom % TILE == 0 or bottom == grid.height)
        or not (right % TILE == 0 or right == grid.width)
        or bottom > grid.height
        or right > grid.width
    ):
        raise DomainError(
            f"{block} does not consist of whole {TILE}-pixel tiles of a grid of {grid.shape}",
            where=layer_format.name,
        )
