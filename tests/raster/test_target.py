"""The grid that the user wants, from as much or as little as is said."""

from __future__ import annotations

import numpy as np
import pytest
from affine import Affine
from rasterio.crs import CRS
from rasterio.warp import transform as transform_points

from groundglow.errors import ConfigError
from groundglow.raster.grid import Grid, apply
from groundglow.raster.relation import OnLattice, relation
from groundglow.raster.target import TargetChoice, bounds_in, target_grid
from painted_rasters import UTM, grid

SOURCE = grid(200, 100)
LEFT, TOP = 600_000.0, 5_300_010.0


def test_saying_nothing_keeps_the_grid() -> None:
    turned = grid(20, 20, rotation=12.0)
    assert target_grid(turned, TargetChoice()) is turned


def test_bounds_alone_cut_along_the_sources_pixels() -> None:
    found = target_grid(SOURCE, TargetChoice(bounds=(LEFT + 31, TOP - 299, LEFT + 61, TOP - 30)))
    assert (found.width, found.height) == (2, 9)
    assert isinstance(relation(SOURCE, found), OnLattice)
    exact = target_grid(SOURCE, TargetChoice(bounds=(LEFT + 30, TOP - 300, LEFT + 60, TOP - 30)))
    assert (exact.width, exact.height) == (1, 9)
    whole = target_grid(SOURCE, TargetChoice(bounds=(0.0, 0.0, 1e6, 1e7)))
    assert whole == SOURCE


def test_a_resolution_aligns_grids_of_neighbouring_scenes() -> None:
    one = target_grid(SOURCE, TargetChoice(resolution=100.0))
    other = target_grid(grid(50, 70, left=LEFT + 3000.0, top=TOP + 777.0), TargetChoice(resolution=100.0))
    assert isinstance(relation(one, other), OnLattice)
    assert one.transform.c % 100.0 == 0.0
    left, bottom, right, top = bounds_in(one, UTM)
    assert left <= LEFT < left + 100.0
    assert top - 100.0 < TOP <= top
    assert right - 100.0 < LEFT + 6000.0 <= right
    assert bottom <= TOP - 3000.0 < bottom + 100.0


def test_an_origin_and_unequal_pixels() -> None:
    found = target_grid(SOURCE, TargetChoice(resolution=(20.0, 50.0), origin=(7.0, 11.0)))
    assert (found.transform.a, found.transform.e) == (20.0, -50.0)
    assert (found.transform.c - 7.0) % 20.0 == 0.0
    assert (found.transform.f - 11.0) % 50.0 == 0.0


def test_another_reference_system_holds_the_whole_scene() -> None:
    for code in ("EPSG:4326", "EPSG:3035", "EPSG:32633"):
        found = target_grid(SOURCE, TargetChoice(crs=code))
        across, down = np.meshgrid(np.linspace(0, 200, 21), np.linspace(0, 100, 21))
        x, y = apply(SOURCE.transform, across.ravel(), down.ravel())
        x, y = (np.asarray(part) for part in transform_points(UTM, found.crs, x, y))
        column, row = apply(~found.transform, x, y)
        assert column.min() >= -0.01
        assert row.min() >= -0.01
        assert column.max() <= found.width + 0.01
        assert row.max() <= found.height + 0.01
        # About as many pixels as the source has, with the corners that a turned frame adds.
        assert 0.8 < found.width * found.height / 20_000 < 2.0


def test_across_the_date_line_longitudes_run_on() -> None:
    scene = Grid(CRS.from_epsg(32601), Affine(1000, 0, 100_000, 0, -1000, 600_000), 200, 100)
    found = target_grid(scene, TargetChoice(crs="EPSG:4326", resolution=0.01))
    left, _, right, _ = bounds_in(found, found.crs)
    assert left < 180.0 < right
    assert found.width < 250
    named = target_grid(scene, TargetChoice("EPSG:4326", 0.01, (179.0, 3.0, -179.0, 4.0)))
    assert (named.width, named.height) == (200, 100)


@pytest.mark.parametrize(
    ("choice", "message"),
    [
        (TargetChoice(crs="EPSG:99999"), "there is no coordinate reference system 'EPSG:99999'"),
        (TargetChoice(crs="nonsense"), "there is no coordinate reference system"),
        (TargetChoice(resolution=0.0), "a resolution must be above 0, found 0"),
        (TargetChoice(resolution=(30.0, -30.0)), "a resolution must be above 0"),
        (TargetChoice(resolution=float("nan")), "a resolution must be above 0"),
        (TargetChoice(resolution=1e-6), "is too large. Is the resolution in the unit"),
        (
            TargetChoice(resolution=10.0, bounds=(5.0, 0.0, 1.0, 2.0)),
            "bounds must be left, bottom, right, top",
        ),
        (TargetChoice(bounds=(0.0, 0.0, 10.0, 10.0)), r"lie outside the scene. The scene covers \(600000"),
        (
            TargetChoice("EPSG:4326", 0.01, (10.0, 48.0, 11.0, 47.0)),
            "bounds must be left, bottom, right, top",
        ),
    ],
)
def test_choices_that_cannot_be_followed(choice: TargetChoice, message: str) -> None:
    with pytest.raises(ConfigError, match=message):
        target_grid(SOURCE, choice)
