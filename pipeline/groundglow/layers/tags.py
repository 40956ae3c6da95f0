"""What a layer says about itself: place, "no data", unit, names, statistics.

GDAL stays the authority on these tags: a small file that it writes in memory is taken apart, and
its tags are copied into ours.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import rasterio
from rasterio.io import MemoryFile

from groundglow.errors import OutputError
from groundglow.layers.layer_format import LayerFormat
from groundglow.layers.statistics import LayerStatistics
from groundglow.layers.tiff_structure import Tag, read_tags
from groundglow.quantities import FLAGS, quantity
from groundglow.raster.grid import Grid

# Below this number stand the tags for the shape of the image, which are ours.
_FIRST_DESCRIBING_TAG = 33000


@dataclass(frozen=True)
class LayerText:
    """What a layer carries in words.

    Attributes
    ----------
    description : str
        Shown as the name of the band; ends with the unit, since not every GIS shows unit tags.
    unit : str
        In CF notation; "1" for a pure number.
    band : mapping
        Metadata items of the band, such as ``standard_name``.
    dataset : mapping
        Metadata items of the file. No times, hosts or versions: they would change its bytes.
    """

    description: str
    unit: str
    band: Mapping[str, str] = field(default_factory=dict)
    dataset: Mapping[str, str] = field(default_factory=dict)


def text_of(name: str, dataset: Mapping[str, str] | None = None) -> LayerText:
    """Text of the final layer of a quantity.

    Parameters
    ----------
    name : str
        Name of the quantity. The quality layer lists its flags as CF does (``flag_masks`` and
        ``flag_meanings``, section 3.5 of the CF conventions).
    dataset : mapping, optional
        Metadata items of the file.

    Raises
    ------
    ConfigError
        If there is no such quantity.
    """
    described = quantity(name)
    band = {"name": name, "long_name": described.long_name, "units": described.unit}
    if described.standard_name:
        band["standard_name"] = described.standard_name
    if name == "quality":
        band["flag_masks"] = ", ".join(str(flag.mask) for flag in FLAGS)
        band["flag_meanings"] = " ".join(flag.name for flag in FLAGS)
    suffix = "" if described.unit == "1" else f" [{described.unit}]"
    return LayerText(described.long_name + suffix, described.unit, band, dataset or {})


def describing_tags(
    grid: Grid, layer_format: LayerFormat, text: LayerText, statistics: LayerStatistics
) -> list[Tag]:
    """The TIFF tags that say where a layer lies and what it means.

    Parameters
    ----------
    grid : Grid
        Place of the layer.
    layer_format : LayerFormat
        Numbers get NaN as their "no data" value, flags none: each of their values is meant.
    text : LayerText
        Names and unit.
    statistics : LayerStatistics
        Written under the names that GDAL knows; left out for flags and where nothing is valid.

    Raises
    ------
    OutputError
        If GDAL cannot express the grid.
    """
    with MemoryFile() as memory:
        try:
            with memory.open(
                driver="GTiff",
                width=1,
                height=1,
                count=1,
                dtype=layer_format.dtype,
                crs=grid.crs,
                transform=grid.transform,
                nodata=None if layer_format.flags else math.nan,
                BIGTIFF="NO",
                ENDIANNESS="LITTLE",
            ) as small:
                small.descriptions = (text.description,)
                small.units = (text.unit,)
                small.update_tags(**text.dataset)
                small.update_tags(1, **text.band, **_statistics_items(statistics))
        except rasterio.errors.RasterioError as error:
            raise OutputError(
                f"the grid cannot be written as GeoTIFF tags: {error}", where=layer_format.name
            ) from error
        tags = read_tags(memory.read())
    return [tag for tag in tags if tag.number >= _FIRST_DESCRIBING_TAG]


def _statistics_items(statistics: LayerStatistics) -> dict[str, str]:
    """Statistics as GDAL's metadata items."""
    if statistics.values or not statistics.count:
        return {}
    return {
        "STATISTICS_MINIMUM": repr(statistics.minimum),
        "STATISTICS_MAXIMUM": repr(statistics.maximum),
        "STATISTICS_MEAN": repr(statistics.mean),
        "STATISTICS_STDDEV": repr(statistics.standard_deviation),
        "STATISTICS_VALID_PERCENT": f"{statistics.valid_percent:.4g}",
    }
