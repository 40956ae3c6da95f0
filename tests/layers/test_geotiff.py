"""What is written is a cloud-optimised GeoTIFF that other programs read as it was meant."""

from __future__ import annotations

import functools
import hashlib
import math
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
import tifffile
from affine import Affine
from rasterio.crs import CRS
from rio_cogeo.cogeo import cog_validate

from groundglow.errors import DomainError
from groundglow.layers.encode import encode_block, format_of
from groundglow.layers.geotiff import LayerWriter
from groundglow.layers.tags import text_of
from groundglow.quantities import FLAGS
from groundglow.raster.grid import Grid
from layers.cog_rules import broken_rules, decoded_tiles
from layers.layer_cases import (
    cut,
    grid_of,
    majority_overview,
    mean_overview,
    quality,
    rounded,
    temperature,
    write_layer,
)

SHAPES = [(2051, 3075), (512, 512), (513, 511), (100, 37), (1, 1), (1, 1500), (1024, 2048)]


@pytest.fixture(scope="module")
def written(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One folder with a layer of each kind, odd in size."""
    folder = tmp_path_factory.mktemp("layers")
    write_layer(folder / "temperature.tif", temperature())
    write_layer(folder / "quality.tif", quality())
    write_layer(folder / "deflate.tif", temperature(), format_of("surface_temperature", "deflate"))
    write_layer(folder / "big.tif", temperature(), bigtiff_above=1_000_000)
    write_layer(folder / "big_flags.tif", quality(), bigtiff_above=0)
    return folder


NAMES = ["temperature", "quality", "deflate", "big", "big_flags"]


@functools.cache
def expected_levels(name: str) -> list[Any]:
    """What each level should hold, stated in NumPy: nothing is rounded on the way up."""
    if name in ("quality", "big_flags"):
        flags = [quality()]
        while max(flags[-1].shape) > 512:
            flags.append(majority_overview(flags[-1]))
        return flags
    levels = [rounded(temperature(), 15)]
    while max(levels[-1].shape) > 512:
        levels.append(mean_overview(levels[-1]))
    return [rounded(level, 15) for level in levels]


@pytest.mark.parametrize("name", NAMES)
def test_two_strict_validators_find_nothing(written: Path, name: str) -> None:
    path = written / f"{name}.tif"
    valid, errors, warnings = cog_validate(str(path), strict=True)
    assert (valid, errors, warnings) == (True, [], [])
    assert broken_rules(path) == []


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("make", [temperature, quality])
def test_any_size_is_valid_and_comes_back(shape: tuple[int, int], make: Any, tmp_path: Path) -> None:
    pixels = make(*shape)
    path = tmp_path / "layer.tif"
    write_layer(path, pixels)
    assert broken_rules(path) == []
    assert cog_validate(str(path), strict=True)[0]
    with rasterio.open(path) as layer:
        assert layer.shape == shape, "full resolution is never padded"
        stored = layer.read(1)
    expected = pixels if make is quality else rounded(pixels, 15)
    assert np.array_equal(stored, expected, equal_nan=True)


@pytest.mark.parametrize("name", NAMES)
def test_gdal_reads_every_level_as_stated(written: Path, name: str) -> None:
    path = written / f"{name}.tif"
    expected = expected_levels(name)
    with rasterio.open(path) as layer:
        assert layer.overviews(1) == [2, 4, 8]
        assert np.array_equal(layer.read(1), expected[0], equal_nan=name not in ("quality", "big_flags"))
    for index, pixels in enumerate(expected[1:]):
        with rasterio.open(path, overview_level=index) as overview:
            stored = overview.read(1)
            assert overview.shape == pixels.shape
        assert np.array_equal(stored, pixels, equal_nan=pixels.dtype == np.float32)


@pytest.mark.parametrize("name", NAMES)
def test_tiles_decode_without_gdal_and_are_padded_with_nothing(written: Path, name: str) -> None:
    for level, pixels in enumerate(expected_levels(name)):
        stored = decoded_tiles(written / f"{name}.tif", level)
        height, width = pixels.shape
        flags = pixels.dtype == np.uint16
        assert np.array_equal(stored[:height, :width], pixels, equal_nan=not flags)
        padding = np.concatenate([stored[height:].ravel(), stored[:, width:].ravel()])
        assert (padding == 0).all() if flags else np.isnan(padding).all()


def test_bigtiff_only_where_it_is_needed(written: Path) -> None:
    for name, big in (("temperature", False), ("big", True), ("big_flags", True)):
        with tifffile.TiffFile(written / f"{name}.tif") as tiff:
            assert tiff.is_bigtiff is big
            assert tiff.pages.first.tags[324].dtype.name == ("LONG8" if big else "LONG")


def test_bigtiff_begins_exactly_at_the_limit(tmp_path: Path) -> None:
    size = write_layer(tmp_path / "layer.tif", temperature(600, 600)).size
    for limit, big in ((size + 1, False), (size, True)):
        write_layer(tmp_path / "layer.tif", temperature(600, 600), bigtiff_above=limit)
        with tifffile.TiffFile(tmp_path / "layer.tif") as tiff:
            assert tiff.is_bigtiff is big


@pytest.mark.parametrize(
    ("name", "codec", "predictor"),
    [("temperature", "zstd", 3), ("deflate", "deflate", 3), ("quality", "zstd", 2)],
)
def test_gdal_knows_codec_and_predictor(written: Path, name: str, codec: str, predictor: int) -> None:
    with rasterio.open(written / f"{name}.tif") as layer:
        structure = layer.tags(ns="IMAGE_STRUCTURE")
        assert structure["COMPRESSION"] == codec.upper()
        assert structure["PREDICTOR"] == str(predictor)
        assert structure["LAYOUT"] == "COG"
        assert layer.block_shapes == [(512, 512)]


def test_place_unit_names_and_nodata(written: Path) -> None:
    with rasterio.open(written / "temperature.tif") as layer:
        grid = grid_of(*layer.shape)
        assert (layer.crs, layer.transform) == (grid.crs, grid.transform)
        assert math.isnan(layer.nodata)
        assert layer.units == ("K",)
        assert layer.descriptions == ("radiometric surface (skin) temperature [K]",)
        assert (layer.scales, layer.offsets) == ((1.0,), (0.0,)), "no reader has to scale"
        assert layer.tags()["AREA_OR_POINT"] == "Area"
        items = layer.tags(1)
    assert items["standard_name"] == "surface_temperature"
    assert items["long_name"] == "radiometric surface (skin) temperature"
    assert items["units"] == "K"
    for index in range(3):
        with rasterio.open(written / "temperature.tif", overview_level=index) as overview:
            assert math.isnan(overview.nodata)


def test_quality_lists_its_flags_as_cf_does(written: Path) -> None:
    # CF conventions 1.11, section 3.5: as many masks as meanings, meanings separated by blanks.
    with rasterio.open(written / "quality.tif") as layer:
        assert layer.nodata is None, "every value of a flag layer is meant"
        assert layer.dtypes == ("uint16",)
        items = layer.tags(1)
    masks = [int(mask) for mask in items["flag_masks"].split(",")]
    assert dict(zip(items["flag_meanings"].split(" "), masks, strict=True)) == {
        flag.name: flag.mask for flag in FLAGS
    }
    assert items["standard_name"] == "quality_flag"
    assert not [key for key in items if key.startswith("STATISTICS")], "a mean of flags means nothing"


def test_statistics_are_of_the_stored_values(written: Path) -> None:
    with rasterio.open(written / "temperature.tif") as layer:
        items = layer.tags(1)
        stored = layer.read(1).astype(np.float64)
    numbers = stored[np.isfinite(stored)]
    assert float(items["STATISTICS_MINIMUM"]) == numbers.min()
    assert float(items["STATISTICS_MAXIMUM"]) == numbers.max()
    assert float(items["STATISTICS_MEAN"]) == pytest.approx(numbers.mean(), rel=1e-12)
    assert float(items["STATISTICS_STDDEV"]) == pytest.approx(numbers.std(), rel=1e-9)
    assert float(items["STATISTICS_VALID_PERCENT"]) == pytest.approx(
        100 * numbers.size / stored.size, rel=1e-3
    )


CUSTOM = "+proj=aea +lat_1=29.5 +lat_2=45.5 +lon_0=-96 +datum=WGS84"


@pytest.mark.parametrize(
    ("crs", "transform"),
    [
        (CRS.from_epsg(4326), Affine(0.001, 0, 179.5, 0, -0.001, 10.0)),
        (CRS.from_epsg(3031), Affine(100, 0, -1.0e6, 0, -100, 2.0e6)),
        (CRS.from_epsg(32633), Affine(28.0, 10.0, 5.0e5, 10.0, -28.0, 5.0e6)),
        (CRS.from_string(CUSTOM), Affine(30, 0, 0, 0, -30, 0)),
    ],
    ids=["geographic", "polar", "rotated", "without an EPSG code"],
)
def test_any_grid_comes_back(crs: CRS, transform: Affine, tmp_path: Path) -> None:
    grid = Grid(crs, transform, 600, 20)
    layer_format = format_of("emissivity")
    with LayerWriter(tmp_path / "layer.tif", grid, layer_format, text_of("emissivity")) as writer:
        for block in grid.blocks(512):
            pixels = np.full((block.height, block.width), 0.5, np.float32)
            writer.add(encode_block(pixels, block, grid, layer_format))
        writer.finish()
    with rasterio.open(tmp_path / "layer.tif") as layer:
        assert layer.crs == crs
        assert layer.transform.almost_equals(transform, precision=1e-9)


def test_a_pixel_stays_where_it_was(tmp_path: Path) -> None:
    """Pixels that store their own column and row come back there: no flip, no shift."""
    row, column = np.mgrid[0:700, 0:1300]
    for pixels in (row.astype(np.float32), column.astype(np.float32)):
        write_layer(tmp_path / "layer.tif", pixels, format_of("radiance"))
        with rasterio.open(tmp_path / "layer.tif") as layer:
            assert np.array_equal(layer.read(1), pixels)


def test_an_empty_layer_is_still_a_layer(tmp_path: Path) -> None:
    summary = write_layer(tmp_path / "layer.tif", np.full((700, 700), np.nan, np.float32))
    assert broken_rules(summary.path) == [], "no tile is left out, even if nothing is in it"
    assert summary.statistics.count == 0
    with rasterio.open(summary.path) as layer:
        assert np.isnan(layer.read(1)).all()
        assert not [key for key in layer.tags(1) if key.startswith("STATISTICS")]


def test_the_summary_is_of_the_file(tmp_path: Path) -> None:
    summary = write_layer(tmp_path / "layer.tif", temperature(600, 600))
    data = summary.path.read_bytes()
    assert (summary.size, summary.sha256) == (len(data), hashlib.sha256(data).hexdigest())
    assert summary.name == "surface_temperature"


def test_text_beyond_ascii_comes_back(tmp_path: Path) -> None:
    grid, layer_format = grid_of(10, 10), format_of("emissivity")
    text = text_of("emissivity", {"place": "Łódź <north> & south"})
    with LayerWriter(tmp_path / "layer.tif", grid, layer_format, text) as writer:
        block = next(grid.blocks(512))
        writer.add(encode_block(np.ones((10, 10), np.float32), block, grid, layer_format))
        writer.finish()
    with rasterio.open(tmp_path / "layer.tif") as layer:
        assert layer.tags()["place"] == "Łódź <north> & south"


def test_a_block_that_comes_twice_counts_once(tmp_path: Path) -> None:
    pixels = temperature(1200, 1200)
    blocks = list(grid_of(1200, 1200).blocks(512))
    once = write_layer(tmp_path / "once.tif", pixels, blocks=blocks)
    twice = write_layer(tmp_path / "twice.tif", pixels, blocks=blocks + blocks[:4])
    assert (once.sha256, once.statistics) == (twice.sha256, twice.statistics)


def test_missing_blocks_are_named_and_nothing_is_written(tmp_path: Path) -> None:
    blocks = list(grid_of(1200, 1200).blocks(512))[:-1]
    with pytest.raises(DomainError, match="1 of 9 tiles are missing"):
        write_layer(tmp_path / "layer.tif", temperature(1200, 1200), blocks=blocks)
    assert list(tmp_path.iterdir()) == []


def test_layers_finish_side_by_side(tmp_path: Path) -> None:
    """Encoding in many threads and finishing several layers at once changes no byte."""
    pixels = temperature(1300, 1700)
    grid, layer_format = grid_of(*pixels.shape), format_of("surface_temperature")
    expected = write_layer(tmp_path / "alone.tif", pixels).sha256
    with ThreadPoolExecutor(4) as pool:
        encoded = list(
            pool.map(
                lambda block: encode_block(cut(pixels, block), block, grid, layer_format), grid.blocks(512)
            )
        )
        writers = [
            LayerWriter(tmp_path / f"{number}.tif", grid, layer_format, text_of("surface_temperature"))
            for number in range(4)
        ]
        for writer in writers:
            for one in reversed(encoded):
                writer.add(one)
        found = {summary.sha256 for summary in pool.map(LayerWriter.finish, writers)}
    assert found == {expected}
