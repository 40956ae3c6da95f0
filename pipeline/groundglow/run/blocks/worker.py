"""One task of the fused run: read a block of every input, walk the chain, encode every layer.

No intermediate touches the disk, and what leaves the task is encoded tiles, so the same function
serves threads, processes and a cluster. Nothing here depends on the block but its position.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.interpolate import AirStack, interpolate, interpolate_anywhere
from groundglow.atmosphere.view import secant
from groundglow.layers.encode import EncodedBlock, LayerFormat, encode_block
from groundglow.quantities import FLAG
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import TILE, Block, Grid
from groundglow.raster.source import read_block
from groundglow.retrieval.chain import (
    ChainSettings,
    EmissivityFields,
    brightness_temperature,
    mask_flagged,
    surface_maps,
)
from groundglow.retrieval.chain_cloud import near_cloud
from groundglow.run.blocks.column import ColumnAndGround, ColumnWork
from groundglow.run.blocks.emissivity_source import EmissivitySource
from groundglow.scene.model import QualityRaster
from groundglow.scene.quality_read import read_flags

Pixels = NDArray[np.float32]
Flags = NDArray[np.uint16]

# Rows that walk the chain together: the air's fields and the maps of a strip stay in the cache.
_STRIP = 64

_SATURATED = np.uint16(FLAG["saturated"].mask)
_INTERPOLATED = np.uint16(FLAG["interpolated"].mask)
_IMPOSSIBLE = np.uint16(FLAG["impossible"].mask)
_CLOUD = np.uint16(FLAG["cloud"].mask)
_NEAR_CLOUD = np.uint16(FLAG["near_cloud"].mask)
# Where the sensor did not see the ground, a comparison with known ground says nothing.
_SPOILED = np.uint16(sum(FLAG[name].mask for name in ("no_data", "saturated", "cloud", "thin_cloud")))
_OUTSIDE_VALIDITY = np.uint16(FLAG["atmosphere_outside_validity"].mask)


@dataclass(frozen=True, eq=False)
class SceneWork:
    """Everything a task needs to know of its scene; sent once to every worker.

    Attributes
    ----------
    grid : Grid
    thermal : RasterSource
        The band used; its physical values are radiance, or become so by ``convert``.
    convert : callable or None
        Turns physical values of the source's pixels into radiance before any averaging.
    quality : QualityRaster or None
    elevation : RasterSource or float
        [m]
    view_zenith_angle : RasterSource or float
        [deg]
    emissivity : EmissivitySource or None
        None where only brightness temperature is wanted.
    air : AirStack or None
        None without air, and for the water-vapour method.
    column : ColumnWork or None
        For the water-vapour method.
    settings : ChainSettings
    formats : mapping of str to LayerFormat
        The layers to write.
    mask : int
        Flags whose pixels carry no number.
    references : mapping of str to RasterSource
        Known values of layers to compare with.
    area : PlacedArea or None
        Pixels outside it carry no number.
    cloud_buffer : float
        Distance from a cloud within which pixels are flagged. [m]
    pixel : tuple of float
        Height and width of a pixel. [m]
    """

    grid: Grid
    thermal: RasterSource
    convert: Callable[[Pixels], Pixels] | None
    quality: QualityRaster | None
    elevation: RasterSource | float
    view_zenith_angle: RasterSource | float
    emissivity: EmissivitySource | None
    air: AirStack | None
    column: ColumnWork | None
    settings: ChainSettings
    formats: Mapping[str, LayerFormat]
    mask: int
    references: Mapping[str, RasterSource] = field(default_factory=dict)
    area: PlacedArea | None = None
    cloud_buffer: float = 0.0
    pixel: tuple[float, float] = (1.0, 1.0)

    @property
    def halo(self) -> tuple[int, int]:
        """Rows and columns around a block whose clouds it must know."""
        return int(self.cloud_buffer / self.pixel[0]), int(self.cloud_buffer / self.pixel[1])


class PlacedArea(Protocol):
    """An area of interest on the grid."""

    def mask(self, block: Block) -> NDArray[np.bool_]:
        """True where a pixel of the block lies inside."""


class ErrorSums(NamedTuple):
    """Sums of map minus reference over one tile."""

    layer: str
    row: int
    column: int
    pixels: int
    total: float
    total_of_squares: float


@dataclass(frozen=True)
class BlockResult:
    """What one task gives back.

    Attributes
    ----------
    block : Block
    layers : mapping of str to EncodedBlock
    errors : tuple of ErrorSums
        Against known values, one a tile and layer.
    seen : int
        Pixels that the sensor saw.
    impossible_emissivity : int
        Those among them whose emissivity no surface can have.
    """

    block: Block
    layers: Mapping[str, EncodedBlock]
    errors: tuple[ErrorSums, ...]
    seen: int
    impossible_emissivity: int


def work_block(work: SceneWork, block: Block) -> BlockResult:
    """Walk one block through the chain.

    Parameters
    ----------
    work : SceneWork
    block : Block

    Returns
    -------
    BlockResult

    Raises
    ------
    InputError
        If a raster cannot be read.
    """
    radiance, flags = radiance_and_flags(work, block)
    names = [name for name in work.formats if name != "quality"]
    maps = {name: np.empty((block.height, block.width), np.float32) for name in names}
    ground = ground_of(work, block)
    for rows, columns in tiles(block, _STRIP):
        tile_radiance = np.ascontiguousarray(radiance[rows, columns])
        tile_flags = np.ascontiguousarray(flags[rows, columns])
        brightness = brightness_temperature(tile_radiance, tile_flags, work.settings)
        found = {"brightness_temperature": brightness}
        if isinstance(ground, AirAndGround):
            found |= ground.maps(work, rows, columns, tile_radiance, tile_flags, names)
        elif isinstance(ground, ColumnAndGround):
            found |= ground.maps(
                rows, columns, tile_radiance, brightness, flags=tile_flags, settings=work.settings
            )
        flags[rows, columns] = tile_flags
        for name in names:
            maps[name][rows, columns] = found[name]
    for values in maps.values():
        mask_flagged(values, flags, work.mask)
    errors = tuple(reference_errors(work, block, maps, flags))
    encoded = {name: encode_block(maps[name], block, work.grid, work.formats[name]) for name in names}
    encoded["quality"] = encode_block(flags, block, work.grid, work.formats["quality"])
    seen = np.isfinite(radiance)
    wrong = 0 if ground is None else np.count_nonzero(seen & ((ground.emissivity.flags & _IMPOSSIBLE) != 0))
    return BlockResult(block, encoded, errors, int(np.count_nonzero(seen)), int(wrong))


def ground_of(work: SceneWork, block: Block) -> AirAndGround | ColumnAndGround | None:
    """What the method needs besides radiance; None where only brightness temperature is wanted."""
    if work.column is not None and work.emissivity is not None:
        emissivity = work.emissivity.read(work.grid, block)
        return ColumnAndGround.read(work.column, emissivity, work.grid, block)
    return AirAndGround.read(work, block)


@dataclass(frozen=True)
class AirAndGround:
    """What the tiles of one block share: emissivity, and where the air is looked up."""

    stack: AirStack
    emissivity: EmissivityFields
    height: Pixels | float
    secant: Pixels | float
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    same_air: dict[tuple[int, ...], Pixels] = field(default_factory=dict)

    @staticmethod
    def read(work: SceneWork, block: Block) -> AirAndGround | None:
        """Read the inputs of one block; None where only brightness temperature is wanted."""
        if work.air is None or work.emissivity is None:
            return None
        height = _number_or_pixels(work.elevation, work, block, needed=work.air.height.size > 1)
        angle = _number_or_pixels(work.view_zenith_angle, work, block, needed=work.air.secant.size > 1)
        x, y = map_coordinates(work.grid, block)
        slant = 1.0 / math.cos(math.radians(angle)) if isinstance(angle, float) else secant(angle)
        return AirAndGround(work.air, work.emissivity.read(work.grid, block), height, slant, x, y)

    def maps(
        self, work: SceneWork, rows: slice, columns: slice, radiance: Pixels, flags: Flags, names: list[str]
    ) -> Mapping[str, Pixels]:
        """The maps of one tile."""
        air = self.air(rows, columns)
        # Where the ground height or the angle is not known, neither is the air.
        flags[np.isnan(air[0])] |= _OUTSIDE_VALIDITY
        return surface_maps(radiance, flags, self.emissivity.window(rows, columns), air, work.settings, names)

    def air(self, rows: slice, columns: slice) -> Pixels:
        """The air's fields at the pixels of one tile; the same array again where they are the same everywhere."""
        stack = self.stack
        shape = (rows.stop - rows.start, columns.stop - columns.start)
        everywhere = stack.x.size == 1 and stack.y.size == 1
        everywhere &= stack.height.size == 1 or isinstance(self.height, float)
        everywhere &= stack.secant.size == 1 or isinstance(self.secant, float)
        if everywhere and shape in self.same_air:
            return self.same_air[shape]
        height = self.height if isinstance(self.height, float) else self.height[rows, columns]
        slant = self.secant if isinstance(self.secant, float) else self.secant[rows, columns]
        if self.x.ndim == 1:
            air = interpolate(stack, self.x[columns], self.y[rows], height, slant)
        else:
            air = interpolate_anywhere(stack, self.x[rows, columns], self.y[rows, columns], height, slant)
        if everywhere:
            self.same_air[shape] = air
        return air


def map_coordinates(grid: Grid, block: Block) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Map x and y of pixel centres: one number a column and a row, or two full arrays on a rotated grid."""
    columns = np.arange(block.column, block.column + block.width) + 0.5
    rows = np.arange(block.row, block.row + block.height) + 0.5
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    if b == 0.0 and d == 0.0:
        return c + a * columns, f + e * rows
    across, down = np.meshgrid(columns, rows)
    return c + a * across + b * down, f + d * across + e * down


def radiance_and_flags(work: SceneWork, block: Block) -> tuple[Pixels, Flags]:
    """Radiance of a block, and the flags that the inputs set."""
    read = read_block(work.thermal, work.grid, block, resampling="continuous", convert=work.convert)
    flags = np.zeros(read.values.shape, np.uint16)
    if read.saturated is not None:
        flags[read.saturated] |= _SATURATED
    if read.mixed is not None:
        flags |= _INTERPOLATED
    if work.quality is not None:
        flags |= _quality_flags(work, work.quality, block)
    values = read.values
    if work.area is not None:
        values = np.where(work.area.mask(block), values, np.float32(np.nan))
    return values, flags


def _quality_flags(work: SceneWork, quality: QualityRaster, block: Block) -> Flags:
    """Flags of the quality raster, and of the pixels near its clouds."""
    above, left = min(work.halo[0], block.row), min(work.halo[1], block.column)
    below = min(work.halo[0], work.grid.height - block.row - block.height)
    right = min(work.halo[1], work.grid.width - block.column - block.width)
    wide = Block(
        block.row - above, block.column - left, block.height + above + below, block.width + left + right
    )
    flags = read_flags(quality, work.grid, wide)
    if work.cloud_buffer == 0.0:
        return flags
    near = near_cloud((flags & _CLOUD) != 0, (above, below, left, right), work.pixel, work.cloud_buffer)
    flags = flags[above : above + block.height, left : left + block.width]
    return np.where(near, flags | _NEAR_CLOUD, flags)


def _number_or_pixels(
    source: RasterSource | float, work: SceneWork, block: Block, *, needed: bool
) -> Pixels | float:
    if not isinstance(source, RasterSource):
        return float(source)
    # An axis with one node is not looked at: the raster need not be read.
    return read_block(source, work.grid, block, resampling="continuous").values if needed else 0.0


def tiles(block: Block, height: int = TILE) -> Iterator[tuple[slice, slice]]:
    """Rows and columns of each tile of a block, or of strips of a tile's width and another height."""
    for row in range(0, block.height, height):
        for column in range(0, block.width, TILE):
            yield (
                slice(row, min(row + height, block.height)),
                slice(column, min(column + TILE, block.width)),
            )


def reference_errors(
    work: SceneWork, block: Block, maps: Mapping[str, Pixels], flags: Flags
) -> Iterator[ErrorSums]:
    """Map minus reference over clear pixels, summed a tile."""
    spoiled = (flags & _SPOILED) != 0
    for name, source in work.references.items():
        reference = read_block(source, work.grid, block, resampling="continuous").values
        difference = maps[name].astype(np.float64) - reference
        difference[spoiled] = np.nan
        for rows, columns in tiles(block):
            part = difference[rows, columns]
            known = part[np.isfinite(part)]
            row, column = block.row + rows.start, block.column + columns.start
            yield ErrorSums(name, row, column, known.size, float(known.sum()), float((known * known).sum()))
