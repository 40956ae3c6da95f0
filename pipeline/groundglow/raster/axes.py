"""Resampling between grids whose axes are parallel: exact area average, bilinear, majority.

Every target pixel carries, along each axis, the first source pixel it needs and that pixel's and
its neighbours' weights. Weights come from absolute positions, and each target pixel adds its own
source pixels in their order, so a value does not depend on the block in which it is computed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.kernels import kernel
from groundglow.raster.relation import POSITION_STEP, Axis

# A pixel has a value where at least this share of its area (or weight) has one.
LEAST_SHARE = 0.5

Integers = NDArray[np.int64]
Float = NDArray[np.float64]


@dataclass(frozen=True)
class AxisWeights:
    """What each target row (or column) takes from the source.

    Attributes
    ----------
    first : int array (n,)
        First source index.
    count : int array (n,)
        Number of source pixels; 0 where the target lies outside.
    weight : array (n, most)
        Weights of those pixels, in source pixels of area or summing to one.
    total : array (n,)
        Weight that the pixel would carry if all of it lay inside and had a value.
    """

    first: Integers
    count: Integers
    weight: Float
    total: Float

    @property
    def span(self) -> tuple[int, int]:
        """First source index needed by any, and the one after the last; equal where none is."""
        used = self.count > 0
        if not used.any():
            return 0, 0
        return int(self.first[used].min()), int((self.first + self.count)[used].max())


def area_weights(axis: Axis, start: int, length: int) -> AxisWeights:
    """Lengths of source pixels covered by each target pixel.

    Parameters
    ----------
    axis : Axis
        Of the source.
    start, length : int
        First target row or column, and how many.
    """
    low, high = _edges(axis, start, length)
    first = np.clip(np.floor(low), 0, axis.size).astype(np.int64)
    last = np.clip(np.ceil(high), 0, axis.size).astype(np.int64)
    count = np.maximum(last - first, 0)
    index = first[:, np.newaxis] + np.arange(max(int(count.max(initial=0)), 1))
    inside = index < (first + count)[:, np.newaxis]
    covered = np.minimum(high[:, np.newaxis], index + 1) - np.maximum(low[:, np.newaxis], index)
    return AxisWeights(first, count, np.where(inside, covered, 0.0), high - low)


def linear_weights(axis: Axis, start: int, length: int) -> AxisWeights:
    """Two neighbours weighted by nearness; beyond the outermost centres the edge pixel alone."""
    low, high = _edges(axis, start, length)
    middle = 0.5 * (low + high)
    position = np.clip(middle - 0.5, 0.0, axis.size - 1.0)
    first = np.minimum(np.floor(position), max(axis.size - 2, 0)).astype(np.int64)
    fraction = position - first
    weight = np.stack([1.0 - fraction, fraction], axis=1)
    first = np.where(weight[:, 0] == 0.0, first + 1, first)
    single = (weight == 0.0).any(axis=1)
    weight[single] = (1.0, 0.0)
    count = np.where(single, 1, 2)
    count[(middle < 0.0) | (middle > axis.size)] = 0
    return AxisWeights(first, count, weight, np.ones(length))


def nearest_weights(axis: Axis, start: int, length: int) -> AxisWeights:
    """The source pixel that holds the target pixel's centre."""
    low, high = _edges(axis, start, length)
    middle = 0.5 * (low + high)
    first = np.clip(np.floor(middle), 0, axis.size - 1).astype(np.int64)
    count = ((middle >= 0.0) & (middle <= axis.size)).astype(np.int64)
    return AxisWeights(first, count, np.ones((length, 1)), np.ones(length))


def continuous_weights(axis: Axis, start: int, length: int) -> AxisWeights:
    """Area weights where the source is finer than the target, linear ones where it is not."""
    finer = abs(axis.step) > 1.0 + 1e-6
    return area_weights(axis, start, length) if finer else linear_weights(axis, start, length)


def class_weights(axis: Axis, start: int, length: int) -> AxisWeights:
    """Area weights where the source is finer than the target, the nearest pixel where it is not."""
    finer = abs(axis.step) > 1.0 + 1e-6
    return area_weights(axis, start, length) if finer else nearest_weights(axis, start, length)


def _edges(axis: Axis, start: int, length: int) -> tuple[Float, Float]:
    """Lower and upper source position of each target pixel."""
    index = np.arange(start, start + length + 1, dtype=np.float64)
    edge = np.round((axis.start + axis.step * index) / POSITION_STEP) * POSITION_STEP
    return np.minimum(edge[:-1], edge[1:]), np.maximum(edge[:-1], edge[1:])


@kernel(
    "void(float32[:, ::1], int64, int64, int64[::1], int64[::1], float64[:, ::1], float64[::1],"
    " int64[::1], int64[::1], float64[:, ::1], float64[::1], float64, float32[:, ::1], boolean[:, ::1])"
)
def weighted_mean(
    values: NDArray[np.float32],
    row_origin: int,
    column_origin: int,
    row_first: Integers,
    row_count: Integers,
    row_weight: Float,
    row_total: Float,
    column_first: Integers,
    column_count: Integers,
    column_weight: Float,
    column_total: Float,
    least_share: float,
    mean: NDArray[np.float32],
    mixed: NDArray[np.bool_],
) -> None:
    """Weighted mean of the source pixels that have a value; NaN where too few have.

    ``mixed`` marks means in which part of the pixel had no value.
    """
    for i in range(mean.shape[0]):
        for j in range(mean.shape[1]):
            weights = 0.0
            total = 0.0
            for k in range(row_count[i]):
                r = row_first[i] + k - row_origin
                for m in range(column_count[j]):
                    value = values[r, column_first[j] + m - column_origin]
                    if not np.isnan(value):
                        weight = row_weight[i, k] * column_weight[j, m]
                        weights += weight
                        total += weight * value
            whole = row_total[i] * column_total[j]
            mixed[i, j] = False
            if weights > 0.0 and weights >= least_share * whole * (1.0 - 1e-9):
                mean[i, j] = total / weights
                mixed[i, j] = weights < whole * (1.0 - 1e-9)
            else:
                mean[i, j] = np.nan


@kernel(
    "void(boolean[:, ::1], int64, int64, int64[::1], int64[::1], int64[::1], int64[::1], boolean[:, ::1])"
)
def any_within(
    marked: NDArray[np.bool_],
    row_origin: int,
    column_origin: int,
    row_first: Integers,
    row_count: Integers,
    column_first: Integers,
    column_count: Integers,
    found: NDArray[np.bool_],
) -> None:
    """Whether any source pixel of the footprint is marked."""
    for i in range(found.shape[0]):
        for j in range(found.shape[1]):
            hit = False
            for k in range(row_count[i]):
                r = row_first[i] + k - row_origin
                for m in range(column_count[j]):
                    hit = hit or marked[r, column_first[j] + m - column_origin]
            found[i, j] = hit


@kernel(
    "void(int64[:, ::1], boolean[:, ::1], int64, int64, int64[::1], int64[::1], float64[:, ::1],"
    " float64[::1], int64[::1], int64[::1], float64[:, ::1], float64[::1], float64,"
    " int64[:, ::1], boolean[:, ::1], boolean[:, ::1])"
)
def majority(
    codes: Integers,
    valid: NDArray[np.bool_],
    row_origin: int,
    column_origin: int,
    row_first: Integers,
    row_count: Integers,
    row_weight: Float,
    row_total: Float,
    column_first: Integers,
    column_count: Integers,
    column_weight: Float,
    column_total: Float,
    least_share: float,
    chosen: Integers,
    chosen_valid: NDArray[np.bool_],
    mixed: NDArray[np.bool_],
) -> None:
    """The code that covers most of the pixel, the smaller one where two cover the same."""
    most = 1
    for i in range(row_count.shape[0]):
        for j in range(column_count.shape[0]):
            most = max(most, row_count[i] * column_count[j])
    seen = np.empty(most, dtype=np.int64)
    share = np.empty(most, dtype=np.float64)
    for i in range(chosen.shape[0]):
        for j in range(chosen.shape[1]):
            number = 0
            weights = 0.0
            for k in range(row_count[i]):
                r = row_first[i] + k - row_origin
                for m in range(column_count[j]):
                    c = column_first[j] + m - column_origin
                    if not valid[r, c]:
                        continue
                    weight = row_weight[i, k] * column_weight[j, m]
                    weights += weight
                    at = 0
                    while at < number and seen[at] != codes[r, c]:
                        at += 1
                    if at == number:
                        seen[at] = codes[r, c]
                        share[at] = 0.0
                        number += 1
                    share[at] += weight
            whole = row_total[i] * column_total[j]
            chosen[i, j] = 0
            chosen_valid[i, j] = False
            mixed[i, j] = False
            if weights > 0.0 and weights >= least_share * whole * (1.0 - 1e-9):
                best = 0
                for at in range(1, number):
                    if share[at] > share[best] + 1e-9 or (
                        share[at] > share[best] - 1e-9 and seen[at] < seen[best]
                    ):
                        best = at
                chosen[i, j] = seen[best]
                chosen_valid[i, j] = True
                mixed[i, j] = number > 1 or weights < whole * (1.0 - 1e-9)
