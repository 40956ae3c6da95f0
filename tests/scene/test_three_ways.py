"""One acquisition described in three ways is one scene: the same bytes, the same flags."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np

from groundglow.scene.model import Scene
from groundglow.scene.open import open_scene
from groundglow.scene.quality_read import read_flags
from level1_scenes import GRID, Level1Scene, collection_2
from painted_rasters import read_all, whole

STEM = "LC09_L1TP_193027_20220714_20230101_02_T1"

SCENE_FILE = f"""
[scene]
name = "{STEM}"
acquired = 2022-07-14T12:02:27.46338+02:00
sensor = "landsat-9"
view_zenith_angle = {{ path = "{STEM}_VZA.TIF", scale = 0.01 }}
sun_elevation = 58.5
[[thermal]]
band = "10"
path = "{STEM}_B10.TIF"
quantity = "counts"
scale = 3.8e-4
offset = 0.1
nodata = 0
saturation = 65535
[[thermal]]
band = "11"
path = "{STEM}_B11.TIF"
quantity = "counts"
scale = 3.49e-4
offset = 0.1
nodata = 0
saturation = 65535
[quality]
path = "{STEM}_QA_PIXEL.TIF"
layout = "collection-2"
[reflectance.red]
path = "{STEM}_B4.TIF"
scale = 2e-5
offset = -0.1
nodata = 0
sun_corrected = false
[reflectance.near_infrared]
path = "{STEM}_B5.TIF"
scale = 2e-5
offset = -0.1
nodata = 0
sun_corrected = false
"""


def item() -> dict[str, object]:
    counts = {"unit": "W m-2 sr-1 um-1", "nodata": 0, "data_type": "uint16", "raster:offset": 0.1}
    toa = {"nodata": 0, "raster:scale": 2e-5, "raster:offset": -0.1}
    return {
        "type": "Feature", "stac_version": "1.1.0", "id": STEM, "geometry": None, "links": [],
        "properties": {"datetime": "2022-07-14T10:02:27.463380Z", "platform": "landsat-9",
                       "view:sun_elevation": 58.5, "processing:level": "L1"},
        "assets": {
            "lwir11": {"href": f"{STEM}_B10.TIF", "eo:common_name": "lwir11", "raster:scale": 3.8e-4, **counts},
            "lwir12": {"href": f"{STEM}_B11.TIF", "eo:common_name": "lwir12", "raster:scale": 3.49e-4, **counts},
            "red": {"href": f"{STEM}_B4.TIF", "eo:common_name": "red", **toa},
            "nir08": {"href": f"{STEM}_B5.TIF", "eo:common_name": "nir08", **toa},
            "VZA": {"href": f"{STEM}_VZA.TIF", "raster:scale": 0.01},
            "qa_pixel": {"href": f"{STEM}_QA_PIXEL.TIF"},
        },
    }  # fmt: skip


def facts(scene: Scene) -> list[object]:
    """All that decides the results, pixels included."""
    found: list[object] = [scene.name, scene.acquired, scene.sensor.name, scene.sun_elevation]
    for band in scene.thermal:
        constants = band.two_constants
        assert constants is not None
        found += [
            band.number,
            band.quantity,
            constants.k1,
            constants.k2,
            band.sensor_band is scene.sensor.band(band.number),
        ]
    for source in scene.sources():
        read = read_all(source, GRID)
        found += [read.values.tobytes(), None if read.saturated is None else read.saturated.tobytes()]
    for name, band in sorted(scene.reflectance.items()):
        found += [name, band.sun_corrected, band.sun_elevation, band.acquired]
    assert scene.quality is not None
    found.append(read_flags(scene.quality, GRID, whole(GRID)).tobytes())
    return found


def test_three_descriptions_one_scene(tmp_path: Path) -> None:
    painted = Level1Scene(tmp_path, collection_2())
    (tmp_path / "scene.toml").write_text(SCENE_FILE)
    (tmp_path / "item.json").write_text(json.dumps(item()))
    by_metadata = open_scene(str(painted.metadata))
    by_file = open_scene(str(tmp_path / "scene.toml"))
    by_item = open_scene(str(tmp_path / "item.json"))
    assert facts(by_file) == facts(by_metadata)
    assert facts(by_item) == facts(by_metadata)
    assert np.isfinite(read_all(by_item.thermal[0].source, GRID).values).mean() > 0.99
