"""The range of a raster over a scene, from a sample: enough to place nodes, far cheaper than reading it all."""

from __future__ import annotations

import numpy as np
from affine import Affine

from groundglow.errors import InputError
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Block, Grid, compose
from groundglow.raster.source import read_block

# Edge of the sample in pixels.
_SAMPLE = 400
# Added at both ends of the ground heights found, as a share of their range.
HEIGHT_MARGIN = 0.05


def range_over(
    source: RasterSource | float, grid: Grid, *, relative_margin: float = 0.0
) -> tuple[float, float]:
    """Lowest and highest value of a raster over the grid.

    Parameters
    ----------
    source : RasterSource or float
        A number is its own range.
    grid : Grid
        The scene's grid.
    relative_margin : float
        Share of the range found that is added at both ends, for what the sample missed.

    Returns
    -------
    tuple of float

    Raises
    ------
    InputError
        If the raster cannot be read or has no value over the grid.
    """
    if not isinstance(source, RasterSource):
        return source, source
    step = max(1, -(-max(grid.shape) // _SAMPLE))
    coarse = Grid(
        grid.crs,
        compose(grid.transform, Affine.scale(step, step)),
        -(-grid.width // step),
        -(-grid.height // step),
    )
    values = read_block(source, coarse, Block(0, 0, coarse.height, coarse.width), resampling="nearest").values
    known = values[np.isfinite(values)]
    if known.size == 0:
        raise InputError("the raster has no value where the scene lies", where=source.path)
    low, high = float(known.min()), float(known.max())
    margin = relative_margin * (high - low)
    return low - margin, high + margin
