"""Our flags on the target grid, from an agency's quality raster on any grid."""

from __future__ import annotations

import numpy as np

from groundglow.quantities import FLAG, FLAGS
from groundglow.raster.grid import Block, Grid
from groundglow.raster.open import grid_of
from groundglow.raster.relation import OnLattice, relation
from groundglow.raster.source import read_codes
from groundglow.raster.window import read_stored_codes
from groundglow.scene.model import QualityRaster
from groundglow.scene.quality import Flags, flags_of_codes

_CLOUDY = FLAG["cloud"].mask | FLAG["thin_cloud"].mask
_NEAR_CLOUD = np.uint16(FLAG["near_cloud"].mask)


def read_flags(quality: QualityRaster, grid: Grid, block: Block) -> Flags:
    """Flags of one block of the target grid.

    Where the quality raster is finer than the target, each flag is set where it holds on at least half
    of the pixel, and a pixel with less cloud than that, but some, counts as near a cloud. Where it is
    coarser, the pixel that holds the centre counts.

    Parameters
    ----------
    quality : QualityRaster
        Raster and rules.
    grid : Grid
        The target grid.
    block : Block
        Of the target grid.

    Returns
    -------
    uint16 array (height, width)
        No flag where the quality raster has no value.

    Raises
    ------
    InputError
        If the raster cannot be read or holds fractions.
    """
    source = quality.source
    related = relation(grid_of(source.path, indirect=source.indirect), grid)
    if isinstance(related, OnLattice):
        read = read_codes(source, grid, block)
        return np.where(read.valid, flags_of_codes(read.codes, quality.rules), np.uint16(0))
    from groundglow.raster.footprint import footprints  # noqa: PLC0415  (kernels the usual run never needs)

    result = np.zeros((block.height, block.width), dtype=np.uint16)
    ours = np.bitwise_or.reduce([FLAG[rule.flag].mask for rule in quality.rules])
    for footprint in footprints(related, block, "majority"):
        codes, valid = read_stored_codes(source, footprint.window)
        words = flags_of_codes(codes, quality.rules)
        row, column = footprint.piece.row - block.row, footprint.piece.column - block.column
        piece = result[row : row + footprint.piece.height, column : column + footprint.piece.width]
        for flag in FLAGS:
            if ours & flag.mask:
                holds = np.where(valid, (words & flag.mask) != 0, np.nan).astype(np.float32)
                piece[footprint.mean(holds)[0] >= 0.5] |= np.uint16(flag.mask)
        some_cloud = footprint.any(np.ascontiguousarray(valid & ((words & _CLOUDY) != 0)))
        piece[some_cloud & ((piece & _CLOUDY) == 0)] |= _NEAR_CLOUD
    return result
