"""Scene files: what they say arrives; what they get wrong is named."""

from __future__ import annotations

import pickle
from datetime import UTC, datetime
from pathlib import Path

import pytest

from groundglow.errors import ConfigError, InputError
from groundglow.raster.band import RasterSource
from groundglow.scene.open import open_scene
from groundglow.scene.quality import QualityRule

GOOD = """
[scene]
name = "quarry-lake"
acquired = 2026-07-14T10:32:00+02:00
sensor = "ember-two-band"
view_zenith_angle = 4.0
sun_elevation = 55.0
elevation = { path = "elevation.tif" }
land_cover = { path = "land_cover.tif" }
water_vapour = 21.5

[[thermal]]
band = "1"
path = "thermal.tif"
quantity = "counts"
scale = 0.0004
offset = 0.1
nodata = 0
saturation = 65535

[[thermal]]
band = "2"
path = "thermal.tif"
raster_band = 2
quantity = "brightness-temperature"
scale = 0.01
unit = "degC"

[quality]
path = "quality.tif"
[[quality.rule]]
flag = "cloud"
bits = [3]
[[quality.rule]]
flag = "thin_cloud"
field = [14, 2]
equals = [3]

[reflectance.red]
path = "red.tif"
scale = 0.0001
sun_corrected = false
acquired = 2026-07-10T09:00:00Z
[reflectance.near_infrared]
path = "/data/near_infrared.tif"
scale = 0.0001

[[emissivity]]
band = "1"
path = "emissivity.tif"
uncertainty = 0.01
"""


def scene_file(folder: Path, text: str) -> str:
    path = folder / "scene.toml"
    path.write_text(text, encoding="utf-8")
    return str(path)


def test_all_that_is_said_arrives(tmp_path: Path) -> None:
    scene = open_scene(scene_file(tmp_path, GOOD))
    assert scene.name == "quarry-lake"
    assert scene.acquired.astimezone(UTC) == datetime(2026, 7, 14, 8, 32, tzinfo=UTC)
    assert scene.sensor.name == "ember-two-band"
    assert scene.view_zenith_angle == 4.0
    assert scene.elevation == RasterSource(str(tmp_path / "elevation.tif"))
    assert scene.water_vapour == 21.5
    first, second = scene.thermal
    assert first.source == RasterSource(
        str(tmp_path / "thermal.tif"), nodata=0.0, scale=0.0004, offset=0.1, saturation=65535.0
    )
    assert first.two_constants == scene.sensor.band("1").two_constants
    assert second.source.band == 2
    assert second.source.shift == 273.15
    assert scene.quality is not None
    assert scene.quality.rules == (
        QualityRule("cloud", bits=(3,)),
        QualityRule("thin_cloud", field=(14, 2), equals=(3,)),
    )
    red, near = scene.reflectance["red"], scene.reflectance["near_infrared"]
    assert (red.sun_corrected, red.sun_elevation) == (False, 55.0)
    assert red.acquired == datetime(2026, 7, 10, 9, tzinfo=UTC)
    assert near.source.path == "/data/near_infrared.tif"
    assert near.acquired == scene.acquired
    assert scene.emissivity["1"].uncertainty == 0.01
    assert len(scene.sources()) == 8
    copied = pickle.loads(pickle.dumps(scene))
    assert (copied.name, copied.sources()) == (scene.name, scene.sources())


def test_a_layout_of_the_sensor_saves_writing_rules(tmp_path: Path) -> None:
    text = GOOD.replace('sensor = "ember-two-band"', 'sensor = "landsat-9"')
    text = text.replace('band = "1"', 'band = "10"').replace('band = "2"', 'band = "11"')
    text = text.replace('path = "quality.tif"', 'path = "quality.tif"\nlayout = "collection-2"')
    scene = open_scene(scene_file(tmp_path, text))
    assert scene.quality is not None
    assert scene.quality.rules[:7] == scene.sensor.quality_layouts["collection-2"]
    assert len(scene.quality.rules) == 9
    with pytest.raises(ConfigError, match=r"no quality layout 'collection-3'. Known layouts: collection-2"):
        open_scene(scene_file(tmp_path, text.replace('layout = "collection-2"', 'layout = "collection-3"')))


def test_a_sensor_file_beside_the_scene(tmp_path: Path) -> None:
    (tmp_path / "mine.toml").write_text(
        'name = "mine"\ntitle = "t"\nsource = "s"\n'
        '[[band]]\nnumber = "1"\nresponse = { top_hat = [8.0, 12.0] }\n'
        '[[band]]\nnumber = "2"\nresponse = { top_hat = [8.0, 12.0] }\n'
    )
    scene = open_scene(scene_file(tmp_path, GOOD.replace('"ember-two-band"', '"mine.toml"')))
    assert scene.sensor.name == "mine"


def test_standard_counts_of_the_sensor_fill_in(tmp_path: Path) -> None:
    text = """
[scene]
name = "night"
acquired = 2003-07-14T22:32:00Z
sensor = "aster"
[[thermal]]
band = "13"
path = "tir.tif"
raster_band = 4
quantity = "counts"
"""
    source = open_scene(scene_file(tmp_path, text)).thermal[0].source
    assert source == RasterSource(
        str(tmp_path / "tir.tif"), 4, nodata=0.0, scale=0.005693, offset=-0.005693, saturation=4095.0
    )


def test_object_temperature_brings_the_cameras_settings(tmp_path: Path) -> None:
    camera = (
        'quantity = "object-temperature"\ncamera = { emissivity = 0.95, reflected_temperature = 263.0, '
        "air_temperature = 290.0, transmittance = 0.97 }"
    )
    scene = open_scene(scene_file(tmp_path, GOOD.replace('quantity = "brightness-temperature"', camera)))
    assert scene.thermal[1].camera is not None
    assert scene.thermal[1].camera.emissivity == 0.95


def test_a_known_correction_of_radiance(tmp_path: Path) -> None:
    text = GOOD.replace(
        "saturation = 65535",
        "saturation = 65535\n"
        'radiance_adjustment = { gain = 1.01, offset = -0.05, source = "reference panel" }',
    )
    adjustment = open_scene(scene_file(tmp_path, text)).thermal[0].adjustment
    assert adjustment is not None
    assert (adjustment.gain, adjustment.offset, adjustment.source) == (1.01, -0.05, "reference panel")


TIME = "acquired = 2026-07-14T10:32:00+02:00"

BAD = [
    (TIME, "acquired = 2026-07-14T10:32:00", "scene.acquired: needs its offset from UTC"),
    (TIME, "acquired = 2026-07-14", "scene.acquired: must be a date and time"),
    (TIME, 'acquired = "today"', "scene.acquired: must be a date and time"),
    (TIME, "acquired = 1926-07-14T10:32:00Z", "must lie between 1960 and 2100"),
    (TIME, "acquired = 2206-07-14T10:32:00Z", "must lie between 1960 and 2100"),
    (TIME, "", r"key 'scene.acquired' is missing"),
    ('sensor = "ember-two-band"', 'sensor = "ember"', "there is no sensor 'ember'"),
    (
        "view_zenith_angle = 4.0",
        "view_zenit_angle = 4.0",
        r"unknown key 'scene.view_zenit_angle' \(did you mean 'view_zenith_angle'",
    ),
    ("view_zenith_angle = 4.0", "view_zenith_angle = 95.0", "less than or equal to 85, found 95.0$"),
    (
        "view_zenith_angle = 4.0",
        "view_zenith_angle = { pat = 'x' }",
        r"view_zenith_angle.*did you mean 'path'",
    ),
    ("sun_elevation = 55.0", "sun_elevation = -120.0", "scene.sun_elevation: .*greater than or equal to -90"),
    ("scale = 0.0004", "scale = 0.0", r"thermal\[1\].scale: must not be 0"),
    ("scale = 0.0004", "scale = nan", r"thermal\[1\].scale: input should be a finite number"),
    ("offset = 0.1", "offset = inf", r"thermal\[1\].offset: input should be a finite number"),
    ("scale = 0.0004\n", "", "key 'scale' is missing: counts become radiance by scale and offset"),
    ("offset = 0.1", "ofset = 0.1", r"unknown key 'thermal\[1\].ofset' \(did you mean 'offset'"),
    ('"counts"', '"digital-numbers"', r"thermal\[1\].quantity: input should be 'counts'"),
    ('"counts"', '"counts"\nunit = "degC"', "unit is for temperatures, and quantity is counts"),
    ('"brightness-temperature"', '"object-temperature"', "needs the camera's settings"),
    ("raster_band = 2", "raster_band = 0", r"thermal\[2\].raster_band: .*greater than or equal to 1"),
    ('band = "2"', 'band = "1"', "thermal band '1' is named twice"),
    ('band = "2"', 'band = "3"', r"ember-two-band has no thermal band '3'. Choose from: 1, 2"),
    ('flag = "cloud"', 'flag = "clouds"', r"quality.rule\[1\]: there is no flag of that name"),
    ("bits = [3]", "bits = [40]", "bits must lie in 0 to 31"),
    ("equals = [3]", "equals = [9]", "a field of 2 bits holds 0 to 3"),
    ("sun_elevation = 55.0", "", "reflectance.red is not corrected for the sun and needs a sun_elevation"),
    ("sun_elevation = 55.0", "sun_elevation = -3.0", "needs a sun_elevation above 0"),
    ('path = "/data/near_infrared.tif"', 'path = "red.tif"', "red and near_infrared are the same band"),
    ("acquired = 2026-07-10T09:00:00Z", "acquired = 2026-07-10T09:00:00", "red.acquired: needs its offset"),
    ('name = "quarry-lake"', 'name = "../quarry"', "scene.name: string should match pattern"),
    ('name = "quarry-lake"', 'name = ""', "scene.name: string should match pattern"),
    ("uncertainty = 0.01", "uncertainty = 1.4", r"emissivity\[1\].uncertainty: .*less than or equal to 1"),
    ("[quality]", "[qualities]", r"unknown key 'qualities' \(did you mean 'quality'"),
]


@pytest.mark.parametrize(("old", "new", "message"), BAD)
def test_mistakes_are_named(old: str, new: str, message: str, tmp_path: Path) -> None:
    assert old in GOOD
    with pytest.raises(ConfigError, match=message) as caught:
        open_scene(scene_file(tmp_path, GOOD.replace(old, new, 1)))
    assert "scene.toml" in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_scene_without_thermal_bands(tmp_path: Path) -> None:
    head = GOOD.split("[[thermal]]", maxsplit=1)[0]
    with pytest.raises(ConfigError, match="key 'thermal' is missing"):
        open_scene(scene_file(tmp_path, head))


def test_several_mistakes_are_told_at_once(tmp_path: Path) -> None:
    text = GOOD.replace("scale = 0.0004", "scale = 0").replace("bits = [3]", "bit = [3]")
    with pytest.raises(ConfigError, match=r"must not be 0.*unknown key 'quality.rule\[1\].bit'"):
        open_scene(scene_file(tmp_path, text))


def test_files_that_are_no_scene_files(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no such file"):
        open_scene(str(tmp_path / "scene.toml"))
    with pytest.raises(ConfigError, match="not valid TOML"):
        open_scene(scene_file(tmp_path, "[scene\n"))
    (tmp_path / "binary.toml").write_bytes(b"\xff\xfe\x00\x01")
    with pytest.raises(ConfigError, match="not a text file in UTF-8"):
        open_scene(str(tmp_path / "binary.toml"))
