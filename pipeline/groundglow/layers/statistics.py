"""Statistics of a layer's stored full-resolution values, joined from its tiles.

Sums are exact joins (``math.fsum``) of one partial sum per tile, and histograms hold whole
numbers, so that the result does not depend on the order in which tiles were made.
"""

from __future__ import annotations

import math
import mmap
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from groundglow.layers.encode_kernels import HISTOGRAM_BINS, HISTOGRAM_SHIFT

_SIGN = HISTOGRAM_BINS // 2


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


class Histogram:
    """Counts of float32 values by their leading bits.

    Most of the table's million bins are never touched: an anonymous memory map takes memory (and
    time for its zeros) only where it is, and only the stretch between the extremes is read.
    """

    def __init__(self) -> None:
        shape = (4, HISTOGRAM_BINS)
        zeros = mmap.mmap(-1, 4 * shape[0] * shape[1])
        self.bins: NDArray[np.int32] = np.frombuffer(zeros, np.int32).reshape(shape)

    def occupied(self, minimum: float, maximum: float) -> tuple[NDArray[np.int32], NDArray[np.int64]]:
        """Occupied bins and their counts, of values within a range."""
        stretches = []
        if minimum < 0.0:
            stretches.append((_bin_of(maximum) if maximum < 0.0 else _SIGN, _bin_of(minimum)))
        if maximum >= 0.0:
            stretches.append((_bin_of(minimum) if minimum >= 0.0 else 0, _bin_of(maximum)))
        keys, counts = [], []
        for first, last in stretches:
            summed = self.bins[:, first : last + 1].sum(axis=0, dtype=np.int64)
            places = np.flatnonzero(summed)
            keys.append((places + first).astype(np.int32))
            counts.append(summed[places])
        return np.concatenate(keys), np.concatenate(counts)


def bin_edges(bins: NDArray[np.int32]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Lower and upper edge of histogram bins.

    Parameters
    ----------
    bins : int32 array (n,)
        The leading 20 bits of the values within.

    Returns
    -------
    lower, upper : float64 arrays (n,)
        In the unit of the layer.
    """
    magnitude = bins & (_SIGN - 1)
    near = (magnitude << HISTOGRAM_SHIFT).view(np.float32).astype(np.float64)
    far = ((magnitude + 1) << HISTOGRAM_SHIFT).view(np.float32).astype(np.float64)
    negative = bins >= _SIGN
    return np.where(negative, -far, near), np.where(negative, -near, far)


def _bin_of(value: float) -> int:
    """The bin a float32 falls into."""
    return int(np.float32(value).view(np.uint32) >> HISTOGRAM_SHIFT)


def _quantiles(
    histogram: dict[int, int], shares: tuple[float, ...], minimum: float, maximum: float
) -> tuple[float, ...]:
    """Quantiles of a histogram, linear within a bin and never outside the range of the values."""
    lower, upper = bin_edges(np.array(list(histogram), dtype=np.int32))
    order = np.argsort(lower)
    lower, upper = lower[order], upper[order]
    counts = np.array(list(histogram.values()), dtype=np.int64)[order]
    reached = np.cumsum(counts)
    found = []
    for share in shares:
        position = share * float(reached[-1])
        place = int(np.searchsorted(reached, position))
        within = (position - float(reached[place] - counts[place])) / float(counts[place])
        value = float(lower[place] + within * (upper[place] - lower[place]))
        found.append(min(max(value, minimum), maximum))
    return tuple(found)
