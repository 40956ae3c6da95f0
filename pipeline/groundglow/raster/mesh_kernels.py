"""Compiled sampling of a source at positions interpolated in a mesh.

A mesh reaches the kernels as ``nodes`` (source column and row at its nodes), ``places`` (integers, in
the order of the constants below) and ``turn`` (source columns in a turn of longitude, 0 where there
is none, and the middle of the source). Sample (i, j) of a block lies at
((first_row * samples + i + 0.5) / samples) target rows, and so for columns: counted from the target's
corner, so that the block leaves no trace.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from groundglow.kernels import kernel

FIRST_NODE_ROW, FIRST_NODE_COLUMN, STEP, FIRST_ROW, FIRST_COLUMN, SAMPLES, HEIGHT, WIDTH = range(8)

_MESH = "float64[:, :, ::1], int64[::1], float64[::1]"

Float = NDArray[np.float64]
Integers = NDArray[np.int64]


@kernel(inline=True)
def _place_columns(places: Integers, cell: Integers, fraction: Float) -> None:
    """Mesh cell, counted from the first node, and place within it, of each sample column."""
    for j in range(cell.size):
        u = ((places[FIRST_COLUMN] * places[SAMPLES] + j + 0.5) / places[SAMPLES]) / places[STEP]
        q = int(u)
        fraction[j] = u - q
        cell[j] = q - places[FIRST_NODE_COLUMN]


@kernel(inline=True)
def _place_row(nodes: Float, places: Integers, turn: Float, i: int, start: Float, change: Float) -> None:
    """Source position at the left of each mesh cell along one sample row, and its change across the cell."""
    v = ((places[FIRST_ROW] * places[SAMPLES] + i + 0.5) / places[SAMPLES]) / places[STEP]
    p = int(v)
    fv = v - p
    p -= places[FIRST_NODE_ROW]
    period = turn[0]
    for q in range(nodes.shape[2]):
        above = nodes[0, p, q]
        below = nodes[0, p + 1, q]
        if period > 0.0:
            below -= period * np.rint((below - above) / period)
        start[0, q] = (1.0 - fv) * above + fv * below
        start[1, q] = (1.0 - fv) * nodes[1, p, q] + fv * nodes[1, p + 1, q]
    for q in range(nodes.shape[2] - 1):
        across = start[0, q + 1] - start[0, q]
        if period > 0.0:
            across -= period * np.rint(across / period)
        change[0, q] = across
        change[1, q] = start[1, q + 1] - start[1, q]


@kernel(inline=True)
def _within_turn(column: float, turn: Float) -> float:
    """A source column brought within half a turn of the middle of the source."""
    if turn[0] > 0.0 and abs(column - turn[1]) > 0.5 * turn[0]:
        column -= turn[0] * np.rint((column - turn[1]) / turn[0])
    return column


@kernel(f"void({_MESH}, int64, int64, int64[::1])")
def extent(nodes: Float, places: Integers, turn: Float, down: int, across: int, found: Integers) -> None:
    """First and last source row and column that samples can need; last < first where none need any.

    ``down`` and ``across`` count samples; ``found`` receives first row, last row, first column, last
    column. Along a row of one mesh cell positions change evenly, so its two ends are enough.
    """
    height = places[HEIGHT]
    width = places[WIDTH]
    cell = np.empty(across, dtype=np.int64)
    fraction = np.empty(across)
    start = np.empty((2, nodes.shape[2]))
    change = np.empty((2, nodes.shape[2]))
    _place_columns(places, cell, fraction)
    top = np.inf
    bottom = -np.inf
    left = np.inf
    right = -np.inf
    for i in range(down):
        _place_row(nodes, places, turn, i, start, change)
        first = 0
        while first < across:
            q = cell[first]
            last = first
            while last + 1 < across and cell[last + 1] == q:
                last += 1
            x0 = _within_turn(start[0, q] + fraction[first] * change[0, q], turn)
            x1 = _within_turn(start[0, q] + fraction[last] * change[0, q], turn)
            y0 = start[1, q] + fraction[first] * change[1, q]
            y1 = start[1, q] + fraction[last] * change[1, q]
            first = last + 1
            low = min(x0, x1)
            high = max(x0, x1)
            if turn[0] > 0.0 and high - low > 0.5 * turn[0]:
                low = 0.0  # the seam lies between them
                high = float(width)
            if high >= 0.0 and low <= width and max(y0, y1) >= 0.0 and min(y0, y1) <= height:
                left = min(left, low)
                right = max(right, high)
                top = min(top, y0, y1)
                bottom = max(bottom, y0, y1)
    found[0] = 0
    found[1] = -1
    found[2] = 0
    found[3] = -1
    if right >= left and bottom >= top:
        found[0] = min(int(max(top, 0.0)), height - 1)
        found[1] = min(int(min(bottom, float(height))), height - 1)
        found[2] = min(int(max(left, 0.0)), width - 1)
        found[3] = min(int(min(right, float(width))), width - 1)


@kernel(
    *(
        f"void({kind}[:, ::1], int64, int64, {_MESH}, {kind}, {kind}[:, ::1])"
        for kind in ("float32", "int64", "boolean")
    )
)
def gather(
    pixels: NDArray[np.generic],
    row_origin: int,
    column_origin: int,
    nodes: Float,
    places: Integers,
    turn: Float,
    outside: np.generic,
    result: NDArray[np.generic],
) -> None:
    """The pixels of a window that hold the samples, ``outside`` where none does."""
    height = places[HEIGHT]
    width = places[WIDTH]
    cell = np.empty(result.shape[1], dtype=np.int64)
    fraction = np.empty(result.shape[1])
    start = np.empty((2, nodes.shape[2]))
    change = np.empty((2, nodes.shape[2]))
    _place_columns(places, cell, fraction)
    for i in range(result.shape[0]):
        _place_row(nodes, places, turn, i, start, change)
        for j in range(result.shape[1]):
            x = _within_turn(start[0, cell[j]] + fraction[j] * change[0, cell[j]], turn)
            y = start[1, cell[j]] + fraction[j] * change[1, cell[j]]
            if x >= 0.0 and x <= width and y >= 0.0 and y <= height:
                r = min(int(y), height - 1) - row_origin
                c = min(int(x), width - 1) - column_origin
                result[i, j] = pixels[r, c]
            else:
                result[i, j] = outside


@kernel(f"void(float32[:, ::1], int64, int64, {_MESH}, float64, float32[:, ::1], boolean[:, ::1])")
def interpolate(
    values: NDArray[np.float32],
    row_origin: int,
    column_origin: int,
    nodes: Float,
    places: Integers,
    turn: Float,
    least_share: float,
    result: NDArray[np.float32],
    mixed: NDArray[np.bool_],
) -> None:
    """Bilinear value at each sample, of the neighbours that have one; NaN where too few have."""
    height = places[HEIGHT]
    width = places[WIDTH]
    cell = np.empty(result.shape[1], dtype=np.int64)
    fraction = np.empty(result.shape[1])
    start = np.empty((2, nodes.shape[2]))
    change = np.empty((2, nodes.shape[2]))
    _place_columns(places, cell, fraction)
    for i in range(result.shape[0]):
        _place_row(nodes, places, turn, i, start, change)
        for j in range(result.shape[1]):
            result[i, j] = np.nan
            mixed[i, j] = False
            x = _within_turn(start[0, cell[j]] + fraction[j] * change[0, cell[j]], turn)
            y = start[1, cell[j]] + fraction[j] * change[1, cell[j]]
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
