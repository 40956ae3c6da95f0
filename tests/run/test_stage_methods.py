"""Every method and source of the air: stages, Datasets and explained pixels tell what the fused run maps."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import numpy as np
import pytest
import rasterio
from affine import Affine

from command_line import groundglow
from groundglow import api
from groundglow.raster.grid import compose
from invented_scene import InventedScene, paint_scene, scene_text, write_raster
from stage_scenes import stage_by_stage, work

LAYERS = """
[layers]
write = ["surface_temperature", "surface_temperature_uncertainty", "surface_temperature_uncertainty_class",
         "emitted_flux", "emitted_flux_uncertainty", "brightness_temperature", "emissivity"]
"""
# A wide band in moist air: its transmittance depends on the temperature sought.
MODEL = '[atmosphere]\nsource = "model"\nname = "tropical"\n'
WEATHER = (
    '[atmosphere]\nsource = "weather"\nair_temperature = "21 degC"\nrelative_humidity = 60\n'
    "pressure = 960\nground_height = 410\n"
)
COLUMN = (
    '[temperature]\nmethod = "water-vapour"\n[atmosphere]\nsource = "column"\n'
    'column_water_vapour = 15.0\ncoefficients = "landsat-8"\n'
)


def painted(
    folder: Path, air: str, *, wide: bool = False, angles: bool = False, elevation: bool = True
) -> InventedScene:
    scene = paint_scene(folder)
    text = scene_text()
    if wide:
        sensor = (folder / "narrow.toml").read_text().replace("[10.6, 11.2]", "[7.5, 13.5]")
        (folder / "narrow.toml").write_text(sensor)
    if angles:
        slope = np.linspace(0.0, 45.0, scene.counts.size, dtype=np.float32).reshape(scene.counts.shape)
        slope[30:33, 5:9] = np.nan
        write_raster(folder / "angle.tif", slope, scene.transform, nodata=np.nan)
        text = text.replace("view_zenith_angle = 0.0", 'view_zenith_angle = { path = "angle.tif" }')
    if not elevation:
        text = text.replace("elevation = 400.0\n", "")
    scene.scene_file.write_text(text)
    scene.write_job(LAYERS, air=air)
    return scene


def rotated(folder: Path) -> InventedScene:
    scene = paint_scene(folder)
    turned = compose(scene.transform, Affine.rotation(17.0))
    for name, pixels in (("thermal", scene.counts), ("quality", scene.words)):
        write_raster(folder / f"{name}.tif", pixels, turned)
    scene.write_job(LAYERS)
    return scene


def checksums(folder: Path) -> dict[str, str]:
    return {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in folder.glob("*.tif")}


@pytest.fixture(scope="module", params=["wide band and angles", "no elevation", "column", "rotated grid"])
def scene(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> InventedScene:
    folder = tmp_path_factory.mktemp("methods")
    made = {
        "wide band and angles": lambda: painted(folder, MODEL, wide=True, angles=True),
        "no elevation": lambda: painted(folder, WEATHER, elevation=False),
        "column": lambda: painted(folder, COLUMN),
        "rotated grid": lambda: rotated(folder),
    }[request.param]()
    finished = groundglow("run", made.job_file, "--quiet")
    assert finished.code == 0, finished.err
    return made


def test_stages_give_the_bytes_of_the_fused_run(scene: InventedScene) -> None:
    fused = checksums(scene.folder / "maps" / "invented")
    assert len(fused) == 8
    with_air = 'source = "column"' not in scene.job_file.read_text()
    assert checksums(stage_by_stage(scene, air=with_air)) == fused


def test_datasets_give_the_bytes_of_the_fused_run(scene: InventedScene) -> None:
    plan = api.plan(scene.job_file)
    maps = api.run_chain(api.open_scene_dataset(plan, chunks=((31, 59), (64, 46))), plan)
    api.write_layers(maps, work(scene) / "python")
    assert checksums(work(scene) / "python") == checksums(scene.folder / "maps" / "invented")


@pytest.mark.parametrize(("row", "column"), [(20, 80), (31, 6), (45, 65), (89, 0)])
def test_explained_pixels_are_those_of_the_map(scene: InventedScene, row: int, column: int) -> None:
    with rasterio.open(scene.folder / "thermal.tif") as raster:
        x, y = raster.xy(row, column)
    found = groundglow("explain", scene.job_file, x, y, "--json")
    assert found.code == 0, found.err
    (story,) = json.loads(found.out)
    assert (story["row"], story["column"]) == (row, column)
    for name, value in story["layers"].items():
        with rasterio.open(scene.folder / "maps" / "invented" / f"{name}.tif") as raster:
            stored = float(raster.read(1)[row, column])
        assert value == (stored if np.isfinite(stored) else None), name


def test_the_column_method_needs_no_air_and_the_other_does(tmp_path: Path) -> None:
    scene = painted(tmp_path, WEATHER)
    stage_by_stage(scene)
    given = [
        f"--{name}={work(scene) / name}" for name in ("radiance", "brightness-temperature", "emissivity")
    ]
    target = ["--scene", scene.scene_file, "--output", work(scene) / "surface"]
    refused = groundglow("surface-temperature", scene.job_file, *given, *target)
    assert (refused.code, "needs the air" in refused.err) == (2, True)
    column = scene.write_job(LAYERS, name="column.toml", air=COLUMN)
    none = groundglow("atmosphere", column, *target)
    assert (none.code, "looks at the column alone" in none.err) == (2, True)
    assert groundglow("surface-temperature", column, *given, *target, "--quiet").code == 0
    with rasterio.open(work(scene) / "surface" / "surface_temperature.tif") as raster:
        assert np.isfinite(raster.read(1)).mean() > 0.9
