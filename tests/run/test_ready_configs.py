"""The ready job files run, and the demo's errors are what its truth says they should be."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import numpy as np
import pytest
import rasterio

from command_line import groundglow
from groundglow.quantities import FLAG

ROOT = Path(__file__).parents[2]
CONFIGS = sorted((ROOT / "configs").glob("*.toml"))
DEMO = "emberholt-2026-07-14"


def run(name: str, output: Path) -> dict[str, object]:
    finished = groundglow("run", ROOT / "configs" / f"{name}.toml", "--output", output, "--json", "--quiet")
    assert finished.code == 0, finished.err
    return json.loads(finished.out)["scenes"][0]


def read(path: Path) -> np.ndarray:
    with rasterio.open(path) as raster:
        return raster.read(1)


@pytest.mark.parametrize("config", CONFIGS, ids=lambda path: path.stem)
def test_every_ready_job_runs(config: Path, tmp_path: Path) -> None:
    scene = run(config.stem, tmp_path)
    assert scene["status"] == "done"
    assert 90.0 < scene["valid_percent"] < 100.0


def test_typed_in_air_is_that_of_the_demo() -> None:
    air = tomllib.loads((ROOT / "data_demo" / "air.toml").read_text())
    for name in ("typed-in-air", "noise-only"):
        job = tomllib.loads((ROOT / "configs" / f"{name}.toml").read_text())
        typed = job["atmosphere"]["air"][0]
        assert typed["ground_height"] == air["height"]
        for term in ("transmittance", "path_radiance", "sky_radiance"):
            assert typed[term] == air["band"][0][term], (name, term)
    job = tomllib.loads((ROOT / "configs" / "typed-in-air.toml").read_text())
    assert job["atmosphere"]["sky_flux"] == air["sky_flux"]


def test_with_exact_inputs_and_noise_only_the_truth_returns(tmp_path: Path) -> None:
    scene = run("noise-only", tmp_path)
    error = scene["reference"]["surface_temperature"]
    assert abs(error["bias"]) <= 0.02
    folder = tmp_path / scene["name"]
    quality = read(folder / "quality.tif")
    clear = (quality & sum(FLAG[n].mask for n in ("no_data", "saturated", "cloud", "thin_cloud"))) == 0
    known = read(folder / "surface_temperature.tif") - read(ROOT / "data_demo/truth/surface_temperature.tif")
    # Noise of the sensor file (0.08 K at 300 K) and quantisation, through transmittance and emissivity.
    sensor = tomllib.loads((ROOT / "pipeline/groundglow/sensors/ember-two-band.toml").read_text())["band"][0]
    stated = noise_in_kelvin(sensor["noise"]["temperature_difference"], folder)
    expected = np.sqrt(np.mean(stated[clear & np.isfinite(known)] ** 2))
    assert np.std(known[clear & np.isfinite(known)]) == pytest.approx(expected, rel=0.05)


def noise_in_kelvin(at_300: float, folder: Path) -> np.ndarray:
    """What the noise implies at each pixel, by Planck's law at the band's middle (10.8 um): not the package's."""
    c2 = 14387.77
    temperature = read(ROOT / "data_demo/truth/surface_temperature.tif").astype(float)
    emissivity = read(ROOT / "data_demo/truth/emissivity_band_1.tif").astype(float)

    def slope(t: np.ndarray | float) -> np.ndarray | float:
        x = c2 / (10.8 * t)
        return x / t * np.exp(x) / np.expm1(x) ** 2

    with rasterio.open(ROOT / "data_demo" / "elevation.tif") as dem:
        height = float(np.median(dem.read(1)))
    transmittance = np.interp(height, [200, 725], [0.81074, 0.85521])
    return at_300 * slope(300.0) / (slope(temperature) * emissivity * transmittance)


def test_the_demos_scene_mean_error_lies_within_the_scene_common_part(tmp_path: Path) -> None:
    job = (ROOT / "configs" / "demo.toml").read_text()
    job = job.replace('"quality",\n]', '"quality", "surface_temperature_uncertainty_scene",\n]')
    job = job.replace('"../data_demo', f'"{ROOT}/data_demo').replace('"../out/demo"', f'"{tmp_path}"')
    (tmp_path / "demo.toml").write_text(job)
    finished = groundglow("run", tmp_path / "demo.toml", "--json", "--quiet")
    assert finished.code == 0, finished.err
    scene = json.loads(finished.out)["scenes"][0]
    common = read(tmp_path / DEMO / "surface_temperature_uncertainty_scene.tif")
    bias = scene["reference"]["surface_temperature"]["bias"]
    assert abs(bias) <= 2.0 * float(np.nanmedian(common))
