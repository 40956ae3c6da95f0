"""A look at the day's air: what the command prints, writes and refuses, for every source of a profile."""

from __future__ import annotations

import csv
import json
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import analysis_files
from command_line import Finished, groundglow
from invented_scene import AIR, InventedScene, paint_scene

SOUNDING = """\
pressure_hPa,height_m,temperature_degC,dew_point_degC
965,400,25.0,14.0
900,1000,20.0,11.0
800,2010,12.0,5.0
700,3120,5.0,-6.0
500,5730,-11.0,-25.0
300,9400,-43.0,-55.0
200,11980,-56.0,-75.0
"""
FROM_SOUNDING = '[atmosphere]\nsource = "sounding"\npath = "flight.csv"\n'
MODEL = '[atmosphere]\nsource = "model"\nname = "us_standard"\ncolumn_water_vapour = 20.0\n'
WEATHER = (
    '[atmosphere]\nsource = "weather"\nair_temperature = 298.15\ndew_point = 287.15\npressure = 965.0\n'
    "ground_height = 400.0\n"
)
ANALYSIS = '[atmosphere]\nsource = "analysis"\npaths = "day.nc"\n'


@pytest.fixture(scope="module")
def scene(tmp_path_factory: pytest.TempPathFactory) -> InventedScene:
    painted = paint_scene(tmp_path_factory.mktemp("scene"), 40, 60)
    (painted.folder / "flight.csv").write_text(SOUNDING)
    # The invented scene lies near 48.2 N, 13.8 E.
    longitude, latitude = np.arange(12.0, 16.0, 0.5), np.arange(47.0, 50.0, 0.5)
    content = analysis_files.dataset(longitude=longitude, latitude=latitude)
    analysis_files.written(painted.folder / "day.nc", content)
    analysis_files.written(painted.folder / "elsewhere.nc", analysis_files.dataset())
    analysis_files.written(painted.folder / "later.nc", content.isel(time=slice(1, None)))
    return painted


def look(scene: InventedScene, atmosphere: str, *options: object) -> Finished:
    return groundglow("air", scene.write_job(air=atmosphere), *options)


def record(scene: InventedScene, atmosphere: str, *options: object) -> dict[str, Any]:
    finished = look(scene, atmosphere, "--json", *options)
    assert finished.code == 0, finished.err
    content: dict[str, Any] = json.loads(finished.out)
    return content


@pytest.mark.parametrize("atmosphere", [FROM_SOUNDING, ANALYSIS, MODEL, WEATHER])
def test_every_source_of_a_profile(scene: InventedScene, atmosphere: str) -> None:
    found = record(scene, atmosphere)
    band = found["bands"]["1"]
    # 10.6-11.2 um through one to three centimetres of water: common practice.
    assert 0.55 < band["transmittance"] < 0.95
    assert 0.3 < band["path_radiance"] < 4.0
    assert band["sky_radiance"] > band["path_radiance"]
    assert band["one_sigma"]["absorption_model"]["sky_flux"] > 0.0
    assert found["atmosphere"]["source"] == atmosphere.split('"')[1]
    # Formulas from near-ground weather agree with solved fluxes within some 15 W m-2 rms; 40 is a gross error.
    for flux in found["sky_flux_comparisons"].values():
        assert abs(flux - found["sky_flux"]) < 40.0


def test_the_sounding_as_it_was_measured(scene: InventedScene) -> None:
    found = record(scene, FROM_SOUNDING)
    assert found["ground_height"] == 400.0
    assert found["near_ground"]["pressure"] == pytest.approx(965.0)
    assert found["near_ground"]["temperature"] == pytest.approx(298.15)
    assert found["near_ground"]["dew_point"] == pytest.approx(287.15, abs=0.01)
    # By hand from the table above: vapour density e / (461.5 J kg-1 K-1 T), exponential between levels, with e
    # of WMO-No. 8: 24.53 kg m-2 below 12 km; above that there is next to none.
    assert found["column_water_vapour"] == pytest.approx(24.53, rel=0.01)
    # Brutsaert (1975) and Prata (1996) at 298.15 K and e = 6.112 exp(17.62 * 14 / 257.12) = 15.95 hPa:
    # 1.24 (e / T)^(1/7) = 0.8161 and, with w = 46.5 e / T = 2.488, 1 - 3.488 exp(-sqrt(8.664)) = 0.8162.
    black = 5.670374e-8 * 298.15**4
    assert found["sky_flux_comparisons"]["brutsaert"] == pytest.approx(0.8161 * black, rel=1e-3)
    assert found["sky_flux_comparisons"]["prata"] == pytest.approx(0.8162 * black, rel=1e-3)


def test_tables_for_a_reader(scene: InventedScene) -> None:
    finished = look(scene, FROM_SOUNDING)
    assert finished.code == 0, finished.err
    for part in (
        "invented, 2026-07-14 08:32 UTC", "sounding flight.csv", "model atmosphere midlatitude_summer",
        "ground: 400 m above sea level", "kg m-2 (", "g cm-2)", "Brutsaert 1975", "Prata 1996", "water vapour, 5.0 %",
        "air temperature, 0.50 K", "carbon dioxide", "all together",
    ):  # fmt: skip
        assert part in finished.out, part
    assert max(map(len, finished.out.splitlines()[8:])) < 140


def test_gases_together_take_about_what_they_take_alone(scene: InventedScene) -> None:
    band = record(scene, FROM_SOUNDING)["bands"]["1"]
    alone = band["transmittance_of_each_gas"]
    assert min(alone, key=alone.get) == "water_vapour"
    assert np.prod(list(alone.values())) == pytest.approx(band["transmittance"], abs=0.01)


def test_height_and_angle_asked_for(scene: InventedScene) -> None:
    low, high, slant = (
        record(scene, FROM_SOUNDING, *options) for options in ((), ("--height", 1500), ("--angle", 50))
    )
    assert high["ground_height"] == 1500.0
    assert high["column_water_vapour"] < 0.7 * low["column_water_vapour"]
    transmittance = [found["bands"]["1"]["transmittance"] for found in (slant, low, high)]
    assert transmittance == sorted(transmittance)
    assert slant["view_zenith_angle"] == 50.0


def test_a_profile_that_begins_above_the_ground_is_extended_a_little(scene: InventedScene) -> None:
    found = record(scene, FROM_SOUNDING, "--height", 100)
    # 300 m further down at 6.5 K km-1.
    assert found["near_ground"]["temperature"] == pytest.approx(298.15 + 1.95, abs=0.01)


def test_an_airborne_sensor_sees_less_air(scene: InventedScene) -> None:
    airborne = FROM_SOUNDING + 'sensor_above = "ground"\nsensor_height = 800.0\n'
    from_space, from_aloft = (record(scene, air)["bands"]["1"] for air in (FROM_SOUNDING, airborne))
    assert from_aloft["transmittance"] > from_space["transmittance"] + 0.02
    assert from_aloft["sky_radiance"] == pytest.approx(from_space["sky_radiance"], rel=0.01)
    assert "sensor 800 m above the ground" in look(scene, airborne).out


def test_stated_uncertainty_counts(scene: InventedScene) -> None:
    stated = FROM_SOUNDING + "[atmosphere.uncertainty]\nwater_vapour = 0.1\nair_temperature = 1.0\n"
    once, twice = (record(scene, air)["bands"]["1"]["one_sigma"] for air in (FROM_SOUNDING, stated))
    for cause in ("water_vapour", "air_temperature"):
        change = [found[cause]["path_radiance"] for found in (once, twice)]
        assert change[1] == pytest.approx(2.0 * change[0], rel=0.05)
    # More water and more absorption are believed to shine more, which leaves less transmittance.
    assert once["water_vapour"]["transmittance"] < 0.0 < once["water_vapour"]["sky_flux"]


def test_an_analysis_is_looked_at_in_the_middle_of_the_scene(scene: InventedScene) -> None:
    found = record(scene, ANALYSIS)
    longitude, latitude = found["atmosphere"]["scene_centre"]
    # The invented analysis is linear: at 850 hPa it has 286 K at 8 E, 46 N, 06:00, and the shift here.
    expected = 286.0 + analysis_files.shift(longitude, latitude, 2.0 + 32.0 / 60.0)
    # The 850 hPa level lies at 1487 m and 2 m a unit of shift.
    height = 1487.35 + 2.0 * analysis_files.shift(longitude, latitude, 2.0 + 32.0 / 60.0)
    at_level = record(scene, ANALYSIS, "--height", f"{height:.2f}")["near_ground"]
    assert at_level["temperature"] == pytest.approx(expected, abs=0.02)
    assert at_level["pressure"] == pytest.approx(850.0, abs=0.1)


def test_the_spectrum_as_a_table(scene: InventedScene, tmp_path: Path) -> None:
    band = record(scene, FROM_SOUNDING, "--spectrum", tmp_path / "air.csv")["bands"]["1"]
    lines = [line for line in (tmp_path / "air.csv").read_text().splitlines() if not line.startswith("#")]
    rows = list(csv.DictReader(lines))
    wavelength = np.array([float(row["wavelength_um"]) for row in rows])
    assert 10.5 < wavelength.min() < 10.65
    assert 11.15 < wavelength.max() < 11.3
    assert wavelength * [float(row["wavenumber_cm-1"]) for row in rows] == pytest.approx(1e4, rel=1e-5)
    for column, value in (
        ("transmittance", band["transmittance_response_weighted_only"]),
        ("path_radiance", band["path_radiance"]),
        ("sky_radiance", band["sky_radiance"]),
        ("transmittance_of_water_vapour", band["transmittance_of_each_gas"]["water_vapour"]),
    ):
        assert np.mean([float(row[column]) for row in rows]) == pytest.approx(value, rel=0.02)


def test_the_picture(scene: InventedScene, tmp_path: Path) -> None:
    assert look(scene, FROM_SOUNDING, "--plot", tmp_path / "air.png").code == 0
    assert (tmp_path / "air.png").read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    unknown = look(scene, FROM_SOUNDING, "--plot", tmp_path / "air.xyz")
    assert (unknown.code, "known picture format" in unknown.err) == (2, True)
    nowhere = look(scene, FROM_SOUNDING, "--plot", tmp_path / "no" / "air.png")
    assert (nowhere.code, "cannot be written" in nowhere.err) == (3, True)


def test_pictures_need_matplotlib(
    scene: InventedScene, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    for module in ("matplotlib", "matplotlib.figure", "matplotlib.backends.backend_agg"):
        monkeypatch.setitem(sys.modules, module, None)  # as if it were not there
    finished = look(scene, FROM_SOUNDING, "--plot", tmp_path / "air.png")
    assert finished.code == 2
    assert "Install groundglow[plot]" in finished.err


@pytest.mark.parametrize(
    ("atmosphere", "options", "code", "said"),
    [
        (AIR, (), 2, "no profile to solve: the job's air is 'explicit'"),
        (FROM_SOUNDING, ("--band", "7"), 2, "no thermal band '7'"),
        (FROM_SOUNDING, ("--height", "9999"), 2, "'--height'"),
        (FROM_SOUNDING, ("--angle", "85"), 2, "'--angle'"),
        (FROM_SOUNDING, ("--height", "-200"), 3, "begins 600 m above the ground"),
        (FROM_SOUNDING.replace("flight", "nowhere"), (), 3, "there is no such file"),
        (FROM_SOUNDING, ("--spectrum", "/nowhere/at/all.csv"), 3, "cannot be written"),
        (ANALYSIS.replace("day", "nowhere"), (), 3, "there is no such file"),
        (ANALYSIS.replace("day", "elsewhere"), (), 3, "it covers 45.50 N to 47.00 N, 7.00 E to 9.00 E"),
        (ANALYSIS.replace("day", "later"), (), 3, "does not cover 2026-07-14 08:32 UTC"),
        (
            FROM_SOUNDING + 'sensor_above = "sea"\nsensor_height = 300.0\n', (), 3,
            "not above the ground",
        ),
    ],
)  # fmt: skip
def test_what_cannot_be_followed(
    scene: InventedScene, atmosphere: str, options: tuple[str, ...], code: int, said: str
) -> None:
    finished = look(scene, atmosphere, *options)
    assert finished.code == code
    assert said in finished.err
    assert finished.out == ""
    assert "Traceback" not in finished.err
