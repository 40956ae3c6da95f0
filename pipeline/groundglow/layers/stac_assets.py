"""The assets of a scene's Item: its layers with their bands, and the files beside them."""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from groundglow.layers.files import output_errors
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.statistics import LayerStatistics
from groundglow.quantities import FLAGS
from groundglow.raster.grid import Grid

GEOTIFF = "image/tiff; application=geotiff; profile=cloud-optimized"

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


def layer_asset(layer: LayerSummary, grid: Grid) -> dict[str, Any]:
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


def asset_of_file(one: FileAsset) -> dict[str, Any]:
    """One file beside the layers."""
    return {
        "href": one.href,
        "type": one.media_type,
        "title": one.title,
        "roles": list(one.roles),
        "file:size": one.size,
        "file:checksum": _SHA256 + one.sha256,
    }
