"""Each input looked at before the start: it can be read, has the band that is named, and meets the scene."""

from __future__ import annotations

from collections.abc import Iterable

from groundglow.errors import InputError
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Grid
from groundglow.raster.open import describe_raster

Bounds = tuple[float, float, float, float]


def check_inputs(inputs: Iterable[tuple[str, RasterSource]], grid: Grid) -> None:
    """Refuse inputs that cannot serve the scene.

    Parameters
    ----------
    inputs : iterable of (str, RasterSource)
        Each raster with what it is used for.
    grid : Grid
        The scene's grid.

    Raises
    ------
    InputError
        Naming the raster, what is wrong, and what to do.
    """
    for role, source in inputs:
        info = describe_raster(source.path, indirect=source.indirect)
        if not 1 <= source.band <= len(info.dtypes):
            raise InputError(
                f"there is no band {source.band}; the raster has {len(info.dtypes)}",
                where=source.path,
                remedy="Set raster_band to one of them",
            )
        if not _meets(info.grid, grid):
            raise InputError(
                f"this raster ({role.replace('_', ' ')}) and the thermal band do not overlap",
                where=source.path,
                remedy="Check that both belong to the same scene, and their coordinate reference systems",
            )


def _meets(one: Grid, other: Grid) -> bool:
    """Whether the outlines of two grids overlap; True where that cannot be told."""
    left, bottom, right, top = _bounds(one)
    if one.crs != other.crs:
        from rasterio.errors import RasterioError  # noqa: PLC0415  (only grids in two systems need them)
        from rasterio.warp import transform_bounds  # noqa: PLC0415

        try:
            left, bottom, right, top = transform_bounds(one.crs, other.crs, left, bottom, right, top)
        except RasterioError:
            return True
    west, south, east, north = _bounds(other)
    if not (bottom < north and top > south):
        return False
    if right < left:
        # The outline crosses the antimeridian: it spans the whole turn in the other's numbers.
        return True
    # Longitudes may be counted from -180 or from 0: a whole turn apart is the same place.
    turns = (-360.0, 0.0, 360.0) if other.crs.is_geographic else (0.0,)
    return any(left + turn < east and right + turn > west for turn in turns)


def _bounds(grid: Grid) -> Bounds:
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    x = [c + a * column + b * row for column in (0, grid.width) for row in (0, grid.height)]
    y = [f + d * column + e * row for column in (0, grid.width) for row in (0, grid.height)]
    return min(x), min(y), max(x), max(y)
