"""The STAC Item of a scene: what was made, where, when, from what, and how far to trust it.

The Item is built by hand from plain values, so that no run waits for a catalogue library, and in a
fixed order, so that two Items differ only where their content does.

References
----------
SpatioTemporal Asset Catalog Item specification 1.1.0. Its extensions: projection 2.0.0, raster
2.0.0, view geometry 1.1.0, processing 1.2.0, classification 2.0.0, file info 2.1.0.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from groundglow.errors import DomainError
from groundglow.layers.cautions import CAUTIONS
from groundglow.layers.files import write_whole
from groundglow.layers.footprint import footprint
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.stac_assets import FileAsset, asset_of_file, file_asset, layer_asset
from groundglow.raster.grid import Grid

__all__ = ["FileAsset", "SceneRecord", "file_asset", "json_text", "scene_item", "write_item"]

STAC_VERSION = "1.1.0"
_EXTENSION = "https://stac-extensions.github.io/{}/schema.json"
PROJECTION = _EXTENSION.format("projection/v2.0.0")
RASTER = _EXTENSION.format("raster/v2.0.0")
VIEW = _EXTENSION.format("view/v1.1.0")
PROCESSING = _EXTENSION.format("processing/v1.2.0")
CLASSIFICATION = _EXTENSION.format("classification/v2.0.0")
FILE = _EXTENSION.format("file/v2.1.0")


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
    assets = {layer.name: layer_asset(layer, record.grid) for layer in layers}
    assets |= {one.key: asset_of_file(one) for one in files}
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


def _utc(moment: datetime) -> str:
    """A time as STAC writes it."""
    if moment.tzinfo is None:
        raise DomainError(f"the time {moment.isoformat()} has no offset from UTC")
    return moment.astimezone(UTC).isoformat().replace("+00:00", "Z")
