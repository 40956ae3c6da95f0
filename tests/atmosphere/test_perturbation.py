"""Scaling and perturbing profiles."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.model_atmospheres import MODEL_ATMOSPHERES, model_atmosphere
from groundglow.atmosphere.perturbation import (
    scaled_to_column,
    scaled_to_surface_temperature,
    temperature_shifted,
    water_scaled,
)
from groundglow.atmosphere.profile import saturation_ppmv
from groundglow.errors import DomainError


def test_water_is_scaled_and_capped_at_saturation() -> None:
    base = model_atmosphere("tropical")
    wet = water_scaled(base, 1.6)
    limit = np.maximum(saturation_ppmv(base.pressure, base.temperature), base.water_vapour)
    np.testing.assert_allclose(wet.water_vapour, np.minimum(1.6 * base.water_vapour, limit))
    assert wet.water_vapour[0] < 1.6 * base.water_vapour[0]
    np.testing.assert_allclose(water_scaled(base, 0.9).water_vapour, 0.9 * base.water_vapour)


@pytest.mark.parametrize("name", MODEL_ATMOSPHERES)
@pytest.mark.parametrize("share", [0.3, 1.0, 1.15])
def test_a_column_is_reached(name: str, share: float) -> None:
    base = model_atmosphere(name)
    wanted = share * base.column_water_vapour
    found = scaled_to_column(base, wanted)
    assert found.column_water_vapour == pytest.approx(wanted, rel=1e-6)
    assert "scaled from" in found.notes[-1]


def test_a_column_that_cold_air_cannot_hold_is_refused() -> None:
    with pytest.raises(DomainError, match="saturated, this air holds"):
        scaled_to_column(model_atmosphere("subarctic_winter"), 40.0)


@pytest.mark.parametrize("column", [0.0, -3.0, 400.0, np.nan])
def test_impossible_columns_are_refused(column: float) -> None:
    with pytest.raises(DomainError, match="1 g cm-2 is 10 kg m-2"):
        scaled_to_column(model_atmosphere("us_standard"), column)


def test_temperature_shift_stays_below_500_hpa_at_constant_mixing_ratio() -> None:
    base = model_atmosphere("us_standard")
    warm = temperature_shifted(base, 1.5)
    low = base.pressure > 500.0
    np.testing.assert_allclose(warm.temperature[low] - base.temperature[low], 1.5)
    np.testing.assert_array_equal(warm.temperature[~low], base.temperature[~low])
    np.testing.assert_array_equal(warm.water_vapour, base.water_vapour)


def test_surface_temperature_is_met_and_the_change_fades() -> None:
    base = model_atmosphere("midlatitude_summer")
    hot = scaled_to_surface_temperature(base, 303.0)
    change = hot.temperature - base.temperature
    assert change[0] == pytest.approx(8.8)
    assert (np.diff(change[:8]) <= 1e-12).all()
    np.testing.assert_array_equal(change[base.pressure < 480.0], 0.0)


def test_colder_air_loses_the_water_it_cannot_hold() -> None:
    cold = scaled_to_surface_temperature(model_atmosphere("tropical"), 285.0)
    limit = saturation_ppmv(cold.pressure, cold.temperature)
    assert (cold.water_vapour[:5] <= limit[:5] * (1.0 + 1e-12)).all()


def test_far_surface_temperatures_are_refused() -> None:
    with pytest.raises(DomainError, match="too far"):
        scaled_to_surface_temperature(model_atmosphere("tropical"), 25.0)


def test_factors_must_be_positive() -> None:
    with pytest.raises(DomainError, match="must be positive"):
        water_scaled(model_atmosphere("tropical"), 0.0)
