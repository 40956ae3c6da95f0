"""What each target pixel of a block needs from the source, whichever way the two grids lie."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray
from rasterio.windows import Window

from groundglow.raster import axes, mesh
from groundglow.raster.axes import AxisWeights
from groundglow.raster.grid import Block
from groundglow.raster.relation import AlongAxes, Otherwise

Float = NDArray[np.float64]
Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]
Pixels = NDArray[np.float32]
Scalar = TypeVar("Scalar", bound=np.generic)

# The most source pixels, or samples of them, that are held at a time.
MOST_PIXELS = 1 << 23

_WEIGHTS = {
    "continuous": axes.continuous_weights,
    "majority": axes.class_weights,
    "nearest": axes.nearest_weights,
}


@dataclass(frozen=True)
class Positions:
    """Where samples of a block lie in the source.

    Attributes
    ----------
    columns, rows : arrays (height * samples, width * samples)
        Source pixel coordinates, NaN where there is none.
    row_index, column_index : int arrays, same shape
        The pixels that hold them.
    inside : bool array, same shape
    """

    columns: Float
    rows: Float
    row_index: Integers
    column_index: Integers
    inside: Mask


@dataclass(frozen=True)
class Footprint:
    """Weights of the source pixels that make up the target pixels of one piece of a block.

    Attributes
    ----------
    piece : Block
        In the target grid.
    window : rasterio Window
        What must be read of the source.
    source_shape : tuple of int
    rows, columns : AxisWeights
        Over source pixels, or over samples where there are positions.
    positions : Positions or None
        Where the axes of the two grids are not parallel.
    linear : bool
        Interpolate at the positions rather than take the pixels that hold them.
    """

    piece: Block
    window: Window
    source_shape: tuple[int, int]
    rows: AxisWeights
    columns: AxisWeights
    positions: Positions | None = None
    linear: bool = False

    def mean(self, values: Pixels) -> tuple[Pixels, Mask]:
        """Weighted means of the values read in the window, and where a part had no value."""
        shape = (self.piece.height, self.piece.width)
        result, mixed = np.empty(shape, dtype=np.float32), np.empty(shape, dtype=np.bool_)
        top, left = self.window.row_off, self.window.col_off
        if self.positions is not None and self.linear:
            at = self.positions
            mesh.interpolate(
                values, top, left, *self.source_shape, at.columns, at.rows, axes.LEAST_SHARE, result, mixed
            )
            return result, mixed
        if self.positions is not None:
            values = self._gather(values, np.float32(np.nan))
            top = left = 0
        axes.weighted_mean(
            values,
            top,
            left,
            *_unpacked(self.rows),
            *_unpacked(self.columns),
            axes.LEAST_SHARE,
            result,
            mixed,
        )
        return result, mixed

    def any(self, marked: Mask) -> Mask:
        """Whether any source pixel of a target pixel is marked."""
        if self.positions is not None and self.linear:
            return np.asarray(self.mean(marked.astype(np.float32))[0] > 0.0)
        top, left = self.window.row_off, self.window.col_off
        if self.positions is not None:
            marked = self._gather(marked, np.False_)
            top = left = 0
        found = np.empty((self.piece.height, self.piece.width), dtype=np.bool_)
        axes.any_within(
            np.ascontiguousarray(marked), top, left, self.rows.first, self.rows.count,
            self.columns.first, self.columns.count, found,
        )  # fmt: skip
        return found

    def majority(self, codes: Integers, valid: Mask) -> tuple[Integers, Mask, Mask]:
        """The code that covers most of each pixel, whether there is one, and whether several meet."""
        top, left = self.window.row_off, self.window.col_off
        if self.positions is not None:
            codes, valid = self._gather(codes, np.int64(0)), self._gather(valid, np.False_)
            top = left = 0
        shape = (self.piece.height, self.piece.width)
        chosen = np.empty(shape, dtype=np.int64)
        found, mixed = np.empty(shape, dtype=np.bool_), np.empty(shape, dtype=np.bool_)
        axes.majority(
            codes, valid, top, left, *_unpacked(self.rows), *_unpacked(self.columns), axes.LEAST_SHARE,
            chosen, found, mixed,
        )  # fmt: skip
        return chosen, found, mixed

    def _gather(self, pixels: NDArray[Scalar], outside: Scalar) -> NDArray[Scalar]:
        """The pixels that hold the samples."""
        at = self.positions
        if at is None:
            raise AssertionError("only a footprint with positions gathers")
        top, left = self.window.row_off, self.window.col_off
        rows = np.where(at.inside, at.row_index - top, 0)
        columns = np.where(at.inside, at.column_index - left, 0)
        return np.where(at.inside, pixels[rows, columns], outside)


def footprints(related: AlongAxes | Otherwise, block: Block, purpose: str) -> Iterator[Footprint]:
    """The footprints of a block, cut into pieces that need a bounded part of the source.

    Parameters
    ----------
    related : AlongAxes or Otherwise
        How the grids lie.
    block : Block
        In the target grid.
    purpose : str
        "continuous", "majority" or "nearest".

    Yields
    ------
    Footprint
        None for pieces that lie outside the source.
    """
    samples = _samples(related, purpose)
    if block.height * block.width * samples**2 > MOST_PIXELS and block.height * block.width > 1:
        for half in _halves(block):
            yield from footprints(related, half, purpose)
        return
    found = (
        _along_axes(related, block, purpose)
        if isinstance(related, AlongAxes)
        else _by_position(related, block, purpose, samples)
    )
    if found is None:
        return
    if found.window.width * found.window.height > MOST_PIXELS and block.height * block.width > 1:
        for half in _halves(block):
            yield from footprints(related, half, purpose)
        return
    yield found


def _samples(related: AlongAxes | Otherwise, purpose: str) -> int:
    """Samples along each side of a target pixel."""
    if isinstance(related, AlongAxes) or purpose == "nearest":
        return 1
    return mesh.mesh_plan(related).samples


def _halves(block: Block) -> tuple[Block, Block]:
    """A block cut across its longer side."""
    if block.height >= block.width:
        half = block.height // 2
        return (
            Block(block.row, block.column, half, block.width),
            Block(block.row + half, block.column, block.height - half, block.width),
        )
    half = block.width // 2
    return (
        Block(block.row, block.column, block.height, half),
        Block(block.row, block.column + half, block.height, block.width - half),
    )


def _along_axes(related: AlongAxes, block: Block, purpose: str) -> Footprint | None:
    """Footprint between grids with parallel axes."""
    weights = _WEIGHTS[purpose]
    rows = weights(related.rows, block.row, block.height)
    columns = weights(related.columns, block.column, block.width)
    (top, bottom), (left, right) = rows.span, columns.span
    if bottom <= top or right <= left:
        return None
    window = Window(left, top, right - left, bottom - top)
    return Footprint(block, window, (related.rows.size, related.columns.size), rows, columns)


def _by_position(related: Otherwise, block: Block, purpose: str, samples: int) -> Footprint | None:
    """Footprint between any other grids."""
    plan = mesh.mesh_plan(related)
    height, width = related.source.shape
    first_row, first_column, node_columns, node_rows = mesh.node_positions(related, block, plan)
    columns = np.empty((block.height * samples, block.width * samples))
    rows = np.empty_like(columns)
    mesh.sample_positions(
        node_columns, node_rows, first_row, first_column, plan.step, block.row, block.column, samples,
        plan.period, 0.5 * width, columns, rows,
    )  # fmt: skip
    at = Positions(
        columns,
        rows,
        np.empty(columns.shape, dtype=np.int64),
        np.empty(columns.shape, dtype=np.int64),
        np.empty(columns.shape, dtype=np.bool_),
    )
    mesh.nearest_index(height, width, columns, rows, at.row_index, at.column_index, at.inside)
    if not at.inside.any():
        return None
    linear = purpose == "continuous" and samples == 1
    reach = 1 if linear else 0
    used_rows, used_columns = at.row_index[at.inside], at.column_index[at.inside]
    top, bottom = max(int(used_rows.min()) - reach, 0), min(int(used_rows.max()) + 1 + reach, height)
    left, right = max(int(used_columns.min()) - reach, 0), min(int(used_columns.max()) + 1 + reach, width)
    return Footprint(
        block,
        Window(left, top, right - left, bottom - top),
        (height, width),
        _cells(block.height, samples),
        _cells(block.width, samples),
        at,
        linear,
    )


def _cells(number: int, samples: int) -> AxisWeights:
    """Weights that join equal runs of samples."""
    return AxisWeights(
        np.arange(number, dtype=np.int64) * samples,
        np.full(number, samples, dtype=np.int64),
        np.ones((number, samples)),
        np.full(number, float(samples)),
    )


def _unpacked(weights: AxisWeights) -> tuple[Integers, Integers, Float, Float]:
    """In the order in which the kernels take them."""
    return weights.first, weights.count, weights.weight, weights.total
