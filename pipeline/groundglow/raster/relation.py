"""How a source's grid lies to the target's: on it, along its axes, or otherwise."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

from affine import Affine

from groundglow.raster.grid import Grid, compose

# Positions are rounded to this fraction of a source pixel: far below what any map can mean, far
# above the rounding errors of coordinates, so that edges that should meet do meet.
POSITION_STEP = 2.0**-20


@dataclass(frozen=True)
class OnLattice:
    """Same pixels: source pixel = target pixel + shift."""

    row_shift: int
    column_shift: int


@dataclass(frozen=True)
class Axis:
    """One axis of a source parallel to the target's: source edge = start + step * target edge."""

    start: float
    step: float
    size: int

    def edge(self, index: float) -> float:
        """Source position of a target edge, in source pixels."""
        return round((self.start + self.step * index) / POSITION_STEP) * POSITION_STEP


@dataclass(frozen=True)
class AlongAxes:
    """Axes parallel, pixels of another size or position."""

    rows: Axis
    columns: Axis


@dataclass(frozen=True)
class Otherwise:
    """Another reference system, a rotation, or a seam of longitudes between them."""

    source: Grid
    target: Grid


Relation = OnLattice | AlongAxes | Otherwise


@lru_cache(maxsize=256)
def relation(source: Grid, target: Grid) -> Relation:
    """How to bring one grid to the other.

    Parameters
    ----------
    source : Grid
        Where pixels come from.
    target : Grid
        Where they go.

    Returns
    -------
    OnLattice, AlongAxes or Otherwise
    """
    if source.crs != target.crs:
        return Otherwise(source, target)
    to_source = compose(~source.transform, target.transform)
    reach = max(target.width, target.height)
    if max(abs(to_source.b), abs(to_source.d)) * reach > POSITION_STEP * 1024:
        return Otherwise(source, target)
    periods = _seam_shifts(source, target, to_source)
    if periods is None:
        return Otherwise(source, target)
    columns = Axis(to_source.c + periods, to_source.a, source.width)
    rows = Axis(to_source.f, to_source.e, source.height)
    if _is_unit(columns, target.width) and _is_unit(rows, target.height):
        return OnLattice(round(rows.start), round(columns.start))
    return AlongAxes(rows, columns)


def same_grid(source: Grid, target: Grid) -> bool:
    """Whether the source's pixels are the target's pixels, perhaps of a larger or smaller piece."""
    return isinstance(relation(source, target), OnLattice)


def longitude_period(grid: Grid) -> float | None:
    """Columns in a full turn of longitude, for a geographic north-up grid; None for others."""
    if not grid.crs.is_geographic or grid.transform.b != 0.0 or grid.transform.d != 0.0:
        return None
    degrees = math.degrees(grid.crs.units_factor[1])
    return 360.0 / abs(grid.transform.a * degrees)


def _is_unit(axis: Axis, length: int) -> bool:
    """Whether an axis only shifts by whole pixels, over the length of the target."""
    whole = round(axis.start)
    return abs(axis.start - whole) < 1e-4 and abs(axis.edge(length) - (whole + length)) < 1e-4


def _seam_shifts(source: Grid, target: Grid, to_source: Affine) -> float | None:
    """Columns to add so that longitudes meet; None where the target needs several turns at once."""
    period = longitude_period(source)
    if period is None:
        return 0.0
    ends = (to_source.c, to_source.c + to_source.a * target.width)
    low, high = min(ends), max(ends)
    turns = range(math.floor(-high / period), math.ceil((source.width - low) / period) + 1)
    meeting = [
        turn * period
        for turn in turns
        if low + turn * period < source.width - 1e-6 and high + turn * period > 1e-6
    ]
    if len(meeting) > 1:
        return None
    return meeting[0] if meeting else 0.0
