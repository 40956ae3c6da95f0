"""Datasets that a stage cannot use: the message lists every wrong variable, what was needed and what came."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from groundglow import api
from groundglow.errors import ConfigError, DomainError, GroundglowError, InputError
from groundglow.stages.grid import coordinates, grid_of
from groundglow.stages.radiance import Calibration
from invented_scene import paint_scene
from painted_rasters import grid


@pytest.fixture(scope="module")
def plan(tmp_path_factory: pytest.TempPathFactory) -> api.ScenePlan:
    return api.plan(paint_scene(tmp_path_factory.mktemp("schema")).job_file)


@pytest.fixture(scope="module")
def scene(plan: api.ScenePlan) -> xr.Dataset:
    return api.open_scene_dataset(plan, chunks=64)


def message(function: Callable[..., object], *given: object) -> str:
    with pytest.raises(GroundglowError) as caught:
        function(*given)
    return str(caught.value)


def test_every_wrong_variable_is_listed(plan: api.ScenePlan, scene: xr.Dataset) -> None:
    bare = api.brightness_temperature(scene, plan.work.settings)
    bare["radiance"] = (bare["radiance"] * 2.0).drop_attrs()
    bare["brightness_temperature"] = bare["brightness_temperature"].assign_attrs(units="degC")
    told = message(api.surface_temperature, bare, plan.work.settings)
    assert "radiance: needed in 'W m-2 sr-1 um-1', found without units" in told
    assert "brightness_temperature: needed in 'K', found in 'degC'" in told
    assert "emissivity: needed in '1', missing" in told
    assert "path_radiance_change: needed in 'W m-2 sr-1 um-1', missing" in told
    assert "give them back with assign_attrs" in told


def test_units_are_never_converted_in_silence(plan: api.ScenePlan, scene: xr.Dataset) -> None:
    milli = scene.assign(radiance=scene["radiance"].assign_attrs(units="mW m-2 sr-1 um-1"))
    assert "found in 'mW m-2 sr-1 um-1'" in message(api.brightness_temperature, milli, plan.work.settings)


def test_another_spelling_of_the_same_unit_will_do(plan: api.ScenePlan, scene: xr.Dataset) -> None:
    spelled = scene.assign(radiance=scene["radiance"].assign_attrs(units="W/m2/sr/um"))
    assert "brightness_temperature" in api.brightness_temperature(spelled, plan.work.settings)


def test_several_bands_at_once(plan: api.ScenePlan, scene: xr.Dataset) -> None:
    both = scene.drop_vars("band").assign(
        radiance=scene["radiance"].drop_vars("band").expand_dims(band=["1", "2"])
    )
    told = message(api.brightness_temperature, both, plan.work.settings)
    assert "radiance: needed for one band, found 2 (choose with dataset.sel(band=...))" in told


def test_dimensions_in_another_order(plan: api.ScenePlan, scene: xr.Dataset) -> None:
    turned = scene.transpose("x", "y")
    assert "ending in (y, x), found (x, y)" in message(api.brightness_temperature, turned, plan.work.settings)


def test_no_place_on_the_earth(plan: api.ScenePlan, scene: xr.Dataset) -> None:
    lost = scene.drop_vars("spatial_ref")
    assert "no coordinate spatial_ref" in message(api.emissivity, lost, plan.work.emissivity)


@pytest.mark.parametrize(
    "change", [{"y": slice(None, None, 2)}, {"x": slice(None, None, -1)}], ids=["steps", "turned"]
)
def test_coordinates_that_are_no_grid(scene: xr.Dataset, change: dict[str, slice]) -> None:
    assert "not the centres of consecutive pixels" in message(grid_of, scene.isel(change))


@pytest.mark.parametrize(
    ("place", "told"),
    [({"crs_wkt": "nonsense"}, "cannot be read"), ({"GeoTransform": "1 2 three"}, "cannot be read")],
)
def test_a_place_that_cannot_be_read(place: dict[str, str], told: str) -> None:
    dataset = xr.Dataset(coords=coordinates(grid(5, 4)))
    dataset.coords["spatial_ref"].attrs.update(place)
    assert told in message(grid_of, dataset)


def test_missing_coordinates() -> None:
    assert "no coordinate x" in message(grid_of, xr.Dataset(coords=coordinates(grid(5, 4))).drop_vars("x"))


def test_layers_and_flags_that_do_not_exist(scene: xr.Dataset) -> None:
    assert "there is no layer 'heat'" in message(api.layers, scene, ["heat"])
    with pytest.raises(ConfigError, match="there is no flag 'fog'"):
        api.layers(scene, ["radiance"], ["fog"])


def test_flags_are_asked_for_by_name(scene: xr.Dataset) -> None:
    # The painted cloud covers rows 40 to 49 and columns 60 to 74; one pixel is saturated.
    cloud = api.flagged(scene, "cloud")
    assert cloud.chunks is not None
    assert int(cloud.sum()) == 150
    assert int(api.flagged(scene, "cloud", "saturated").sum()) == 151
    assert "there is no flag 'fog'" in message(api.flagged, scene, "fog")


def test_layers_that_were_not_made(scene: xr.Dataset, tmp_path: Path) -> None:
    assert "emitted_flux: needed in 'W m-2', missing" in message(api.layers, scene, ["emitted_flux"])
    with pytest.raises(InputError, match="sky_flux: needed in 'W m-2', missing"):
        api.write_layers(scene, tmp_path / "out", names=["sky_flux"])
    assert not (tmp_path / "out").exists()


def test_a_folder_that_cannot_be_written(plan: api.ScenePlan, scene: xr.Dataset, tmp_path: Path) -> None:
    (tmp_path / "taken").write_text("mine")
    maps = api.run_chain(scene, plan)
    assert "cannot be written" in message(api.write_layers, maps, tmp_path / "taken" / "maps")


def counts(values: list[list[int]], **attributes: str) -> xr.Dataset:
    return xr.Dataset({"counts": (("y", "x"), np.array(values, np.uint16), {"units": "1"} | attributes)})


def test_counts_of_your_own_become_radiance() -> None:
    found = api.radiance(counts([[0, 10, 65535]]), Calibration(0.5, 1.0, nodata=0, saturation=65535))
    np.testing.assert_array_equal(found["radiance"], [[np.nan, 6.0, 32768.5]])
    np.testing.assert_array_equal(found["quality"], [[0, 0, 2]])
    assert found["radiance"].attrs["units"] == "W m-2 sr-1 um-1"


def test_counts_that_are_none() -> None:
    assert "counts: needed in '1', found in 'K'" in message(
        api.radiance, counts([[1]], units="K"), Calibration(1.0, 0.0)
    )


@pytest.mark.parametrize("scale", [0.0, float("nan")])
def test_a_calibration_that_loses_everything(scale: float) -> None:
    with pytest.raises(DomainError, match="scale other than 0"):
        Calibration(scale, 0.0)


def test_a_job_of_several_scenes_needs_a_choice(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    text = scene.job_file.read_text().replace('"scene.toml"', '"*.toml"')
    scene.job_file.write_text(text)
    assert "the job names several scenes" in message(api.plan, scene.job_file)
    assert api.plan(scene.job_file, scene.scene_file).name == "invented"
