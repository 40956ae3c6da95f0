"""The STAC Item of a scene: what was made, where, when, from what, and how far to trust it.

The Item is built by hand from plain values, so that no run waits for a catalogue library, and in a
fixed order, so that two Items differ only where their content does.

References
----------
SpatioTemporal Asset Catalog Item specification 1.1.0. Its extensions: projection 2.0.0, raster
2.0.0, view geometry 1.1.0, processing 1.2.0, classification 2.0.0, file info 2.1.0.
"""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from groundglow.errors import DomainError
from groundglow.layers.cautions import CAUTIONS
from groundglow.layers.files import output_errors, write_whole
from groundglow.layers.footprint import footprint
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.statistics import LayerStatistics
from groundglow.quantities import FLAGS
from groundglow.raster.grid import Grid

STAC_VERSION = "1.1.0"
GEOTIFF = "image/tiff; application=geotiff; profile=cloud-optimized"

_EXTENSION = "https://stac-extensions.github.io/{}/schema.json"
PROJECTION = _EXTENSION.format("projection/v2.0.0")
RASTER = _EXTENSION.format("raster/v2.0.0")
VIEW = _EXTENSION.format("view/v1.1.0")
PROCESSING = _EXTENSION.format("processing/v1.2.0")
CLASSIFICATION = _EXTENSION.format("classification/v2.0.0")
FILE = _EXTENSION.format("file/v2.1.0")

# A multihash says which function made it (0x12: SHA-256) and how long it is (0x20 bytes).
_SHA256 = "1220"


@dataclass(frozen=True)
class FileAsset:
    """A file beside the layers: a style, a preview, a sheet.

    Attributes
    ----------
    key : str
        Key of the asset in the Item.
    href : str
        Relative to the Item.
    title, media_type : str
    roles : tuple of str
        Such as "style", "thumbnail", "overview", "metadata".
    size : int
        [byte]
    sha256 : str
        In hexadecimal.
    """

    key: str
    href: str
    title: str
    media_type: str
    roles: tuple[str, ...]
    size: int
    sha256: str


@dataclass(frozen=True)
class SceneRecord:
    """What an Item says of its scene as a whole.

    Attributes
    ----------
    name : str
        Identifier of the Item.
    acquired, processed : datetime
        With their offsets from UTC.
    grid : Grid
        The grid that all layers share.
    title, description : str
        For a reader; the cautions are added to the description.
    software : mapping
        Name and version of each program and library that decides the result.
    lineage : str
        How the layers were made, in words.
    provenance : mapping
        Inputs with checksums, configuration, method, atmosphere, sensor, assumptions: anything
        that JSON can hold.
    sensor : str
        Name of the instrument.
    platform : str, optional
    native_footprint : float, optional
        Ground footprint of the sensor. [m]
    view_zenith_angle, sun_elevation : float, optional
        For the scene as a whole. [deg]
    more : mapping
        Further properties; their keys need a prefix of their own.
    """

    name: str
    acquired: datetime
    processed: datetime
    grid: Grid
    title: str
    description: str
    software: Mapping[str, str]
    lineage: str
    provenance: Mapping[str, Any]
    sensor: str
    platform: str | None = None
    native_footprint: float | None = None
    view_zenith_angle: float | None = None
    sun_elevation: float | None = None
    more: Mapping[str, Any] = field(default_factory=dict)


def file_asset(path: Path, key: str, title: str, media_type: str, roles: tuple[str, ...]) -> FileAsset:
    """Describe a finished file in the folder of the Item.

    Raises
    ------
    OutputError
        If it cannot be read back.
    """
    with output_errors(path):
        data = path.read_bytes()
    return FileAsset(
        key, f"./{path.name}", title, media_type, roles, len(data), hashlib.sha256(data).hexdigest()
    )


def scene_item(
    record: SceneRecord, layers: Sequence[LayerSummary], files: Sequence[FileAsset] = ()
) -> dict[str, Any]:
    """The STAC Item of a scene.

    Parameters
    ----------
    record : SceneRecord
        The scene.
    layers : sequence of LayerSummary
        The finished layers, in the folder of the Item.
    files : sequence of FileAsset
        What else lies there.

    Returns
    -------
    dict
        Ready for JSON; key order is fixed.

    Raises
    ------
    DomainError
        If a time has no offset from UTC.
    """
    geometry, bbox = footprint(record.grid)
    item: dict[str, Any] = {
        "type": "Feature",
        "stac_version": STAC_VERSION,
        "stac_extensions": _extensions(record, layers),
        "id": record.name,
        "geometry": geometry,
    }
    if bbox is not None:
        item["bbox"] = bbox
    item["properties"] = _properties(record)
    item["links"] = []
    assets = {layer.name: _layer_asset(layer, record.grid) for layer in layers}
    assets |= {one.key: _file_asset(one) for one in files}
    item["assets"] = assets
    return item


def write_item(path: Path, item: Mapping[str, Any], *, durable: bool = False) -> None:
    """Write an Item so that it is there whole or not at all.

    Parameters
    ----------
    path : Path
        The file; replaced if it exists.
    item : mapping
        What :func:`scene_item` gave.
    durable : bool
        Whether to wait until it has reached the disk.

    Raises
    ------
    OutputError
        If it cannot be written.
    """
    write_whole(path, json_text(item).encode(), durable=durable)


def json_text(value: object) -> str:
    """Indented JSON in a fixed order, without numbers that JSON does not know."""
    return json.dumps(value, indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _extensions(record: SceneRecord, layers: Sequence[LayerSummary]) -> list[str]:
    """The extensions whose fields the Item carries."""
    used = [PROJECTION, PROCESSING]
    if layers:
        used += [RASTER]
    if any(layer.layer_format.flags for layer in layers):
        used += [CLASSIFICATION]
    if record.view_zenith_angle is not None or record.sun_elevation is not None:
        used += [VIEW]
    return [*used, FILE]


def _properties(record: SceneRecord) -> dict[str, Any]:
    """Times, words, place, geometry of view and provenance."""
    processed = _utc(record.processed)
    properties: dict[str, Any] = {
        "title": record.title,
        "description": "\n\n".join([record.description, "Cautions:", *(f"- {text}" for text in CAUTIONS)]),
        "datetime": _utc(record.acquired),
        "created": processed,
        "instruments": [record.sensor],
    }
    if record.platform is not None:
        properties["platform"] = record.platform
    if record.native_footprint is not None:
        properties["gsd"] = record.native_footprint
    if record.view_zenith_angle is not None:
        properties["view:incidence_angle"] = record.view_zenith_angle
    if record.sun_elevation is not None:
        properties["view:sun_elevation"] = record.sun_elevation
    properties |= _place(record.grid)
    properties["processing:level"] = "L2"
    properties["processing:datetime"] = processed
    properties["processing:lineage"] = record.lineage
    properties["processing:software"] = dict(record.software)
    properties["groundglow:provenance"] = dict(record.provenance)
    return properties | dict(record.more)


def _place(grid: Grid) -> dict[str, Any]:
    """The grid in the words of the projection extension."""
    code = grid.crs.to_epsg()
    place: dict[str, Any] = {"proj:code": f"EPSG:{code}" if code else None}
    if not code:
        place["proj:wkt2"] = grid.crs.to_wkt(version="WKT2_2019")
    corners = [
        (
            grid.transform.a * column + grid.transform.b * row + grid.transform.c,
            grid.transform.d * column + grid.transform.e * row + grid.transform.f,
        )
        for row in (0, grid.height)
        for column in (0, grid.width)
    ]
    x, y = zip(*corners, strict=True)
    place["proj:bbox"] = [min(x), min(y), max(x), max(y)]
    place["proj:shape"] = [grid.height, grid.width]
    place["proj:transform"] = list(grid.transform)[:6]
    return place


def _layer_asset(layer: LayerSummary, grid: Grid) -> dict[str, Any]:
    """One layer with its only band."""
    flags = layer.layer_format.flags
    asset: dict[str, Any] = {
        "href": f"./{layer.path.name}",
        "type": GEOTIFF,
        "title": layer.text.description,
        "roles": _roles(layer),
        "bands": [_band(layer, grid)],
    }
    if flags:
        asset["classification:bitfields"] = _bit_fields()
    asset["file:size"] = layer.size
    asset["file:checksum"] = _SHA256 + layer.sha256
    asset["file:byte_order"] = "little-endian"
    return asset


def _roles(layer: LayerSummary) -> list[str]:
    """What a layer is there for."""
    if layer.layer_format.flags:
        return ["metadata", "data-mask"]
    return ["data", "uncertainty"] if "uncertainty" in layer.name else ["data"]


def _band(layer: LayerSummary, grid: Grid) -> dict[str, Any]:
    """The band of a layer: type, unit, "no data", statistics, sampling."""
    band: dict[str, Any] = {
        "name": layer.name,
        "description": layer.text.description,
        "data_type": layer.layer_format.dtype,
    }
    if not layer.layer_format.flags:
        band["nodata"] = "nan"
    band["unit"] = layer.text.unit
    statistics = _statistics(layer.statistics)
    if statistics:
        band["statistics"] = statistics
    band["raster:sampling"] = "area"
    if not grid.crs.is_geographic:
        across = math.hypot(grid.transform.a, grid.transform.d)
        down = math.hypot(grid.transform.b, grid.transform.e)
        band["raster:spatial_resolution"] = math.sqrt(across * down) * grid.crs.linear_units_factor[1]
    return band


def _statistics(statistics: LayerStatistics) -> dict[str, Any]:
    """Statistics of a layer of numbers in the words of STAC; none for flags."""
    if statistics.values:
        return {}
    share = {"count": statistics.pixels, "valid_percent": statistics.valid_percent}
    if not statistics.count:
        return share
    return {
        "minimum": statistics.minimum,
        "maximum": statistics.maximum,
        "mean": statistics.mean,
        "stddev": statistics.standard_deviation,
        **share,
    }


def _bit_fields() -> list[dict[str, Any]]:
    """The flags, one bit each."""
    return [
        {
            "offset": flag.mask.bit_length() - 1,
            "length": 1,
            "name": flag.name,
            "description": flag.title,
            "classes": [
                {"value": 0, "name": f"not_{flag.name}", "description": f"not flagged: {flag.title}"},
                {"value": 1, "name": flag.name, "description": flag.title},
            ],
        }
        for flag in FLAGS
    ]


def _file_asset(one: FileAsset) -> dict[str, Any]:
    """One file beside the layers."""
    return {
        "href": one.href,
        "type": one.media_type,
        "title": one.title,
        "roles": list(one.roles),
        "file:size": one.size,
        "file:checksum": _SHA256 + one.sha256,
    }


def _utc(moment: datetime) -> str:
    """A time as STAC writes it."""
    if moment.tzinfo is None:
        raise DomainError(f"the time {moment.isoformat()} has no offset from UTC")
    return moment.astimezone(UTC).isoformat().replace("+00:00", "Z")
