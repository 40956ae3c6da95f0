"""The compiled regridding in readable NumPy: what the kernels compute, without their haste."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from groundglow.raster.axes import LEAST_SHARE, AxisWeights
from groundglow.raster.mesh import Mesh
from groundglow.raster.mesh_kernels import (
    FIRST_COLUMN,
    FIRST_NODE_COLUMN,
    FIRST_NODE_ROW,
    FIRST_ROW,
    HEIGHT,
    SAMPLES,
    STEP,
    WIDTH,
)

Float = NDArray[np.float64]
Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]
Pixels = NDArray[np.float32]


def dense(weights: AxisWeights, size: int) -> Float:
    """Weights along one axis as a matrix (target, source)."""
    matrix = np.zeros((weights.first.size, size))
    for i, (first, count) in enumerate(zip(weights.first, weights.count, strict=True)):
        matrix[i, first : first + count] = weights.weight[i, :count]
    return matrix


def weighted_mean(values: Pixels, rows: AxisWeights, columns: AxisWeights) -> tuple[Pixels, Mask]:
    """Mean over each footprint of the pixels that have a value, and where a part has none.

    Parameters
    ----------
    values : float32 array (rows, columns)
        The whole source.
    rows, columns : AxisWeights
        Of the target.

    Returns
    -------
    mean : float32 array
        NaN where less than half of the footprint has a value.
    mixed : bool array
    """
    down, across = dense(rows, values.shape[0]), dense(columns, values.shape[1])
    there = np.isfinite(values)
    total = down @ np.where(there, values, 0.0).astype(np.float64) @ across.T
    weight = down @ there.astype(np.float64) @ across.T
    whole = rows.total[:, np.newaxis] * columns.total
    enough = (weight > 0.0) & (weight >= LEAST_SHARE * whole * (1.0 - 1e-9))
    mean = np.divide(total, weight, out=np.full(total.shape, np.nan), where=enough)
    return mean.astype(np.float32), enough & (weight < whole * (1.0 - 1e-9))


def majority(codes: Integers, valid: Mask, rows: AxisWeights, columns: AxisWeights) -> tuple[Integers, Mask]:
    """The code with the largest share of each footprint, the smaller one of two that share alike.

    Returns
    -------
    chosen : int array
        0 where less than half of the footprint has a code.
    found : bool array
    """
    down, across = dense(rows, codes.shape[0]), dense(columns, codes.shape[1])
    known = np.unique(codes[valid])
    shares = np.array([down @ (valid & (codes == code)).astype(np.float64) @ across.T for code in known])
    whole = rows.total[:, np.newaxis] * columns.total
    weight = shares.sum(axis=0)
    found = (weight > 0.0) & (weight >= LEAST_SHARE * whole * (1.0 - 1e-9))
    best = np.argmax(np.round(shares, 9), axis=0)
    return np.where(found, known[best], 0), found


def sample_positions(mesh: Mesh, down: int, across: int) -> tuple[Float, Float]:
    """Source column and row of every sample of a block, by bilinear interpolation in its mesh."""
    at = mesh.places
    v = ((at[FIRST_ROW] * at[SAMPLES] + np.arange(down) + 0.5) / at[SAMPLES]) / at[STEP]
    u = ((at[FIRST_COLUMN] * at[SAMPLES] + np.arange(across) + 0.5) / at[SAMPLES]) / at[STEP]
    p, q = v.astype(np.int64), u.astype(np.int64)
    fv, fu = (v - p)[:, np.newaxis], (u - q)[np.newaxis, :]
    p, q = (p - at[FIRST_NODE_ROW])[:, np.newaxis], (q - at[FIRST_NODE_COLUMN])[np.newaxis, :]
    period, middle = mesh.turn
    found = []
    for axis, turn in ((0, period), (1, 0.0)):
        a, b = mesh.nodes[axis, p, q], mesh.nodes[axis, p, q + 1]
        c, d = mesh.nodes[axis, p + 1, q], mesh.nodes[axis, p + 1, q + 1]
        if turn > 0.0:
            b, c, d = (corner - turn * np.rint((corner - a) / turn) for corner in (b, c, d))
        place = (1.0 - fv) * ((1.0 - fu) * a + fu * b) + fv * ((1.0 - fu) * c + fu * d)
        found.append(place - turn * np.rint((place - middle) / turn) if turn > 0.0 else place)
    return found[0], found[1]


def interpolate(values: Pixels, mesh: Mesh, down: int, across: int) -> Pixels:
    """Bilinear values of the whole source at every sample; NaN outside and where too few have a value."""
    height, width = int(mesh.places[HEIGHT]), int(mesh.places[WIDTH])
    x, y = sample_positions(mesh, down, across)
    inside = (x >= 0.0) & (x <= width) & (y >= 0.0) & (y <= height)
    x = np.clip(np.where(inside, x, 0.5) - 0.5, 0.0, width - 1.0)
    y = np.clip(np.where(inside, y, 0.5) - 0.5, 0.0, height - 1.0)
    left, top = np.minimum(x.astype(np.int64), width - 2), np.minimum(y.astype(np.int64), height - 2)
    total, weight = np.zeros(x.shape), np.zeros(x.shape)
    for k in (0, 1):
        for m in (0, 1):
            share = (y - top if k else 1.0 - (y - top)) * (x - left if m else 1.0 - (x - left))
            pixel = values[top + k, left + m]
            share = np.where(np.isnan(pixel), 0.0, share)
            weight += share
            total += share * np.where(np.isnan(pixel), 0.0, pixel)
    enough = inside & (weight >= LEAST_SHARE * (1.0 - 1e-9))
    mean: Float = np.divide(total, weight, out=np.full(x.shape, np.nan), where=enough)
    return mean.astype(np.float32)
