"""Soundings as they are written, good and bad."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from groundglow.atmosphere import humidity
from groundglow.atmosphere.sounding import profile_of_sounding
from groundglow.atmosphere.structure import standard_pressure
from groundglow.errors import DomainError

PRESSURE = np.array([1000.0, 950.0, 850.0, 700.0, 500.0, 300.0])
TEMPERATURE = np.array([298.0, 294.0, 287.0, 279.0, 262.0, 234.0])
RELATIVE = np.array([60.0, 65.0, 70.0, 40.0, 30.0, 20.0])
VAPOUR = humidity.vapour_pressure_of_relative_humidity(RELATIVE, TEMPERATURE)


def sounding(**changes: Any) -> Any:
    columns: dict[str, Any] = {
        "pressure": PRESSURE,
        "temperature": TEMPERATURE,
        "humidity": RELATIVE,
        "humidity_measure": "relative_humidity",
        "ground_height": 110.0,
    }
    return profile_of_sounding(**{**columns, **changes})


def test_every_measure_of_humidity_gives_the_same_profile() -> None:
    expected = sounding().water_vapour
    measures = {
        "dew_point": humidity.dew_point(VAPOUR),
        "mixing_ratio": humidity.mixing_ratio(VAPOUR, PRESSURE),
        "specific_humidity": humidity.specific_humidity(VAPOUR, PRESSURE),
        "ppmv": humidity.ppmv(VAPOUR, PRESSURE),
        "vapour_pressure": VAPOUR,
    }
    for measure, values in measures.items():
        found = sounding(humidity=values, humidity_measure=measure).water_vapour
        np.testing.assert_allclose(found, expected, rtol=1e-9)


def test_heights_follow_from_pressures() -> None:
    # 1000 to 500 hPa at a mean near 282 K is about 5.7 km (hypsometric equation, common practice).
    found = sounding()
    assert found.height[0] == pytest.approx(110.0)
    assert found.height[4] - found.height[0] == pytest.approx(5720.0, abs=60.0)


def test_pressures_follow_from_heights() -> None:
    whole = sounding()
    found = sounding(pressure=None, height=whole.height, ground_pressure=1000.0)
    np.testing.assert_allclose(found.pressure, PRESSURE, rtol=1e-4)


def test_upside_down_is_turned_over() -> None:
    turned = sounding(pressure=PRESSURE[::-1], temperature=TEMPERATURE[::-1], humidity=RELATIVE[::-1])
    np.testing.assert_array_equal(turned.temperature, sounding().temperature)


def test_humidity_that_ends_aloft_ends_the_profile() -> None:
    silent = RELATIVE.copy()
    silent[4:] = np.nan
    found = sounding(humidity=silent)
    assert found.pressure[-1] == 700.0


def test_ozone_is_taken_along() -> None:
    found = sounding(ozone=np.full(6, 0.05))
    assert (found.gases["ozone"] == 0.05).all()


def changed(values: np.ndarray, level: int, value: float) -> np.ndarray:
    result = np.array(values, dtype=float)
    result[level] = value
    return result


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"temperature": TEMPERATURE - 273.15}, "look like degrees Celsius"),
        ({"temperature": changed(TEMPERATURE, 2, np.nan)}, "temperature is missing at 1 of 6 levels"),
        ({"humidity": changed(RELATIVE, 2, np.nan)}, "humidity is missing at 1 of 6"),
        ({"humidity": np.full(6, np.nan)}, "fewer than two levels"),
        ({"humidity": RELATIVE / 100.0}, "look like fractions of one"),
        ({"humidity": changed(RELATIVE, 0, 130.0)}, "130 % is above 105"),
        ({"humidity": changed(RELATIVE, 0, -3.0)}, "must not be negative"),
        (
            {"humidity": TEMPERATURE + 1.0, "humidity_measure": "dew_point"},
            "dew point 299.00 K lies above the temperature 298.00 K at level 1",
        ),
        ({"humidity": TEMPERATURE - 275.0, "humidity_measure": "dew_point"}, "look like degrees Celsius"),
        ({"humidity": RELATIVE / 5.0, "humidity_measure": "mixing_ratio"}, "divided by 1000"),
        ({"pressure": changed(PRESSURE, 1, 850.0)}, "pressure 850 hPa comes twice"),
        ({"pressure": 100.0 * PRESSURE}, "divided by 100"),
        ({"pressure": changed(PRESSURE, 1, np.nan)}, "pressure is missing"),
        ({"pressure": None}, "needs pressure or height"),
        ({"ground_height": None}, "needs the height of its lowest level"),
        ({"pressure": PRESSURE[:5]}, "pressure has 5 values"),
        ({"humidity_measure": "wet_bulb"}, "no measure of humidity"),
        (
            {"pressure": None, "height": 100.0 + 7000.0 * np.log(1000.0 / PRESSURE)},
            "needs the pressure of its lowest level",
        ),
        (
            {"height": np.array([110.0, 520.0, 1400.0, 1300.0, 5600.0, 9000.0])},
            "out of order",
        ),
        ({"pressure": changed(PRESSURE, 3, 400.0)}, "gap from"),
    ],
)
def test_bad_soundings_are_refused_with_a_hint(changes: dict[str, Any], message: str) -> None:
    with pytest.raises(DomainError, match=message):
        sounding(**changes)


def test_one_level_is_no_sounding() -> None:
    with pytest.raises(DomainError, match="at least two levels"):
        profile_of_sounding(
            temperature=[290.0], humidity=[50.0], humidity_measure="relative_humidity", pressure=[1000.0]
        )


def test_a_mast_of_a_few_levels_is_a_profile() -> None:
    height = np.array([2.0, 10.0, 40.0, 120.0])
    found = profile_of_sounding(
        temperature=[291.0, 290.8, 290.4, 289.8],
        humidity=[70.0, 68.0, 66.0, 64.0],
        humidity_measure="relative_humidity",
        height=height,
        pressure=standard_pressure(height),
        source="mast",
    )
    assert found.notes == ("mast",)
