"""Published clear-sky formulas against worked values."""

from __future__ import annotations

import pytest

from groundglow.atmosphere import clear_sky

# 20 deg C and 50 % relative humidity by WMO-No. 8.
TEMPERATURE, VAPOUR = 293.15, 11.66298


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        # Worked from the printed coefficients: Brunt (1932) 0.52, 0.065; Brutsaert (1975) 1.24; Prata (1996) 46.5.
        ("brunt", 0.74198),
        ("brutsaert", 0.78231),
        ("prata", 0.78791),
    ],
)
def test_emissivity_of_a_mild_day(name: str, expected: float) -> None:
    found = clear_sky.CLEAR_SKY_EMISSIVITIES[name](TEMPERATURE, VAPOUR)
    assert found == pytest.approx(expected, abs=1e-5)


@pytest.mark.parametrize(
    ("name", "expected"), [("prata", 329.951), ("brutsaert", 327.607), ("swinbank", 337.003)]
)
def test_flux_of_a_mild_day(name: str, expected: float) -> None:
    # Swinbank (1963): 5.31e-13 T^6; the others emissivity times sigma T^4.
    assert clear_sky.clear_sky_flux(name, TEMPERATURE, VAPOUR) == pytest.approx(expected, abs=0.01)


def test_idso_jackson_is_least_at_freezing() -> None:
    # Idso and Jackson (1969): the emissivity is 1 - 0.261 at 273 K and rises on both sides.
    assert clear_sky.idso_jackson(273.0, 1.0) == pytest.approx(0.739, abs=1e-12)
    assert clear_sky.idso_jackson(300.0, 1.0) > 0.739 < clear_sky.idso_jackson(250.0, 1.0)


def test_column_from_the_weather_at_the_ground() -> None:
    # Prata (1996) 46.5 e / T: 1.8500 cm. Gueymard (1994): 1.8673 cm as pvlib computes it, whose own
    # saturation pressure exp(22.330 - 49.140 y - 10.922 y^2 - 0.39015 / y), y = 100 / T, is 23.398 hPa.
    assert clear_sky.prata_column(TEMPERATURE, VAPOUR) / 10.0 == pytest.approx(1.8500, abs=1e-3)
    assert clear_sky.gueymard_column(TEMPERATURE, 11.699) / 10.0 == pytest.approx(1.8673, abs=1e-3)
