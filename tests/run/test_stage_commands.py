"""The stages one by one, file to file: the same map as the fused run, safe to repeat, self-describing."""

from __future__ import annotations

import hashlib
import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import rasterio

from command_line import groundglow
from invented_scene import InventedScene, paint_scene
from stage_scenes import stage, stage_by_stage, varied_scene, work


def checksums(folder: Path, pattern: str = "*.tif") -> dict[str, str]:
    return {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in sorted(folder.glob(pattern))}


@pytest.fixture(scope="module")
def scene(tmp_path_factory: pytest.TempPathFactory) -> InventedScene:
    scene = varied_scene(tmp_path_factory.mktemp("stages"))
    stage_by_stage(scene)
    return scene


def test_stages_one_by_one_give_the_bytes_of_the_fused_run(scene: InventedScene) -> None:
    assert groundglow("run", scene.job_file, "--quiet").code == 0
    fused = checksums(scene.folder / "maps" / "invented")
    assert len(fused) == 16
    assert checksums(work(scene) / "layers") == fused


def test_what_stands_beside_the_layers_is_that_of_the_fused_run(scene: InventedScene) -> None:
    # Items differ in time fields only.
    assert groundglow("run", scene.job_file, "--quiet").code == 0
    one, other = (
        json.loads((folder / "invented.json").read_text())
        for folder in (work(scene) / "layers", scene.folder / "maps" / "invented")
    )
    for item in (one, other):
        for key in ("created", "updated", "processing:datetime"):
            item["properties"].pop(key, None)
    assert one == other
    names = [sorted(path.name for path in folder.iterdir()) for folder in
             (work(scene) / "layers", scene.folder / "maps" / "invented")]  # fmt: skip
    assert names[0] == names[1]


def test_every_raster_says_what_it_is(scene: InventedScene) -> None:
    for folder in (path for path in work(scene).iterdir() if (path / "stage.json").is_file()):
        record = json.loads((folder / "stage.json").read_text())
        assert record["stage"] == folder.name
        for name, described in record["variables"].items():
            path = folder / described["file"]
            assert hashlib.sha256(path.read_bytes()).hexdigest() == described["sha256"]
            if path.suffix == ".tif":
                with rasterio.open(path) as raster:
                    assert raster.tags(1)["name"] == name
                    assert raster.units == (described["units"],)
                    assert raster.crs.to_epsg() == 32633
                    assert raster.dtypes == ("uint16" if name == "quality" else "float32",)


def test_between_stages_nothing_is_rounded(scene: InventedScene) -> None:
    # Counts times scale plus offset in float32: every bit of it, where a final layer keeps 15 of 23.
    with rasterio.open(work(scene) / "radiance" / "radiance.tif") as raster:
        found = raster.read(1)
    expected = (3.0e-4 * scene.counts.astype(np.float64) + 0.1).astype(np.float32)
    expected[scene.counts == 0] = np.nan
    np.testing.assert_array_equal(found, expected)
    assert np.any(found[np.isfinite(found)].view(np.uint32) & 0xFF)


def test_repeating_a_stage_changes_no_byte_and_leaves_nothing_behind(scene: InventedScene) -> None:
    for name in ("radiance", "atmosphere"):
        before = checksums(work(scene) / name, "*")
        assert stage(scene, name, name, "--quiet").code == 0
        assert checksums(work(scene) / name, "*") == before
    assert [path.name for path in work(scene).iterdir() if path.name.startswith(".")] == []


def test_what_a_killed_stage_left_is_replaced(scene: InventedScene) -> None:
    left = work(scene) / ".radiance.building-"
    left.mkdir()
    (left / "radiance.tif").write_bytes(b"half")
    before = checksums(work(scene) / "radiance", "*")
    assert stage(scene, "radiance", "radiance", "--quiet").code == 0
    assert checksums(work(scene) / "radiance", "*") == before
    assert not left.exists()


def test_a_failed_stage_leaves_the_old_output_as_it_was(scene: InventedScene, tmp_path: Path) -> None:
    before = checksums(work(scene) / "radiance", "*")
    broken = paint_scene(tmp_path)
    (tmp_path / "thermal.tif").write_bytes((tmp_path / "thermal.tif").read_bytes()[:3000])
    failed = groundglow(
        "radiance", scene.job_file, "--scene", broken.scene_file, "--output", work(scene) / "radiance"
    )
    assert failed.code == 3
    assert checksums(work(scene) / "radiance", "*") == before
    assert [path.name for path in work(scene).iterdir() if path.name.startswith(".")] == []


def test_a_stage_that_is_ended_leaves_nothing_behind(tmp_path: Path) -> None:
    # Workflow managers end a job with SIGTERM; here it comes while the output is being built.
    program = (
        "import sys, time; from pathlib import Path; from groundglow.cli import main; "
        "from groundglow.run.stage import atmosphere as stage; whole = stage.write_whole\n"
        "def slowly(path, data):\n    whole(path, data); print('half', flush=True); time.sleep(60)\n"
        "stage.write_whole = slowly\nmain()"
    )
    scene = paint_scene(tmp_path)
    output = work(scene) / "air"
    arguments = ["atmosphere", scene.job_file, "--scene", scene.scene_file, "--output", output]
    running = subprocess.Popen(
        [sys.executable, "-c", program, *map(str, arguments)], stdout=subprocess.PIPE, stderr=subprocess.PIPE
    )
    assert running.stdout is not None
    assert running.stdout.readline() == b"half\n"
    assert len(list(work(scene).iterdir())) == 2  # the hidden folder and its lock
    running.terminate()
    running.communicate(timeout=30)
    assert running.returncode == 130
    assert list(work(scene).iterdir()) == []


def test_two_processes_do_not_make_the_same_output(scene: InventedScene) -> None:
    lock = work(scene) / ".radiance.lock"
    holder = subprocess.Popen(
        [sys.executable, "-c", "import fcntl, sys; f = open(sys.argv[1], 'a'); fcntl.flock(f, fcntl.LOCK_EX); "
         "print('held', flush=True); sys.stdin.read()", str(lock)],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE,
    )  # fmt: skip
    assert holder.stdout is not None
    assert holder.stdout.readline() == b"held\n"
    found = stage(scene, "radiance", "radiance")
    holder.communicate()
    assert (found.code, "another process is making this output" in found.err) == (75, True)
    # The holder is dead: its lock holds nobody.
    assert stage(scene, "radiance", "radiance", "--quiet").code == 0
    assert not lock.exists()


def test_threads_do_not_change_a_byte(scene: InventedScene) -> None:
    given = [f"--{name}={work(scene) / name}" for name in
             ("radiance", "brightness-temperature", "emissivity", "atmosphere")]  # fmt: skip
    assert stage(scene, "surface-temperature", "other", *given, "--workers", 3, "--quiet").code == 0
    assert checksums(work(scene) / "other", "*") == checksums(work(scene) / "surface-temperature", "*")


def test_the_record_can_stand_for_its_folder(scene: InventedScene) -> None:
    record = work(scene) / "radiance" / "stage.json"
    assert stage(scene, "brightness-temperature", "again", "--radiance", record, "--quiet").code == 0
    assert checksums(work(scene) / "again") == checksums(work(scene) / "brightness-temperature")


def test_brightness_temperature_jobs_need_no_air(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    job = scene.write_job(
        '[layers]\nwrite = ["brightness_temperature"]\n', air='[atmosphere]\nsource = "none"\n'
    )
    given = work(scene) / "radiance"
    assert stage(scene, "radiance", "radiance", "--quiet").code == 0
    assert stage(scene, "brightness-temperature", "bt", "--radiance", given, "--quiet").code == 0
    assert stage(scene, "layers", "layers", work(scene) / "bt", "--quiet").code == 0
    assert groundglow("run", job, "--quiet").code == 0
    assert checksums(work(scene) / "layers") == checksums(tmp_path / "maps" / "invented")
    refused = stage(scene, "atmosphere", "air")
    assert refused.code == 2
    assert "no air" in refused.err


def test_what_was_made_is_told_in_a_line_or_in_json(scene: InventedScene) -> None:
    line = stage(scene, "radiance", "radiance").out
    assert "radiance of invented, 600 x 530 at 30 m, EPSG:32633: radiance, quality" in line
    told = json.loads(stage(scene, "atmosphere", "atmosphere", "--json").out)
    assert (told["stage"], list(told["variables"])) == ("atmosphere", ["air"])


def test_stages_do_not_wait_for_the_libraries_of_the_python_interface(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    program = (
        "import sys; from groundglow.cli import app; "
        f"app(['radiance', {str(scene.job_file)!r}, '--scene', {str(scene.scene_file)!r}, '-q', "
        f"'-o', {str(tmp_path / 'out')!r}], standalone_mode=False); "
        "print(sorted({'xarray', 'dask.array', 'pandas', 'odc', 'matplotlib', 'pystac', 'pyproj', 'distributed'} "
        "& set(sys.modules)))"
    )
    done = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, env=dict(os.environ)
    )
    assert done.stdout.strip() == "[]"
