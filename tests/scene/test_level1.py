"""Level-1 metadata of three generations becomes the same scene; foreign rasters are refused."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from affine import Affine
from rasterio.crs import CRS

from groundglow.errors import InputError
from groundglow.physics.planck import two_constant_temperature
from groundglow.raster.band import RasterSource
from groundglow.scene.level1_groups import read_groups
from groundglow.scene.model import Scene
from groundglow.scene.open import open_scene
from level1_scenes import (
    COUNTS,
    GRID,
    Groups,
    Level1Scene,
    as_json,
    as_text,
    before_collections,
    collection_1,
    collection_2,
)
from painted_rasters import read_all

GENERATIONS = {"collection 2": collection_2, "collection 1": collection_1, "older": before_collections}


@pytest.mark.parametrize("generation", GENERATIONS)
def test_every_generation_gives_the_same_pixels(generation: str, tmp_path: Path) -> None:
    painted = Level1Scene(tmp_path, GENERATIONS[generation]())
    scene = open_scene(str(painted.metadata))
    assert [band.number for band in scene.thermal] == ["10", "11"]
    band = scene.thermal[0]
    assert band.quantity == "counts"
    found = read_all(band.source, GRID)
    wanted = np.where(COUNTS == 0, np.nan, 3.8e-4 * COUNTS.astype(np.float64) + 0.1).astype(np.float32)
    np.testing.assert_array_equal(found.values, wanted)
    assert found.saturated is not None
    assert np.argwhere(found.saturated).tolist() == [[0, 1]]
    assert scene.sun_elevation == 58.5
    assert set(scene.reflectance) == {"red", "near_infrared"}
    red = scene.reflectance["red"]
    assert (red.sun_corrected, red.source.scale, red.source.offset) == (False, 2e-5, -0.1)
    assert scene.quality is not None


def test_published_figures_of_a_landsat_9_scene(tmp_path: Path) -> None:
    # Counts 25000 give 9.6 W m-2 sr-1 um-1 and 299.8122 K; 65535 gives the metadata's RADIANCE_MAXIMUM
    # 25.0033 (USGS metadata of LC09_L1TP_029030_20240616).
    band = open_scene(str(Level1Scene(tmp_path, collection_2()).metadata)).thermal[0]
    values = read_all(band.source, GRID).values
    assert values[0, 2] == pytest.approx(9.6, abs=1e-4)
    assert values[0, 1] == pytest.approx(25.0033, abs=1e-4)
    assert band.two_constants is not None
    temperature = two_constant_temperature(float(values[0, 2]), band.two_constants.k1, band.two_constants.k2)
    assert float(temperature) == pytest.approx(299.8122, abs=1e-3)


def test_keys_are_read_in_their_group(tmp_path: Path) -> None:
    # Collection 2 repeats keys in the processing record, with other values.
    scene = open_scene(str(Level1Scene(tmp_path, collection_2()).metadata))
    assert scene.thermal[0].source.path.endswith("_B10.TIF")
    assert scene.name == "LC09_L1TP_193027_20220714_20230101_02_T1"


def test_time_angles_and_layouts(tmp_path: Path) -> None:
    scene = open_scene(str(Level1Scene(tmp_path / "new", collection_2()).metadata))
    assert scene.acquired == datetime(2022, 7, 14, 10, 2, 27, 463380, tzinfo=UTC)
    assert isinstance(scene.view_zenith_angle, RasterSource)
    assert read_all(scene.view_zenith_angle, GRID).values[3, 3] == np.float32(5.12)
    assert scene.quality is not None
    assert scene.quality.rules == scene.sensor.quality_layouts["collection-2"]
    older = open_scene(str(Level1Scene(tmp_path / "older", collection_1()).metadata))
    assert older.quality is not None
    assert older.quality.rules == older.sensor.quality_layouts["collection-1"]
    assert older.view_zenith_angle == 0.0
    assert any("no view angle raster" in note for note in older.notes)
    oldest = open_scene(str(Level1Scene(tmp_path / "oldest", before_collections()).metadata))
    assert oldest.quality is not None
    assert oldest.quality.rules == oldest.sensor.quality_layouts["before-collections"]
    assert oldest.acquired == datetime(2015, 7, 14, 10, 2, 27, 463380, tzinfo=UTC)


def described(scene: Scene) -> tuple[object, ...]:
    return (scene.name, scene.acquired, scene.thermal[0].source, scene.thermal[0].two_constants, scene.quality,
            scene.reflectance, scene.view_zenith_angle, scene.notes)  # fmt: skip


def test_text_json_windows_lines_and_padding_are_one(tmp_path: Path) -> None:
    painted = Level1Scene(tmp_path, collection_2())
    plain = described(open_scene(str(painted.metadata)))
    for content in (
        as_text(painted.groups, "\r\n"),
        as_text(painted.groups) + b"\x00" * 5000,
        b"\xef\xbb\xbf" + as_text(painted.groups),
    ):
        painted.metadata.write_bytes(content)
        assert described(open_scene(str(painted.metadata))) == plain
    painted.metadata.unlink()
    as_document = painted.metadata.with_suffix(".json")
    as_document.write_bytes(as_json(painted.groups))
    assert described(open_scene(str(as_document))) == plain
    assert described(open_scene(str(tmp_path))) == plain


def two_gains() -> Groups:
    groups = collection_2("LE07_L1TP_107068_20220310_20220405_02_T1")
    groups["IMAGE_ATTRIBUTES"]["SPACECRAFT_ID"] = '"LANDSAT_7"'
    for group in groups.values():
        for key in [key for key in group if key.endswith(("_BAND_10", "_BAND_11"))]:
            value = group.pop(key)
            channel = "6_VCID_1" if key.endswith("10") else "6_VCID_2"
            name = value.replace("_B10", "_B6_VCID_1").replace("_B11", "_B6_VCID_2")
            group[key.rsplit("_", 1)[0] + f"_{channel}"] = name
    return groups


def test_two_gains_are_two_bands_high_gain_first(tmp_path: Path) -> None:
    # As in Landsat 7 metadata: VCID_1 is the channel of low gain, VCID_2 of high gain.
    scene = open_scene(str(Level1Scene(tmp_path, two_gains()).metadata))
    assert [band.number for band in scene.thermal] == ["6", "6-low"]
    assert scene.thermal[0].source.path.endswith("_B6_VCID_2.TIF")
    assert (scene.thermal[0].source.scale, scene.thermal[1].source.scale) == (3.49e-4, 3.8e-4)


def test_missing_constants_come_from_the_sensor_table_and_are_told(tmp_path: Path) -> None:
    groups = before_collections()
    del groups["TIRS_THERMAL_CONSTANTS"]
    scene = open_scene(str(Level1Scene(tmp_path, groups).metadata))
    assert scene.thermal[0].two_constants == scene.sensor.band("10").two_constants
    assert (
        "the metadata holds no thermal constants of band 10; those of the sensor table are used"
        in scene.notes
    )


def test_a_coarsely_printed_factor_is_taken_from_the_radiance_limits(tmp_path: Path) -> None:
    # Older Landsat 5 metadata print 0.055 where the limits say (15.303 - 1.238) / 254 = 0.055374.
    groups = before_collections()
    groups["RADIOMETRIC_RESCALING"]["RADIANCE_MULT_BAND_10"] = "0.055"
    groups["RADIOMETRIC_RESCALING"]["RADIANCE_ADD_BAND_10"] = "1.18243"
    groups["MIN_MAX_RADIANCE"] = {"RADIANCE_MAXIMUM_BAND_10": "15.303", "RADIANCE_MINIMUM_BAND_10": "1.238"}
    groups["MIN_MAX_PIXEL_VALUE"]["QUANTIZE_CAL_MAX_BAND_10"] = "255"
    scene = open_scene(str(Level1Scene(tmp_path, groups).metadata))
    source = scene.thermal[0].source
    assert source.scale == pytest.approx(14.065 / 254, rel=1e-12)
    assert source.offset is not None
    assert source.scale is not None
    assert source.scale * 255 + source.offset == pytest.approx(15.303)
    assert any("printed as 0.055 only" in note for note in scene.notes)


def test_missing_rasters_are_told_and_without_thermal_refused(tmp_path: Path) -> None:
    painted = Level1Scene(tmp_path / "a", collection_2(), leave_out=("B11", "B4", "QA_PIXEL", "VZA"))
    scene = open_scene(str(painted.metadata))
    assert [band.number for band in scene.thermal] == ["10"]
    assert set(scene.reflectance) == {"near_infrared"}
    assert scene.quality is None
    assert any("B11.TIF, is not there" in note for note in scene.notes)
    assert any("clouds are not flagged" in note for note in scene.notes)
    none = Level1Scene(tmp_path / "b", collection_2(), leave_out=("B10", "B11"))
    with pytest.raises(InputError, match=r"no thermal raster: .*_B10.TIF or .*_B11.TIF must lie beside"):
        open_scene(str(none.metadata))


def test_names_in_other_letters_are_found(tmp_path: Path) -> None:
    painted = Level1Scene(tmp_path, collection_2())
    for file in tmp_path.glob("*.TIF"):
        file.rename(file.with_name(file.name.lower()))
    assert open_scene(str(painted.metadata)).thermal[0].source.path.endswith("_b10.tif")


def test_at_night_there_is_no_reflectance(tmp_path: Path) -> None:
    groups = collection_2()
    groups["IMAGE_ATTRIBUTES"]["SUN_ELEVATION"] = "-22.0"
    scene = open_scene(str(Level1Scene(tmp_path, groups).metadata))
    assert scene.reflectance == {}
    assert any("the sun was not up" in note for note in scene.notes)


def test_a_roll_becomes_a_zenith_angle(tmp_path: Path) -> None:
    groups = collection_2()
    groups["IMAGE_ATTRIBUTES"]["ROLL_ANGLE"] = "-14.0"
    scene = open_scene(str(Level1Scene(tmp_path, groups, leave_out=("VZA",)).metadata))
    # sin(zenith) = (6371 + 705) / 6371 sin(14 deg).
    assert scene.view_zenith_angle == pytest.approx(15.586, abs=0.001)


def test_a_cut_on_the_scenes_grid_is_fine(tmp_path: Path) -> None:
    cut = replace(GRID, transform=Affine(30, 0, 599_985 + 300, 0, -30, 5_300_015 - 150), width=20, height=10)
    scene = open_scene(str(Level1Scene(tmp_path, collection_2(), grid=cut).metadata))
    assert scene.thermal[0].source.scale == 3.8e-4


def test_the_southern_form_of_a_zone_is_the_same_grid(tmp_path: Path) -> None:
    south = replace(GRID, crs=CRS.from_epsg(32732), transform=Affine(30, 0, 599_985, 0, -30, 15_300_015))
    assert open_scene(str(Level1Scene(tmp_path, collection_2(), grid=south).metadata)).thermal


FOREIGN = {
    "another zone": (
        replace(GRID, crs=CRS.from_epsg(32633)),
        "its reference system is EPSG:32633, not EPSG:32632",
    ),
    "another pixel": (
        replace(GRID, transform=Affine(60, 0, 599_985, 0, -60, 5_300_015)),
        "pixels of 60, not 30",
    ),
    "between pixels": (
        replace(GRID, transform=Affine(30, 0, 600_000, 0, -30, 5_300_015)),
        "pixels between the scene's",
    ),
    "too large": (replace(GRID, width=61), "61 x 50 pixels reach beyond the scene's 60 x 50"),
    "elsewhere": (
        replace(GRID, transform=Affine(30, 0, 609_975, 0, -30, 5_300_015)),
        "reach beyond the scene's",
    ),
}


@pytest.mark.parametrize("kind", FOREIGN)
def test_rasters_of_another_scene_are_refused(kind: str, tmp_path: Path) -> None:
    grid, message = FOREIGN[kind]
    painted = Level1Scene(tmp_path, collection_2(), grid=grid)
    with pytest.raises(InputError, match=f"_B10.TIF: the raster is not one of this scene: .*{message}"):
        open_scene(str(painted.metadata))


BROKEN = {
    "empty": (b"\x00" * 100, "the metadata file is empty"),
    "breaks off": (as_text(collection_2())[:900], "breaks off before its END"),
    "without an end": (as_text(collection_2()).replace(b"\nEND\n", b"\n"), "breaks off before its END"),
    "no metadata": (b"GROUP = A\nX = 1\nEND_GROUP = A\nEND\n", "is not level-1 metadata"),
    "prose": (b"Dear reader,\nthis is not it.\n", "line 1 is not of the form KEY = value"),
    "crossed groups": (b"GROUP = A\nGROUP = B\nEND_GROUP = A\nEND\n", "ends a group 'A' that is not open"),
    "outside": (b"X = 1\n", "stands outside any group"),
    "xml": (b"<LANDSAT_METADATA_FILE/>", "is the XML form of the metadata.*Use the text"),
    "broken json": (b'{"LANDSAT_METADATA_FILE": ', "is not valid JSON"),
    "other json": (b'{"A": {}}', "is not level-1 metadata: needs LANDSAT_METADATA_FILE"),
    "json list": (b'{"LANDSAT_METADATA_FILE": []}', "is not level-1 metadata"),
    "binary": (b"\xff\xfe\x80\x81", "is not a text file in UTF-8"),
}


@pytest.mark.parametrize("kind", BROKEN)
def test_broken_metadata(kind: str) -> None:
    content, message = BROKEN[kind]
    with pytest.raises(InputError, match=f"somewhere: .*({message})"):
        read_groups(content, "somewhere")


CHANGES = [
    ("IMAGE_ATTRIBUTES", "SPACECRAFT_ID", None, "SPACECRAFT_ID is missing in group IMAGE_ATTRIBUTES"),
    (
        "IMAGE_ATTRIBUTES",
        "SPACECRAFT_ID",
        '"LANDSAT_2"',
        "SPACECRAFT_ID 'LANDSAT_2' is not one whose sensor is known",
    ),
    ("IMAGE_ATTRIBUTES", "DATE_ACQUIRED", "2022-13-14", "do not make a time"),
    ("IMAGE_ATTRIBUTES", "DATE_ACQUIRED", "1922-07-14", "must lie between 1960 and 2100"),
    ("IMAGE_ATTRIBUTES", "SCENE_CENTER_TIME", "25:00:00Z", "do not make a time"),
    ("IMAGE_ATTRIBUTES", "SCENE_CENTER_TIME", None, "SCENE_CENTER_TIME is missing"),
    ("IMAGE_ATTRIBUTES", "SUN_ELEVATION", "high", "SUN_ELEVATION must be a number, found 'high'"),
    (
        "PRODUCT_CONTENTS",
        "PROCESSING_LEVEL",
        '"L2SP"',
        "product of level L2SP, and level-1 counts are needed",
    ),
    (
        "PRODUCT_CONTENTS",
        "FILE_NAME_BAND_10",
        '"../B10.TIF"',
        "names a file '../B10.TIF' that is not beside it",
    ),
    (
        "PRODUCT_CONTENTS",
        "FILE_NAME_BAND_10",
        '"/etc/passwd"',
        "names a file '/etc/passwd' that is not beside it",
    ),
    ("LEVEL1_RADIOMETRIC_RESCALING", "RADIANCE_MULT_BAND_10", "0.0", "RADIANCE_MULT_BAND_10 is 0"),
    ("LEVEL1_RADIOMETRIC_RESCALING", "RADIANCE_MULT_BAND_10", "nan", "must be a number, found 'nan'"),
    ("LEVEL1_RADIOMETRIC_RESCALING", "RADIANCE_ADD_BAND_10", None, "RADIANCE_ADD_BAND_10 is missing"),
    ("LEVEL1_THERMAL_CONSTANTS", "K1_CONSTANT_BAND_10", "-1", "thermal constants of band 10 must be above 0"),
    ("LEVEL1_THERMAL_CONSTANTS", "K2_CONSTANT_BAND_10", "NaN", "must be a number, found 'NaN'"),
]


@pytest.mark.parametrize(("group", "key", "value", "message"), CHANGES)
def test_metadata_that_cannot_be(
    group: str, key: str, value: str | None, message: str, tmp_path: Path
) -> None:
    painted = Level1Scene(tmp_path, collection_2())
    if value is None:
        del painted.groups[group][key]
    else:
        painted.groups[group][key] = value
    painted.metadata.write_bytes(as_text(painted.groups))
    with pytest.raises(InputError, match=message):
        open_scene(str(painted.metadata))
