"""The demo scene is what its README says, and its truth is consistent with its counts."""

from __future__ import annotations

import ast
import csv
import json
import subprocess
import sys
import tomllib
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
from numpy.typing import NDArray
from rasterio.crs import CRS
from scipy.ndimage import map_coordinates

from groundglow.physics.spectral_response import SpectralResponse

PROJECT = Path(__file__).resolve().parent.parent
DEMO = PROJECT / "data_demo"
SENSOR = PROJECT / "pipeline" / "groundglow" / "sensors" / "ember-two-band.toml"
STEFAN_BOLTZMANN = 5.670374419e-8  # W m-2 K-4, CODATA 2018
RASTERS = sorted(path.relative_to(DEMO).as_posix() for path in DEMO.rglob("*.tif"))
Pixels = NDArray[np.float64]


def read(name: str, band: int = 1) -> Pixels:
    with rasterio.open(DEMO / name) as raster:
        return np.asarray(raster.read(band), dtype=np.float64)


def toml(path: Path) -> dict[str, Any]:
    return tomllib.loads(path.read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def sky() -> NDArray[np.uint8]:
    with rasterio.open(DEMO / "quality.tif") as raster:
        return np.asarray(raster.read(1) & 3)


@pytest.fixture(scope="module")
def height() -> Pixels:
    """Ground height at the centres of the thermal pixels, bilinear between the relief's nodes."""
    with rasterio.open(DEMO / "thermal.tif") as thermal, rasterio.open(DEMO / "elevation.tif") as relief:
        east = thermal.bounds.left + 30.0 * (np.arange(thermal.width) + 0.5)
        north = thermal.bounds.top - 30.0 * (np.arange(thermal.height) + 0.5)
        node_column, node_row = np.meshgrid(
            (east - relief.bounds.left) / 90.0, (relief.bounds.top - north) / 90.0
        )
        nodes = relief.read(1).astype(float)
    return np.asarray(map_coordinates(nodes, [node_row - 0.5, node_column - 0.5], order=1), dtype=np.float64)


def air_term(band: dict[str, Any], name: str, height: Pixels, draws: dict[str, float]) -> Pixels:
    column = np.array(band[name])
    for cause, draw in draws.items():
        column = column + draw * np.array(band["change"][cause][name])
    return np.asarray(np.interp(height, toml(DEMO / "air.toml")["height"], column), dtype=np.float64)


def response(entry: dict[str, Any]) -> SpectralResponse:
    return SpectralResponse(
        np.array(entry["response"]["wavelength"]), np.array(entry["response"]["response"])
    )


# ---- the files


def test_painting_again_gives_the_same_pixels(tmp_path: Path) -> None:
    subprocess.run([sys.executable, str(DEMO / "paint_demo.py"), "--output", str(tmp_path)], check=True)
    for name in RASTERS:
        with rasterio.open(DEMO / name) as committed, rasterio.open(tmp_path / name) as painted:
            assert (painted.crs, painted.transform) == (committed.crs, committed.transform), name
            assert (painted.shape, painted.dtypes) == (committed.shape, committed.dtypes), name
            differs = ~np.isclose(painted.read(), committed.read(), rtol=0.0, atol=0.0, equal_nan=True)
            # Another machine's exponential may differ in the last bit and tip a rounding.
            assert differs.mean() < 1e-4, name
    again, before = (
        json.loads((folder / "truth.json").read_text(encoding="utf-8"))["draws"]
        for folder in (tmp_path, DEMO)
    )
    assert again.keys() == before.keys()
    assert all(again[cause] == pytest.approx(before[cause], rel=1e-5) for cause in before)
    assert (tmp_path / "classes.csv").read_text(encoding="utf-8") == (DEMO / "classes.csv").read_text(
        encoding="utf-8"
    )


def test_everything_together_stays_small() -> None:
    files = [
        path for path in DEMO.rglob("*") if path.is_file() and "cache" not in str(path.relative_to(DEMO))
    ]
    assert len(files) > 20
    assert sum(path.stat().st_size for path in files) < 10e6


@pytest.mark.parametrize("name", RASTERS)
def test_rasters_have_a_place_and_a_nodata_value(name: str) -> None:
    with rasterio.open(DEMO / name) as raster:
        assert raster.crs == CRS.from_epsg(32633)
        assert raster.compression.name == "deflate"
        assert (raster.nodata is None) == (name == "quality.tif")  # its bit 7 says where nothing is
        assert all(raster.descriptions)


def test_grids_nest_and_are_of_odd_size() -> None:
    with rasterio.open(DEMO / "thermal.tif") as thermal:
        assert (thermal.width, thermal.height, thermal.count) == (603, 561, 2)
        assert thermal.dtypes == ("uint16", "uint16")
        bounds = thermal.bounds
    for name, cell in (
        ("red.tif", 15.0),
        ("near_infrared.tif", 15.0),
        ("land_cover.tif", 15.0),
        ("quality.tif", 30.0),
    ):
        with rasterio.open(DEMO / name) as raster:
            assert raster.bounds == bounds, name
            assert raster.res == (cell, cell), name
    with rasterio.open(DEMO / "elevation.tif") as relief:
        assert relief.res == (90.0, 90.0)
        assert relief.bounds.left < bounds.left
        assert relief.bounds.top > bounds.top


@pytest.mark.parametrize("name", ["scene.toml", "scene_noise_only.toml"])
def test_scene_files_name_rasters_that_exist(name: str) -> None:
    scene = toml(DEMO / name)
    acquired = scene["scene"]["acquired"]
    assert isinstance(acquired, datetime)
    assert acquired.tzinfo is not None
    named = [scene["quality"], scene["scene"]["elevation"], *scene["thermal"], *scene.get("emissivity", [])]
    named += scene.get("reflectance", {}).values()
    assert all((DEMO / entry["path"]).is_file() for entry in named)
    assert [entry["band"] for entry in scene["thermal"]] == [
        entry["number"] for entry in toml(SENSOR)["band"]
    ]


def test_sun_elevation_is_that_of_the_place_and_time() -> None:
    # Spencer's declination and equation of time (common practice); 48.3 N, 13.7 E, 10:08 UTC, day 195.
    day = 2.0 * np.pi * (195 - 1) / 365.0
    declination = 0.006918 - 0.399912 * np.cos(day) + 0.070257 * np.sin(day) - 0.006758 * np.cos(2 * day)
    hour_angle = np.radians((10.0 + 8.0 / 60.0 + 13.7 / 15.0 - 5.8 / 60.0 - 12.0) * 15.0)
    latitude = np.radians(48.3)
    sine = np.sin(latitude) * np.sin(declination) + np.cos(latitude) * np.cos(declination) * np.cos(
        hour_angle
    )
    assert toml(DEMO / "scene.toml")["scene"]["sun_elevation"] == pytest.approx(
        np.degrees(np.arcsin(sine)), abs=0.7
    )


def test_the_script_shares_only_constants_with_the_package() -> None:
    shared = set()
    for path in DEMO.glob("*.py"):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            names = [alias.name for alias in node.names] if isinstance(node, ast.Import) else []
            names += [node.module or ""] if isinstance(node, ast.ImportFrom) else []
            shared |= {name for name in names if name.split(".")[0] == "groundglow"}
    assert shared == {"groundglow.physics.constants"}


# ---- the ground


def test_true_temperatures_are_those_of_a_summer_noon() -> None:
    temperature, cover = read("truth/surface_temperature.tif"), read("land_cover.tif")[::2, ::2]
    inside = np.isfinite(temperature)
    assert 288.0 < temperature[inside].min() < 293.0
    assert 450.0 < temperature[inside].max() < 700.0  # the spoil heap's vents
    median = {code: float(np.median(temperature[inside & (cover == code)])) for code in np.unique(cover)}
    assert 290.0 < median[10] < 296.0  # open water
    assert median[10] < median[20] < median[31] < median[33] < median[32] < median[50] < median[63]


def test_true_emissivities_are_possible_and_sand_hides_its_dip() -> None:
    one, two, broad = (
        read(f"truth/{name}.tif")
        for name in ("emissivity_band_1", "emissivity_band_2", "broadband_emissivity")
    )
    inside = np.isfinite(one)
    for values in (one, two, broad):
        assert (np.isfinite(values) == inside).all()
        assert 0.03 < values[inside].min() < 0.3  # weathered metal, Oke 1987 (from memory)
        assert 0.98 < values[inside].max() <= 1.0
    sand = (read("land_cover.tif")[::2, ::2] == 50) & inside
    # Sands have 0.89-0.92 over 8-14 um, Sutherland 1986, doi 10.1175/1520-0426(1986)003<0199:BASEOS>2.0.CO;2
    assert 0.88 < np.median(broad[sand]) < 0.93
    assert np.median(one[sand]) - np.median(broad[sand]) > 0.02


def test_true_flux_is_that_of_temperature_and_broadband_emissivity() -> None:
    flux = read("truth/emitted_flux.tif")
    from_truth = (
        read("truth/broadband_emissivity.tif") * STEFAN_BOLTZMANN * read("truth/surface_temperature.tif") ** 4
    )
    # Equal where the footprint is of one kind; mixed ones differ: band and flux weigh heat differently.
    off = np.abs(flux / from_truth - 1.0)[np.isfinite(flux)]
    assert np.median(off) < 1e-3
    assert np.quantile(off, 0.95) < 0.005


def test_classes_are_named_and_every_one_is_there() -> None:
    with (DEMO / "classes.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    codes = np.unique(read("land_cover.tif")).astype(int).tolist()
    assert sorted({int(row["code"]) for row in rows}) == codes
    for code in codes:
        intervals = [(row["from"], row["to"]) for row in rows if int(row["code"]) == code]
        assert intervals == [("9.9", "11.3"), ("11.4", "12.9"), ("", "")]
    assert codes == [
        item["code"] for item in json.loads((DEMO / "truth.json").read_text(encoding="utf-8"))["classes"]
    ]


def test_vegetation_index_tells_green_from_bare() -> None:
    red, near_infrared, cover = read("red.tif"), read("near_infrared.tif"), read("land_cover.tif")
    index = (near_infrared - red) / (near_infrared + red)
    assert (
        np.median(index[cover == 31]) > 0.7
    )  # green crops; full cover lies above 0.5, Carlson & Ripley 1997
    assert np.median(index[cover == 40]) < 0.2  # bare soil
    assert np.median(index[cover == 10]) < 0.0  # water


# ---- sky and swath


def test_every_word_of_the_quality_raster_occurs(sky: NDArray[np.uint8]) -> None:
    word = read("quality.tif").astype(int)
    shares = [float((sky == value).mean()) for value in (1, 2)] + [
        float((word >> bit & 1).mean()) for bit in (3, 5, 7)
    ]
    assert all(0.005 < share < 0.15 for share in shares), shares
    assert ((word >> 7 & 1).astype(bool) == (read("thermal.tif") == 0.0)).all()


def test_clouds_are_cold_and_saturated_pixels_are_few(sky: NDArray[np.uint8]) -> None:
    for band in (1, 2):
        counts = read("thermal.tif", band)
        assert np.median(counts[sky == 2]) < np.median(counts[sky == 1]) < np.median(counts[sky == 0])
        assert 10 < (counts == 65535).sum() < 500
        assert counts[counts < 65535].max() < 65400  # saturation is the sensor's, not the file's


# ---- the air


def test_sounding_hangs_together() -> None:
    with (DEMO / "sounding.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    pressure, height, warm, dew = (
        np.array([float(row[name]) for row in rows])
        for name in ("pressure_hPa", "height_m", "temperature_degC", "dew_point_degC")
    )
    assert (dew < warm).all()
    vapour = 6.112 * np.exp(17.62 * dew / (243.12 + dew))  # WMO-No. 8
    humidity = 0.622 * vapour / (pressure - 0.378 * vapour)
    assert -np.trapezoid(humidity, 100.0 * pressure) / 9.80665 == pytest.approx(20.0, abs=0.5)  # kg m-2
    virtual = (warm + 273.15) * (1.0 + 0.608 * humidity)
    # Hypsometric equation; the smallest step is 14 hPa with one decimal printed.
    thickness = 287.053 / 9.80665 * 0.5 * (virtual[1:] + virtual[:-1]) * np.log(pressure[:-1] / pressure[1:])
    assert thickness == pytest.approx(np.diff(height), rel=0.03)


def test_air_thins_with_height_and_vapour_dims_it() -> None:
    for band in toml(DEMO / "air.toml")["band"]:
        transmittance, path, sky = (
            np.array(band[name]) for name in ("transmittance", "path_radiance", "sky_radiance")
        )
        assert (np.diff(transmittance) > 0.0).all()
        assert (np.diff(path) < 0.0).all()
        assert (np.diff(sky) < 0.0).all()
        assert (sky > path).all()  # slanting rays cross more air
        for cause in ("water_vapour", "absorption_model"):
            change = band["change"][cause]
            assert max(change["transmittance"]) < 0.0
            assert min(change["path_radiance"]) > 0.0
            assert min(change["sky_radiance"]) > 0.0


def test_air_agrees_with_published_relations() -> None:
    air = toml(DEMO / "air.toml")
    # Jimenez-Munoz et al. 2014, doi 10.1109/LGRS.2014.2312032, psi1 = 1 / transmittance of Landsat 8's band
    # 10.6-11.2 um (coefficients from memory); the invented band 1 looks at much the same air.
    water = air["column_water_vapour"] / 10.0
    expected = 1.0 / (0.04019 * water**2 + 0.02916 * water + 1.01523)
    assert air["band"][0]["transmittance"][0] == pytest.approx(expected, abs=0.03)
    assert (
        air["band"][1]["transmittance"][0] < air["band"][0]["transmittance"][0]
    )  # more water beyond 11.5 um
    # Brutsaert 1975, doi 10.1029/WR011i005p00742, at the sounding's lowest level: 25.8 and 10.2 degC.
    vapour, warm = 6.112 * np.exp(17.62 * 10.2 / (243.12 + 10.2)), 25.8 + 273.15
    estimate = 1.24 * (vapour / warm) ** (1.0 / 7.0) * STEFAN_BOLTZMANN * warm**4
    assert air["sky_flux"][0] == pytest.approx(estimate, abs=25.0)


# ---- counts and truth


@pytest.mark.parametrize("place", [0, 1])
def test_noise_only_counts_return_the_truth(place: int, sky: NDArray[np.uint8], height: Pixels) -> None:
    """Inverted with exact inputs the error is the noise: mean within 0.02 K, spread within 5 %."""
    entry, sensor = toml(DEMO / "scene_noise_only.toml")["thermal"][place], toml(SENSOR)["band"][place]
    band = toml(DEMO / "air.toml")["band"][place]
    curve = response(sensor)
    temperatures = np.arange(260.0, 480.0, 0.05)
    table = curve.band_radiance(temperatures)
    counts, truth = read("thermal_noise_only.tif", place + 1), read("truth/surface_temperature.tif")
    emissivity = read(f"truth/emissivity_band_{place + 1}.tif")
    transmittance, path, reflected = (
        air_term(band, name, height, {}) for name in ("transmittance", "path_radiance", "sky_radiance")
    )
    usable = (counts > 0.0) & (counts < 65535.0) & (sky == 0)
    radiance = entry["scale"] * counts + entry["offset"]
    emitted = ((radiance - path) / transmittance - (1.0 - emissivity) * reflected) / emissivity
    error = (np.interp(emitted, table, temperatures) - truth)[usable]
    noise = sensor["noise"]
    per_pixel = noise["temperature_difference"] * float(curve.band_radiance_slope(noise["at"]))
    slope = np.interp(truth, temperatures, curve.band_radiance_slope(temperatures))
    implied = (np.hypot(per_pixel, entry["scale"] / 12**0.5) / (transmittance * emissivity * slope))[usable]
    assert abs(error.mean()) <= 0.02
    assert np.std(error / implied) == pytest.approx(1.0, abs=0.05)


@pytest.mark.parametrize("place", [0, 1])
def test_stated_draws_explain_the_full_counts(place: int, sky: NDArray[np.uint8], height: Pixels) -> None:
    """With the stated draws of air and calibration put in, noise shared by neighbours is all that is left."""
    entry, sensor = toml(DEMO / "scene.toml")["thermal"][place], toml(SENSOR)
    draws = json.loads((DEMO / "truth.json").read_text(encoding="utf-8"))["draws"]
    band = toml(DEMO / "air.toml")["band"][place]
    emissivity = read(f"truth/emissivity_band_{place + 1}.tif")
    temperatures = np.arange(260.0, 480.0, 0.05)
    table = response(sensor["band"][place]).band_radiance(temperatures)
    blackbody = np.interp(read("truth/surface_temperature.tif"), temperatures, table)
    causes = draws["air_in_standard_uncertainties"]
    transmittance, path, reflected = (
        air_term(band, name, height, causes) for name in ("transmittance", "path_radiance", "sky_radiance")
    )
    expected = transmittance * (emissivity * blackbody + (1.0 - emissivity) * reflected) + path
    expected += draws["calibration_radiance"][f"band_{place + 1}"]
    counts = read("thermal.tif", place + 1)
    residual = entry["scale"] * counts + entry["offset"] - expected
    # Vents apart: there the two bands' radiometric temperatures differ.
    residual[(counts == 0.0) | (counts == 65535.0) | (sky != 0) | (np.abs(residual) > 0.2)] = np.nan
    noise = draws["pixel_noise_radiance"][f"band_{place + 1}"]
    assert abs(np.nanmean(residual)) < 0.05 * noise
    assert np.nanstd(residual) == pytest.approx(noise, rel=0.05)
    pixels = round(sensor["native_footprint"] / 30.0)
    neighbours = residual[:, 1:] * residual[:, :-1]
    assert np.nanmean(neighbours) / np.nanvar(residual) == pytest.approx(1.0 - 1.0 / pixels, abs=0.04)
    apart = residual[:, pixels:] * residual[:, :-pixels]
    assert np.nanmean(apart) / np.nanvar(residual) == pytest.approx(0.0, abs=0.04)
