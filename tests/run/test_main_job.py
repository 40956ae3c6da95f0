"""The main job end to end: known ground comes back, in layers that any reader opens."""

from __future__ import annotations

import hashlib
import json
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import rasterio
import tifffile
from rio_cogeo import cog_validate
from typer.testing import CliRunner

from groundglow.cli import app
from groundglow.quantities import FLAG
from invented_scene import EMISSIVITY, SKY_FLUX, InventedScene, paint_scene, write_raster

ALL_LAYERS = """
[layers]
write = ["surface_temperature", "surface_temperature_uncertainty", "surface_temperature_uncertainty_pixel",
         "surface_temperature_uncertainty_class", "surface_temperature_uncertainty_scene", "emitted_flux",
         "emitted_flux_uncertainty", "leaving_flux", "net_longwave_flux", "sky_flux", "brightness_temperature",
         "emissivity", "broadband_emissivity", "transmittance", "path_radiance"]
"""


def run(job: Path, *options: str) -> dict[str, object]:
    result = CliRunner().invoke(app, ["run", str(job), "--json", "--quiet", *options], catch_exceptions=False)
    assert result.exit_code == 0, result.output
    return json.loads(result.stdout)


def read(scene: InventedScene, layer: str) -> np.ndarray:
    with rasterio.open(scene.folder / "maps" / "invented" / f"{layer}.tif") as raster:
        return raster.read(1)


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> InventedScene:
    scene = paint_scene(tmp_path_factory.mktemp("scene"))
    scene.write_job(ALL_LAYERS)
    run(scene.job_file)
    return scene


def clear(scene: InventedScene) -> np.ndarray:
    return (scene.counts > 0) & (scene.counts < 65535) & (scene.words == 0)


def test_painted_ground_comes_back_to_within_rounding(finished: InventedScene) -> None:
    error = (read(finished, "surface_temperature") - finished.temperature)[clear(finished)]
    # Counts are 0.0003 W m-2 sr-1 um-1 apart (0.003 K here) and the layer is kept to 1/128 K.
    assert np.abs(error).max() < 0.008
    assert abs(error.mean()) < 5e-4


def test_fluxes_follow_from_temperature(finished: InventedScene) -> None:
    # Textbook: M = eps sigma T^4, leaving = M + (1 - eps) sky, net = sky - leaving; sigma of CODATA 2018.
    t = finished.temperature[clear(finished)]
    emitted = EMISSIVITY * 5.670374419e-8 * t**4
    leaving = emitted + (1 - EMISSIVITY) * SKY_FLUX
    np.testing.assert_allclose(read(finished, "emitted_flux")[clear(finished)], emitted, atol=0.08)
    np.testing.assert_allclose(read(finished, "leaving_flux")[clear(finished)], leaving, atol=0.08)
    np.testing.assert_allclose(
        read(finished, "net_longwave_flux")[clear(finished)], SKY_FLUX - leaving, atol=0.08
    )
    np.testing.assert_allclose(read(finished, "sky_flux")[clear(finished)], SKY_FLUX, atol=0.02)


def test_flags_say_what_each_pixel_is(finished: InventedScene) -> None:
    quality = read(finished, "quality")
    assumed = FLAG["emissivity_assumed"].mask | FLAG["broadband_emissivity_assumed"].mask
    assert quality[45, 65] == assumed | FLAG["cloud"].mask
    assert quality[7, 9] & FLAG["saturated"].mask
    assert quality[-1, 0] & FLAG["no_data"].mask
    assert quality[20, 80] == assumed


def test_masked_pixels_carry_no_number_in_any_layer(finished: InventedScene) -> None:
    for path in (finished.folder / "maps" / "invented").glob("*.tif"):
        if path.stem != "quality":
            values = read(finished, path.stem)
            assert np.isnan(values[[45, 7, -1], [65, 9, 0]]).all(), path.stem
            assert np.isfinite(values[clear(finished)]).all(), path.stem


def test_component_uncertainties_add_up(finished: InventedScene) -> None:
    where = clear(finished)
    parts = [
        read(finished, f"surface_temperature_uncertainty_{part}") for part in ("pixel", "class", "scene")
    ]
    total = np.sqrt(sum(part.astype(float) ** 2 for part in parts))
    np.testing.assert_allclose(
        read(finished, "surface_temperature_uncertainty")[where], total[where], rtol=4e-3
    )


def test_layers_line_up_with_the_input_to_the_pixel(finished: InventedScene) -> None:
    with rasterio.open(finished.folder / "thermal.tif") as thermal:
        expected = (thermal.crs, thermal.transform, thermal.shape)
    for path in (finished.folder / "maps" / "invented").glob("*.tif"):
        with rasterio.open(path) as layer:
            assert (layer.crs, layer.transform, layer.shape) == expected, path.stem


def test_layers_open_with_unit_nodata_and_names(finished: InventedScene) -> None:
    with rasterio.open(finished.folder / "maps" / "invented" / "surface_temperature.tif") as layer:
        assert layer.units == ("K",)
        assert np.isnan(layer.nodata)
        assert layer.tags(1)["standard_name"] == "surface_temperature"
        assert "[K]" in layer.descriptions[0]
        stored = layer.read(1)
        assert float(layer.tags(1)["STATISTICS_MEAN"]) == pytest.approx(
            np.nanmean(stored, dtype=float), abs=1e-6
        )


def test_the_item_is_complete_and_names_inputs_with_checksums(finished: InventedScene) -> None:
    folder = finished.folder / "maps" / "invented"
    item = json.loads((folder / "invented.json").read_text())
    assert item["properties"]["datetime"] == "2026-07-14T08:32:00Z"
    provenance = item["properties"]["groundglow:provenance"]
    inputs = {one["role"]: one["sha256"] for one in provenance["inputs"]}
    thermal = (finished.folder / "thermal.tif").read_bytes()
    assert inputs["thermal"] == hashlib.sha256(thermal).hexdigest()
    assert provenance["method"]["atmosphere"]["reference"] == "invented for the tests"
    assert provenance["method"]["atmosphere"]["correlations"]["path_sky"] == {"value": 0.9, "from": "assumed"}
    for name, asset in item["assets"].items():
        data = (folder / asset["href"]).read_bytes()
        assert asset["file:checksum"] == "1220" + hashlib.sha256(data).hexdigest(), name


def digests(folder: Path) -> dict[str, str]:
    return {
        path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in sorted(folder.rglob("*.tif"))
    }


def test_block_size_and_workers_do_not_change_a_byte(tmp_path: Path) -> None:
    # Odd sizes, several tiles, and every overview level crossed by block edges.
    scene = paint_scene(tmp_path, 1543, 1051, noise=0.01)
    found = []
    for block, workers in ((512, 1), (1024, 2), (2048, 6)):
        buffer = "[quality]\ncloud_buffer = 200\n"
        job = scene.write_job(f"{buffer}[run]\nblock = {block}\nworkers = {workers}\n")
        run(job, "--output", str(tmp_path / f"out{block}"))
        found.append(digests(tmp_path / f"out{block}"))
    assert len(found[0]) == 4
    assert found[0] == found[1] == found[2]


def test_layers_are_strictly_valid_cloud_optimised_geotiffs(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path, 1543, 1051, noise=0.01)
    run(scene.job_file)
    for path in (tmp_path / "maps" / "invented").glob("*.tif"):
        valid, errors, warnings = cog_validate(path, strict=True)
        assert valid, (path.name, errors, warnings)
        with tifffile.TiffFile(path) as tiff:
            assert [page.is_tiled for page in tiff.pages] == [True] * 3


@pytest.mark.parametrize("compression", ["zstd", "deflate"])
def test_both_codecs_store_the_same_values(tmp_path: Path, compression: str) -> None:
    scene = paint_scene(tmp_path)
    scene.write_job(f'[layers]\ncompression = "{compression}"\n')
    run(scene.job_file)
    with rasterio.open(tmp_path / "maps" / "invented" / "surface_temperature.tif") as layer:
        assert layer.compression.value.lower() == compression
        error = (layer.read(1) - scene.temperature)[clear(scene)]
    assert np.abs(error).max() < 0.008


def test_pixel_noise_comes_back_as_stated(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path, 300, 400, noise=0.0141)  # 0.1 K at 300 K in this band, as the sensor says
    scene.write_job(ALL_LAYERS)
    run(scene.job_file)
    error = (read(scene, "surface_temperature") - scene.temperature)[clear(scene)]
    stated = read(scene, "surface_temperature_uncertainty_pixel")[clear(scene)]
    assert np.std(error / stated) == pytest.approx(1.0, abs=0.03)


def test_brightness_temperature_needs_no_air(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    scene.write_job('[layers]\nwrite = ["brightness_temperature"]\n', air='[atmosphere]\nsource = "none"\n')
    run(scene.job_file)
    found = read(scene, "brightness_temperature")[clear(scene)]
    assert np.nanmax(found) < scene.temperature.max()
    assert np.isfinite(found).all()


def test_the_two_constant_form_is_used_on_request(tmp_path: Path) -> None:
    # USGS, Landsat 8 band 10: DN 25000 is L 8.4550 and T 291.7056 K (published gain, offset, K1, K2).
    paint_scene(tmp_path)
    with rasterio.open(tmp_path / "thermal.tif") as raster:
        transform = raster.transform
    write_raster(tmp_path / "thermal.tif", np.full((90, 110), 25000, np.uint16), transform)
    text = (
        (tmp_path / "scene.toml")
        .read_text()
        .replace('"narrow.toml"', '"landsat-8"')
        .replace('band = "1"', 'band = "10"')
    )
    (tmp_path / "scene.toml").write_text(re.sub(r"scale = \S+", "scale = 3.342e-4", text))
    (tmp_path / "job.toml").write_text(
        'scenes = "scene.toml"\noutput = "maps"\n[emissivity]\nsource = "constant"\nvalue = 1.0\n'
        '[atmosphere]\nsource = "none"\n[layers]\nwrite = ["brightness_temperature"]\n'
        '[temperature]\nradiometry = "two-constants"\n'
    )
    summary = run(tmp_path / "job.toml")
    assert summary["scenes"][0]["temperature"]["maximum"] == pytest.approx(291.7056, abs=1 / 256)


def test_air_over_ground_heights_follows_the_elevation_raster(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    heights = np.linspace(0.0, 1000.0, scene.counts.size, dtype=np.float32).reshape(scene.counts.shape)
    write_raster(tmp_path / "dem.tif", heights, scene.transform)
    text = scene.scene_file.read_text().replace("elevation = 400.0", 'elevation = { path = "dem.tif" }')
    scene.scene_file.write_text(text)
    air = """
[atmosphere]
source = "explicit"
reference = "invented"
[[atmosphere.air]]
band = "1"
ground_height = [0, 1000]
transmittance = [0.6, 0.9]
path_radiance = [3.0, 1.0]
sky_radiance = [4.0, 2.0]
"""
    scene.write_job('[layers]\nwrite = ["surface_temperature", "transmittance"]\n', air=air)
    run(scene.job_file)
    found = read(scene, "transmittance")[clear(scene)]
    np.testing.assert_allclose(found, (0.6 + 0.3 * heights / 1000.0)[clear(scene)], atol=2e-4)


def test_a_fully_clouded_scene_is_a_result_not_an_error(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    write_raster(tmp_path / "quality.tif", np.full(scene.counts.shape, 8, np.uint16), scene.transform)
    summary = run(scene.job_file)
    assert summary["scenes"][0]["status"] == "nothing valid"
    assert summary["scenes"][0]["valid_percent"] == 0.0


def test_the_run_loads_nothing_heavy(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    program = (
        "import sys\nfrom groundglow.cli import app\n"
        f"try:\n    app(['run', {str(scene.job_file)!r}, '--quiet'])\n"
        "except SystemExit as end:\n    assert not end.code\n"
        "print(' '.join(sorted(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    loaded = set(done.stdout.split())
    heavy = {
        "xarray",
        "dask.array",
        "odc",
        "odc.geo",
        "matplotlib",
        "pystac",
        "distributed",
        "pandas",
        "scipy.linalg",
        "pyproj",
    }
    assert not heavy & loaded
    assert "groundglow.run.blocks.worker" in loaded


def test_help_starts_without_the_numerical_libraries() -> None:
    program = (
        "import sys\nfrom groundglow.cli import app\n"
        "try:\n    app(['--help'])\nexcept SystemExit:\n    pass\n"
        "print('loaded:', ' '.join(sorted(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    loaded = set(done.stdout.rsplit("loaded:", 1)[1].split())
    assert not {"numpy", "rasterio", "numba", "pydantic", "dask"} & loaded
