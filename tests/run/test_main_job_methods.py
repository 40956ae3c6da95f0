"""The other ways to know emissivity and air, end to end."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import numpy as np
import pytest
import rasterio
from affine import Affine

from command_line import groundglow
from groundglow.quantities import FLAG
from invented_scene import CORNER, PIXEL, InventedScene, paint_scene, write_raster

COLUMN = """
[atmosphere]
source = "column"
column_water_vapour = {water}
coefficients = "landsat-8"
"""
WATER_VAPOUR = '[temperature]\nmethod = "water-vapour"\n'


def run(scene: InventedScene) -> dict[str, object]:
    finished = groundglow("run", scene.job_file, "--json", "--quiet")
    assert finished.code == 0, finished.err
    return json.loads(finished.out)


def read(scene: InventedScene, layer: str) -> np.ndarray:
    with rasterio.open(scene.folder / "maps" / "invented" / f"{layer}.tif") as raster:
        return raster.read(1)


def item(scene: InventedScene) -> dict[str, object]:
    text = (scene.folder / "maps" / "invented" / "invented.json").read_text()
    return json.loads(text)["properties"]["groundglow:provenance"]


def test_water_vapour_form_gives_the_published_worked_value(tmp_path: Path) -> None:
    # Jimenez-Munoz et al. (2014), coefficients from memory: L 9.0, w 2 g cm-2, emissivity 0.97 and
    # b_gamma 1324 K give 299.1547 K with the two-constant brightness temperature of band 10 (296.0936 K,
    # K1 774.8853, K2 1321.0789 of the agency).
    scene = paint_scene(tmp_path)
    counts = np.full(scene.counts.shape, round((9.0 - 0.1) / 3.342e-4), np.uint16)
    write_raster(tmp_path / "thermal.tif", counts, scene.transform)
    text = (
        scene.scene_file.read_text()
        .replace('"narrow.toml"', '"landsat-8"')
        .replace('band = "1"', 'band = "10"')
    )
    scene.scene_file.write_text(text.replace("scale = 0.0003", "scale = 3.342e-4"))
    job = '[temperature]\nmethod = "water-vapour"\nradiometry = "two-constants"\n'
    scene.write_job(job, air=COLUMN.format(water=19.999))
    run(scene)
    assert np.nanmedian(read(scene, "surface_temperature")) == pytest.approx(299.155, abs=0.02)


@pytest.mark.parametrize(
    ("water", "flagged", "known"), [(10.0, False, True), (25.0, True, True), (31.0, True, False)]
)
def test_water_vapour_form_says_where_it_does_not_hold(
    tmp_path: Path, water: float, flagged: bool, known: bool
) -> None:
    scene = paint_scene(tmp_path)
    scene.write_job(WATER_VAPOUR, air=COLUMN.format(water=water))
    run(scene)
    bit = FLAG["atmosphere_outside_validity"].mask
    assert bool(read(scene, "quality")[20, 80] & bit) == flagged
    assert bool(np.isfinite(read(scene, "surface_temperature")[20, 80])) == known


def test_column_and_method_belong_together(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    scene.write_job(air=COLUMN.format(water=20))
    finished = groundglow("run", scene.job_file)
    assert finished.code == 2
    assert "water-vapour" in finished.err
    scene.write_job(WATER_VAPOUR)
    finished = groundglow("run", scene.job_file)
    assert finished.code == 2
    assert "column" in finished.err


def add_land_cover(scene: InventedScene, codes: np.ndarray, step: int) -> None:
    """A class raster ``step`` times finer than the scene."""
    transform = Affine(PIXEL / step, 0.0, CORNER[0], 0.0, -PIXEL / step, CORNER[1])
    write_raster(scene.folder / "classes.tif", codes, transform)
    text = scene.scene_file.read_text()
    scene.scene_file.write_text(
        text.replace("elevation = 400.0\n", 'elevation = 400.0\nland_cover = { path = "classes.tif" }\n')
    )


TABLE = """class,code,from,to,value,uncertainty,broadband_correlation
dark,3,8,14,0.98,0.01,0.5
dark,3,,,0.97,0.01,0.5
bright,7,8,14,0.90,0.02,0.5
bright,7,,,0.92,0.02,0.5
"""
LAND_COVER = '[emissivity]\nsource = "land-cover"\nclass_table = "table.csv"\nsmooth = false\n'
WITH_EMISSIVITY = '[layers]\nwrite = ["surface_temperature", "emissivity", "broadband_emissivity"]\n'


def test_a_finer_class_raster_is_averaged_as_emissivity(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    height, width = scene.counts.shape
    codes = np.full((2 * height, 2 * width), 3, np.uint8)
    codes[:, 1::2] = 7  # half of every pixel
    add_land_cover(scene, codes, 2)
    (tmp_path / "table.csv").write_text(TABLE)
    scene.write_job(WITH_EMISSIVITY, ground=LAND_COVER)
    run(scene)
    assert read(scene, "emissivity")[20, 80] == pytest.approx(0.94, abs=2e-4)


def test_class_codes_missing_in_the_table_are_named(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    add_land_cover(scene, np.full(scene.counts.shape, 5, np.uint8), 1)
    (tmp_path / "table.csv").write_text(TABLE)
    scene.write_job(WITH_EMISSIVITY, ground=LAND_COVER)
    finished = groundglow("run", scene.job_file)
    assert finished.code == 3
    assert "5" in finished.err
    assert "class" in finished.err
    assert not (tmp_path / "maps" / "invented").exists()


def add_reflectance(
    scene: InventedScene, red: float, near_infrared: float, scale: float = 0.001, more: str = ""
) -> None:
    """Uniform red and near-infrared bands."""
    for name, value in (("red", red), ("near_infrared", near_infrared)):
        pixels = np.full(scene.counts.shape, round(value / scale), np.uint16)
        write_raster(scene.folder / f"{name}.tif", pixels, scene.transform)
        text = f'\n[reflectance.{name}]\npath = "{name}.tif"\nscale = {scale}\nsun_corrected = true\n{more}'
        scene.scene_file.write_text(scene.scene_file.read_text() + text)


def test_vegetation_index_thresholds_end_to_end(tmp_path: Path) -> None:
    # Skokovic et al. (2014), Landsat 8 band 10 (from memory): full cover 0.987.
    scene = paint_scene(tmp_path)
    add_reflectance(scene, 0.05, 0.45)
    ground = '[emissivity]\nsource = "vegetation-index"\ncoefficients = "landsat-8-10"\n'
    scene.write_job(WITH_EMISSIVITY, ground=ground)
    run(scene)
    assert read(scene, "emissivity")[20, 80] == pytest.approx(0.987, abs=5e-4)
    assert "2014" in item(scene)["method"]["emissivity"]["coefficients"]


def test_reflectance_of_another_date_is_recorded_and_less_sure(tmp_path: Path) -> None:
    # 0.35 is in the middle of the thresholds, where the cover matters.
    results = []
    for age in ("2026-07-14T10:32:00+02:00", "2026-05-14T10:32:00+02:00"):
        scene = paint_scene(tmp_path / age[:7])
        add_reflectance(scene, 0.13, 0.27, more=f"acquired = {age}\n")
        scene.write_job(WITH_EMISSIVITY + "", ground='[emissivity]\nsource = "vegetation-index"\n')
        scene.job_file.write_text(
            scene.job_file.read_text().replace(
                '"broadband_emissivity"]', '"surface_temperature_uncertainty_class"]'
            )
        )
        run(scene)
        results.append((item(scene)["method"]["emissivity"]["reflectance_age_days"], read(
            scene, "surface_temperature_uncertainty_class")[20, 80]))  # fmt: skip
    assert [age for age, _ in results] == [0.0, 61.0]
    assert results[1][1] > results[0][1]


@pytest.mark.parametrize(
    ("red", "near_infrared", "scale", "words"),
    [
        (0.45, 0.05, 0.001, ("swapped",)),
        (5.0, 45.0, 0.1, ("reflectance", "0 and 1")),
        (0.0, 0.0, 0.001, ("red",)),
    ],
    ids=["swapped", "percent", "night"],
)
def test_index_bands_that_cannot_be(
    tmp_path: Path, red: float, near_infrared: float, scale: float, words: tuple[str, ...]
) -> None:
    scene = paint_scene(tmp_path)
    add_reflectance(scene, red, near_infrared, scale)
    scene.write_job(ground='[emissivity]\nsource = "vegetation-index"\n')
    finished = groundglow("run", scene.job_file)
    assert finished.code == 3, finished.err
    for word in words:
        assert word in finished.err


def test_missing_index_bands_are_asked_for_by_name(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    scene.write_job(ground='[emissivity]\nsource = "logarithmic-index"\n')
    finished = groundglow("run", scene.job_file)
    assert finished.code == 2
    assert "red and near_infrared" in finished.err


def test_a_model_atmosphere_is_solved_and_recorded(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    air = '[atmosphere]\nsource = "model"\ncolumn_water_vapour = "2 g cm-2"\nair_temperature = "22 degC"\n'
    scene.write_job('[layers]\nwrite = ["surface_temperature", "sky_flux", "transmittance"]\n', air=air)
    run(scene)
    account = item(scene)["method"]["atmosphere"]
    assert "midlatitude_summer" in account["notes"][0]  # 48 degrees north in July
    assert account["column_water_vapour"] == pytest.approx(20.0, abs=0.01)
    assert 0.7 < np.nanmedian(read(scene, "transmittance")) < 0.95
    flux = np.nanmedian(read(scene, "sky_flux"))
    assert flux == pytest.approx(account["clear_sky_flux_comparison"]["brutsaert"], abs=30.0)


def test_surface_weather_alone_gives_air_with_its_larger_uncertainty(tmp_path: Path) -> None:
    spread = []
    weather = (
        '[atmosphere]\nsource = "weather"\nair_temperature = "22 degC"\nrelative_humidity = 55\n'
        "pressure = 968\nground_height = 400\n"
    )
    for air in (weather, weather + "[atmosphere.uncertainty]\nwater_vapour = 0.02\nair_temperature = 0.3\n"):
        scene = paint_scene(tmp_path / str(len(spread)))
        scene.write_job('[layers]\nwrite = ["surface_temperature_uncertainty_scene"]\n', air=air)
        run(scene)
        spread.append(np.nanmedian(read(scene, "surface_temperature_uncertainty_scene")))
    assert spread[0] > spread[1]


def test_an_airborne_sensor_sees_through_less_air(tmp_path: Path) -> None:
    found = {}
    for name, sensor in (("space", ""), ("low", 'sensor_above = "ground"\nsensor_height = 300\n')):
        scene = paint_scene(tmp_path / name)
        air = f'[atmosphere]\nsource = "model"\nname = "midlatitude_summer"\n{sensor}'
        scene.write_job('[layers]\nwrite = ["transmittance"]\n', air=air)
        run(scene)
        found[name] = float(np.nanmedian(read(scene, "transmittance")))
    assert found["low"] > found["space"] + 0.1
    assert found["low"] < 1.0


def test_sensor_below_the_terrain_is_refused(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    air = '[atmosphere]\nsource = "model"\nsensor_above = "sea"\nsensor_height = 350\n'
    scene.write_job(air=air)
    finished = groundglow("run", scene.job_file)
    assert finished.code == 3, finished.err
    assert "ground" in finished.err


def test_files_that_decide_are_in_the_provenance_with_their_checksums(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    rows = ["pressure_hPa,temperature_degC,dew_point_degC"]
    rows += [f"{1000 - 10 * i},{22 - 0.55 * i:.2f},{12 - 0.9 * i:.2f}" for i in range(40)]
    (tmp_path / "sounding.csv").write_text("\n".join(rows))
    add_land_cover(scene, np.full(scene.counts.shape, 3, np.uint8), 1)
    (tmp_path / "table.csv").write_text(TABLE)
    scene.write_job(
        ground=LAND_COVER,
        air='[atmosphere]\nsource = "sounding"\npath = "sounding.csv"\nground_height = 110\n',
    )
    run(scene)
    inputs = {one["role"]: one for one in item(scene)["inputs"]}
    for role, name in (("atmosphere", "sounding.csv"), ("class_table", "table.csv")):
        assert inputs[role]["sha256"] == hashlib.sha256((tmp_path / name).read_bytes()).hexdigest()
    # What decides is looked at again: another sounding makes the scene anew.
    (tmp_path / "sounding.csv").write_text("\n".join(rows).replace("22.00", "23.00"))
    assert run(scene)["scenes"][0]["status"] == "done"
    assert run(scene)["scenes"][0]["status"] == "up to date"


def test_the_report_tells_the_uncertainty_by_cause(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    air = '[atmosphere]\nsource = "model"\ncolumn_water_vapour = 20\n'
    scene.write_job('[layers]\nwrite = ["surface_temperature_uncertainty"]\n', air=air)
    budget = run(scene)["scenes"][0]["uncertainty"]
    assert set(budget) == {
        "noise", "calibration", "emissivity", "water_vapour", "air_temperature", "absorption_model", "total",
    }  # fmt: skip
    parts = [value for name, value in budget.items() if name != "total"]
    assert budget["total"] == pytest.approx(np.sqrt(np.sum(np.square(parts))), rel=1e-6)
    stated = np.nanmedian(read(scene, "surface_temperature_uncertainty"))
    assert budget["total"] == pytest.approx(stated, rel=0.1)
    assert item(scene)["uncertainty_budget"] == budget
