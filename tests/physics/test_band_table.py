"""The radiance-to-temperature table against direct numerical integration."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError
from groundglow.physics.band_table import (
    BandTable,
    radiance_table,
    table_from_response,
    table_from_two_constants,
    temperature_of_band_radiance,
)
from groundglow.physics.planck import two_constant_radiance
from responses import RESPONSES

bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)
TABLES = {name: table_from_response(response) for name, response in RESPONSES.items()}
K1, K2 = 774.8853, 1321.0789


@pytest.mark.parametrize("name", sorted(RESPONSES))
def test_within_1_millikelvin_of_direct_integration(name: str) -> None:
    # 11,000 temperatures, not aligned with the table's cells; the radiance is rounded to float32 as pixels
    # are.
    temperature = np.linspace(180.0, 1300.0, 11_003)
    radiance = RESPONSES[name].band_radiance(temperature)
    found = temperature_of_band_radiance(radiance, TABLES[name]).astype(np.float64)
    assert np.abs(found - temperature).max() < 1e-3


def test_the_two_constant_table_within_1_millikelvin_of_the_formula() -> None:
    temperature = np.linspace(180.0, 1300.0, 11_003)
    found = temperature_of_band_radiance(
        two_constant_radiance(temperature, K1, K2), table_from_two_constants(K1, K2)
    )
    assert np.abs(found.astype(np.float64) - temperature).max() < 1e-3


@bounded
@given(st.sampled_from(sorted(TABLES)), st.floats(180.0, 1299.0), st.integers(1, 100_000))
def test_more_radiance_never_maps_colder(name: str, temperature: float, steps: int) -> None:
    lower = np.float32(RESPONSES[name].band_radiance(temperature))
    upper = (np.array([lower]).view(np.int32) + steps).view(np.float32)[0]
    cold, warm = temperature_of_band_radiance(np.array([lower, upper]), TABLES[name])
    assert np.isnan(warm) or warm >= cold


@pytest.mark.parametrize("name", sorted(TABLES))
def test_neighbouring_radiances_never_map_colder_across_cells(name: str) -> None:
    table = TABLES[name]
    # The last float32 before each cell's start and the start itself.
    starts = table.start[1:-1]
    before = (starts.view(np.int32) - 1).view(np.float32)
    assert (temperature_of_band_radiance(starts, table) >= temperature_of_band_radiance(before, table)).all()


@pytest.mark.parametrize("name", sorted(TABLES))
def test_outside_150_to_1500_kelvin_there_is_no_temperature(name: str) -> None:
    response, table = RESPONSES[name], TABLES[name]
    outside = [
        response.band_radiance(149.9),
        response.band_radiance(1500.5),
        0.0,
        -1.0,
        np.inf,
        -np.inf,
        np.nan,
    ]
    assert np.isnan(temperature_of_band_radiance(np.array(outside), table)).all()
    inside = response.band_radiance(np.array([150.1, 1499.0]))
    assert temperature_of_band_radiance(inside, table) == pytest.approx([150.1, 1499.0], abs=0.01)


def test_shape_is_kept_and_numbers_are_float32() -> None:
    radiance = np.full((3, 5), 9.0, dtype=np.float32)
    found = temperature_of_band_radiance(radiance, TABLES["narrow"])
    assert found.shape == (3, 5)
    assert found.dtype == np.float32


def test_the_cells_follow_one_another_without_gaps() -> None:
    table: BandTable = TABLES["narrow"]
    assert (np.diff(table.start.view(np.int32)) == 1 << 15).all()
    assert (table.slope > 0.0).all()


@pytest.mark.parametrize(("k1", "k2"), [(0.0, K2), (K1, -1.0), (np.nan, K2), (K1, np.inf)])
def test_constants_that_are_none_are_refused(k1: float, k2: float) -> None:
    with pytest.raises(DomainError, match="positive numbers"):
        table_from_two_constants(k1, k2)


@pytest.mark.parametrize("name", sorted(RESPONSES))
def test_the_way_there_is_good_to_half_a_millikelvin(name: str) -> None:
    # From kelvin to radiance against direct integration, halfway between the table's steps of 0.1 K.
    response, there = RESPONSES[name], radiance_table(RESPONSES[name].band_radiance)
    temperature = np.arange(180.05, 1300.0, 7.3)
    error = there(temperature) - response.band_radiance(temperature)
    # A float32 holds seven digits: at 1,300 K that alone is 0.1 mK.
    assert np.abs(error / response.band_radiance_slope(temperature)).max() < 5e-4


@pytest.mark.parametrize("name", sorted(RESPONSES))
def test_there_and_back_returns_home_within_a_millikelvin(name: str) -> None:
    temperature = np.linspace(181.0, 1299.0, 2003)
    there = radiance_table(RESPONSES[name].band_radiance)(temperature)
    back = temperature_of_band_radiance(there, TABLES[name]).astype(np.float64)
    assert np.abs(back - temperature).max() < 1e-3


def test_the_way_there_has_no_value_outside_its_range() -> None:
    there = radiance_table(RESPONSES["narrow"].band_radiance)
    found = there(np.array([[np.nan, 149.9, 150.0], [300.0, 1500.0, 1500.1]]))
    assert found.dtype == np.float32
    assert np.isnan(found).tolist() == [[True, True, False], [False, False, True]]


def test_a_finely_sampled_response_is_integrated_at_few_temperatures() -> None:
    # A scheduled run makes these tables anew each time: integrating at each of thousands of cells took a
    # second.
    calls = []

    def counted(temperature: ArrayLike) -> NDArray[np.float64]:
        calls.append(np.size(temperature))
        return RESPONSES["gaussian"].band_radiance(temperature)

    radiance_table(counted)
    assert sum(calls) < 100
