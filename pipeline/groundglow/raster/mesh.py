"""Source positions of target pixels between reference systems.

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
    samples = 1 if ratio <= 1.25 else int(min(_MOST_SAMPLES, max(4, np.ceil(1.5 * ratio))))
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


@dataclass(frozen=True)
class Mesh:
    """The mesh around one block, as the kernels take it.

    Attributes
    ----------
    nodes : array (2, nodes down, nodes across)
        Source column and row at the nodes.
    places : int array
        In the order of the constants in :mod:`groundglow.raster.mesh_kernels`.
    turn : array (2,)
        Source columns in a turn of longitude (0 where there is none), and the middle of the source.
    """

    nodes: Float
    places: Integers
    turn: Float


def mesh_of_block(between: Otherwise, block: Block, samples: int) -> Mesh:
    """The mesh around a block.

    Parameters
    ----------
    between : Otherwise
        The two grids.
    block : Block
        Of the target grid.
    samples : int
        Points along each side of a target pixel.
    """
    plan = mesh_plan(between)
    step, (height, width) = plan.step, between.source.shape
    first_row, last_row = block.row // step, -(-(block.row + block.height) // step)
    first_column, last_column = block.column // step, -(-(block.column + block.width) // step)
    node_rows = np.arange(first_row, last_row + 1, dtype=np.float64) * step
    node_columns = np.arange(first_column, last_column + 1, dtype=np.float64) * step
    positions = source_positions(
        between, *np.broadcast_arrays(node_columns[np.newaxis, :], node_rows[:, np.newaxis])
    )
    places = [first_row, first_column, step, block.row, block.column, samples, height, width]
    return Mesh(np.stack(positions), np.array(places, dtype=np.int64), np.array([plan.period, 0.5 * width]))


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
