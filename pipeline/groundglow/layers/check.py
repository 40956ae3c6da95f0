"""Opens a finished layer again and reports whatever is not as it was meant."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import rasterio
from rasterio.errors import RasterioError

from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.layer_format import LayerFormat
from groundglow.layers.pyramid import level_shapes
from groundglow.layers.tags import LayerText
from groundglow.raster.grid import TILE, Grid

# Corners may move by this share of a pixel when GeoTIFF tags go through text and back.
_PIXEL_SHARE = 1e-6


@dataclass(frozen=True)
class LayerReport:
    """What was found in a file.

    Attributes
    ----------
    path : Path
        The file.
    problems : tuple of str
        One clause each, with what was found and what was meant; empty if all is well.
    """

    path: Path
    problems: tuple[str, ...]

    @property
    def ok(self) -> bool:
        """Whether nothing was found."""
        return not self.problems


def check_layer(
    path: Path, grid: Grid, layer_format: LayerFormat, text: LayerText, *, pixels: bool = False
) -> LayerReport:
    """Compare a file with the layer it should be.

    Parameters
    ----------
    path : Path
        The file.
    grid : Grid
        Where the layer lies.
    layer_format : LayerFormat
        How it is stored.
    text : LayerText
        Unit and description it carries.
    pixels : bool
        Whether to decode every tile of every level too.

    Returns
    -------
    LayerReport
        Nothing is raised for a bad file, not even one that cannot be opened.
    """
    try:
        with rasterio.open(path) as layer:
            problems = [
                *_of_grid(layer, grid),
                *_of_values(layer, layer_format, text),
                *_of_structure(layer, grid, layer_format),
            ]
        problems += _of_overviews(path, grid, pixels=pixels)
    except RasterioError as error:
        return LayerReport(path, (f"cannot be opened: {error}",))
    return LayerReport(path, tuple(problems))


def check_bytes(layer: LayerSummary) -> LayerReport:
    """Compare a file's size and checksum with those noted when it was written.

    Parameters
    ----------
    layer : LayerSummary
        What the writer gave.

    Returns
    -------
    LayerReport
    """
    try:
        data = layer.path.read_bytes()
    except OSError as error:
        return LayerReport(layer.path, (f"cannot be read: {error.strerror}",))
    problems = []
    if len(data) != layer.size:
        problems.append(f"has {len(data)} bytes, not {layer.size}")
    found = hashlib.sha256(data).hexdigest()
    if found != layer.sha256:
        problems.append(f"has the SHA-256 {found}, not {layer.sha256}")
    return LayerReport(layer.path, tuple(problems))


def _of_grid(layer: Any, grid: Grid) -> Iterator[str]:
    """Size, CRS and place."""
    if layer.shape != grid.shape:
        yield f"has {layer.height} x {layer.width} pixels, not {grid.height} x {grid.width}"
    if layer.crs is None:
        yield "has no CRS"
    elif layer.crs != grid.crs:
        yield f"has the CRS {layer.crs}, not {grid.crs}"
    size = max(abs(part) for part in (grid.transform.a, grid.transform.b, grid.transform.d, grid.transform.e))
    corners = [(column, row) for row in (0, grid.height) for column in (0, grid.width)]
    moved = max(_distance(layer.transform, grid.transform, *corner) for corner in corners)
    if not moved <= _PIXEL_SHARE * size:
        yield f"lies up to {moved / size:.3g} pixels beside its grid"


def _distance(found: Any, meant: Any, column: int, row: int) -> float:
    """How far two transforms put the same pixel corner apart."""
    across = (found.a - meant.a) * column + (found.b - meant.b) * row + found.c - meant.c
    down = (found.d - meant.d) * column + (found.e - meant.e) * row + found.f - meant.f
    return math.hypot(across, down)


def _of_values(layer: Any, layer_format: LayerFormat, text: LayerText) -> Iterator[str]:
    """Bands, data type, "no data", unit and description."""
    if layer.count != 1:
        yield f"has {layer.count} bands, not one"
    if layer.dtypes[0] != layer_format.dtype:
        yield f"holds {layer.dtypes[0]}, not {layer_format.dtype}"
    nodata = layer.nodatavals[0]
    if layer_format.flags and nodata is not None:
        yield f"has the no-data value {nodata}, and flags need none"
    if not layer_format.flags and (nodata is None or not math.isnan(nodata)):
        yield f"has the no-data value {nodata}, not NaN"
    if layer.units[0] != text.unit:
        yield f"has the unit {layer.units[0]!r}, not {text.unit!r}"
    if layer.descriptions[0] != text.description:
        yield f"is described as {layer.descriptions[0]!r}, not {text.description!r}"
    if (layer.scales[0], layer.offsets[0]) != (1.0, 0.0):
        yield "has a scale or offset, which many programs do not apply"


def _of_structure(layer: Any, grid: Grid, layer_format: LayerFormat) -> Iterator[str]:
    """File format, tiles, compression and the order that makes the file cloud-optimised."""
    if layer.driver != "GTiff":
        yield f"is a {layer.driver} file, not a GeoTIFF"
    if layer.block_shapes[0] != (TILE, TILE):
        height, width = layer.block_shapes[0]
        yield f"is stored in pieces of {height} x {width} pixels, not tiles of {TILE} x {TILE}"
    structure = layer.tags(ns="IMAGE_STRUCTURE")
    compression = structure.get("COMPRESSION", "none").lower()
    if compression != layer_format.compression:
        yield f"is compressed with {compression}, not {layer_format.compression}"
    if structure.get("LAYOUT") != "COG":
        yield "is not laid out as a cloud-optimised GeoTIFF, or has been changed since"
    expected = [2**level for level in range(1, len(level_shapes(*grid.shape)))]
    if layer.overviews(1) != expected:
        yield f"has overviews {layer.overviews(1)}, not {expected}"


def _of_overviews(path: Path, grid: Grid, *, pixels: bool) -> Iterator[str]:
    """Shape of every level, and whether its tiles can be decoded."""
    for level, shape in enumerate(level_shapes(*grid.shape)):
        options = {"overview_level": level - 1} if level else {}
        name = f"overview {level}" if level else "full resolution"
        try:
            with rasterio.open(path, **options) as opened:
                if level and opened.shape != shape:
                    yield f"{name} has {opened.shape[0]} x {opened.shape[1]} pixels, not {shape[0]} x {shape[1]}"
                if pixels:
                    for _, window in opened.block_windows(1):
                        opened.read(1, window=window)
        except RasterioError as error:
            yield f"{name} cannot be read: {error}"
