"""Angles of view at the sensor and at the surface."""

from __future__ import annotations

import math
import pickle
from pathlib import Path

import numpy as np
import pytest

from groundglow.errors import ConfigError, DomainError
from groundglow.raster.band import RasterSource
from groundglow.scene.geometry import EARTH_RADIUS, ZenithAtSurface, zenith_at_surface
from groundglow.scene.open import open_scene
from painted_rasters import grid, read_all, write


def test_the_law_of_sines() -> None:
    # A triangle of the Earth's centre, the sensor and the point seen: the angle at the centre is the
    # difference of the two, and the distance to the point follows from either.
    for height, angle in ((705_000.0, 7.5), (833_000.0, 45.0), (3000.0, 30.0)):
        zenith = zenith_at_surface(angle, height)
        at_centre = math.radians(zenith - angle)
        distance = EARTH_RADIUS * math.sin(at_centre) / math.sin(math.radians(angle))
        straight_up = math.sqrt(
            (EARTH_RADIUS + height) ** 2 - (EARTH_RADIUS * math.sin(math.radians(zenith))) ** 2
        )
        assert distance == pytest.approx(
            straight_up - EARTH_RADIUS * math.cos(math.radians(zenith)), rel=1e-9
        )
        assert zenith > angle


def test_near_the_ground_they_are_the_same() -> None:
    assert zenith_at_surface(30.0, 0.0) == pytest.approx(30.0, abs=1e-12)
    assert zenith_at_surface(30.0, 120.0) == pytest.approx(30.0, abs=1e-3)
    assert zenith_at_surface(0.0, 705_000.0) == 0.0


@pytest.mark.parametrize(("angle", "height"), [(65.0, 705_000.0), (90.0, 10.0), (-1.0, 10.0), (10.0, -5.0),
                                               (math.nan, 10.0)])  # fmt: skip
def test_lines_of_sight_that_cannot_be(angle: float, height: float) -> None:
    with pytest.raises(DomainError, match=r"misses the Earth|makes no sense"):
        zenith_at_surface(angle, height)


def test_pixels_follow_the_same_law() -> None:
    angles = np.array([[0.0, 7.5, -7.5, np.nan, 70.0, 95.0]], dtype=np.float32)
    found = ZenithAtSurface(705_000.0)(angles)
    wanted = zenith_at_surface(7.5, 705_000.0)
    np.testing.assert_allclose(found[0, :3], [0.0, wanted, wanted], rtol=1e-6)
    assert np.isnan(found[0, 3:]).all()


SCENE = """
[scene]
name = "strip"
acquired = 2026-07-14T10:32:00Z
sensor = "SENSOR"
off_nadir_angle = ANGLE
[[thermal]]
band = "1"
path = "t.tif"
quantity = "radiance"
"""


def scene_file(folder: Path, sensor: str, angle: str) -> str:
    (folder / "scene.toml").write_text(SCENE.replace("SENSOR", sensor).replace("ANGLE", angle))
    return str(folder / "scene.toml")


def test_scene_files_may_give_angles_off_nadir(tmp_path: Path) -> None:
    number = open_scene(scene_file(tmp_path, "microbolometer-camera", "20.0\nflight_height = 3000.0"))
    assert number.view_zenith_angle == pytest.approx(zenith_at_surface(20.0, 3000.0))
    where = grid(4, 4)
    write(tmp_path / "a.tif", np.full((4, 4), 2000, dtype=np.int16), where)
    raster = open_scene(
        scene_file(tmp_path, "microbolometer-camera", '{ path = "a.tif", scale = 0.01 }\nflight_height = 5e5')
    )
    assert isinstance(raster.view_zenith_angle, RasterSource)
    found = read_all(pickle.loads(pickle.dumps(raster.view_zenith_angle)), where).values
    np.testing.assert_allclose(found, zenith_at_surface(20.0, 500_000.0), rtol=1e-6)


def test_angles_off_nadir_need_a_height_and_one_word(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"scene.toml: key 'scene.flight_height' is missing"):
        open_scene(scene_file(tmp_path, "microbolometer-camera", "20.0"))
    with pytest.raises(ConfigError, match="say the same thing twice"):
        open_scene(scene_file(tmp_path, "microbolometer-camera", "20.0\nview_zenith_angle = 21.0"))
    with pytest.raises(ConfigError, match=r"scene.off_nadir_angle: .*misses the Earth"):
        open_scene(scene_file(tmp_path, "microbolometer-camera", "80.0\nflight_height = 7e5"))
