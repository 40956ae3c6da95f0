"""Soundings in CSV files: as people write them, and as they should not."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from groundglow.atmosphere import humidity
from groundglow.errors import ConfigError, DomainError, GroundglowError, InputError
from groundglow.scene.sounding_file import read_sounding

DEMO = Path(__file__).parents[2] / "data_demo" / "sounding.csv"

PRESSURE = (1000.0, 950.0, 850.0, 700.0, 500.0)
CELSIUS = (25.0, 21.0, 14.0, 6.0, -11.0)
DEW_POINT = (16.0, 14.0, 8.0, -8.0, -30.0)
# Hypsometric equation by hand, R = 287.05, g = 9.80665, virtual temperature
# T (1 + 0.608 q); then from geopotential to geometric; to a metre.
HEIGHT = (110.0, 558.0, 1509.0, 3125.0, 5798.0)

PLAIN = """\
pressure_hPa,height_m,temperature_degC,dew_point_degC
1000,110,25.0,16.0
950,558,21.0,14.0
850,1509,14.0,8.0
700,3125,6.0,-8.0
500,5798,-11.0,-30.0
"""


def written(folder: Path, text: str, *, encoding: str = "utf-8") -> Path:
    path = folder / "flight.csv"
    path.write_bytes(text.encode(encoding))
    return path


def table(folder: Path, **columns: tuple[float, ...] | tuple[str, ...]) -> Path:
    """A file with these columns; in their names ``__`` stands for a slash."""
    headers = ",".join(name.replace("__", "/") for name in columns)
    rows = [",".join(str(value) for value in row) for row in zip(*columns.values(), strict=True)]
    return written(folder, "\n".join([headers, *rows]) + "\n")


def refused(path: Path, **options: object) -> GroundglowError:
    with pytest.raises(GroundglowError) as caught:
        read_sounding(path, **options)  # type: ignore[arg-type]  # options of any test
    assert str(path) in str(caught.value)
    assert "\n" not in str(caught.value)
    return caught.value


def test_the_demo_sounding() -> None:
    profile = read_sounding(DEMO)
    assert profile.height[0] == 198.0
    assert profile.pressure[0] == 991.6
    assert profile.temperature[0] == pytest.approx(25.8 + 273.15)
    assert profile.height.size == 40
    assert profile.notes == ("sounding sounding.csv",)


def test_values_in_our_units(tmp_path: Path) -> None:
    profile = read_sounding(written(tmp_path, PLAIN))
    np.testing.assert_allclose(profile.pressure, PRESSURE)
    np.testing.assert_allclose(profile.height, HEIGHT)
    np.testing.assert_allclose(profile.temperature, np.array(CELSIUS) + 273.15)
    # WMO-No. 8, annex 4.B, at 16 degC: 6.112 exp(17.62 * 16 / (243.12 + 16)) = 18.14 hPa.
    assert profile.water_vapour[0] * 1000.0 / 1e6 == pytest.approx(18.14, abs=0.01)


@pytest.mark.parametrize(
    "text",
    [
        PLAIN.replace(",", ";"),
        PLAIN.replace(",", "\t"),
        PLAIN.replace(",", ", "),
        PLAIN.replace("\n", "\r\n"),
        "\ufeff" + PLAIN,
        "# flown by the weather service\n\n" + PLAIN.replace("850,", "# a layer of cloud\n850,"),
        PLAIN.replace("1000,110,25.0,16.0", "1000,110,25.0,16.0  # at the ground"),
        PLAIN.replace("pressure_hPa", "Pressure [hPa]").replace("dew_point_degC", "Dew point (°C)"),
        PLAIN.replace("pressure_hPa", '"pressure_mbar"'),
        PLAIN.replace("\n", ",\n"),
        "\n".join([PLAIN.splitlines()[0], *PLAIN.splitlines()[:0:-1]]),
    ],
    ids=[
        "semicolon", "tab", "blanks", "line ends", "byte-order mark", "comments", "comment in a line", "brackets",
        "quotes", "commas at the end", "upside down",
    ],
)  # fmt: skip
def test_ways_of_writing_the_same(tmp_path: Path, text: str) -> None:
    expected = read_sounding(written(tmp_path, PLAIN))
    found = read_sounding(written(tmp_path, text))
    np.testing.assert_array_equal(found.pressure, expected.pressure)
    np.testing.assert_array_equal(found.height, expected.height)
    np.testing.assert_array_equal(found.temperature, expected.temperature)
    np.testing.assert_array_equal(found.water_vapour, expected.water_vapour)


def test_every_humidity_and_unit_gives_the_same_profile(tmp_path: Path) -> None:
    pressure, kelvin = np.array(PRESSURE), np.array(CELSIUS) + 273.15
    vapour = humidity.vapour_pressure_of_dew_point(np.array(DEW_POINT) + 273.15)
    expected = read_sounding(written(tmp_path, PLAIN)).water_vapour
    measures = {
        "dew_point_K": np.array(DEW_POINT) + 273.15,
        "dew_point_degF": np.array(DEW_POINT) * 1.8 + 32.0,
        "relative_humidity_%": humidity.relative_humidity(vapour, kelvin),
        "relative_humidity_percent": humidity.relative_humidity(vapour, kelvin),
        "relative_humidity_1": humidity.relative_humidity(vapour, kelvin) / 100.0,
        "mixing_ratio_kg/kg": humidity.mixing_ratio(vapour, pressure),
        "mixing_ratio_g/kg": humidity.mixing_ratio(vapour, pressure) * 1000.0,
        "mixing_ratio_g_kg": humidity.mixing_ratio(vapour, pressure) * 1000.0,
        "specific_humidity_kg/kg": humidity.specific_humidity(vapour, pressure),
        "specific_humidity [g kg-1]": humidity.specific_humidity(vapour, pressure) * 1000.0,
        "vapour_pressure_Pa": vapour * 100.0,
        "water_vapour_ppmv": humidity.ppmv(vapour, pressure),
    }
    for header, values in measures.items():
        path = table(
            tmp_path, pressure_Pa=tuple(pressure * 100.0), height_km=tuple(np.array(HEIGHT) / 1000.0),
            temperature_K=tuple(kelvin), **{header: tuple(values)},
        )  # fmt: skip
        profile = read_sounding(path)
        np.testing.assert_allclose(profile.water_vapour, expected, rtol=1e-9, err_msg=header)
        np.testing.assert_allclose(profile.height, HEIGHT)


def test_heights_or_pressures_can_be_left_to_the_air(tmp_path: Path) -> None:
    no_height = table(tmp_path, pressure_hPa=PRESSURE, temperature_degC=CELSIUS, dew_point_degC=DEW_POINT)
    np.testing.assert_allclose(read_sounding(no_height, ground_height=110.0).height, HEIGHT, atol=1.0)
    no_pressure = table(tmp_path, height_m=HEIGHT, temperature_degC=CELSIUS, dew_point_degC=DEW_POINT)
    found = read_sounding(no_pressure, ground_pressure=1000.0).pressure
    np.testing.assert_allclose(found, PRESSURE, rtol=1e-3)


def test_geopotential_heights_become_geometric(tmp_path: Path) -> None:
    # US Standard Atmosphere 1976, table I: 10 km geopotential is 10 016 m geometric.
    path = table(
        tmp_path,
        geopotential_height_gpm=(0.0, 3000.0, 6000.0, 8000.0, 10000.0),
        pressure_hPa=(1013.25, 701.08, 471.81, 356.00, 264.36),
        temperature_K=(288.15, 268.65, 249.15, 236.15, 223.15),
        relative_humidity_percent=(50.0, 50.0, 40.0, 30.0, 20.0),
    )
    assert read_sounding(path).height[-1] == pytest.approx(10016.0, abs=1.0)


def test_ozone_is_taken_along_if_it_is_whole(tmp_path: Path) -> None:
    base = {
        "pressure_hPa": PRESSURE,
        "height_m": HEIGHT,
        "temperature_degC": CELSIUS,
        "dew_point_degC": DEW_POINT,
    }
    whole = read_sounding(table(tmp_path, **base, ozone_ppbv=(30.0, 31.0, 32.0, 40.0, 50.0)))
    np.testing.assert_allclose(whole.gases["ozone"], (0.030, 0.031, 0.032, 0.040, 0.050))
    # Mass to mole fraction with 28.9644 and 47.998 g mol-1: 1e-6 kg kg-1 is 0.6034 ppmv.
    mass = read_sounding(table(tmp_path, **base, **{"ozone_kg/kg": (1e-6,) * 5}))
    np.testing.assert_allclose(mass.gases["ozone"], 0.60345, rtol=1e-4)
    holed = read_sounding(table(tmp_path, **base, ozone_ppmv=("0.03", "", "0.03", "0.03", "0.03")))
    assert "ozone" not in holed.gases
    assert "ozone left out" in holed.notes[-1]


def test_unknown_columns_are_left_alone(tmp_path: Path) -> None:
    text = "\n".join(
        line + extra
        for line, extra in zip(
            PLAIN.splitlines(),
            [",wind_m/s,temperature_flag,remark", *[",calm,good,x"] * 5],
            strict=True,
        )
    )
    assert read_sounding(written(tmp_path, text)).height.size == 5


def test_a_files_own_headers(tmp_path: Path) -> None:
    path = table(tmp_path, p=PRESSURE, z=HEIGHT, t=CELSIUS, td=DEW_POINT, rh=(57.0, 64.0, 67.0, 36.0, 19.0))
    told = {"p": "pressure_hPa", "z": "height [m]", "t": "temperature_degC", "td": "dew_point_degC"}
    found = read_sounding(path, columns=told)
    np.testing.assert_array_equal(found.water_vapour, read_sounding(written(tmp_path, PLAIN)).water_vapour)


def test_what_is_told_wins_over_other_headers(tmp_path: Path) -> None:
    path = table(
        tmp_path, pressure_hPa=PRESSURE, height_m=HEIGHT, temperature_degC=CELSIUS, dew_point_degC=DEW_POINT,
        relative_humidity_percent=(99.0,) * 5,
    )  # fmt: skip
    assert "more than one column could be the humidity" in refused(path).what
    found = read_sounding(path, columns={"dew_point_degC": "dew_point_degC"})
    np.testing.assert_array_equal(found.water_vapour, read_sounding(written(tmp_path, PLAIN)).water_vapour)


@pytest.mark.parametrize("missing", ["", "-9999", "-9999.0", "NaN", "nan", "NA"])
def test_missing_values_leave_their_level_out(tmp_path: Path, missing: str) -> None:
    found = read_sounding(written(tmp_path, PLAIN.replace("850,1509,14.0,8.0", f"850,1509,{missing},8.0")))
    np.testing.assert_array_equal(found.pressure, (1000.0, 950.0, 700.0, 500.0))
    assert found.notes[-1] == "1 of 5 levels left out, as values are missing there"


def test_humidity_that_ends_aloft_ends_the_profile(tmp_path: Path) -> None:
    found = read_sounding(written(tmp_path, PLAIN.replace("-11.0,-30.0", "-11.0,")))
    assert found.pressure[-1] == 700.0


def test_missing_heights_are_computed(tmp_path: Path) -> None:
    # Significant levels often come without height (common practice).
    found = read_sounding(written(tmp_path, PLAIN.replace("950,558,", "950,,").replace("850,1509,", "850,,")))
    np.testing.assert_allclose(found.height, HEIGHT, atol=1.0)
    assert "heights computed" in found.notes[-1]


@pytest.mark.parametrize(
    ("change", "line", "said"),
    [
        (("850,1509,14.0", "850,1509,warm"), "line 4", "'warm' in column 'temperature_degC' is not a number"),
        (("850,1509,14.0", "850,1509,inf"), "line 4", "not a finite number"),
        (("850,1509,14.0,8.0", "850,1509,14.0"), "line 4", "has 3 columns, the headers 4"),
        (("850,1509,14.0,8.0", "850,1509,14.0,8.0,9.0"), "line 4", "has 5 columns, the headers 4"),
        (("850,1509,14.0,8.0", '850,1509,"14.0,8.0'), "line 4", "cannot be cut into columns"),
        (("850,1509", "950,1509"), "lines 3 and 4", "the level at 950 hPa comes twice"),
        (("850,1509", "850,355"), "lines 3 and 4", "the pressure does not fall with height"),
        (("temperature_degC", "temperature_degX"), "line 1", "unknown unit 'degX' (known: K, degC, degF)"),
        (("temperature_degC", "temperature"), "line 1", "names no unit"),
        (("temperature_degC", "T"), "line 1", "needs temperature"),
        (("dew_point_degC", "moisture"), "line 1", "needs humidity"),
        (("pressure_hPa,height_m", "p,z"), "line 1", "needs pressure or height"),
        (("height_m", "temperature_K"), "line 1", "more than one column could be the temperature"),
    ],
)
def test_a_bad_file_is_told_with_its_line(
    tmp_path: Path, change: tuple[str, str], line: str, said: str
) -> None:
    error = refused(written(tmp_path, PLAIN.replace(*change)))
    assert isinstance(error, InputError)
    assert line in str(error)
    assert said in str(error)


def test_decimal_commas_are_named(tmp_path: Path) -> None:
    path = written(tmp_path, PLAIN.replace(",", ";").replace("21.0", "21,0"))
    assert "decimal point" in str(refused(path))


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (("temperature_degC", "temperature_K"), "look like degrees Celsius"),
        (("dew_point_degC", "dew_point_K"), "look like degrees Celsius"),
        (("-8.0", "7.0"), "lies above the temperature"),
        (("dew_point_degC", "relative_humidity_%"), "must not be negative"),
        (("850,1509", "850,15090"), "does not fall with height"),
    ],
)
def test_what_cannot_be_meant(tmp_path: Path, change: tuple[str, str], said: str) -> None:
    assert said in str(refused(written(tmp_path, PLAIN.replace(*change))))


def test_other_units_than_named(tmp_path: Path) -> None:
    kelvin = tuple(value + 273.15 for value in CELSIUS)
    base = {"pressure_hPa": PRESSURE, "height_m": HEIGHT}
    dew = {"dew_point_degC": DEW_POINT}
    cases: dict[str, dict[str, tuple[float, ...] | tuple[str, ...]]] = {
        "look like kelvin": {**base, "temperature_degC": kelvin, **dew},
        "look like fractions": {**base, "temperature_degC": CELSIUS, "relative_humidity_%": (0.5,) * 5},
        "look like percent": {**base, "temperature_degC": CELSIUS, "relative_humidity_1": (50.0,) * 5},
        "g kg-1 must be divided": {**base, "temperature_degC": CELSIUS, "mixing_ratio_kg/kg": (9.0,) * 5},
        "reach 100 hPa only": {
            **base, "pressure_hPa": tuple(p / 10.0 for p in PRESSURE), "temperature_degC": CELSIUS, **dew,
        },
        "in Pa must be divided": {
            **base, "pressure_hPa": tuple(p * 100.0 for p in PRESSURE), "temperature_degC": CELSIUS, **dew,
        },
        "heights rise by": {
            "pressure_hPa": PRESSURE[:3], "height_m": tuple(h / 0.3048 for h in HEIGHT[:3]),
            "temperature_degC": CELSIUS[:3], "dew_point_degC": DEW_POINT[:3],
        },
        "hPa are usual": {
            **base, "height_m": tuple(h + 3000.0 for h in HEIGHT), "temperature_degC": CELSIUS, **dew,
        },
    }  # fmt: skip
    for said, columns in cases.items():
        assert said in str(refused(table(tmp_path, **columns))), said


def test_gaps_are_refused(tmp_path: Path) -> None:
    path = written(tmp_path, PLAIN.replace("850,1509,14.0,8.0\n700,3125,6.0,-8.0\n", ""))
    error = refused(path)
    assert isinstance(error, DomainError)
    assert "gap from 558 to 5798 m" in error.what


def test_too_few_levels(tmp_path: Path) -> None:
    assert "complete levels: 1 of 1" in refused(written(tmp_path, "\n".join(PLAIN.splitlines()[:2]))).what
    assert "holds no values" in refused(written(tmp_path, PLAIN.splitlines()[0])).what
    empty = table(
        tmp_path, pressure_hPa=PRESSURE, height_m=HEIGHT, temperature_degC=CELSIUS,
        dew_point_degC=("", "-9999", "", "nan", ""),
    )  # fmt: skip
    assert "'dew_point_degC' holds no values" in refused(empty).what


def test_ground_values_that_are_needed(tmp_path: Path) -> None:
    no_height = table(tmp_path, pressure_hPa=PRESSURE, temperature_degC=CELSIUS, dew_point_degC=DEW_POINT)
    assert "ground_height" in str(refused(no_height))
    no_pressure = table(tmp_path, height_m=HEIGHT, temperature_degC=CELSIUS, dew_point_degC=DEW_POINT)
    assert "ground_pressure" in str(refused(no_pressure))


def test_told_columns_that_do_not_fit(tmp_path: Path) -> None:
    path = written(tmp_path, PLAIN)
    for told, said in (
        ({"pressure_hpa": "pressure_hPa"}, "did you mean 'pressure_hPa'?"),
        ({"height_m": "depth_m"}, "no known quantity"),
        ({"height_m": "height_yards"}, "unknown unit 'yards'"),
        ({"height_m": "height"}, "names no unit"),
        ({"height_m": "height_m", "pressure_hPa": "height_m"}, "gives the height twice"),
    ):
        error = refused(path, columns=told)
        assert isinstance(error, ConfigError)
        assert said in str(error)
    twice = written(tmp_path, PLAIN.replace("height_m", "pressure_hPa"))
    assert "two columns are headed" in str(refused(twice, columns={"pressure_hPa": "pressure_hPa"}))


def test_files_that_are_no_tables(tmp_path: Path) -> None:
    assert "no such file" in refused(tmp_path / "nowhere.csv").what
    assert "cannot be read" in refused(tmp_path).what
    assert "UTF-8" in refused(written(tmp_path, PLAIN + "# Türe", encoding="latin-1")).what
    assert "empty" in refused(written(tmp_path, "# nothing\n\n")).what
    assert "no table" in refused(written(tmp_path, "pressure_hPa\n1000\n")).what
