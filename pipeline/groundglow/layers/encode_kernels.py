"""Compiled loops of the layer encoder: rounding, statistics, overviews, predictors.

Every kernel works on one tile. Sums run down the columns in separate accumulators that are joined
from left to right, so that the loop vectorises and the result depends on the tile alone.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from groundglow.kernels import kernel

if TYPE_CHECKING:
    from numpy.typing import NDArray

_EXPONENT = np.uint32(0x7F800000)
_SIGN = np.uint32(0x80000000)
_NAN = np.uint32(0x7FC00000)
_ONE = np.uint32(1)
_BYTE = np.uint32(255)

# The histogram's bins are the leading 20 bits of a float32 (sign, exponent, 11 of the mantissa):
# at most 0.05 % of the value wide, 0.125 K at 300 K.
HISTOGRAM_SHIFT = 12
HISTOGRAM_BINS = 1 << 20


# The pixels may be read-only: blocks that come from elsewhere often are.
@kernel("void(Array(uint32, 2, 'C', True), UniTuple(int64, 2), UniTuple(int64, 2), uint32, uint32[:, ::1])")
def round_tile(
    pixels: NDArray[np.uint32],
    corner: tuple[int, int],
    shape: tuple[int, int],
    dropped_bits: int,
    tile: NDArray[np.uint32],
) -> None:
    """Copy a window of float32 bits into a tile, the mantissa rounded to nearest, ties to even.

    Every NaN becomes the one quiet NaN and so does infinity: neither is a value. A number that
    would round up to infinity is cut off instead; minus zero becomes zero. Outside the window the
    tile becomes NaN.
    """
    row, column = corner
    height, width = shape
    drop = np.uint32(dropped_bits)
    keep = np.uint32(~((_ONE << drop) - _ONE))
    odd_bit = _ONE if drop > 0 else np.uint32(0)
    half = np.uint32((_ONE << (drop - _ONE)) - _ONE) if drop > 0 else np.uint32(0)
    for i in range(height):
        source = pixels[row + i, column : column + width]
        target = tile[i]
        for j in range(width):
            bits = source[j]
            rounded = np.uint32(np.uint32(bits + half + ((bits >> drop) & odd_bit)) & keep)
            if rounded & _EXPONENT == _EXPONENT:
                rounded = np.uint32(bits & keep)
            if rounded == _SIGN:
                rounded = np.uint32(0)
            if bits & _EXPONENT == _EXPONENT:
                rounded = _NAN
            target[j] = rounded
        target[width:] = _NAN
    tile[height:] = _NAN


@kernel(inline=True)
def _there(a: np.float32) -> bool:
    """Whether it is a number."""
    return bool(a == a)  # noqa: PLR0124 (only NaN differs from itself; this form vectorises)


@kernel(inline=True)
def _lower(a: np.float32, b: np.float32) -> np.float32:
    """The lower of two numbers, or the one that is a number."""
    return b if (b <= a) | (not _there(a)) else a


@kernel(inline=True)
def _or_zero(a: np.float32) -> np.float64:
    """A float32 in double precision; zero for NaN."""
    return np.float64(a) if _there(a) else np.float64(0.0)


@kernel("void(float32[:, ::1], UniTuple(int64, 2), float64[::1])")
def summarise_tile(tile: NDArray[np.float32], shape: tuple[int, int], summary: NDArray[np.float64]) -> None:
    """Count, minimum, maximum, sum and sum of squares of the numbers in a tile's window."""
    height, width = shape
    counts = np.zeros(width, np.int32)
    lowest = np.full(width, np.inf, np.float32)
    highest = np.full(width, -np.inf, np.float32)
    sums = np.zeros(width)
    squares = np.zeros(width)
    whole = height // 4 * 4
    for i in range(0, whole, 4):
        for j in range(width):
            a, b, c, d = tile[i, j], tile[i + 1, j], tile[i + 2, j], tile[i + 3, j]
            counts[j] += np.int32(_there(a)) + np.int32(_there(b)) + np.int32(_there(c)) + np.int32(_there(d))
            lowest[j] = _lower(lowest[j], _lower(_lower(a, b), _lower(c, d)))
            highest[j] = -_lower(-highest[j], _lower(_lower(-a, -b), _lower(-c, -d)))
            a8, b8, c8, d8 = _or_zero(a), _or_zero(b), _or_zero(c), _or_zero(d)
            sums[j] += (a8 + b8) + (c8 + d8)
            squares[j] += (a8 * a8 + b8 * b8) + (c8 * c8 + d8 * d8)
    for i in range(whole, height):
        for j in range(width):
            a = tile[i, j]
            counts[j] += np.int32(_there(a))
            lowest[j] = _lower(lowest[j], a)
            highest[j] = -_lower(-highest[j], -a)
            a8 = _or_zero(a)
            sums[j] += a8
            squares[j] += a8 * a8
    summary[0] = counts.sum()
    summary[1] = lowest.min()
    summary[2] = highest.max()
    total = 0.0
    total_of_squares = 0.0
    for j in range(width):
        total += sums[j]
        total_of_squares += squares[j]
    summary[3] = total
    summary[4] = total_of_squares


@kernel("void(uint32[:, ::1], UniTuple(int64, 2), int32[:, ::1])")
def count_magnitudes(tile: NDArray[np.uint32], shape: tuple[int, int], bins: NDArray[np.int32]) -> None:
    """Count a tile's pixels in a histogram over the leading bits of a float32, NaN in its own bin.

    Four rows of bins take turns, because neighbouring pixels often fall into the same bin and a
    processor waits for its own last write there.
    """
    height, width = shape
    for i in range(height):
        line = tile[i]
        for j in range(width):
            bins[j & 3, line[j] >> np.uint32(HISTOGRAM_SHIFT)] += np.int32(1)


@kernel("void(uint16[:, ::1], UniTuple(int64, 2), int64[::1])")
def count_values(tile: NDArray[np.uint16], shape: tuple[int, int], counts: NDArray[np.int64]) -> None:
    """Add how often each value occurs in a tile's window to a table of 65,536 counts."""
    height, width = shape
    for i in range(height):
        start = 0
        for j in range(1, width):
            if tile[i, j] != tile[i, start]:
                counts[tile[i, start]] += j - start
                start = j
        counts[tile[i, start]] += width - start


@kernel(inline=True)
def _mean_of_four(a: np.float32, b: np.float32, c: np.float32, d: np.float32) -> np.float32:
    """Mean of those of four float32 that are numbers, summed as (a + b) + (c + d)."""
    zero = np.float32(0.0)
    count = np.float32(np.int32(_there(a)) + np.int32(_there(b)) + np.int32(_there(c)) + np.int32(_there(d)))
    a0 = a if _there(a) else zero
    b0 = b if _there(b) else zero
    c0 = c if _there(c) else zero
    d0 = d if _there(d) else zero
    return ((a0 + b0) + (c0 + d0)) / count  # 0 / 0 is NaN: nothing there


@kernel("void(float32[:, ::1], UniTuple(int64, 2), float32[:, ::1], UniTuple(int64, 2))")
def halve_by_mean(
    tile: NDArray[np.float32],
    shape: tuple[int, int],
    target: NDArray[np.float32],
    corner: tuple[int, int],
) -> None:
    """Write the NaN-aware means of 2 x 2 pixels of a window into ``target`` from ``corner`` on."""
    height, width = shape
    row, column = corner
    nothing = np.float32(np.nan)
    for i in range(height // 2):
        upper = tile[2 * i]
        lower = tile[2 * i + 1]
        line = target[row + i, column : column + (width + 1) // 2]
        for j in range(width // 2):
            line[j] = _mean_of_four(upper[2 * j], upper[2 * j + 1], lower[2 * j], lower[2 * j + 1])
        if width % 2:
            line[width // 2] = _mean_of_four(upper[width - 1], nothing, lower[width - 1], nothing)
    if height % 2:
        upper = tile[height - 1]
        line = target[row + height // 2, column : column + (width + 1) // 2]
        for j in range(width // 2):
            line[j] = _mean_of_four(upper[2 * j], upper[2 * j + 1], nothing, nothing)
        if width % 2:
            line[width // 2] = upper[width - 1]


@kernel("void(uint16[:, ::1], UniTuple(int64, 2), uint16[:, ::1], UniTuple(int64, 2))")
def halve_by_majority(
    tile: NDArray[np.uint16],
    shape: tuple[int, int],
    target: NDArray[np.uint16],
    corner: tuple[int, int],
) -> None:
    """Write the most frequent value of 2 x 2 pixels; of equally frequent ones the first in reading order.

    At an odd edge only two pixels are there (or one), and the first of them always wins.
    """
    height, width = shape
    row, column = corner
    for i in range((height + 1) // 2):
        upper = tile[2 * i]
        lower = tile[min(2 * i + 1, height - 1)]
        line = target[row + i, column : column + (width + 1) // 2]
        for j in range(width // 2):
            a = upper[2 * j]
            b = upper[2 * j + 1]
            c = lower[2 * j]
            d = lower[2 * j + 1]
            first_alone = (a != b) & (a != c) & (a != d)
            pair = b if (b == c) | (b == d) else (c if c == d else a)
            line[j] = pair if first_alone else a
        if width % 2:
            line[width // 2] = upper[width - 1]


@kernel("void(uint32[:, ::1], uint8[:, ::1])")
def predict_float32(tile: NDArray[np.uint32], predicted: NDArray[np.uint8]) -> None:
    """TIFF's floating-point predictor (3): byte planes of each row, most significant first, differenced."""
    width = tile.shape[1]
    for i in range(tile.shape[0]):
        line = tile[i]
        before = np.uint32(0)
        for plane in range(4):
            shift = np.uint32(24 - 8 * plane)
            target = predicted[i, plane * width : (plane + 1) * width]
            target[0] = np.uint8(((line[0] >> shift) - before) & _BYTE)
            for j in range(1, width):
                target[j] = np.uint8(((line[j] >> shift) - (line[j - 1] >> shift)) & _BYTE)
            before = line[width - 1] >> shift


@kernel("void(uint16[:, ::1], uint16[:, ::1])")
def predict_uint16(tile: NDArray[np.uint16], predicted: NDArray[np.uint16]) -> None:
    """TIFF's horizontal predictor (2): each pixel less its left neighbour, modulo 65,536."""
    for i in range(tile.shape[0]):
        predicted[i, 0] = tile[i, 0]
        for j in range(1, tile.shape[1]):
            predicted[i, j] = tile[i, j] - tile[i, j - 1]
