"""Emissivity brought to what the sensor itself can resolve.

A thermal pixel is often delivered on a finer grid than the sensor's own footprint, and emissivity on a finer
one still. Dividing a blurred radiance by a sharp emissivity draws edges that are not on the ground, so the
emissivity is averaged over the square of the native footprint around each pixel. The average at a pixel looks
only at its own neighbourhood, in a fixed order, so it does not depend on how the raster is cut into blocks.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import fields

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import DomainError
from groundglow.kernels import kernel
from groundglow.retrieval.chain import EmissivityFields

Float = NDArray[np.float64]
Pixels = NDArray[np.float32]
Known = NDArray[np.bool_]


def footprint_weights(native_footprint: float, pixel_size: float) -> Float:
    """Weights of the pixels along one axis, by how much of each lies within the footprint.

    Parameters
    ----------
    native_footprint : float
        Edge of the sensor's own pixel. [m]
    pixel_size : float
        Edge of a delivered pixel along this axis. [m]

    Returns
    -------
    array (2 halo + 1,)
        Symmetric, 0 to 1 of a pixel; a single 1 where the pixel is not smaller than the footprint.

    Raises
    ------
    DomainError
        If a size is not a positive number, or the footprint spans more than 1,001 pixels.
    """
    for name, size in (("native footprint", native_footprint), ("pixel size", pixel_size)):
        if not (math.isfinite(size) and size > 0.0):
            raise DomainError(f"the {name} must be a positive number of metres, not {size}")
    half = 0.5 * max(native_footprint / pixel_size, 1.0)
    if half > 500.5:
        raise DomainError(
            f"the footprint of {native_footprint:g} m spans more than 1,001 pixels of {pixel_size:g} m",
            remedy="Check the units of the footprint and of the grid, or choose a coarser grid",
        )
    halo = halo_width(native_footprint, pixel_size)
    reach = np.abs(np.arange(-halo, halo + 1, dtype=np.float64))
    return np.asarray(np.clip(half + 0.5 - reach, 0.0, 1.0))


def halo_width(native_footprint: float, pixel_size: float) -> int:
    """Pixels beyond a block that its smoothing looks at, along one axis.

    Parameters
    ----------
    native_footprint : float
        Edge of the sensor's own pixel, above 0. [m]
    pixel_size : float
        Edge of a delivered pixel, above 0. [m]

    Returns
    -------
    int
        0 where the pixel is not smaller than the footprint.
    """
    half = 0.5 * max(native_footprint / pixel_size, 1.0)
    # A last pixel that would count less than a millionth is a rounding of the sizes.
    return max(0, math.ceil(half - 0.5 - 1e-6))


def smooth(values: Pixels, known: Known, rows: Float, columns: Float) -> Pixels:
    """Average over the footprint around each pixel: the readable statement.

    Parameters
    ----------
    values : float32 array (rows + 2 halo, columns + 2 halo)
        A block with its halo.
    known : bool array, same shape
        Where there is a value; False beyond the raster's edge.
    rows, columns : arrays
        Weights along each axis, see :func:`footprint_weights`.

    Returns
    -------
    float32 array (rows, columns)
        Weighted mean of the values that are there; NaN where the pixel itself has none.
    """
    across, down = columns.size // 2, rows.size // 2
    height, width = values.shape[0] - 2 * down, values.shape[1] - 2 * across
    filled = np.where(known, values, np.float32(0.0)).astype(np.float64)
    counted = known.astype(np.float64)

    def along(array: Float, weights: Float, size: int) -> Float:
        """Sum over the last axis: the middle, then pair by pair outwards."""
        middle = weights.size // 2
        total = weights[middle] * array[:, middle : middle + size]
        for step in range(1, middle + 1):
            left = array[:, middle - step : middle - step + size]
            right = array[:, middle + step : middle + step + size]
            total = total + weights[middle + step] * (left + right)
        return np.asarray(total)

    total, weight = (along(along(array, columns, width).T, rows, height).T for array in (filled, counted))
    here = known[down : down + height, across : across + width]
    return np.where(here, total / np.where(here, weight, 1.0), np.nan).astype(np.float32)


@kernel("void(float64[:, ::1], float64[::1], float64[::1], float64[:, ::1], float64[:, ::1])")
def _sum_over_footprint(values: Float, rows: Float, columns: Float, total: Float, result: Float) -> None:
    """Weighted sums along the rows, into ``total``, then down the columns: same order as the statement."""
    width = result.shape[1]
    across, down = columns.size // 2, rows.size // 2
    # Slices, so that the innermost loops run over plain vectors.
    for i in range(values.shape[0]):
        sums = total[i]
        share = columns[across]
        middle = values[i, across : across + width]
        for j in range(width):
            sums[j] = share * middle[j]
        for step in range(1, across + 1):
            share = columns[across + step]
            left = values[i, across - step : across - step + width]
            right = values[i, across + step : across + step + width]
            for j in range(width):
                sums[j] += share * (left[j] + right[j])
    for i in range(result.shape[0]):
        sums = result[i]
        share = rows[down]
        middle = total[i + down]
        for j in range(width):
            sums[j] = share * middle[j]
        for step in range(1, down + 1):
            share = rows[down + step]
            above = total[i + down - step]
            below = total[i + down + step]
            for j in range(width):
                sums[j] += share * (above[j] + below[j])


@kernel("void(float32[:, ::1], boolean[:, ::1], float64[:, ::1])")
def _fill(values: Pixels, known: Known, filled: Float) -> None:
    """Zero where there is no value."""
    for i in range(values.shape[0]):
        for j in range(values.shape[1]):
            filled[i, j] = np.float64(values[i, j]) if known[i, j] else 0.0


@kernel("void(float64[:, ::1], float64[:, ::1], boolean[:, ::1], int64, int64, float32[:, ::1])")
def _divide(total: Float, weight: Float, known: Known, down: int, across: int, result: Pixels) -> None:
    """Mean where the pixel itself has a value."""
    width = result.shape[1]
    for i in range(result.shape[0]):
        here = known[i + down, across : across + width]
        for j in range(width):
            result[i, j] = np.float32(total[i, j] / weight[i, j]) if here[j] else np.float32(np.nan)


def smooth_stack(stack: Sequence[Pixels], rows: Float, columns: Float) -> list[Pixels]:
    """Several arrays that are known at the same pixels, each averaged as :func:`smooth` does, compiled.

    Parameters
    ----------
    stack : sequence of float32 arrays (rows + 2 halo, columns + 2 halo)
        NaN where the first one has none means no value in all.
    rows, columns : arrays
        Weights along each axis, see :func:`footprint_weights`.

    Returns
    -------
    list of float32 arrays (rows, columns)
    """
    known = ~np.isnan(np.ascontiguousarray(stack[0]))
    down, across = rows.size // 2, columns.size // 2
    shape = known.shape[0] - 2 * down, known.shape[1] - 2 * across
    filled = known.astype(np.float64)
    along = np.empty((known.shape[0], shape[1]))
    weight, total = np.empty(shape), np.empty(shape)
    _sum_over_footprint(filled, rows, columns, along, weight)
    results = []
    for values in stack:
        if values.strides == (0, 0):
            # One number everywhere stays that number.
            constant = np.where(
                known[down : down + shape[0], across : across + shape[1]], values[0, 0], np.nan
            )
            results.append(constant.astype(np.float32))
            continue
        _fill(np.ascontiguousarray(values), known, filled)
        _sum_over_footprint(filled, rows, columns, along, total)
        result = np.empty(shape, dtype=np.float32)
        _divide(total, weight, known, down, across, result)
        results.append(result)
    return results


def smooth_fields(block: EmissivityFields, rows: Float, columns: Float) -> EmissivityFields:
    """All five arrays of a block averaged over the footprint; the flags stay those of the pixel itself.

    Parameters
    ----------
    block : EmissivityFields
        Arrays (rows + 2 halo, columns + 2 halo); NaN beyond the raster's edge.
    rows, columns : arrays
        Weights along each axis, see :func:`footprint_weights`.

    Returns
    -------
    EmissivityFields
        Arrays (rows, columns).

    Raises
    ------
    DomainError
        If the block is not larger than its halo.
    """
    down, across = rows.size // 2, columns.size // 2
    height, width = block.band.shape[0] - 2 * down, block.band.shape[1] - 2 * across
    if height <= 0 or width <= 0:
        raise DomainError(
            f"a block of {block.band.shape} pixels is not larger than its halo of {down}, {across}"
        )
    stack = [getattr(block, field.name) for field in fields(block) if field.name != "flags"]
    band, spread, wide, shared, own = smooth_stack(stack, rows, columns)
    flags = np.ascontiguousarray(block.flags[down : down + height, across : across + width])
    return EmissivityFields(band, spread, wide, shared, own, flags)
