"""Where a block's emissivity comes from: one small class for each source, all picklable.

Each reads what it needs of the scene's rasters and gives the five arrays of the chain; how it came
to them is told in words for the provenance. Sources that vary from pixel to pixel are averaged over
the sensor's native footprint, since the sensor saw no sharper picture.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, fields
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Block, Grid
from groundglow.raster.source import read_block, read_codes
from groundglow.retrieval.chain import EmissivityFields, Pixels
from groundglow.retrieval.emissivity import (
    BROADBAND_ASSUMED,
    GroundValues,
    constant_fields,
    raster_fields,
)
from groundglow.retrieval.emissivity_broadband import Relation, broadband_from_bands
from groundglow.retrieval.emissivity_class_raster import ClassLookup, class_fields, unknown_codes_error
from groundglow.retrieval.emissivity_index_kernels import index_fields
from groundglow.retrieval.emissivity_logarithmic import LogarithmicMethod
from groundglow.retrieval.emissivity_smoothing import smooth_fields
from groundglow.retrieval.emissivity_threshold import ThresholdMethod
from groundglow.scene.model import QualityRaster
from groundglow.scene.quality_read import read_flags

Float = NDArray[np.float64]
Flags = NDArray[np.uint16]


class EmissivitySource(Protocol):
    """Gives the emissivity of any block of a grid."""

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """The five arrays and the flags of one block."""

    def rasters(self) -> tuple[RasterSource, ...]:
        """The rasters that are read."""

    def describe(self) -> dict[str, object]:
        """What was done, for the provenance."""


@dataclass(frozen=True)
class Footprint:
    """Weights of the native footprint along rows and columns, odd in number.

    Attributes
    ----------
    rows, columns : float64 arrays
    """

    rows: Float
    columns: Float

    @property
    def halo(self) -> tuple[int, int]:
        """Rows and columns around a block that its pixels need."""
        return self.rows.size // 2, self.columns.size // 2


@dataclass(frozen=True)
class ConstantSource:
    """One kind of ground everywhere.

    Attributes
    ----------
    ground : GroundValues
    origin : str
        "constant" or the name of a class.
    """

    ground: GroundValues
    origin: str

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """See :class:`EmissivitySource`."""
        return constant_fields(self.ground, (block.height, block.width))

    def rasters(self) -> tuple[RasterSource, ...]:
        """None."""
        return ()

    def describe(self) -> dict[str, object]:
        """See :class:`EmissivitySource`."""
        ground = self.ground
        return {
            "source": self.origin,
            "value": ground.band,
            "uncertainty": ground.band_uncertainty,
            "broadband": ground.broadband,
        }


@dataclass(frozen=True)
class RasterEmissivitySource:
    """Rasters of band emissivity.

    Attributes
    ----------
    band : str
        The thermal band used.
    sources : mapping of str to RasterSource
        By band number; the band used, and those of the broadband relation.
    uncertainty : float
        1 sigma, the same everywhere.
    broadband_uncertainty : float
        Of the rule that takes the band's value for the flux.
    relation : Relation or None
        Published relation for the broadband emissivity.
    """

    band: str
    sources: Mapping[str, RasterSource]
    uncertainty: float
    broadband_uncertainty: float
    relation: Relation | None = None

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """See :class:`EmissivitySource`; values that no surface can have become NaN and are flagged."""
        values = {
            number: read_block(source, grid, block, resampling="continuous").values
            for number, source in self.sources.items()
        }
        plain = raster_fields(
            values[self.band], self.uncertainty, broadband_uncertainty=self.broadband_uncertainty
        )
        if self.relation is None:
            return plain
        bands = [values[number] for number in self.relation.bands]
        spread = [np.float64(self.uncertainty)] * len(bands)
        wide = broadband_from_bands(self.relation, bands, spread, used=self.band)
        known = np.isfinite(wide.value) & np.isfinite(plain.band)
        return EmissivityFields(
            plain.band,
            plain.band_uncertainty,
            np.where(known, wide.value, plain.broadband).astype(np.float32),
            np.where(known, wide.shared, plain.broadband_shared).astype(np.float32),
            np.where(known, wide.own, plain.broadband_own).astype(np.float32),
            np.where(known, plain.flags & ~BROADBAND_ASSUMED, plain.flags),
        )

    def rasters(self) -> tuple[RasterSource, ...]:
        """The emissivity rasters."""
        return tuple(self.sources.values())

    def describe(self) -> dict[str, object]:
        """See :class:`EmissivitySource`."""
        rule = self.relation.source if self.relation is not None else "the band's value (assumed)"
        return {
            "source": "raster",
            "paths": {number: source.path for number, source in self.sources.items()},
            "uncertainty": self.uncertainty,
            "broadband": rule,
        }


@dataclass(frozen=True)
class ClassEmissivitySource:
    """A class raster with a class table.

    Attributes
    ----------
    source : RasterSource
    lookup : ClassLookup
        The table, ready for the band.
    footprint : Footprint or None
    table : str
        Where the table is from.
    """

    source: RasterSource
    lookup: ClassLookup
    footprint: Footprint | None
    table: str

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """See :class:`EmissivitySource`; a finer class raster is averaged as emissivity."""
        return _smoothed(self._read, grid, block, self.footprint)

    def _read(self, grid: Grid, block: Block) -> EmissivityFields:
        codes = read_codes(self.source, grid, block, resampling="majority")
        chosen = class_fields(codes.codes, self.lookup, known=codes.valid)
        if codes.mixed is None:
            return chosen
        averaged = [
            read_block(
                self.source, grid, block, resampling="continuous", convert=_NumberOfClass(self.lookup, row)
            ).values
            for row in range(len(self.lookup.numbers))
        ]
        band, spread, wide, shared, own = averaged
        return EmissivityFields(band, spread, wide, shared, own, chosen.flags)

    def rasters(self) -> tuple[RasterSource, ...]:
        """The class raster."""
        return (self.source,)

    def describe(self) -> dict[str, object]:
        """See :class:`EmissivitySource`."""
        return {"source": "land-cover", "path": self.source.path, "class_table": self.table}


@dataclass(frozen=True)
class _NumberOfClass:
    """Turns class codes into one of the five numbers of their class, pixel by pixel."""

    lookup: ClassLookup
    row: int

    def __call__(self, codes: Pixels) -> Pixels:
        known = np.isfinite(codes)
        whole = np.where(known, codes, 0.0).astype(np.int64)
        place = np.minimum(np.searchsorted(self.lookup.codes, whole), self.lookup.codes.size - 1)
        strangers = known & (self.lookup.codes[place] != whole)
        if strangers.any():
            raise unknown_codes_error(whole[strangers], self.lookup.codes, "the class raster")
        return np.where(known, self.lookup.numbers[self.row][place], np.float32(np.nan))


@dataclass(frozen=True)
class ReflectanceSource:
    """One reflectance band.

    Attributes
    ----------
    source : RasterSource
        Its scale and offset lead to reflectance.
    divisor : float
        Sine of the sun's elevation where that is still to be divided by; else 1.
    """

    source: RasterSource
    divisor: float

    def read(self, grid: Grid, block: Block) -> Pixels:
        """Reflectance of one block, averaged as reflectance."""
        values = read_block(self.source, grid, block, resampling="continuous").values
        return values if self.divisor == 1.0 else (values / np.float32(self.divisor)).astype(np.float32)


@dataclass(frozen=True)
class IndexEmissivitySource:
    """Emissivity from a vegetation index.

    Attributes
    ----------
    red, near_infrared : ReflectanceSource
    method : ThresholdMethod or LogarithmicMethod
    quality : QualityRaster or None
        Says where water and snow are.
    footprint : Footprint or None
    account : mapping
        Method, coefficients and age, for the provenance.
    """

    red: ReflectanceSource
    near_infrared: ReflectanceSource
    method: ThresholdMethod | LogarithmicMethod
    quality: QualityRaster | None
    footprint: Footprint | None
    account: Mapping[str, object]

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """See :class:`EmissivitySource`."""
        return _smoothed(self._read, grid, block, self.footprint)

    def _read(self, grid: Grid, block: Block) -> EmissivityFields:
        flags = np.zeros((block.height, block.width), np.uint16)
        if self.quality is not None:
            flags = read_flags(self.quality, grid, block)
        return index_fields(
            self.red.read(grid, block), self.near_infrared.read(grid, block), flags, self.method
        )

    def rasters(self) -> tuple[RasterSource, ...]:
        """Both bands."""
        return (self.red.source, self.near_infrared.source)

    def describe(self) -> dict[str, object]:
        """See :class:`EmissivitySource`."""
        return dict(self.account)


class _Reader(Protocol):
    def __call__(self, grid: Grid, block: Block) -> EmissivityFields: ...


def _smoothed(read: _Reader, grid: Grid, block: Block, footprint: Footprint | None) -> EmissivityFields:
    """Read a block with the surroundings that the footprint needs, and average over it."""
    if footprint is None or footprint.halo == (0, 0):
        return read(grid, block)
    down, across = footprint.halo
    above, left = min(down, block.row), min(across, block.column)
    below = min(down, grid.height - block.row - block.height)
    right = min(across, grid.width - block.column - block.width)
    wide = Block(
        block.row - above, block.column - left, block.height + above + below, block.width + left + right
    )
    margins = ((down - above, down - below), (across - left, across - right))
    return smooth_fields(_padded(read(grid, wide), margins), footprint.rows, footprint.columns)


def _padded(given: EmissivityFields, margins: Sequence[tuple[int, int]]) -> EmissivityFields:
    """Beyond the edge of the raster nothing is known."""
    if not any(part for margin in margins for part in margin):
        return given
    arrays = []
    for item in fields(given):
        array = getattr(given, item.name)
        filling = 0 if item.name == "flags" else np.nan
        arrays.append(np.pad(array, margins, constant_values=filling))
    return EmissivityFields(*arrays)


def sample(
    read: Sequence[Callable[[Grid, Block], NDArray[Any]]], grid: Grid, size: int = 128
) -> list[NDArray[Any]]:
    """Pixels of each input at nine places of the grid, for a look at what the rasters hold.

    Raises
    ------
    InputError
        If an input cannot be read.
    """
    blocks = []
    for row in (1, 5, 9):
        for column in (1, 5, 9):
            top = min(grid.height * row // 10, max(grid.height - size, 0))
            left = min(grid.width * column // 10, max(grid.width - size, 0))
            height, width = min(size, grid.height - top), min(size, grid.width - left)
            blocks.append(Block(top, left, height, width))
    return [np.concatenate([one(grid, block).ravel() for block in blocks]) for one in read]
