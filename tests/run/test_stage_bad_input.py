"""Stages given what they cannot use: one clear message, an exit code, nothing left behind."""

from __future__ import annotations

import json
import re
import shutil
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from command_line import groundglow
from invented_scene import InventedScene, paint_scene, write_raster
from stage_scenes import stage, stage_by_stage, varied_scene, work


@pytest.fixture(scope="module")
def scene(tmp_path_factory: pytest.TempPathFactory) -> InventedScene:
    scene = paint_scene(tmp_path_factory.mktemp("stages"))
    stage_by_stage(scene)
    return scene


def refused(
    scene: InventedScene, *given: object, command: str = "brightness-temperature", code: int = 3
) -> str:
    """The message, after checking that it is one, and that no output appeared."""
    found = stage(scene, command, "refused", *given)
    assert found.code == code
    assert found.out == ""
    assert found.err.count("\n") == 1
    assert found.err.startswith("groundglow: ")
    assert not (work(scene) / "refused").exists()
    assert [path for path in work(scene).iterdir() if path.name.startswith(".")] == []
    return found.err


def copied(scene: InventedScene, to: Path, stage_name: str = "radiance") -> Path:
    return Path(shutil.copytree(work(scene) / stage_name, to / stage_name))


def test_the_output_of_another_stage(scene: InventedScene) -> None:
    message = refused(scene, "--radiance", work(scene) / "emissivity")
    assert "the output of the stage 'emissivity', and --radiance needs that of 'radiance'" in message


def test_a_folder_that_is_not_there(scene: InventedScene) -> None:
    assert "there is no such stage output" in refused(scene, "--radiance", scene.folder / "nowhere")


def test_a_missing_record(scene: InventedScene, tmp_path: Path) -> None:
    folder = copied(scene, tmp_path)
    (folder / "stage.json").unlink()
    assert "this folder holds no stage.json" in refused(scene, "--radiance", folder)


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("", "cannot be read"),
        ("[1, 2]", "not a JSON object"),
        ('{"stage": "radiance"}', "key 'grid' is missing"),
        ('{"stage": "irradiance"}', "stage"),
    ],
    ids=["empty", "a list", "keys missing", "unknown stage"],
)
def test_a_record_that_is_none(scene: InventedScene, tmp_path: Path, text: str, told: str) -> None:
    folder = copied(scene, tmp_path)
    (folder / "stage.json").write_text(text)
    message = refused(scene, "--radiance", folder)
    assert told in message
    assert "stage.json" in message


def test_a_missing_raster(scene: InventedScene, tmp_path: Path) -> None:
    folder = copied(scene, tmp_path)
    (folder / "radiance.tif").unlink()
    message = refused(scene, "--radiance", folder)
    assert "a file that the stage's record names is missing" in message
    assert "radiance.tif" in message


def test_a_raster_that_was_changed(scene: InventedScene, tmp_path: Path) -> None:
    folder = copied(scene, tmp_path)
    with (folder / "radiance.tif").open("ab") as file:
        file.write(b"more")
    assert re.search(r"has \d+ bytes, and the stage's record says \d+", refused(scene, "--radiance", folder))


def with_record(scene: InventedScene, to: Path, change: Callable[[dict[str, object]], None]) -> Path:
    folder = copied(scene, to)
    record = json.loads((folder / "stage.json").read_text())
    change(record)
    (folder / "stage.json").write_text(json.dumps(record))
    return folder


def test_another_grid(scene: InventedScene, tmp_path: Path) -> None:
    other = paint_scene(tmp_path, 64, 80)
    assert stage(other, "radiance", "radiance", "--quiet").code == 0
    message = refused(scene, "--radiance", work(other) / "radiance")
    assert "its grid is 80 x 64 at 30 m, EPSG:32633" in message
    assert "the scene's is 110 x 90 at 30 m, EPSG:32633" in message


def test_a_grid_of_the_same_size_elsewhere(scene: InventedScene, tmp_path: Path) -> None:
    def shift(record: dict[str, object]) -> None:
        record["grid"]["transform"][2] += 15.0  # type: ignore[index]  # (plain JSON)

    assert "from (412360, 5338765)" in refused(scene, "--radiance", with_record(scene, tmp_path, shift))


@pytest.mark.parametrize(("key", "value"), [("scene", "another"), ("band", "2"), ("sensor", "wide")])
def test_another_scene_band_or_sensor(scene: InventedScene, tmp_path: Path, key: str, value: str) -> None:
    folder = with_record(scene, tmp_path, lambda record: record.update({key: value}))
    assert f"this is of {key} {value!r}, and job and scene file ask for {key} " in refused(
        scene, "--radiance", folder
    )


def test_air_that_cannot_be_read(scene: InventedScene, tmp_path: Path) -> None:
    folder = copied(scene, tmp_path, "atmosphere")
    text = (folder / "air.json").read_text()
    (folder / "air.json").write_text(text.replace("transmittance", "transmittancy"))
    given = [
        f"--{name}={work(scene) / name}" for name in ("radiance", "brightness-temperature", "emissivity")
    ]
    message = refused(scene, *given, "--atmosphere", folder, command="surface-temperature")
    assert "this is not the air of an atmosphere stage" in message


def test_layers_that_no_stage_holds(scene: InventedScene) -> None:
    given = [work(scene) / name for name in ("brightness-temperature", "surface-temperature")]
    message = refused(scene, *given, command="layers")
    assert "no stage given holds emitted_flux" in message
    assert "given: brightness-temperature, surface-temperature" in message


def test_a_stage_given_twice(scene: InventedScene) -> None:
    given = [work(scene) / name for name in ("surface-temperature", "flux", "flux")]
    assert "two outputs of the stage 'flux' are given" in refused(scene, *given, command="layers")


def test_a_file_where_the_folder_should_be(scene: InventedScene, tmp_path: Path) -> None:
    place = tmp_path / "taken"
    place.write_text("mine")
    found = groundglow("radiance", scene.job_file, "--scene", scene.scene_file, "--output", place)
    assert (found.code, "a folder is to be written" in found.err) == (3, True)
    assert place.read_text() == "mine"


@pytest.mark.parametrize("inside", ["holiday.jpg", "scans/night.tif"])
def test_a_folder_of_something_else_is_never_replaced(
    scene: InventedScene, tmp_path: Path, inside: str
) -> None:
    mine = tmp_path / "mine"
    (mine / inside).parent.mkdir(parents=True, exist_ok=True)
    (mine / inside).write_text("mine")
    arguments = ("--scene", scene.scene_file, "--output", mine)
    found = groundglow("radiance", scene.job_file, *arguments)
    assert (found.code, "the folder holds what no stage wrote" in found.err) == (3, True)
    assert (mine / inside).read_text() == "mine"
    assert [path.name for path in tmp_path.iterdir()] == ["mine"]


def test_an_empty_folder_and_a_roundabout_name_will_do(scene: InventedScene, tmp_path: Path) -> None:
    # Workflow managers make the folders of declared outputs beforehand.
    (tmp_path / "made").mkdir()
    place = tmp_path / "elsewhere" / ".." / "made"
    assert groundglow("radiance", scene.job_file, "--scene", scene.scene_file, "-o", place, "-q").code == 0
    assert sorted(path.name for path in (tmp_path / "made").iterdir()) == [
        "quality.tif",
        "radiance.tif",
        "stage.json",
    ]


def test_a_folder_below_a_file(scene: InventedScene, tmp_path: Path) -> None:
    (tmp_path / "taken").write_text("mine")
    found = groundglow(
        "radiance", scene.job_file, "--scene", scene.scene_file, "--output", tmp_path / "taken" / "out"
    )
    assert found.code == 3
    assert "cannot be written" in found.err


def test_a_forgotten_option_is_a_mistake_on_the_command_line(scene: InventedScene) -> None:
    found = stage(scene, "brightness-temperature", "refused")
    assert found.code == 2
    assert "--radiance" in found.err


def test_mostly_impossible_emissivity(tmp_path: Path) -> None:
    scene = varied_scene(tmp_path, 60, 70)
    percent = np.full((60, 70), 97.0, np.float32)
    write_raster(tmp_path / "emissivity.tif", percent, scene.transform)
    found = stage(scene, "emissivity", "emissivity")
    assert found.code == 3
    assert "not above 0 and at most 1 in 4200 of 4200 pixels" in found.err
    assert not (work(scene) / "emissivity").exists()
