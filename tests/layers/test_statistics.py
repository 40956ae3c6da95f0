"""Statistics of the stored full-resolution values, whatever the blocks."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from groundglow.layers.encode import encode_block, format_of
from groundglow.layers.statistics import LayerStatistics, StatisticsCollector, bin_edges
from layers.layer_cases import cut, grid_of, quality, rounded, temperature, write_layer


def statistics_of(pixels: Any, size: int = 1024, name: str = "surface_temperature") -> LayerStatistics:
    grid, layer_format = grid_of(*pixels.shape), format_of(name)
    collector = StatisticsCollector(pixels.size, layer_format.flags)
    for block in grid.blocks(size):
        collector.add(encode_block(cut(pixels, block), block, grid, layer_format).statistics)
    return collector.result()


def test_they_are_of_what_is_stored() -> None:
    pixels = temperature(900, 1300)
    found = statistics_of(pixels)
    stored = rounded(pixels, 15).astype(np.float64)
    numbers = stored[np.isfinite(stored)]
    assert (found.pixels, found.count) == (stored.size, numbers.size)
    assert (found.minimum, found.maximum) == (numbers.min(), numbers.max())
    assert found.mean == pytest.approx(numbers.mean(), rel=1e-13)
    assert found.standard_deviation == pytest.approx(numbers.std(), rel=1e-9)
    assert found.valid_percent == pytest.approx(100 * numbers.size / stored.size)
    assert found.values == ()


def test_block_size_does_not_change_a_bit() -> None:
    pixels = temperature(1600, 1100)
    assert statistics_of(pixels, 512) == statistics_of(pixels, 1024) == statistics_of(pixels, 2048)


@pytest.mark.parametrize("name", ["surface_temperature", "net_longwave_flux", "emissivity"])
def test_quantiles_lie_within_one_bin_of_the_exact_ones(name: str) -> None:
    random = np.random.default_rng(5)
    pixels = {
        "surface_temperature": random.normal(300, 8, (600, 700)),
        "net_longwave_flux": random.normal(-40, 60, (600, 700)),
        "emissivity": random.uniform(0.6, 1, (600, 700)),
    }[name].astype(np.float32)
    found = statistics_of(pixels, name=name)
    for share, value in ((0.05, found.lower), (0.5, found.median), (0.95, found.upper)):
        exact = float(np.quantile(pixels, share))
        assert value == pytest.approx(exact, rel=1 / 2048)


def test_quantiles_never_leave_the_range() -> None:
    found = statistics_of(np.full((30, 30), 300.03, np.float32))
    assert found.minimum == found.lower == found.median == found.upper == found.maximum


@given(st.lists(st.floats(-1e6, 1e6, width=32, allow_subnormal=False), min_size=1, max_size=40))
def test_any_numbers_are_summarised(values: list[float]) -> None:
    pixels = np.array([values], np.float32)
    found = statistics_of(pixels, name="radiance")
    stored = rounded(pixels, 15).astype(np.float64)
    assert (found.minimum, found.maximum) == (stored.min(), stored.max())
    assert found.mean == pytest.approx(stored.mean(), rel=1e-12, abs=1e-9)
    assert found.minimum <= found.lower <= found.median <= found.upper <= found.maximum


def test_every_number_lies_in_its_bin() -> None:
    random = np.random.default_rng(6)
    values = (random.normal(0, 1, 4000) * 10.0 ** random.integers(-20, 20, 4000)).astype(np.float32)
    lower, upper = bin_edges((values.view(np.uint32) >> 12).astype(np.int32))
    assert ((lower <= values) & (values <= upper)).all()
    assert (upper - lower <= np.abs(values) / 2048 * (1 + 1e-6)).all()


def test_nothing_valid_is_said_with_nan() -> None:
    found = statistics_of(np.full((40, 40), np.nan, np.float32))
    assert (found.count, found.valid_percent) == (0, 0.0)
    assert all(
        math.isnan(value) for value in (found.minimum, found.mean, found.median, found.standard_deviation)
    )


def test_flags_are_counted_value_by_value(tmp_path: Path) -> None:
    pixels = quality(700, 900)
    found = write_layer(tmp_path / "quality.tif", pixels).statistics
    values, counts = np.unique(pixels, return_counts=True)
    assert found.values == tuple(zip(values.tolist(), counts.tolist(), strict=True))
    assert found.count == pixels.size
