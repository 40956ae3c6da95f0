"""A profile from nothing but the weather at the ground."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from groundglow.atmosphere.model_atmospheres import model_atmosphere
from groundglow.atmosphere.surface_weather import profile_of_surface_weather
from groundglow.errors import DomainError


def weather(**changes: Any) -> Any:
    values: dict[str, Any] = {
        "temperature": 293.15,
        "humidity": 50.0,
        "humidity_measure": "relative_humidity",
        "pressure": 960.0,
        "ground_height": 450.0,
    }
    return profile_of_surface_weather(model_atmosphere("midlatitude_summer"), **{**values, **changes})


def test_the_station_is_met() -> None:
    found = weather()
    assert found.height[0] == 450.0
    assert found.temperature[0] == pytest.approx(293.15)
    assert found.pressure[0] == pytest.approx(960.0)
    # Prata (1996): 46.5 e / T = 1.8500 cm at 20 deg C and 50 %.
    assert found.column_water_vapour == pytest.approx(18.500, abs=0.01)


def test_the_other_scaling() -> None:
    # Gueymard (1994): 1.8673 cm at a vapour pressure of 11.699 hPa.
    found = weather(scaling="gueymard", humidity=11.699, humidity_measure="vapour_pressure")
    assert found.column_water_vapour == pytest.approx(18.673, abs=0.01)


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"temperature": 20.0}, "degrees Celsius"),
        ({"pressure": 96000.0}, "Give it in hPa"),
        ({"humidity": 130.0}, "saturation"),
        ({"humidity": 300.0, "humidity_measure": "dew_point"}, "dew point is at most the temperature"),
        ({"humidity": np.nan}, "not between 0 and"),
        ({"scaling": "guess"}, "Choose prata or gueymard"),
    ],
)
def test_bad_weather_is_refused(changes: dict[str, Any], message: str) -> None:
    with pytest.raises(DomainError, match=message):
        weather(**changes)
