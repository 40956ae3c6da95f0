"""What each target pixel of a block needs from the source, whichever way the two grids lie."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray
from rasterio.windows import Window

from groundglow.raster import axes, mesh_kernels
from groundglow.raster.axes import AxisWeights
from groundglow.raster.grid import Block
from groundglow.raster.mesh import Mesh, mesh_of_block, mesh_plan
from groundglow.raster.relation import AlongAxes, Otherwise

Float = NDArray[np.float64]
Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]
Pixels = NDArray[np.float32]
Scalar = TypeVar("Scalar", bound=np.generic)

# The most source pixels, and the most samples between grids, that are held at a time.
MOST_PIXELS = 1 << 22
MOST_SAMPLES = 1 << 22

_WEIGHTS = {
    "continuous": axes.continuous_weights,
    "majority": axes.class_weights,
    "nearest": axes.nearest_weights,
}


@dataclass(frozen=True)
class Footprint:
    """Weights of the source pixels that make up the target pixels of one piece of a block.

    Attributes
    ----------
    piece : Block
        In the target grid.
    window : rasterio Window
        What must be read of the source.
    rows, columns : AxisWeights
        Over source pixels, or over samples where there is a mesh.
    mesh : Mesh or None
        Where the axes of the two grids are not parallel.
    linear : bool
        Interpolate at the samples rather than take the pixels that hold them.
    """

    piece: Block
    window: Window
    rows: AxisWeights
    columns: AxisWeights
    mesh: Mesh | None = None
    linear: bool = False

    def mean(self, values: Pixels) -> tuple[Pixels, Mask]:
        """Weighted means of the values read in the window, and where a part had no value."""
        shape = (self.piece.height, self.piece.width)
        result, mixed = np.empty(shape, dtype=np.float32), np.empty(shape, dtype=np.bool_)
        top, left = self.window.row_off, self.window.col_off
        if self.mesh is not None and self.linear:
            at = self.mesh
            mesh_kernels.interpolate(
                values, top, left, at.nodes, at.places, at.turn, axes.LEAST_SHARE, result, mixed
            )
            return result, mixed
        if self.mesh is not None:
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
        if self.mesh is not None and self.linear:
            return np.asarray(self.mean(marked.astype(np.float32))[0] > 0.0)
        top, left = self.window.row_off, self.window.col_off
        if self.mesh is not None:
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
        if self.mesh is not None:
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
        at = self.mesh
        if at is None:
            raise AssertionError("only a footprint with a mesh gathers")
        samples = int(at.places[mesh_kernels.SAMPLES])
        result = np.empty((self.piece.height * samples, self.piece.width * samples), dtype=pixels.dtype)
        top, left = self.window.row_off, self.window.col_off
        mesh_kernels.gather(
            np.ascontiguousarray(pixels), top, left, at.nodes, at.places, at.turn, outside, result
        )
        return result


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
    if block.height * block.width * samples**2 > MOST_SAMPLES and block.height * block.width > 1:
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
    return mesh_plan(related).samples


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
    return Footprint(block, window, rows, columns)


def _by_position(related: Otherwise, block: Block, purpose: str, samples: int) -> Footprint | None:
    """Footprint between any other grids."""
    mesh = mesh_of_block(related, block, samples)
    found = np.empty(4, dtype=np.int64)
    mesh_kernels.extent(
        mesh.nodes, mesh.places, mesh.turn, block.height * samples, block.width * samples, found
    )
    top, bottom, left, right = (int(index) for index in found)
    if bottom < top:
        return None
    height, width = related.source.shape
    linear = purpose == "continuous" and samples == 1
    reach = 1 if linear else 0
    top, bottom = max(top - reach, 0), min(bottom + 1 + reach, height)
    left, right = max(left - reach, 0), min(right + 1 + reach, width)
    window = Window(left, top, right - left, bottom - top)
    rows, columns = _cells(block.height, samples), _cells(block.width, samples)
    return Footprint(block, window, rows, columns, mesh, linear)


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
