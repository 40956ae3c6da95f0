"""A raster's pixels on any target grid, block by block.

Where the source lies on the target grid its pixels are read as they are. Otherwise continuous
values are averaged by area where the source is finer and interpolated between pixel centres where
it is not; codes go to the majority or to the nearest pixel. Pixels without a value never count, and
a target pixel has a value where at least half of it has one.

Each pixel's value depends on the two grids and on the raster only, never on the block that was
asked for: all geometry is computed from absolute row and column numbers.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np
from rasterio.windows import Window

from groundglow.errors import ConfigError
from groundglow.raster.band import BlockRead, CodeRead, Convert, RasterSource
from groundglow.raster.grid import Block, Grid
from groundglow.raster.open import describe_raster, grid_of
from groundglow.raster.relation import AlongAxes, OnLattice, Otherwise, relation
from groundglow.raster.window import read_stored_codes, read_values

if TYPE_CHECKING:
    from groundglow.raster.footprint import Footprint

__all__ = ["BlockRead", "CodeRead", "Convert", "RasterSource", "read_block", "read_codes", "source_grid"]

Slices = tuple[slice, slice]


def source_grid(source: RasterSource) -> Grid:
    """The grid of a source, after checking that its header and last pixel can be read.

    Raises
    ------
    InputError
        If the raster is missing, damaged or without a place on the Earth.
    """
    return describe_raster(source.path, indirect=source.indirect).grid


def read_block(
    source: RasterSource,
    grid: Grid,
    block: Block,
    *,
    resampling: str = "continuous",
    convert: Convert | None = None,
) -> BlockRead:
    """Physical values of one block of the target grid.

    Parameters
    ----------
    source : RasterSource
        What to read.
    grid : Grid
        The target grid.
    block : Block
        Inside the target grid.
    resampling : str
        "continuous" (area average where the source is finer, bilinear where it is not) or
        "nearest"; without effect where the source lies on the target grid.
    convert : callable, optional
        Applied to the source's pixels before they are averaged, for example brightness temperature
        to radiance. Takes and returns a float32 array; must work pixel by pixel.

    Returns
    -------
    BlockRead
        Values in the unit of ``convert``, else of the source; NaN outside the source.

    Raises
    ------
    InputError
        If the raster cannot be read.
    """
    _check_choice(resampling, ("continuous", "nearest"))
    origin = grid_of(source.path, indirect=source.indirect)
    related = relation(origin, grid)
    shape = (block.height, block.width)
    values = np.full(shape, np.nan, dtype=np.float32)
    saturated = None if source.saturation is None else np.zeros(shape, dtype=np.bool_)
    if isinstance(related, OnLattice):
        found = _overlap(related, block, origin)
        if found is not None:
            window, at = found
            part, part_saturated = read_values(source, window)
            values[at] = part if convert is None else convert(part)
            if saturated is not None and part_saturated is not None:
                saturated[at] = part_saturated
        return BlockRead(values, None, saturated)
    mixed = np.zeros(shape, dtype=np.bool_)
    for footprint in _footprints(related, block, resampling):
        part, part_saturated = read_values(source, footprint.window)
        at = _place(block, footprint.piece)
        values[at], mixed[at] = footprint.mean(part if convert is None else convert(part))
        if saturated is not None and part_saturated is not None:
            saturated[at] = footprint.any(part_saturated)
    return BlockRead(values, mixed, saturated)


def read_codes(source: RasterSource, grid: Grid, block: Block, *, resampling: str = "majority") -> CodeRead:
    """Integer codes of one block of the target grid.

    Parameters
    ----------
    source, grid, block
        As for :func:`read_block`; scale and offset are not applied.
    resampling : str
        "majority" (the code that covers most of the pixel where the source is finer, else the
        nearest) or "nearest".

    Returns
    -------
    CodeRead
        Codes as int64 where they were resampled, else in the file's own type.

    Raises
    ------
    InputError
        If the raster cannot be read or holds fractions.
    """
    _check_choice(resampling, ("majority", "nearest"))
    origin = grid_of(source.path, indirect=source.indirect)
    related = relation(origin, grid)
    shape = (block.height, block.width)
    valid = np.zeros(shape, dtype=np.bool_)
    if isinstance(related, OnLattice):
        found = _overlap(related, block, origin)
        if found is None:
            return CodeRead(np.zeros(shape, dtype=np.uint8), valid, None)
        window, at = found
        part, part_valid = read_stored_codes(source, window)
        if part.shape == shape:
            return CodeRead(part, part_valid, None)
        codes = np.zeros(shape, dtype=part.dtype)
        codes[at], valid[at] = part, part_valid
        return CodeRead(codes, valid, None)
    chosen, mixed = np.zeros(shape, dtype=np.int64), np.zeros(shape, dtype=np.bool_)
    for footprint in _footprints(related, block, resampling):
        part, part_valid = read_stored_codes(source, footprint.window)
        at = _place(block, footprint.piece)
        chosen[at], valid[at], mixed[at] = footprint.majority(part.astype(np.int64), part_valid)
    return CodeRead(chosen, valid, mixed)


def _footprints(related: AlongAxes | Otherwise, block: Block, purpose: str) -> Iterator[Footprint]:
    """The footprints of a block; the module and its kernels load where grids differ only."""
    from groundglow.raster.footprint import footprints  # noqa: PLC0415  (kernels the usual run never needs)

    return footprints(related, block, purpose)


def _check_choice(found: str, known: tuple[str, ...]) -> None:
    if found not in known:
        raise ConfigError(f"there is no resampling {found!r}", remedy=f"Choose from: {', '.join(known)}")


def _overlap(related: OnLattice, block: Block, origin: Grid) -> tuple[Window, Slices] | None:
    """The part of the source under a block of the same pixels, and where in the block it goes."""
    row, column = block.row + related.row_shift, block.column + related.column_shift
    top, bottom = max(row, 0), min(row + block.height, origin.height)
    left, right = max(column, 0), min(column + block.width, origin.width)
    if top >= bottom or left >= right:
        return None
    at = (slice(top - row, bottom - row), slice(left - column, right - column))
    return Window(left, top, right - left, bottom - top), at


def _place(block: Block, piece: Block) -> Slices:
    """Where a piece lies within its block."""
    row, column = piece.row - block.row, piece.column - block.column
    return slice(row, row + piece.height), slice(column, column + piece.width)
