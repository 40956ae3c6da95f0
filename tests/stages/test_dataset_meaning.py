"""What a Dataset says about itself: place, units, CF attributes, band and time."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import odc.geo.xr  # noqa: F401  (registers the accessor that reads the grid back)
import pytest
import xarray as xr
from rasterio.crs import CRS

from groundglow import api
from groundglow.quantities import FLAG, FLAGS, QUANTITIES
from groundglow.raster.grid import Block
from groundglow.run.blocks.worker import map_coordinates
from groundglow.stages.grid import coordinates, grid_of
from invented_scene import paint_scene
from painted_rasters import UTM, grid


@pytest.fixture(scope="module")
def scene(tmp_path_factory: pytest.TempPathFactory) -> xr.Dataset:
    painted = paint_scene(tmp_path_factory.mktemp("meaning"))
    return api.open_scene_dataset(api.plan(painted.job_file), chunks=64)


# The library still multiplies transforms in a way that its own dependency is about to give up.
@pytest.mark.filterwarnings("ignore:Use `@` matmul:PendingDeprecationWarning")
def test_an_independent_library_reads_the_grid(scene: xr.Dataset) -> None:
    # odc-geo's own reading of crs_wkt and GeoTransform, the convention of GDAL's netCDF driver.
    found = scene.odc.geobox
    assert found.shape == (90, 110)
    assert found.crs.epsg == 32633
    assert tuple(found.affine)[:6] == (30.0, 0.0, 412_345.0, 0.0, -30.0, 5_338_765.0)


def test_the_grid_mapping_is_that_of_cf(scene: xr.Dataset) -> None:
    # CF conventions 1.11, appendix F: transverse Mercator; UTM zone 33's central meridian is 15 degrees east.
    place = scene.coords["spatial_ref"].attrs
    assert place["grid_mapping_name"] == "transverse_mercator"
    assert place["longitude_of_central_meridian"] == 15.0
    assert scene["radiance"].attrs["grid_mapping"] == "spatial_ref"
    assert scene.coords["x"].attrs["standard_name"] == "projection_x_coordinate"


def test_band_wavelength_and_time_are_coordinates(scene: xr.Dataset) -> None:
    assert scene.coords["band"].item() == "1"
    assert scene.coords["wavelength"].attrs["units"] == "um"
    assert 10.6 < scene.coords["wavelength"].item() < 11.2
    # 10:32 at +02:00 is 08:32 UTC.
    assert scene.coords["time"].values == np.datetime64("2026-07-14T08:32:00")


def test_every_variable_states_unit_name_and_origin(scene: xr.Dataset, tmp_path: Path) -> None:
    painted = paint_scene(tmp_path)
    maps = api.run_chain(scene, api.plan(painted.job_file))
    for name, values in {**scene.data_vars, **maps.data_vars}.items():
        assert values.attrs["units"]
        assert values.attrs["long_name"]
        if name != "quality":
            assert values.attrs["origin"]
        if name in QUANTITIES:
            assert values.attrs["units"] == QUANTITIES[str(name)].unit
            assert values.attrs.get("standard_name") == QUANTITIES[str(name)].standard_name
    quality = maps["quality"].attrs
    assert quality["flag_meanings"].split() == [flag.name for flag in FLAGS]
    assert quality["flag_masks"][2] == FLAG["cloud"].mask


@pytest.mark.parametrize("rotation", [0.0, 20.0])
def test_a_grid_goes_into_coordinates_and_comes_back(rotation: float) -> None:
    where = grid(31, 17, rotation=rotation)
    dataset = xr.Dataset(coords=coordinates(where))
    assert grid_of(dataset) == where
    part = grid_of(dataset.isel(y=slice(4, 9), x=slice(20, 31)))
    assert part == where.window_grid(Block(4, 20, 5, 11))


def test_coordinates_are_those_that_the_run_looks_the_air_up_with() -> None:
    where = grid(3001, 2003, pixel=29.987, left=412_345.678)
    x, y = map_coordinates(where, Block(0, 0, 2003, 3001))
    found = coordinates(where)
    np.testing.assert_array_equal(found["x"].values, x)
    np.testing.assert_array_equal(found["y"].values, y)


def test_geographic_coordinates_are_degrees() -> None:
    where = grid(20, 10, pixel=0.001, left=12.0, top=48.0, crs=CRS.from_epsg(4326))
    found = coordinates(where)
    assert (found["x"].attrs["units"], found["y"].attrs["standard_name"]) == ("degrees_east", "latitude")
    assert grid_of(xr.Dataset(coords=found)) == where


def test_utm_is_the_reference_system_of_the_painted_rasters() -> None:
    assert grid_of(xr.Dataset(coords=coordinates(grid(4, 4)))).crs == UTM


def test_every_stage_gives_the_grid_it_was_given(tmp_path: Path) -> None:
    plan = api.plan(paint_scene(tmp_path).job_file)
    work = plan.work
    found = api.open_scene_dataset(plan, chunks=64)
    assert grid_of(found) == work.grid
    for step in (
        lambda one: api.brightness_temperature(one, work.settings),
        lambda one: api.emissivity(one, work.emissivity),
        lambda one: api.atmosphere(one, work.air, work.settings.weighting),
        lambda one: api.surface_temperature(one, work.settings),
        api.flux,
        lambda one: api.layers(one, ["emitted_flux"]),
    ):
        found = step(found)
        assert grid_of(found) == work.grid
