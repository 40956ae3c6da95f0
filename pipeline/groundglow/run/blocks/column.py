"""The water-vapour method within a block: emissivity, and the column water vapour at each pixel."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.quantities import FLAG
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Block, Grid
from groundglow.raster.source import read_block
from groundglow.retrieval.chain import ChainSettings, EmissivityFields, Pixels, maps_of_inversion
from groundglow.retrieval.chain_water_vapour import WaterVapourSettings, invert_with_column

Flags = NDArray[np.uint16]

_OUTSIDE_VALIDITY = np.uint16(FLAG["atmosphere_outside_validity"].mask)


@dataclass(frozen=True)
class ColumnWork:
    """What the water-vapour method needs to know of its scene.

    Attributes
    ----------
    water : RasterSource or float
        Column water vapour. [kg m-2]
    settings : WaterVapourSettings
    """

    water: RasterSource | float
    settings: WaterVapourSettings


@dataclass(frozen=True)
class ColumnAndGround:
    """What the tiles of one block share."""

    emissivity: EmissivityFields
    water: Pixels
    method: WaterVapourSettings

    @staticmethod
    def read(column: ColumnWork, emissivity: EmissivityFields, grid: Grid, block: Block) -> ColumnAndGround:
        """Read the water vapour of one block."""
        if isinstance(column.water, RasterSource):
            water = read_block(column.water, grid, block, resampling="continuous").values
        else:
            water = np.broadcast_to(np.float32(column.water), (block.height, block.width))
        return ColumnAndGround(emissivity, water, column.settings)

    def water_of(self, rows: slice, columns: slice) -> Pixels:
        """The water vapour of one tile, contiguous and writable as kernels want it. [kg m-2]"""
        return np.require(self.water[rows, columns], requirements=["C", "W"])

    def maps(
        self,
        rows: slice,
        columns: slice,
        radiance: Pixels,
        brightness: Pixels,
        *,
        flags: Flags,
        settings: ChainSettings,
    ) -> Mapping[str, Pixels]:
        """The maps of one tile; ``flags`` gains what the method finds."""
        emissivity = self.emissivity.window(rows, columns)
        flags |= emissivity.flags
        water = self.water_of(rows, columns)
        flags[np.isnan(water)] |= _OUTSIDE_VALIDITY
        found = invert_with_column(
            radiance, brightness, flags, emissivity, water, settings=settings, method=self.method
        )
        return maps_of_inversion(found, emissivity)
