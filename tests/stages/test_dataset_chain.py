"""The stages on Datasets: lazy, the same on NumPy and on any chunks, the same bytes as the fused run."""

from __future__ import annotations

import hashlib
from pathlib import Path

import dask
import numpy as np
import pytest
import rasterio
import xarray as xr

from command_line import groundglow
from groundglow import api
from invented_scene import InventedScene, paint_scene
from stage_scenes import varied_scene

RAGGED = ((1, 200, 329), (77, 512, 11))


def refuse(*arguments: object, **options: object) -> None:
    raise AssertionError("something was computed")


@pytest.fixture(scope="module")
def scene(tmp_path_factory: pytest.TempPathFactory) -> InventedScene:
    return varied_scene(tmp_path_factory.mktemp("dataset"))


@pytest.fixture(scope="module")
def plan(scene: InventedScene) -> api.ScenePlan:
    return api.plan(scene.job_file)


@pytest.fixture(scope="module")
def at_once(plan: api.ScenePlan) -> xr.Dataset:
    return api.run_chain(api.open_scene_dataset(plan, chunks=None), plan)


def same(one: xr.Dataset, other: xr.Dataset) -> None:
    assert list(one.data_vars) == list(other.data_vars)
    for name in one.data_vars:
        np.testing.assert_array_equal(one[name].values, other[name].values, err_msg=str(name))
        assert one[name].dtype == other[name].dtype


def test_nothing_is_computed_before_it_is_asked_for(plan: api.ScenePlan) -> None:
    with dask.config.set(scheduler=refuse):
        maps = api.run_chain(api.open_scene_dataset(plan), plan)
        assert all(one.chunks for one in maps.data_vars.values())
        with pytest.raises(AssertionError, match="something was computed"):
            maps["emitted_flux"].compute()


@pytest.mark.parametrize("chunks", [10_000, 512, RAGGED], ids=["one chunk", "tiles", "ragged chunks"])
def test_chunks_do_not_change_a_number(plan: api.ScenePlan, at_once: xr.Dataset, chunks: object) -> None:
    assert all(one.chunks is None for one in at_once.data_vars.values())
    same(api.run_chain(api.open_scene_dataset(plan, chunks=chunks), plan).compute(), at_once)


def test_each_stage_is_lazy_and_takes_other_chunks_than_the_last(
    plan: api.ScenePlan, at_once: xr.Dataset
) -> None:
    work = plan.work
    with dask.config.set(scheduler=refuse):
        found = api.open_scene_dataset(plan, chunks=300)
        found = api.brightness_temperature(found, work.settings).chunk({"y": 100, "x": 600})
        found = api.emissivity(found, work.emissivity).chunk({"y": RAGGED[0], "x": RAGGED[1]})
        found = api.atmosphere(found, work.air, work.settings.weighting)
        found = api.surface_temperature(found, work.settings).chunk({"y": 530, "x": 200})
        found = api.layers(
            api.flux(found), list(work.formats), ["no_data", "saturated", "impossible", "cloud"]
        )
    same(found.compute(), at_once)


def test_layers_written_from_a_dataset_have_the_bytes_of_the_fused_run(
    scene: InventedScene, plan: api.ScenePlan, tmp_path: Path
) -> None:
    assert groundglow("run", scene.job_file, "--quiet").code == 0
    written = api.write_layers(api.run_chain(api.open_scene_dataset(plan, chunks=RAGGED), plan), tmp_path)
    assert len(written) == 16
    for name, summary in written.items():
        fused = scene.folder / "maps" / "invented" / f"{name}.tif"
        assert summary.sha256 == hashlib.sha256(fused.read_bytes()).hexdigest(), name


def test_the_water_vapour_method_too(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    air = '[temperature]\nmethod = "water-vapour"\n[atmosphere]\nsource = "column"\n'
    air += 'column_water_vapour = 15.0\ncoefficients = "landsat-8"\n'
    scene.write_job(air=air)
    assert groundglow("run", scene.job_file, "--quiet").code == 0
    plan = api.plan(scene.job_file)
    with dask.config.set(scheduler=refuse):
        maps = api.run_chain(api.open_scene_dataset(plan, chunks=50), plan)
    for name, summary in api.write_layers(maps, tmp_path / "own").items():
        fused = tmp_path / "maps" / "invented" / f"{name}.tif"
        assert summary.sha256 == hashlib.sha256(fused.read_bytes()).hexdigest(), name


def test_a_function_of_your_own_stands_between_two_stages(plan: api.ScenePlan, at_once: xr.Dataset) -> None:
    # A radiance 1 % higher must come out warmer wherever there is a number, and nowhere else.
    scene = api.open_scene_dataset(plan, chunks=256)
    brighter = scene.assign(
        radiance=(scene["radiance"] * np.float32(1.01)).assign_attrs(scene["radiance"].attrs)
    )
    found = api.run_chain(brighter, plan)["surface_temperature"].values
    before = at_once["surface_temperature"].values
    np.testing.assert_array_equal(np.isnan(found), np.isnan(before))
    assert (found > before)[np.isfinite(before)].all()


def test_a_part_of_a_scene_gives_that_part_of_the_map(plan: api.ScenePlan, at_once: xr.Dataset) -> None:
    scene = api.open_scene_dataset(plan, chunks=128)
    part = {"y": slice(95, 317), "x": slice(190, 401)}
    found = api.run_chain(scene.isel(part), plan)
    same(found.compute(), at_once.isel(part))


def test_a_cluster_gives_the_same(plan: api.ScenePlan, at_once: xr.Dataset, tmp_path: Path) -> None:
    from distributed import Client, LocalCluster

    maps = api.run_chain(api.open_scene_dataset(plan, chunks=256), plan)
    with (
        LocalCluster(n_workers=1, threads_per_worker=2, dashboard_address=":0", processes=True) as cluster,
        Client(cluster),
    ):
        same(maps.compute(), at_once)
        written = api.write_layers(maps, tmp_path)
    with rasterio.open(written["surface_temperature"].path) as raster:
        np.testing.assert_allclose(raster.read(1), at_once["surface_temperature"].values, atol=0.004)
