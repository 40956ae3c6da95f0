"""Stored numbers of every type become the same physical values."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import rasterio

from groundglow.errors import InputError
from groundglow.raster.decode import KINDS, decode, decode_reference
from groundglow.raster.source import RasterSource, read_block, read_codes
from painted_rasters import grid, read_all, whole, write

HERE = grid(6, 2)


@pytest.mark.parametrize(
    "kind", ["uint8", "int8", "uint16", "int16", "uint32", "int32", "float32", "float64"]
)
def test_scale_offset_and_nodata_for_every_type(kind: str, tmp_path: Path) -> None:
    stored = np.array([[0, 1, 2, 3, 100, 127], [7, 0, 9, 0, 11, 12]], dtype=kind)
    source = RasterSource(
        write(tmp_path / "t.tif", stored, HERE), scale=0.1, offset=2.0, nodata=0, saturation=120
    )
    found = read_block(source, HERE, whole(HERE))
    wanted = np.where(stored == 0, np.nan, stored.astype(np.float64) * 0.1 + 2.0).astype(np.float32)
    np.testing.assert_array_equal(found.values, wanted)
    assert found.values.dtype == np.float32
    assert found.mixed is None
    assert found.saturated is not None
    assert np.argwhere(found.saturated).tolist() == [[0, 5]]


def test_negative_numbers_keep_their_sign(tmp_path: Path) -> None:
    stored = np.array([[-32768, -1, 0, 1, 32767, -300]] * 2, dtype=np.int16)
    source = RasterSource(write(tmp_path / "t.tif", stored, HERE), scale=0.5, nodata=-32768)
    wanted = np.array([np.nan, -0.5, 0.0, 0.5, 16383.5, -150.0], dtype=np.float32)
    np.testing.assert_array_equal(read_all(source, HERE).values[0], wanted)


def test_the_files_own_scale_and_nodata_count_where_the_user_is_silent(tmp_path: Path) -> None:
    path = write(tmp_path / "t.tif", np.full((2, 6), 250, dtype=np.uint16), HERE, nodata=7)
    with rasterio.open(path, "r+") as dataset:
        dataset.scales, dataset.offsets = (0.1,), (-5.0,)
        dataset.write(np.full((1, 1), 7, dtype=np.uint16), 1, window=((0, 1), (0, 1)))
    found = read_all(RasterSource(path), HERE).values
    assert np.isnan(found[0, 0])
    assert (found.ravel()[1:] == 20.0).all()
    assert read_all(RasterSource(path, scale=1.0, offset=0.0, nodata=250), HERE).values[0, 0] == 7.0


def test_celsius_is_shifted_after_scaling(tmp_path: Path) -> None:
    path = write(tmp_path / "t.tif", np.full((2, 6), 2550, dtype=np.int16), HERE)
    source = RasterSource(path, scale=0.01, shift=273.15)
    assert read_all(source, HERE).values[0, 0] == np.float32(2550 * 0.01 + 273.15)


def test_nan_and_infinity_are_no_values(tmp_path: Path) -> None:
    stored = np.array([[np.nan, np.inf, -np.inf, 1, 2, 3]] * 2, dtype=np.float32)
    found = read_all(RasterSource(write(tmp_path / "t.tif", stored, HERE)), HERE).values
    np.testing.assert_array_equal(np.isfinite(found[0]), [False, False, False, True, True, True])


def test_the_largest_float_as_nodata(tmp_path: Path) -> None:
    # The usual "no data" of raster programs (common practice), written with too many digits.
    stored = np.array([[-3.4028235e38, 1, 2, 3, 4, 5]] * 2, dtype=np.float32)
    path = write(tmp_path / "t.tif", stored, HERE)
    found = read_all(RasterSource(path, nodata=-3.4028234663852886e38, scale=2.0), HERE).values
    np.testing.assert_array_equal(found[0], np.array([np.nan, 2, 4, 6, 8, 10], dtype=np.float32))


@pytest.mark.parametrize("internal", [True, False])
def test_a_mask_band_hides_pixels(internal: bool, tmp_path: Path) -> None:
    path = write(tmp_path / "t.tif", np.full((2, 6), 9, dtype=np.uint8), HERE)
    shown = np.ones((2, 6), dtype=bool)
    shown[1, 2:4] = False
    with rasterio.Env(GDAL_TIFF_INTERNAL_MASK=internal), rasterio.open(path, "r+") as dataset:
        dataset.write_mask(shown)
    np.testing.assert_array_equal(np.isfinite(read_all(RasterSource(path), HERE).values), shown)
    np.testing.assert_array_equal(read_codes(RasterSource(path), HERE, whole(HERE)).valid, shown)


def test_an_alpha_band_hides_pixels(tmp_path: Path) -> None:
    pixels = np.full((2, 2, 6), 255, dtype=np.uint8)
    pixels[1, 0, 0] = 0
    path = write(tmp_path / "t.tif", pixels, HERE, photometric="MINISBLACK", alpha="YES")
    found = read_all(RasterSource(path, band=1), HERE).values
    assert np.isnan(found[0, 0])
    assert np.isfinite(found).sum() == 11


def test_bands_of_one_file_are_told_apart(tmp_path: Path) -> None:
    path = write(tmp_path / "t.tif", np.stack([np.full((2, 6), n, dtype=np.int16) for n in (1, 2, 3)]), HERE)
    assert [float(read_all(RasterSource(path, band=n), HERE).values[0, 0]) for n in (1, 2, 3)] == [
        1.0,
        2.0,
        3.0,
    ]


@pytest.mark.parametrize("profile", [{"blockysize": 1}, {"blockysize": 7, "compress": "deflate"},
                                     {"tiled": True, "blockxsize": 16, "blockysize": 32}])  # fmt: skip
def test_strips_and_tiles_read_alike(profile: dict[str, object], tmp_path: Path) -> None:
    where = grid(70, 50)
    stored = np.random.default_rng(2).integers(0, 60000, where.shape).astype(np.uint16)
    found = read_all(RasterSource(write(tmp_path / "t.tif", stored, where, **profile)), where, 17).values
    np.testing.assert_array_equal(found, stored.astype(np.float32))


def test_codes_keep_their_integers(tmp_path: Path) -> None:
    stored = np.array([[21824, 22280, 1, 65535, 0, 5]] * 2, dtype=np.uint16)
    found = read_codes(RasterSource(write(tmp_path / "t.tif", stored, HERE), nodata=1), HERE, whole(HERE))
    assert found.codes.dtype == np.uint16
    np.testing.assert_array_equal(found.codes[0], [21824, 22280, 0, 65535, 0, 5])
    np.testing.assert_array_equal(found.valid[0], [True, True, False, True, True, True])
    assert found.mixed is None


def test_codes_stored_as_whole_floats_are_taken_and_fractions_refused(tmp_path: Path) -> None:
    stored = np.array([[1, 2, 3, np.nan, 5, 6]] * 2, dtype=np.float32)
    path = write(tmp_path / "t.tif", stored, HERE)
    np.testing.assert_array_equal(
        read_codes(RasterSource(path), HERE, whole(HERE)).codes[0], [1, 2, 3, 0, 5, 6]
    )
    broken = write(tmp_path / "u.tif", stored + np.float32(0.5), HERE)
    with pytest.raises(InputError, match="holds fractions where whole codes are needed"):
        read_codes(RasterSource(broken), HERE, whole(HERE))


@pytest.mark.parametrize("kind", KINDS)
def test_the_kernel_and_the_readable_statement_are_equal(kind: str) -> None:
    rng = np.random.default_rng(3)
    if kind == "float32":
        stored = rng.uniform(-1e4, 1e4, (37, 53)).astype(np.float32)
        stored[0, :5] = [np.nan, np.inf, -np.inf, 3.4e38, 0.0]
    else:
        limits = np.iinfo(kind)
        stored = rng.integers(limits.min, limits.max, (37, 53), endpoint=True).astype(kind)
    for settings in (
        (3.342e-4, 0.1, float(stored[5, 5]), 100.0),
        (1.0, 0.0, np.nan, np.inf),
        (2.0, -1e38, 0.0, 7.5),
    ):
        values = np.empty(stored.shape, dtype=np.float32)
        saturated = np.empty(stored.shape, dtype=np.bool_)
        decode(stored, *settings, values, saturated)
        wanted, wanted_saturated = decode_reference(stored, *settings)
        assert values.tobytes() == wanted.tobytes()
        np.testing.assert_array_equal(saturated, wanted_saturated)
