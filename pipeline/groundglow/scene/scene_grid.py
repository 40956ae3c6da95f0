"""The grid that a description says a scene has, and whether rasters lie on it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from affine import Affine
from rasterio.crs import CRS
from rasterio.errors import CRSError

from groundglow.errors import InputError
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Grid
from groundglow.raster.open import describe_raster
from groundglow.raster.relation import OnLattice, relation
from groundglow.scene.level1_groups import Metadata

_ANTARCTIC = 3031
_FALSE_NORTHING = 10_000_000.0


def level1_grid(metadata: Metadata) -> Grid | None:
    """The grid of the thermal bands by level-1 metadata; None where it does not say enough."""
    numbers = [
        metadata.number("corners", key)
        for key in ("CORNER_UL_PROJECTION_X_PRODUCT", "CORNER_UL_PROJECTION_Y_PRODUCT")
    ]
    size = [metadata.number("corners", key) for key in ("THERMAL_SAMPLES", "THERMAL_LINES")]
    pixel = metadata.number("projection", "GRID_CELL_SIZE_THERMAL")
    code = _epsg(metadata)
    left, top = numbers
    width, height = size
    if code is None or left is None or top is None or width is None or height is None or not pixel:
        return None
    # Corners are given as centres of the outermost pixels.
    transform = Affine(pixel, 0.0, left - 0.5 * pixel, 0.0, -pixel, top + 0.5 * pixel)
    return Grid(CRS.from_epsg(code), transform, round(width), round(height))


def _epsg(metadata: Metadata) -> int | None:
    """Code of the projection, where it is one of the two in use."""
    projection = metadata.text("projection", "MAP_PROJECTION")
    if projection == "UTM":
        zone = metadata.number("projection", "UTM_ZONE")
        return None if zone is None or not 1 <= zone <= 60 else 32600 + int(zone)
    true_scale = metadata.number("projection", "TRUE_SCALE_LAT")
    return _ANTARCTIC if projection == "PS" and true_scale == -71.0 else None


def projected_grid(properties: Mapping[str, Any], asset: Mapping[str, Any]) -> Grid | None:
    """The grid that the projection extension gives for an asset; None where it does not say enough.

    Parameters
    ----------
    properties : mapping
        Of the STAC Item.
    asset : mapping
        What it says counts before what the Item says.
    """
    code = asset.get("proj:code", properties.get("proj:code"))
    if code is None:
        number = asset.get("proj:epsg", properties.get("proj:epsg"))
        code = None if number is None else f"EPSG:{number}"
    shape = asset.get("proj:shape", properties.get("proj:shape"))
    numbers = asset.get("proj:transform", properties.get("proj:transform"))
    if not (isinstance(code, str) and isinstance(shape, list) and isinstance(numbers, list)):
        return None
    try:
        height, width = (int(size) for size in shape)
        transform = Affine(*(float(number) for number in numbers[:6]))
        return Grid(CRS.from_string(code), transform, width, height)
    except (TypeError, ValueError, CRSError):
        return None


def check_on_grid(source: RasterSource, scene: Grid, where: str) -> None:
    """Refuse a raster of another scene; a cut that lies on the scene's grid is fine.

    Parameters
    ----------
    source : RasterSource
        A raster of the scene.
    scene : Grid
        The grid that the description gives.
    where : str
        The description, for messages.

    Raises
    ------
    InputError
        If the raster's reference system, pixel size or position is not the scene's.
    """
    found = describe_raster(source.path, indirect=source.indirect).grid
    candidates = [scene, *_southern(scene)]
    matching = [grid for grid in candidates if grid.crs == found.crs]
    if not matching:
        raise _another(source, where, f"its reference system is {_name(found.crs)}, not {_name(scene.crs)}")
    grid = matching[0]
    related = relation(found, grid)
    if not isinstance(related, OnLattice):
        pixel, wanted = abs(found.transform.a), abs(grid.transform.a)
        detail = (
            f"pixels of {pixel:g}, not {wanted:g}"
            if abs(pixel - wanted) > 1e-6
            else "pixels between the scene's"
        )
        raise _another(source, where, f"it has {detail}")
    row, column = -related.row_shift, -related.column_shift
    if row < 0 or column < 0 or row + found.height > grid.height or column + found.width > grid.width:
        raise _another(
            source,
            where,
            f"its {found.width} x {found.height} pixels reach beyond the scene's {grid.width} x {grid.height}",
        )


def _southern(grid: Grid) -> list[Grid]:
    """The same zone counted from the south pole's side, as some programs rewrite it."""
    code = grid.crs.to_epsg()
    if code is None or not 32601 <= code <= 32660:
        return []
    t = grid.transform
    moved = Affine(t.a, t.b, t.c, t.d, t.e, t.f + _FALSE_NORTHING)
    return [Grid(CRS.from_epsg(code + 100), moved, grid.width, grid.height)]


def _name(crs: CRS) -> str:
    return str(crs.to_string())


def _another(source: RasterSource, where: str, detail: str) -> InputError:
    return InputError(
        f"the raster is not one of this scene: {detail}",
        where=source.path,
        remedy=f"Only rasters on the grid that {where} gives, or cuts of them, belong to it",
    )
