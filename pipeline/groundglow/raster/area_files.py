"""Areas of interest from GeoJSON and GeoPackage files."""

from __future__ import annotations

import json
import sqlite3
import struct
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path
from typing import Any
from urllib.parse import quote

import numpy as np
from rasterio.crs import CRS
from rasterio.errors import CRSError

from groundglow.errors import ConfigError, InputError
from groundglow.raster.area import Area, Ring
from groundglow.raster.environment import gdal_environment

_LARGEST_DOCUMENT = 64 << 20
_ENVELOPE_BYTES = (0, 32, 48, 48, 64)


def read_area(path: str, *, layer: str | None = None) -> Area:
    """All polygons of a GeoJSON or GeoPackage file as one area.

    Parameters
    ----------
    path : str
        Ending in .geojson, .json or .gpkg.
    layer : str, optional
        Table of a GeoPackage; needed where it holds several.

    Returns
    -------
    Area

    Raises
    ------
    InputError
        If the file is missing, damaged, or holds no polygon.
    ConfigError
        If its kind is not known, or the layer must be named.
    """
    file = Path(path)
    suffix = file.suffix.lower()
    if suffix not in (".geojson", ".json", ".gpkg"):
        raise ConfigError(
            f"an area of interest comes as GeoJSON or GeoPackage, not as {suffix or 'a file without suffix'}",
            where=path,
            remedy="Convert it, for example: ogr2ogr area.geojson INPUT -t_srs EPSG:4326",
        )
    if not file.is_file():
        raise InputError("there is no such file", where=path)
    crs, rings = _geopackage(file, layer) if suffix == ".gpkg" else _geojson(file)
    if not rings:
        raise InputError("holds no polygon", where=path, remedy="An area of interest is made of polygons")
    return Area(crs, rings, path)


def _geojson(file: Path) -> tuple[CRS, tuple[Ring, ...]]:
    """Rings of a GeoJSON document (RFC 7946: longitude and latitude, unless it names another system)."""
    if file.stat().st_size > _LARGEST_DOCUMENT:
        raise InputError("is too large for an area of interest", where=str(file))
    try:
        document = json.loads(file.read_bytes().decode("utf-8-sig"))
    except (OSError, UnicodeDecodeError, json.JSONDecodeError) as error:
        raise InputError(f"is not valid GeoJSON ({error})", where=str(file)) from error
    except RecursionError as error:
        raise InputError("is JSON nested too deeply", where=str(file)) from error
    try:
        rings = tuple(_rings_of_geometry(document))
        named = document.get("crs", {})
        code = named.get("properties", {}).get("name") if isinstance(named, dict) else None
        with gdal_environment():
            crs = CRS.from_user_input(code) if isinstance(code, str) else CRS.from_epsg(4326)
    except (KeyError, TypeError, ValueError, AttributeError, CRSError) as error:
        raise InputError(f"is GeoJSON out of shape ({error})", where=str(file)) from error
    return crs, rings


def _rings_of_geometry(item: Any) -> Iterator[Ring]:
    """Rings of every polygon within a GeoJSON object."""
    kind = item["type"]
    if kind == "FeatureCollection":
        for feature in item["features"]:
            yield from _rings_of_geometry(feature)
    elif kind == "Feature":
        if item["geometry"] is not None:
            yield from _rings_of_geometry(item["geometry"])
    elif kind == "GeometryCollection":
        for geometry in item["geometries"]:
            yield from _rings_of_geometry(geometry)
    elif kind in ("Polygon", "MultiPolygon"):
        polygons = [item["coordinates"]] if kind == "Polygon" else item["coordinates"]
        for polygon in polygons:
            for ring in polygon:
                yield _checked(np.array([position[:2] for position in ring], dtype=np.float64))


def _checked(ring: Ring) -> Ring:
    """A ring of at least three finite points."""
    if ring.ndim != 2 or ring.shape[0] < 3 or ring.shape[1] != 2:
        raise ValueError("a polygon's ring needs at least three points")
    if not np.isfinite(ring).all():
        raise ValueError("a polygon's points must be finite numbers")
    return ring


def _geopackage(file: Path, layer: str | None) -> tuple[CRS, tuple[Ring, ...]]:
    """Rings of one table of a GeoPackage (OGC 12-128)."""
    address = f"file:{quote(str(file.absolute()))}?mode=ro&immutable=1"
    try:
        with closing(sqlite3.connect(address, uri=True)) as database:
            tables = database.execute(
                "SELECT table_name, column_name, srs_id FROM gpkg_geometry_columns"
            ).fetchall()
            table, column, system = _chosen(tables, layer, file)
            definition = database.execute(
                "SELECT organization, organization_coordsys_id, definition FROM gpkg_spatial_ref_sys WHERE srs_id = ?",
                (system,),
            ).fetchone()
            quoted = [name.replace('"', '""') for name in (column, table)]
            blobs = database.execute(f'SELECT "{quoted[0]}" FROM "{quoted[1]}"').fetchall()
    except sqlite3.Error as error:
        raise InputError(f"is not a GeoPackage that can be read ({error})", where=str(file)) from error
    try:
        rings = tuple(ring for (blob,) in blobs if blob is not None for ring in _rings_of_blob(blob))
    except (struct.error, ValueError, IndexError, TypeError) as error:
        raise InputError(f"holds a geometry out of shape ({error})", where=f"{file}, {table}") from error
    return _system(definition, file), rings


def _chosen(tables: list[tuple[str, str, int]], layer: str | None, file: Path) -> tuple[str, str, int]:
    """The table that is meant."""
    names = [name for name, _, _ in tables]
    if layer is None and len(tables) == 1:
        return tables[0]
    if layer is None:
        raise ConfigError(
            f"holds {len(tables)} layers with geometry, and one must be named",
            where=str(file),
            remedy=f"Choose from: {', '.join(names) or 'none'}",
        )
    if layer not in names:
        raise ConfigError(
            f"has no layer {layer!r}", where=str(file), remedy=f"Choose from: {', '.join(names) or 'none'}"
        )
    return tables[names.index(layer)]


def _system(definition: tuple[str, int, str] | None, file: Path) -> CRS:
    """The reference system of a row of the GeoPackage's table."""
    if definition is None:
        raise InputError("does not say its reference system", where=str(file))
    organization, code, text = definition
    try:
        with gdal_environment():
            return CRS.from_epsg(code) if str(organization).upper() == "EPSG" else CRS.from_wkt(text)
    except CRSError as error:
        raise InputError(
            f"has a reference system that is not known ({organization} {code})", where=str(file)
        ) from error


def _rings_of_blob(blob: bytes) -> Iterator[Ring]:
    """Rings of a GeoPackage geometry: a header, then well-known binary."""
    if blob[:2] != b"GP":
        raise ValueError("a geometry does not begin with GP")
    flags = blob[3]
    if flags & 0x10:
        return  # an empty geometry
    envelope = (flags >> 1) & 7
    yield from _Binary(blob, 8 + _ENVELOPE_BYTES[envelope]).rings()


class _Binary:
    """A reader of well-known binary that keeps its place."""

    def __init__(self, content: bytes, place: int) -> None:
        self.content, self.place, self.order = content, place, "<"

    def numbers(self, kind: str, count: int) -> tuple[Any, ...]:
        layout = struct.Struct(f"{self.order}{count}{kind}")
        found = layout.unpack_from(self.content, self.place)
        self.place += layout.size
        return found

    def rings(self) -> Iterator[Ring]:
        """Rings of the polygons within the next geometry."""
        self.order = "<" if self.content[self.place] == 1 else ">"
        self.place += 1
        (code,) = self.numbers("I", 1)
        dimensions = 2 + (1, 1, 2)[code // 1000 - 1] if code >= 1000 else 2
        kind = code % 1000
        if kind == 3:
            (count,) = self.numbers("I", 1)
            for _ in range(count):
                yield self._ring(dimensions)
        elif kind in (6, 7):
            (count,) = self.numbers("I", 1)
            for _ in range(count):
                yield from self.rings()
        else:
            raise ValueError(f"its kind is {kind}, and polygons (3, 6) are needed")

    def _ring(self, dimensions: int) -> Ring:
        (count,) = self.numbers("I", 1)
        if count * dimensions * 8 > len(self.content) - self.place:
            raise ValueError("a ring breaks off")
        values = self.numbers("d", count * dimensions)
        return _checked(np.array(values, dtype=np.float64).reshape(count, dimensions)[:, :2])
