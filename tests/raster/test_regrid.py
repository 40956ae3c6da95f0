"""Pixels land where they belong, on every path, whatever the block."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from affine import Affine
from rasterio.crs import CRS
from rasterio.warp import transform as transform_points

from groundglow.errors import ConfigError
from groundglow.raster.grid import Block, Grid
from groundglow.raster.relation import AlongAxes, OnLattice, Otherwise, relation
from groundglow.raster.source import RasterSource, read_block, read_codes
from painted_rasters import UTM, grid, pixel_centres, read_all, whole, write

TARGET = grid(61, 47)
WEST_ZONE = CRS.from_epsg(32631)
GEOGRAPHIC = CRS.from_epsg(4326)

# What the source's grid is, and how far a coordinate may come back wrong, in source pixels. Pixels
# that an area average cuts count with their centre's coordinate: a few hundredths of a pixel.
SOURCES = {
    "the same grid": (grid(61, 47), 1e-9),
    "a larger piece of the same grid": (grid(100, 90, left=600_000 - 20 * 30, top=5_300_010 + 10 * 30), 1e-9),
    "nested three to one": (grid(190, 150, pixel=10.0), 1e-4),
    "finer, not nested": (grid(300, 260, pixel=7.0, left=599_990.0, top=5_300_020.0), 0.04),
    "coarser": (grid(30, 26, pixel=90.0, left=599_700.0, top=5_300_400.0), 1e-4),
    "shifted by a third of a pixel": (grid(64, 50, left=599_950.0, top=5_300_070.0), 1e-4),
    "upside down": (Grid(UTM, Affine(30, 0, 600_000, 0, 30, 5_300_010 - 50 * 30), 61, 50), 1e-9),
    "rotated, coarser": (grid(60, 60, pixel=60.0, left=599_000.0, top=5_300_300.0, rotation=20.0), 1e-3),
    "rotated, finer": (grid(420, 420, pixel=8.0, left=599_200.0, top=5_300_000.0, rotation=17.0), 0.1),
    "another zone": (grid(200, 200, left=1_047_000.0, top=5_326_000.0, crs=WEST_ZONE), 0.02),
    "geographic": (grid(400, 400, pixel=0.0003, left=10.30, top=47.88, crs=GEOGRAPHIC), 0.02),
    "geographic, finer": (grid(600, 500, pixel=0.0001, left=10.32, top=47.86, crs=GEOGRAPHIC), 0.1),
}


def coordinate_rasters(folder: Path, where: Grid) -> tuple[RasterSource, RasterSource]:
    """Two bands that store the map coordinates of their own pixel centres, less a constant."""
    x, y = pixel_centres(where)
    t = where.transform
    path = write(
        folder / "xy.tif", np.stack([x - t.c, y - t.f]), where, tiled=True, blockxsize=64, blockysize=64
    )
    return RasterSource(path, 1, offset=t.c, scale=1.0), RasterSource(path, 2, offset=t.f, scale=1.0)


@pytest.mark.parametrize("kind", SOURCES)
def test_coordinates_stay_where_they_are(kind: str, tmp_path: Path) -> None:
    where, tolerance = SOURCES[kind]
    wanted = pixel_centres(TARGET)
    if where.crs != TARGET.crs:
        moved = transform_points(TARGET.crs, where.crs, wanted[0].ravel(), wanted[1].ravel())
        wanted = tuple(np.reshape(part, TARGET.shape) for part in moved)
    pixel = np.hypot(where.transform.a, where.transform.d)
    origin = (where.transform.c, where.transform.f)
    for axis, source in enumerate(coordinate_rasters(tmp_path, where)):
        # Offsets are taken off again so that float32 holds the rest exactly enough.
        local = RasterSource(source.path, source.band)
        found = read_all(local, TARGET).values + np.float64(origin[axis])
        assert np.isfinite(found).all()
        assert np.abs(found - wanted[axis]).max() <= tolerance * pixel + 4e-7 * 61 * 30


@pytest.mark.parametrize("kind", SOURCES)
def test_the_block_does_not_change_a_byte(kind: str, tmp_path: Path) -> None:
    where, _ = SOURCES[kind]
    pixels = np.random.default_rng(5).uniform(5.0, 12.0, where.shape).astype(np.float32)
    pixels[np.random.default_rng(6).uniform(size=where.shape) < 0.2] = np.nan
    source = RasterSource(write(tmp_path / "noise.tif", pixels, where), saturation=11.5)
    at_once = read_all(source, TARGET)
    for size in (9, 32):
        in_blocks = read_all(source, TARGET, size)
        assert in_blocks.values.tobytes() == at_once.values.tobytes()
        assert in_blocks.mixed.tobytes() == at_once.mixed.tobytes()
        assert in_blocks.saturated.tobytes() == at_once.saturated.tobytes()
    for row, column in ((0, 0), (46, 60), (23, 31), (12, 59)):
        alone = read_block(source, TARGET, Block(row, column, 1, 1)).values
        assert alone.tobytes() == at_once.values[row, column].tobytes()


@pytest.mark.parametrize("kind", SOURCES)
def test_codes_do_not_depend_on_the_block(kind: str, tmp_path: Path) -> None:
    where, _ = SOURCES[kind]
    pixels = np.random.default_rng(8).integers(0, 5, where.shape).astype(np.uint8)
    source = RasterSource(write(tmp_path / "codes.tif", pixels, where), nodata=0)
    at_once = read_codes(source, TARGET, whole(TARGET))
    for size in (11, 32):
        for block in TARGET.blocks(size):
            part = read_codes(source, TARGET, block)
            at = np.s_[block.row : block.row + block.height, block.column : block.column + block.width]
            assert (part.codes == at_once.codes[at]).all()
            assert (part.valid == at_once.valid[at]).all()


def test_small_memory_gives_the_same_bytes(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for kind in ("nested three to one", "rotated, finer", "geographic"):
        where, _ = SOURCES[kind]
        pixels = np.random.default_rng(5).uniform(5.0, 12.0, where.shape).astype(np.float32)
        source = RasterSource(write(tmp_path / f"{where.width}.tif", pixels, where))
        whole_grid = read_all(source, TARGET)
        with monkeypatch.context() as patched:
            patched.setattr("groundglow.raster.footprint.MOST_PIXELS", 500)
            patched.setattr("groundglow.raster.footprint.MOST_SAMPLES", 700)
            assert read_all(source, TARGET).values.tobytes() == whole_grid.values.tobytes()


def test_the_relations_are_recognised() -> None:
    found = {kind: type(relation(where, TARGET)) for kind, (where, _) in SOURCES.items()}
    assert found["a larger piece of the same grid"] is OnLattice
    assert found["nested three to one"] is AlongAxes
    assert found["upside down"] is AlongAxes
    assert found["rotated, coarser"] is Otherwise
    assert found["another zone"] is Otherwise
    turned = grid(40, 40, rotation=30.0)
    assert relation(turned, turned) == OnLattice(0, 0)


def test_area_averages_conserve_the_mean(tmp_path: Path) -> None:
    coarse = grid(20, 15, pixel=100.0)
    fine = grid(286, 215, pixel=7.0)  # not nested: 14.29 pixels to one
    pixels = np.random.default_rng(1).uniform(0.0, 10.0, fine.shape)
    found = read_all(RasterSource(write(tmp_path / "fine.tif", pixels, fine)), coarse).values
    # The same area, integrated exactly: whole pixels and the cut ones at the right and lower edge.
    right = np.clip((2000.0 - 7.0 * np.arange(286)) / 7.0, 0.0, 1.0)
    lower = np.clip((1500.0 - 7.0 * np.arange(215)) / 7.0, 0.0, 1.0)
    mean = (lower[:, None] * right * pixels).sum() / (lower.sum() * right.sum())
    assert found.astype(np.float64).mean() == pytest.approx(mean, abs=2e-6)


def test_rotated_area_averages_conserve_the_mean(tmp_path: Path) -> None:
    fine = grid(400, 400, pixel=10.0, left=0.0, top=4000.0, rotation=0.0)
    coarse = grid(30, 30, pixel=60.0, left=1400.0, top=3600.0, rotation=-20.0)
    x, y = pixel_centres(fine)
    pixels = 10.0 + np.sin(x / 300.0) * np.cos(y / 400.0)
    found = read_all(RasterSource(write(tmp_path / "fine.tif", pixels, fine)), coarse).values
    xc, yc = pixel_centres(coarse)
    inside = np.isfinite(found)
    assert inside.mean() > 0.8
    # A smooth field averaged over a pixel: its value at the centre plus a curvature term.
    curvature = (1.0 / 300.0**2 + 1.0 / 400.0**2) * 60.0**2 / 24.0
    wanted = 10.0 + np.sin(xc / 300.0) * np.cos(yc / 400.0) * (1.0 - curvature)
    assert (found - wanted)[inside].mean() == pytest.approx(0.0, abs=2e-4)


def test_what_is_averaged_is_what_convert_makes(tmp_path: Path) -> None:
    fine, coarse = grid(2, 2, pixel=15.0), grid(1, 1)
    source = RasterSource(write(tmp_path / "t.tif", np.array([[300.0, 300.0], [300.0, 400.0]]), fine))
    plain = read_block(source, coarse, whole(coarse)).values
    fourth = read_block(source, coarse, whole(coarse), convert=lambda values: values**4).values
    assert plain[0, 0] == 325.0
    assert fourth[0, 0] == pytest.approx((3 * 300.0**4 + 400.0**4) / 4, rel=1e-6)


def test_missing_pixels_are_left_out_and_said(tmp_path: Path) -> None:
    fine, coarse = grid(6, 2, pixel=15.0), grid(3, 1)
    pixels = np.array([[1, 2, 9, 2, 9, 9], [3, 4, 3, 9, 9, 4]], dtype=np.int16)
    source = RasterSource(write(tmp_path / "t.tif", pixels, fine), nodata=9)
    found = read_block(source, coarse, whole(coarse))
    np.testing.assert_array_equal(found.values, np.array([[2.5, 2.5, np.nan]], dtype=np.float32))
    assert found.mixed is not None
    assert found.mixed.tolist() == [[False, True, False]]


def test_outside_the_source_there_is_nothing(tmp_path: Path) -> None:
    small = grid(4, 4, left=600_300.0, top=5_299_710.0)
    for where in (small, grid(2, 2, pixel=60.0, left=600_300.0, top=5_299_710.0),
                  grid(12, 12, pixel=10.0, left=600_300.0, top=5_299_710.0)):  # fmt: skip
        source = RasterSource(write(tmp_path / f"{where.width}.tif", np.ones(where.shape), where))
        values = read_all(source, TARGET).values
        assert np.isfinite(values).sum() == 16
        assert (values[10:14, 10:14] == 1.0).all()


def test_a_saturated_pixel_marks_all_it_goes_into(tmp_path: Path) -> None:
    fine, coarse = grid(6, 2, pixel=15.0), grid(3, 1)
    pixels = np.array([[1, 2, 1, 2, 1, 250], [3, 4, 255, 0, 3, 4]], dtype=np.uint8)
    source = RasterSource(write(tmp_path / "t.tif", pixels, fine), saturation=251, nodata=0)
    found = read_block(source, coarse, whole(coarse))
    assert found.saturated is not None
    assert found.saturated.tolist() == [[False, True, False]]


def test_majority_takes_the_larger_area_then_the_smaller_code(tmp_path: Path) -> None:
    fine, coarse = grid(6, 2, pixel=15.0), grid(3, 1)
    pixels = np.array([[7, 7, 5, 5, 0, 0], [7, 3, 2, 2, 0, 4]], dtype=np.uint16)
    source = RasterSource(write(tmp_path / "t.tif", pixels, fine), nodata=0)
    found = read_codes(source, coarse, whole(coarse))
    assert found.codes.tolist() == [[7, 2, 0]]
    assert found.valid.tolist() == [[True, True, False]]
    assert found.mixed is not None
    assert found.mixed.tolist() == [[True, True, False]]


def test_a_scene_across_the_date_line(tmp_path: Path) -> None:
    # Around 180 degrees east: the world from -180 to 180, and a target that runs past 180.
    world = Grid(GEOGRAPHIC, Affine(0.5, 0, -180.0, 0, -0.5, 90.0), 720, 360)
    longitude, latitude = pixel_centres(world)
    x = write(tmp_path / "lon.tif", np.cos(np.radians(longitude)), world)
    y = write(tmp_path / "lat.tif", latitude, world)
    over = Grid(GEOGRAPHIC, Affine(0.5, 0, 175.0, 0, -0.5, 10.0), 20, 20)
    utm = Grid(CRS.from_epsg(32601), Affine(10_000, 0, 0.0, 0, -10_000, 600_000), 60, 60)
    for target in (over, utm):
        at = pixel_centres(target)
        moved = transform_points(target.crs, GEOGRAPHIC, at[0].ravel(), at[1].ravel())
        wanted_x = np.cos(np.radians(np.reshape(moved[0], target.shape)))
        found_x, found_y = (
            read_all(RasterSource(x), target, 13).values,
            read_all(RasterSource(y), target).values,
        )
        np.testing.assert_allclose(found_y, np.reshape(moved[1], target.shape), atol=0.02)
        np.testing.assert_allclose(found_x, wanted_x, atol=2e-4)
    shifted = Grid(GEOGRAPHIC, Affine(0.5, 0, 200.0, 0, -0.5, 10.0), 20, 20)
    assert isinstance(relation(world, shifted), OnLattice)
    np.testing.assert_allclose(
        read_all(RasterSource(x), shifted).values, np.cos(np.radians(pixel_centres(shifted)[0])), atol=1e-6
    )


def test_an_unknown_resampling_is_refused(tmp_path: Path) -> None:
    source = RasterSource(write(tmp_path / "t.tif", np.ones(TARGET.shape), TARGET))
    with pytest.raises(ConfigError, match=r"no resampling 'cubic'.*continuous, nearest"):
        read_block(source, TARGET, whole(TARGET), resampling="cubic")
