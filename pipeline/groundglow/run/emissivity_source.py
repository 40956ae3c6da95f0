"""Where a block's emissivity comes from: one small class for each source, all picklable.

Each reads what it needs of the scene's rasters and gives the five arrays of the chain; how it came
to them is told in words for the provenance.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from groundglow.quantities import FLAG
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Block, Grid
from groundglow.raster.source import read_block
from groundglow.retrieval.chain import EmissivityFields, Pixels

_ASSUMED = np.uint16(FLAG["emissivity_assumed"].mask)
_BROADBAND_ASSUMED = np.uint16(FLAG["broadband_emissivity_assumed"].mask)
_BARE_METAL = np.uint16(FLAG["bare_metal"].mask)
_IMPOSSIBLE = np.uint16(FLAG["impossible"].mask)
_NO_DATA = np.uint16(FLAG["no_data"].mask)
_METAL_BELOW = 0.7


class EmissivitySource(Protocol):
    """Gives the emissivity of any block of a grid."""

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """The five arrays and the flags of one block."""

    def rasters(self) -> tuple[RasterSource, ...]:
        """The rasters that are read."""

    def describe(self) -> dict[str, object]:
        """What was done, for the provenance."""


@dataclass(frozen=True)
class ConstantSource:
    """One value everywhere.

    Attributes
    ----------
    value, uncertainty : float
        In the thermal band.
    broadband : float or None
        None takes the band's value, and flags it.
    broadband_uncertainty : float
        Of the broadband value, or of the rule that takes the band's.
    """

    value: float
    uncertainty: float
    broadband: float | None
    broadband_uncertainty: float

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """See :class:`EmissivitySource`."""
        shape = (block.height, block.width)
        flags = _ASSUMED
        if self.broadband is None:
            flags |= _BROADBAND_ASSUMED
        if self.value < _METAL_BELOW:
            flags |= _BARE_METAL
        shared = self.uncertainty if self.broadband is None else 0.0

        def everywhere(value: float) -> Pixels:
            return np.broadcast_to(np.float32(value), shape)

        return EmissivityFields(
            band=everywhere(self.value),
            band_uncertainty=everywhere(self.uncertainty),
            broadband=everywhere(self.broadband or self.value),
            broadband_shared=everywhere(shared),
            broadband_own=everywhere(self.broadband_uncertainty),
            flags=np.broadcast_to(flags, shape),
        )

    def rasters(self) -> tuple[RasterSource, ...]:
        """None."""
        return ()

    def describe(self) -> dict[str, object]:
        """See :class:`EmissivitySource`."""
        broadband = self.broadband if self.broadband is not None else "the band's value (assumed)"
        return {
            "source": "constant",
            "value": self.value,
            "uncertainty": self.uncertainty,
            "broadband": broadband,
        }


@dataclass(frozen=True)
class RasterSourceOfEmissivity:
    """A raster of band emissivity.

    Attributes
    ----------
    source : RasterSource
    uncertainty : float
        1 sigma, the same everywhere.
    broadband_uncertainty : float
        Of the rule that takes the band's value for the flux.
    """

    source: RasterSource
    uncertainty: float
    broadband_uncertainty: float

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """See :class:`EmissivitySource`; values that no surface can have become NaN and are flagged."""
        values = read_block(self.source, grid, block, resampling="continuous").values
        possible = (values > 0.0) & (values <= 1.0)
        missing = np.isnan(values)
        flags = np.full(values.shape, _BROADBAND_ASSUMED, np.uint16)
        flags[missing] |= _NO_DATA
        flags[~possible & ~missing] |= _IMPOSSIBLE
        flags[possible & (values < _METAL_BELOW)] |= _BARE_METAL
        values = np.where(possible, values, np.float32(np.nan))
        return EmissivityFields(
            band=values,
            band_uncertainty=np.broadcast_to(np.float32(self.uncertainty), values.shape),
            broadband=values,
            broadband_shared=np.broadcast_to(np.float32(self.uncertainty), values.shape),
            broadband_own=np.broadcast_to(np.float32(self.broadband_uncertainty), values.shape),
            flags=flags,
        )

    def rasters(self) -> tuple[RasterSource, ...]:
        """The emissivity raster."""
        return (self.source,)

    def describe(self) -> dict[str, object]:
        """See :class:`EmissivitySource`."""
        return {"source": "raster", "path": self.source.path, "uncertainty": self.uncertainty}
