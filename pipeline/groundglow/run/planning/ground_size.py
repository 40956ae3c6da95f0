"""How large a grid's pixel is on the ground."""

from __future__ import annotations

import math

from groundglow.raster.grid import Grid

_METRES_A_DEGREE = 111_320.0


def pixel_in_metres(grid: Grid) -> tuple[float, float]:
    """Height and width of a grid's pixel on the ground, at its centre. [m]"""
    a, b, _, d, e, f = tuple(grid.transform)[:6]
    across, down = math.hypot(a, d), math.hypot(b, e)
    if not grid.crs.is_geographic:
        factor = float(grid.crs.linear_units_factor[1])
        return down * factor, across * factor
    latitude = f + 0.5 * (d * grid.width + e * grid.height)
    return down * _METRES_A_DEGREE, across * _METRES_A_DEGREE * math.cos(math.radians(latitude))
