"""Gridded analyses: the air anywhere between grid points and times, and files that cannot give it."""

from __future__ import annotations

import datetime
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

import analysis_files as invented
from analysis_files import dataset, written
from groundglow.atmosphere import humidity
from groundglow.atmosphere.profile import Profile
from groundglow.errors import DomainError, GroundglowError, InputError
from groundglow.scene.analysis_file import Analysis

WHEN = invented.START + datetime.timedelta(hours=4, minutes=32)
PLACE = (8.13, 46.21)
KEPT = invented.PRESSURE < invented.SURFACE_PRESSURE


def air(
    files: Path | Sequence[Path],
    points: Sequence[tuple[float, float]] = (PLACE,),
    when: datetime.datetime = WHEN,
) -> list[Profile]:
    with Analysis.open([files] if isinstance(files, Path) else files) as analysis:
        return analysis.profiles_at(points, when)


def is_as_invented(profile: Profile, place: tuple[float, float] = PLACE, hours: float = 4 + 32 / 60) -> None:
    s = invented.shift(*place, hours)
    np.testing.assert_allclose(profile.pressure, invented.PRESSURE[KEPT])
    np.testing.assert_allclose(profile.temperature, invented.TEMPERATURE[KEPT] + s, atol=1e-3)
    q = invented.SPECIFIC_HUMIDITY[KEPT] * (1.0 + 0.02 * s)
    # Mole fraction q / (0.622 + 0.378 q); it is nearly, not wholly, linear in q.
    np.testing.assert_allclose(profile.water_vapour, 1e6 * q / (0.622 + 0.378 * q), rtol=1e-5)
    geopotential_height = invented.GEOPOTENTIAL_HEIGHT[KEPT] + 2.0 * s
    # US Standard Atmosphere 1976: z = R H / (R - H), R = 6356.766 km.
    geometric = 6356766.0 * geopotential_height / (6356766.0 - geopotential_height)
    np.testing.assert_allclose(profile.height, geometric, atol=0.05)
    np.testing.assert_allclose(
        profile.gases["ozone"], 1e6 * 28.9644 / 47.9982 * invented.OZONE[KEPT] * (1.0 + 0.01 * s), rtol=1e-5
    )


@pytest.mark.parametrize("classic", [False, True], ids=["netCDF 4", "netCDF 3"])
@pytest.mark.parametrize("names", [invented.SHORT, invented.CF], ids=["short names", "CF names"])
def test_air_between_grid_points_and_times(tmp_path: Path, names: Any, classic: bool) -> None:
    profile = air(written(tmp_path / "day.nc", dataset(names=names), classic=classic))[0]
    is_as_invented(profile)
    assert profile.notes == ("analysis day.nc at 2026-07-14 10:32 UTC",)


def test_stored_points_and_times_come_back_unchanged(tmp_path: Path) -> None:
    path = written(tmp_path / "day.nc", dataset())
    for hours in invented.HOURS:
        for place in ((7.0, 45.5), (9.0, 47.0), (8.5, 46.0)):
            is_as_invented(
                air(path, [place], invented.START + datetime.timedelta(hours=hours))[0], place, hours
            )


def test_every_point_in_its_order(tmp_path: Path) -> None:
    places = [(8.9, 45.6), (7.1, 46.9), (8.0, 46.0)]
    for place, profile in zip(places, air(written(tmp_path / "day.nc", dataset()), places), strict=True):
        is_as_invented(profile, place)


def test_the_offset_of_the_time_counts(tmp_path: Path) -> None:
    path = written(tmp_path / "day.nc", dataset())
    local = WHEN.astimezone(datetime.timezone(datetime.timedelta(hours=2)))
    np.testing.assert_array_equal(air(path, when=local)[0].temperature, air(path)[0].temperature)


@pytest.mark.parametrize(
    ("longitude", "turn", "place"),
    [
        (np.arange(0.0, 360.0, 30.0), 0.0, 8.13),
        (np.arange(170.0, 191.0, 5.0), 0.0, 178.2),
        (np.arange(170.0, 191.0, 5.0), 0.0, -178.2),
        (np.array([170.0, 175.0, -180.0, -175.0, -170.0]), 1e-9, -178.2),
        (np.array([-180.0, -175.0, -170.0, 170.0, 175.0]), 1e-9, 178.2),
        (np.array([350.0, 355.0, 0.0, 5.0, 10.0]) - 360.0 * np.array([1, 1, 0, 0, 0]), 0.0, -3.0),
        (np.array([-10.0, -5.0, 0.0, 5.0, 10.0]), 0.0, 357.0),
    ],
    ids=[
        "whole globe", "past 180", "past 180, west", "jump at 180", "sorted over 180", "across 0", "0 to 360",
    ],
)  # fmt: skip
def test_longitudes_of_every_turn(tmp_path: Path, longitude: Any, turn: float, place: float) -> None:
    path = written(tmp_path / "day.nc", dataset(longitude=longitude, turn=turn))
    # Where the invented air is continuous: around 180, or around 0.
    unrolled = place + 360.0 if place < 0.0 and longitude.max() > 100.0 else place
    unrolled = unrolled - 360.0 if place > 300.0 else unrolled
    is_as_invented(air(path, [(place, 46.21)])[0], (unrolled, 46.21))


def test_a_grid_that_closes_has_no_edge(tmp_path: Path) -> None:
    # Between 330 E and 0 E the invented air jumps by its whole range; half way is the mean of both.
    longitude = np.arange(0.0, 360.0, 30.0)
    path = written(tmp_path / "day.nc", dataset(longitude=longitude))
    expected = invented.TEMPERATURE[KEPT] + invented.shift(165.0, 46.21, 4 + 32 / 60)
    for place in (345.0, -15.0):
        np.testing.assert_allclose(air(path, [(place, 46.21)])[0].temperature, expected)
    # The first meridian stored at both ends is the same grid.
    both = dataset(longitude=np.append(longitude, 0.0)).assign_coords(longitude=np.append(longitude, 360.0))
    found = air(written(tmp_path / "both.nc", both), [(345.0, 46.21)])[0]
    np.testing.assert_allclose(found.temperature, expected)


def test_latitudes_may_rise(tmp_path: Path) -> None:
    is_as_invented(air(written(tmp_path / "day.nc", dataset(latitude=(45.5, 46.0, 46.5, 47.0))))[0])


def test_levels_may_rise_or_fall(tmp_path: Path) -> None:
    is_as_invented(air(written(tmp_path / "day.nc", dataset().isel(level=slice(None, None, -1))))[0])


def test_levels_in_pascal(tmp_path: Path) -> None:
    content = dataset()
    content = content.assign_coords(level=("level", invented.PRESSURE * 100.0, {"units": "Pa"}))
    is_as_invented(air(written(tmp_path / "day.nc", content.rename(level="plev")))[0])


def test_files_by_time_and_by_variable(tmp_path: Path) -> None:
    whole = dataset()
    by_time = [written(tmp_path / f"{i}.nc", whole.isel(time=[i])) for i in (2, 0, 1)]
    profile = air(by_time)[0]
    is_as_invented(profile)
    assert profile.notes == ("analysis 2.nc and 2 more at 2026-07-14 10:32 UTC",)
    is_as_invented(air([written(tmp_path / f"{name}.nc", whole[[name]]) for name in whole.data_vars])[0])


def test_a_file_with_one_time_without_a_dimension(tmp_path: Path) -> None:
    first = written(tmp_path / "1.nc", dataset().isel(time=1))
    second = written(tmp_path / "2.nc", dataset().isel(time=2))
    is_as_invented(air([first, second])[0])


def test_valid_time_goes_before_the_time_of_the_start(tmp_path: Path) -> None:
    # Forecast files name when the forecast began ``time`` and what it holds for ``valid_time``.
    content = dataset().rename(time="valid_time")
    content = content.assign_coords(time=np.datetime64("2026-07-13T00:00:00", "ns"), number=0)
    is_as_invented(air(written(tmp_path / "day.nc", content))[0])


def test_a_dimension_of_one_is_passed_over(tmp_path: Path) -> None:
    is_as_invented(air(written(tmp_path / "day.nc", dataset().expand_dims(number=[0], axis=1)))[0])


def test_packed_numbers_are_unpacked(tmp_path: Path) -> None:
    path = tmp_path / "day.nc"
    dataset().to_netcdf(
        path,
        engine="h5netcdf",
        encoding={"t": {"dtype": "int16", "scale_factor": 0.01, "add_offset": 260.0, "_FillValue": -32767}},
    )
    s = invented.shift(*PLACE, 4 + 32 / 60)
    np.testing.assert_allclose(air(path)[0].temperature, invented.TEMPERATURE[KEPT] + s, atol=0.006)


@pytest.mark.parametrize(("unit", "factor"), [("%", 1.0), ("1", 0.01)])
def test_relative_humidity_gives_the_same_water(tmp_path: Path, unit: str, factor: float) -> None:
    content = dataset()
    pressure = content["level"]
    vapour = humidity.vapour_pressure_of_specific_humidity(
        content["q"].to_numpy(), pressure.to_numpy()[:, None, None]
    )
    relative = factor * humidity.relative_humidity(vapour, content["t"].to_numpy())
    content["r"] = (content["q"].dims, relative, {"units": unit})
    expected = air(written(tmp_path / "q.nc", dataset()))[0].water_vapour
    found = air(written(tmp_path / "r.nc", content.drop_vars("q")))[0].water_vapour
    np.testing.assert_allclose(found, expected, rtol=1e-3)


def test_noise_below_zero_and_above_saturation_is_cut(tmp_path: Path) -> None:
    content = dataset()
    content["q"][:, 7] = -2e-6
    assert 0.0 < air(written(tmp_path / "q.nc", content))[0].water_vapour[-1] < 1e-3
    content["r"] = (content["q"].dims, np.full(content["q"].shape, 112.0), {"units": "%"})
    profile = air(written(tmp_path / "r.nc", content.drop_vars("q")))[0]
    saturated = humidity.saturation_vapour_pressure(profile.temperature) / profile.pressure * 1e6
    np.testing.assert_allclose(profile.water_vapour, saturated, rtol=2e-3)


def test_levels_below_the_ground_are_dropped(tmp_path: Path) -> None:
    content = dataset()
    content["sp"][...] = 84000.0
    assert air(written(tmp_path / "high.nc", content))[0].pressure[0] == 700.0
    assert air(written(tmp_path / "unknown.nc", content.drop_vars("sp")))[0].pressure[0] == 1000.0
    holed = dataset().drop_vars("sp")
    holed["t"][:, :2] = np.nan
    assert air(written(tmp_path / "holed.nc", holed))[0].pressure[0] == 850.0


def test_a_missing_corner_counts_only_where_it_has_a_share(tmp_path: Path) -> None:
    content = dataset().drop_vars("sp")
    content["t"].loc[{"level": 1000.0, "latitude": 46.5, "longitude": 8.5}] = np.nan
    path = written(tmp_path / "day.nc", content)
    on, between = air(path, [(8.0, 46.0), (8.1, 46.1)])
    assert on.pressure[0] == 1000.0
    assert between.pressure[0] == 925.0


def test_humidity_on_fewer_levels_ends_the_profile(tmp_path: Path) -> None:
    content = dataset()
    few = content[["q"]].isel(level=slice(0, 6))
    files = [
        written(tmp_path / "t.nc", content.drop_vars("q")),
        written(tmp_path / "q.nc", few),
    ]
    profile = air(files)[0]
    assert profile.pressure[-1] == 300.0


def test_spacing_and_coverage(tmp_path: Path) -> None:
    with Analysis.open([written(tmp_path / "day.nc", dataset())]) as analysis:
        assert analysis.spacing == pytest.approx(0.5)
        assert analysis.times.size == 3


def test_surface_variables_of_the_same_name_are_not_taken(tmp_path: Path) -> None:
    content = dataset()
    attributes = {"standard_name": "air_temperature", "units": "K"}
    content["t2m"] = (content["sp"].dims, np.full(content["sp"].shape, 301.0), attributes)
    content["u"] = content["t"].assign_attrs(units="m s**-1")
    is_as_invented(air(written(tmp_path / "day.nc", content))[0])


def refused(files: Path | Sequence[Path], **options: Any) -> GroundglowError:
    with pytest.raises(GroundglowError) as caught:
        air(files, **options)
    paths = [files] if isinstance(files, Path) else files
    assert any(path.name in str(caught.value) for path in paths)
    assert "\n" not in str(caught.value)
    return caught.value


@pytest.mark.parametrize("place", [(6.9, 46.0), (9.1, 46.0), (8.0, 47.1), (8.0, 45.4), (188.0, 46.0)])
def test_places_outside_are_refused(tmp_path: Path, place: tuple[float, float]) -> None:
    error = refused(written(tmp_path / "day.nc", dataset()), points=[(8.0, 46.0), place])
    assert "does not cover" in error.what
    assert "it covers 45.50 N to 47.00 N, 7.00 E to 9.00 E" in error.what


@pytest.mark.parametrize("hours", [-0.1, 6.1])
def test_times_outside_are_refused(tmp_path: Path, hours: float) -> None:
    when = invented.START + datetime.timedelta(hours=hours)
    error = refused(written(tmp_path / "day.nc", dataset()), when=when)
    assert "it covers from 2026-07-14 06:00 UTC to 2026-07-14 12:00 UTC" in error.what


def test_times_too_far_apart_are_refused(tmp_path: Path) -> None:
    error = refused(written(tmp_path / "day.nc", dataset(hours=(0.0, 18.0))))
    assert "too far apart" in error.what
    assert air(written(tmp_path / "near.nc", dataset(hours=(0.0, 12.0))))[0].height.size > 5


def test_a_time_without_offset_is_refused(tmp_path: Path) -> None:
    error = refused(written(tmp_path / "day.nc", dataset()), when=WHEN.replace(tzinfo=None))
    assert "no offset from UTC" in error.what


def test_all_missing_variables_are_listed(tmp_path: Path) -> None:
    error = refused(written(tmp_path / "day.nc", dataset()[["o3", "sp"]]))
    for part in (
        "air_temperature",
        "geopotential_height",
        "specific_humidity",
        "relative_humidity",
        "gh",
        "rh",
    ):
        assert part in error.what
    only = refused(written(tmp_path / "few.nc", dataset().drop_vars("z")))
    assert "geopotential" in only.what
    assert "temperature (" not in only.what
    parted = [written(tmp_path / "1.nc", dataset()[["t", "q"]].isel(time=[0]))]
    parted.append(written(tmp_path / "2.nc", dataset()[["z"]].isel(time=[1])))
    assert "no time with all variables" in refused(parted).what


@pytest.mark.parametrize(
    ("variable", "unit", "said"),
    [
        ("t", "furlong", "has the unknown unit 'furlong' (known: K, degC, degF)"),
        ("z", "furlong", "unknown unit 'furlong'"),
        ("q", None, "names no unit"),
        ("t", "degC", "temperatures of"),
        ("q", "g kg**-1", None),
        ("sp", "inHg", "unknown unit 'inHg'"),
        ("level", "1", "no pressures"),
    ],
)
def test_units(tmp_path: Path, variable: str, unit: str | None, said: str | None) -> None:
    content = dataset()
    if unit is None:
        del content[variable].attrs["units"]
    else:
        content[variable].attrs["units"] = unit
    path = written(tmp_path / "day.nc", content)
    if said is None:
        assert air(path)[0].water_vapour[0] < 20.0
    else:
        assert said in str(refused(path))


def test_values_that_the_unit_cannot_mean(tmp_path: Path) -> None:
    content = dataset()
    content["q"] = content["q"] * 1000.0
    content["q"].attrs["units"] = "kg kg**-1"
    assert "no specific humidity in the unit stated" in str(refused(written(tmp_path / "q.nc", content)))
    content["r"] = (content["q"].dims, np.full(content["q"].shape, 0.6), {"units": "%"})
    assert "look like fractions" in str(refused(written(tmp_path / "r.nc", content.drop_vars("q"))))
    celsius = dataset()
    celsius["t"] = (celsius["t"] - 273.15).assign_attrs(units="K")
    assert "look like degrees Celsius" in str(refused(written(tmp_path / "t.nc", celsius)))


def test_levels_that_make_no_profile(tmp_path: Path) -> None:
    error = refused(written(tmp_path / "day.nc", dataset().isel(level=[0, 1, 4, 5, 6, 7])))
    assert isinstance(error, DomainError)
    assert "gap" in error.what
    assert "longitude 8.130, latitude 46.210" in str(error)
    holed = dataset()
    holed["t"][:, 4] = np.nan
    assert "missing at 1" in refused(written(tmp_path / "holed.nc", holed)).what
    buried = dataset()
    buried["sp"][...] = 9000.0
    assert "two levels" in refused(written(tmp_path / "buried.nc", buried)).what


def changed_axes() -> dict[str, tuple[xr.Dataset, str]]:
    members = dataset().expand_dims(number=[0, 1]).copy()
    steps = dataset().expand_dims(step=[0, 6])
    steps = steps.assign_coords(valid_time=(("step", "time"), np.stack([steps["time"].to_numpy()] * 2)))
    curved = dataset().rename(latitude="y", longitude="x").drop_vars(["y", "x"])
    timeless = dataset().isel(time=0).drop_vars("time")
    numbered = dataset().assign_coords(time=[0.0, 3.0, 6.0])
    bare = dataset().drop_vars("level")
    twice = dataset().assign(t_again=dataset()["t"].assign_attrs(standard_name="air_temperature"))
    return {
        "members": (members, "has 2 values along 'number'"),
        "steps": (steps, "its times run along"),
        "curved": (curved, "no axis of latitude"),
        "timeless": (timeless, "has no time"),
        "numbered": (numbered, "are no dates"),
        "bare": (bare, "the levels 'level' have no values"),
        "twice": (twice, "two variables could be the temperature"),
        "column": (dataset(longitude=(8.0,)), "1 longitudes"),
        "doubled": (dataset(latitude=(47.0, 46.0, 46.0)), "latitude or longitude twice"),
        "poles": (dataset(latitude=(95.0, 46.0, 45.0)), "not on the globe"),
    }


@pytest.mark.parametrize("case", sorted(changed_axes()))
def test_axes_that_are_not_understood(tmp_path: Path, case: str) -> None:
    content, said = changed_axes()[case]
    assert said in str(refused(written(tmp_path / "day.nc", content)))


def test_files_that_do_not_fit_together(tmp_path: Path) -> None:
    first = written(tmp_path / "1.nc", dataset().isel(time=[0]))
    elsewhere = written(tmp_path / "2.nc", dataset(latitude=(47.5, 47.0, 46.5, 46.0)).isel(time=[2]))
    assert "latitudes differ" in str(refused([first, elsewhere]))
    other_levels = written(tmp_path / "3.nc", dataset().isel(time=[2], level=slice(1, None)))
    assert "levels differ from time to time" in str(refused([first, other_levels]))


def test_files_that_are_no_analyses(tmp_path: Path) -> None:
    assert "no such file" in refused(tmp_path / "nowhere.nc").what
    assert "cannot be read" in refused(tmp_path).what
    text = tmp_path / "text.nc"
    text.write_text("time,level\n")
    assert "neither NetCDF nor GRIB" in refused(text).what
    for classic in (False, True):
        whole = written(tmp_path / "whole.nc", dataset(), classic=classic).read_bytes()
        for share in (0.03, 0.5):
            broken = tmp_path / "broken.nc"
            broken.write_bytes(whole[: int(len(whole) * share)])
            error = refused(broken)
            assert isinstance(error, InputError)
            assert "damaged" in error.what or "cannot be read" in error.what


@pytest.mark.parametrize(
    ("module", "start", "extra"), [("cfgrib", b"GRIB", "grib"), ("h5netcdf", b"\x89HDF\r\n\x1a\n", "netcdf")]
)
def test_libraries_that_are_not_installed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, module: str, start: bytes, extra: str
) -> None:
    monkeypatch.setitem(sys.modules, module, None)  # as if it were not there
    path = tmp_path / "analysis"
    path.write_bytes(start + bytes(100))
    error = refused(path)
    assert module in error.what
    assert error.remedy == f"Install groundglow[{extra}]"
