"""Areas of interest: read, placed, clipped and masked, the same whatever the block."""

from __future__ import annotations

import json
import sqlite3
import struct
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from affine import Affine
from rasterio.crs import CRS
from rasterio.warp import transform as transform_points

from groundglow.errors import ConfigError, InputError
from groundglow.raster.area import Area, area_of_bounds, clip_to_area, place_area
from groundglow.raster.area_files import read_area
from groundglow.raster.grid import Grid
from groundglow.raster.relation import OnLattice, relation
from painted_rasters import UTM, grid, pixel_centres, whole

HERE = grid(80, 60)
LEFT, TOP = 600_000.0, 5_300_010.0
# No edge runs through a pixel's centre, where inside and outside would be a matter of rounding.
CENTRE_X, CENTRE_Y, HALF_WIDTH, HALF_HEIGHT = LEFT + 1207.3, TOP - 904.1, 893.7, 701.3
CORNERS = np.array([[0.0, 1.0], [1.0, 0.0], [0.0, -1.0], [-1.0, 0.0]])
DIAMOND = CORNERS * (HALF_WIDTH, HALF_HEIGHT) + (CENTRE_X, CENTRE_Y)
HOLE = np.array([[-1.0, 1.0], [1.0, 1.0], [1.0, -1.0], [-1.0, -1.0]]) * (203.0, 103.0) + (CENTRE_X, CENTRE_Y)


def in_diamond(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """The diamond without its hole, by its formula."""
    u, v = np.abs(x - CENTRE_X), np.abs(y - CENTRE_Y)
    return (u / HALF_WIDTH + v / HALF_HEIGHT < 1.0) & ~((u < 203.0) & (v < 103.0))


def geographic_ring() -> np.ndarray:
    dense = np.concatenate([np.linspace(a, b, 200, endpoint=False)
                            for a, b in zip(DIAMOND, np.roll(DIAMOND, -1, axis=0), strict=True)])  # fmt: skip
    x, y = transform_points(UTM, CRS.from_epsg(4326), *dense.T)
    return np.stack([x, y], axis=1)


def geojson(path: Path, rings: list[Any], kind: str = "Polygon", **more: Any) -> str:
    coordinates = [np.asarray(ring).tolist() for ring in rings]
    geometry = {"type": kind, "coordinates": coordinates if kind == "Polygon" else [coordinates]}
    path.write_text(json.dumps({"type": "FeatureCollection", "features": [
        {"type": "Feature", "properties": {}, "geometry": geometry}], **more}))  # fmt: skip
    return str(path)


def test_geojson_is_in_longitude_and_latitude(tmp_path: Path) -> None:
    for kind in ("Polygon", "MultiPolygon"):
        area = read_area(geojson(tmp_path / "area.geojson", [geographic_ring()], kind))
        found = place_area(area, HERE).mask(whole(HERE))
        wanted = place_area(Area(UTM, (DIAMOND,)), HERE).mask(whole(HERE))
        assert np.count_nonzero(found != wanted) <= 2  # centres within centimetres of the edge


def test_geojson_that_names_its_system(tmp_path: Path) -> None:
    crs = {"type": "name", "properties": {"name": "urn:ogc:def:crs:EPSG::32632"}}
    area = read_area(geojson(tmp_path / "area.json", [DIAMOND, HOLE], crs=crs))
    np.testing.assert_array_equal(place_area(area, HERE).mask(whole(HERE)), in_diamond(*pixel_centres(HERE)))


def test_long_edges_follow_the_map_they_were_drawn_on() -> None:
    # A parallel of latitude is no straight line in a projection: its middle bows by kilometres.
    wide = Grid(UTM, Affine(1000, 0, 200_000, 0, -1000, 5_700_000), 600, 400)
    area = area_of_bounds(6.0, 49.0, 12.0, 50.0, CRS.from_epsg(4326))
    found = place_area(area, wide).mask(whole(wide))
    x, y = pixel_centres(wide)
    lon, lat = (
        np.reshape(part, wide.shape) for part in transform_points(UTM, area.crs, x.ravel(), y.ravel())
    )
    wanted = (lon > 6.0) & (lon < 12.0) & (lat > 49.0) & (lat < 50.0)
    assert np.count_nonzero(found != wanted) < 5


def test_clipping_keeps_the_pixels() -> None:
    clipped = clip_to_area(HERE, Area(UTM, (DIAMOND, HOLE)))
    assert isinstance(relation(HERE, clipped), OnLattice)
    assert (clipped.width, clipped.height) == (61, 48)
    inside = place_area(Area(UTM, (DIAMOND, HOLE)), clipped).mask(whole(clipped))
    assert inside.sum() == in_diamond(*pixel_centres(HERE)).sum()


def test_an_area_across_the_date_line() -> None:
    geographic = CRS.from_epsg(4326)
    area = area_of_bounds(179.0, -1.0, -179.0, 1.0, geographic)
    for left in (175.0, -185.0):
        where = Grid(geographic, Affine(0.1, 0, left, 0, -0.1, 2.0), 100, 40)
        found = place_area(area, where).mask(whole(where))
        assert found.sum() == 20 * 20
        assert found[20, round((179.05 - 360.0 * (left < 0) - left) / 0.1 - 0.5)]


def test_outside_the_scene(tmp_path: Path) -> None:
    with pytest.raises(
        InputError, match=r"bounds .*: the area of interest lies outside the scene. Check its"
    ):
        clip_to_area(HERE, area_of_bounds(0.0, 0.0, 10.0, 10.0, UTM))
    swapped = read_area(geojson(tmp_path / "area.geojson", [geographic_ring()[:, ::-1]]))
    with pytest.raises(InputError, match=r"area.geojson: .*(longitude first|outside|cannot be placed)"):
        clip_to_area(HERE, swapped)


def binary_polygon(rings: list[np.ndarray], order: str = "<", extra: int = 0) -> bytes:
    """A polygon in well-known binary, with further dimensions of zero."""
    code = 3 + (1000 if extra == 1 else 3000 if extra == 2 else 0)
    content = struct.pack(order + "BII", order == "<", code, len(rings))
    for ring in rings:
        closed = np.concatenate([ring, ring[:1]])
        padded = np.concatenate([closed, np.zeros((len(closed), extra))], axis=1)
        content += struct.pack(order + "I", len(closed)) + padded.astype(order + "f8").tobytes()
    return content


def geopackage(
    path: Path, blobs: list[bytes | None], tables: tuple[str, ...] = ("fields",), system: int = 32632
) -> str:
    with sqlite3.connect(path) as database:
        database.execute(
            "CREATE TABLE gpkg_geometry_columns (table_name TEXT, column_name TEXT, srs_id INTEGER)"
        )
        database.execute("CREATE TABLE gpkg_spatial_ref_sys (srs_id INTEGER, organization TEXT,"
                         " organization_coordsys_id INTEGER, definition TEXT)")  # fmt: skip
        database.execute("INSERT INTO gpkg_spatial_ref_sys VALUES (?, 'EPSG', ?, '')", (system, system))
        for table in tables:
            quoted = '"' + table.replace('"', '""') + '"'
            database.execute("INSERT INTO gpkg_geometry_columns VALUES (?, 'geom', ?)", (table, system))
            database.execute(f"CREATE TABLE {quoted} (fid INTEGER PRIMARY KEY, geom BLOB)")
            for blob in blobs:
                database.execute(f"INSERT INTO {quoted} (geom) VALUES (?)", (blob,))
    database.close()
    return str(path)


def header(flags: int = 1, envelope: int = 0) -> bytes:
    return b"GP" + bytes([0, flags]) + struct.pack("<i", 32632) + bytes(envelope)


@pytest.mark.parametrize("extra", [0, 1, 2])
@pytest.mark.parametrize("order", ["<", ">"])
def test_geopackages(order: str, extra: int, tmp_path: Path) -> None:
    # OGC 12-128: "GP", version, flags (bits 1-3 the envelope's kind, bit 4 empty), srs_id, envelope, WKB.
    blob = header(flags=1 | 1 << 1, envelope=32) + binary_polygon([DIAMOND, HOLE], order, extra)
    area = read_area(geopackage(tmp_path / "area.gpkg", [blob, None, header(flags=1 | 1 << 4)]))
    np.testing.assert_array_equal(place_area(area, HERE).mask(whole(HERE)), in_diamond(*pixel_centres(HERE)))


def test_a_multipolygon_in_a_geopackage(tmp_path: Path) -> None:
    parts = [binary_polygon([DIAMOND]), binary_polygon([HOLE])]
    blob = header() + struct.pack("<BII", 1, 6, 2) + b"".join(parts)
    area = read_area(geopackage(tmp_path / "area.gpkg", [blob]))
    assert len(area.rings) == 2


def test_layers_of_a_geopackage(tmp_path: Path) -> None:
    blob = header() + binary_polygon([DIAMOND])
    path = geopackage(tmp_path / "area.gpkg", [blob], ("fields", 'odd "name'))
    with pytest.raises(
        ConfigError, match=r"holds 2 layers with geometry, and one must be named. Choose from: fields"
    ):
        read_area(path)
    assert len(read_area(path, layer='odd "name').rings) == 1
    with pytest.raises(ConfigError, match="has no layer 'towns'"):
        read_area(path, layer="towns")


@pytest.mark.parametrize(
    ("blob", "message"),
    [
        (b"XX" + bytes(20), "does not begin with GP"),
        (header() + binary_polygon([DIAMOND])[:-20], "a ring breaks off"),
        (header() + struct.pack("<BIdd", 1, 1, 0.0, 0.0), "its kind is 1, and polygons"),
        (header(), "holds a geometry out of shape"),
        (header() + struct.pack("<BIII", 1, 3, 1, 1 << 31), "a ring breaks off"),
        (header() + binary_polygon([DIAMOND * np.nan]), "must be finite numbers"),
    ],
)
def test_geometries_out_of_shape(blob: bytes, message: str, tmp_path: Path) -> None:
    with pytest.raises(InputError, match=message):
        read_area(geopackage(tmp_path / "area.gpkg", [blob]))


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("", "is not valid GeoJSON"),
        ("{", "is not valid GeoJSON"),
        ("[" * 100_000, "nested too deeply"),
        ("[]", "is GeoJSON out of shape"),
        ('{"type": "FeatureCollection"}', "is GeoJSON out of shape"),
        (
            '{"type": "FeatureCollection", "features": []}',
            "holds no polygon. An area of interest is made of polygons",
        ),
        ('{"type": "Point", "coordinates": [1, 2]}', "holds no polygon"),
        ('{"type": "Polygon", "coordinates": [[[1, 2], [3, 4]]]}', "needs at least three points"),
        ('{"type": "Polygon", "coordinates": [[[1, 2], [3, "x"], [5, 6]]]}', "is GeoJSON out of shape"),
        ('{"type": "Polygon", "coordinates": [[[1, 2], [3, NaN], [5, 6]]]}', "must be finite numbers"),
        (
            '{"type": "Polygon", "coordinates": [[[1,2],[3,4],[5,6]]], "crs": {"properties": {"name": "X"}}}',
            "out of",
        ),
    ],
)
def test_geojson_out_of_shape(content: str, message: str, tmp_path: Path) -> None:
    (tmp_path / "area.geojson").write_text(content)
    with pytest.raises(InputError, match=message):
        read_area(str(tmp_path / "area.geojson"))


def test_files_of_another_kind(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no such file"):
        read_area(str(tmp_path / "area.geojson"))
    with pytest.raises(ConfigError, match=r"comes as GeoJSON or GeoPackage, not as .shp"):
        read_area(str(tmp_path / "area.shp"))
    (tmp_path / "area.gpkg").write_text("not a database, although it is long enough to be one" * 10)
    with pytest.raises(InputError, match="is not a GeoPackage that can be read"):
        read_area(str(tmp_path / "area.gpkg"))
