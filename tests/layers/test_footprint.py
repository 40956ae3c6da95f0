"""Outlines in longitude and latitude, the awkward places of the Earth included.

Source: RFC 7946, sections 3.1.6, 3.1.9, 5.2 and 5.3.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from affine import Affine
from rasterio.crs import CRS
from rasterio.warp import transform

from groundglow.layers.footprint import footprint
from groundglow.raster.grid import Grid
from layers.layer_cases import grid_of


def rings(geometry: Any) -> list[Any]:
    if geometry["type"] == "Polygon":
        return [geometry["coordinates"][0]]
    return [polygon[0] for polygon in geometry["coordinates"]]


def area(ring: Any) -> float:
    x, y = np.array(ring[:-1]).T
    return float(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y)) / 2


def geographic(west: float, north: float, width: float, height: float) -> Grid:
    return Grid(CRS.from_epsg(4326), Affine(width / 100, 0, west, 0, -height / 100, north), 100, 100)


GRIDS = {
    "plain": grid_of(6000, 6000),
    "rotated": Grid(CRS.from_epsg(32633), Affine(28.0, 10.0, 5e5, 10.0, -28.0, 5e6), 500, 700),
    "south up": Grid(CRS.from_epsg(32633), Affine(30.0, 0.0, 5e5, 0.0, 30.0, 5e6), 500, 700),
    "across the antimeridian": geographic(175, -10, 10, 5),
    "projected across the antimeridian": Grid(
        CRS.from_epsg(32601), Affine(300, 0, 0, 0, -300, 2e6), 1000, 1000
    ),
    "north pole": Grid(CRS.from_epsg(3413), Affine(1e4, 0, -1e6, 0, -1e4, 1e6), 200, 200),
    "south pole": Grid(CRS.from_epsg(3031), Affine(1e4, 0, -1e6, 0, -1e4, 1e6), 200, 200),
    "beyond 180 degrees": geographic(200, 40, 10, 5),
    "whole Earth": geographic(-180, 90, 360, 180),
    "ends at the antimeridian": geographic(170, 5, 10, 5),
}


@pytest.mark.parametrize("name", GRIDS)
def test_every_ring_is_closed_runs_anticlockwise_and_stays_on_the_map(name: str) -> None:
    geometry, bbox = footprint(GRIDS[name])
    assert geometry is not None
    assert bbox is not None
    for ring in rings(geometry):
        assert ring[0] == ring[-1]
        assert len(ring) >= 4
        assert area(ring) > 0
        longitude, latitude = np.array(ring).T
        assert np.abs(longitude).max() <= 180
        assert np.abs(latitude).max() <= 90
        assert np.abs(np.diff(longitude)).max() <= 180.0 or name in (
            "north pole",
            "south pole",
            "whole Earth",
        )


def test_a_plain_scene_is_one_polygon_through_its_corners() -> None:
    grid = GRIDS["plain"]
    geometry, bbox = footprint(grid)
    assert geometry is not None
    assert bbox is not None
    (ring,) = rings(geometry)
    left, top = grid.transform.c, grid.transform.f
    x, y = transform(grid.crs, CRS.from_epsg(4326), [left, left + 180_000], [top, top - 180_000])
    points = np.array(ring)
    for corner in zip(x, y, strict=True):
        assert np.abs(points - corner).sum(axis=1).min() < 1e-6
    assert bbox == [points[:, 0].min(), points[:, 1].min(), points[:, 0].max(), points[:, 1].max()]


def test_bent_edges_are_followed() -> None:
    """Between the corners the outline keeps to the grid's edge: 180 km wide, below 10 m off."""
    grid = GRIDS["plain"]
    geometry, _ = footprint(grid)
    (ring,) = rings(geometry)
    points = np.array(ring)
    halfway = (points[:-1] + points[1:]) / 2
    x, y = transform(CRS.from_epsg(4326), grid.crs, halfway[:, 0], halfway[:, 1])
    left, top = grid.transform.c, grid.transform.f
    from_left, from_top = np.array(x) - left, top - np.array(y)
    off = np.min(np.abs([from_left, from_left - 180_000, from_top, from_top - 180_000]), axis=0)
    assert off.max() < 10.0


@pytest.mark.parametrize("name", ["across the antimeridian", "projected across the antimeridian"])
def test_the_antimeridian_cuts_the_outline_in_two(name: str) -> None:
    geometry, bbox = footprint(GRIDS[name])
    assert geometry is not None
    assert bbox is not None
    assert geometry["type"] == "MultiPolygon"
    west, east = sorted(rings(geometry), key=lambda ring: -np.mean(np.array(ring)[:, 0]))
    assert np.array(west)[:, 0].max() == 180.0
    assert np.array(east)[:, 0].min() == -180.0
    assert bbox[0] > bbox[2], "the box's west is the larger number there"


def test_areas_are_kept_across_the_antimeridian() -> None:
    geometry, bbox = footprint(GRIDS["across the antimeridian"])
    assert sum(area(ring) for ring in rings(geometry)) == pytest.approx(50.0)
    assert bbox == [175.0, -15.0, -175.0, -10.0]


@pytest.mark.parametrize(("name", "pole"), [("north pole", 90.0), ("south pole", -90.0)])
def test_a_pole_inside_belongs_to_the_outline(name: str, pole: float) -> None:
    geometry, bbox = footprint(GRIDS[name])
    assert bbox is not None
    assert (bbox[0], bbox[2]) == (-180.0, 180.0)
    assert pole in bbox
    # The circle of latitude inside the square ends at 80.9 degrees: all of the cap is covered.
    assert sum(area(ring) for ring in rings(geometry)) > 360 * 9


def test_longitudes_beyond_180_come_back() -> None:
    geometry, bbox = footprint(GRIDS["beyond 180 degrees"])
    assert bbox == [-160.0, 35.0, -150.0, 40.0]
    assert geometry is not None
    assert geometry["type"] == "Polygon"


def test_touching_the_antimeridian_is_not_crossing_it() -> None:
    geometry, bbox = footprint(GRIDS["ends at the antimeridian"])
    assert geometry is not None
    assert geometry["type"] == "Polygon"
    assert bbox == [170.0, 0.0, 180.0, 5.0]


def test_what_has_no_longitude_has_no_outline() -> None:
    """A view of the Earth's disc whose corners look into space."""
    crs = CRS.from_string("+proj=geos +h=35785831 +lon_0=0 +a=6378137 +b=6356752 +units=m")
    grid = Grid(crs, Affine(1e5, 0, -6e6, 0, -1e5, 6e6), 120, 120)
    assert footprint(grid) == (None, None)
