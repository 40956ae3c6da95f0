"""Invented level-1 scenes in the three generations of the metadata layout, with small rasters."""

from __future__ import annotations

import json
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from affine import Affine
from rasterio.crs import CRS

from groundglow.raster.grid import Grid
from painted_rasters import write

GRID = Grid(CRS.from_epsg(32632), Affine(30, 0, 599_985, 0, -30, 5_300_015), 60, 50)
COUNTS = np.random.default_rng(4).integers(20_000, 30_000, GRID.shape).astype(np.uint16)
COUNTS[0, :3] = (0, 65535, 25_000)

Groups = dict[str, dict[str, str]]

_CORNERS = {
    "CORNER_UL_PROJECTION_X_PRODUCT": "600000.000",
    "CORNER_UL_PROJECTION_Y_PRODUCT": "5300000.000",
    "THERMAL_LINES": "50",
    "THERMAL_SAMPLES": "60",
}
_UTM = {"MAP_PROJECTION": '"UTM"', "DATUM": '"WGS84"', "UTM_ZONE": "32", "GRID_CELL_SIZE_THERMAL": "30.00"}
_RESCALING = {
    "RADIANCE_MULT_BAND_10": "3.8000E-04",
    "RADIANCE_MULT_BAND_11": "3.4900E-04",
    "RADIANCE_ADD_BAND_10": "0.10000",
    "RADIANCE_ADD_BAND_11": "0.10000",
    "REFLECTANCE_MULT_BAND_4": "2.0000E-05",
    "REFLECTANCE_MULT_BAND_5": "2.0000E-05",
    "REFLECTANCE_ADD_BAND_4": "-0.100000",
    "REFLECTANCE_ADD_BAND_5": "-0.100000",
}
_CONSTANTS = {
    "K1_CONSTANT_BAND_10": "799.0284",
    "K2_CONSTANT_BAND_10": "1329.2405",
    "K1_CONSTANT_BAND_11": "475.6581",
    "K2_CONSTANT_BAND_11": "1198.3494",
}
_LIMITS = {"QUANTIZE_CAL_MAX_BAND_10": "65535", "QUANTIZE_CAL_MIN_BAND_10": "1",
           "QUANTIZE_CAL_MAX_BAND_11": "65535", "QUANTIZE_CAL_MIN_BAND_11": "1"}  # fmt: skip


def _files(stem: str, extra: dict[str, str]) -> dict[str, str]:
    return {f"FILE_NAME_BAND_{n}": f'"{stem}_B{n}.TIF"' for n in (4, 5, 10, 11)} | {
        key: f'"{stem}_{name}.TIF"' for key, name in extra.items()
    }


def collection_2(stem: str = "LC09_L1TP_193027_20220714_20230101_02_T1") -> Groups:
    """The layout of Collection 2, whose processing record repeats keys with other values."""
    files = _files(stem, {"FILE_NAME_QUALITY_L1_PIXEL": "QA_PIXEL",
                          "FILE_NAME_ANGLE_SENSOR_ZENITH_BAND_4": "VZA"})  # fmt: skip
    return {
        "LANDSAT_METADATA_FILE": {},
        "PRODUCT_CONTENTS": {"LANDSAT_PRODUCT_ID": f'"{stem}"', "PROCESSING_LEVEL": '"L1TP"',
                             "COLLECTION_NUMBER": "02", **files},
        "IMAGE_ATTRIBUTES": {"SPACECRAFT_ID": '"LANDSAT_9"', "DATE_ACQUIRED": "2022-07-14",
                             "SCENE_CENTER_TIME": '"10:02:27.4633800Z"', "SUN_ELEVATION": "58.5",
                             "ROLL_ANGLE": "-0.001"},
        "PROJECTION_ATTRIBUTES": {**_UTM, **_CORNERS},
        "LEVEL1_PROCESSING_RECORD": {"PROCESSING_LEVEL": '"L1XX"', "FILE_NAME_BAND_10": '"elsewhere.TIF"'},
        "LEVEL1_MIN_MAX_PIXEL_VALUE": dict(_LIMITS),
        "LEVEL1_RADIOMETRIC_RESCALING": dict(_RESCALING),
        "LEVEL1_THERMAL_CONSTANTS": dict(_CONSTANTS),
    }  # fmt: skip


def collection_1(stem: str = "LC08_L1TP_193027_20180714_20190101_01_T1") -> Groups:
    """The layout of Collection 1."""
    return {
        "L1_METADATA_FILE": {},
        "METADATA_FILE_INFO": {"LANDSAT_PRODUCT_ID": f'"{stem}"', "COLLECTION_NUMBER": "01"},
        "PRODUCT_METADATA": {"SPACECRAFT_ID": '"LANDSAT_8"', "DATE_ACQUIRED": "2018-07-14",
                             "SCENE_CENTER_TIME": '"10:02:27.4633800Z"', **_CORNERS,
                             **_files(stem, {"FILE_NAME_BAND_QUALITY": "BQA"})},
        "IMAGE_ATTRIBUTES": {"SUN_ELEVATION": "58.5"},
        "MIN_MAX_PIXEL_VALUE": dict(_LIMITS),
        "RADIOMETRIC_RESCALING": dict(_RESCALING),
        "TIRS_THERMAL_CONSTANTS": dict(_CONSTANTS),
        "PROJECTION_PARAMETERS": dict(_UTM),
    }  # fmt: skip


def before_collections(stem: str = "LC81930272015195LGN00") -> Groups:
    """The layout before the collections; its times are not quoted."""
    groups = collection_1(stem)
    groups["METADATA_FILE_INFO"] = {"LANDSAT_SCENE_ID": f'"{stem}"'}
    groups["PRODUCT_METADATA"]["DATE_ACQUIRED"] = "2015-07-14"
    groups["PRODUCT_METADATA"]["SCENE_CENTER_TIME"] = "10:02:27.4633800Z"
    return groups


def as_text(groups: Groups, line_end: str = "\n") -> bytes:
    """The text form."""
    root, *names = groups
    lines = [f"GROUP = {root}"]
    for name in names:
        lines += [
            f"  GROUP = {name}",
            *(f"    {k} = {v}" for k, v in groups[name].items()),
            f"  END_GROUP = {name}",
        ]
    return (line_end.join([*lines, f"END_GROUP = {root}", "END"]) + line_end).encode()


def as_json(groups: Groups) -> bytes:
    """The JSON form, in which every value is text."""
    root, *names = groups
    plain = {name: {key: value.strip('"') for key, value in groups[name].items()} for name in names}
    return json.dumps({root: plain}).encode()


@dataclass
class Level1Scene:
    """A folder with metadata and rasters."""

    folder: Path
    groups: Groups
    grid: Grid = GRID
    leave_out: tuple[str, ...] = ()
    metadata: Path = field(init=False)

    def __post_init__(self) -> None:
        self.folder.mkdir(parents=True, exist_ok=True)
        files = self.groups.get("PRODUCT_CONTENTS") or self.groups["PRODUCT_METADATA"]
        rows, columns = self.grid.shape
        for key, value in files.items():
            name = value.strip('"')
            if not key.startswith("FILE_NAME") or any(word in name for word in self.leave_out):
                continue
            pixels = np.resize(COUNTS, (rows, columns))
            if "QA" in name:
                pixels = np.full((rows, columns), 22280 if "QA_PIXEL" in name else 2800, dtype=np.uint16)
            elif "VZA" in name:
                pixels = np.full((rows, columns), 512, dtype=np.int16)
            write(self.folder / name, pixels, self.grid)
        stem = (
            next(v for k, v in files.items() if k.startswith("FILE_NAME_BAND")).strip('"').rsplit("_B", 1)[0]
        )
        self.metadata = self.folder / f"{stem}_MTL.txt"
        self.metadata.write_bytes(as_text(self.groups))
