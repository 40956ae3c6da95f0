"""Humidity against printed values."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere import humidity
from groundglow.errors import DomainError


def test_saturation_at_20_degrees() -> None:
    # WMO-No. 8, annex 4.B: 6.112 exp(17.62 t / (243.12 + t)); 23.3260 hPa at 20 deg C.
    assert humidity.saturation_vapour_pressure(293.15) == pytest.approx(23.3260, abs=1e-3)


def test_saturation_at_freezing_and_over_ice() -> None:
    # WMO-No. 8, annex 4.B: 6.112 hPa at 0 deg C; over ice at -10 deg C 2.5987 hPa.
    assert humidity.saturation_vapour_pressure(273.15) == pytest.approx(6.112, abs=1e-3)
    assert humidity.saturation_vapour_pressure(263.15, over_ice=True) == pytest.approx(2.5987, abs=1e-3)


def test_saturation_agrees_with_the_exact_table_of_steam() -> None:
    # Smithsonian Meteorological Tables, 6th edition, table 94: 12.272, 42.430 hPa at 10, 30 deg C.
    assert humidity.saturation_vapour_pressure(283.15) == pytest.approx(12.272, rel=2e-3)
    assert humidity.saturation_vapour_pressure(303.15) == pytest.approx(42.430, rel=3e-3)


def test_dew_point_is_the_inverse_of_saturation() -> None:
    temperature = np.linspace(230.0, 320.0, 91)
    vapour = humidity.saturation_vapour_pressure(temperature)
    np.testing.assert_allclose(humidity.dew_point(vapour), temperature, atol=1e-9)


@pytest.mark.parametrize(
    "measure",
    ["dew_point", "relative_humidity", "mixing_ratio", "specific_humidity", "ppmv", "vapour_pressure"],
)
def test_every_measure_goes_there_and_back(measure: str) -> None:
    temperature, pressure, vapour = 293.15, 950.0, 11.7
    forward = {
        "dew_point": humidity.dew_point(vapour),
        "relative_humidity": humidity.relative_humidity(vapour, temperature),
        "mixing_ratio": humidity.mixing_ratio(vapour, pressure),
        "specific_humidity": humidity.specific_humidity(vapour, pressure),
        "ppmv": humidity.ppmv(vapour, pressure),
        "vapour_pressure": vapour,
    }[measure]
    assert humidity.vapour_pressure(measure, forward, temperature, pressure) == pytest.approx(
        vapour, rel=1e-12
    )


def test_amounts_follow_their_definitions() -> None:
    # Common practice: r = 0.622 e / (p - e), q = 0.622 e / (p - 0.378 e); so q = r / (1 + r).
    r, q = humidity.mixing_ratio(20.0, 1000.0), humidity.specific_humidity(20.0, 1000.0)
    assert r == pytest.approx(0.622 * 20.0 / 980.0, rel=1e-12)
    assert q == pytest.approx(r / (1.0 + r), rel=1e-12)


def test_unknown_measure_is_refused() -> None:
    with pytest.raises(DomainError, match="wet_bulb"):
        humidity.vapour_pressure("wet_bulb", 285.0, 290.0, 1000.0)


def test_the_mesosphere_stays_finite() -> None:
    assert np.isfinite(humidity.saturation_vapour_pressure(np.array([150.0, 170.0]))).all()
