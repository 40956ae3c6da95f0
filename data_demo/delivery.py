"""What the demo hands over: rasters, class table and the truth in words and numbers."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import landscape
import numpy as np
import rasterio
from landscape import CELL, NODE, PIXEL, District
from numpy.typing import NDArray
from rasterio.transform import from_origin

CRS = "EPSG:32633"  # only so that the rasters lie somewhere; nothing real is depicted there
WEST, NORTH = 401010.0, 5352000.0  # m

Float = NDArray[np.float64]


@dataclass(frozen=True)
class Form:
    """How one raster is laid out."""

    description: str
    cell: float = PIXEL  # m
    nodata: float | None = None
    unit: str = "1"
    border: int = 0  # cells outside the district on every side


class Writer:
    """Writes the demo's files into one folder."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        (folder / "truth").mkdir(parents=True, exist_ok=True)

    def raster(self, name: str, bands: NDArray[Any], form: Form) -> None:
        """One GeoTIFF of one or more bands."""
        layers = bands if bands.ndim == 3 else bands[np.newaxis]
        count, height, width = layers.shape
        beyond = form.border * form.cell
        options = {"compress": "deflate", "zlevel": 9, "tiled": True, "blockxsize": 256, "blockysize": 256}
        options["predictor"] = 3 if layers.dtype.kind == "f" else 2
        with rasterio.open(
            self.folder / name,
            "w",
            driver="GTiff",
            crs=CRS,
            transform=from_origin(WEST - beyond, NORTH + beyond, form.cell, form.cell),
            width=width,
            height=height,
            count=count,
            dtype=layers.dtype.name,
            nodata=form.nodata,
            **options,
        ) as raster:
            raster.write(layers)
            raster.descriptions = [form.description] * count
            raster.units = [form.unit] * count
            raster.update_tags(NOTE="invented place, invented sensor")

    def truth(
        self, name: str, values: Float, inside: NDArray[np.bool_], description: str, *, unit: str = "1"
    ) -> None:
        """One raster of the truth, NaN outside the swath."""
        pixels = np.where(inside, values, np.nan).astype(np.float32)
        self.raster(f"truth/{name}.tif", pixels, Form(description, nodata=float("nan"), unit=unit))

    def relief_and_classes(self, district: District) -> None:
        """Elevation, land cover, and what each class code means."""
        relief = Form("ground height above sea level", NODE, -9999.0, "m", landscape.BORDER)
        self.raster("elevation.tif", district.nodes.astype(np.float32), relief)
        self.raster("land_cover.tif", district.classes, Form("land-cover class code", CELL, 0))
        (self.folder / "classes.csv").write_text(class_table(), encoding="utf-8")

    def document(self, name: str, content: dict[str, Any]) -> None:
        """A JSON document, its numbers rounded for reading."""
        text = json.dumps(rounded(content), indent=2) + "\n"
        (self.folder / name).write_text(text, encoding="utf-8")


def class_table() -> str:
    """The class table as CSV: one row per wavelength interval [um], one without for the broadband value.

    The bands overlap a little; between the two intervals the emissivity is meant to run linearly.
    """
    rows = ["class,title,code,from,to,value,uncertainty,broadband_correlation,source"]
    for item in landscape.CLASSES:
        start = f"{item.name.replace(' ', '_')},{item.name},{item.code}"
        end = f"{landscape.BROADBAND_CORRELATION},invented"
        for (low, high), value in zip(((9.9, 11.3), (11.4, 12.9)), item.emissivity, strict=True):
            rows.append(f"{start},{low},{high},{value},{item.uncertainty},{end}")
        rows.append(f"{start},,,{item.broadband},{item.broadband_uncertainty},{end}")
    return "\n".join(rows) + "\n"


def rounded(value: Any) -> Any:
    """Numbers of a document rounded for reading."""
    if isinstance(value, dict):
        return {key: rounded(item) for key, item in value.items()}
    if isinstance(value, list):
        return [rounded(item) for item in value]
    return float(f"{value:.6g}") if isinstance(value, float) else value


def describe_classes(district: District, draws: list[dict[str, float]]) -> list[dict[str, Any]]:
    """Each class: its table values, what this scene drew for it, and its share of the district."""
    return [
        {
            "code": item.code,
            "name": item.name,
            "share": float(np.mean(district.classes == item.code)),
            "drawn_emissivity": drawn,
            "off_in_standard_uncertainties": {
                "band_1": (drawn["band_1"] - item.emissivity[0]) / item.uncertainty,
                "band_2": (drawn["band_2"] - item.emissivity[1]) / item.uncertainty,
                "broadband": (drawn["broadband"] - item.broadband) / item.broadband_uncertainty,
            },
        }
        for item, drawn in zip(landscape.CLASSES, draws, strict=True)
    ]
