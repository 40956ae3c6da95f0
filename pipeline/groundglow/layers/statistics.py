"""Statistics of a layer's stored full-resolution values, joined from its tiles.

Sums are exact joins (``math.fsum``) of one partial sum per tile, and histograms hold whole
numbers, so that the result does not depend on the order in which tiles were made.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from groundglow.layers.encode_kernels import (
    HISTOGRAM_BINS,
    HISTOGRAM_FIRST,
    HISTOGRAM_SHIFT,
    HISTOGRAM_SPAN,
)


@dataclass(frozen=True, order=True, slots=True)
class TilePartial:
    """What one full-resolution tile of numbers adds to the statistics of its layer."""

    row: int
    column: int
    count: int
    minimum: float
    maximum: float
    total: float
    total_of_squares: float


@dataclass(frozen=True)
class BlockPartial:
    """What one block adds to the statistics of its layer.

    Attributes
    ----------
    tiles : tuple of TilePartial
        Empty for integer layers.
    keys, counts : int32 and int64 arrays, same length
        Occupied bins of the histogram: bins of :func:`bin_edges` for float layers, the values
        themselves for integer ones.
    """

    tiles: tuple[TilePartial, ...]
    keys: NDArray[np.int32]
    counts: NDArray[np.int64]


@dataclass(frozen=True)
class LayerStatistics:
    """Statistics of the stored full-resolution values of one layer.

    Attributes
    ----------
    pixels : int
        Pixels of the layer, with and without a value.
    count : int
        Pixels that carry a number.
    minimum, maximum, mean, standard_deviation : float
        Of these; NaN where there are none, and for layers of flags. The standard deviation is that
        of the whole population (divided by ``count``).
    lower, median, upper : float
        Quantiles 0.05, 0.5 and 0.95, from a histogram whose bins are at most 0.05 % of the value
        wide (0.125 K at 300 K); NaN for layers of flags.
    values : tuple of (int, int)
        For layers of flags: every value that occurs and how often, in increasing order; else empty.
    """

    pixels: int
    count: int
    minimum: float = math.nan
    maximum: float = math.nan
    mean: float = math.nan
    standard_deviation: float = math.nan
    lower: float = math.nan
    median: float = math.nan
    upper: float = math.nan
    values: tuple[tuple[int, int], ...] = ()

    @property
    def valid_percent(self) -> float:
        """Share of the pixels that carry a number, in percent."""
        return 100.0 * self.count / self.pixels


@dataclass
class StatisticsCollector:
    """Joins the partial statistics of the blocks of one layer.

    Parameters
    ----------
    pixels : int
        Pixels of the whole layer.
    flags : bool
        Whether the layer holds flags (integers without a scale) instead of numbers.
    """

    pixels: int
    flags: bool
    _tiles: list[TilePartial] = field(default_factory=list)
    _histogram: dict[int, int] = field(default_factory=dict)

    def add(self, partial: BlockPartial) -> None:
        """Take in one block."""
        self._tiles.extend(partial.tiles)
        for key, count in zip(partial.keys.tolist(), partial.counts.tolist(), strict=True):
            self._histogram[key] = self._histogram.get(key, 0) + count

    def result(self) -> LayerStatistics:
        """The statistics of everything taken in so far."""
        if self.flags:
            values = tuple(sorted(self._histogram.items()))
            return LayerStatistics(self.pixels, sum(count for _, count in values), values=values)
        tiles = sorted(tile for tile in self._tiles if tile.count)
        if not tiles:
            return LayerStatistics(self.pixels, 0)
        count = sum(tile.count for tile in tiles)
        mean = math.fsum(tile.total for tile in tiles) / count
        variance = math.fsum(tile.total_of_squares for tile in tiles) / count - mean * mean
        minimum = min(tile.minimum for tile in tiles)
        maximum = max(tile.maximum for tile in tiles)
        lower, median, upper = _quantiles(self._histogram, (0.05, 0.5, 0.95), minimum, maximum)
        return LayerStatistics(
            self.pixels, count, minimum, maximum, mean, math.sqrt(max(variance, 0.0)), lower, median, upper
        )


def bin_edges(bins: NDArray[np.int64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Lower and upper edge of histogram bins.

    Parameters
    ----------
    bins : int array (n,)
        Bin numbers as the counting kernel uses them, 0 to ``HISTOGRAM_BINS - 1``.

    Returns
    -------
    lower, upper : float64 arrays (n,)
        In the unit of the layer. The middle bin is taken as zero wide.
    """
    place = bins - HISTOGRAM_SPAN
    distance = np.abs(place)
    near = ((distance + HISTOGRAM_FIRST) << HISTOGRAM_SHIFT).astype(np.uint32).view(np.float32)
    far = ((distance + 1 + HISTOGRAM_FIRST) << HISTOGRAM_SHIFT).astype(np.uint32).view(np.float32)
    near = np.where(distance == 0, 0.0, near.astype(np.float64))
    far = np.where(distance == 0, 0.0, far.astype(np.float64))
    return np.where(place < 0, -far, near), np.where(place < 0, -near, far)


def new_bins() -> NDArray[np.int32]:
    """Empty histogram for the counting kernel."""
    return np.zeros((4, HISTOGRAM_BINS), np.int32)


def _quantiles(
    histogram: dict[int, int], shares: tuple[float, ...], minimum: float, maximum: float
) -> tuple[float, ...]:
    """Quantiles of a histogram, linear within a bin and never outside the range of the values."""
    bins = np.array(sorted(histogram), dtype=np.int64)
    counts = np.array([histogram[int(place)] for place in bins], dtype=np.int64)
    lower, upper = bin_edges(bins)
    reached = np.cumsum(counts)
    found = []
    for share in shares:
        position = share * float(reached[-1])
        place = int(np.searchsorted(reached, position))
        within = (position - float(reached[place] - counts[place])) / float(counts[place])
        value = float(lower[place] + within * (upper[place] - lower[place]))
        found.append(min(max(value, minimum), maximum))
    return tuple(found)
