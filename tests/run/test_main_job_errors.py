"""Bad input: one clear message that says what, where and what to do; an exit code; nothing left behind."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from command_line import Finished, groundglow
from groundglow.run.placing import publish
from invented_scene import AIR, InventedScene, paint_scene, scene_text, write_raster

USAGE, FAILED, BUSY = 2, 3, 75


@pytest.fixture
def scene(tmp_path: Path) -> InventedScene:
    return paint_scene(tmp_path)


def refused(finished: Finished, code: int, *words: str) -> None:
    assert finished.code == code, finished.err
    assert "Traceback" not in finished.err
    for word in words:
        assert word in finished.err, finished.err


def nothing_left(scene: InventedScene) -> None:
    maps = scene.folder / "maps"
    assert [path.name for path in maps.glob("*")] in ([], [publish.LOCK_NAME]) or not maps.exists()


def test_missing_raster(scene: InventedScene) -> None:
    (scene.folder / "thermal.tif").unlink()
    refused(groundglow("run", scene.job_file), FAILED, "thermal.tif", "no such file")
    nothing_left(scene)


@pytest.mark.parametrize(
    ("content", "words"),
    [(b"", ("thermal.tif", "empty")), (b"counts, counts, counts\n" * 40, ("thermal.tif", "not a raster"))],
    ids=["zero length", "text"],
)
def test_files_that_are_no_rasters(scene: InventedScene, content: bytes, words: tuple[str, ...]) -> None:
    (scene.folder / "thermal.tif").write_bytes(content)
    refused(groundglow("run", scene.job_file), FAILED, *words)
    nothing_left(scene)


def test_truncated_raster(scene: InventedScene) -> None:
    path = scene.folder / "thermal.tif"
    path.write_bytes(path.read_bytes()[:9000])
    refused(groundglow("run", scene.job_file), FAILED, "thermal.tif")
    nothing_left(scene)


def test_missing_crs(scene: InventedScene) -> None:
    write_raster(scene.folder / "thermal.tif", scene.counts, scene.transform, crs=None)
    refused(groundglow("run", scene.job_file), FAILED, "thermal.tif", "coordinate reference system")
    nothing_left(scene)


def test_raster_that_does_not_meet_the_scene(scene: InventedScene) -> None:
    far = scene.transform.translation(4.0e5, 0.0) @ scene.transform
    write_raster(scene.folder / "quality.tif", scene.words, far)
    refused(groundglow("run", scene.job_file), FAILED, "quality.tif", "overlap")
    nothing_left(scene)


def test_raster_band_that_is_not_there(scene: InventedScene) -> None:
    scene.scene_file.write_text(scene_text(thermal={"raster_band": 4}))
    refused(groundglow("run", scene.job_file), FAILED, "thermal.tif", "4")
    nothing_left(scene)


@pytest.mark.parametrize(
    ("key", "value", "words"),
    [
        ("sensor", '"landsat-99"', ("landsat-99", "landsat-9")),
        ("acquired", "2026-07-14T10:32:00", ("acquired", "UTC")),
        ("acquired", '"yesterday"', ("acquired",)),
    ],
)
def test_scene_file_values(scene: InventedScene, key: str, value: str, words: tuple[str, ...]) -> None:
    lines = scene.scene_file.read_text().splitlines()
    lines = [f"{key} = {value}" if line.startswith(f"{key} =") else line for line in lines]
    scene.scene_file.write_text("\n".join(lines))
    finished = groundglow("run", scene.job_file)
    refused(finished, finished.code, "scene.toml", *words)
    assert finished.code in (USAGE, FAILED)
    nothing_left(scene)


@pytest.mark.parametrize(
    ("found", "given", "words"),
    [
        ("transmittance = 0.82", "transmittance = 0.0", ("transmittance", "above 0")),
        ("transmittance = 0.82", "transmittance = 1.2", ("transmittance", "at most 1", "1.2")),
        ("path_radiance = 1.44", "path_radiance = nan", ("path_radiance", "finite")),
        ("path_radiance = 1.44", "path_radiance = -1.0", ("path_radiance", "negative")),
        ('band = "1"', 'band = "7"', ("band 1", "atmosphere.air")),
        ("sky_flux = 345.0", "sky_flux = 34500.0", ("sky_flux",)),
        ("sky_flux = 345.0", "skyflux = 345.0", ("skyflux", "did you mean 'sky_flux'")),
    ],
)
def test_impossible_air(scene: InventedScene, found: str, given: str, words: tuple[str, ...]) -> None:
    assert found in AIR
    scene.write_job(air=AIR.replace(found, given))
    refused(groundglow("run", scene.job_file), USAGE, *words)
    nothing_left(scene)


@pytest.mark.parametrize("value", ["0.0", "1.3", "nan", "97"])
def test_impossible_emissivity(scene: InventedScene, value: str) -> None:
    scene.write_job(ground=f'[emissivity]\nsource = "constant"\nvalue = {value}\n')
    refused(groundglow("run", scene.job_file), USAGE, "job.toml", "emissivity.value")
    nothing_left(scene)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("[layers]\nwriet = []\n", ("layers.wriet", "did you mean 'write'")),
        ('[layers]\nwrite = ["temperature"]\n', ("temperature", "surface_temperature")),
        ('[quality]\nmask = ["clouds"]\n', ("clouds", "cloud")),
        ('[quality]\ncloud_buffer = "3 miles"\n', ("cloud_buffer", "miles", "km")),
        ('[temperature]\nband = "12"\n', ("12", "temperature.band")),
        ("[run]\nblock = 700\n", ("run.block", "512")),
        ("[temperature]\nlowest = 300\nhighest = 290\n", ("lowest", "highest")),
        ('[compare]\nemissivity = "truth.tif"\n', ("emissivity", "compare")),
        ("[temperature\n", ("job.toml", "TOML", "line")),
    ],
)
def test_jobs_that_cannot_be_followed(scene: InventedScene, text: str, words: tuple[str, ...]) -> None:
    scene.write_job(text)
    refused(groundglow("run", scene.job_file), USAGE, *words)
    nothing_left(scene)


def test_contradictions_are_refused(scene: InventedScene) -> None:
    scene.write_job('[layers]\nwrite = ["net_longwave_flux"]\n', air=AIR.replace("sky_flux = 345.0", ""))
    refused(groundglow("run", scene.job_file), USAGE, "net_longwave_flux", "sky_flux")
    scene.write_job(air='[atmosphere]\nsource = "none"\n')
    refused(groundglow("run", scene.job_file), USAGE, "surface_temperature", "brightness_temperature")


def test_heights_without_elevation(scene: InventedScene) -> None:
    scene.scene_file.write_text(scene_text().replace("elevation = 400.0\n", ""))
    air = AIR
    for name, value in (("transmittance", 0.82), ("path_radiance", 1.44), ("sky_radiance", 2.38)):
        air = air.replace(f"{name} = {value}", f"{name} = [{value}, {value}]")
    scene.write_job(air=air + "ground_height = [0, 1000]\n")
    refused(groundglow("run", scene.job_file), USAGE, "elevation", "scene file")


@pytest.mark.parametrize(
    "arguments", [("run",), ("run", "nowhere.toml"), ("fly", "job.toml"), ("run", "x", "--fast")]
)
def test_command_lines_that_cannot_be_followed(arguments: tuple[str, ...], tmp_path: Path) -> None:
    refused(groundglow(*arguments), USAGE)


def test_unknown_scene_and_scheduler(scene: InventedScene) -> None:
    refused(groundglow("run", scene.job_file, "--scheduler", "cloud"), USAGE, "--scheduler", "threads")
    text = scene.job_file.read_text().replace('"scene.toml"', '"night/*.toml"')
    scene.job_file.write_text(text)
    refused(groundglow("run", scene.job_file), USAGE, "night/*.toml", "scenes")


def test_output_in_use_names_its_holder(scene: InventedScene) -> None:
    with publish.locked(scene.folder / "maps"):
        refused(groundglow("run", scene.job_file), BUSY, "in use", f"process {os.getpid()}")


def test_output_that_cannot_be_written(scene: InventedScene) -> None:
    (scene.folder / "maps").write_text("a file stands where the folder should be")
    refused(groundglow("run", scene.job_file), FAILED, "maps", "another folder")


def test_a_disk_too_small_is_refused_before_the_start(
    scene: InventedScene, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("groundglow.run.making.scene_run.free_bytes", lambda output: 1000)
    refused(groundglow("run", scene.job_file), FAILED, "disk", "MiB", "Free some space")
    nothing_left(scene)


def test_a_full_disk_in_the_middle_leaves_nothing(tmp_path: Path) -> None:
    # A limit on the size of files stands in for the full disk: the system refuses the write in the same way.
    scene = paint_scene(tmp_path, 600, 700, noise=0.02)
    program = (
        "import resource, signal, sys\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (200_000, 200_000))\n"
        "from groundglow.cli import main\n"
        f"sys.argv = ['groundglow', 'run', {str(scene.job_file)!r}]\nmain()\n"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=False)
    assert done.returncode == FAILED, done.stderr
    assert "cannot be written" in done.stderr
    assert "Traceback" not in done.stderr
    nothing_left(scene)


def test_an_old_result_survives_a_failed_run(scene: InventedScene) -> None:
    assert groundglow("run", scene.job_file).code == 0
    before = (scene.folder / "maps" / "invented" / "surface_temperature.tif").read_bytes()
    path = scene.folder / "thermal.tif"
    path.write_bytes(path.read_bytes()[:9000])
    assert groundglow("run", scene.job_file).code == FAILED
    assert (scene.folder / "maps" / "invented" / "surface_temperature.tif").read_bytes() == before


def test_a_constant_raster_of_impossible_emissivity_is_no_map(scene: InventedScene) -> None:
    write_raster(scene.folder / "eps.tif", np.full(scene.counts.shape, 1.3, np.float32), scene.transform)
    scene.scene_file.write_text(scene_text(more='[[emissivity]]\nband = "1"\npath = "eps.tif"\n'))
    scene.write_job(ground='[emissivity]\nsource = "raster"\n')
    refused(groundglow("run", scene.job_file), FAILED, "emissivity", "eps.tif")
    nothing_left(scene)
