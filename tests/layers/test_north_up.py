"""Small maps: north is up, nothing is flipped or shifted, lengths are true."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from affine import Affine
from numpy.typing import NDArray
from rasterio.crs import CRS

from groundglow.errors import OutputError
from groundglow.layers.encode import encode_block
from groundglow.layers.geotiff import LayerWriter
from groundglow.layers.layer_format import format_of
from groundglow.layers.north_up import small_map, sufficient_level
from groundglow.layers.tags import text_of
from groundglow.raster.grid import Grid
from layers.layer_cases import cut

UTM = CRS.from_epsg(32633)


def written(path: Path, pixels: NDArray[np.float32], crs: CRS, transform: Affine) -> Grid:
    """A layer on any grid, at full precision."""
    grid, layer_format = Grid(crs, transform, pixels.shape[1], pixels.shape[0]), format_of("radiance")
    with LayerWriter(path, grid, layer_format, text_of("radiance")) as writer:
        for block in grid.blocks(512):
            writer.add(encode_block(cut(pixels, block), block, grid, layer_format))
        writer.finish()
    return grid


def places(height: int, width: int, transform: Affine) -> tuple[NDArray[np.float32], NDArray[np.float32]]:
    """Map coordinates of the pixel centres, in units of 1000 from (500000, 5000000)."""
    row, column = np.mgrid[0:height, 0:width] + 0.5
    x = transform.a * column + transform.b * row + transform.c
    y = transform.d * column + transform.e * row + transform.f
    return ((x - 5e5) / 1000).astype(np.float32), ((y - 5e6) / 1000).astype(np.float32)


@pytest.mark.parametrize(
    "transform",
    [
        Affine(30.0, 0.0, 5e5, 0.0, -30.0, 5e6),
        Affine(30.0, 0.0, 5e5, 0.0, 30.0, 5e6),
        Affine(-30.0, 0.0, 5e5, 0.0, -30.0, 5e6),
        Affine(0.0, 30.0, 5e5, 30.0, 0.0, 5e6),
        Affine(28.0, 10.0, 5e5, 10.0, -28.0, 5e6),
    ],
    ids=["north up", "south up", "east to the left", "on its side", "rotated"],
)
def test_pixels_that_store_their_place_are_drawn_there(transform: Affine, tmp_path: Path) -> None:
    """Down the page y falls, along it x grows, by the map's own step, whatever the grid."""
    x, y = places(700, 520, transform)
    grid = written(tmp_path / "x.tif", x, UTM, transform)
    written(tmp_path / "y.tif", y, UTM, transform)
    across, down = small_map(tmp_path / "x.tif", grid, 200), small_map(tmp_path / "y.tif", grid, 200)
    assert max(across.pixels.shape) == 200
    assert across.metres is not None
    # UTM's scale factor is 0.9996 on its central meridian, which is close (EPSG guidance note 7-2).
    step = across.metres / 1000
    there = np.isfinite(across.pixels)
    columns = np.arange(across.pixels.shape[1])[None, :] * step
    rows = np.arange(across.pixels.shape[0])[:, None] * step
    from_left, from_top = (across.pixels - columns)[there], (down.pixels + rows)[there]
    # No place is off by more than the pixels of page and overview together.
    assert np.ptp(from_left) < 3 * step
    assert np.ptp(from_top) < 3 * step


@pytest.mark.parametrize(
    ("shape", "box", "level"),
    [
        ((6144, 6144), 800, 2),
        ((6144, 6144), 768, 3),
        ((6144, 6144), 769, 2),
        ((300, 400), 800, 0),
        ((900, 100), 800, 0),
    ],
)
def test_the_smallest_sufficient_overview_is_read(shape: tuple[int, int], box: int, level: int) -> None:
    assert sufficient_level(shape, box) == level


def test_metres_and_north_of_a_projected_grid(tmp_path: Path) -> None:
    grid = written(
        tmp_path / "layer.tif", np.ones((100, 100), np.float32), UTM, Affine(30, 0, 498_500, 0, -30, 5e6)
    )
    found = small_map(tmp_path / "layer.tif", grid, 100)
    # On the central meridian the map is 0.9996 of the ground (EPSG guidance note 7-2); the sphere
    # used for lengths differs from the ellipsoid by up to 0.3 %.
    assert found.metres == pytest.approx(30 / 0.9996, rel=3e-3)
    assert found.north == pytest.approx(0.0, abs=0.05)


def test_metres_of_a_geographic_grid(tmp_path: Path) -> None:
    grid = written(
        tmp_path / "layer.tif",
        np.ones((100, 100), np.float32),
        CRS.from_epsg(4326),
        Affine(0.01, 0, 10, 0, -0.01, 60.5),
    )
    found = small_map(tmp_path / "layer.tif", grid, 100)
    # A degree of longitude at 60 degrees is half as long as at the equator: 111.2 km on the sphere.
    assert found.pixels.shape == (100, 50)
    assert found.metres == pytest.approx(111_195 * 0.5 * 0.02, rel=1e-3)
    assert found.north == pytest.approx(0.0, abs=1e-6)


def test_north_in_a_polar_projection_points_to_the_pole(tmp_path: Path) -> None:
    transform = Affine(1000, 0, -1_000_500, 0, -1000, 500)
    grid = written(tmp_path / "layer.tif", np.ones((1, 1), np.float32), CRS.from_epsg(3413), transform)
    assert small_map(tmp_path / "layer.tif", grid, 10).north == pytest.approx(90.0, abs=0.1)


def test_what_has_no_place_on_earth_has_no_metres(tmp_path: Path) -> None:
    crs = CRS.from_string("+proj=geos +h=35785831 +lon_0=0 +a=6378137 +b=6356752 +units=m")
    grid = written(
        tmp_path / "layer.tif", np.ones((4, 4), np.float32), crs, Affine(1e3, 0, 6e6, 0, -1e3, 6e6)
    )
    found = small_map(tmp_path / "layer.tif", grid, 4)
    assert (found.metres, found.north) == (None, None)


def test_a_layer_that_is_gone_is_named(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"layer\.tif: the finished layer cannot be read back"):
        small_map(tmp_path / "layer.tif", Grid(UTM, Affine(30, 0, 5e5, 0, -30, 5e6), 10, 10), 10)
