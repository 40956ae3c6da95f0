"""What a profile accepts, and what it does between and below its levels."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from groundglow.atmosphere.humidity import specific_humidity
from groundglow.atmosphere.profile import Profile, extended_down
from groundglow.atmosphere.structure import column_of_specific_humidity
from groundglow.errors import DomainError

HEIGHT = np.array([100.0, 500.0, 1500.0, 4000.0, 8000.0, 12000.0])
PRESSURE = np.array([1000.0, 955.0, 850.0, 620.0, 360.0, 195.0])
TEMPERATURE = np.array([295.0, 292.0, 285.0, 270.0, 243.0, 217.0])
WATER = np.array([15e3, 14e3, 9e3, 3e3, 400.0, 20.0])


def profile(**changes: Any) -> Profile:
    columns = {
        "height": HEIGHT,
        "pressure": PRESSURE,
        "temperature": TEMPERATURE,
        "gases": {"water_vapour": WATER},
    }
    return Profile(**{**columns, **changes})


def test_a_good_profile_is_kept_and_cannot_be_changed() -> None:
    made = profile()
    # By pressure instead of height, and by a coarser rule: q dp / g.
    by_pressure = column_of_specific_humidity(specific_humidity(WATER * PRESSURE / 1e6, PRESSURE), PRESSURE)
    assert made.column_water_vapour == pytest.approx(by_pressure, rel=0.08)
    with pytest.raises(ValueError, match="read-only"):
        made.temperature[0] = 300.0
    with pytest.raises(TypeError):
        made.gases["ozone"] = WATER  # type: ignore[index]


def test_between_levels_temperature_is_linear_and_the_rest_exponential() -> None:
    found = profile().at(np.array([100.0, 1000.0]))
    assert found.temperature[1] == pytest.approx(288.5)
    assert found.pressure[1] == pytest.approx(np.sqrt(955.0 * 850.0))
    assert found.water_vapour[1] == pytest.approx(np.sqrt(14e3 * 9e3))
    assert found.pressure[0] == pytest.approx(1000.0)


def test_ground_a_little_below_the_lowest_level_is_extrapolated() -> None:
    lower = extended_down(profile(), -200.0)
    # 6.5 K km-1 and the hypsometric equation (US Standard Atmosphere 1976).
    assert lower.temperature[0] == pytest.approx(295.0 + 0.3 * 6.5)
    assert lower.pressure[0] == pytest.approx(1000.0 * np.exp(9.80665 * 300.0 / (287.053 * 295.975)))
    assert lower.water_vapour[0] == 15e3
    assert "extrapolated 300 m" in lower.notes[-1]
    assert profile().at(np.array([-200.0, 50.0])).temperature[0] == lower.temperature[0]


def test_ground_far_below_the_lowest_level_is_refused() -> None:
    with pytest.raises(DomainError, match="begins 700 m above the ground at -600 m"):
        profile().at(np.array([-600.0, 0.0]))


def test_heights_above_the_top_are_refused() -> None:
    with pytest.raises(DomainError, match="Complete its top"):
        profile().at(np.array([1000.0, 13000.0]))


def without(values: np.ndarray, level: int, value: float) -> np.ndarray:
    changed = values.copy()
    changed[level] = value
    return changed


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"height": without(HEIGHT, 2, 500.0)}, "comes twice"),
        ({"height": HEIGHT[::-1]}, "out of order"),
        ({"pressure": without(PRESSURE, 2, 960.0)}, "pressure does not fall from 500 m"),
        ({"pressure": without(PRESSURE, 2, 955.0)}, "pressure does not fall"),
        ({"pressure": 100.0 * PRESSURE}, "divided by 100"),
        ({"temperature": TEMPERATURE - 273.15}, "look like degrees Celsius"),
        ({"temperature": without(TEMPERATURE, 1, 400.0)}, "do not lie between 150 and 340 K"),
        (
            {"temperature": without(TEMPERATURE, 1, np.nan)},
            "temperature of a profile is missing .* level 2 of 6",
        ),
        ({"gases": {"water_vapour": without(WATER, 3, np.nan)}}, "water_vapour of a profile is missing"),
        ({"gases": {"water_vapour": without(WATER, 3, -1.0)}}, "between 0 and 1e6 ppmv"),
        ({"gases": {"ozone": WATER}}, "needs the water vapour"),
        ({"height": HEIGHT[:4]}, "has shape"),
        ({"height": np.array([100.0, 500.0, 1500.0, 6000.0, 8000.0, 12000.0])}, "gap from 1500 to 6000 m"),
    ],
)
def test_nonsense_is_refused_by_name(changes: dict[str, Any], message: str) -> None:
    with pytest.raises(DomainError, match=message):
        profile(**changes)


def test_one_level_is_no_profile() -> None:
    with pytest.raises(DomainError, match="at least two levels"):
        Profile(HEIGHT[:1], PRESSURE[:1], TEMPERATURE[:1], {"water_vapour": WATER[:1]})
