"""Source positions of target pixels between reference systems, and sampling at them.

Positions are exact at the nodes of a mesh that is fixed to the target grid (not to the block) and
interpolated between them; the mesh is made so fine that the interpolation errs by less than a
hundredth of a source pixel.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from rasterio.errors import CRSError, RasterioError
from rasterio.warp import transform as transform_points

from groundglow.errors import InputError
from groundglow.kernels import kernel
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Block, apply
from groundglow.raster.relation import Otherwise, longitude_period

_STEPS = (64, 32, 16, 8, 4, 2, 1)
_POSITION_ERROR = 0.01  # source pixels
_MOST_SAMPLES = 64

Float = NDArray[np.float64]
Integers = NDArray[np.int64]


@dataclass(frozen=True)
class MeshPlan:
    """How positions are found between two grids.

    Attributes
    ----------
    step : int
        Distance of the mesh's nodes, in target pixels.
    samples : int
        Points along each side of a target pixel at which the source is sampled for an area
        average; 1 where the source is not finer than the target.
    period : float
        Source columns in a full turn of longitude; 0 where the source is not geographic.
    """

    step: int
    samples: int
    period: float


@lru_cache(maxsize=64)
def mesh_plan(between: Otherwise) -> MeshPlan:
    """The coarsest mesh that is exact enough, and the number of samples in a pixel."""
    period = longitude_period(between.source) or 0.0
    step = next((step for step in _STEPS if _mesh_error(between, step, period) < _POSITION_ERROR), 1)
    ratio = _size_ratio(between, period)
    samples = 1 if ratio <= 1.25 else int(min(_MOST_SAMPLES, max(4, np.ceil(2.0 * ratio))))
    return MeshPlan(step, samples, period)


def source_positions(between: Otherwise, columns: Float, rows: Float) -> tuple[Float, Float]:
    """Exact source column and row of points of the target grid, NaN where there is none.

    Parameters
    ----------
    between : Otherwise
        The two grids.
    columns, rows : arrays, same shape
        Target pixel coordinates; whole numbers are pixel corners.
    """
    target, source = between.target, between.source
    x, y = apply(target.transform, columns.ravel(), rows.ravel())
    if source.crs != target.crs:
        try:
            with gdal_environment():
                x, y = (np.asarray(part) for part in transform_points(target.crs, source.crs, x, y))
        except (RasterioError, CRSError) as error:
            raise InputError(
                f"no way is known between {target.crs.to_string()} and {source.crs.to_string()}"
            ) from error
    x = np.where(np.isfinite(x), x, np.nan)
    y = np.where(np.isfinite(y), y, np.nan)
    found_columns, found_rows = apply(~source.transform, x, y)
    return found_columns.reshape(columns.shape), found_rows.reshape(rows.shape)


def node_positions(between: Otherwise, block: Block, plan: MeshPlan) -> tuple[int, int, Float, Float]:
    """Positions at the mesh's nodes around a block.

    Returns
    -------
    first_row, first_column : int
        Number of the first node along each axis.
    columns, rows : arrays (nodes down, nodes across)
    """
    step = plan.step
    first_row, last_row = block.row // step, -(-(block.row + block.height) // step)
    first_column, last_column = block.column // step, -(-(block.column + block.width) // step)
    node_rows = np.arange(first_row, last_row + 1, dtype=np.float64) * step
    node_columns = np.arange(first_column, last_column + 1, dtype=np.float64) * step
    columns, rows = source_positions(
        between, *np.broadcast_arrays(node_columns[np.newaxis, :], node_rows[:, np.newaxis])
    )
    return first_row, first_column, np.ascontiguousarray(columns), np.ascontiguousarray(rows)


def _test_points(between: Otherwise) -> tuple[Float, Float]:
    """Points spread over the target, as column and row."""
    across = np.linspace(0.0, between.target.width, 7)
    down = np.linspace(0.0, between.target.height, 7)
    columns, rows = np.meshgrid(across, down)
    return columns.ravel(), rows.ravel()


def _mesh_error(between: Otherwise, step: int, period: float) -> float:
    """Largest error in the middle of mesh cells spread over the target, in source pixels."""
    columns, rows = _test_points(between)
    columns, rows = np.floor(columns / step) * step, np.floor(rows / step) * step
    corners = [source_positions(between, columns + a * step, rows + b * step) for a in (0, 1) for b in (0, 1)]
    exact = source_positions(between, columns + 0.5 * step, rows + 0.5 * step)
    worst = 0.0
    for axis in (0, 1):
        turn = period if axis == 0 else 0.0
        difference = np.mean([_unwrap(corner[axis] - exact[axis], turn) for corner in corners], axis=0)
        worst = max(worst, float(np.nanmax(np.abs(difference), initial=0.0)))
    return worst


def _size_ratio(between: Otherwise, period: float) -> float:
    """Source pixels along a target pixel: the largest over axes and places."""
    columns, rows = _test_points(between)
    here = source_positions(between, columns, rows)
    ratios = []
    for a, b in ((1.0, 0.0), (0.0, 1.0)):
        there = source_positions(between, columns + a, rows + b)
        ratios.append(np.hypot(_unwrap(there[0] - here[0], period), there[1] - here[1]))
    finite = np.concatenate(ratios)
    finite = finite[np.isfinite(finite)]
    return float(finite.max()) if finite.size else 1.0


def _unwrap(difference: Float, period: float) -> Float:
    """A difference of columns by the short way round."""
    return difference - period * np.round(difference / period) if period else difference


@kernel(
    "void(float64[:, ::1], float64[:, ::1], int64, int64, int64, int64, int64, int64, float64, float64,"
    " float64[:, ::1], float64[:, ::1])"
)
def sample_positions(
    node_columns: Float,
    node_rows: Float,
    first_node_row: int,
    first_node_column: int,
    step: int,
    first_row: int,
    first_column: int,
    samples: int,
    period: float,
    middle: float,
    columns: Float,
    rows: Float,
) -> None:
    """Source positions of ``samples`` x ``samples`` points within each target pixel of a block.

    With a period, columns come back within half a turn of ``middle``.
    """
    for i in range(rows.shape[0]):
        v = ((first_row * samples + i + 0.5) / samples) / step
        p = int(v)
        fv = v - p
        p -= first_node_row
        for j in range(rows.shape[1]):
            u = ((first_column * samples + j + 0.5) / samples) / step
            q = int(u)
            fu = u - q
            q -= first_node_column
            a = node_columns[p, q]
            b = node_columns[p, q + 1]
            c = node_columns[p + 1, q]
            d = node_columns[p + 1, q + 1]
            if period > 0.0:
                b -= period * np.rint((b - a) / period)
                c -= period * np.rint((c - a) / period)
                d -= period * np.rint((d - a) / period)
            column = (1.0 - fv) * ((1.0 - fu) * a + fu * b) + fv * ((1.0 - fu) * c + fu * d)
            if period > 0.0:
                column -= period * np.rint((column - middle) / period)
            columns[i, j] = column
            rows[i, j] = (1.0 - fv) * ((1.0 - fu) * node_rows[p, q] + fu * node_rows[p, q + 1]) + fv * (
                (1.0 - fu) * node_rows[p + 1, q] + fu * node_rows[p + 1, q + 1]
            )


@kernel(
    "void(float32[:, ::1], int64, int64, int64, int64, float64[:, ::1], float64[:, ::1], float64,"
    " float32[:, ::1], boolean[:, ::1])"
)
def interpolate(
    values: NDArray[np.float32],
    row_origin: int,
    column_origin: int,
    height: int,
    width: int,
    columns: Float,
    rows: Float,
    least_share: float,
    result: NDArray[np.float32],
    mixed: NDArray[np.bool_],
) -> None:
    """Bilinear value at each position, of the neighbours that have one; NaN where too few have."""
    for i in range(result.shape[0]):
        for j in range(result.shape[1]):
            result[i, j] = np.nan
            mixed[i, j] = False
            x = columns[i, j]
            y = rows[i, j]
            if not (x >= 0.0 and x <= width and y >= 0.0 and y <= height):
                continue
            x = min(max(x - 0.5, 0.0), width - 1.0)
            y = min(max(y - 0.5, 0.0), height - 1.0)
            left = min(int(x), max(width - 2, 0))
            top = min(int(y), max(height - 2, 0))
            fx = x - left
            fy = y - top
            weights = 0.0
            total = 0.0
            for k in range(2):
                wy = fy if k == 1 else 1.0 - fy
                for m in range(2):
                    weight = wy * (fx if m == 1 else 1.0 - fx)
                    if weight == 0.0:
                        continue
                    value = values[top + k - row_origin, left + m - column_origin]
                    if not np.isnan(value):
                        weights += weight
                        total += weight * value
            if weights > 0.0 and weights >= least_share * (1.0 - 1e-9):
                result[i, j] = total / weights
                mixed[i, j] = weights < 1.0 - 1e-9


@kernel("void(int64, int64, float64[:, ::1], float64[:, ::1], int64[:, ::1], int64[:, ::1], boolean[:, ::1])")
def nearest_index(
    height: int,
    width: int,
    columns: Float,
    rows: Float,
    row_index: Integers,
    column_index: Integers,
    inside: NDArray[np.bool_],
) -> None:
    """The source pixel that holds each position; index 0 and False where none does."""
    for i in range(inside.shape[0]):
        for j in range(inside.shape[1]):
            x = columns[i, j]
            y = rows[i, j]
            if x >= 0.0 and x <= width and y >= 0.0 and y <= height:
                inside[i, j] = True
                column_index[i, j] = min(int(x), width - 1)
                row_index[i, j] = min(int(y), height - 1)
            else:
                inside[i, j] = False
                column_index[i, j] = 0
                row_index[i, j] = 0
