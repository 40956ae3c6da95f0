"""Layers to write in tests, and plain statements of what the writer does."""

from __future__ import annotations

import functools
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import numpy as np
from affine import Affine
from numpy.typing import NDArray
from rasterio.crs import CRS

from groundglow.layers.encode import encode_block, format_of
from groundglow.layers.geotiff import LayerSummary, LayerWriter
from groundglow.layers.layer_format import LayerFormat
from groundglow.layers.tags import text_of
from groundglow.raster.grid import Block, Grid

Pixels = NDArray[Any]

# Neither side is a multiple of a tile, and both become odd on the way up the overviews.
ODD_HEIGHT, ODD_WIDTH = 2051, 3075


def grid_of(height: int, width: int) -> Grid:
    """A 30 m grid in UTM zone 33 north."""
    return Grid(CRS.from_epsg(32633), Affine(30.0, 0.0, 512_340.0, 0.0, -30.0, 5_212_350.0), width, height)


@functools.cache
def temperature(height: int = ODD_HEIGHT, width: int = ODD_WIDTH, seed: int = 7) -> NDArray[np.float32]:
    """Kelvin with noise, some single gaps, and a corner without values that covers whole tiles."""
    random = np.random.default_rng(seed)
    columns = np.arange(width, dtype=np.float32)
    pixels = 300 + 6 * np.sin(columns / 211)[None, :] + random.normal(0, 0.5, (height, width))
    pixels[random.random((height, width)) < 0.02] = np.nan
    pixels[: height // 2, : width // 3] = np.nan
    return _shared(pixels.astype(np.float32))


@functools.cache
def quality(height: int = ODD_HEIGHT, width: int = ODD_WIDTH, seed: int = 8) -> NDArray[np.uint16]:
    """Flags in patches with scattered single pixels."""
    random = np.random.default_rng(seed)
    patches = np.kron(random.integers(0, 4, (height // 40 + 1, width // 40 + 1)), np.ones((40, 40), int))
    pixels = (1 << patches[:height, :width]).astype(np.uint16)
    scattered = random.random((height, width)) < 0.2
    pixels[scattered] = random.integers(0, 65536, int(scattered.sum()))
    return _shared(pixels)


def _shared(pixels: Pixels) -> Pixels:
    """Pixels that several tests read and none may change."""
    pixels.flags.writeable = False
    return pixels


def cut(pixels: Pixels, block: Block) -> Pixels:
    """The pixels of a block."""
    return pixels[block.row : block.row + block.height, block.column : block.column + block.width]


def write_layer(
    path: Path,
    pixels: Pixels,
    layer_format: LayerFormat | None = None,
    *,
    size: int = 1024,
    blocks: Iterable[Block] | None = None,
    **options: Any,
) -> LayerSummary:
    """Write a whole layer, block by block."""
    chosen = layer_format or format_of("quality" if pixels.dtype == np.uint16 else "surface_temperature")
    grid = grid_of(*pixels.shape)
    with LayerWriter(path, grid, chosen, text_of(chosen.name), **options) as writer:
        for block in blocks or grid.blocks(size):
            writer.add(encode_block(cut(pixels, block), block, grid, chosen))
        return writer.finish()


def rounded(pixels: Pixels, kept_bits: int) -> NDArray[np.float32]:
    """Round to nearest, ties to even, in double precision: independent of the bit arithmetic."""
    mantissa, exponent = np.frexp(pixels.astype(np.float64))
    # np.rint rounds ties to even; a mantissa in [0.5, 1) has kept_bits + 1 significant bits.
    scaled = np.rint(mantissa * 2.0 ** (kept_bits + 1))
    return np.ldexp(scaled, exponent - (kept_bits + 1)).astype(np.float32)


def fours(pixels: Pixels, missing: float) -> Pixels:
    """The four pixels under each overview pixel, in reading order along the last axis."""
    height, width = pixels.shape
    padded = np.pad(pixels, ((0, height % 2), (0, width % 2)), constant_values=missing)
    return np.stack([padded[0::2, 0::2], padded[0::2, 1::2], padded[1::2, 0::2], padded[1::2, 1::2]], axis=-1)


def mean_overview(pixels: Pixels) -> NDArray[np.float32]:
    """Mean of those of 2 x 2 pixels that are numbers, summed pair by pair in float32."""
    four = fours(pixels, np.nan).astype(np.float32)
    there = np.isfinite(four)
    value = np.where(there, four, np.float32(0))
    total = (value[..., 0] + value[..., 1]) + (value[..., 2] + value[..., 3])
    count = there.sum(axis=-1).astype(np.float32)
    return np.divide(total, count, out=np.full_like(total, np.nan), where=count > 0)


def majority_overview(pixels: NDArray[np.uint16]) -> NDArray[np.uint16]:
    """Most frequent of 2 x 2 values, the first in reading order of equally frequent ones."""
    four = fours(pixels.astype(np.int64), -1)
    votes = (four[..., :, None] == four[..., None, :]).sum(axis=-1)
    votes[four < 0] = 0
    winner = votes.argmax(axis=-1)  # the first of equals
    chosen = np.take_along_axis(four, winner[..., None], axis=-1)[..., 0]
    return chosen.astype(np.uint16)
