"""Compiled multilinear interpolation of many fields at once.

The fields of a node lie side by side, so a pixel is a weighted sum of a few short vectors, one for
each corner of its cell: vectors of eight floats, which the compiler is told about explicitly (it
does not find them by itself). Eight pixels at a time are then turned from pixel-major to
field-major. The arithmetic is plain IEEE float32 multiplications and additions in a fixed order: the
same bytes on every machine, with vector instructions or without.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from llvmlite import ir  # type: ignore[import-untyped]  # carries no types
from numba import types
from numba.extending import intrinsic
from numpy.typing import NDArray

from groundglow.kernels import kernel

Float = NDArray[np.float64]
Float32 = NDArray[np.float32]
Reals = NDArray[np.floating]
Cells = NDArray[np.signedinteger]
Unsigned = NDArray[np.uintp]
Builder = Any  # llvmlite and Numba's code generation carry no types
# Its functions take a typing context that callers do not give, which a type checker cannot know.
_generated: Any = intrinsic

LANES = 8
# Pixels that are interpolated before their fields are copied to the output planes.
_RUN = 64
_VECTOR = ir.VectorType(ir.FloatType(), LANES)
_MASK = ir.VectorType(ir.IntType(32), LANES)
# Three rounds of shuffles that turn an 8 x 8 block, each one instruction on common machines, and the
# order in which they leave its rows.
_ROUNDS = (
    (1, [0, 8, 1, 9, 4, 12, 5, 13], [2, 10, 3, 11, 6, 14, 7, 15]),
    (2, [0, 1, 8, 9, 4, 5, 12, 13], [2, 3, 10, 11, 6, 7, 14, 15]),
    (4, [0, 1, 2, 3, 8, 9, 10, 11], [4, 5, 6, 7, 12, 13, 14, 15]),
)
_ORDER = (0, 2, 1, 3, 4, 6, 5, 7)


def _at(context: Builder, builder: Builder, kind: Builder, array: Builder, index: Builder) -> Builder:
    """Pointer to eight floats of an array."""
    data = context.make_array(kind)(context, builder, array).data
    return builder.bitcast(builder.gep(data, [index]), _VECTOR.as_pointer())


def _shuffled(builder: Builder, a: Builder, b: Builder, mask: list[int]) -> Builder:
    return builder.shuffle_vector(a, b, ir.Constant(_MASK, mask))


def _sum_of_corners(
    context: Builder, builder: Builder, kinds: Builder, arguments: Builder, count: int, *, added: bool
) -> Builder:
    """result[at : at + 8] = (or +=) sum of weight * flat[node : node + 8] over the corners."""
    flat, result, at = arguments[0], arguments[-2], arguments[-1]
    place = _at(context, builder, kinds[-2], result, at)
    total = builder.load(place, align=4) if added else None
    undefined = ir.Constant(_VECTOR, ir.Undefined)
    for node, weight in zip(arguments[1 : 1 + count], arguments[1 + count : 1 + 2 * count], strict=True):
        vector = builder.load(_at(context, builder, kinds[0], flat, node), align=4)
        first = builder.insert_element(undefined, weight, ir.Constant(ir.IntType(32), 0))
        product = builder.fmul(vector, _shuffled(builder, first, undefined, [0] * LANES))
        total = product if total is None else builder.fadd(total, product)
    builder.store(total, place, align=4)
    return context.get_dummy_value()


@_generated
def _set_two(typing_context, flat, node_0, node_1, weight_0, weight_1, result, at):  # type: ignore[no-untyped-def]
    signature = types.void(flat, node_0, node_1, weight_0, weight_1, result, at)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return _sum_of_corners(context, builder, signature.args, arguments, 2, added=False)

    return signature, generate


@_generated
def _set_four(  # type: ignore[no-untyped-def]  # code generation
    typing_context, flat, node_0, node_1, node_2, node_3, weight_0, weight_1, weight_2, weight_3, result, at
):  # fmt: skip
    signature = types.void(
        flat, node_0, node_1, node_2, node_3, weight_0, weight_1, weight_2, weight_3, result, at
    )

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return _sum_of_corners(context, builder, signature.args, arguments, 4, added=False)

    return signature, generate


@_generated
def _add_four(  # type: ignore[no-untyped-def]  # code generation
    typing_context, flat, node_0, node_1, node_2, node_3, weight_0, weight_1, weight_2, weight_3, result, at
):  # fmt: skip
    signature = types.void(
        flat, node_0, node_1, node_2, node_3, weight_0, weight_1, weight_2, weight_3, result, at
    )

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return _sum_of_corners(context, builder, signature.args, arguments, 4, added=True)

    return signature, generate


@_generated
def _turn_block(typing_context, pixels, at, planes, start, stride):  # type: ignore[no-untyped-def]  # as above
    """Eight pixels of eight fields each, ``pixels[at:]``, to eight planes ``stride`` apart from ``start``."""
    signature = types.void(pixels, at, planes, start, stride)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        kinds = signature.args
        index = arguments[1].type
        rows = []
        for row in range(LANES):
            place = builder.add(arguments[1], ir.Constant(index, LANES * row))
            rows.append(builder.load(_at(context, builder, kinds[0], arguments[0], place), align=4))
        for step, low, high in _ROUNDS:
            turned = list(rows)
            for i in range(LANES):
                if not i & step:
                    a, b = rows[i], rows[i + step]
                    turned[i], turned[i + step] = (
                        _shuffled(builder, a, b, low),
                        _shuffled(builder, a, b, high),
                    )
            rows = turned
        for row, plane in zip(rows, _ORDER, strict=True):
            shift = builder.mul(arguments[4], ir.Constant(index, plane))
            place = builder.add(arguments[3], shift)
            builder.store(row, _at(context, builder, kinds[2], arguments[2], place), align=4)
        return context.get_dummy_value()

    return signature, generate


@kernel(inline=True)
def _find(coordinate: Reals, nodes: Reals, cell: Cells, share: Float32, lower: Reals, upper: Reals) -> None:
    """Cell and share of each coordinate along an axis, by counting the inner nodes below it.

    In short loops, so that all but the look-up of the nodes becomes vector instructions.
    """
    zero, one = np.float32(0.0), np.float32(1.0)
    for j in range(coordinate.size):
        cell[j] = 0
    for k in range(1, nodes.size - 1):
        node = nodes[k]
        for j in range(coordinate.size):
            cell[j] += np.int32(coordinate[j] >= node)
    for j in range(coordinate.size):
        at = np.uintp(cell[j])
        lower[j] = nodes[at]
        upper[j] = nodes[at + np.uintp(1)]
    for j in range(coordinate.size):
        along = np.float32((coordinate[j] - lower[j]) / (upper[j] - lower[j]))
        # Comparisons are false for NaN, which therefore stays.
        share[j] = zero if along < zero else one if along > one else along


@kernel(inline=True)
def _split(share: Float32, low: Float32, high: Float32) -> None:
    """Give ``share`` of the weights ``low`` to ``high``."""
    one = np.float32(1.0)
    for j in range(share.size):
        weight, along = low[j], share[j]
        high[j] = weight * along
        low[j] = weight * (one - along)


@kernel(inline=True)
def _advance(base: Cells, cell: Cells, stride: int) -> None:
    """Move the lowest corner by the cell along an axis."""
    step = np.int32(stride)
    for j in range(base.size):
        base[j] = np.int32(base[j] + np.int32(cell[j] * step))


@kernel(inline=True)
def _corners(
    sizes: NDArray[np.int64], cells: Cells, shares: Float32, base: Cells, steps: Unsigned, weights: Float32
) -> int:
    """Node of the lowest corner of each pixel of a row, steps to the others, weights of all; their number."""
    corners = 1
    stride = sizes[4]
    steps[:] = 0
    base[:] = 0
    weights[0, :] = np.float32(1.0)
    for axis in range(3, -1, -1):
        if sizes[axis] > 1:
            for corner in range(corners):
                steps[corners + corner] = steps[corner] + np.uintp(stride)
                _split(shares[axis], weights[corner], weights[corners + corner])
            _advance(base, cells[axis], stride)
            corners *= 2
        stride *= sizes[axis]
    # A single corner is given a second one that weighs nothing.
    if corners == 1:
        weights[1, :] = np.float32(0.0)
    return max(corners, 2)


@kernel(inline=True)
def _run_of_pixels(
    flat: Float32, corners: int, first: int, last: int, base: Cells, steps: Unsigned, weights: Float32,
    pixels: Float32, planes: Float32,
) -> None:  # fmt: skip
    """Interpolate the pixels ``first`` to ``last`` of one row into planes of a run's length."""
    run = np.uintp(_RUN)
    groups = planes.size // (_RUN * LANES)
    eight = np.uintp(LANES)
    none, one, two, three = np.uintp(0), np.uintp(1), np.uintp(2), np.uintp(3)
    # Taken out of the loop by hand: the compiler cannot know that ``pixels`` is another array.
    to_one, to_two, to_three = steps[one], steps[two], steps[three]
    for block in range(np.uintp(-(-(last - first) // LANES))):
        start = np.uintp(block) * eight
        for group in range(np.uintp(groups)):
            shift = np.uintp(group) * eight
            for pixel in range(LANES):
                j = np.uintp(first) + start + np.uintp(pixel)
                node, at = np.uintp(base[j]) + shift, np.uintp(pixel) * eight
                if corners == 2:
                    _set_two(flat, node, node + to_one, weights[none, j], weights[one, j], pixels, at)
                    continue
                _set_four(
                    flat, node, node + to_one, node + to_two, node + to_three,
                    weights[none, j], weights[one, j], weights[two, j], weights[three, j], pixels, at,
                )  # fmt: skip
                for quad in range(4, corners, 4):
                    c = np.uintp(quad)
                    _add_four(
                        flat, node + steps[c], node + steps[c + one], node + steps[c + two], node + steps[c + three],
                        weights[c, j], weights[c + one, j], weights[c + two, j], weights[c + three, j], pixels, at,
                    )  # fmt: skip
            _turn_block(pixels, none, planes, shift * run + start, run)


@kernel(inline=True)
def _row(
    flat: Float32, sizes: NDArray[np.int64], cells: Cells, shares: Float32, base: Cells, steps: Unsigned,
    weights: Float32, pixels: Float32, planes: Float32, out: Float32, row: int,
) -> None:  # fmt: skip
    """Interpolate one row. ``base`` and ``weights`` reach seven pixels beyond it."""
    cols = out.shape[2]
    corners = _corners(sizes, cells, shares, base, steps, weights)
    for first in range(0, cols, _RUN):
        last = min(first + _RUN, cols)
        _run_of_pixels(flat, corners, first, last, base, steps, weights, pixels, planes)
        for field in range(out.shape[0]):
            plane = planes[field * _RUN : field * _RUN + last - first]
            target = out[field, row, first:last]
            for j in range(target.size):
                target[j] = plane[j]


@kernel(
    "void(float32[:, :, :, :, ::1], float32[::1], float32[::1], intp[::1], float32[::1], intp[::1], "
    "float32[::1], float32[:, ::1], float32[:, ::1], float32[:, :, ::1])"
)
def interpolate_rows(
    values: Float32, height_nodes: Float32, secant_nodes: Float32, row_cell: Cells, row_share: Float32,
    column_cell: Cells, column_share: Float32, heights: Float32, secants: Float32, out: Float32,
) -> None:  # fmt: skip
    """All fields of a tile whose columns share a map x and whose rows share a map y.

    Parameters
    ----------
    values : float32 array (y, x, height, angle, lanes)
        Fields of the nodes.
    height_nodes, secant_nodes : float32 arrays
        Along those axes; not looked at where an axis has one node.
    row_cell, row_share, column_cell, column_share : arrays (rows,), (cols,)
        Cell along y and x, and how far along it.
    heights, secants : float32 arrays (rows, cols)
        Of the pixels; of any shape where their axis has one node.
    out : float32 array (fields, rows, cols)
        Filled.

    Notes
    -----
    Statement: ``interpolate.interpolate_plainly``.
    """
    places_y, places_x, node_heights, node_secants, lanes = values.shape
    rows, cols = out.shape[1], out.shape[2]
    sizes = np.empty(5, dtype=np.int64)
    sizes[:] = (1, places_x, node_heights, node_secants, lanes)
    cells = np.zeros((4, cols + LANES), dtype=np.int32)
    shares = np.zeros((4, cols + LANES), dtype=np.float32)
    for j in range(cols):
        cells[1, j] = column_cell[j]
        shares[1, j] = column_share[j]
    lower, upper = np.empty(cols, dtype=np.float32), np.empty(cols, dtype=np.float32)
    base = np.zeros(cols + LANES, dtype=np.int32)
    steps = np.empty(16, dtype=np.uintp)
    weights = np.zeros((16, cols + LANES), dtype=np.float32)
    pixels = np.empty(LANES * LANES, dtype=np.float32)
    planes = np.empty(lanes * _RUN, dtype=np.float32)
    table = values[0].copy().reshape(-1)
    plane = table.size
    flat = values.reshape(-1)
    one = np.float32(1.0)
    for row in range(rows):
        if places_y > 1:
            low = row_cell[row] * plane
            share = row_share[row]
            for k in range(plane):
                table[k] = (one - share) * flat[low + k] + share * flat[low + plane + k]
        if node_heights > 1:
            _find(heights[row], height_nodes, cells[2], shares[2], lower, upper)
        if node_secants > 1:
            _find(secants[row], secant_nodes, cells[3], shares[3], lower, upper)
        _row(table, sizes, cells, shares, base, steps, weights, pixels, planes, out, row)


@kernel(
    "void(float32[:, :, :, :, ::1], float64[::1], float64[::1], float32[::1], float32[::1], "
    "float64[:, ::1], float64[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, :, ::1])"
)
def interpolate_pixels(
    values: Float32, nodes_x: Float, nodes_y: Float, height_nodes: Float32, secant_nodes: Float32,
    x: Float, y: Float, heights: Float32, secants: Float32, out: Float32,
) -> None:  # fmt: skip
    """As :func:`interpolate_rows`, with the map position of every pixel.

    Statement: ``interpolate.interpolate_plainly``.
    """
    rows, cols = out.shape[1], out.shape[2]
    sizes = np.empty(5, dtype=np.int64)
    sizes[:] = values.shape
    cells = np.zeros((4, cols + LANES), dtype=np.int32)
    shares = np.zeros((4, cols + LANES), dtype=np.float32)
    lower, upper = np.empty(cols, dtype=np.float32), np.empty(cols, dtype=np.float32)
    map_lower, map_upper = np.empty(cols, dtype=np.float64), np.empty(cols, dtype=np.float64)
    base = np.zeros(cols + LANES, dtype=np.int32)
    steps = np.empty(16, dtype=np.uintp)
    weights = np.zeros((16, cols + LANES), dtype=np.float32)
    pixels = np.empty(LANES * LANES, dtype=np.float32)
    planes = np.empty(sizes[4] * _RUN, dtype=np.float32)
    flat = values.reshape(-1)
    for row in range(rows):
        if sizes[0] > 1:
            _find(y[row], nodes_y, cells[0], shares[0], map_lower, map_upper)
        if sizes[1] > 1:
            _find(x[row], nodes_x, cells[1], shares[1], map_lower, map_upper)
        if sizes[2] > 1:
            _find(heights[row], height_nodes, cells[2], shares[2], lower, upper)
        if sizes[3] > 1:
            _find(secants[row], secant_nodes, cells[3], shares[3], lower, upper)
        _row(flat, sizes, cells, shares, base, steps, weights, pixels, planes, out, row)
