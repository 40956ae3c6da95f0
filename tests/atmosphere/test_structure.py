"""Vertical structure against the standard atmosphere and printed values."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere import structure


def test_standard_atmosphere_at_5_km() -> None:
    # US Standard Atmosphere 1976, geometric 5 km: 255.676 K, 540.48 hPa.
    assert structure.standard_temperature(5000.0) == pytest.approx(255.6755, abs=1e-3)
    assert structure.standard_pressure(5000.0) == pytest.approx(540.483, abs=0.01)


def test_standard_atmosphere_at_the_tropopause() -> None:
    # US Standard Atmosphere 1976, geopotential 11 km: 216.65 K, 226.32 hPa.
    height = structure.geometric_height(11000.0)
    assert structure.standard_temperature(height) == pytest.approx(216.65, abs=1e-6)
    assert structure.standard_pressure(height) == pytest.approx(226.32, abs=0.01)


def test_standard_atmosphere_above_the_tropopause() -> None:
    # US Standard Atmosphere 1976, geopotential 20 km: 54.748 hPa.
    assert structure.standard_pressure(structure.geometric_height(20000.0)) == pytest.approx(54.748, abs=0.01)


def test_thickness_of_an_isothermal_layer() -> None:
    # Hypsometric equation with R = 287.053: 280 K, 1000 to 850 hPa is 1332.0 m.
    assert structure.thickness(280.0, 1000.0, 850.0) == pytest.approx(1332.0, abs=0.1)


def test_gravity() -> None:
    # Geodetic Reference System 1980 / WGS 84: 9.806198 at 45 deg, 9.7803253 at the equator.
    assert structure.gravity(45.0) == pytest.approx(9.806198, abs=1e-6)
    assert structure.gravity(0.0) == pytest.approx(9.7803253359, abs=1e-10)


def test_heights_and_pressures_undo_each_other() -> None:
    height = np.array([120.0, 500.0, 1500.0, 4000.0, 9000.0])
    temperature = structure.standard_temperature(height)
    ppmv = np.array([12e3, 1e4, 6e3, 2e3, 100.0])
    pressure = structure.hydrostatic_pressure(height, temperature, 1000.0, ppmv)
    back = structure.hydrostatic_height(pressure, temperature, ppmv * pressure / 1e6, 120.0)
    np.testing.assert_allclose(back, height, atol=1e-6)


def test_hydrostatic_heights_agree_with_the_standard_atmosphere() -> None:
    height = np.arange(0.0, 10001.0, 100.0)
    temperature, pressure = structure.standard_temperature(height), structure.standard_pressure(height)
    found = structure.hydrostatic_height(pressure, temperature, np.zeros_like(height), 0.0)
    np.testing.assert_allclose(found, height, atol=0.5)


def test_column_of_uniform_humidity() -> None:
    # (1 / g0) integral of q dp: 0.005 over 500 hPa is 25.493 kg m-2.
    found = structure.column_of_specific_humidity(np.full(6, 0.005), np.linspace(1000.0, 500.0, 6))
    assert found == pytest.approx(25.493, abs=0.01)


def test_column_by_height_agrees_with_column_by_pressure() -> None:
    height = np.arange(0.0, 12001.0, 50.0)
    temperature = structure.standard_temperature(height)
    ppmv = 12e3 * np.exp(-height / 2200.0)
    pressure = structure.hydrostatic_pressure(height, temperature, 1013.25, ppmv)
    by_height = structure.column_water_vapour(height, pressure, temperature, ppmv)
    fraction = ppmv / 1e6
    specific = 0.622 * fraction / (1.0 - 0.378 * fraction)
    by_pressure = structure.column_of_specific_humidity(specific, pressure)
    # Gravity falls by 0.2 % over the moist air's depth, which only the first knows.
    assert by_height[0] == pytest.approx(by_pressure, rel=3e-3)
    assert by_height[-1] == 0.0
    assert (np.diff(by_height) < 0.0).all()


def test_exponential_layers_are_integrated_exactly() -> None:
    height = np.array([0.0, 1000.0, 2500.0])
    found = structure.log_linear_integral(np.exp(-height / 2000.0), height).sum()
    assert found == pytest.approx(2000.0 * (1.0 - np.exp(-1.25)), rel=1e-12)
    assert structure.log_linear_integral(np.array([2.0, 0.0]), np.array([0.0, 10.0]))[0] == 10.0
