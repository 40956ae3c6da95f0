"""Pixels near a cloud: the exact distance to the nearest cloudy pixel, compared with a buffer."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from groundglow.kernels import kernel

Mask = NDArray[np.bool_]


def near_cloud(
    cloud: Mask, halo: tuple[int, int, int, int], pixel: tuple[float, float], buffer: float
) -> Mask:
    """Which pixels lie within a buffer around clouds, centre to centre.

    Parameters
    ----------
    cloud : bool array (rows, columns)
        Cloudy pixels of a block and its surroundings.
    halo : tuple of int
        Rows above and below, columns left and right that surround the block.
    pixel : tuple of float
        Height and width of a pixel. [m]
    buffer : float
        [m]

    Returns
    -------
    bool array
        Of the block without its halo; cloudy pixels themselves are not near a cloud.
    """
    above, below, left, right = halo
    rows, columns = cloud.shape
    inner = (slice(above, rows - below), slice(left, columns - right))
    result = np.zeros((rows - above - below, columns - left - right), np.bool_)
    if cloud.any():
        _near(np.ascontiguousarray(cloud), above, left, pixel[0], pixel[1], buffer, result)
        result &= ~cloud[inner]
    return result


@kernel("void(boolean[:, ::1], int64, int64, float64, float64, float64, boolean[:, ::1])")
def _near(cloud: Mask, top: int, left: int, height: float, width: float, buffer: float, result: Mask) -> None:
    """Distance along the row first, then the nearest over the rows within reach."""
    rows, columns = cloud.shape
    far = float(rows + columns + 2) * max(height, width) + 2.0 * buffer
    along = np.empty((rows, columns), np.float64)
    for i in range(rows):
        distance = far
        for j in range(columns):
            distance = 0.0 if cloud[i, j] else min(distance + width, far)
            along[i, j] = distance
        distance = far
        for j in range(columns - 1, -1, -1):
            distance = 0.0 if cloud[i, j] else min(distance + width, far)
            along[i, j] = min(along[i, j], distance)
    reach = int(buffer / height)
    limit = buffer * buffer * (1.0 + 1e-12)
    for i in range(result.shape[0]):
        for k in range(max(0, i + top - reach), min(rows, i + top + reach + 1)):
            down = (k - i - top) * height
            left_over = limit - down * down
            for j in range(result.shape[1]):
                if along[k, j + left] * along[k, j + left] <= left_over:
                    result[i, j] = True
