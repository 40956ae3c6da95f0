"""One pixel explained: the same numbers as the map, from the counts to the flux, by whatever way it is named."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest
import rasterio
from rasterio.warp import transform as reproject

from command_line import Finished, groundglow
from groundglow import api
from groundglow.run.inspection.explain import explain_pixel
from invented_scene import InventedScene, paint_scene
from stage_scenes import varied_scene

LEFT, TOP, PIXEL = 412_345.0, 5_338_765.0, 30.0
# Open ground, a cloud, near a cloud, a saturated pixel, outside the swath, no elevation, no emissivity, the last pixel.
PIXELS = [(20, 80), (45, 65), (38, 66), (7, 9), (529, 2), (101, 201), (302, 25), (529, 599), (511, 512)]


@pytest.fixture(scope="module")
def scene(tmp_path_factory: pytest.TempPathFactory) -> InventedScene:
    scene = varied_scene(tmp_path_factory.mktemp("explain"))
    assert groundglow("run", scene.job_file, "--quiet").code == 0
    return scene


def centre(row: int, column: int) -> tuple[float, float]:
    return LEFT + PIXEL * (column + 0.5), TOP - PIXEL * (row + 0.5)


def explain(scene: InventedScene, *arguments: object) -> Finished:
    return groundglow("explain", scene.job_file, *arguments)


def stories(scene: InventedScene, *arguments: object) -> list[dict[str, object]]:
    found = explain(scene, *arguments, "--json")
    assert (found.code, found.err) == (0, "")
    return json.loads(found.out)


def in_the_map(scene: InventedScene, layer: str, row: int, column: int) -> float | None:
    with rasterio.open(scene.folder / "maps" / "invented" / f"{layer}.tif") as raster:
        value = float(raster.read(1, window=((row, row + 1), (column, column + 1)))[0, 0])
    return value if math.isfinite(value) else None


@pytest.mark.parametrize(("row", "column"), PIXELS)
def test_every_layer_is_equal_to_the_map(scene: InventedScene, row: int, column: int) -> None:
    (story,) = stories(scene, *centre(row, column))
    assert (story["row"], story["column"]) == (row, column)
    assert len(story["layers"]) == 16
    for name, value in story["layers"].items():
        assert value == in_the_map(scene, name, row, column), name


def test_the_numbers_before_the_map_are_those_of_the_inputs(scene: InventedScene) -> None:
    row, column = 20, 80
    (story,) = stories(scene, *centre(row, column))
    sensor, air = story["steps"]["sensor"], story["steps"]["atmosphere"]
    assert sensor["counts"] == scene.counts[row, column]
    assert sensor["radiance"] == pytest.approx(3.0e-4 * scene.counts[row, column] + 0.1, rel=1e-6)
    with rasterio.open(scene.folder / "elevation.tif") as raster:
        height = float(raster.read(1)[row, column])
    assert air["ground_height"] == height
    # Linear between the two heights that the job gives.
    share = (height - 200.0) / 500.0
    given = {
        "transmittance": (0.80, 0.86),
        "path_radiance": (1.5, 1.1),
        "sky_radiance": (2.4, 1.9),
        "sky_flux": (350.0, 320.0),
    }
    for name, (low, high) in given.items():
        assert air[name] == pytest.approx(low + share * (high - low), rel=1e-6)
    with rasterio.open(scene.folder / "emissivity.tif") as raster:
        assert story["steps"]["emissivity"]["emissivity"] == pytest.approx(
            float(raster.read(1)[row, column]), abs=1e-3
        )
    assert story["emissivity_origin"]["source"] == "raster"
    assert story["atmosphere_origin"]["reference"] == "invented for the tests"


def test_the_steps_fit_each_other(scene: InventedScene) -> None:
    # The radiative transfer equation (Norman and Becker 1995, doi:10.1016/0168-1923(95)02259-Z) put together again.
    (story,) = stories(scene, *centre(20, 80))
    steps = story["steps"]
    ground, air, surface = steps["emissivity"], steps["atmosphere"], steps["surface"]
    eps = ground["emissivity"]
    band = api.plan(scene.job_file).band.sensor_band.response
    black = float(band.band_radiance(surface["surface_temperature"]))
    radiance = (
        eps * air["transmittance"] * black
        + (1 - eps) * air["transmitted_sky_radiance"]
        + air["path_radiance"]
    )
    assert steps["sensor"]["radiance"] == pytest.approx(radiance, abs=2e-4)
    share = (air["ground_height"] - 200.0) / 500.0
    mirrored = 0.80 * 2.4 + share * (0.86 * 1.9 - 0.80 * 2.4)
    assert air["transmitted_sky_radiance"] == pytest.approx(mirrored, rel=1e-6)
    assert surface["net_longwave_flux"] == pytest.approx(air["sky_flux"] - surface["leaving_flux"], abs=1e-3)


@pytest.mark.parametrize("of", ["temperature", "flux"])
def test_the_causes_of_uncertainty_add_as_squares_to_the_total(scene: InventedScene, of: str) -> None:
    # JCGM 100:2008, equation 10: independent causes.
    (story,) = stories(scene, *centre(20, 80))
    causes = dict(story[f"{of}_uncertainty"])
    total = causes.pop("total")
    expected = {"noise", "calibration", "emissivity", "stated_transmittance", "stated_path_radiance"}
    assert expected <= set(causes)
    assert math.sqrt(sum(value**2 for value in causes.values())) == pytest.approx(total, rel=1e-5)


def test_each_cause_is_what_a_change_of_it_does(scene: InventedScene) -> None:
    plan = api.plan(scene.job_file)
    whole = explain_pixel(plan, 20, 80).temperature_uncertainty
    parts = {
        name: in_the_map(scene, f"surface_temperature_uncertainty_{name}", 20, 80)
        for name in ("pixel", "class")
    }
    assert whole["noise"] == pytest.approx(parts["pixel"], rel=2e-3)
    assert whole["emissivity"] == pytest.approx(parts["class"], rel=2e-3)


def test_flags_are_named_and_those_that_take_the_number_away_told(scene: InventedScene) -> None:
    (cloud,) = stories(scene, *centre(45, 65))
    assert "cloud" in cloud["flags"]
    assert cloud["masked_by"] == ["cloud"]
    assert cloud["layers"]["surface_temperature"] is None
    assert cloud["steps"]["surface"]["surface_temperature"] > 250.0
    (near,) = stories(scene, *centre(38, 66))
    assert ("near_cloud" in near["flags"], near["masked_by"]) == (True, [])


def test_longitude_and_latitude_lead_to_the_same_pixel(scene: InventedScene) -> None:
    x, y = centre(20, 80)
    (longitude,), (latitude,) = reproject("EPSG:32633", "EPSG:4326", [x], [y])
    (story,) = stories(scene, longitude, latitude, "--lonlat")
    assert (story["row"], story["column"]) == (20, 80)


def test_points_of_a_file_are_told_one_after_the_other(scene: InventedScene, tmp_path: Path) -> None:
    points = tmp_path / "points.csv"
    (x, y), (u, v) = centre(20, 80), centre(302, 25)
    points.write_text(f"name,x,y\nroof,{x},{y}\npond,{u},{v}\n")
    found = stories(scene, "--points", points)
    assert [(one["name"], one["row"], one["column"]) for one in found] == [
        ("roof", 20, 80),
        ("pond", 302, 25),
    ]


def test_points_of_a_file_may_be_in_degrees(scene: InventedScene, tmp_path: Path) -> None:
    points = tmp_path / "points.csv"
    x, y = centre(20, 80)
    (longitude,), (latitude,) = reproject("EPSG:32633", "EPSG:4326", [x], [y])
    points.write_text(f"\ufeffLatitude,Longitude\n{latitude},{longitude}\n", encoding="utf-8")
    (story,) = stories(scene, "--points", points)
    assert (story["name"], story["row"], story["column"]) == ("line 2", 20, 80)


def test_the_table_reads_from_the_counts_to_the_map(scene: InventedScene) -> None:
    text = explain(scene, *centre(45, 65)).out
    places = [text.index(word) for word in ("counts", "brightness temperature", "transmittance", "net longwave flux",
              "emissivity from\n  source: raster", "air from\n  source: explicit", "1 sigma from", "flags: cloud",
              "no number in the map, because of: cloud", "layer of the map")]  # fmt: skip
    assert places == sorted(places)


def test_brightness_temperature_jobs_have_a_shorter_story(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    layers = '[layers]\nwrite = ["brightness_temperature"]\n'
    scene.write_job(layers, air='[atmosphere]\nsource = "none"\n')
    (story,) = stories(scene, *centre(20, 80))
    assert list(story["steps"]) == ["sensor"]
    assert story["temperature_uncertainty"] == {}


def test_the_water_vapour_method_has_its_own_causes(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    air = '[temperature]\nmethod = "water-vapour"\n[atmosphere]\nsource = "column"\n'
    scene.write_job(air=air + 'column_water_vapour = 15.0\ncoefficients = "landsat-8"\n')
    (story,) = stories(scene, *centre(20, 80))
    assert story["steps"]["atmosphere"] == {"column_water_vapour": 15.0}
    causes = dict(story["temperature_uncertainty"])
    total = causes.pop("total")
    assert set(causes) == {"noise", "calibration", "emissivity", "column_water_vapour", "method"}
    assert math.sqrt(sum(value**2 for value in causes.values())) == pytest.approx(total, rel=1e-5)


def test_a_scene_can_be_chosen(scene: InventedScene, tmp_path: Path) -> None:
    other = varied_scene(tmp_path, 90, 110)
    (story,) = stories(scene, *centre(20, 80), "--scene", other.scene_file)
    assert story["steps"]["sensor"]["counts"] == other.counts[20, 80]


@pytest.mark.parametrize(
    ("arguments", "code", "told"),
    [
        ((412_344.9, 5_338_700.0), 3, "(412345, 5.3387e+06) lies outside the map"),
        ((-70.0, -33.5), 3, "x 412345 to 430345, y 5322865 to 5338765 in EPSG:32633"),
        ((-70.0, -33.5, "--lonlat"), 3, "(longitude, latitude -70, -33.5) lies outside the map"),
        ((48.2, 120.0, "--lonlat"), 2, "a latitude lies between -90 and 90 degrees, not at 120"),
        ((412_400.0,), 2, "a point needs X and Y"),
        ((), 2, "a point needs X and Y"),
        (("nan", 5.0), 2, "finite numbers"),
        (("east", 5.0), 2, "Invalid value for 'X'"),
    ],
)
def test_points_that_are_none(
    scene: InventedScene, arguments: tuple[object, ...], code: int, told: str
) -> None:
    found = explain(scene, *arguments)
    assert (found.code, found.out) == (code, "")
    assert told in " ".join(found.err.split())


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("", "the file holds no points"),
        ("x,y\n", "the file holds no points"),
        (
            "easting,northing\n1,2\n",
            "columns x and y (or longitude and latitude) are needed, found easting, northing",
        ),
        ("x,y\n1,two\n", "line 2: 'two' is not a coordinate"),
        ("x,y\n412400,5338700\n1\n", "line 3: None is not a coordinate"),
        ("lon,lat\n400,48\n", "line 2: a longitude lies between -180 and 360 degrees, not at 400"),
        ("x,y,name\n1,2,well\n", "well (1, 2) lies outside the map"),
    ],
)
def test_files_of_points_that_are_none(scene: InventedScene, tmp_path: Path, text: str, told: str) -> None:
    points = tmp_path / "points.csv"
    points.write_text(text)
    found = explain(scene, "--points", points)
    assert found.code == 3
    assert told in found.err


def test_a_file_of_points_that_is_missing_or_no_text(scene: InventedScene, tmp_path: Path) -> None:
    assert "there is no such file" in explain(scene, "--points", tmp_path / "none.csv").err
    (tmp_path / "binary.csv").write_bytes(bytes(range(256)))
    assert "cannot be read as CSV" in explain(scene, "--points", tmp_path / "binary.csv").err


def test_a_point_and_a_file_at_once(scene: InventedScene, tmp_path: Path) -> None:
    found = explain(scene, 1.0, 2.0, "--points", tmp_path / "points.csv")
    assert (found.code, "not both" in found.err) == (2, True)


def test_nothing_is_written(scene: InventedScene) -> None:
    before = sorted(path.name for path in scene.folder.rglob("*"))
    explain(scene, *centre(20, 80))
    assert sorted(path.name for path in scene.folder.rglob("*")) == before
    assert np.isfinite(scene.temperature).all()


def test_every_scene_of_a_job_that_holds_the_point_tells_its_story(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    second = scene.scene_file.read_text().replace('name = "invented"', 'name = "later"')
    (tmp_path / "later.toml").write_text(second)
    job = scene.job_file.read_text().replace('scenes = "scene.toml"', 'scenes = ["scene.toml", "later.toml"]')
    scene.job_file.write_text(job)
    assert [story["scene"] for story in stories(scene, *centre(20, 80))] == ["invented", "later"]
