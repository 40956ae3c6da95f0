"""Broken layers are found out, each for its own fault, and sound ones are not."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
from affine import Affine
from rasterio.crs import CRS

from groundglow.layers.check import LayerReport, check_bytes, check_layer
from groundglow.layers.encode import format_of
from groundglow.layers.tags import text_of
from layers.layer_cases import grid_of, quality, temperature, write_layer

GRID = grid_of(700, 900)
FORMAT = format_of("surface_temperature")
TEXT = text_of("surface_temperature")


def check(path: Path, **options: bool) -> LayerReport:
    return check_layer(path, GRID, FORMAT, TEXT, **options)


def by_gdal(
    path: Path, change: dict[str, Any] | None = None, finish: Callable[[Any], None] | None = None
) -> Path:
    """A layer as GDAL's own driver writes it, with something changed."""
    options: dict[str, Any] = {
        "driver": "COG", "width": 900, "height": 700, "count": 1, "dtype": "float32", "crs": GRID.crs,
        "transform": GRID.transform, "nodata": np.nan, "compress": "zstd", "blocksize": 512, "predictor": "yes",
    }  # fmt: skip
    options |= change or {}
    with rasterio.open(
        path, "w", **{key: value for key, value in options.items() if value != "absent"}
    ) as layer:
        layer.units = (TEXT.unit,) * layer.count
        layer.descriptions = (TEXT.description,) * layer.count
        for band in range(layer.count):
            layer.write(np.ones(layer.shape, layer.dtypes[0]), band + 1)
        if finish:
            finish(layer)
    return path


def test_our_own_layers_are_sound(tmp_path: Path) -> None:
    numbers = write_layer(tmp_path / "layer.tif", temperature(700, 900))
    assert check(numbers.path, pixels=True) == LayerReport(numbers.path, ())
    assert check(numbers.path).ok
    assert check_bytes(numbers).ok
    flags = write_layer(tmp_path / "quality.tif", quality(700, 900))
    assert check_layer(flags.path, GRID, format_of("quality"), text_of("quality"), pixels=True).ok


def test_a_sound_layer_by_another_writer_is_sound(tmp_path: Path) -> None:
    """GDAL's own driver is the outside standard here."""
    assert check(by_gdal(tmp_path / "layer.tif"), pixels=True).problems == ()


@pytest.mark.parametrize(
    ("change", "problem"),
    [
        ({"width": 899}, "has 700 x 899 pixels, not 700 x 900"),
        ({"crs": CRS.from_epsg(32634)}, "has the CRS EPSG:32634, not EPSG:32633"),
        ({"crs": "absent"}, "has no CRS"),
        ({"transform": Affine(30, 0, 512_355, 0, -30, 5_212_350)}, "lies up to 0.5 pixels beside its grid"),
        ({"transform": Affine(30.01, 0, 512_340, 0, -30, 5_212_350)}, "lies up to 0.3 pixels beside its grid"),
        ({"dtype": "float64"}, "holds float64, not float32"),
        ({"nodata": -9999}, "has the no-data value -9999.0, not NaN"),
        ({"nodata": "absent"}, "has the no-data value None, not NaN"),
        ({"count": 2}, "has 2 bands, not one"),
        ({"compress": "deflate"}, "is compressed with deflate, not zstd"),
        ({"blocksize": 256}, "is stored in pieces of 256 x 256 pixels, not tiles of 512 x 512"),
        ({"overviews": "none"}, "has overviews [], not [2]"),
        ({"driver": "GTiff", "blocksize": "absent", "predictor": 3}, "is not laid out as a cloud-optimised GeoTIFF"),
        ({"driver": "ENVI", "compress": "absent", "blocksize": "absent", "predictor": "absent"}, "is a ENVI file"),
    ],
)  # fmt: skip
def test_each_fault_is_named(change: dict[str, Any], problem: str, tmp_path: Path) -> None:
    report = check(by_gdal(tmp_path / "layer.tif", change))
    assert not report.ok
    assert any(found.startswith(problem) for found in report.problems), report.problems


@pytest.mark.parametrize(
    ("attribute", "value", "problem"),
    [
        ("units", ("degC",), "has the unit 'degC', not 'K'"),
        ("units", (None,), "has the unit None, not 'K'"),
        ("descriptions", ("band 1",), "is described as 'band 1'"),
        ("scales", (0.01,), "has a scale or offset"),
        ("offsets", (273.15,), "has a scale or offset"),
    ],
)
def test_each_wrong_tag_is_named(attribute: str, value: Any, problem: str, tmp_path: Path) -> None:
    path = by_gdal(tmp_path / "layer.tif", finish=lambda layer: setattr(layer, attribute, value))
    (found,) = check(path).problems
    assert found.startswith(problem)


def test_flags_need_no_nodata(tmp_path: Path) -> None:
    path = by_gdal(tmp_path / "layer.tif", {"dtype": "uint16", "nodata": 0})
    report = check_layer(path, GRID, format_of("quality"), TEXT)
    assert report.problems == ("has the no-data value 0.0, and flags need none",)


def test_a_layer_changed_in_place_is_noticed(tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "layer.tif", temperature(700, 900))
    # Pixels that compress worse than the tile before find no room in its place.
    noise = np.random.default_rng(9).normal(0, 1, (512, 512)).astype(np.float32)
    with rasterio.open(layer.path, "r+", IGNORE_COG_LAYOUT_BREAK="YES") as opened:
        opened.write(noise, 1, window=((0, 512), (0, 512)))
    assert (
        "is not laid out as a cloud-optimised GeoTIFF, or has been changed since"
        in check(layer.path).problems
    )
    assert len(check_bytes(layer).problems) >= 1


def test_a_truncated_layer_is_noticed(tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "layer.tif", temperature(700, 900))
    data = layer.path.read_bytes()
    layer.path.write_bytes(data[: len(data) // 2])
    assert any(
        found.startswith("full resolution cannot be read")
        for found in check(layer.path, pixels=True).problems
    )
    assert check_bytes(layer).problems[0] == f"has {len(data) // 2} bytes, not {len(data)}"


def test_a_damaged_tile_is_noticed(tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "layer.tif", temperature(700, 900))
    data = bytearray(layer.path.read_bytes())
    data[-5000:-4000] = bytes(1000)
    layer.path.write_bytes(data)
    assert check(layer.path).ok, "the header is sound"
    assert not check(layer.path, pixels=True).ok
    (problem,) = check_bytes(layer).problems
    assert problem.startswith("has the SHA-256 ")


@pytest.mark.parametrize("content", [None, b"", b"this is text, not a raster", b"II*\0"])
def test_what_is_no_raster_is_reported_not_raised(content: bytes | None, tmp_path: Path) -> None:
    path = tmp_path / "layer.tif"
    if content is not None:
        path.write_bytes(content)
    (problem,) = check(path).problems
    assert problem.startswith("cannot be opened: ")


def test_a_missing_file_has_no_bytes(tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "layer.tif", temperature(20, 20))
    layer.path.unlink()
    assert check_bytes(layer).problems == ("cannot be read: No such file or directory",)
