"""STAC Items of both versions become scenes; what is missing or cannot be is named."""

from __future__ import annotations

import copy
import json
import subprocess
import sys
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from groundglow.errors import InputError
from groundglow.scene.open import open_scene
from groundglow.scene.quality import QualityRule
from groundglow.scene.stac_fetch import asset_path
from level1_scenes import COUNTS, GRID
from painted_rasters import read_all, write

Item = dict[str, Any]

HEAD: Item = {
    "type": "Feature",
    "stac_version": "1.1.0",
    "id": "LC09_L1TP_193027_20220714",
    "geometry": None,
    "properties": {
        "datetime": "2022-07-14T10:02:27.463380Z",
        "platform": "landsat-9",
        "instruments": ["oli", "tirs"],
        "view:off_nadir": 0,
        "view:sun_elevation": 58.5,
        "proj:code": "EPSG:32632",
        "proj:shape": [50, 60],
        "proj:transform": [30, 0, 599985, 0, -30, 5300015],
    },
    "links": [],
}
UNIT = "W m-2 sr-1 um-1"
QUALITY_FIELDS = [
    {"name": "fill", "offset": 0, "length": 1,
     "classes": [{"value": 0, "name": "not_fill"}, {"value": 1, "name": "fill"}]},
    {"name": "dilated_cloud", "offset": 1, "length": 1, "classes": []},
    {"name": "cirrus", "offset": 2, "length": 1, "classes": []},
    {"name": "cloud", "offset": 3, "length": 1, "classes": []},
    {"name": "cloud_shadow", "offset": 4, "length": 1, "classes": []},
    {"name": "snow", "offset": 5, "length": 1, "classes": []},
    {"name": "clear", "offset": 6, "length": 1, "classes": []},
    {"name": "water", "offset": 7, "length": 1, "classes": []},
    {"name": "cloud_confidence", "offset": 8, "length": 2, "classes": [{"value": 1, "name": "low"}]},
]  # fmt: skip


def new_style() -> Item:
    """STAC 1.1: everything on bands, extension prefixes."""
    item = copy.deepcopy(HEAD)
    item["assets"] = {
        "lwir11": {"href": "b10.tif", "roles": ["data"], "bands": [
            {"eo:common_name": "lwir11", "eo:center_wavelength": 10.9, "unit": UNIT, "nodata": 0,
             "data_type": "uint16", "raster:scale": 3.8e-4, "raster:offset": 0.1}]},
        "lwir12": {"href": "b11.tif", "roles": ["data"], "raster:scale": 3.49e-4, "raster:offset": 0.1,
                   "unit": UNIT, "nodata": 0, "data_type": "uint16", "eo:common_name": "lwir12"},
        "red": {"href": "b4.tif", "bands": [{"eo:common_name": "red", "raster:scale": 2.75e-5,
                                             "raster:offset": -0.2, "nodata": 0}]},
        "nir08": {"href": "b5.tif", "bands": [{"eo:common_name": "nir08", "raster:scale": 2.75e-5,
                                               "raster:offset": -0.2, "nodata": 0}]},
        "qa_pixel": {"href": "qa.tif", "roles": ["metadata"], "classification:bitfields": QUALITY_FIELDS},
        "thumbnail": {"href": "https://127.0.0.1/small.jpg", "roles": ["thumbnail"]},
    }  # fmt: skip
    return item


def old_style() -> Item:
    """STAC 1.0: eo:bands, raster:bands without prefixes, proj:epsg."""
    item = copy.deepcopy(HEAD)
    item["stac_version"] = "1.0.0"
    properties = item["properties"]
    properties["proj:epsg"] = 32632
    del properties["proj:code"]
    raster = {"unit": UNIT, "nodata": 0, "data_type": "uint16", "offset": 0.1}
    item["assets"] = {
        "B10": {"href": "b10.tif", "roles": ["data"], "eo:bands": [{"name": "B10", "common_name": "lwir11",
                "center_wavelength": 10.9}], "raster:bands": [{**raster, "scale": 3.8e-4}]},
        "B11": {"href": "./b11.tif", "roles": ["data"], "eo:bands": [{"name": "B11", "common_name": "lwir12"}],
                "raster:bands": [{**raster, "scale": 3.49e-4}]},
        "B4": {"href": "b4.tif", "eo:bands": [{"common_name": "red"}],
               "raster:bands": [{"scale": 2.75e-5, "offset": -0.2, "nodata": 0}]},
        "B5": {"href": "b5.tif", "eo:bands": [{"common_name": "nir08"}],
               "raster:bands": [{"scale": 2.75e-5, "offset": -0.2, "nodata": 0}]},
        "qa_pixel": {"href": "qa.tif", "classification:bitfields": QUALITY_FIELDS},
    }  # fmt: skip
    return item


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name in ("b10", "b11", "b4", "b5"):
        write(tmp_path / f"{name}.tif", COUNTS, GRID)
    write(tmp_path / "qa.tif", np.full(GRID.shape, 22280, dtype=np.uint16), GRID)
    return tmp_path


def saved(folder: Path, item: Item) -> str:
    (folder / "item.json").write_text(json.dumps(item))
    return str(folder / "item.json")


@pytest.mark.parametrize("style", [new_style, old_style])
def test_both_versions_give_the_same_scene(style: Any, folder: Path) -> None:
    scene = open_scene(saved(folder, style()))
    assert scene.name == "LC09_L1TP_193027_20220714"
    assert scene.sensor.name == "landsat-9"
    assert scene.acquired == datetime(2022, 7, 14, 10, 2, 27, 463380, tzinfo=UTC)
    assert [band.number for band in scene.thermal] == ["10", "11"]
    assert [band.source.scale for band in scene.thermal] == [3.8e-4, 3.49e-4]
    assert [Path(band.source.path).name for band in scene.thermal] == ["b10.tif", "b11.tif"]
    found = read_all(scene.thermal[0].source, GRID)
    wanted = np.where(COUNTS == 0, np.nan, 3.8e-4 * COUNTS.astype(np.float64) + 0.1).astype(np.float32)
    np.testing.assert_array_equal(found.values, wanted)
    assert found.saturated is not None
    assert np.argwhere(found.saturated).tolist() == [[0, 1]]
    assert (scene.view_zenith_angle, scene.sun_elevation) == (0.0, 58.5)
    assert set(scene.reflectance) == {"red", "near_infrared"}
    assert scene.reflectance["red"].sun_corrected
    assert scene.quality is not None
    assert scene.quality.rules == (
        QualityRule("no_data", bits=(0,)), QualityRule("near_cloud", bits=(1,)), QualityRule("thin_cloud", bits=(2,)),
        QualityRule("cloud", bits=(3,)), QualityRule("shadow", bits=(4,)), QualityRule("snow", bits=(5,)),
        QualityRule("water", bits=(7,)),
    )  # fmt: skip
    assert all(source.indirect for source in scene.sources())


def test_a_folder_with_one_item(folder: Path) -> None:
    saved(folder, new_style())
    assert open_scene(str(folder)).name == "LC09_L1TP_193027_20220714"


def test_level_one_reflectance_still_needs_the_sun(folder: Path) -> None:
    item = new_style()
    item["properties"]["processing:level"] = "L1"
    assert not open_scene(saved(folder, item)).reflectance["red"].sun_corrected
    item["properties"]["view:sun_elevation"] = -5
    scene = open_scene(saved(folder, item))
    assert scene.reflectance == {}
    assert any("sun's elevation" in note for note in scene.notes)


def test_temperatures_in_kelvin_and_celsius(folder: Path) -> None:
    for unit, shift in (("K", 0.0), ("kelvin", 0.0), ("degC", 273.15), ("celsius", 273.15)):
        item = new_style()
        item["assets"]["lwir11"]["bands"][0].update(
            {"unit": unit, "raster:scale": 0.01, "raster:offset": 0.0}
        )
        band = open_scene(saved(folder, item)).thermal[0]
        assert band.quantity == "brightness-temperature"
        assert band.source.shift == shift
        assert band.source.saturation is None


def test_bands_are_found_by_wavelength_or_name(folder: Path) -> None:
    item = new_style()
    band = item["assets"]["lwir11"]["bands"][0]
    del band["eo:common_name"]
    assert [b.number for b in open_scene(saved(folder, item)).thermal] == ["10", "11"]
    del band["eo:center_wavelength"]
    band["name"] = "B10"
    assert [b.number for b in open_scene(saved(folder, item)).thermal] == ["10", "11"]
    band["name"] = "unnamed"
    assert [b.number for b in open_scene(saved(folder, item)).thermal] == ["11"]


def test_several_bands_in_one_asset_with_standard_counts(folder: Path) -> None:
    item = copy.deepcopy(HEAD)
    item["properties"] |= {"platform": "terra", "instruments": ["aster"]}
    names = [f"B{n}" for n in (10, 11, 12, 13, 14)]
    item["assets"] = {"tir": {"href": "b10.tif", "roles": ["data"], "bands": [
        {"name": name, "eo:center_wavelength": w} for name, w in zip(names, (8.3, 8.65, 9.1, 10.6, 11.3), strict=True)
    ]}}  # fmt: skip
    scene = open_scene(saved(folder, item))
    assert [(band.number, band.source.band) for band in scene.thermal] == [
        ("10", 1), ("11", 2), ("12", 3), ("13", 4), ("14", 5)
    ]  # fmt: skip
    assert scene.thermal[3].source.scale == 0.005693
    assert scene.thermal[3].source.saturation == 4095.0


def test_angles_of_view(folder: Path) -> None:
    item = new_style()
    item["properties"]["view:off_nadir"] = 14.0
    assert open_scene(saved(folder, item)).view_zenith_angle == pytest.approx(15.586, abs=0.001)
    item["properties"]["view:incidence_angle"] = 16.0
    assert open_scene(saved(folder, item)).view_zenith_angle == 16.0
    item["assets"]["VZA"] = {"href": "b4.tif", "raster:bands": [{"scale": 0.01}]}
    angle = open_scene(saved(folder, item)).view_zenith_angle
    assert not isinstance(angle, float)
    assert angle.scale == 0.01


def test_an_interval_of_time(folder: Path) -> None:
    item = new_style()
    item["properties"] |= {"datetime": None, "start_datetime": "2022-07-14T10:00:00Z",
                           "end_datetime": "2022-07-14T10:00:30Z"}  # fmt: skip
    scene = open_scene(saved(folder, item))
    assert scene.acquired == datetime(2022, 7, 14, 10, 0, 15, tzinfo=UTC)
    assert any("middle" in note for note in scene.notes)


def test_classes_become_rules(folder: Path) -> None:
    item = new_style()
    quality = item["assets"]["qa_pixel"]
    del quality["classification:bitfields"]
    quality["classification:classes"] = [
        {"value": 0, "name": "clear"}, {"value": 3, "name": "cloud"}, {"value": 4, "name": "cloud-shadow"}
    ]  # fmt: skip
    scene = open_scene(saved(folder, item))
    assert scene.quality is not None
    assert scene.quality.rules == (QualityRule("cloud", values=(3,)), QualityRule("shadow", values=(4,)))
    del quality["classification:classes"]
    scene = open_scene(saved(folder, item))
    assert scene.quality is not None
    assert scene.quality.rules == scene.sensor.quality_layouts["collection-2"]


@pytest.fixture
def server(folder: Path) -> Iterator[str]:
    # A process of its own: opening a raster holds the interpreter's lock while GDAL waits for an answer.
    command = [
        sys.executable,
        "-u",
        "-m",
        "http.server",
        "0",
        "--bind",
        "127.0.0.1",
        "--directory",
        str(folder),
    ]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True) as process:
        assert process.stdout is not None
        port = process.stdout.readline().split(" port ")[1].split()[0]
        yield f"http://127.0.0.1:{port}"
        process.terminate()


def test_an_item_over_http(folder: Path, server: str) -> None:
    saved(folder, new_style())
    scene = open_scene(f"{server}/item.json")
    assert scene.thermal[0].source.path == f"/vsicurl/{server}/b10.tif"
    local = open_scene(str(folder / "item.json"))
    remote_bytes = read_all(scene.thermal[0].source, GRID).values.tobytes()
    assert remote_bytes == read_all(local.thermal[0].source, GRID).values.tobytes()
    with pytest.raises(InputError, match="the server answers 404"):
        open_scene(f"{server}/nothing.json")


def test_an_item_from_the_network_does_not_point_into_this_machine(folder: Path, server: str) -> None:
    for href, message in (("file:///etc/passwd", "a scheme that is not followed"), ("/vsimem/x.tif", None)):
        item = new_style()
        item["assets"]["lwir11"]["href"] = href
        saved(folder, item)
        if message:
            with pytest.raises(InputError, match=message):
                open_scene(f"{server}/item.json")
        else:
            assert (
                open_scene(f"{server}/item.json").thermal[0].source.path == f"/vsicurl/{server}/vsimem/x.tif"
            )


def test_where_hrefs_lead() -> None:
    assert asset_path("b.tif", "/data/x/item.json") == "/data/x/b.tif"
    assert asset_path("../b.tif", "https://127.0.0.1/a/x/item.json") == "/vsicurl/https://127.0.0.1/a/b.tif"
    assert asset_path("s3://bucket/b.tif", "/data/item.json") == "/vsis3/bucket/b.tif"
    assert asset_path("file:///data/b%20c.tif", "/data/item.json") == "/data/b c.tif"
    assert asset_path("/data/b.tif", "file:///data/item.json") == "/data/b.tif"
    for href in ("ftp://127.0.0.1/b.tif", "javascript://x", "/vsicurl/http://127.0.0.1/x", "gopher://x/y"):
        with pytest.raises(InputError, match="not followed"):
            asset_path(href, "/data/item.json")


def change(path: tuple[str, ...], value: Any) -> Any:
    """A change of one place of the Item; None removes it."""

    def apply(item: Item) -> None:
        place: Any = item
        for key in path[:-1]:
            place = place[key] if not isinstance(place, list) else place[int(key)]
        if value is None:
            del place[path[-1]]
        else:
            place[path[-1]] = value

    return apply


P, A = "properties", "assets"
BAND = (A, "lwir11", "bands", "0")
BROKEN = [
    (change(("type",), "FeatureCollection"), "is JSON, but neither a STAC Item nor level-1 metadata"),
    (change(("stac_version",), "0.9.0"), "has stac_version '0.9.0', and 1.0 or 1.1 is read"),
    (change(("id",), None), "the Item has no id"),
    (change((P,), []), "the Item has no properties"),
    (change((A,), None), "the Item has no assets"),
    (change((A,), {}), "the Item has no assets"),
    (change((A, "lwir11", "href"), None), "asset 'lwir11' has no href"),
    (change((A, "lwir11"), "b10.tif"), "asset 'lwir11' has no href"),
    (change((A, "lwir11", "bands"), {"a": 1}), "bands of asset 'lwir11' must be a list of objects"),
    (change((A, "lwir11", "roles"), "data"), "roles of asset 'lwir11' must be a list of words"),
    (change((P, "platform"), "sputnik"), r"does not say a sensor that is known \(platform and instruments: sputnik"),
    (change((P, "datetime"), "2022-07-14T10:00:00"), "datetime '2022-07-14T10:00:00': needs its offset from UTC"),
    (change((P, "datetime"), "yesterday"), "datetime 'yesterday': Invalid isoformat"),
    (change((P, "datetime"), "1822-07-14T10:00:00Z"), "must lie between 1960 and 2100"),
    (change((P, "datetime"), None), "has neither datetime nor start_datetime"),
    (change((P, "view:sun_elevation"), 120), "view:sun_elevation must lie in -90 to 90 degrees, found 120"),
    (change((P, "view:off_nadir"), "low"), "view:off_nadir must lie in 0 to 85 degrees, found 'low'"),
    (change((P, "view:off_nadir"), 70), "view:off_nadir: from 705000 m the line of sight .* misses the Earth"),
    (change((P, "proj:shape"), [10, 10]), "not one of this scene: its 60 x 50 pixels reach beyond"),
    (change((P, "proj:code"), "EPSG:32633"), "its reference system is EPSG:32632, not EPSG:32633"),
    (change((*BAND, "unit"), "mW cm-2"), "unit 'mW cm-2' of asset 'lwir11' is neither a spectral radiance"),
    (change((*BAND, "raster:scale"), 0), "scale of asset 'lwir11' is 0"),
    (change((*BAND, "raster:scale"), "0.1"), "raster:scale of asset 'lwir11' must be a number, found '0.1'"),
    (change((*BAND, "nodata"), "none"), "nodata of asset 'lwir11' must be a number or 'nan'"),
    (change((A, "lwir12", "eo:common_name"), "lwir11"), "two assets are thermal band 10"),
    (change((A, "lwir11", "href"), "ftp://127.0.0.1/b10.tif"), "a scheme that is not followed"),
    (change((A, "qa_pixel", "classification:bitfields"), [{"name": "cloud"}]), "classification of asset 'qa_pixel'"),
]  # fmt: skip


@pytest.mark.parametrize("number", range(len(BROKEN)))
def test_items_out_of_shape(number: int, folder: Path) -> None:
    apply, message = BROKEN[number]
    item = new_style()
    apply(item)
    with pytest.raises(InputError, match=message) as caught:
        open_scene(saved(folder, item))
    assert "\n" not in str(caught.value)


def test_what_is_missing_is_asked_for_by_name(folder: Path) -> None:
    item = new_style()
    item["assets"]["lwir11"]["bands"] = [{"eo:common_name": "lwir11"}]
    with pytest.raises(
        InputError, match="asset 'lwir11' does not say what its numbers are: unit, scale, offset"
    ):
        open_scene(saved(folder, item))
    item = new_style()
    del item["assets"]["lwir11"]["bands"][0]["unit"]
    with pytest.raises(InputError, match="does not say what its numbers are: unit missing"):
        open_scene(saved(folder, item))
    item = new_style()
    del item["assets"]["lwir11"], item["assets"]["lwir12"]
    with pytest.raises(
        InputError, match="has no thermal band: none of its assets carries the common name lwir"
    ):
        open_scene(saved(folder, item))


def test_surface_temperature_is_not_processed_again(folder: Path) -> None:
    item = new_style()
    item["assets"]["lwir11"]["bands"][0].update({"unit": "kelvin", "raster:scale": 0.00341802})
    item["properties"]["processing:level"] = "L2"
    with pytest.raises(InputError, match="holds surface temperature already"):
        open_scene(saved(folder, item))
    del item["properties"]["processing:level"]
    item["assets"]["lwir11"]["title"] = "Surface Temperature Band (B10)"
    with pytest.raises(InputError, match="holds surface temperature already"):
        open_scene(saved(folder, item))


@pytest.mark.parametrize(
    ("content", "message"),
    [("", "is not valid JSON"), ("{", "is not valid JSON"), ("[1]", "is JSON, but not an object"),
     ("[" * 100_000, "nested too deeply"), ("<a/>", "is not valid JSON")],
)  # fmt: skip
def test_files_that_are_no_items(content: str, message: str, tmp_path: Path) -> None:
    (tmp_path / "item.json").write_text(content)
    with pytest.raises(InputError, match=message):
        open_scene(str(tmp_path / "item.json"))


def test_addresses_that_are_not_fetched() -> None:
    with pytest.raises(InputError, match="addresses of the scheme 'ftp' are not fetched"):
        open_scene("ftp://127.0.0.1/item.json")
    with pytest.raises(InputError, match="cannot be fetched"):
        open_scene("http://127.0.0.1:9/item.json")


@pytest.mark.parametrize("name", ["b10.vrt", "b10.tif"])
def test_an_asset_must_not_make_gdal_read_other_files(name: str, folder: Path) -> None:
    (folder / name).unlink(missing_ok=True)
    (folder / name).write_text(
        '<VRTDataset rasterXSize="60" rasterYSize="50"><VRTRasterBand dataType="UInt16" band="1"><SimpleSource>'
        "<SourceFilename>/etc/passwd</SourceFilename></SimpleSource></VRTRasterBand></VRTDataset>"
    )
    item = new_style()
    item["assets"]["lwir11"]["href"] = name
    with pytest.raises(
        InputError, match="makes GDAL read other files, which is refused because another file named it"
    ):
        open_scene(saved(folder, item))
